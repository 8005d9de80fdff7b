//! What is put beside a water, in scripts: gas phases, solid solutions, exchangers, surfaces.

use rhai::plugin::*;
use rhai::{Array, Dynamic, Map};

use super::named::{named, one_or_many, value};
use super::sample::{known, treated};
use super::{Fail, ScriptResult, Vocabulary};
use crate::water::neighbour::{Exchanger, GasPhase, Surface};
use crate::water::{Neighbour, Sample, Treatment};

/// Registers the functions.
pub(super) fn register(vocabulary: &mut Vocabulary) {
    vocabulary.module(rhai::exported_module!(neighbour_functions)).pure(&[
        "headspace",
        "bubble",
        "solid_solution",
        "exchanger",
        "surface",
    ]);
}

fn beside(sample: &Sample, neighbour: Neighbour) -> ScriptResult<Sample> {
    treated(sample, Treatment::Beside(Box::new(neighbour)))
}

fn with_gas(sample: &Sample, gas: GasPhase) -> ScriptResult<Sample> {
    for (name, _) in &gas.pressures {
        known(sample, name)?;
    }
    beside(sample, Neighbour::Gas(gas))
}

/// What is beside a water.
#[export_module]
mod neighbour_functions {
    use super::*;

    /// A closed gas phase of given volume over the water: `volume`, and `p`, the partial pressures at the start by gas (bar,
    /// or text with a unit). Only gases named go into it, at a pressure of zero too. Then `p(headspace)`, `n(CO2(g))`,
    /// `x(CO2(g))`.
    ///
    /// ```rhai
    /// let bottle = sample(#{ water: 0.95, pH: 8, alkalinity: "2 meq/kg" })
    ///     .headspace(#{ volume: "50 mL", p: #{ "CO2(g)": "0.05 bar" } }).equilibrate();
    /// bottle.get("p(CO2(g))").value < 0.05   // true
    /// ```
    #[rhai_fn(pure, return_raw)]
    pub fn headspace(sample: &mut Sample, options: Map) -> ScriptResult<Sample> {
        with_gas(sample, GasPhase::headspace(named(&options)?).map_err(Fail::from)?)
    }
    /// A gas phase of given pressure that grows and shrinks and may vanish: `pressure`, `x`, the mole fractions of the dry
    /// gas at the start, and `volume`, that at the start. The gas is saturated with water vapour, whose pressure is part
    /// of `pressure`. Then `volume(bubble)`, `n(bubble)`, `x(CO2(g))`.
    ///
    /// ```rhai
    /// let water = sample(#{ pH: 9, alkalinity: "2 meq/kg" });
    /// let state = water.bubble(#{ pressure: "1 atm", x: #{ "CO2(g)": 1.0 }, volume: "10 mL" }).equilibrate();
    /// state.get("volume(bubble)").value   // 0
    /// ```
    #[rhai_fn(pure, return_raw)]
    pub fn bubble(sample: &mut Sample, options: Map) -> ScriptResult<Sample> {
        with_gas(sample, GasPhase::bubble(named(&options)?).map_err(Fail::from)?)
    }
    /// An ideal solid solution of minerals that may form: `n(Mg-calcite)`, `x(magnesite)`. Its members are those minerals as
    /// the ledger has them; miscibility gaps are not considered.
    ///
    /// ```rhai
    /// let water = sample(#{ pH: 8.5, alkalinity: "4 meq/kg", Ca: "2 mmol/kg", Mg: "2 mmol/kg" });
    /// let state = water.solid_solution("Mg-calcite", ["calcite", "magnesite"]).equilibrate();
    /// state.get("x(calcite)").value > 0.5   // true
    /// ```
    #[rhai_fn(pure, return_raw)]
    pub fn solid_solution(sample: &mut Sample, name: &str, members: Array) -> ScriptResult<Sample> {
        let members = one_or_many(&Dynamic::from_array(members)).map_err(|fault| fault.argument(1))?;
        for member in &members {
            known(sample, member).map_err(|fault| fault.argument(1))?;
        }
        let solution = Neighbour::solid_solution(name, members);
        beside(sample, solution.map_err(|message| super::super::faults::advised(&message).argument(1))?)
    }
    /// An ion exchanger whose reactions the ledger has, such as `2 NaX(clay) + Ca^2+ <=> CaX2(clay) + 2 Na^+`: its sites (eq
    /// per kg of water), or a map of `capacity`, `convention` (`"Gaines-Thomas"`, the default, `"Vanselow"`, `"Gapon"`)
    /// and `form`, the ion it comes with. Without `form` it starts in equilibrium with the water as analysed.
    /// Then `E(CaX2(clay))`, `n(CaX2(clay))`, `x(CaX2(clay))`.
    ///
    /// ```rhai
    /// let book = ledger("freshwater")
    ///     .with_reaction("Ca on clay", reaction("2 NaX(clay) + Ca^2+ <=> CaX2(clay) + 2 Na^+", #{ log_k: 0.8, source: "an example" }));
    /// let water = sample(#{ pH: 7, Na: "10 mmol/kg", Ca: "1 mmol/kg", Cl: "12 mmol/kg" }).with_ledger(book);
    /// let soft = water.exchanger("clay", #{ capacity: "5 meq/kg", form: "Na^+" }).equilibrate();
    /// soft.total("Ca").value < 1e-3   // true
    /// ```
    #[rhai_fn(pure, return_raw)]
    pub fn exchanger(sample: &mut Sample, name: &str, capacity: Dynamic) -> ScriptResult<Sample> {
        let read = Exchanger::read(name, value(&capacity).map_err(|fault| fault.argument(1))?);
        beside(
            sample,
            Neighbour::Exchanger(read.map_err(|fault| {
                let key = fault.key.clone();
                match capacity.is_map() {
                    true => Fail::from(fault).key(key),
                    false => super::super::fail(fault.message).argument(1),
                }
            })?),
        )
    }
    /// A charged surface whose site reactions the ledger has, such as `XOH(ferric oxide) + H^+ <=> XOH2^+(ferric oxide)`:
    /// `sites` (moles, or moles per gram, or a map of these by kind of site), `area` (per mass), `mass`, `model`
    /// (`"diffuse layer"` or `"constant capacitance"` with `capacitance`). Then `potential(ferric oxide)`,
    /// `surface_charge(ferric oxide)`, `n(XOH2^+(ferric oxide))`.
    ///
    /// ```rhai
    /// let group = |equation, log_k| reaction(equation, #{ log_k: log_k, source: "an example" });
    /// let book = ledger("freshwater")
    ///     .with_reaction("site 1", group.call("XOH(oxide) + H^+ <=> XOH2^+(oxide)", 7.29))
    ///     .with_reaction("site 2", group.call("XOH(oxide) <=> XO^-(oxide) + H^+", -8.93));
    /// let water = sample(#{ pH: 5, Na: "0.1 mol/kg", Cl: "0.1 mol/kg" }).with_ledger(book).hold("pH", 5, "HCl");
    /// let state = water.surface("oxide", #{ sites: "2.25 mmol/g", area: "600 m2/g", mass: "0.1 g" }).equilibrate();
    /// state.get("potential(oxide)").value > 0   // true
    /// ```
    #[rhai_fn(pure, return_raw)]
    pub fn surface(sample: &mut Sample, name: &str, options: Map) -> ScriptResult<Sample> {
        beside(sample, Neighbour::Surface(Surface::read(name, named(&options)?).map_err(Fail::from)?))
    }
}
