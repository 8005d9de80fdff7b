//! From the derivatives of a solve to those by published constants and measured values.
//!
//! An answer depends on what its last stage found, that on constants and totals, and these totals on what the stage before
//! delivered and on what was measured. The chain rule runs backwards along this: one transposed solve a stage.
//!
//! Every stage is looked at as one square system, however it was solved: what was held, however it was met, is a
//! reservoir that delivers what the totals were moved by.
//!
//! | met by | held | delivers |
//! |---|---|---|
//! | a reservoir | pH, fugacity, saturation | what it holds |
//! | carbon, at a known alkalinity and pH | pH | carbon, with the protons that keep the alkalinity |
//! | protons, at a known carbon and fugacity | fugacity | protons |
//! | a reagent | pH | the reagent |
//! | electrons | pe, Eh, a couple's pe | electrons |
//! | a reaction between oxidation states | a couple's equilibrium | the reaction, with the protons that keep an alkalinity |
//!
//! An alkalinity, electroneutrality and a total that makes the charges add up are linear in the totals: they turn what is
//! delivered, or measured, into a direction in which all totals move.

use std::collections::BTreeMap;

use super::activity::{ParameterEffect, parameter_effects};
use super::analysis::Outcome;
use super::assemble::System;
use super::beside::Beside;
use crate::activity::Composition;
use crate::chem::{PhScale, Reaction, Species, rational};
use crate::ledger::{Constituent, Couple, Formation};
use crate::physics::constants::LN_10;
use crate::quantity::{Input, Part, Quantity};
use crate::seawater::scales::{ByScales, makers};
use crate::solve::sensitivity::{Found, Given, Sensitivities};
use crate::solve::{Mineral, Problem, Reservoir};
use crate::units::{Temperature, Unit};

/// log10 units of standard uncertainty per kelvin away from the one temperature a constant is known at: an assumption of
/// this project.
pub const SIGMA_PER_KELVIN: f64 = 0.01;
/// How the names of inputs begin that stand for it.
pub(super) const UNKNOWN_SLOPE: &str = "d log K / dT of";
/// Kelvin; derivatives by temperature and salinity are central differences of constants, never of equilibria.
const TEMPERATURE_STEP: f64 = 0.01;
/// Practical salinity, or this part of one that is lower.
const SALINITY_STEP: f64 = 0.01;

/// What an answer can depend on directly.
#[derive(Debug, Clone, Copy, PartialEq)]
pub enum Variable {
    /// ln of the activity of a component.
    LnActivity(usize),
    /// ln of the molality of a solute.
    LnMolality(usize),
    /// ln γ of a solute.
    LnGamma(usize),
    /// Ionic strength.
    IonicStrength,
    /// ln of the activity of water.
    LnWaterActivity,
    /// What a reservoir delivered.
    ReservoirAmount(usize),
    /// The amount of a mineral.
    MineralAmount(usize),
    /// ln of the amount of a row beside the solution.
    LnOther(usize),
    /// ln of the amount of a member of a mixture.
    LnMember(usize, usize),
    /// ln K of a gas or solid, by its position in [`System::phases`].
    PhaseLnK(usize),
    /// ln K of a species that need not be in the system, by its position in the ledger's formations.
    FormationLnK(usize),
    /// ln K of a redox couple, by its position in the ledger's list of couples.
    CoupleLnK(usize),
    /// What is added to pH on the free scale to have it on another.
    PhShift(PhScale),
    /// Temperature, K.
    Temperature,
    /// Practical salinity.
    Salinity,
}

/// What constants are functions of, and may itself be uncertain.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
enum Ambient {
    Temperature,
    Salinity,
}

/// A system a little above and a little below in one of these.
struct Neighbours {
    above: System,
    below: System,
    step: f64,
}

impl Ambient {
    const ALL: [Self; 2] = [Self::Temperature, Self::Salinity];

    /// What it was measured as; none where it was chosen.
    fn stated(self, outcome: &Outcome) -> Option<Quantity> {
        match self {
            Self::Temperature => outcome.conditions.as_ref()?.temperature.clone(),
            Self::Salinity => outcome.system.ledger().sea()?.stated_salinity,
        }
    }

    fn neighbours(self, system: &System) -> Option<Neighbours> {
        let warmed = |kelvin: f64| Some(system.at(Temperature::from_kelvin(kelvin).ok()?));
        let (value, step, at): (f64, f64, &dyn Fn(f64) -> Option<System>) = match self {
            Self::Temperature => (system.temperature().kelvin(), TEMPERATURE_STEP, &warmed),
            Self::Salinity => {
                let salinity = system.ledger().sea()?.salinity;
                (salinity, SALINITY_STEP * salinity.min(1.0), &|salinity| system.at_salinity(salinity))
            }
        };
        (step > 0.0).then(|| Some(Neighbours { above: at(value + step)?, below: at(value - step)?, step }))?
    }
}

impl Neighbours {
    /// Change per unit of something computed from a system.
    fn per_unit(&self, of: impl Fn(&System) -> f64) -> f64 {
        (of(&self.above) - of(&self.below)) / (2.0 * self.step)
    }
}

/// Derivatives of an answer by what the last stage found.
pub type Slopes = Vec<(Variable, f64)>;

/// What an outcome meets, as one square system.
#[derive(Debug, Clone, Default)]
pub struct Conditions {
    /// What is held, in the order of the solver's reservoirs.
    pub held: Vec<Held>,
    /// Solids that may form, in the order of the solver's minerals.
    pub minerals: Vec<MayForm>,
    /// What is beside the water.
    pub beside: Beside,
    /// Measured values that the totals are sums of, each with the change of every total per unit of it. Empty where the
    /// totals are those that the stage before delivered.
    pub measured: Vec<(Quantity, Vec<f64>)>,
    /// Temperature in kelvin where it was measured; none where it was chosen.
    pub temperature: Option<Quantity>,
    /// What the totals that the stage before delivered were multiplied by, if they were concentrated.
    pub concentrated: Option<f64>,
}

/// Something held.
#[derive(Debug, Clone)]
pub struct Held {
    /// The equation.
    pub reservoir: Reservoir,
    /// The gas or solid whose constant it involves.
    pub phase: Option<Species>,
    /// Or the redox couple.
    pub couple: Option<Couple>,
    /// Change of every total per mole delivered.
    pub supply: Vec<f64>,
    /// The measured value with the derivative of `ln_value` by it; none where it was chosen.
    pub value: Option<(Quantity, f64)>,
    /// Change of `ln_value` per kelvin, where it follows from the temperature as a potential does.
    pub per_kelvin: f64,
}

impl Held {
    /// A value that was chosen, held by delivering what it is the activity of.
    #[must_use]
    pub fn chosen(reservoir: Reservoir, supply: Vec<f64>) -> Self {
        Self { reservoir, phase: None, couple: None, supply, value: None, per_kelvin: 0.0 }
    }

    /// The reaction whose constant it involves.
    fn formed<'a>(&'a self, system: &'a System) -> Option<&'a Formation> {
        let phase = self.phase.as_ref().and_then(|phase| system.phase(phase)).map(|(formed, _)| formed);
        phase.or(self.couple.as_ref().map(|couple| &couple.reduction))
    }

    /// Whether it is a pH.
    fn is_ph(&self, system: &System) -> bool {
        let row = &self.reservoir.row.stoichiometry;
        self.formed(system).is_none() && matches!(row.as_slice(), [(k, _)] if *k == system.proton())
    }

    /// Its ln K in a system.
    fn ln_k(&self, system: &System) -> f64 {
        let phase = self.phase.as_ref().and_then(|phase| system.phase(phase)).map(|(_, row)| row.ln_k);
        let couple = || self.couple.as_ref().map(|couple| system.couple_row(couple).ln_k);
        phase.or_else(couple).unwrap_or(0.0)
    }
}

/// A solid that may form.
#[derive(Debug, Clone)]
pub struct MayForm {
    /// The solid.
    pub species: Species,
    /// Its equation.
    pub mineral: Mineral,
    /// The value its target was stated as, with the derivative of `ln_target` by it; none where it was chosen.
    pub value: Option<(Quantity, f64)>,
}

/// The derivatives of one answer by everything it comes from.
#[derive(Debug, Clone, Default)]
pub struct Influence {
    /// By log10 K of each of the ledger's reactions, by their order, its own value alone.
    pub constants: BTreeMap<usize, f64>,
    /// By measured values, by enthalpies and the like of constants, and by their unknown dependence on temperature.
    pub measured: Vec<(Quantity, f64)>,
}

/// A stage linearised about its outcome.
#[derive(Debug)]
pub struct Stage {
    sensitivities: Sensitivities,
    zero: Found,
    /// By temperature and salinity, where they are uncertain.
    by_ambient: Vec<(Ambient, Given)>,
    /// Uncertain parameters of the activity model, with the change of everything given per unit.
    by_parameters: Vec<(Quantity, Given)>,
}

impl Stage {
    /// Linearises an outcome; `None` where it does not change smoothly.
    #[must_use]
    pub fn new(outcome: &Outcome) -> Option<Self> {
        let conditions = outcome.conditions.as_ref()?;
        let problem = Problem {
            reservoirs: conditions.held.iter().map(|held| held.reservoir.clone()).collect(),
            minerals: conditions.minerals.iter().map(|formed| formed.mineral.clone()).collect(),
            ..conditions.beside.extend(outcome.system.problem(&outcome.totals))
        };
        let supplies: Vec<Vec<f64>> = conditions.held.iter().map(|held| held.supply.clone()).collect();
        let sensitivities =
            Sensitivities::new(&problem, outcome.system.model(), &outcome.converged, &supplies)?;
        let mut by_ambient = Vec::new();
        for ambient in Ambient::ALL.into_iter().filter(|ambient| ambient.stated(outcome).is_some()) {
            let neighbours = ambient.neighbours(&outcome.system)?;
            by_ambient.push((ambient, given_per_unit(outcome, conditions, &problem, ambient, &neighbours)));
        }
        let by_parameters = by_parameters(outcome, &problem);
        Some(Self { sensitivities, zero: Found::zero(&problem), by_ambient, by_parameters })
    }
}

impl Influence {
    /// What an answer of the last of `stages` (each with the outcome it linearises) comes from.
    #[must_use]
    pub fn of(slopes: &[(Variable, f64)], stages: &[(&Outcome, &Stage)]) -> Self {
        let mut influence = Self::default();
        let Some(((outcome, last), before)) = stages.split_last() else { return influence };
        let mut weight = last.zero.clone();
        for (variable, slope) in slopes {
            match *variable {
                Variable::LnActivity(k) => weight.ln_a[k] += slope,
                Variable::LnMolality(i) => weight.ln_c[i] += slope,
                Variable::LnGamma(i) => weight.ln_gamma[i] += slope,
                Variable::IonicStrength => weight.ionic_strength += slope,
                Variable::LnWaterActivity => weight.ln_water_activity += slope,
                Variable::ReservoirAmount(f) => weight.reservoir_amount[f] += slope,
                Variable::MineralAmount(p) => weight.mineral_amount[p] += slope,
                Variable::LnOther(i) => weight.others[i] += slope,
                Variable::LnMember(p, k) => weight.mixtures[p][k] += slope,
                Variable::PhaseLnK(p) => {
                    let (formed, _) = outcome.system.phases().nth(p).expect("a phase of the system");
                    influence.add_constants(&outcome.system, formed, *slope);
                    influence.add_constant_ambient(outcome, *slope, |system| {
                        system.phases().nth(p).map_or(0.0, |(_, row)| row.ln_k)
                    });
                }
                Variable::FormationLnK(i) => {
                    let formed = &outcome.system.ledger().formations().species[i];
                    influence.add_constants(&outcome.system, formed, *slope);
                    influence.add_constant_ambient(outcome, *slope, |system| system.formation_ln_k(formed));
                }
                Variable::CoupleLnK(c) => {
                    let couples = outcome.system.ledger().formations().couples();
                    influence.add_constants(&outcome.system, &couples[c].reduction, *slope);
                    influence
                        .add_constant_ambient(outcome, *slope, |system| system.couple_row(&couples[c]).ln_k);
                }
                Variable::PhShift(scale) => {
                    influence.add_shift(&outcome.system, scale, *slope);
                    influence.add_constant_ambient(outcome, *slope, |system| system.ph_shift_on(scale));
                }
                Variable::Temperature => influence.add_ambient(outcome, Ambient::Temperature, *slope),
                Variable::Salinity => influence.add_ambient(outcome, Ambient::Salinity, *slope),
            }
        }
        let none = vec![0.0; outcome.totals.len()];
        let mut by_totals = influence.add_stage(outcome, last, &weight, &none);
        for (outcome, stage) in before.iter().rev() {
            // What it delivered: the totals it began with, and what its reservoirs gave.
            let mut weight = stage.zero.clone();
            let held = outcome.conditions.iter().flat_map(|conditions| &conditions.held);
            for (amount, held) in weight.reservoir_amount.iter_mut().zip(held) {
                *amount = dot(&held.supply, &by_totals);
            }
            by_totals = influence.add_stage(outcome, stage, &weight, &by_totals);
        }
        influence
    }

    /// Adds the inputs of one stage and returns the derivatives by the totals it began with.
    fn add_stage(&mut self, outcome: &Outcome, stage: &Stage, weight: &Found, direct: &[f64]) -> Vec<f64> {
        let Some(conditions) = &outcome.conditions else { return direct.to_vec() };
        let by = stage.sensitivities.pull(weight);
        let system = &outcome.system;
        for (formed, slope) in system.solutes().zip(&by.ln_k) {
            self.add_constants(system, formed, *slope);
        }
        for (held, slope) in conditions.held.iter().zip(&by.reservoirs) {
            if let Some(formed) = held.formed(system) {
                self.add_constants(system, formed, -slope);
            }
            if let Some((value, by_value)) = &held.value {
                self.measured.push((value.clone(), slope * by_value));
            }
            if let (true, Some(sea)) = (held.is_ph(system), system.ledger().sea()) {
                self.add_shift(system, sea.ph_scale, slope * LN_10);
            }
        }
        for (solid, slope) in conditions.minerals.iter().zip(&by.minerals) {
            if let Some((formed, _)) = system.phase(&solid.species) {
                self.add_constants(system, formed, -slope);
            }
            if let Some((value, by_value)) = &solid.value {
                self.measured.push((value.clone(), slope * by_value));
            }
        }
        for host in &conditions.beside.hosts {
            let (by_ln_k, by_sizes) = host.slopes(&by);
            for (species, slope) in by_ln_k {
                if let Some(formed) = system.ledger().formations().formation(species) {
                    self.add_constants(system, formed, slope);
                }
            }
            self.measured.extend(by_sizes);
        }
        for (ambient, change) in &stage.by_ambient {
            self.add_ambient(outcome, *ambient, product(&by, change));
        }
        for (parameter, change) in &stage.by_parameters {
            self.measured.push((parameter.clone(), product(&by, change)));
        }
        let by_totals: Vec<f64> = by.totals.iter().zip(direct).map(|(by, direct)| by + direct).collect();
        for (quantity, change) in &conditions.measured {
            self.measured.push((quantity.clone(), dot(change, &by_totals)));
        }
        let concentrated = conditions.concentrated.unwrap_or(1.0);
        by_totals.into_iter().map(|by_total| by_total * concentrated).collect()
    }

    /// Adds the constants behind a row of the solver, given the derivative by its ln K.
    fn add_constants(&mut self, system: &System, formed: &Formation, by_ln_k: f64) {
        if by_ln_k == 0.0 {
            return;
        }
        for (k, multiple) in &formed.multiples {
            let by_log_k = by_ln_k * LN_10 * rational::to_f64(*multiple);
            *self.constants.entry(*k).or_default() += by_log_k;
            self.add_scales(system, system.by_scales(*k), by_log_k);
            // An enthalpy acts differently on stages of different temperature, so it is counted stage by stage.
            if let Some(influences) = influences(system, *k) {
                self.measured.push((influences, by_log_k));
            }
            if let Some((slope, away)) = unknown_slope(system, *k) {
                self.measured.push((slope, by_log_k * away));
            }
        }
    }

    /// Adds what a shift between scales of pH is made of.
    fn add_shift(&mut self, system: &System, scale: PhScale, by_shift: f64) {
        if let Some((_, scales)) = system.scales() {
            self.add_scales(system, scales.by(scale), -by_shift);
        }
    }

    /// Adds the constants of HSO4^- and HF and the totals of sulfate and fluoride, given the derivative by a log10 that they
    /// act on.
    fn add_scales(&mut self, system: &System, acts: ByScales, by_log: f64) {
        if acts == ByScales::default() || by_log == 0.0 {
            return;
        }
        let ledger = system.ledger();
        let shares = [("total sulfate", acts.sulfate), ("total fluoride", acts.fluoride)];
        for (maker, (total, share)) in makers(ledger).into_iter().zip(shares) {
            if let (Some(k), true) = (maker, share != 0.0) {
                *self.constants.entry(k).or_default() -= by_log * share;
            }
            let ratio = ledger.composition().find(|own| own.name == total).map(Constituent::factor);
            if let Some(ratio) = ratio.filter(|ratio| share != 0.0 && ratio.sigma().is_some()) {
                self.measured.push((ratio, by_log * share / LN_10));
            }
        }
    }

    fn add_ambient(&mut self, outcome: &Outcome, ambient: Ambient, by_unit: f64) {
        if let Some(stated) = ambient.stated(outcome) {
            self.measured.push((stated, by_unit));
        }
    }

    /// Adds what a number computed from constants contributes through an uncertain temperature or salinity.
    fn add_constant_ambient(&mut self, outcome: &Outcome, slope: f64, of: impl Fn(&System) -> f64) {
        for ambient in Ambient::ALL {
            if let (Some(stated), Some(neighbours)) =
                (ambient.stated(outcome), ambient.neighbours(&outcome.system))
            {
                self.measured.push((stated, slope * neighbours.per_unit(&of)));
            }
        }
    }

    /// The inputs as quantities, each with the derivative by it.
    #[must_use]
    pub fn partials(&self, system: &System) -> Vec<(Quantity, f64)> {
        let mut partials = self.measured.clone();
        for (k, (_, reaction)) in system.ledger().reactions().enumerate() {
            if let (Some(slope), Ok(constant)) = (self.constants.get(&k), reaction.constant()) {
                let log_k = Quantity::from_parts(0.0, Unit::one(), constant.history.parts());
                partials.push((log_k, *slope));
            }
        }
        partials
    }
}

/// What acts on log10 K beside the stated value, at the system's temperature: enthalpies, parameters of conversions.
fn influences(system: &System, reaction: usize) -> Option<Quantity> {
    let (_, reaction) = system.ledger().reactions().nth(reaction)?;
    let influences = reaction.constant().ok()?.history.influences();
    let parts: Vec<Part> = influences.iter().map(|influence| influence.at(system.temperature())).collect();
    let acts = parts.iter().any(|part| part.sensitivity != 0.0);
    acts.then(|| Quantity::from_parts(0.0, Unit::one(), parts))
}

/// d log10 K / dT of a constant known at one temperature only, as an input of its own, with the distance in kelvin.
fn unknown_slope(system: &System, reaction: usize) -> Option<(Quantity, f64)> {
    let known = system.known_only_at(reaction)?;
    let (name, reaction) = system.ledger().reactions().nth(reaction)?;
    let slope = Quantity::of_input(0.0, Unit::one(), assumed_slope(name, reaction, known)?);
    Some((slope, system.temperature().kelvin() - known.kelvin()))
}

/// The input that stands for the change with temperature of a constant `known` at one temperature only.
pub fn assumed_slope(name: &str, reaction: &Reaction, known: Temperature) -> Option<Input> {
    let label = format!("change of log K of `{name}` with temperature, per K (assumed)");
    let identity = format!("{UNKNOWN_SLOPE} {} known at {} K", reaction.equation(), known.kelvin());
    Input::named(&identity, &label, Some(SIGMA_PER_KELVIN)).ok()
}

/// Change of everything the solver was given, per unit of temperature or salinity, at given composition.
fn given_per_unit(
    outcome: &Outcome,
    conditions: &Conditions,
    problem: &Problem,
    ambient: Ambient,
    neighbours: &Neighbours,
) -> Given {
    let solutes = SolutesOf::new(outcome, problem);
    let (above, below) = (&neighbours.above, &neighbours.below);
    let per_unit = |above: f64, below: f64| (above - below) / (2.0 * neighbours.step);
    let ln_gammas = |system: &System| system.model().ln_gammas(solutes.composition());
    let mut given = Given::zero(problem);
    given.ln_water_activity =
        neighbours.per_unit(|system| system.model().ln_water_activity(solutes.composition()));
    let rows = above.problem(&outcome.totals).species.into_iter().zip(below.problem(&outcome.totals).species);
    for (i, (above, below)) in rows.enumerate() {
        given.ln_k[i] = per_unit(above.ln_k, below.ln_k);
    }
    let changes = ln_gammas(above).into_iter().zip(ln_gammas(below));
    given.ln_gamma = changes.map(|(above, below)| per_unit(above, below)).collect();
    for (value, held) in given.reservoirs.iter_mut().zip(&conditions.held) {
        // A pH is held on a scale that changes with both, a potential changes with temperature.
        *value = if held.formed(&outcome.system).is_some() {
            -neighbours.per_unit(|system| held.ln_k(system))
        } else if held.is_ph(&outcome.system) {
            neighbours.per_unit(System::ph_shift) * LN_10
        } else if ambient == Ambient::Temperature {
            held.per_kelvin
        } else {
            0.0
        };
    }
    for (value, solid) in given.minerals.iter_mut().zip(&conditions.minerals) {
        let ln_k = |system: &System| system.phase(&solid.species).map_or(0.0, |(_, row)| row.ln_k);
        *value = -neighbours.per_unit(ln_k);
    }
    if ambient == Ambient::Temperature {
        let ln_k = |species: &Species| {
            neighbours.per_unit(|system| system.formed_row(species).map_or(0.0, |row| row.ln_k))
        };
        for host in &conditions.beside.hosts {
            host.add_temperature(&mut given, outcome.system.temperature(), &ln_k);
        }
    }
    given
}

/// Change of everything the solver was given, per unit of each uncertain parameter of the activity model.
fn by_parameters(outcome: &Outcome, problem: &Problem) -> Vec<(Quantity, Given)> {
    let solutes = SolutesOf::new(outcome, problem);
    let species: Vec<&Species> = outcome.system.solutes().map(|formed| &formed.species).collect();
    let (choice, model) = (outcome.system.ledger().activity(), outcome.system.model());
    let effects = parameter_effects(choice, model, &species, solutes.composition());
    let given = |ParameterEffect { parameter, ln_gamma, ln_water_activity }| {
        (parameter, Given { ln_gamma, ln_water_activity, ..Given::zero(problem) })
    };
    effects.into_iter().map(given).collect()
}

/// The solutes of an outcome, as the activity model asks for them.
struct SolutesOf {
    charges: Vec<f64>,
    molalities: Vec<f64>,
    ionic_strength: f64,
}

impl SolutesOf {
    fn new(outcome: &Outcome, problem: &Problem) -> Self {
        Self {
            charges: problem.species.iter().map(|row| row.charge).collect(),
            molalities: outcome.converged.ln_c.iter().map(|ln_c| ln_c.exp()).collect(),
            ionic_strength: outcome.converged.ionic_strength,
        }
    }

    fn composition(&self) -> Composition<'_> {
        let (charges, molalities) = (&self.charges, &self.molalities);
        Composition { charges, molalities, ionic_strength: self.ionic_strength }
    }
}

/// `Σ derivative · change` over everything given.
fn product(by: &Given, change: &Given) -> f64 {
    dot(&by.ln_k, &change.ln_k)
        + dot(&by.ln_gamma, &change.ln_gamma)
        + by.ln_water_activity * change.ln_water_activity
        + dot(&by.totals, &change.totals)
        + dot(&by.reservoirs, &change.reservoirs)
        + dot(&by.minerals, &change.minerals)
        + dot(&by.others, &change.others)
        + by.mixtures.iter().zip(&change.mixtures).map(|(by, change)| dot(by, change)).sum::<f64>()
}

fn dot(a: &[f64], b: &[f64]) -> f64 {
    a.iter().zip(b).map(|(a, b)| a * b).sum()
}
