//! Gas mixtures without water, in scripts.

use rhai::plugin::*;
use rhai::{Array, Dynamic, Map};

use super::named::named;
use super::show::Style;
use super::{Fail, ScriptResult, Vocabulary};
use crate::equilibrium::GasState;
use crate::ledger::Ledger;
use crate::present::Table;
use crate::quantity::Quantity;
use crate::solve::Settings;
use crate::text::list;
use crate::water::GasMixture;
use crate::water::gas_mixture::Kept;

/// Registers the types.
pub(super) fn register(vocabulary: &mut Vocabulary) {
    vocabulary
        .module(rhai::exported_module!(gas_functions))
        .pure(&["gas", "equilibrate", "get", "species", "warnings"])
        .native::<GasMixture>("GasMixture", show_mixture)
        .native::<GasState>("GasState", show_state);
}

fn show_mixture(mixture: &GasMixture, _: &Style) -> String {
    let gases: Vec<&str> = mixture.contents.iter().map(|(gas, _)| gas.key()).collect();
    let kept = match &mixture.kept {
        Kept::Volume(litres) => format!("{litres}"),
        Kept::Pressure(bar) => format!("{bar}"),
    };
    format!(
        "gas of {} at {} degC and {kept}",
        list(&gases),
        super::numbers::general(mixture.temperature.celsius(), 6)
    )
}

fn show_state(state: &GasState, _: &Style) -> String {
    let read =
        |asked: &str| state.get(asked).map_or_else(|_| "?".into(), |q| super::numbers::general(q.value(), 4));
    format!(
        "gas at {} degC: {} bar, {} L, {} mol",
        read("temperature"),
        read("pressure"),
        read("volume(gas)"),
        read("n(gas)")
    )
}

/// Gas mixtures.
#[export_module]
mod gas_functions {
    use super::*;

    /// An ideal gas mixture without water: `temperature`, `volume` or `pressure`, which stays as it is, and what is filled in,
    /// under `n` (mol), `p` (bar, in the volume) or `x` (mole fractions, with `pressure` and `volume` at the start);
    /// `inert` lists gases that react with nothing.
    ///
    /// ```rhai
    /// let book = ledger().with_reaction("N2O4", reaction("N2O4(g) <=> 2 NO2(g)", #{ log_k: -0.83, source: "an example" }));
    /// let flask = gas(#{ volume: "1 L", n: #{ "N2O4(g)": "0.05 mol" } }).equilibrate(book);
    /// fmt(flask.get("n(NO2(g))").value, ".4f")   // "0.0158"
    /// ```
    #[rhai_fn(name = "gas", return_raw)]
    pub fn gas(keys: Map) -> ScriptResult<GasMixture> {
        Ok(GasMixture::read(named(&keys)?).map_err(Fail::from)?)
    }
    /// The equilibrium of a gas mixture by the ledger's reactions between gases; nothing condenses.
    #[rhai_fn(name = "equilibrate", return_raw)]
    pub fn equilibrate_gas(mixture: GasMixture, ledger: Ledger) -> ScriptResult<GasState> {
        Ok(GasState::of(&mixture, &ledger, &Settings::default()).map_err(Fail::from)?)
    }
    /// An observable of a gas: `p(NO2(g))`, `x(NO2(g))`, `n(NO2(g))`, `n(gas)`, `volume(gas)`, `pressure`, `temperature`.
    #[rhai_fn(name = "get", pure, return_raw)]
    pub fn get_of_gas(state: &mut GasState, observable: &str) -> ScriptResult<Quantity> {
        Ok(state.get(observable).map_err(Fail::from)?)
    }
    /// Every gas with its amount, mole fraction and partial pressure.
    #[rhai_fn(name = "species", get = "species", pure)]
    pub fn gas_species(state: &mut GasState) -> Table {
        state.species()
    }
    /// Constants used at another temperature than theirs, as texts.
    #[rhai_fn(name = "warnings", get = "warnings", pure)]
    pub fn gas_warnings(state: &mut GasState) -> Array {
        state.warnings().into_iter().map(Dynamic::from).collect()
    }
}
