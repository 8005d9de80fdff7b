//! A state: what is there at equilibrium, in the user's names and units.

use std::collections::BTreeMap;
use std::sync::{Arc, OnceLock};

use super::acid_base::{ACIDITY_PH, ALKALINITY_PH, ZeroLevel};
use super::activity::assumptions;
use super::analysis::{Analysed, Misfit, Outcome, Solid, ln_saturation, saturation_slopes, scaled};
use super::assemble::{Doubt, System};
use super::buffer::{self, Answering, buffer_factor, buffer_factor_slopes};
use super::error::EquilibriumError;
use super::gas_phase::vapour_pressure;
use super::indices;
use super::observable::{Asked, NAMES, Observable, ObservableError};
use super::redox;
use super::uncertainty::{Influence, Slopes, Stage, Variable};
use crate::chem::{Element, PhScale, Rational, Species, rational};
use crate::ledger::{Formation, Formations, GasModel, Sea};
use crate::physics::constants::LN_10;
use crate::physics::electrode::volts_per_pe;
use crate::physics::{gas_exchange, seawater, virial, water};
use crate::present::{Cell, Column, Table};
use crate::quantity::{Quantity, QuantityError};
use crate::seawater::constants::{outside_ranges, unmatched_pair};
use crate::seawater::scales::Scales;
use crate::solve::Certificate;
use crate::text::list;
use crate::units::{KgOf, Kind, Pressure, Temperature, Unit};
use crate::water::analysis::Setting;
use crate::water::analyte::{Analyte, oxidation_state};
use crate::water::concentration::{SALT_TERM, Solution};
use crate::water::{Dissolved, Sample, Treatment, treatment};

/// A sum smaller than this part of its terms is what rounding left of a zero.
const ROUNDING: f64 = 1e-12;
/// A doubtful constant is worth a warning where its species holds more than this part of a total.
const WORTH_A_WARNING: f64 = 0.01;

/// What is there at equilibrium; cheap to clone.
#[derive(Clone, Debug)]
pub struct State(Arc<Inner>);

#[derive(Debug)]
struct Inner {
    sample: Sample,
    outcome: Outcome,
    /// The outcome of the analysis, where treatments came after it.
    before: Option<Outcome>,
    /// The outcomes linearised, in order, worked out on first need; `None` where they do not change smoothly.
    stages: OnceLock<Option<Vec<Stage>>>,
    pressure: Pressure,
    misfits: Vec<Misfit>,
    notes: Vec<String>,
    /// Molalities in the order of the system's solutes.
    molalities: Vec<f64>,
    /// Dissolved total of each component.
    dissolved: Vec<f64>,
    solution: Solution,
}

/// A number with the unit it is in, what it depends on and, for amounts, what it is an amount of.
pub(super) struct Answer {
    pub(super) value: f64,
    pub(super) unit: &'static str,
    /// Molar mass in g/mol and formula text, where grams may be asked for.
    pub(super) molar_mass: Option<f64>,
    pub(super) element: Option<(Element, f64)>,
    /// Derivatives by what the last stage found.
    pub(super) slopes: Slopes,
    /// Derivatives by other quantities.
    pub(super) partials: Vec<(Quantity, f64)>,
    /// Whether its uncertainty is not worked out.
    pub(super) is_unstated: bool,
}

impl Answer {
    pub(super) fn new(value: f64, unit: &'static str, slopes: Slopes) -> Self {
        Self { value, unit, molar_mass: None, element: None, slopes, partials: vec![], is_unstated: false }
    }

    /// An answer that is a multiple of exp of what the slopes belong to.
    fn exponential(value: f64, unit: &'static str, slopes: Slopes) -> Self {
        Self::new(value, unit, scaled(&slopes, value))
    }
}

impl State {
    /// A state from the outcomes of its one or two stages.
    pub(super) fn new(sample: Sample, analysed: Analysed, outcomes: Vec<Outcome>) -> Self {
        let mut outcomes = outcomes.into_iter().rev();
        let outcome = outcomes.next().expect("every state has an outcome");
        let before = outcomes.next();
        let pressure = sample.setting_after().pressure;
        let molalities: Vec<f64> = outcome.converged.ln_c.iter().map(|ln_c| ln_c.exp()).collect();
        let dissolved = dissolved(&outcome.system, &molalities);
        let solution = solution(&outcome.system, &molalities);
        let Analysed { misfits, notes, .. } = analysed;
        let stages = OnceLock::new();
        Self(Arc::new(Inner {
            sample,
            outcome,
            before,
            stages,
            pressure,
            misfits,
            notes,
            molalities,
            dissolved,
            solution,
        }))
    }

    pub(super) fn outcome(&self) -> &Outcome {
        &self.0.outcome
    }

    /// The sample it is the equilibrium of.
    #[must_use]
    pub fn of(&self) -> &Sample {
        &self.0.sample
    }

    /// The species, constants and activity model it was computed with.
    #[must_use]
    pub fn system(&self) -> &System {
        &self.0.outcome.system
    }

    /// Temperature.
    #[must_use]
    pub fn temperature(&self) -> Temperature {
        self.system().temperature()
    }

    /// Pressure.
    #[must_use]
    pub fn pressure(&self) -> Pressure {
        self.0.pressure
    }

    /// What was checked of the answer.
    #[must_use]
    pub fn certificate(&self) -> &Certificate {
        &self.0.outcome.converged.certificate
    }

    /// pH: -log10 a(H⁺); in seawater on the sample's scale.
    #[must_use]
    pub fn ph(&self) -> f64 {
        self.system().ph_shift() - self.0.outcome.converged.ln_a[self.system().proton()] / LN_10
    }

    /// The kilogram that concentrations are counted per.
    fn basis(&self) -> KgOf {
        self.0.solution.basis
    }

    /// The unit of an answer, which is written per kilogram of water, by the state's own kilogram.
    fn unit(&self, unit: &str) -> Unit {
        match self.basis() {
            KgOf::Water => Unit::parse(unit),
            KgOf::Solution => Unit::parse(&unit.replace("kg(water)", "kg(solution)")),
        }
        .expect("a known unit")
    }

    /// Dissolved total of each component of [`State::system`], mol/kg(water).
    #[must_use]
    pub fn dissolved(&self) -> &[f64] {
        &self.0.dissolved
    }

    /// Amount of a solid that is there, mol/kg(water); 0 of one that is not.
    ///
    /// # Errors
    ///
    /// A name the ledger does not know.
    pub fn solid_amount(&self, name: &str) -> Result<f64, EquilibriumError> {
        let solid = self.system().ledger().find_phase(name)?;
        Ok(self.solid(solid).map_or(0.0, |solid| solid.amount))
    }

    /// The same with its uncertainty.
    ///
    /// # Errors
    ///
    /// A name the ledger does not know.
    pub fn solid_amount_quantity(&self, name: &str) -> Result<Quantity, EquilibriumError> {
        let solid = self.solid(self.system().ledger().find_phase(name)?);
        let slopes = solid.map(|solid| solid.slope).into_iter().collect();
        Ok(self.quantity(solid.map_or(0.0, |solid| solid.amount), slopes))
    }

    /// The temperature in kelvin, where it was measured with an uncertainty.
    #[must_use]
    pub fn temperature_quantity(&self) -> Option<Quantity> {
        self.0.outcome.conditions.as_ref()?.temperature.clone()
    }

    /// Solids that may form or are there without limit.
    #[must_use]
    pub fn solids(&self) -> &[Solid] {
        &self.0.outcome.solids
    }

    pub(super) fn solid(&self, species: &Species) -> Option<&Solid> {
        self.0.outcome.solids.iter().find(|solid| solid.species == *species)
    }

    /// Newton iterations and the like.
    #[must_use]
    pub fn converged(&self) -> &crate::solve::Converged {
        &self.0.outcome.converged
    }

    /// The dissolved totals at this temperature and pressure as a sample, without surroundings; `keep` names solids
    /// whose amounts go along.
    ///
    /// # Errors
    ///
    /// A solid in `keep` that is not there.
    pub fn sample(&self, keep: &[&str]) -> Result<Sample, EquilibriumError> {
        let system = self.system();
        let mut totals = self.dissolved_quantities();
        totals.retain(|(species, _)| *species != Species::electron());
        for name in keep {
            let solid = system.ledger().find_phase(name)?;
            let found = self.solid(solid);
            let found = found
                .ok_or_else(|| EquilibriumError::Unreachable(format!("`{name}` is not there to keep")))?;
            let slopes = if found.amount > 0.0 { vec![found.slope] } else { vec![] };
            totals.push((solid.clone(), self.quantity(found.amount.max(0.0), slopes)));
        }
        let setting =
            Setting { temperature: self.temperature(), pressure: self.pressure(), water: self.water() };
        let name = self.0.sample.name().map(str::to_string);
        let couples = system.couples().map(|(couple, _)| couple.to_string()).collect();
        let dissolved = Dissolved { totals, temperature: self.temperature_quantity(), couples };
        let mut sample = Sample::dissolved(name, setting, dissolved, system.ledger().clone());
        for name in keep {
            let allowed = Treatment::Allow { solid: (*name).into(), above: self.held_at(name)? };
            sample =
                sample.treated(allowed).map_err(|error| EquilibriumError::Unreachable(error.to_string()))?;
        }
        Ok(sample)
    }

    /// The saturation index a solid that is there is held at.
    fn held_at(&self, name: &str) -> Result<f64, EquilibriumError> {
        let ledger = self.system().ledger();
        let wanted = ledger.find_phase(name)?;
        let is_it = |solid: &str| ledger.find_phase(solid).is_ok_and(|own| own == wanted);
        let index = |treatment: &Treatment| match treatment {
            Treatment::Allow { solid, above: index } | Treatment::Saturate { solid, index }
                if is_it(solid) =>
            {
                Some(*index)
            }
            _ => None,
        };
        Ok(self.0.sample.treatments().iter().rev().find_map(index).unwrap_or(0.0))
    }

    /// Kilograms of water: what the sample had, less what evaporated.
    #[must_use]
    pub fn water(&self) -> f64 {
        self.0.sample.setting().water / self.0.outcome.dosed.concentrated
    }

    /// Dissolved total of each component, mol/kg(water), correlated through all they come from.
    #[must_use]
    pub fn dissolved_quantities(&self) -> Vec<(Species, Quantity)> {
        let total = |(k, total): (usize, &f64)| {
            let component = self.system().components()[k];
            let (_, slopes) = self.sum(|formed| rational::to_f64(formed.coefficient(component)));
            (self.system().component_species(k).clone(), self.quantity(*total, slopes))
        };
        self.0.dissolved.iter().enumerate().map(total).collect()
    }

    /// A number of the state in mol/kg(water), with the uncertainty that follows from its slopes.
    pub(super) fn quantity(&self, value: f64, slopes: Slopes) -> Quantity {
        let answer = Answer::new(value, "mol/kg(water)", slopes);
        let unit = self.unit(answer.unit);
        self.with_uncertainty(&answer, value, unit, 1.0)
            .unwrap_or_else(|_| Quantity::exact(value, Unit::one()))
    }

    /// Answers an observable, in the unit asked for or its own.
    ///
    /// # Errors
    ///
    /// Returns what is unknown, or why there is no answer: a saturation index of an element that is not there is
    /// `absent`.
    pub fn get(&self, asked: &str) -> Result<Quantity, ObservableError> {
        self.answer(&Asked::parse(asked)?)
    }

    /// Answers an observable that was read before.
    ///
    /// # Errors
    ///
    /// As [`State::get`].
    pub fn answer(&self, asked: &Asked) -> Result<Quantity, ObservableError> {
        let (answer, value, unit, factor) = self.answer_in_unit(asked)?;
        let fault = |error: QuantityError| no_answer(&asked.observable.to_string(), error.to_string());
        self.with_uncertainty(&answer, value, unit, factor).map_err(fault)
    }

    /// Answers an observable with the number alone, which spares a sweep the derivatives.
    ///
    /// # Errors
    ///
    /// As [`State::get`].
    pub fn number(&self, asked: &Asked) -> Result<(f64, Unit), ObservableError> {
        let (_, value, unit, _) = self.answer_in_unit(asked)?;
        Ok((value, unit))
    }

    /// The derivatives of an observable, in its own unit, by log10 K of the constants and by what was measured.
    ///
    /// # Errors
    ///
    /// As [`State::get`].
    pub fn influence(&self, asked: &Asked) -> Result<Influence, ObservableError> {
        let (answer, _, _, factor) = self.answer_in_unit(asked)?;
        let mut influence = self.influence_on(&answer);
        influence.constants.values_mut().for_each(|slope| *slope *= factor);
        influence.measured.iter_mut().for_each(|(_, slope)| *slope *= factor);
        Ok(influence)
    }

    /// The answer in its own unit, then in the one asked for with the factor between their intervals. Where litres and
    /// kilograms are exchanged the density counts as exact.
    fn answer_in_unit(&self, asked: &Asked) -> Result<(Answer, f64, Unit, f64), ObservableError> {
        let name = asked.observable.to_string();
        let mut answer = self.value(&asked.observable, &name)?;
        // A sum over nothing is -0.
        answer.value += 0.0;
        let own = self.unit(answer.unit);
        let Some(unit) = &asked.unit else {
            let value = answer.value;
            return Ok((answer, value, own, 1.0));
        };
        let convert = |value: f64| self.in_unit(&answer, value, &own, unit, &name);
        let (value, factor) = (convert(answer.value)?, convert(1.0)? - convert(0.0)?);
        Ok((answer, value, unit.per_kg_of(self.basis()), factor))
    }

    fn with_uncertainty(
        &self,
        answer: &Answer,
        value: f64,
        unit: Unit,
        factor: f64,
    ) -> Result<Quantity, QuantityError> {
        if answer.is_unstated || (self.stages().is_none() && !answer.slopes.is_empty()) {
            return Quantity::measured(value, unit, None, "this state");
        }
        let partials = self.influence_on(answer).partials(self.system());
        let partials: Vec<(&Quantity, f64)> = partials.iter().map(|(q, slope)| (q, slope * factor)).collect();
        Quantity::from_partials(value, unit, &partials)
    }

    fn influence_on(&self, answer: &Answer) -> Influence {
        let outcomes = self.0.before.iter().chain([&self.0.outcome]);
        let stages: Vec<_> = outcomes.zip(self.stages().unwrap_or_default()).collect();
        let mut influence = if answer.slopes.is_empty() {
            Influence::default()
        } else {
            Influence::of(&answer.slopes, &stages)
        };
        influence.measured.extend(answer.partials.iter().cloned());
        influence
    }

    fn stages(&self) -> Option<&[Stage]> {
        let outcomes = || self.0.before.iter().chain([&self.0.outcome]);
        self.0.stages.get_or_init(|| outcomes().map(Stage::new).collect()).as_deref()
    }

    fn value(&self, observable: &Observable, asked: &str) -> Result<Answer, ObservableError> {
        let inner = &*self.0;
        let converged = &inner.outcome.converged;
        let plain = |value: f64, unit: &'static str, slopes: Slopes| Ok(Answer::new(value, unit, slopes));
        let nothing = |error: EquilibriumError| no_answer(asked, error.to_string());
        match observable {
            Observable::Ph => plain(self.ph(), "1", self.ph_slopes()),
            Observable::Pe => {
                let (ln_a, slopes) = self.ln_electron(asked)?;
                plain(-ln_a / LN_10, "1", scaled(&slopes, -1.0 / LN_10))
            }
            Observable::Eh => {
                let (ln_a, slopes) = self.ln_electron(asked)?;
                Ok(self.potential(ln_a, &slopes))
            }
            Observable::EhOf(name) => {
                let (ln_a, slopes) = self.ln_electron_of(name, asked)?;
                Ok(self.potential(ln_a, &slopes))
            }
            Observable::PhOn(scale) => {
                let (sea, scales) = self.scales(asked)?;
                let shift = scales.shift_from_free(*scale) - scales.shift_from_free(sea.ph_scale);
                plain(self.ph() + shift, "1", self.ph_slopes_on(*scale))
            }
            Observable::Salinity => {
                plain(self.scales(asked)?.0.salinity, "1", vec![(Variable::Salinity, 1.0)])
            }
            Observable::Revelle => {
                let gamma = self.buffer(Answering::CarbonDioxide, buffer::Added::Carbon).map_err(nothing)?;
                let dic = self.total("C", asked)?;
                let value = dic.value / gamma.value;
                let mut slopes = scaled(&dic.slopes, 1.0 / gamma.value);
                slopes.extend(scaled(&gamma.slopes, -value / gamma.value));
                Ok(Answer { is_unstated: gamma.is_unstated, ..Answer::new(value, "1", slopes) })
            }
            Observable::Buffer(of, by) => self.buffer(*of, *by).map_err(nothing),
            Observable::SubstrateInhibitor => {
                let (k, _) = self.solute("HCO3^-", asked)?;
                let scales = self.scales(asked)?.1;
                let shift = scales.shift_from_free(PhScale::Total) - self.system().ph_shift();
                let ratio = k.map_or(0.0, |k| inner.molalities[k]) * ((self.ph() + shift) * LN_10).exp();
                let mut slopes = scaled(&self.ph_slopes_on(PhScale::Total), LN_10);
                slopes.extend(k.map(|k| (Variable::LnMolality(k), 1.0)));
                Ok(Answer::exponential(ratio, "1", slopes))
            }
            Observable::Temperature => {
                plain(self.temperature().celsius(), "degC", vec![(Variable::Temperature, 1.0)])
            }
            Observable::Pressure => plain(inner.pressure.bar(), "bar", vec![]),
            Observable::Density => plain(inner.solution.density, "kg/L", self.density_slopes()),
            Observable::IonicStrength => {
                plain(converged.ionic_strength, "mol/kg(water)", vec![(Variable::IonicStrength, 1.0)])
            }
            Observable::Alkalinity => {
                let (value, slopes) = self.acid_base(ALKALINITY_PH);
                plain(value, "eq/kg(water)", slopes)
            }
            Observable::Acidity => {
                let (value, slopes) = self.acid_base(ACIDITY_PH);
                plain(-value, "eq/kg(water)", scaled(&slopes, -1.0))
            }
            Observable::Dic => self.total("C", asked),
            Observable::Hardness => {
                let count = |formed: &Formation, symbol| {
                    let element = Element::from_symbol(symbol).expect("a known element");
                    rational::to_f64(formed.species.count(element))
                };
                let (value, slopes) = self.sum(|formed| count(formed, "Ca") + count(formed, "Mg"));
                plain(value, "mol/kg(water)", slopes)
            }
            Observable::ChargeError => {
                let ((cations, by_cations), (anions, by_anions)) = self.charges();
                let sum = cations + anions;
                let mut slopes = scaled(&by_cations, 200.0 * anions / (sum * sum));
                slopes.extend(scaled(&by_anions, -200.0 * cations / (sum * sum)));
                plain(100.0 * (cations - anions) / sum, "%", slopes)
            }
            Observable::ChargeMisfit => {
                let ((cations, mut slopes), (anions, by_anions)) = self.charges();
                slopes.extend(scaled(&by_anions, -1.0));
                plain(cations - anions, "eq/kg(water)", slopes)
            }
            Observable::BufferIntensity => {
                let value = buffer::intensity(self).map_err(nothing)?;
                // Its own derivatives would be second ones: what it is uncertain by is not stated.
                let unit = Unit::parse("eq/kg(water)").expect("a known unit");
                let unstated = Quantity::measured(value, unit, None, "buffer intensity")
                    .map_err(|error| no_answer(asked, error.to_string()))?;
                Ok(Answer { partials: vec![(unstated, 1.0)], ..Answer::new(value, "eq/kg(water)", vec![]) })
            }
            Observable::CarbonatePotential => {
                let potential = indices::carbonate_potential(self).map_err(nothing)?;
                let value = potential.value();
                let answer = Answer::new(value, "mol/kg(water)", vec![]);
                Ok(Answer { molar_mass: Some(100.086), partials: vec![(potential, 1.0)], ..answer })
            }
            Observable::Langelier => {
                let at_saturation = indices::saturation_ph(self).map_err(nothing)?;
                let answer = Answer::new(self.ph() - at_saturation.value(), "1", self.ph_slopes());
                Ok(Answer { partials: vec![(at_saturation, -1.0)], ..answer })
            }
            Observable::Molality(name) => {
                let (k, formed) = self.solute(name, asked)?;
                let value = k.map_or(0.0, |k| inner.molalities[k]);
                let slopes = k.map(|k| (Variable::LnMolality(k), value)).into_iter().collect();
                Ok(amount(value, "mol/kg(water)", &formed.species, slopes))
            }
            Observable::Molarity(name) => {
                let (k, formed) = self.solute(name, asked)?;
                let molality = k.map_or(0.0, |k| inner.molalities[k]);
                let value = molality * inner.solution.basis_per_litre();
                let mut slopes = scaled(&self.basis_per_litre_slopes(), molality);
                slopes.extend(k.map(|k| (Variable::LnMolality(k), value)));
                Ok(amount(value, "mol/L", &formed.species, slopes))
            }
            Observable::Activity(name) => {
                let (ln_a, slopes) = self.ln_activity(name, asked)?;
                Ok(Answer::exponential(ln_a.exp(), "1", slopes))
            }
            Observable::LogActivity(name) => {
                let (ln_a, slopes) = self.ln_activity(name, asked)?;
                plain(ln_a / LN_10, "1", scaled(&slopes, 1.0 / LN_10))
            }
            Observable::Gamma(name) => {
                let (k, _) = self.solute(name, asked)?;
                let k = k.ok_or_else(|| absent(asked))?;
                Ok(Answer::exponential(converged.ln_gamma[k].exp(), "1", vec![(Variable::LnGamma(k), 1.0)]))
            }
            Observable::Total(name) => self.total(name, asked),
            Observable::All(name) => {
                let mut total = self.total(name, asked)?;
                let analyte = Analyte::parse(name).map_err(|error| no_answer(asked, error.to_string()))?;
                let formations = self.system().ledger().formations();
                for solid in &inner.outcome.solids {
                    let formed = formations.formation(&solid.species).expect("solids are formed");
                    let count = atoms(&analyte, formed, formations) / rational::to_f64(analyte.atoms());
                    total.value += solid.amount * count;
                    total.slopes.extend(scaled(&[solid.slope], count));
                }
                self.add_beside(&mut total, |formed| {
                    atoms(&analyte, formed, formations) / rational::to_f64(analyte.atoms())
                });
                Ok(total)
            }
            Observable::SaturationIndex(name) => {
                let (ln_omega, slopes) = self.ln_omega(name, asked)?;
                plain(ln_omega / LN_10, "1", scaled(&slopes, 1.0 / LN_10))
            }
            Observable::Omega(name) => {
                let (ln_omega, slopes) = self.ln_omega(name, asked)?;
                Ok(Answer::exponential(ln_omega.exp(), "1", slopes))
            }
            Observable::EquivalentFraction(name) => self.equivalent_fraction(name, asked),
            Observable::GasVolume(name) => self.gas_volume(name, asked),
            Observable::SurfacePotential(name) => self.surface_potential(name, asked),
            Observable::SurfaceCharge(name) => self.surface_charge(name, asked),
            Observable::Fugacity(name) => {
                let (fugacity, slopes) = self.fugacity(name, asked)?;
                plain(fugacity, "bar", slopes)
            }
            Observable::PartialPressure(name) if self.beside(name).is_some() => {
                self.gas_pressure(name, asked)
            }
            Observable::PartialPressure(name) => {
                let (fugacity, slopes) = self.fugacity(name, asked)?;
                let factor = self.fugacity_factor(name, asked)?;
                plain(fugacity / factor, "bar", scaled(&slopes, 1.0 / factor))
            }
            Observable::MoleFraction(name) => {
                if let Some(answer) = self.fraction_beside(name, asked) {
                    return answer;
                }
                let (fugacity, slopes) = self.fugacity(name, asked)?;
                let per_fraction = self.dry_pressure() * self.fugacity_factor(name, asked)?;
                plain(fugacity / per_fraction, "1", scaled(&slopes, 1.0 / per_fraction))
            }
            Observable::Amount(name) => {
                if let Some(answer) = self.amount_beside(name) {
                    return Ok(answer);
                }
                let species = self.phase(name, asked)?;
                let water = self.water();
                let solid = self.solid(&species);
                let slopes = solid.map(|solid| scaled(&[solid.slope], water)).unwrap_or_default();
                Ok(amount(solid.map_or(0.0, |solid| solid.amount * water), "mol", &species, slopes))
            }
            Observable::Added(name) => self.exchanged(name, asked, 1.0),
            Observable::Removed(name) => self.exchanged(name, asked, -1.0),
            Observable::Misfit(key) => self.misfit(key, asked),
        }
    }

    fn misfit(&self, key: &str, asked: &str) -> Result<Answer, ObservableError> {
        let misfits = &self.0.misfits;
        let misfit = misfits.iter().find(|own| own.key == key).ok_or_else(|| {
            let keys: Vec<&str> = misfits.iter().map(|own| own.key).collect();
            let why = "it was not measured beside what was used; misfits are known of";
            no_answer(asked, format!("{why} {}", list(&keys)))
        })?;
        let unit = match key {
            "pH" => "1",
            "alkalinity" => "eq/kg(water)",
            "fCO2" => "bar",
            _ => "mol/kg(water)",
        };
        // It belongs to the analysis, whatever was done to the water since.
        let analysed = self.0.before.as_ref().unwrap_or(&self.0.outcome);
        let first: Vec<_> = [analysed].into_iter().zip(self.stages().unwrap_or_default()).collect();
        let mut partials = Influence::of(&misfit.slopes, &first).partials(&analysed.system);
        partials.push(misfit.measured.clone());
        Ok(Answer { partials, ..Answer::new(misfit.value, unit, vec![]) })
    }

    /// ln of the activity of the electron.
    fn ln_electron(&self, asked: &str) -> Result<(f64, Slopes), ObservableError> {
        let ln_a = &self.0.outcome.converged.ln_a;
        let electron = self.system().electron().filter(|k| ln_a[*k].is_finite());
        let k = electron.ok_or_else(|| {
            let couples: Vec<String> = self.system().couples().map(|(couple, _)| couple.to_string()).collect();
            let why = match couples.as_slice() {
                [] => "no couple of this water is in equilibrium: name some with `couples`, or ask what one of them gives \
                       alone, as `Eh(Fe(III)/Fe(II))`"
                    .to_string(),
                couples => format!("it has no value where of {} one state is absent", list(couples)),
            };
            no_answer(asked, why)
        })?;
        Ok((ln_a[k], vec![(Variable::LnActivity(k), 1.0)]))
    }

    /// The same as one couple alone has it.
    fn ln_electron_of(&self, name: &str, asked: &str) -> Result<(f64, Slopes), ObservableError> {
        let system = self.system();
        let ledger = system.ledger();
        let couple = redox::find(ledger, name, "Eh").map_err(|error| match error {
            EquilibriumError::Analyte { why, .. } => no_answer(asked, why),
            other => no_answer(asked, other.to_string()),
        })?;
        let there = [&couple.oxidised, &couple.reduced];
        if there.iter().any(|own| **own != Species::water() && system.component(own).is_none()) {
            return Err(absent(asked));
        }
        let ln_a = redox::ln_electron(&couple, system, &self.0.outcome.converged);
        if !ln_a.is_finite() {
            return Err(absent(asked));
        }
        let row = system.couple_row(&couple);
        let per_electron = 1.0 / couple.electrons as f64;
        let others = row.stoichiometry.iter().filter(|(k, _)| Some(*k) != system.electron());
        let mut slopes: Slopes =
            others.map(|(k, nu)| (Variable::LnActivity(*k), rational::to_f64(*nu) * per_electron)).collect();
        slopes.push((Variable::LnWaterActivity, row.water * per_electron));
        let known = ledger.formations().couples();
        slopes.extend(
            known.iter().position(|own| *own == couple).map(|c| (Variable::CoupleLnK(c), per_electron)),
        );
        Ok((ln_a, slopes))
    }

    /// The potential, V, at an ln activity of the electron: `Eh = -(R T/F) ln a(e⁻)`.
    fn potential(&self, ln_a: f64, slopes: &Slopes) -> Answer {
        let kelvin = self.temperature().kelvin();
        let volts = volts_per_pe(kelvin) / LN_10;
        let mut slopes = scaled(slopes, -volts);
        slopes.push((Variable::Temperature, -ln_a * volts / kelvin));
        Answer::new(-ln_a * volts, "V", slopes)
    }

    pub(super) fn ph_slopes(&self) -> Slopes {
        let scale = self.system().ledger().sea().map_or(PhScale::Free, |sea| sea.ph_scale);
        self.ph_slopes_on(scale)
    }

    /// The scales themselves change with temperature, as HSO4^- and HF do.
    fn ph_slopes_on(&self, scale: PhScale) -> Slopes {
        let mut slopes = vec![(Variable::LnActivity(self.system().proton()), -1.0 / LN_10)];
        if scale != PhScale::Free {
            slopes.push((Variable::PhShift(scale), 1.0));
        }
        slopes
    }

    fn buffer(&self, of: Answering, by: buffer::Added) -> Result<Answer, EquilibriumError> {
        let value = buffer_factor(self, of, by)?;
        let slopes = buffer_factor_slopes(self, of, by)?;
        let is_unstated = slopes.is_none();
        Ok(Answer { is_unstated, ..Answer::new(value, "mol/kg(water)", slopes.unwrap_or_default()) })
    }

    /// The sea of a seawater with its scales of pH.
    fn scales(&self, asked: &str) -> Result<(Sea, Scales), ObservableError> {
        self.system().scales().ok_or_else(|| {
            no_answer(
                asked,
                "it is asked of a seawater; outside it pH is -log10 of the activity of H^+".into(),
            )
        })
    }

    /// Fugacity over partial pressure: for CO2 over seawater that of air at one atmosphere, else by the ledger's gas model.
    fn fugacity_factor(&self, gas: &str, asked: &str) -> Result<f64, ObservableError> {
        let phase =
            self.system().ledger().find_phase(gas).map_err(|error| no_answer(asked, error.to_string()))?;
        if self.basis() == KgOf::Solution {
            let (t, air) = (self.temperature().kelvin(), Pressure::ATMOSPHERE.bar());
            return Ok(if phase.key() == "CO2(g)" { gas_exchange::fugacity_factor(t, air) } else { 1.0 });
        }
        match self.system().ledger().gas_model() {
            GasModel::Ideal => Ok(1.0),
            GasModel::Virial => self.virial_factor(phase.key()).map_err(|why| no_answer(asked, why)),
        }
    }

    /// The fugacity coefficient under the pressure of the water, from a second virial coefficient.
    fn virial_factor(&self, gas: &str) -> Result<f64, String> {
        let known =
            || format!("no critical constants are known of `{gas}`: they are of {}", list(&virial::gases()));
        let critical = virial::critical(gas).ok_or_else(known)?;
        let bar = self.pressure().bar();
        let ln_phi = critical.ln_fugacity_coefficient(self.temperature().kelvin(), bar);
        if ln_phi.abs() > virial::MOST_CORRECTION {
            return Err(format!(
                "at {bar:.0} bar `{gas}` is too dense for a second virial coefficient, which holds while B P/(R T) is within \
                 {}; `with_gas_model(\"ideal\")` takes fugacity for pressure",
                virial::MOST_CORRECTION
            ));
        }
        Ok(ln_phi.exp())
    }

    /// `Σ weight · molality` over the solutes.
    fn sum(&self, weight: impl Fn(&Formation) -> f64) -> (f64, Slopes) {
        let terms = self.system().solutes().zip(&self.0.molalities).map(|(formed, m)| weight(formed) * m);
        let slopes = terms.enumerate().map(|(i, term)| (Variable::LnMolality(i), term));
        let slopes: Slopes = slopes.filter(|(_, term)| *term != 0.0).collect();
        (slopes.iter().map(|(_, term)| term).sum(), slopes)
    }

    /// Slopes of the dissolved mass, kg/kg(water).
    fn dissolved_mass_slopes(&self) -> Slopes {
        self.sum(|formed| formed.species.molar_mass().unwrap_or(0.0) / 1000.0).1
    }

    fn basis_per_litre_slopes(&self) -> Slopes {
        if self.basis() == KgOf::Solution {
            return self.density_slopes();
        }
        let (water, per_water) = self.density_terms();
        let mut slopes = scaled(
            &self.dissolved_mass_slopes(),
            -(1.0 - SALT_TERM) * water / (1.0 + (1.0 - SALT_TERM) * per_water).powi(2),
        );
        slopes.push((Variable::Temperature, self.0.solution.water_per_litre() * self.thermal_expansion()));
        slopes
    }

    fn density_slopes(&self) -> Slopes {
        if self.basis() == KgOf::Solution {
            let density = self.0.solution.density;
            return vec![
                (Variable::Temperature, density * self.thermal_expansion()),
                (Variable::Salinity, density * self.haline_contraction()),
            ];
        }
        let (water, per_water) = self.density_terms();
        let slope = SALT_TERM * water / (1.0 + (1.0 - SALT_TERM) * per_water).powi(2);
        let mut slopes = scaled(&self.dissolved_mass_slopes(), slope);
        slopes.push((Variable::Temperature, self.0.solution.density * self.thermal_expansion()));
        slopes
    }

    /// Density of pure water, kg/L, and dissolved mass per mass of water.
    fn density_terms(&self) -> (f64, f64) {
        let solution = &self.0.solution;
        (
            water::density(self.temperature().kelvin()) / 1000.0,
            solution.dissolved / solution.water_per_litre(),
        )
    }

    /// d ln ρ / dT of pure water, in seawater of the seawater, 1/K.
    fn thermal_expansion(&self) -> f64 {
        const STEP: f64 = 0.01;
        let t = self.temperature().kelvin();
        if let Some(sea) = self.system().ledger().sea() {
            let density = |t| seawater::density(t, sea.salinity, sea.hydrostatic_bar());
            return (density(t + STEP) / density(t - STEP)).ln() / (2.0 * STEP);
        }
        (water::density(t + STEP) / water::density(t - STEP)).ln() / (2.0 * STEP)
    }

    /// d ln ρ / dS of seawater.
    fn haline_contraction(&self) -> f64 {
        const STEP: f64 = 0.01;
        let t = self.temperature().kelvin();
        self.system().ledger().sea().map_or(0.0, |sea| {
            let density = |s| seawater::density(t, s, sea.hydrostatic_bar());
            // Forwards, since a salinity may be 0.
            (density(sea.salinity + STEP) / density(sea.salinity)).ln() / STEP
        })
    }

    /// A number in another unit; amounts go between moles and grams and between kilograms and litres.
    fn in_unit(
        &self,
        answer: &Answer,
        value: f64,
        own: &Unit,
        wanted: &Unit,
        asked: &str,
    ) -> Result<f64, ObservableError> {
        let wrong = |error| ObservableError::Unit { asked: asked.to_string(), error };
        let plain = wanted.per_kg_of(self.basis()).with_expressed_as(None);
        if let Some(formula) = wanted.expressed_as() {
            let species = Species::parse(formula).map_err(|error| no_answer(asked, error.to_string()))?;
            return self.expressed(answer, value, own, &plain, &species, asked);
        }
        if let Ok(value) = own.convert(value, &plain) {
            return Ok(value);
        }
        self.across(value, answer.molar_mass, own, &plain, asked).ok_or_else(|| {
            let kind = match answer.unit {
                unit if unit.starts_with("eq") => Some(Kind::Alkalinity),
                unit if unit.starts_with("mol") => Some(Kind::Amount),
                _ => None,
            };
            match kind.map(|kind| kind.check(wanted)) {
                Some(Err(error)) => wrong(error),
                Some(Ok(())) if kind == Some(Kind::Alkalinity) => {
                    no_answer(asked, "a mass of it says not of what: ask for `mg/L as CaCO3`".into())
                }
                _ => wrong(own.convert(1.0, wanted).expect_err("tried above")),
            }
        })
    }

    /// `mg/L as CaCO3`: grams of what an equivalent, or an atom, is counted as.
    fn expressed(
        &self,
        answer: &Answer,
        value: f64,
        own: &Unit,
        plain: &Unit,
        species: &Species,
        asked: &str,
    ) -> Result<f64, ObservableError> {
        let per_unit = if answer.unit.starts_with("eq") {
            if species.key() == "HCO3^-" { 1.0 } else { 2.0 }
        } else {
            match answer.element {
                Some((element, atoms)) => rational::to_f64(species.count(element)) / atoms,
                None => 1.0,
            }
        };
        let mass = species.molar_mass().filter(|_| per_unit > 0.0);
        let mass = mass.ok_or_else(|| no_answer(asked, format!("it cannot be expressed as {species}")))?;
        let value = value / per_unit;
        let own = Unit::parse(&own.symbol().replacen("eq", "mol", 1)).expect("a known unit");
        self.across(value, Some(mass), &own, plain, asked)
            .ok_or_else(|| no_answer(asked, format!("`{}` is no unit of it", plain.symbol())))
    }

    /// Between moles and grams, and between kilograms of water, kilograms of solution and litres.
    fn across(&self, value: f64, molar_mass: Option<f64>, own: &Unit, wanted: &Unit, _: &str) -> Option<f64> {
        let solution = &self.0.solution;
        let numerators = [("mol", 1.0), ("eq", 1.0), ("g", molar_mass.unwrap_or(f64::NAN))];
        let denominators = [
            ("/kg(water)", 1.0),
            ("/L", solution.water_per_litre()),
            ("/kg(solution)", solution.water_per_kilogram()),
            ("", 1.0),
        ];
        let base = |text: &str| Unit::parse(text).expect("a known unit");
        for (from, from_factor) in denominators {
            let Some(start) =
                ["mol", "eq"].iter().find_map(|n| own.convert(value, &base(&format!("{n}{from}"))).ok())
            else {
                continue;
            };
            for (numerator, grams) in numerators {
                for (to, to_factor) in denominators {
                    if (to.is_empty()) != (from.is_empty()) {
                        continue;
                    }
                    let converted = start * grams * to_factor / from_factor;
                    if let Ok(found) = base(&format!("{numerator}{to}")).convert(converted, wanted)
                        && found.is_finite()
                    {
                        return Some(found);
                    }
                }
            }
        }
        None
    }

    /// Sums of charge over cations and over anions, eq/kg(water).
    fn charges(&self) -> ((f64, Slopes), (f64, Slopes)) {
        let charge = |formed: &Formation| f64::from(formed.species.charge());
        (self.sum(|formed| charge(formed).max(0.0)), self.sum(|formed| (-charge(formed)).max(0.0)))
    }

    fn acid_base(&self, ph: f64) -> (f64, Slopes) {
        let level = ZeroLevel::at(self.system().ledger(), ph);
        let (sum, slopes) = self.sum(|formed| rational::to_f64(level.weight(formed)));
        let size: f64 = slopes.iter().map(|(_, term)| term.abs()).sum();
        // What rounding leaves of terms that cancel is the zero it stands for.
        (if f64::abs(sum) <= ROUNDING * size { 0.0 } else { sum }, slopes)
    }

    fn total(&self, name: &str, asked: &str) -> Result<Answer, ObservableError> {
        let analyte = Analyte::parse(name).map_err(|error| no_answer(asked, error.to_string()))?;
        let element = analyte.element();
        let known = self.system().ledger().species().any(|species| species.count(element) != 0.into());
        if !known {
            return Err(no_answer(asked, format!("the ledger has no species of {element}")));
        }
        let per_analyte = rational::to_f64(analyte.atoms());
        let formations = self.system().ledger().formations();
        let (value, slopes) = self.sum(|formed| atoms(&analyte, formed, formations) / per_analyte);
        let answer = Answer::new(value, "mol/kg(water)", slopes);
        Ok(Answer { molar_mass: analyte.molar_mass(), element: Some((element, per_analyte)), ..answer })
    }

    /// A solute with its position, if the elements it is made of are there.
    fn solute(&self, name: &str, asked: &str) -> Result<(Option<usize>, &Formation), ObservableError> {
        let ledger = self.system().ledger();
        let species = ledger.find_species(name).map_err(|error| no_answer(asked, error.to_string()))?;
        if !species.is_solute() {
            return Err(no_answer(asked, format!("{species} is no solute")));
        }
        let formed = ledger.formations().formation(species).expect("just found");
        Ok((self.system().solute(species), formed))
    }

    fn phase(&self, name: &str, asked: &str) -> Result<Species, ObservableError> {
        let found = self.system().ledger().find_phase(name);
        found.cloned().map_err(|error| no_answer(asked, error.to_string()))
    }

    fn ln_activity(&self, name: &str, asked: &str) -> Result<(f64, Slopes), ObservableError> {
        let converged = &self.0.outcome.converged;
        if Species::parse(name).is_ok_and(|species| species == Species::water()) {
            return Ok((converged.ln_water_activity, vec![(Variable::LnWaterActivity, 1.0)]));
        }
        match self.solute(name, asked) {
            Ok((Some(k), _)) => {
                let slopes = vec![(Variable::LnMolality(k), 1.0), (Variable::LnGamma(k), 1.0)];
                Ok((converged.ln_c[k] + converged.ln_gamma[k], slopes))
            }
            Ok((None, _)) => Err(absent(asked)),
            Err(error) => Err(error),
        }
    }

    fn ln_omega(&self, name: &str, asked: &str) -> Result<(f64, Slopes), ObservableError> {
        let phase = self.phase(name, asked)?;
        let (_, row) = self.system().phase(&phase).ok_or_else(|| absent(asked))?;
        let ln_omega = ln_saturation(row, &self.0.outcome.converged);
        let slopes = saturation_slopes(self.system(), &phase).filter(|_| ln_omega.is_finite());
        slopes.map(|slopes| (ln_omega, slopes)).ok_or_else(|| absent(asked))
    }

    fn fugacity(&self, name: &str, asked: &str) -> Result<(f64, Slopes), ObservableError> {
        let phase = self.phase(name, asked)?;
        if !phase.is_gas() {
            return Err(no_answer(asked, format!("{phase} is no gas")));
        }
        match (self.ln_omega(name, asked), self.implied_fugacity(&phase)) {
            (Err(ObservableError::Absent { .. }), Some(implied)) => Ok(implied),
            (found, _) => found.map(|(ln_f, slopes)| (ln_f.exp(), scaled(&slopes, ln_f.exp()))),
        }
    }

    /// The fugacity of oxygen or hydrogen that pe implies where none of it is dissolved.
    fn implied_fugacity(&self, gas: &Species) -> Option<(f64, Slopes)> {
        let (system, converged) = (self.system(), &self.0.outcome.converged);
        let implied = redox::implied(system, converged).into_iter().find(|own| own.gas == *gas)?;
        let fugacity = implied.ln_fugacity.exp();
        Some((fugacity, scaled(&redox::implied_slopes(&implied, system)?, fugacity)))
    }

    /// Total pressure less that of water vapour over pure water, bar; over seawater at one atmosphere.
    fn dry_pressure(&self) -> f64 {
        if let Some(sea) = self.system().ledger().sea() {
            let t = self.temperature().kelvin();
            return Pressure::ATMOSPHERE.bar() - gas_exchange::vapour_pressure(t, sea.salinity);
        }
        self.pressure().bar() - vapour_pressure(self.temperature())
    }

    fn exchanged(&self, name: &str, asked: &str, sign: f64) -> Result<Answer, ObservableError> {
        let outcome = &self.0.outcome;
        let held = outcome.exchanged.iter().enumerate().find(|(_, (own, _))| own == name);
        let dosed: Vec<&Quantity> =
            outcome.dosed.amounts.iter().filter(|(own, _)| own == name).map(|(_, amount)| amount).collect();
        if let (None, Some(formed)) = (held, self.formed(name)) {
            let slopes = scaled(&formed.slopes, -sign);
            let partials =
                formed.partials.iter().map(|(amount, slope)| (amount.clone(), -sign * slope)).collect();
            return Ok(Answer { value: -sign * formed.value, slopes, partials, ..formed });
        }
        if held.is_none() && dosed.is_empty() {
            let names = outcome.exchanged.iter().map(|(own, _)| own.as_str());
            let mut names: Vec<&str> =
                names.chain(outcome.dosed.amounts.iter().map(|(own, _)| own.as_str())).collect();
            names.dedup();
            return Err(no_answer(
                asked,
                format!("nothing of this name was exchanged; there are {}", list(&names)),
            ));
        }
        let exchanged = held.map_or(0.0, |(_, (_, amount))| *amount);
        let amount = exchanged + dosed.iter().map(|amount| amount.value()).sum::<f64>();
        let molar_mass = treatment::substance(name).ok().and_then(|species| species.molar_mass());
        let slopes = held.map(|(f, _)| (Variable::ReservoirAmount(f), sign)).into_iter().collect();
        let partials = dosed.into_iter().map(|amount| (amount.clone(), sign)).collect();
        Ok(Answer { molar_mass, partials, ..Answer::new(sign * amount, "mol/kg(water)", slopes) })
    }

    /// What formed of a solid that may form, less what was there before.
    fn formed(&self, name: &str) -> Option<Answer> {
        let species = self.system().ledger().find_phase(name).ok()?;
        let solid =
            self.solid(species).filter(|solid| matches!(solid.slope.0, Variable::MineralAmount(_)))?;
        let before = self.0.outcome.dosed.solids.iter().filter(|(own, _)| own == species);
        let partials: Vec<(Quantity, f64)> = before.map(|(_, amount)| (amount.clone(), -1.0)).collect();
        let there: f64 = partials.iter().map(|(amount, _)| amount.value()).sum();
        let answer = amount(solid.amount - there, "mol/kg(water)", species, vec![solid.slope]);
        Some(Answer { partials, ..answer })
    }

    /// Everything that can be asked, as a table of forms and meanings.
    #[must_use]
    pub fn observables() -> Table {
        Table::new([
            Column::chemistry("observable", NAMES.iter().map(|(_, form, _)| *form)),
            Column::texts("meaning", NAMES.iter().map(|(.., meaning)| *meaning)),
        ])
        .expect("columns of one length")
    }

    /// A number for a table, with its standard uncertainty where one is known.
    fn cell(&self, value: f64, slopes: Slopes) -> Cell {
        match self.quantity(value, slopes).sigma() {
            Some(sigma) if sigma > 0.0 => Cell::uncertain(value, sigma),
            _ => Cell::number(value),
        }
    }

    /// Solutes from the most to the least abundant; molalities with their uncertainty where it is known.
    #[must_use]
    pub fn species(&self) -> Table {
        let converged = &self.0.outcome.converged;
        let mut order: Vec<usize> = (0..self.0.molalities.len()).collect();
        order.sort_by(|a, b| converged.ln_c[*b].total_cmp(&converged.ln_c[*a]));
        let solutes: Vec<&Formation> = self.system().solutes().collect();
        let numbers = |title: &str, value: &dyn Fn(usize) -> f64| {
            Column::numbers(title, order.iter().map(|k| value(*k)))
        };
        let molality = |k: &usize| {
            let molality = self.0.molalities[*k];
            self.cell(molality, vec![(Variable::LnMolality(*k), molality)])
        };
        Table::new([
            Column::chemistry("species", order.iter().map(|k| solutes[*k].species.key())),
            Column::new(
                match self.basis() {
                    KgOf::Water => "molality [mol/kg(water)]",
                    KgOf::Solution => "concentration [mol/kg(solution)]",
                },
                order.iter().map(molality),
            ),
            numbers("activity", &|k| (converged.ln_c[k] + converged.ln_gamma[k]).exp()),
            numbers("log activity", &|k| (converged.ln_c[k] + converged.ln_gamma[k]) / LN_10),
            numbers("gamma", &|k| converged.ln_gamma[k].exp()),
        ])
        .expect("columns of one length")
    }

    /// Gases and solids that the water's components can form, from the most to the least saturated, with the uncertainty of
    /// what is known.
    #[must_use]
    pub fn phases(&self) -> Table {
        let converged = &self.0.outcome.converged;
        let ledger = self.system().ledger();
        let mut phases: Vec<(&Formation, f64)> = self
            .system()
            .phases()
            .map(|(formed, row)| (formed, ln_saturation(row, converged) / LN_10))
            .collect();
        phases.sort_by(|a, b| {
            (a.0.species.is_gas(), b.1).partial_cmp(&(b.0.species.is_gas(), a.1)).expect("no NaN")
        });
        let amount = |formed: &Formation| {
            let (held, mut slopes) = self.held_beside(&formed.species);
            let solid = self.solid(&formed.species);
            slopes.extend(solid.map(|solid| solid.slope));
            let amount = held + solid.map_or(0.0, |solid| solid.amount);
            if solid.is_none() && held == 0.0 { Cell::missing() } else { self.cell(amount, slopes) }
        };
        let slopes =
            |formed: &Formation| saturation_slopes(self.system(), &formed.species).unwrap_or_default();
        let index = |(formed, index): &(&Formation, f64)| match formed.species.is_gas() {
            true => Cell::missing(),
            false => self.cell(*index, scaled(&slopes(formed), 1.0 / LN_10)),
        };
        let fugacity = |(formed, index): &(&Formation, f64)| {
            let fugacity = 10_f64.powf(*index);
            match formed.species.is_gas() {
                true => self.cell(fugacity, scaled(&slopes(formed), fugacity)),
                false => Cell::missing(),
            }
        };
        let notes: Vec<String> =
            phases.iter().map(|(formed, _)| self.doubt_words(formed).unwrap_or_default()).collect();
        Table::new([
            Column::texts("phase", phases.iter().map(|(formed, _)| ledger.phase_name(&formed.species))),
            Column::chemistry("formula", phases.iter().map(|(formed, _)| formed.species.key())),
            Column::new("SI", phases.iter().map(index)),
            Column::new("fugacity [bar]", phases.iter().map(fugacity)),
            Column::new(
                format!("amount [{}]", self.unit("mol/kg(water)").symbol()).as_str(),
                phases.iter().map(|(formed, _)| amount(formed)),
            ),
            Column::texts("note", notes.iter().map(String::as_str)),
        ])
        .expect("columns of one length")
    }

    /// What a reader of the numbers should know: assumptions, constants used outside their range, the activity model
    /// beyond its own.
    #[must_use]
    pub fn warnings(&self) -> Vec<String> {
        let mut warnings = self.0.notes.clone();
        let certificate = self.certificate();
        if certificate.outside_validity {
            let model = self.system().model();
            warnings.push(format!(
                "ionic strength {:.2} mol/kg(water) is beyond the range of the activity model: the {} holds to {} mol/kg(water)",
                self.0.outcome.converged.ionic_strength,
                model.name(),
                model.valid_to().unwrap_or(f64::INFINITY)
            ));
        }
        warnings.extend(self.strange_water());
        warnings.extend(self.beyond_stability());
        let solutes = self.system().solutes().zip(&self.0.molalities);
        let matter: Vec<(&Species, f64)> = solutes
            .filter(|(formed, molality)| self.matters(formed, **molality))
            .map(|(formed, molality)| (&formed.species, *molality))
            .collect();
        warnings.extend(assumptions(self.system().ledger().activity(), &matter, self.temperature()));
        let mut doubts: BTreeMap<String, Vec<String>> = BTreeMap::new();
        for (formed, molality) in self.system().solutes().zip(&self.0.molalities) {
            if self.matters(formed, *molality) {
                self.add_doubts(formed, &mut doubts);
            }
        }
        for solid in &self.0.outcome.solids {
            if solid.amount != 0.0
                && let Some((formed, _)) = self.system().phase(&solid.species)
            {
                self.add_doubts(formed, &mut doubts);
            }
        }
        warnings.extend(doubts.into_iter().map(|(why, names)| format!("{why}: {}", list(&names))));
        warnings.extend(self.marine_warnings());
        let leftovers = &self.system().ledger().formations().leftovers;
        let names: Vec<&str> = self.system().ledger().names().collect();
        warnings.extend(leftovers.iter().map(|leftover| {
            format!("`{}` was left out: other constants of the ledger imply it", names[leftover.reaction])
        }));
        warnings
    }

    /// What is said where water is not stable at the pe.
    fn beyond_stability(&self) -> Vec<String> {
        let system = self.system();
        let converged = &self.0.outcome.converged;
        let beyond = redox::implied(system, converged).into_iter();
        let beyond = beyond.filter(|own| own.ln_fugacity > redox::STABLE.ln() + ROUNDING);
        let words = |own: redox::Implied| {
            let pe = -converged.ln_a[system.electron().expect("a pe is known")] / LN_10;
            let side = if own.couple.reduced == Species::water() { "above" } else { "below" };
            let left_out = match system.couples().any(|(couple, _)| *couple == own.couple) {
                true => "",
                false => "; water was not taken to be in equilibrium with it",
            };
            format!(
                "pe {pe:.2} lies {side} what water is stable at: it implies {} at {} bar{left_out}",
                own.gas,
                power_of_ten(own.ln_fugacity / LN_10)
            )
        };
        beyond.map(words).collect()
    }

    /// Constants of seawater outside their range, and the convention of a fugacity at depth.
    fn marine_warnings(&self) -> Vec<String> {
        let Some(sea) = self.system().ledger().sea() else { return vec![] };
        let uses =
            |k: usize| self.system().solutes().any(|formed| formed.multiples.iter().any(|(j, _)| *j == k));
        let ledger = self.system().ledger();
        let mut warnings = outside_ranges(ledger, &sea, self.temperature(), uses);
        if self.system().solute(&carbon_dioxide()).is_none() {
            return warnings;
        }
        warnings.extend(unmatched_pair(ledger));
        if sea.hydrostatic_bar() > 0.0 {
            let solubility = ledger.reaction("CO2(g)").ok().and_then(|reaction| reaction.constant().ok());
            let has_volume = solubility.is_some_and(|constant| constant.volume.is_some());
            warnings.push(if has_volume {
                "fCO2 is that of the water at its pressure, by the partial molal volume of CO2; pCO2 and xCO2 are those of \
                 air at one atmosphere with this fugacity"
                    .into()
            } else {
                "fugacities are those of the water at the surface: the constant of CO2(g) has no pressure term; \
                 `.choose(\"CO2(g)\", \"Weiss pressure 1974\")` has"
                    .into()
            });
        }
        warnings
    }

    /// What was chosen where the ledger had a choice, and the scale of pH; nothing outside seawater.
    #[must_use]
    pub fn choices(&self) -> Option<String> {
        let sea = self.system().ledger().sea()?;
        let choices = self.system().ledger().choices();
        // Constants of one publication go together: `K1 K2 Lueker 2000`.
        let mut by_author: Vec<(String, String)> = Vec::new();
        for (name, author) in choices {
            match by_author.last_mut().filter(|(_, last)| *last == author) {
                Some((names, _)) => *names = format!("{names} {name}"),
                None => by_author.push((name, author)),
            }
        }
        let words: Vec<String> =
            by_author.iter().map(|(names, author)| format!("{names} {author}")).collect();
        Some(format!("{}; pH on the {} scale", words.join(", "), sea.ph_scale.word()))
    }

    /// What each species holds of the alkalinity, the largest share first.
    #[must_use]
    pub fn alkalinity_parts(&self) -> Table {
        let level = ZeroLevel::at(self.system().ledger(), ALKALINITY_PH);
        let weigh = |(formed, molality): (&Formation, &f64)| {
            let weight = rational::to_f64(level.weight(formed));
            (formed.species.key().to_string(), weight, weight * molality)
        };
        let mut parts: Vec<(String, f64, f64)> =
            self.system().solutes().zip(&self.0.molalities).map(weigh).filter(|part| part.1 != 0.0).collect();
        parts.sort_by(|a, b| b.2.abs().total_cmp(&a.2.abs()));
        Table::new([
            Column::chemistry("species", parts.iter().map(|(species, ..)| species.as_str())),
            Column::numbers("equivalents per mole", parts.iter().map(|(_, weight, _)| *weight)),
            Column::numbers(
                format!("alkalinity [{}]", self.unit("eq/kg(water)").symbol()).as_str(),
                parts.iter().map(|(.., part)| *part),
            ),
        ])
        .expect("columns of one length")
    }

    fn add_doubts(&self, formed: &Formation, doubts: &mut BTreeMap<String, Vec<String>>) {
        for (reaction, doubt) in self.system().doubts(formed) {
            let names = doubts.entry(words(doubt)).or_default();
            if !names.iter().any(|name| name == reaction) {
                names.push(reaction.to_string());
            }
        }
    }

    fn doubt_words(&self, formed: &Formation) -> Option<String> {
        self.system().doubts(formed).next().map(|(_, doubt)| words(doubt))
    }

    /// Whether a species holds more than a hundredth of one of its components.
    fn matters(&self, formed: &Formation, molality: f64) -> bool {
        let system = self.system();
        formed.stoichiometry.iter().any(|(j, nu)| {
            let k = system.components().iter().position(|own| own == j);
            k.is_some_and(|k| {
                k != system.proton()
                    && rational::to_f64(*nu).abs() * molality > WORTH_A_WARNING * self.0.dissolved[k].abs()
            })
        })
    }
}

fn words(doubt: Doubt) -> String {
    match doubt {
        Doubt::OneTemperature(known) => {
            format!("log K known at {} degC only, and used as it stands", known.celsius())
        }
        Doubt::OutsideRange(by) => format!("log K used {by:.1} K outside its stated range"),
    }
}

/// `3.2e15`, also beyond what a double holds.
fn power_of_ten(log10: f64) -> String {
    // What rounds to 10 counts as 1 of the next power.
    let exponent = (log10 + 1.0 - 9.95_f64.log10()).floor();
    format!("{:.1}e{exponent:.0}", 10_f64.powf(log10 - exponent))
}

fn carbon_dioxide() -> Species {
    Species::parse("CO2(aq)").expect("a formula")
}

pub(super) fn absent(asked: &str) -> ObservableError {
    ObservableError::Absent { asked: asked.into() }
}

pub(super) fn no_answer(asked: &str, why: String) -> ObservableError {
    ObservableError::NoAnswer { asked: asked.into(), why }
}

pub(super) fn amount(value: f64, unit: &'static str, species: &Species, slopes: Slopes) -> Answer {
    let element = species.elements_beside_water().next();
    let element = element.map(|element| (element, rational::to_f64(species.count(element))));
    Answer { molar_mass: species.molar_mass(), element, ..Answer::new(value, unit, slopes) }
}

/// Atoms of an analyte's element in a species, those in its oxidation state if it has one. A complex of several elements
/// does not tell by its formula: FeSO4^+ is iron(III) because it is formed of that ion.
fn atoms(analyte: &Analyte, formed: &Formation, formations: &Formations) -> f64 {
    let element = analyte.element();
    let carried = |(j, nu): &(usize, Rational)| {
        let ion = &formations.components[*j];
        let is_counted = match (analyte.oxidation_state(), oxidation_state(ion, element)) {
            (Some(wanted), Some(own)) => wanted == own,
            // Hydrogen and oxygen of other ions are those of water.
            _ => !matches!(element, Element::H | Element::O),
        };
        if is_counted { ion.count(element) * nu } else { 0.into() }
    };
    rational::to_f64(formed.stoichiometry.iter().map(carried).sum())
}

fn dissolved(system: &System, molalities: &[f64]) -> Vec<f64> {
    let mut totals = vec![0.0; system.n_components()];
    for (formed, molality) in system.solutes().zip(molalities) {
        for (j, nu) in &formed.stoichiometry {
            if let Some(k) = system.components().iter().position(|own| own == j) {
                totals[k] += rational::to_f64(*nu) * molality;
            }
        }
    }
    totals
}

/// Density and dissolved mass of a computed water: with S kg of solutes per kg of water, a litre holds
/// `ρ_w / (1 + (1 - SALT_TERM) S)` kg of water.
fn solution(system: &System, molalities: &[f64]) -> Solution {
    if let Some(sea) = system.ledger().sea() {
        let density = seawater::density(system.temperature().kelvin(), sea.salinity, sea.hydrostatic_bar());
        return Solution::seawater(density / 1000.0, sea.salinity);
    }
    let grams =
        system.solutes().zip(molalities).map(|(formed, m)| formed.species.molar_mass().unwrap_or(0.0) * m);
    let per_water = grams.sum::<f64>() / 1000.0;
    let water_density = water::density(system.temperature().kelvin()) / 1000.0;
    let water_per_litre = water_density / (1.0 + (1.0 - SALT_TERM) * per_water);
    let (density, dissolved) = (water_per_litre * (1.0 + per_water), water_per_litre * per_water);
    Solution { density, dissolved, basis: KgOf::Water }
}
