//! The second stage: treatments act on the conserved totals.
//!
//! What moves the totals themselves acts first, in the order given (see [`super::dosing`]); surroundings act last and
//! together. Gases at a fixed fugacity and unlimited solids are reservoirs, solids that may form are minerals, and one convex
//! problem at the final temperature holds them all, with the couples in equilibrium. A pH or pe held by a reagent is one
//! equation outside it: so much of the reagent that it is met.

use std::collections::BTreeMap;

use super::acid_base::{ALKALINITY_PH, ZeroLevel};
use super::analysis::{Analysed, Outcome, Solid, delivered, fixed_ph};
use super::assemble::{System, carriers};
use super::beside::Beside;
use super::dosing::{Course, Dosed};
use super::error::EquilibriumError;
use super::redox::{self, fixed_pe};
use super::uncertainty::{Conditions, Held, MayForm, Variable};
use crate::chem::{Element, Equation, Rational, Species, rational};
use crate::ledger::{Couple, Formations, Ledger, Sea};
use crate::physics::constants::LN_10;
use crate::quantity::Quantity;
use crate::solve::scalar::{self, Tolerance, root_between};
use crate::solve::sensitivity::own_supplies;
use crate::solve::{Converged, Mineral, Problem, Reservoir, Row, Settings, solve};
use crate::water::{Sample, Treatment, treatment};

/// The largest amount of a reagent looked at, mol/kg(water).
const MOST_REAGENT: f64 = 20.0;

/// Applies the treatments of a sample to its totals.
///
/// # Errors
///
/// Returns what the ledger does not know, and why there is no equilibrium.
pub fn treat(sample: &Sample, analysed: &Analysed, settings: &Settings) -> Result<Outcome, EquilibriumError> {
    let warmed = sample.treatments().iter().enumerate().rev().find_map(|(k, treatment)| match treatment {
        Treatment::WarmTo(temperature) => Some((*temperature, sample.stated_value(k))),
        _ => None,
    });
    let temperature = warmed.map_or(sample.setting().temperature, |(temperature, _)| temperature);
    let compressed = sample.treatments().iter().rev().find_map(|treatment| match treatment {
        Treatment::CompressTo(pressure) => Some(*pressure),
        _ => None,
    });
    let pressure = compressed.unwrap_or(sample.setting().pressure);
    let present = analysed.system.components().iter().copied().collect();
    let system = System::new(&ledger_in_place(sample, &analysed.system)?, &present, temperature, pressure)?;
    let kelvin = match warmed {
        Some((_, stated)) => stated.cloned(),
        None => analysed.temperature.clone(),
    };
    let with = |couples: Vec<Couple>| {
        treat_with(sample, analysed, &system.clone().with_couples(couples), kelvin.clone(), settings)
    };
    let holds_pe = sample.treatments().iter().rev().find_map(|treatment| match treatment {
        Treatment::HoldPe { reagent, .. } => Some(reagent),
        _ => None,
    });
    match holds_pe {
        None => with(analysed.system.couples().map(|(couple, _)| couple.clone()).collect()),
        // A reagent is an amount, so that water gives off no more of its gases than that.
        Some(Some(_)) => with(analysed.couples.clone()),
        // Water takes part as far as it is stable at this pe.
        Some(None) => {
            let at_first = redox::without_water(&analysed.couples);
            let outcome = with(at_first.clone())?;
            let stable = redox::stable(&analysed.couples, &outcome.system, &outcome.converged);
            if stable.len() == at_first.len() { Ok(outcome) } else { with(stable) }
        }
    }
}

/// The treatments in a system whose couples are settled, at a temperature in kelvin that may be uncertain.
fn treat_with(
    sample: &Sample,
    analysed: &Analysed,
    system: &System,
    kelvin: Option<Quantity>,
    settings: &Settings,
) -> Result<Outcome, EquilibriumError> {
    let mut surroundings = Surroundings::read(sample, system)?;
    let mut course = Course::run(sample, system, analysed)?;
    let water = sample.setting().water / course.dosed.concentrated;
    let (beside, loads) = Beside::read(sample, system, water, settings)?;
    loads.iter().for_each(|(moles, change)| course.add(moles, change, 1.0));
    surroundings.beside = beside;
    // The totals that an analysis fixed come with it; so does its temperature, unless another was chosen.
    surroundings.measured = course.measured;
    surroundings.dosed = course.dosed;
    surroundings.temperature = kelvin;
    match surroundings.held_by_reagent.clone() {
        None => surroundings.solve(system, &course.totals, settings),
        Some(target) => surroundings.hold_by(system, &course.totals, &target, settings),
    }
}

/// The ledger at the pressure that the water comes to.
fn ledger_in_place(sample: &Sample, system: &System) -> Result<Ledger, EquilibriumError> {
    let ledger = system.ledger();
    let Some(sea) = ledger.sea() else { return Ok(ledger.clone()) };
    let compressed = sample.treatments().iter().rev().find_map(|treatment| match treatment {
        Treatment::CompressTo(pressure) => Some(*pressure),
        _ => None,
    });
    Ok(ledger.in_sea(Sea { pressure: compressed.unwrap_or(sample.setting().pressure), ..sea })?)
}

/// What the water is in contact with, in indices.
struct Surroundings {
    reservoirs: Vec<(String, Reservoir)>,
    /// Gases and solids among the reservoirs, by position.
    phases: Vec<(usize, Species)>,
    minerals: Vec<(String, Species, Mineral)>,
    held_by_reagent: Option<ByReagent>,
    /// Values stated with an uncertainty, by the name of what they hold, with the derivative of the solver's value by them.
    stated: BTreeMap<String, (Quantity, f64)>,
    /// For the derivatives of what comes out: see [`Conditions`].
    measured: Vec<(Quantity, Vec<f64>)>,
    temperature: Option<Quantity>,
    dosed: Dosed,
    beside: Beside,
}

/// -log10 of an activity that a reagent brings about.
#[derive(Clone)]
struct ByReagent {
    /// `pH` or `pe`.
    what: &'static str,
    component: usize,
    value: f64,
    reagent: String,
}

impl ByReagent {
    /// What the scale of pH adds to -log10 of the activity; of electrons there is one scale.
    fn shift(&self, system: &System) -> f64 {
        if self.what == "pH" { system.ph_shift() } else { 0.0 }
    }
}

impl Surroundings {
    fn read(sample: &Sample, system: &System) -> Result<Self, EquilibriumError> {
        let mut surroundings = Self {
            reservoirs: vec![],
            phases: vec![],
            minerals: vec![],
            held_by_reagent: None,
            stated: BTreeMap::new(),
            measured: vec![],
            temperature: None,
            dosed: Dosed::default(),
            beside: Beside::default(),
        };
        for (k, treatment) in sample.treatments().iter().enumerate() {
            surroundings.add(treatment, system)?;
            surroundings.note(treatment, sample.stated_value(k));
        }
        Ok(surroundings)
    }

    fn add(&mut self, treatment: &Treatment, system: &System) -> Result<(), EquilibriumError> {
        match treatment {
            Treatment::OpenTo { gas, fugacity } => {
                let (species, row) = formed(system, gas, Species::is_gas, "gas")?;
                self.hold(gas, Some(species), Reservoir { row, ln_value: fugacity.ln() });
            }
            Treatment::Saturate { solid, index } => {
                let (species, row) = formed(system, solid, Species::is_solid, "solid")?;
                self.hold(solid, Some(species), Reservoir { row, ln_value: index * LN_10 });
            }
            Treatment::Allow { solid, above } => self.allow(solid, *above, system)?,
            Treatment::WithSolid { solid, .. } => self.allow(solid, 0.0, system)?,
            Treatment::HoldPh { ph, reagent: None } => {
                self.hold("pH", None, fixed_ph(system.proton(), ph - system.ph_shift()));
            }
            Treatment::HoldPh { ph, reagent: Some(reagent) } => {
                self.hold_later("pH", system.proton(), *ph, reagent)?;
            }
            Treatment::HoldPe { pe, reagent } => {
                let electron = system.electron().ok_or_else(no_electrons)?;
                match reagent {
                    None => self.hold("pe", None, fixed_pe(electron, *pe)),
                    Some(reagent) => self.hold_later("pe", electron, *pe, reagent)?,
                }
            }
            Treatment::Beside(_)
            | Treatment::Dose(_)
            | Treatment::Remove(_)
            | Treatment::Concentrate(_)
            | Treatment::AddSolution { .. }
            | Treatment::Adjust(_)
            | Treatment::WarmTo(_)
            | Treatment::CompressTo(_) => {}
        }
        Ok(())
    }

    fn hold_later(
        &mut self,
        what: &'static str,
        component: usize,
        value: f64,
        reagent: &str,
    ) -> Result<(), EquilibriumError> {
        if let Some(other) = self.held_by_reagent.as_ref().filter(|own| own.what != what) {
            let why = format!("`{}` is held by a reagent already: one of both can be", other.what);
            return Err(EquilibriumError::Analyte { key: what.into(), why });
        }
        self.held_by_reagent = Some(ByReagent { what, component, value, reagent: reagent.into() });
        Ok(())
    }

    /// A solid that may form; the last word on one counts.
    fn allow(&mut self, solid: &str, above: f64, system: &System) -> Result<(), EquilibriumError> {
        let species = find(system.ledger(), solid, Species::is_solid, "solid")?.clone();
        // A solid whose elements are not there cannot form.
        if let Some((_, row)) = system.phase(&species) {
            self.minerals.retain(|(_, own, _)| *own != species);
            let mineral = Mineral { row: row.clone(), ln_target: above * LN_10 };
            self.minerals.push((solid.into(), species, mineral));
        }
        Ok(())
    }

    /// Notes what the value of a treatment depends on; the last word on one gas, solid or pH counts.
    fn note(&mut self, treatment: &Treatment, stated: Option<&Quantity>) {
        let (name, slope) = match treatment {
            Treatment::OpenTo { gas, fugacity } => (gas.as_str(), 1.0 / fugacity),
            Treatment::Saturate { solid, .. } | Treatment::Allow { solid, .. } => (solid.as_str(), LN_10),
            Treatment::HoldPh { .. } => ("pH", -LN_10),
            Treatment::HoldPe { .. } => ("pe", -LN_10),
            // What moves totals, and where the water is, hold no value.
            _ => return,
        };
        match stated {
            Some(stated) => self.stated.insert(name.into(), (stated.clone(), slope)),
            None => self.stated.remove(name),
        };
    }

    /// Holds a value; the last word on one gas, solid or pH counts.
    fn hold(&mut self, name: &str, phase: Option<Species>, reservoir: Reservoir) {
        match self.reservoirs.iter_mut().find(|(own, _)| own == name) {
            Some((_, own)) => *own = reservoir,
            None => {
                self.phases.extend(phase.map(|phase| (self.reservoirs.len(), phase)));
                self.reservoirs.push((name.into(), reservoir));
            }
        }
    }

    /// The surroundings, then the couples in equilibrium.
    fn held(&self, system: &System) -> impl Iterator<Item = (String, Reservoir)> {
        let names = system.couples().map(|(couple, _)| couple.to_string());
        self.reservoirs.iter().cloned().chain(names.zip(system.couples_held()))
    }

    fn problem(&self, beside: &Beside, system: &System, totals: &[f64]) -> Problem {
        Problem {
            reservoirs: self.held(system).map(|(_, reservoir)| reservoir).collect(),
            minerals: self.minerals.iter().map(|(_, _, mineral)| mineral.clone()).collect(),
            ..beside.extend(system.problem(totals))
        }
    }

    fn converge(
        &self,
        system: &System,
        totals: &[f64],
        settings: &Settings,
    ) -> Result<(Converged, Beside), EquilibriumError> {
        /// Rounds after which a surface and the water around it agree, or never do.
        const MOST_ROUNDS: usize = 200;

        let held: Vec<String> = self.held(system).map(|(name, _)| name).collect();
        let solids: Vec<String> = self.minerals.iter().map(|(name, ..)| name.clone()).collect();
        let mut beside = self.beside.clone();
        for _ in 0..MOST_ROUNDS {
            let converged = solve(&self.problem(&beside, system, totals), system.model(), settings, None)
                .map_err(|error| EquilibriumError::named(error, system, &held, &solids))?;
            let mut next = beside.clone();
            if !next.update(&converged) {
                return Ok((converged, beside));
            }
            beside = next;
        }
        Err(EquilibriumError::Solver(
            "the charge of a surface and the ionic strength around it do not settle".into(),
        ))
    }

    fn solve(
        &self,
        system: &System,
        totals: &[f64],
        settings: &Settings,
    ) -> Result<Outcome, EquilibriumError> {
        let (converged, beside) = self.converge(system, totals, settings)?;
        let taken = self.reservoirs.iter().zip(&converged.reservoir_amount);
        let exchanged = taken.map(|((name, _), amount)| (name.clone(), *amount)).collect();
        let problem = self.problem(&beside, system, totals);
        let mut totals = delivered(&problem, &converged);
        totals.truncate(system.n_components());
        Ok(Outcome {
            system: system.clone(),
            totals,
            exchanged,
            solids: self.solids(&converged),
            dosed: self.dosed.clone(),
            conditions: Some(Conditions { beside: beside.clone(), ..self.conditions(system, &problem) }),
            beside,
            converged,
        })
    }

    fn solids(&self, converged: &Converged) -> Vec<Solid> {
        // An unlimited solid that gave an amount to the water has so much less; what is there is its negative.
        let unlimited =
            self.phases.iter().filter(|(_, species)| species.is_solid()).map(|(f, species)| Solid {
                species: species.clone(),
                amount: -converged.reservoir_amount[*f],
                slope: (Variable::ReservoirAmount(*f), -1.0),
            });
        let formed = self.minerals.iter().enumerate().map(|(p, (_, species, _))| Solid {
            species: species.clone(),
            amount: converged.mineral_amount[p],
            slope: (Variable::MineralAmount(p), 1.0),
        });
        unlimited.chain(formed).collect()
    }

    fn conditions(&self, system: &System, problem: &Problem) -> Conditions {
        let phase =
            |f: usize| self.phases.iter().find(|(own, _)| *own == f).map(|(_, species)| species.clone());
        let couple = |f: usize| {
            let position = f.checked_sub(self.reservoirs.len())?;
            system.couples().nth(position).map(|(couple, _)| couple.clone())
        };
        let stated = |f: usize| self.stated.get(&self.reservoirs.get(f)?.0).cloned();
        let held = problem.reservoirs.iter().zip(own_supplies(problem)).enumerate();
        let held = held.map(|(f, (reservoir, supply))| Held {
            phase: phase(f),
            couple: couple(f),
            value: stated(f),
            ..Held::chosen(reservoir.clone(), supply)
        });
        let formed = self.minerals.iter().map(|(name, species, mineral)| MayForm {
            species: species.clone(),
            mineral: mineral.clone(),
            value: self.stated.get(name).cloned(),
        });
        Conditions {
            held: held.collect(),
            minerals: formed.collect(),
            measured: self.measured.clone(),
            temperature: self.temperature.clone(),
            concentrated: Some(self.dosed.concentrated),
            ..Conditions::default()
        }
    }

    /// So much of a reagent that a pH or pe is met.
    fn hold_by(
        mut self,
        system: &System,
        totals: &[f64],
        target: &ByReagent,
        settings: &Settings,
    ) -> Result<Outcome, EquilibriumError> {
        let ByReagent { what, component, value, reagent: name } = target;
        let reagent = reagent(system.ledger(), name)?;
        let with = |amount: f64| {
            let mut totals = totals.to_vec();
            for (j, nu) in &reagent {
                if let Some(k) = system.components().iter().position(|own| own == j) {
                    totals[k] += rational::to_f64(*nu) * amount;
                }
            }
            totals
        };
        let mut misses = |amount: f64| {
            let (converged, _) = self.converge(system, &with(amount), settings)?;
            Ok::<f64, EquilibriumError>(target.shift(system) - converged.ln_a[*component] / LN_10 - value)
        };
        let start = scalar::Sample { x: 0.0, f: misses(0.0)? };
        let mut nearest = start;
        let mut end = scalar::Sample { x: 1e-9, f: start.f };
        while start.f != 0.0 && end.f * start.f > 0.0 && end.x < MOST_REAGENT {
            end.x *= 4.0;
            end.f = misses(end.x)?;
            nearest = if end.f.abs() < nearest.f.abs() { end } else { nearest };
        }
        if end.f * start.f > 0.0 {
            return Err(EquilibriumError::Unreachable(format!(
                "no amount of `{name}` up to {MOST_REAGENT} mol/kg(water) brings the water to {what} {value}: \
                 the nearest is {what} {:.2}",
                nearest.f + value
            )));
        }
        let amount = if start.f == 0.0 {
            0.0
        } else {
            root_between(&mut misses, start, end, Tolerance { x: 1e-18, f: 1e-14 })?.x
        };
        // Once more with it held, which it now is without a mole of hydrogen ions or electrons.
        self.hold(what, None, fixed_ph(*component, value - target.shift(system)));
        let mut outcome = self.solve(system, &with(amount), settings)?;
        let held = self.reservoirs.iter().position(|(own, _)| own == what).expect("just held");
        outcome.exchanged[held] = (name.clone(), amount);
        let supply = with(1.0).iter().zip(totals).map(|(with, without)| with - without).collect();
        if let Some(conditions) = &mut outcome.conditions {
            conditions.held[held].supply = supply;
        }
        Ok(outcome)
    }
}

fn no_electrons() -> EquilibriumError {
    let why = "the ledger has no reaction with electrons, so pe means nothing in it".into();
    EquilibriumError::Analyte { key: "pe".into(), why }
}

/// A gas, or a solid, by its name.
pub(super) fn find<'a>(
    ledger: &'a Ledger,
    name: &str,
    is_right: impl Fn(&Species) -> bool,
    kind: &str,
) -> Result<&'a Species, EquilibriumError> {
    let species = ledger.find_phase(name)?;
    if is_right(species) {
        return Ok(species);
    }
    Err(EquilibriumError::Analyte { key: name.into(), why: format!("{species} is no {kind}") })
}

fn formed(
    system: &System,
    name: &str,
    is_right: impl Fn(&Species) -> bool,
    kind: &str,
) -> Result<(Species, Row), EquilibriumError> {
    let species = find(system.ledger(), name, is_right, kind)?.clone();
    let (_, row) = system.phase(&species).expect("its components were brought in");
    Ok((species, row.clone()))
}

/// A neutral substance, or the equation by which it dissolves, in moles of the ledger's components, water left out.
///
/// # Errors
///
/// Returns why it is not made of them: an element the ledger lacks, or oxidation states that do not add up.
pub fn reagent(ledger: &Ledger, text: &str) -> Result<Vec<(usize, Rational)>, EquilibriumError> {
    let fault = |why: String| EquilibriumError::Analyte { key: text.into(), why };
    if treatment::is_equation(text) {
        return dissolution(ledger, text);
    }
    let species = Species::parse(text).map_err(|error| fault(error.to_string()))?;
    if species.charge() != 0 {
        return Err(fault(format!(
            "a reagent is a neutral substance, and this has charge {}",
            species.charge()
        )));
    }
    let formations = ledger.formations();
    let mut choices: Vec<Vec<usize>> = vec![vec![]];
    for element in species.elements_beside_water() {
        let carriers = carriers(formations, element);
        if carriers.is_empty() {
            return Err(fault(format!("the ledger has no species of {element}")));
        }
        choices = choices
            .iter()
            .flat_map(|chosen| carriers.iter().map(move |own| [chosen.as_slice(), &[*own]].concat()))
            .collect();
    }
    let found = choices.iter().find_map(|carriers| dissolved(formations, &species, carriers));
    found.or_else(|| solute(formations, &species)).ok_or_else(|| {
        fault("its oxidation states are not those of the ledger's species: dissolving it would be a redox reaction".into())
    })
}

/// A solute the ledger forms without electrons, such as dissolved oxygen.
fn solute(formations: &Formations, species: &Species) -> Option<Vec<(usize, Rational)>> {
    let formed = formations.formation(species)?;
    let water = formations.component(&Species::water());
    Some(formed.stoichiometry.iter().copied().filter(|(j, _)| Some(*j) != water).collect())
}

/// Equivalents of strong acid in a mole of a reagent, counted as alkalinity is: HCl 1, H2SO4 2, NaOH -1.
///
/// # Errors
///
/// As [`reagent`].
pub fn acid_equivalents(ledger: &Ledger, text: &str) -> Result<f64, EquilibriumError> {
    let level = ZeroLevel::at(ledger, ALKALINITY_PH);
    let proton = ledger.formations().component(&Species::proton());
    let acid = |(j, nu): &(usize, Rational)| {
        if Some(*j) == proton { *nu } else { -level.of_component(*j) * nu }
    };
    Ok(rational::to_f64(reagent(ledger, text)?.iter().map(acid).sum()))
}

/// What the equation of a dissolution brings into the water, per mole of its first substance.
fn dissolution(ledger: &Ledger, text: &str) -> Result<Vec<(usize, Rational)>, EquilibriumError> {
    let fault = |why: String| EquilibriumError::Analyte { key: text.into(), why };
    let dissolving = treatment::substance(text).map_err(fault)?;
    let equation = Equation::parse(text).map_err(|error| fault(error.to_string()))?;
    let per_mole = -equation.coefficient(&dissolving);
    let mut parts: Vec<(usize, Rational)> = Vec::new();
    for (species, coefficient) in equation.terms().iter().filter(|(species, _)| *species != dissolving) {
        let known = ledger.find_species(species.key())?;
        let formed = ledger.formations().formation(known).expect("just found");
        for (j, nu) in &formed.stoichiometry {
            let moles = coefficient / per_mole * nu;
            match parts.iter_mut().find(|(own, _)| own == j) {
                Some((_, sum)) => *sum += moles,
                None => parts.push((*j, moles)),
            }
        }
    }
    Ok(parts)
}

/// The substance as these components, one for each of its elements, with protons and water; `None` if that would take
/// electrons.
fn dissolved(
    formations: &Formations,
    species: &Species,
    carriers: &[usize],
) -> Option<Vec<(usize, Rational)>> {
    let elements = species.elements_beside_water();
    let amount =
        |element: Element, j: usize| species.count(element) / formations.components[j].count(element);
    let mut parts: Vec<(usize, Rational)> =
        elements.zip(carriers).map(|(element, j)| (*j, amount(element, *j))).collect();
    let remainder = |element: Element| -> Rational {
        species.count(element)
            - parts.iter().map(|(j, n)| formations.components[*j].count(element) * n).sum::<Rational>()
    };
    let protons = remainder(Element::H) - remainder(Element::O) * 2;
    let charge: Rational = parts.iter().map(|(j, n)| n * i64::from(formations.components[*j].charge())).sum();
    let proton = formations.component(&Species::proton()).expect("every ledger has hydrogen ions");
    parts.push((proton, protons));
    (charge + protons == 0.into()).then_some(parts)
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::ledger::shipped;

    /// What a reagent brings, as component keys with whole moles.
    fn parts(text: &str) -> Vec<(String, i64)> {
        let book = shipped::ledger("freshwater", None).unwrap();
        let parts = reagent(&book, text).unwrap_or_else(|error| panic!("{error}"));
        let key = |j: usize| book.formations().components[j].key().to_string();
        parts.into_iter().map(|(j, n)| (key(j), n.to_integer())).collect()
    }

    #[track_caller]
    fn case(text: &str, expected: &[(&str, i64)]) {
        let mut found = parts(text);
        found.retain(|(_, n)| *n != 0);
        found.sort();
        let mut expected: Vec<(String, i64)> = expected.iter().map(|(key, n)| ((*key).into(), *n)).collect();
        expected.sort();
        assert_eq!(found, expected, "{text}");
    }

    #[test]
    fn a_reagent_brings_each_element_in_the_oxidation_state_it_has() {
        case("H2SO4", &[("H^+", 2), ("SO4^2-", 1)]);
        case("HNO3", &[("H^+", 1), ("NO3^-", 1)]);
        case("FeCl2", &[("Fe^2+", 1), ("Cl^-", 2)]);
        case("FeCl3", &[("Fe^3+", 1), ("Cl^-", 3)]);
        case("FeSO4", &[("Fe^2+", 1), ("SO4^2-", 1)]);
        case("Al2(SO4)3", &[("Al^3+", 2), ("SO4^2-", 3)]);
        case("Na2S", &[("Na^+", 2), ("HS^-", 1), ("H^+", -1)]);
        case("NH4Cl", &[("NH4^+", 1), ("Cl^-", 1)]);
        case("O2", &[("O2(aq)", 1)]);
        case("CH4", &[("CH4(aq)", 1)]);
    }

    #[test]
    fn a_reagent_that_would_take_electrons_is_refused() {
        let book = shipped::ledger("freshwater", None).unwrap();
        for text in ["Na2SO3", "FeS2", "C2H4"] {
            let error = reagent(&book, text).unwrap_err().to_string();
            assert!(error.contains("redox reaction"), "{text}: {error}");
        }
    }
}
