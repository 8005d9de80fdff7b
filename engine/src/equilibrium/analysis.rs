//! The first stage: conserved totals from what was measured, at the sample's own temperature.
//!
//! Every total but those of hydrogen and carbon is an amount that was given. These two follow from the acid-base
//! evidence. A fixed pH and a fixed fugacity are reservoirs of the convex problem, an alkalinity is a total of hydrogen
//! (see [`super::acid_base`]), and electroneutrality is one too:
//!
//! ```text
//! T_H = Σ_j h_j T_j - alkalinity             T_H = -(Σ_{j≠H} z_j T_j) / z_H
//! ```
//!
//! Where the evidence fixes neither total, one unknown is left and found as the root of one equation outside the convex
//! problem: total carbon from alkalinity at a given pH, pH from total carbon at a given fugacity; and the total of hydrogen,
//! where couples in equilibrium move what it is counted from.

use std::collections::BTreeSet;

use super::acid_base::{ALKALINITY_PH, ZeroLevel};
use super::assemble::{System, carriers, inorganic_carbon};
use super::beside::Beside;
use super::dissolved_mass::{self, CARBONATE_MASS};
use super::dosing::Dosed;
use super::error::{EquilibriumError, proton_total_open};
use super::redox::{self, Pe, Plan};
use super::uncertainty::{Conditions, Held, Slopes, Variable};
use crate::chem::{Element, PhScale, Rational, Species, rational};
use crate::ledger::{Couple, Formations, Ledger, Sea};
use crate::physics::constants::LN_10;
use crate::physics::water;
use crate::quantity::Quantity;
use crate::solve::scalar::{self, Tolerance, root_between};
use crate::solve::{Converged, Problem, Reservoir, Row, Settings, Total, Warm, solve};
use crate::units::{KgOf, Pressure};
use crate::water::analysis::{Dissolved, Evidence, Measured, Ph};
use crate::water::analyte::{Analyte, oxidation_state, to_roman};
use crate::water::concentration::{Amount, Solution};
use crate::water::{Sample, Treatment, marine};

/// Oxidation states an element given whole is taken in where a ledger knows several; common in aerated water.
const COMMON_STATES: [(&str, i64); 5] = [("Fe", 3), ("S", 6), ("N", 5), ("C", 4), ("Mn", 2)];
/// The smallest total carbon looked at, mol/kg(water).
const LEAST_CARBON: f64 = 1e-15;
/// The largest.
const MOST_CARBON: f64 = 30.0;
/// pH between which a pH is looked for.
const PH_RANGE: (f64, f64) = (-2.0, 17.0);
/// Roots are found to this in ln total or in pH: the last digits of a double.
const ROOT: Tolerance = Tolerance { x: 1e-15, f: 0.0 };
const ROOT_INTERVALS: usize = 24;
/// A total of hydrogen is found to this, mol/kg(water).
const PROTON_ROOT: Tolerance = Tolerance { x: 1e-18, f: 1e-17 };
/// The largest change of the total of hydrogen looked at, mol/kg(water).
const MOST_PROTONS: f64 = 30.0;
/// A couple's pe is found to this; it depends on itself through complexes only, so a few rounds do.
const PE_ROOT: f64 = 1e-13;
const PE_ROUNDS: usize = 60;

/// The conserved totals and what was found on the way to them.
#[derive(Debug, Clone)]
pub struct Analysed {
    /// The system at the sample's own temperature.
    pub system: System,
    /// Total of each component of `system`, mol/kg(water).
    pub totals: Vec<f64>,
    /// The equilibrium the evidence itself implied, if there was any.
    pub outcome: Option<Outcome>,
    /// What `totals` are sums of where no outcome says so: dissolved totals with the change of every total per unit.
    pub measured: Vec<(Quantity, Vec<f64>)>,
    /// The sample's own temperature in kelvin, where it is uncertain.
    pub temperature: Option<Quantity>,
    /// Measured values that were not used, less the computed ones.
    pub misfits: Vec<Misfit>,
    /// What was assumed, in words.
    pub notes: Vec<String>,
    /// The couples the water is to have in equilibrium; those of `system`, and of water itself what pe ruled out.
    pub couples: Vec<Couple>,
}

/// A measured value that was not used, less the computed one.
#[derive(Debug, Clone)]
pub struct Misfit {
    /// The key it was given under.
    pub key: &'static str,
    /// The difference, in the unit of the observable.
    pub value: f64,
    /// The measured value, with the derivative of the difference by it.
    pub measured: (Quantity, f64),
    /// The derivatives of the difference by what the analysis found.
    pub slopes: Slopes,
}

/// A solved problem with the names of its surroundings and solids.
#[derive(Debug, Clone)]
pub struct Outcome {
    /// The system it was solved in.
    pub system: System,
    /// The numbers.
    pub converged: Converged,
    /// Total of each component over the water and its solids, mol/kg(water).
    pub totals: Vec<f64>,
    /// What delivered or took each amount: the gas, solid or reagent, with mol/kg(water) taken up by the water. In the
    /// order of what is held.
    pub exchanged: Vec<(String, f64)>,
    /// Amount of each solid that may form or is there without limit, mol/kg(water).
    pub solids: Vec<Solid>,
    /// What treatments did to the totals.
    pub dosed: Dosed,
    /// What is beside the water.
    pub beside: Beside,
    /// What it meets, where its derivatives are known.
    pub conditions: Option<Conditions>,
}

/// A solid that may form or is there without limit.
#[derive(Debug, Clone)]
pub struct Solid {
    /// Which.
    pub species: Species,
    /// mol/kg(water); negative where an unlimited one was dissolved.
    pub amount: f64,
    /// What the amount is read from, with its sign.
    pub slope: (Variable, f64),
}

/// Fixes the totals of a laboratory analysis.
///
/// # Errors
///
/// Returns what the ledger does not know, or what the evidence leaves open or cannot mean.
pub fn analyse(
    sample: &Sample,
    measured: &Measured,
    ledger: &Ledger,
    settings: &Settings,
) -> Result<Analysed, EquilibriumError> {
    let mut notes = sample.notes().to_vec();
    let solution = solution(measured);
    let mut common = Vec::new();
    let mut given = amounts(measured, ledger, &solution, &mut common)?;
    given.extend(conservative(ledger, &given)?);
    let mut present = present_components(sample, measured, ledger, &given)?;
    let plan = plan(sample, measured, ledger, &given, &present)?;
    if plan.pe.is_none() {
        notes.extend(common);
    }
    present.extend(plan.components(ledger.formations()));
    let setting = sample.setting();
    let bare = match measured.measured_at {
        None => System::new(ledger, &present, setting.temperature, setting.pressure)?,
        // What was measured elsewhere was measured in a laboratory at the surface.
        Some(temperature) => {
            let surface = ledger.sea().map(|sea| Sea { pressure: Pressure::ATMOSPHERE, ..sea });
            let ledger = surface.map_or_else(|| Ok(ledger.clone()), |surface| ledger.in_sea(surface))?;
            System::new(&ledger, &present, temperature, Pressure::ATMOSPHERE)?
        }
    };
    let mut totals = vec![0.0; bare.n_components()];
    for carried in &given {
        totals[position(&bare, carried.component)] += carried.total();
    }

    let Plan { couples, pe } = plan;
    let evidence = Given { measured, sample, amounts: &given, totals, solution, settings };
    let pe_is_held = pe.is_some();
    let at_first = match (pe_is_held, measured.redox.is_silent()) {
        (true, _) => redox::without_water(&couples),
        // Couples that only a treatment asks for.
        (false, true) => vec![],
        (false, false) => couples.clone(),
    };
    let mut system = bare.clone().with_couples(at_first);
    let mut found = evidence.solve(&system, pe.as_ref())?;
    if pe_is_held {
        let stable = redox::stable(&couples, &system, &found.converged);
        if stable.len() > system.couples().len() {
            system = bare.with_couples(stable);
            found = evidence.solve(&system, pe.as_ref())?;
        }
    }
    notes.extend(found.notes);
    let outcome = Outcome {
        system: system.clone(),
        converged: found.converged,
        totals: found.totals.clone(),
        exchanged: vec![],
        solids: vec![],
        dosed: Dosed::default(),
        beside: Beside::default(),
        conditions: found.conditions,
    };
    let temperature = measured.temperature.clone();
    let (totals, misfits) = (found.totals, found.misfits);
    let outcome = Some(outcome);
    Ok(Analysed { system, totals, outcome, measured: vec![], temperature, misfits, notes, couples })
}

/// The couples of the water, and what fixes its pe. A pe that a treatment holds splits what was given whole, too.
fn plan(
    sample: &Sample,
    measured: &Measured,
    ledger: &Ledger,
    given: &[Carried],
    present: &BTreeSet<usize>,
) -> Result<Plan, EquilibriumError> {
    let carried = measured.amounts.iter().zip(given);
    let given: Vec<(&Analyte, &str, usize)> =
        carried.map(|((analyte, key, _), carried)| (analyte, key.as_str(), carried.component)).collect();
    Plan::new(&measured.redox, holds_pe(sample), ledger, &given, present)
}

fn holds_pe(sample: &Sample) -> bool {
    sample.treatments().iter().any(|treatment| matches!(treatment, Treatment::HoldPe { .. }))
}

/// What an analysis is solved from, whichever couples are in equilibrium.
struct Given<'a> {
    measured: &'a Measured,
    sample: &'a Sample,
    amounts: &'a [Carried],
    /// Totals of everything but hydrogen and carbon.
    totals: Vec<f64>,
    solution: Solution,
    settings: &'a Settings,
}

/// A solved analysis.
struct Found {
    totals: Vec<f64>,
    converged: Converged,
    misfits: Vec<Misfit>,
    conditions: Option<Conditions>,
    notes: Vec<String>,
}

impl Given<'_> {
    fn solve(&self, system: &System, pe: Option<&Pe>) -> Result<Found, EquilibriumError> {
        match pe {
            None => self.solve_at(system, None, None),
            Some(Pe::Value(electron)) => self.solve_at(system, Some(electron.pe), pe),
            Some(Pe::Of(couple)) => self.solve_at(system, Some(self.pe_of(system, couple)?), pe),
        }
    }

    /// The pe at which a couple is in equilibrium with the rest, which depends on it.
    fn pe_of(&self, system: &System, couple: &Couple) -> Result<f64, EquilibriumError> {
        let mut pe = 4.0;
        for _ in 0..PE_ROUNDS {
            let found = self.solve_at(system, Some(pe), None)?;
            let next = redox::pe_of(couple, system, &found.converged);
            if !next.is_finite() {
                let why = format!("{couple} gives no pe where one of both is absent");
                return Err(EquilibriumError::Analyte { key: "pe".into(), why });
            }
            if (next - pe).abs() <= PE_ROOT * pe.abs().max(1.0) {
                return Ok(next);
            }
            pe = next;
        }
        Err(EquilibriumError::Unreachable(format!(
            "`pe`: none was found at which {couple} is in equilibrium"
        )))
    }

    fn solve_at(&self, system: &System, pe: Option<f64>, of: Option<&Pe>) -> Result<Found, EquilibriumError> {
        let mut notes = Vec::new();
        let mut analysis =
            Analysis::new(system, self.measured, &self.solution, self.settings, self.sample, pe);
        let (totals, mut converged) = match &self.measured.make_up {
            None => analysis.solve(&self.totals)?,
            Some(key) => {
                let keys = self.measured.amounts.iter().map(|(_, own, _)| own);
                let own = keys.zip(self.amounts).find(|(own, _)| *own == key).expect("checked on entry").1;
                analysis.made_up(&self.totals, position(system, own.component), key, &mut notes)?
            }
        };
        if let Some(Pe::Of(couple)) = of {
            // The same once more with the couple itself held, which is what the evidence says.
            analysis.pe = Some(Reservoir { row: system.couple_row(couple), ln_value: 0.0 });
            (_, converged) = analysis.again(&totals)?;
        }
        let misfits = analysis.misfits(&converged);
        let conditions = analysis.conditions(self.measured, self.amounts, of);
        Ok(Found { totals, converged, misfits, conditions, notes })
    }
}

/// Takes up totals that an earlier equilibrium left.
///
/// # Errors
///
/// Returns a species that the ledger does not know.
pub fn restore(
    sample: &Sample,
    dissolved: &Dissolved,
    ledger: &Ledger,
) -> Result<Analysed, EquilibriumError> {
    let formations = ledger.formations();
    let mut present = treatment_components(sample, ledger)?;
    let mut formed = Vec::new();
    for (species, _) in &dissolved.totals {
        ledger.find_species(species.key())?;
        formed.push(formations.formation(species).expect("just found"));
    }
    present.extend(formed.iter().flat_map(|formed| formed.stoichiometry.iter().map(|(j, _)| *j)));
    present.extend(formations.component(&Species::proton()));
    let Plan { couples, .. } = {
        let plan = Plan::named(&dissolved.couples, holds_pe(sample), ledger)?;
        present.extend(plan.components(formations));
        plan
    };
    let setting = sample.setting();
    let system = System::new(ledger, &present, setting.temperature, setting.pressure)?;
    let system = system.with_couples(couples.clone());
    let mut totals = vec![0.0; system.n_components()];
    let mut measured = Vec::new();
    for (formed, (_, moles)) in formed.into_iter().zip(&dissolved.totals) {
        let mut change = vec![0.0; system.n_components()];
        for (j, nu) in &formed.stoichiometry {
            if let Some(k) = system.components().iter().position(|own| own == j) {
                change[k] = rational::to_f64(*nu);
                totals[k] += change[k] * moles.value();
            }
        }
        measured.push((moles.clone(), change));
    }
    let notes = sample.notes().to_vec();
    let temperature = dissolved.temperature.clone();
    let misfits = vec![];
    Ok(Analysed { system, totals, outcome: None, measured, temperature, misfits, notes, couples })
}

fn position(system: &System, component: usize) -> usize {
    system.components().iter().position(|own| *own == component).expect("present by construction")
}

/// Density and dissolved mass of the sample as its volumes were measured.
pub(super) fn solution(measured: &Measured) -> Solution {
    if let Some(sea) = &measured.sea {
        return marine::solution(measured, sea.salinity);
    }
    let water_density = water_density(measured);
    let grams = measured.amounts.iter().map(|(analyte, _, amount)| {
        analyte.molar_mass().unwrap_or(0.0) * amount.moles.value() * amount.per.to_litre(water_density)
    });
    // Alkalinity and carbon are counted as hydrogencarbonate, which most of either is.
    let carbonate = dissolved_mass::carbonate(measured)
        .map_or(0.0, |amount| CARBONATE_MASS * amount.moles.value() * amount.per.to_litre(water_density));
    let dissolved = (grams.sum::<f64>() + carbonate).max(0.0) / 1000.0;
    match measured.density {
        Some(density) => Solution { density, dissolved, basis: KgOf::Water },
        None => Solution::with_salts(water_density, dissolved),
    }
}

/// Density of pure water where volumes were measured, kg/L.
fn water_density(measured: &Measured) -> f64 {
    let at = measured.volume_temperature.unwrap_or_else(laboratory);
    water::density(at.kelvin()) / 1000.0
}

/// Laboratories measure volumes at 20 degC, whatever the water had in the field.
pub(super) fn laboratory() -> crate::units::Temperature {
    crate::units::Temperature::from_celsius(20.0).expect("above absolute zero")
}

/// A measured amount as the component that carries it.
struct Carried {
    component: usize,
    moles: Quantity,
    /// Moles of the component per kilogram of water, per unit of `moles`.
    factor: f64,
}

impl Carried {
    fn total(&self) -> f64 {
        self.moles.value() * self.factor
    }
}

/// Every measured amount, in order.
fn amounts(
    measured: &Measured,
    ledger: &Ledger,
    solution: &Solution,
    notes: &mut Vec<String>,
) -> Result<Vec<Carried>, EquilibriumError> {
    let formations = ledger.formations();
    let convert = |(analyte, key, amount): &(Analyte, String, Amount)| {
        let carrier = carrier(formations, analyte, key, notes)?;
        let atoms = formations.components[carrier].count(analyte.element());
        let ratio = rational::to_f64(analyte.atoms() / atoms);
        let factor = amount.per.to_basis(solution) * ratio;
        Ok(Carried { component: carrier, moles: amount.moles.clone(), factor })
    };
    measured.amounts.iter().map(convert).collect()
}

/// What goes with the salinity of a seawater, less what was measured of it.
fn conservative(ledger: &Ledger, given: &[Carried]) -> Result<Vec<Carried>, EquilibriumError> {
    let Some(sea) = ledger.sea() else { return Ok(vec![]) };
    let formations = ledger.formations();
    let mut carried = Vec::new();
    for constituent in ledger.composition() {
        let key = &constituent.name;
        let analyte = Analyte::parse(&constituent.of)
            .map_err(|error| EquilibriumError::Analyte { key: key.clone(), why: error.to_string() })?;
        let component = carrier(formations, &analyte, key, &mut vec![])?;
        let atoms = formations.components[component].count(analyte.element());
        let factor = rational::to_f64(analyte.atoms() / atoms);
        if given.iter().all(|own| own.component != component) && sea.salinity > 0.0 {
            carried.push(Carried { component, moles: constituent.amount_in(&sea), factor });
        }
    }
    Ok(carried)
}

/// The component that carries an analyte in its oxidation state.
fn carrier(
    formations: &Formations,
    analyte: &Analyte,
    key: &str,
    notes: &mut Vec<String>,
) -> Result<usize, EquilibriumError> {
    let element = analyte.element();
    let fault = |why: String| EquilibriumError::Analyte { key: key.into(), why };
    let candidates = carriers(formations, element);
    let state_of = |j: usize| oxidation_state(&formations.components[j], element);
    match (candidates.as_slice(), analyte.oxidation_state()) {
        ([], _) => {
            Err(fault(format!("the ledger has no species of {element}; give it one with `.with_reaction`")))
        }
        ([one], None) => Ok(*one),
        (several, None) => {
            let common = COMMON_STATES.iter().find(|(symbol, _)| *symbol == element.symbol());
            let wanted = common.map(|(_, state)| Rational::from_integer(*state));
            let found = several.iter().find(|j| wanted.is_some() && state_of(**j) == wanted);
            let found = found.ok_or_else(|| {
                fault(format!(
                    "{element} occurs in several oxidation states: name one, as in `{element}(II)`"
                ))
            })?;
            notes.push(format!(
                "{key} is taken as {element}({})",
                to_roman(common.map_or(0, |(_, state)| *state as i32))
            ));
            Ok(*found)
        }
        (several, wanted) => {
            several.iter().copied().find(|j| state_of(*j) == wanted || state_of(*j).is_none()).ok_or_else(
                || fault(format!("the ledger has no species of {element} in this oxidation state")),
            )
        }
    }
}

/// Components of what was measured and of what the treatments bring.
fn present_components(
    sample: &Sample,
    measured: &Measured,
    ledger: &Ledger,
    given: &[Carried],
) -> Result<BTreeSet<usize>, EquilibriumError> {
    let formations = ledger.formations();
    let mut present: BTreeSet<usize> = given.iter().map(|carried| carried.component).collect();
    present.extend(formations.component(&Species::proton()));
    let evidence = &measured.evidence;
    if evidence.alkalinity.is_some() || evidence.dic.is_some() || evidence.co2.is_some() {
        let carbon = inorganic_carbon(formations);
        if carbon.is_none() {
            let why =
                "the ledger has no species of C: alkalinity, DIC and CO2 mean nothing in it".to_string();
            return Err(EquilibriumError::Analyte {
                key: evidence.given().last().copied().unwrap_or("C").into(),
                why,
            });
        }
        present.extend(carbon);
    }
    present.extend(treatment_components(sample, ledger)?);
    Ok(present)
}

/// Components of the gases and solids that the treatments bring, and of their reagents.
fn treatment_components(sample: &Sample, ledger: &Ledger) -> Result<BTreeSet<usize>, EquilibriumError> {
    let formations = ledger.formations();
    let mut present = BTreeSet::new();
    for treatment in sample.treatments() {
        match treatment {
            Treatment::OpenTo { gas: name, .. } | Treatment::Saturate { solid: name, .. } => {
                let phase = ledger.find_phase(name)?;
                let formed = formations.formation(phase).expect("phases are formed");
                present.extend(formed.stoichiometry.iter().map(|(j, _)| *j));
            }
            Treatment::HoldPh { reagent: Some(reagent), .. }
            | Treatment::HoldPe { reagent: Some(reagent), .. } => {
                present.extend(super::treatment::reagent(ledger, reagent)?.into_iter().map(|(j, _)| j));
            }
            Treatment::WithSolid { solid, .. } => {
                let formed = formations.formation(ledger.find_phase(solid)?).expect("phases are formed");
                present.extend(formed.stoichiometry.iter().map(|(j, _)| *j));
            }
            Treatment::Dose(dose) | Treatment::Remove(dose) => {
                present.extend(super::treatment::reagent(ledger, &dose.reagent)?.into_iter().map(|(j, _)| j));
            }
            Treatment::AddSolution { solution, .. } => {
                for (formula, _) in &solution.solutes {
                    present.extend(super::treatment::reagent(ledger, formula)?.into_iter().map(|(j, _)| j));
                }
            }
            Treatment::Adjust(adjust) => {
                for (reagent, ..) in &adjust.reagents {
                    present.extend(super::treatment::reagent(ledger, reagent)?.into_iter().map(|(j, _)| j));
                }
            }
            // A solid that may form brings nothing with it: it needs what is there already.
            Treatment::Allow { solid, .. } => drop(ledger.find_phase(solid)?),
            Treatment::HoldPe { .. } => present.extend(formations.component(&Species::electron())),
            Treatment::Beside(neighbour) => present.extend(super::beside::components(neighbour, ledger)?),
            Treatment::HoldPh { .. }
            | Treatment::Concentrate(_)
            | Treatment::WarmTo(_)
            | Treatment::CompressTo(_) => {}
        }
    }
    Ok(present)
}

/// The evidence of one sample in numbers, and the ways to use it.
struct Analysis<'a> {
    system: &'a System,
    settings: &'a Settings,
    name: String,
    solution: Solution,
    evidence: &'a Evidence,
    proton: usize,
    electron: Option<usize>,
    carbon: Option<usize>,
    /// What holds pe.
    pe: Option<Reservoir>,
    /// Protons each component of the system carries in its zero-level species.
    protons: Vec<f64>,
    charges: Vec<f64>,
    alkalinity: Option<f64>,
    dic: Option<f64>,
    ph: Option<f64>,
    /// Fugacity of CO2 in bar.
    co2: Option<f64>,
    carbon_given: bool,
}

/// Totals with the equilibrium they belong to.
type Solved = (Vec<f64>, Converged);

impl<'a> Analysis<'a> {
    fn new(
        system: &'a System,
        measured: &'a Measured,
        solution: &Solution,
        settings: &'a Settings,
        sample: &Sample,
        pe: Option<f64>,
    ) -> Self {
        let evidence = &measured.evidence;
        let level = ZeroLevel::at(system.ledger(), ALKALINITY_PH);
        let moles = |amount: &Amount| amount.moles.value() * amount.per.to_basis(solution);
        let carbon = inorganic_carbon(system.ledger().formations());
        let electron = system.electron();
        Self {
            system,
            settings,
            name: sample.name().map_or_else(|| "the sample".into(), |name| format!("`{name}`")),
            solution: *solution,
            evidence,
            proton: system.proton(),
            electron,
            carbon: carbon.and_then(|j| system.components().iter().position(|own| *own == j)),
            pe: electron.zip(pe).map(|(electron, pe)| redox::fixed_pe(electron, pe)),
            protons: system.components().iter().map(|j| rational::to_f64(level.of_component(*j))).collect(),
            // No electron is dissolved, so none carries charge.
            charges: (0..system.n_components())
                .map(|k| if Some(k) == electron { 0 } else { system.component_species(k).charge() })
                .map(f64::from)
                .collect(),
            alkalinity: evidence.alkalinity.as_ref().map(moles),
            dic: evidence.dic.as_ref().map(moles),
            ph: match &evidence.ph {
                Some(Ph::Measured(ph)) => Some(ph.value() - system.ph_shift()),
                _ => None,
            },
            co2: evidence.co2.as_ref().map(|fugacity| fugacity.value()),
            carbon_given: measured.amounts.iter().any(|(analyte, ..)| analyte.element() == Element::C),
        }
    }

    /// Totals of all components from the evidence; `given` are those of everything but hydrogen and carbon.
    fn solve(&self, given: &[f64]) -> Result<Solved, EquilibriumError> {
        let mut totals = given.to_vec();
        if let (Some(carbon), Some(dic), true) = (self.carbon, self.dic, self.evidence.uses("DIC")) {
            totals[carbon] = dic;
        }
        let uses = |key| self.evidence.uses(key);
        let carbon_known = uses("DIC") || self.carbon_given || self.carbon.is_none();
        let electroneutral = matches!(self.evidence.ph, Some(Ph::Electroneutral)) && uses("pH");
        match (uses("pH"), uses("alkalinity"), uses("fCO2"), carbon_known) {
            (true, true, _, false) => self.carbon_from_alkalinity(&totals),
            (true, true, _, true) => Err(self.too_much()),
            (true, false, co2, _) => {
                if electroneutral {
                    return self.neutral(&totals, self.co2_if(co2));
                }
                self.solve_with(&totals, self.ph, self.co2_if(co2), None)
            }
            (false, true, false, true) if self.carbon.is_some() => self.alkaline(&totals, None),
            (false, true, true, _) => self.alkaline(&totals, self.co2),
            (false, false, true, true) if uses("DIC") => self.ph_from_carbon(&totals),
            _ => Err(proton_total_open(&self.name, &self.evidence.used())),
        }
    }

    /// With the protons that make the charges add up.
    fn neutral(&self, totals: &[f64], co2: Option<f64>) -> Result<Solved, EquilibriumError> {
        let mut totals = totals.to_vec();
        totals[self.proton] = self.neutral_protons(&totals);
        // Electrons that a pe delivers bring charge along.
        if self.pe.is_none() || self.system.couples().len() == 0 {
            return self.solve_with(&totals, None, co2, None);
        }
        let charge = |totals: &[f64]| self.charges.iter().zip(totals).map(|(z, t)| z * t).sum::<f64>();
        self.with_protons(&totals, co2, charge)
    }

    /// With the protons that give the measured alkalinity.
    fn alkaline(&self, totals: &[f64], co2: Option<f64>) -> Result<Solved, EquilibriumError> {
        let mut totals = totals.to_vec();
        totals[self.proton] = self.protons_from_alkalinity(&totals);
        let reduces = |row: &Row| self.alkalinity_of(&self.moles(row)) != 0.0;
        if !self.system.couples().any(|(_, row)| reduces(row)) {
            return self.solve_with(&totals, None, co2, None);
        }
        let target = self.alkalinity.expect("alkalinity is used");
        self.with_protons(&totals, co2, |totals| target - self.alkalinity_of(totals))
    }

    /// The total of hydrogen at which `misses`, which rises with it, is zero, where couples in equilibrium move the totals
    /// it is counted from. Of several the nearest to that without couples.
    fn with_protons(
        &self,
        totals: &[f64],
        co2: Option<f64>,
        misses: impl Fn(&[f64]) -> f64,
    ) -> Result<Solved, EquilibriumError> {
        let mut last: Option<Solved> = None;
        let mut at = |protons: f64| {
            let mut totals = totals.to_vec();
            totals[self.proton] = protons;
            let warm = last.as_ref().map(|(_, converged)| converged.warm.clone());
            let solved = self.solve_with(&totals, None, co2, warm.as_ref())?;
            let miss = misses(&solved.0);
            last = Some(solved);
            Ok::<f64, EquilibriumError>(miss)
        };
        let begin = totals[self.proton];
        let start = scalar::Sample { x: begin, f: at(begin)? };
        let mut end = start;
        let mut step = start.f.abs().max(1e-12);
        while end.f * start.f > 0.0 {
            end.x = begin - step.copysign(start.f);
            end.f = at(end.x)?;
            step *= 2.0;
            if step > MOST_PROTONS {
                return Err(EquilibriumError::ProtonTotal(format!(
                    "no total of hydrogen gives {} what was measured of it once its couples are in equilibrium",
                    self.name
                )));
            }
        }
        if start.f != 0.0 {
            let root = root_between(&mut at, start, end, PROTON_ROOT)?;
            at(root.x)?;
        }
        Ok(last.expect("solved at the root"))
    }

    fn too_much(&self) -> EquilibriumError {
        EquilibriumError::ProtonTotal(format!(
            "pH, alkalinity and total carbon of {} are more than fix the water: take `C` out, or name two with `from`",
            self.name
        ))
    }

    fn co2_if(&self, used: bool) -> Option<f64> {
        self.co2.filter(|_| used)
    }

    /// T_H that gives the measured alkalinity.
    fn protons_from_alkalinity(&self, totals: &[f64]) -> f64 {
        let carried: f64 = self.others().map(|k| self.protons[k] * totals[k]).sum();
        carried - self.alkalinity.unwrap_or(0.0)
    }

    /// T_H that makes the charges add up.
    fn neutral_protons(&self, totals: &[f64]) -> f64 {
        -self.others().map(|k| self.charges[k] * totals[k]).sum::<f64>() / self.charges[self.proton]
    }

    fn others(&self) -> impl Iterator<Item = usize> + '_ {
        (0..self.protons.len()).filter(|k| *k != self.proton)
    }

    /// Alkalinity that totals amount to.
    fn alkalinity_of(&self, totals: &[f64]) -> f64 {
        self.others().map(|k| self.protons[k] * totals[k]).sum::<f64>() - totals[self.proton]
    }

    /// Solves with pH or CO2 held, and returns the totals with what was delivered.
    fn solve_with(
        &self,
        totals: &[f64],
        ph: Option<f64>,
        co2: Option<f64>,
        warm: Option<&Warm>,
    ) -> Result<Solved, EquilibriumError> {
        let mut problem = self.system.problem(totals);
        let mut held = Vec::new();
        if let Some(ph) = ph {
            problem.reservoirs.push(fixed_ph(self.proton, ph));
            held.push("pH".to_string());
        }
        if let Some(fugacity) = co2 {
            problem.reservoirs.push(self.fixed_co2(fugacity)?);
            held.push("CO2(g)".to_string());
        }
        if let Some(pe) = &self.pe {
            problem.reservoirs.push(pe.clone());
            held.push("pe".to_string());
        }
        problem.reservoirs.extend(self.system.couples_held());
        held.extend(self.system.couples().map(|(couple, _)| couple.to_string()));
        let converged = solve(&problem, self.system.model(), self.settings, warm);
        let converged = converged.map_err(|error| EquilibriumError::named(error, self.system, &held, &[]))?;
        let totals = delivered(&problem, &converged);
        Ok((settled(self.system, totals, &converged), converged))
    }

    /// Solves for totals found before, with what the evidence holds.
    fn again(&self, totals: &[f64]) -> Result<Solved, EquilibriumError> {
        let electroneutral = matches!(self.evidence.ph, Some(Ph::Electroneutral));
        let ph = self.ph.filter(|_| self.evidence.uses("pH") && !electroneutral);
        self.solve_with(totals, ph, self.co2_if(self.evidence.uses("fCO2")), None)
    }

    fn fixed_co2(&self, fugacity: f64) -> Result<Reservoir, EquilibriumError> {
        let gas = self.system.ledger().find_phase("CO2(g)")?;
        let (_, row) = self.system.phase(gas).expect("its components are present with carbon");
        Ok(Reservoir { row: row.clone(), ln_value: fugacity.ln() })
    }

    /// Total carbon from alkalinity at the measured pH.
    fn carbon_from_alkalinity(&self, totals: &[f64]) -> Result<Solved, EquilibriumError> {
        let carbon = self.carbon.expect("an alkalinity brings carbon in");
        let target = self.alkalinity.expect("alkalinity is used");
        let mut last: Option<Solved> = None;
        let mut misses = |ln_total: f64| {
            let mut totals = totals.to_vec();
            totals[carbon] = ln_total.exp();
            let warm = last.as_ref().map(|(_, converged)| converged.warm.clone());
            let solved = self.solve_with(&totals, self.ph, None, warm.as_ref())?;
            let miss = self.alkalinity_of(&solved.0) - target;
            last = Some(solved);
            Ok::<f64, EquilibriumError>(miss)
        };
        let low = scalar::Sample { x: LEAST_CARBON.ln(), f: misses(LEAST_CARBON.ln())? };
        if low.f >= 0.0 {
            return Err(EquilibriumError::ProtonTotal(format!(
                "pH and alkalinity of {} contradict each other: without any carbon its alkalinity would be {:.4e} eq/kg(water), \
                 and it is given as {target:.4e}",
                self.name,
                low.f + target
            )));
        }
        let mut high = scalar::Sample { x: target.abs().max(1e-6).ln(), f: -1.0 };
        loop {
            high.f = misses(high.x)?;
            if high.f > 0.0 {
                break;
            }
            high.x += 4.0_f64.ln();
            if high.x > MOST_CARBON.ln() {
                return Err(EquilibriumError::ProtonTotal(format!(
                    "pH and alkalinity of {} contradict each other: at this pH no amount of carbon gives an alkalinity of {target:.4e} eq/kg(water)",
                    self.name
                )));
            }
        }
        let root = root_between(&mut misses, low, high, ROOT)?;
        misses(root.x)?;
        Ok(last.expect("solved at the root"))
    }

    /// pH from total carbon at the fugacity of CO2.
    fn ph_from_carbon(&self, totals: &[f64]) -> Result<Solved, EquilibriumError> {
        let carbon = self.carbon.expect("DIC brings carbon in");
        let target = self.dic.expect("DIC is used");
        let mut totals = totals.to_vec();
        totals[carbon] = 0.0;
        let mut misses = |ph: f64| {
            let (totals, _) = self.solve_with(&totals, Some(ph), self.co2, None)?;
            Ok::<f64, EquilibriumError>((totals[carbon] / target).ln())
        };
        let unreachable = || {
            EquilibriumError::ProtonTotal(format!(
                "DIC and fCO2 of {} contradict each other: at this fugacity CO2 alone holds more carbon than that",
                self.name
            ))
        };
        let low = scalar::Sample { x: PH_RANGE.0, f: misses(PH_RANGE.0)? };
        if low.f > 0.0 {
            return Err(unreachable());
        }
        // The fugacity cannot be held at every pH: carbonate would run to millions of moles.
        let mut high = scalar::Sample { x: 7.0, f: misses(7.0)? };
        while high.f < 0.0 && high.x < PH_RANGE.1 {
            high.x += 0.5;
            high.f = misses(high.x)?;
        }
        let root = root_between(&mut misses, low, high, ROOT)?;
        let (delivered, _) = self.solve_with(&totals, Some(root.x), self.co2, None)?;
        // The same with the protons known and the gas alone held, which is what the evidence says.
        let gas = self.fixed_co2(1.0)?;
        totals.clone_from(&delivered);
        for (k, nu) in gas.row.stoichiometry {
            totals[k] = delivered[k] - rational::to_f64(nu) * delivered[carbon];
        }
        self.solve_with(&totals, None, self.co2, None)
    }

    /// What the outcome of [`Analysis::solve`] meets, as one square system; `given` are the amounts.
    fn conditions(&self, measured: &Measured, given: &[Carried], pe: Option<&Pe>) -> Option<Conditions> {
        let uses = |key| self.evidence.uses(key);
        let unit = |k: usize| (0..self.protons.len()).map(|own| f64::from(u8::from(own == k))).collect();
        let make_up = measured.make_up.as_ref().map(|key| {
            let position_of = |key: &String| measured.amounts.iter().position(|(_, own, _)| own == key);
            position(self.system, given[position_of(key).expect("checked on entry")].component)
        });
        let balanced = |change: Vec<f64>| match make_up {
            None => change,
            Some(k) => self.neutralised(change, &self.supplied(k)),
        };
        let factor = |amount: &Amount| amount.per.to_basis(&self.solution);

        let mut conditions =
            Conditions { temperature: measured.temperature.clone(), ..Conditions::default() };
        let mut amounts: Vec<&Amount> = measured.amounts.iter().map(|(_, _, amount)| amount).collect();
        for carried in given {
            let change = self.supplied(position(self.system, carried.component));
            let change = change.into_iter().map(|change| change * carried.factor).collect();
            conditions.measured.push((carried.moles.clone(), balanced(change)));
        }
        if let (Some(amount), Some(carbon), true) = (&self.evidence.dic, self.carbon, uses("DIC")) {
            let change = self.supplied(carbon).into_iter().map(|change| change * factor(amount)).collect();
            conditions.measured.push((amount.moles.clone(), balanced(change)));
            amounts.push(amount);
        }
        if let (Some(amount), true) = (&self.evidence.alkalinity, uses("alkalinity")) {
            let change: Vec<f64> = unit(self.proton);
            let change = change.into_iter().map(|change| -change * factor(amount)).collect();
            conditions.measured.push((amount.moles.clone(), balanced(change)));
            amounts.push(amount);
        }
        let water_density = water_density(measured);
        dissolved_mass::account(&mut conditions, &amounts, measured, &self.solution, water_density);
        match &self.evidence.ph {
            Some(Ph::Measured(ph)) if uses("pH") => {
                let supply = match self.carbon {
                    Some(carbon) if uses("alkalinity") => self.supplied(carbon),
                    _ => unit(self.proton),
                };
                let reservoir = fixed_ph(self.proton, ph.value() - self.system.ph_shift());
                let value = Some((ph.clone(), -LN_10));
                conditions.held.push(Held { value, ..Held::chosen(reservoir, balanced(supply)) });
            }
            _ => {}
        }
        if let (Some(fugacity), true) = (&self.evidence.co2, uses("fCO2")) {
            let reservoir = self.fixed_co2(fugacity.value()).ok()?;
            let mut supply = vec![0.0; self.protons.len()];
            for (k, nu) in &reservoir.row.stoichiometry {
                supply[*k] = rational::to_f64(*nu);
            }
            let supply = if uses("DIC") { unit(self.proton) } else { supply };
            conditions.held.push(Held {
                phase: self.system.ledger().find_phase("CO2(g)").ok().cloned(),
                value: Some((fugacity.clone(), 1.0 / fugacity.value())),
                ..Held::chosen(reservoir, balanced(supply))
            });
        }
        if let (Some(reservoir), Some(electron)) = (&self.pe, self.electron) {
            let held = Held::chosen(reservoir.clone(), balanced(unit(electron)));
            conditions.held.push(match pe {
                Some(Pe::Value(electron)) => {
                    let (value, slope) = &electron.value;
                    let value = Some((value.clone(), -LN_10 * slope));
                    Held { value, per_kelvin: -LN_10 * electron.per_kelvin, ..held }
                }
                Some(Pe::Of(couple)) => Held { couple: Some((**couple).clone()), ..held },
                None => held,
            });
        }
        for ((couple, row), reservoir) in self.system.couples().zip(self.system.couples_held()) {
            let supply = balanced(self.kept(self.moles(row)));
            let couple = Some(couple.clone());
            conditions.held.push(Held { couple, ..Held::chosen(reservoir, supply) });
        }
        Some(conditions)
    }

    /// A change of the totals with as many protons as keep what is known of them.
    fn kept(&self, mut change: Vec<f64>) -> Vec<f64> {
        if self.evidence.uses("alkalinity") {
            change[self.proton] = self.others().map(|k| self.protons[k] * change[k]).sum();
        } else if self.is_neutral() {
            change[self.proton] = self.neutral_protons(&change);
        }
        change
    }

    fn is_neutral(&self) -> bool {
        matches!(self.evidence.ph, Some(Ph::Electroneutral)) && self.evidence.uses("pH")
    }

    /// How the totals move when a mole of component `k` more is given: the protons follow what is known of them.
    fn supplied(&self, k: usize) -> Vec<f64> {
        let mut change = vec![0.0; self.protons.len()];
        let electroneutral = self.is_neutral();
        if k != self.proton {
            change[k] = 1.0;
            if self.evidence.uses("alkalinity") {
                change[self.proton] = self.protons[k];
            } else if electroneutral {
                change[self.proton] = self.neutral_protons(&change);
            }
        } else if !self.evidence.uses("alkalinity") && !electroneutral {
            change[k] = 1.0;
        }
        change
    }

    /// A change of the totals together with as much of `by` as keeps the charge.
    fn neutralised(&self, change: Vec<f64>, by: &[f64]) -> Vec<f64> {
        let charge = |change: &[f64]| self.charges.iter().zip(change).map(|(z, t)| z * t).sum::<f64>();
        let share = charge(&change) / charge(by);
        change.iter().zip(by).map(|(change, by)| change - share * by).collect()
    }

    /// Lets one total absorb the charge misfit.
    fn made_up(
        &self,
        totals: &[f64],
        k: usize,
        key: &str,
        notes: &mut Vec<String>,
    ) -> Result<Solved, EquilibriumError> {
        let mut last: Option<Solved> = None;
        let mut misfit = |total: f64| {
            let mut totals = totals.to_vec();
            totals[k] = total;
            let solved = self.solve(&totals)?;
            let charge = (0..totals.len()).map(|k| self.charges[k] * solved.0[k]).sum::<f64>();
            last = Some(solved);
            Ok::<f64, EquilibriumError>(charge)
        };
        let largest = 2.0 * totals.iter().map(|total| total.abs()).sum::<f64>();
        let tolerance = Tolerance { x: 1e-16, f: 1e-17 };
        let roots = scalar::all_roots(&mut misfit, (0.0, largest), ROOT_INTERVALS, tolerance)?.roots;
        let Some(root) = roots.first() else {
            return Err(EquilibriumError::Unreachable(format!(
                "`make_up`: no amount of `{key}` from zero up makes the charges of {} add up",
                self.name
            )));
        };
        misfit(root.x)?;
        notes.push(format!(
            "{key} was changed by {:+.4e} mol/kg(water) to make the charges add up",
            root.x - totals[k]
        ));
        Ok(last.expect("solved at the root"))
    }

    /// Measured values beyond those used, less the computed ones.
    fn misfits(&self, converged: &Converged) -> Vec<Misfit> {
        let unused = self.evidence.given().into_iter().filter(|key| !self.evidence.uses(key));
        unused.filter_map(|key| self.misfit(key, converged)).collect()
    }

    fn misfit(&self, key: &'static str, converged: &Converged) -> Option<Misfit> {
        let (measured, factor, computed, slopes) = match key {
            "pH" => {
                let Some(Ph::Measured(ph)) = &self.evidence.ph else { return None };
                let slope = (Variable::LnActivity(self.proton), -1.0 / LN_10);
                let computed = self.system.ph_shift() - converged.ln_a[self.proton] / LN_10;
                let scale = self.system.ledger().sea().map_or(PhScale::Free, |sea| sea.ph_scale);
                (ph.clone(), 1.0, computed, vec![slope, (Variable::PhShift(scale), 1.0)])
            }
            "alkalinity" | "DIC" => {
                let carbon = self.carbon;
                let (amount, weight): (_, &dyn Fn(&Row) -> f64) = if key == "DIC" {
                    (self.evidence.dic.as_ref()?, &|row| {
                        carbon.map_or(0.0, |carbon| coefficient(row, carbon))
                    })
                } else {
                    (self.evidence.alkalinity.as_ref()?, &|row| self.alkalinity_of(&self.moles(row)))
                };
                let problem = self.system.problem(&vec![0.0; self.system.n_components()]);
                let rows = problem.species.iter().zip(&converged.ln_c).enumerate();
                let slope = |(i, (row, ln_c)): (usize, (&Row, &f64))| {
                    (Variable::LnMolality(i), weight(row) * ln_c.exp())
                };
                let slopes: Slopes = rows.map(slope).filter(|(_, slope)| *slope != 0.0).collect();
                let computed = slopes.iter().map(|(_, slope)| slope).sum();
                (amount.moles.clone(), amount.per.to_basis(&self.solution), computed, slopes)
            }
            _ => {
                let reservoir = self.fixed_co2(1.0).ok()?;
                let fugacity = ln_saturation(&reservoir.row, converged).exp();
                let gas = self.system.ledger().find_phase("CO2(g)").ok()?;
                let slopes = scaled(&saturation_slopes(self.system, gas)?, fugacity);
                (self.evidence.co2.clone()?, 1.0, fugacity, slopes)
            }
        };
        let value = measured.value() * factor - computed;
        Some(Misfit { key, value, measured: (measured, factor), slopes: scaled(&slopes, -1.0) })
    }

    /// The moles of each component in a mole of a species.
    fn moles(&self, row: &Row) -> Vec<f64> {
        (0..self.protons.len()).map(|k| coefficient(row, k)).collect()
    }
}

fn coefficient(row: &Row, component: usize) -> f64 {
    let found = row.stoichiometry.iter().find(|(k, _)| *k == component);
    found.map_or(0.0, |(_, nu)| rational::to_f64(*nu))
}

/// The slopes of a multiple.
pub(super) fn scaled(slopes: &[(Variable, f64)], factor: f64) -> Slopes {
    slopes.iter().map(|(variable, slope)| (*variable, slope * factor)).collect()
}

/// The derivatives of ln of a phase's saturation ratio; `None` where the system cannot form it.
pub(super) fn saturation_slopes(system: &System, phase: &Species) -> Option<Slopes> {
    let (position, (_, row)) = system.phases().enumerate().find(|(_, (own, _))| own.species == *phase)?;
    let components =
        row.stoichiometry.iter().map(|(k, nu)| (Variable::LnActivity(*k), rational::to_f64(*nu)));
    let water = (Variable::LnWaterActivity, row.water);
    Some(components.chain([water, (Variable::PhaseLnK(position), 1.0)]).collect())
}

/// A reservoir of hydrogen ions at a pH.
pub(super) fn fixed_ph(proton: usize, ph: f64) -> Reservoir {
    Reservoir { row: Row::new(&[(proton, 1)], 0.0), ln_value: -ph * LN_10 }
}

/// Totals with what the reservoirs delivered.
pub(super) fn delivered(problem: &Problem, converged: &Converged) -> Vec<f64> {
    let mut totals = problem.totals.clone();
    for (reservoir, amount) in problem.reservoirs.iter().zip(&converged.reservoir_amount) {
        for (k, nu) in &reservoir.row.stoichiometry {
            totals[*k] = totals[*k] + Total::from(rational::to_f64(*nu) * amount);
        }
    }
    totals.into_iter().map(Total::to_f64).collect()
}

/// The totals after couples came to equilibrium: of the states they relate what is dissolved, so that a trace of one is not
/// lost in the rounding of the other, and no electrons.
pub(super) fn settled(system: &System, mut totals: Vec<f64>, converged: &Converged) -> Vec<f64> {
    let related = system.couples().flat_map(|(_, row)| row.stoichiometry.iter().map(|(k, _)| *k));
    let related: BTreeSet<usize> = related.filter(|k| *k != system.proton()).collect();
    let problem = system.problem(&totals);
    for k in related {
        let dissolved = problem.species.iter().zip(&converged.ln_c).map(|(row, ln_c)| {
            let nu = coefficient(row, k);
            if nu == 0.0 { 0.0 } else { nu * ln_c.exp() }
        });
        totals[k] = dissolved.sum();
    }
    if let Some(electron) = system.electron() {
        totals[electron] = 0.0;
    }
    totals
}

/// ln of the activity product of a row over its constant.
pub(super) fn ln_saturation(row: &Row, converged: &Converged) -> f64 {
    let components: f64 =
        row.stoichiometry.iter().map(|(k, nu)| rational::to_f64(*nu) * converged.ln_a[*k]).sum();
    row.ln_k + components + row.water * converged.ln_water_activity
}
