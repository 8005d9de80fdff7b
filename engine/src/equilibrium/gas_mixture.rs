//! Gas mixtures without water: the reactions of a ledger between gases alone.
//!
//! The same programme as for a water, without one: at given volume the gases are rows with amounts, `n = (V/RT) p`, at given
//! pressure the members of one ideal mixture. Nothing condenses.

use std::collections::BTreeSet;
use std::sync::{Arc, OnceLock};

use super::analysis::Outcome;
use super::assemble::{Doubt, System};
use super::beside::{ActsOn, Beside, Host, HostKind, Member, Place, Stated, change};
use super::dosing::Dosed;
use super::error::EquilibriumError;
use super::gas_phase::moles_per_litre_bar;
use super::observable::{Asked, Observable, ObservableError};
use super::state::no_answer;
use super::uncertainty::{Conditions, Influence, Slopes, Stage, Variable};
use crate::chem::Species;
use crate::ledger::Ledger;
use crate::present::{Column, Table};
use crate::quantity::Quantity;
use crate::solve::{Certificate, Settings, solve};
use crate::text::list;
use crate::units::Unit;
use crate::water::gas_mixture::{GasMixture, Kept};

/// A gas mixture at equilibrium; cheap to clone.
#[derive(Debug, Clone)]
pub struct GasState(Arc<Inner>);

#[derive(Debug)]
struct Inner {
    kept: Kept,
    outcome: Outcome,
    stage: OnceLock<Option<Stage>>,
}

impl GasState {
    /// The equilibrium of a gas mixture by the reactions of a ledger that are between gases.
    ///
    /// # Errors
    ///
    /// A gas that is in none of these reactions and not said to be inert; constants that contradict each other.
    pub fn of(mixture: &GasMixture, book: &Ledger, settings: &Settings) -> Result<Self, EquilibriumError> {
        let ledger = between_gases(mixture, book)?;
        let formations = ledger.formations();
        let formed = |species: &Species| formations.formation(species).expect("checked before");
        let present: BTreeSet<usize> = mixture
            .contents
            .iter()
            .flat_map(|(gas, _)| formed(gas).stoichiometry.iter().map(|(j, _)| *j))
            .collect();
        let system = System::new(&ledger, &present, mixture.temperature, crate::units::Pressure::ATMOSPHERE)?;
        let host = host(mixture, &system);
        let beside = Beside { hosts: vec![host] };
        let mut totals = vec![0.0; system.n_components()];
        let mut measured = Vec::new();
        for (gas, moles) in &mixture.contents {
            let change = change(&system, &formed(gas).stoichiometry);
            totals.iter_mut().zip(&change).for_each(|(total, change)| *total += change * moles.value());
            measured.push((moles.clone(), change));
        }
        let problem = beside.extend(system.problem(&totals));
        let converged = solve(&problem, system.model(), settings, None)
            .map_err(|error| EquilibriumError::named(error, &system, &[], &[]))?;
        let temperature = Some(mixture.kelvin.clone());
        let conditions =
            Conditions { beside: beside.clone(), measured, temperature, ..Conditions::default() };
        let outcome = Outcome {
            system,
            converged,
            totals,
            exchanged: vec![],
            solids: vec![],
            dosed: Dosed::default(),
            beside,
            conditions: Some(conditions),
        };
        Ok(Self(Arc::new(Inner { kept: mixture.kept.clone(), outcome, stage: OnceLock::new() })))
    }

    /// What was checked of the answer.
    #[must_use]
    pub fn certificate(&self) -> &Certificate {
        &self.0.outcome.converged.certificate
    }

    /// Answers `p(NO2(g))`, `f(NO2(g))`, `x(NO2(g))`, `n(NO2(g))`, `n(gas)`, `volume(gas)`, `pressure`, `temperature`.
    ///
    /// # Errors
    ///
    /// Returns what is unknown.
    pub fn get(&self, asked: &str) -> Result<Quantity, ObservableError> {
        let asked = Asked::parse(asked)?;
        let name = asked.observable.to_string();
        let (value, unit, slopes, partials) = self.value(&asked.observable, &name)?;
        let fault = |why: String| no_answer(&name, why);
        let unit = Unit::known(unit);
        let Some(stage) = self.0.stage.get_or_init(|| Stage::new(&self.0.outcome)) else {
            return Quantity::measured(value, unit, None, "this gas")
                .map_err(|error| fault(error.to_string()));
        };
        let influence = Influence::of(&slopes, &[(&self.0.outcome, stage)]);
        let mut all = influence.partials(&self.0.outcome.system);
        all.extend(partials);
        let all: Vec<(&Quantity, f64)> = all.iter().map(|(quantity, slope)| (quantity, *slope)).collect();
        let found = Quantity::from_partials(value, unit, &all).map_err(|error| fault(error.to_string()))?;
        match &asked.unit {
            None => Ok(found),
            Some(unit) => found.to(unit).map_err(|error| fault(error.to_string())),
        }
    }

    /// Every gas with its amount, mole fraction and partial pressure, the most abundant first.
    #[must_use]
    pub fn species(&self) -> Table {
        let host = self.host();
        let amounts: Vec<f64> =
            host.ln_amounts(&self.0.outcome.converged).into_iter().map(f64::exp).collect();
        let whole: f64 = amounts.iter().sum();
        let pressure = self.pressure().0;
        let mut order: Vec<usize> = (0..amounts.len()).collect();
        order.sort_by(|a, b| amounts[*b].total_cmp(&amounts[*a]));
        Table::new([
            Column::chemistry("gas", order.iter().map(|k| host.members[*k].species.key())),
            Column::numbers("amount [mol]", order.iter().map(|k| amounts[*k])),
            Column::numbers("mole fraction", order.iter().map(|k| amounts[*k] / whole)),
            Column::numbers("pressure [bar]", order.iter().map(|k| amounts[*k] / whole * pressure)),
        ])
        .expect("columns of one length")
    }

    /// Constants used at another temperature than theirs.
    #[must_use]
    pub fn warnings(&self) -> Vec<String> {
        let system = &self.0.outcome.system;
        let mut warnings = Vec::new();
        for (formed, _) in system.phases() {
            for (reaction, doubt) in system.doubts(formed) {
                let words = match doubt {
                    Doubt::OneTemperature(known) => {
                        format!(
                            "log K of `{reaction}` is known at {} degC only, and used as it stands",
                            known.celsius()
                        )
                    }
                    Doubt::OutsideRange(by) => {
                        format!("log K of `{reaction}` is used {by:.1} K outside its stated range")
                    }
                };
                if !warnings.contains(&words) {
                    warnings.push(words);
                }
            }
        }
        warnings
    }

    fn host(&self) -> &Host {
        &self.0.outcome.beside.hosts[0]
    }

    /// `Σ weight · n`, mol.
    fn sum(&self, weight: impl Fn(usize) -> f64) -> (f64, Slopes) {
        let host = self.host();
        let amounts = host.ln_amounts(&self.0.outcome.converged).into_iter().enumerate();
        let slopes: Slopes = amounts
            .map(|(k, ln_n)| (host.variable(k), weight(k) * ln_n.exp()))
            .filter(|(_, term)| *term != 0.0)
            .collect();
        (slopes.iter().map(|(_, term)| term).sum(), slopes)
    }

    /// Total pressure in bar with its derivatives.
    fn pressure(&self) -> (f64, Slopes, Vec<(Quantity, f64)>) {
        let at = self.0.outcome.system.temperature();
        match &self.0.kept {
            Kept::Pressure(bar) => (bar.value(), vec![], vec![(bar.clone(), 1.0)]),
            Kept::Volume(litres) => {
                let per_mole = 1.0 / (moles_per_litre_bar(at) * litres.value());
                let (value, mut slopes) = self.sum(|_| per_mole);
                slopes.push((Variable::Temperature, value / at.kelvin()));
                (value, slopes, vec![(litres.clone(), -value / litres.value())])
            }
        }
    }

    fn volume(&self) -> (f64, Slopes, Vec<(Quantity, f64)>) {
        let at = self.0.outcome.system.temperature();
        match &self.0.kept {
            Kept::Volume(litres) => (litres.value(), vec![], vec![(litres.clone(), 1.0)]),
            Kept::Pressure(bar) => {
                let per_mole = 1.0 / (moles_per_litre_bar(at) * bar.value());
                let (value, mut slopes) = self.sum(|_| per_mole);
                slopes.push((Variable::Temperature, value / at.kelvin()));
                (value, slopes, vec![(bar.clone(), -value / bar.value())])
            }
        }
    }

    #[allow(clippy::type_complexity, reason = "value, unit, and both kinds of derivative")]
    fn value(
        &self,
        observable: &Observable,
        asked: &str,
    ) -> Result<(f64, &'static str, Slopes, Vec<(Quantity, f64)>), ObservableError> {
        match observable {
            Observable::Temperature => {
                let celsius = self.0.outcome.system.temperature().celsius();
                Ok((celsius, "degC", vec![(Variable::Temperature, 1.0)], vec![]))
            }
            Observable::Pressure => {
                let (value, slopes, partials) = self.pressure();
                Ok((value, "bar", slopes, partials))
            }
            Observable::GasVolume(name) if name == "gas" => {
                let (value, slopes, partials) = self.volume();
                Ok((value, "L", slopes, partials))
            }
            Observable::Amount(name) if name == "gas" => {
                let (value, slopes) = self.sum(|_| 1.0);
                Ok((value, "mol", slopes, vec![]))
            }
            Observable::Amount(name) => {
                let own = self.member(name, asked)?;
                let (value, slopes) = self.sum(|k| f64::from(u8::from(k == own)));
                Ok((value, "mol", slopes, vec![]))
            }
            Observable::MoleFraction(name) => {
                let (value, slopes) = self.fraction(self.member(name, asked)?);
                Ok((value, "1", slopes, vec![]))
            }
            Observable::PartialPressure(name) | Observable::Fugacity(name) => {
                let (x, by_x) = self.fraction(self.member(name, asked)?);
                let (p, by_p, partials) = self.pressure();
                let times = |slopes: Slopes, factor: f64| slopes.into_iter().map(move |(v, s)| (v, s * factor));
                let slopes = times(by_x, p).chain(times(by_p, x)).collect();
                let partials = partials.into_iter().map(|(quantity, slope)| (quantity, slope * x)).collect();
                Ok((x * p, "bar", slopes, partials))
            }
            _ => Err(no_answer(
                asked,
                "a gas mixture answers p, f, x and n of its gases, n(gas), volume(gas), pressure and temperature".into(),
            )),
        }
    }

    fn fraction(&self, member: usize) -> (f64, Slopes) {
        let (whole, terms) = self.sum(|_| 1.0);
        let own = self.host().variable(member);
        let x = terms.iter().find(|(variable, _)| *variable == own).map_or(0.0, |(_, n)| n / whole);
        let mut slopes: Slopes = terms.into_iter().map(|(variable, n)| (variable, -x * n / whole)).collect();
        slopes.push((own, x));
        (x, slopes)
    }

    fn member(&self, name: &str, asked: &str) -> Result<usize, ObservableError> {
        let host = self.host();
        let found = Species::parse(name).ok().and_then(|species| host.member(&species));
        found.ok_or_else(|| {
            let gases: Vec<&str> = host.members.iter().map(|member| member.species.key()).collect();
            no_answer(asked, format!("no such gas is in the mixture; there are {}", list(&gases)))
        })
    }
}

/// The reactions of a ledger in which only gases take part, with the gases that react with nothing.
fn between_gases(mixture: &GasMixture, book: &Ledger) -> Result<Ledger, EquilibriumError> {
    let mut ledger = Ledger::empty(book.name(), None);
    for (name, reaction) in book.reactions() {
        if reaction.equation().terms().iter().all(|(species, _)| species.is_gas()) {
            ledger = ledger.with_reaction(name, reaction)?;
        }
    }
    for gas in &mixture.inert {
        if ledger.species().any(|species| species == gas) {
            let why = "it takes part in reactions of the ledger, so it is not inert".to_string();
            return Err(EquilibriumError::Analyte { key: gas.to_string(), why });
        }
        ledger = ledger.with_solute(gas.clone());
    }
    for (gas, _) in &mixture.contents {
        if !ledger.species().any(|species| species == gas) {
            let known: Vec<&str> = ledger.species().filter(|s| s.is_gas()).map(Species::key).collect();
            let help = match crate::nearest::nearest(gas.key(), known.iter().copied()) {
                Some(near) => format!("did you mean `{near}`?"),
                None => format!("if it reacts with nothing, list it: `inert: [\"{gas}\"]`"),
            };
            let why = format!("no reaction of the ledger between gases has it; {help}");
            return Err(EquilibriumError::Analyte { key: gas.to_string(), why });
        }
    }
    Ok(ledger)
}

fn host(mixture: &GasMixture, system: &System) -> Host {
    let (kind, place, shift, stated) = match &mixture.kept {
        Kept::Volume(litres) => {
            let shift = (litres.value() * moles_per_litre_bar(system.temperature())).ln();
            (HostKind::GasOfVolume(litres.value()), Place::Rows(0), shift, litres)
        }
        Kept::Pressure(bar) => {
            (HostKind::GasOfPressure { dry: bar.value(), vapour_slope: 0.0 }, Place::Mixture(0), 0.0, bar)
        }
    };
    let members: Vec<Member> = system
        .phases()
        .filter(|(formed, _)| formed.species.is_gas())
        .map(|(formed, row)| {
            let mut row = row.clone();
            row.ln_k += shift;
            Member { species: formed.species.clone(), row }
        })
        .collect();
    let acts_on = match place {
        Place::Rows(_) => ActsOn::Rows(0..members.len()),
        Place::Mixture(_) => ActsOn::Target,
    };
    let by = 1.0 / stated.value();
    let stated = vec![Stated { quantity: stated.clone(), acts_on, by }];
    Host { name: "gas".into(), kind, members, place, stated }
}

#[cfg(test)]
mod tests {
    use std::collections::BTreeMap;

    use super::*;
    use crate::chem::Reaction;
    use crate::named::{Named, Value};
    use crate::physics::constants::GAS_CONSTANT;

    fn named(entries: &[(&str, Value)]) -> Named {
        Named::new(entries.iter().map(|(key, value)| ((*key).to_string(), value.clone())).collect())
    }

    fn text(text: &str) -> Value {
        Value::Text(text.into())
    }

    fn gases(entries: &[(&str, &str)]) -> Value {
        let entry = |(gas, amount): &(&str, &str)| ((*gas).to_string(), text(amount));
        Value::Map(entries.iter().map(entry).collect::<BTreeMap<_, _>>())
    }

    fn book(equation: &str, options: &[(&str, Value)]) -> Ledger {
        let mut options = options.to_vec();
        options.push(("source", text("of a test")));
        let reaction = Reaction::read(equation, Some("own"), named(&options), Some(equation)).unwrap();
        Ledger::empty("gases", None).with_reaction("own", &reaction).unwrap()
    }

    fn solved(mixture: &[(&str, Value)], book: &Ledger) -> GasState {
        let mixture = GasMixture::read(named(mixture)).unwrap_or_else(|error| panic!("{error}"));
        GasState::of(&mixture, book, &Settings::default()).unwrap_or_else(|error| panic!("{error}"))
    }

    fn get(state: &GasState, asked: &str) -> f64 {
        state.get(asked).unwrap_or_else(|error| panic!("{error}")).value()
    }

    #[track_caller]
    fn close(a: f64, b: f64, tolerance: f64) {
        assert!((a - b).abs() <= tolerance * b.abs(), "{a} is not {b}");
    }

    const DISSOCIATION: &str = "N2O4(g) <=> 2 NO2(g)";
    /// At 25 degC, from the Gibbs energies of formation 97.89 and 51.31 kJ/mol of the tables (Atkins; recalled).
    const K: f64 = 0.148;

    fn dissociation() -> Ledger {
        book(DISSOCIATION, &[("k", text("0.148 +/- 0.004"))])
    }

    #[test]
    fn nitrogen_dioxide_at_a_volume_is_as_by_hand() {
        let n = ("n", gases(&[("N2O4(g)", "0.05 +/- 0.001 mol")]));
        let state = solved(&[("volume", text("1 L")), n], &dissociation());
        // 4 α² n RT/V = K (1 - α)
        let q = 4.0 * 0.05 * GAS_CONSTANT * 298.15 / 100.0;
        let alpha = (-K + (K * K + 4.0 * q * K).sqrt()) / (2.0 * q);
        close(get(&state, "n(NO2(g))"), 0.1 * alpha, 1e-12);
        close(get(&state, "n(gas)"), 0.05 * (1.0 + alpha), 1e-12);
        close(get(&state, "p(NO2(g))").powi(2) / get(&state, "p(N2O4(g))"), K, 1e-12);
        close(get(&state, "pressure"), 0.05 * (1.0 + alpha) * GAS_CONSTANT * 298.15 / 100.0, 1e-12);
        // From the quadratic: dα/dK = (1 - α)/(2 q α + K), dα/dn = -(q/n) α²/(2 q α + K).
        let found = state.get("n(NO2(g))").unwrap();
        let by_k = 0.1 * (1.0 - alpha) / (2.0 * q * alpha + K) * 0.004;
        let by_n = 2.0 * alpha - 2.0 * q * alpha * alpha / (2.0 * q * alpha + K);
        close(found.sigma().unwrap(), by_k.hypot(by_n * 0.001), 1e-9);
        assert!(state.certificate().meets(&Settings::default()));
    }

    #[test]
    fn nitrogen_dioxide_at_a_pressure_is_as_by_hand() {
        let n = ("n", gases(&[("N2O4(g)", "0.05 mol")]));
        let state = solved(&[("pressure", text("2 +/- 0.02 bar")), n], &dissociation());
        // α = sqrt(K / (K + 4 P))
        let alpha = (K / (K + 8.0)).sqrt();
        close(get(&state, "x(NO2(g))"), 2.0 * alpha / (1.0 + alpha), 1e-12);
        close(get(&state, "p(N2O4(g))"), 2.0 * (1.0 - alpha) / (1.0 + alpha), 1e-12);
        close(get(&state, "volume(gas)"), 0.05 * (1.0 + alpha) * GAS_CONSTANT * 298.15 / 200.0, 1e-12);
        let by_pressure = |asked: &str, bar: f64| {
            let at = |bar: f64| {
                let n = ("n", gases(&[("N2O4(g)", "0.05 mol")]));
                get(&solved(&[("pressure", Value::Number(bar)), n], &dissociation()), asked)
            };
            (at(bar + 1e-4) - at(bar - 1e-4)) / 2e-4
        };
        for asked in ["x(NO2(g))", "volume(gas)", "p(NO2(g))"] {
            let found = state.get(asked).unwrap();
            let part = found.parts().iter().find(|part| part.input.label() == "pressure").unwrap();
            close(part.sensitivity, by_pressure(asked, 2.0), 1e-6);
        }
    }

    #[test]
    fn a_constant_of_another_standard_pressure_is_the_same_gas() {
        let of_atm = book(DISSOCIATION, &[("k", text("0.148")), ("gas_standard", text("1 atm"))]);
        let n = ("n", gases(&[("N2O4(g)", "0.05 mol")]));
        let state = solved(&[("volume", text("1 L")), n], &of_atm);
        close(get(&state, "p(NO2(g))").powi(2) / get(&state, "p(N2O4(g))"), 0.148 * 1.01325, 1e-12);
    }

    #[test]
    fn a_constant_of_concentrations_is_the_same_gas() {
        // [NO2]^2/[N2O4] in mol/L of the same K.
        let concentrations = K * 100.0 / (GAS_CONSTANT * 298.15);
        let options = [
            ("k", Value::Number(concentrations)),
            ("basis", text("concentration")),
            ("source", text("of a test")),
        ];
        let reaction = Reaction::read(DISSOCIATION, Some("own"), named(&options), None).unwrap();
        let reaction = reaction.to_kp(named(&[])).unwrap();
        let book = Ledger::empty("gases", None).with_reaction("own", &reaction).unwrap();
        let n = ("n", gases(&[("N2O4(g)", "0.05 mol")]));
        let state = solved(&[("volume", text("1 L")), n], &book);
        close(get(&state, "p(NO2(g))").powi(2) / get(&state, "p(N2O4(g))"), K, 1e-9);
    }

    #[test]
    fn hydrogen_iodide_and_an_inert_gas() {
        // K has no unit: the extent does not depend on the volume nor on argon. Two equal parts: 2ξ/(n - ξ) = √K.
        let iodide = book("H2(g) + I2(g) <=> 2 HI(g)", &[("k", text("54"))]);
        let contents = [("H2(g)", "0.1 mol"), ("I2(g)", "0.1 mol"), ("Ar(g)", "1 mol")];
        let inert = ("inert", Value::List(vec![text("Ar(g)")]));
        let kept = [("pressure", text("1 bar")), ("volume", text("3 L"))];
        for kept in kept {
            let mixture = [kept, ("n", gases(&contents)), inert.clone(), ("temperature", text("25 degC"))];
            let state = solved(&mixture, &iodide);
            let root = 54_f64.sqrt();
            close(get(&state, "n(HI(g))"), 0.2 * root / (2.0 + root), 1e-12);
            close(get(&state, "n(Ar(g))"), 1.0, 1e-12);
        }
    }

    #[test]
    fn bad_mixtures_say_what_would_be_right() {
        let fault = |mixture: &[(&str, Value)]| GasMixture::read(named(mixture)).unwrap_err().message;
        let n = || gases(&[("N2O4(g)", "0.05 mol")]);
        assert!(fault(&[("n", n())]).contains("`volume` or `pressure`"));
        assert!(fault(&[("volume", text("0 L")), ("n", n())]).contains("above zero"));
        let ppm = gases(&[("N2O4(g)", "420 ppm")]);
        assert!(fault(&[("volume", text("1 L")), ("n", ppm)]).contains("`\"420 uatm\"`"));
        let odd = gases(&[("N2O4(aq)", "1 mol")]);
        assert!(fault(&[("volume", text("1 L")), ("n", odd)]).contains("is no gas"));
        let mixture =
            GasMixture::read(named(&[("volume", text("1 L")), ("n", gases(&[("N2O5(g)", "1 mol")]))]));
        let error = GasState::of(&mixture.unwrap(), &dissociation(), &Settings::default()).unwrap_err();
        assert!(error.to_string().contains("`N2O4(g)`"), "{error}");
    }
}
