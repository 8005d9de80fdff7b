//! Treatments that move the conserved totals: what dissolves, what is taken away, water that evaporates or is added.
//!
//! They act in the order given, each linear in the totals T of the water it meets, all per kilogram of water:
//!
//! ```text
//! dose, remove          T ± ν m
//! concentrate           f T
//! add a solution        (w T + r c ν) / (w + r w')     r litres of it per litre of water; w, w' kg of water in a litre of each
//! ```

use super::analysis::{self, Analysed};
use super::assemble::System;
use super::error::EquilibriumError;
use super::treatment::reagent;
use crate::chem::{Rational, Species, rational};
use crate::physics::{seawater, water};
use crate::quantity::Quantity;
use crate::units::{KgOf, Unit};
use crate::water::concentration::{Amount, SALT_TERM, Solution};
use crate::water::{Analysis, Dose, Sample, Titrant, Treatment};

/// What was done to the totals.
#[derive(Debug, Clone)]
pub struct Dosed {
    /// Reagents with moles per kilogram of water that dissolved; negative where they were taken away.
    pub amounts: Vec<(String, Quantity)>,
    /// Solids that were put beside the water, mol/kg(water).
    pub solids: Vec<(Species, Quantity)>,
    /// How many times as much a kilogram of water holds of what was there at first.
    pub concentrated: f64,
}

impl Default for Dosed {
    fn default() -> Self {
        Self { amounts: vec![], solids: vec![], concentrated: 1.0 }
    }
}

/// Totals on their way through the treatments.
pub(super) struct Course<'a> {
    sample: &'a Sample,
    system: &'a System,
    /// Total of each component, mol/kg(water).
    pub totals: Vec<f64>,
    /// What the totals are sums of, beside what an analysis fixed, with the change of every total per unit.
    pub measured: Vec<(Quantity, Vec<f64>)>,
    pub dosed: Dosed,
    /// Whether the totals are still those of the analysis.
    untouched: bool,
}

impl<'a> Course<'a> {
    /// The totals after the sample's treatments.
    ///
    /// # Errors
    ///
    /// A reagent that the ledger has no species for, or more taken away than there is.
    pub fn run(
        sample: &'a Sample,
        system: &'a System,
        analysed: &Analysed,
    ) -> Result<Self, EquilibriumError> {
        let mut course = Self {
            sample,
            system,
            totals: analysed.totals.clone(),
            measured: analysed.measured.clone(),
            dosed: Dosed::default(),
            untouched: true,
        };
        if let Analysis::Dissolved(dissolved) = sample.analysis() {
            let solids = dissolved.totals.iter().filter(|(species, _)| species.is_solid());
            course.dosed.solids.extend(solids.cloned());
        }
        for treatment in sample.treatments() {
            course.meet(treatment)?;
        }
        Ok(course)
    }

    fn meet(&mut self, treatment: &Treatment) -> Result<(), EquilibriumError> {
        match treatment {
            Treatment::Dose(dose) => {
                let change = self.change(&reagent(self.system.ledger(), &dose.reagent)?);
                self.dose(&dose.reagent, &dose.amount, &change, 1.0)
            }
            Treatment::Remove(dose) => {
                let change = self.change(&reagent(self.system.ledger(), &dose.reagent)?);
                self.check_there(dose, &change)?;
                self.dose(&dose.reagent, &dose.amount, &change, -1.0)
            }
            Treatment::WithSolid { solid, amount } => {
                let ledger = self.system.ledger();
                let formed =
                    ledger.formations().formation(ledger.find_phase(solid)?).expect("phases are formed");
                let change = self.change(&formed.stoichiometry);
                let factor = amount.per.to_basis(&self.litre());
                self.add(&amount.moles, &change, factor);
                self.dosed.solids.push((formed.species.clone(), per_water(&amount.moles, factor)?));
                Ok(())
            }
            Treatment::Concentrate(_) if self.system.ledger().sea().is_some() => {
                let why = "`concentrate` would change the salinity that the constants of seawater hold for: write the water as \
                           `seawater(#{ salinity: … })` of its new salinity";
                Err(EquilibriumError::Unreachable(why.into()))
            }
            Treatment::Concentrate(factor) => {
                self.concentrate(*factor);
                Ok(())
            }
            Treatment::AddSolution { volume, sample_volume, solution } => {
                self.add_solution(*volume, sample_volume, solution)
            }
            _ => Ok(()),
        }
    }

    fn dose(
        &mut self,
        name: &str,
        amount: &Amount,
        change: &[f64],
        sign: f64,
    ) -> Result<(), EquilibriumError> {
        let factor = sign * amount.per.to_basis(&self.litre());
        self.add(&amount.moles, change, factor);
        self.dosed.amounts.push((name.to_string(), per_water(&amount.moles, factor)?));
        Ok(())
    }

    /// Adds moles of something, with the change of every total per mole.
    pub(super) fn add(&mut self, moles: &Quantity, change: &[f64], factor: f64) {
        for (total, change) in self.totals.iter_mut().zip(change) {
            *total += change * factor * moles.value();
        }
        self.measured.push((moles.clone(), change.iter().map(|change| change * factor).collect()));
        self.untouched = false;
    }

    fn concentrate(&mut self, factor: f64) {
        let scale = |numbers: &mut Vec<f64>| numbers.iter_mut().for_each(|number| *number *= factor);
        scale(&mut self.totals);
        self.measured.iter_mut().for_each(|(_, change)| scale(change));
        let solids = self.dosed.solids.iter_mut().map(|(_, amount)| amount);
        for amount in self.dosed.amounts.iter_mut().map(|(_, amount)| amount).chain(solids) {
            *amount = per_water(amount, factor).unwrap_or_else(|_| amount.clone());
        }
        self.dosed.concentrated *= factor;
        self.untouched = false;
    }

    fn add_solution(
        &mut self,
        volume: f64,
        sample_volume: &Quantity,
        solution: &Titrant,
    ) -> Result<(), EquilibriumError> {
        // Seawater is counted by the kilogram of solution, and so is what comes to it.
        let water = self.litre().basis_per_litre();
        let added = Solution::with_salts(self.pure_density(), solution.dissolved());
        let added_water = match self.litre().basis {
            KgOf::Water => added.water_per_litre(),
            KgOf::Solution => added.density,
        };
        let ratio = volume / sample_volume.value();
        let whole = water + ratio * added_water;
        self.concentrate(water / whole);
        let mut brought = vec![0.0; self.totals.len()];
        for (formula, moles) in &solution.solutes {
            let change = self.change(&reagent(self.system.ledger(), formula)?);
            self.add(moles, &change, ratio / whole);
            self.dosed.amounts.push((formula.clone(), per_water(moles, ratio / whole)?));
            brought.iter_mut().zip(&change).for_each(|(sum, change)| *sum += change * moles.value());
        }
        // A larger sample is diluted less: dT/dr = (c ν - w' T) / (w + r w'), dr/dV = -r/V.
        let by_volume = brought
            .iter()
            .zip(&self.totals)
            .map(|(brought, total)| -(brought - added_water * total) / whole * ratio / sample_volume.value());
        self.measured.push((sample_volume.clone(), by_volume.collect()));
        Ok(())
    }

    /// Moles of every component of the system in a mole of a substance.
    fn change(&self, parts: &[(usize, Rational)]) -> Vec<f64> {
        let mut change = vec![0.0; self.system.n_components()];
        for (j, nu) in parts {
            if let Some(k) = self.system.components().iter().position(|own| own == j) {
                change[k] += rational::to_f64(*nu);
            }
        }
        change
    }

    /// Refuses to take away more than there is; hydrogen has no least.
    fn check_there(&self, dose: &Dose, change: &[f64]) -> Result<(), EquilibriumError> {
        let wanted = dose.amount.moles.value() * dose.amount.per.to_basis(&self.litre());
        let proton = self.system.proton();
        let most = (0..change.len())
            .filter(|k| *k != proton && change[*k] > 0.0)
            .map(|k| (self.totals[k].max(0.0) / change[k], k))
            .min_by(|a, b| a.0.total_cmp(&b.0));
        match most {
            Some((most, k)) if wanted > most * (1.0 + 1e-12) => Err(EquilibriumError::Unreachable(format!(
                "`remove`: {} mol/kg(water) of `{}` is more than there is; the water holds {} of {}, so {} can be taken away",
                short(wanted),
                dose.reagent,
                short(self.totals[k]),
                self.system.component_species(k),
                short(most),
            ))),
            _ => Ok(()),
        }
    }

    /// What a litre holds, as volumes were measured: of an analysis, as its own amounts per litre were read.
    fn litre(&self) -> Solution {
        if let (Some(measured), true) = (self.sample.measured(), self.untouched) {
            return analysis::solution(measured);
        }
        if let Some(sea) = self.system.ledger().sea() {
            return Solution::seawater(self.seawater_density(sea.salinity), sea.salinity);
        }
        let molar_mass = |k| self.system.component_species(k).molar_mass().unwrap_or(0.0);
        let grams = self.totals.iter().enumerate().map(|(k, total)| total * molar_mass(k));
        let per_water = grams.sum::<f64>().max(0.0) / 1000.0;
        let water_per_litre = self.pure_density() / (1.0 + (1.0 - SALT_TERM) * per_water);
        let (density, dissolved) = (water_per_litre * (1.0 + per_water), water_per_litre * per_water);
        Solution { density, dissolved, basis: KgOf::Water }
    }

    /// kg/L where volumes were measured, at the surface.
    fn seawater_density(&self, salinity: f64) -> f64 {
        let at = self.sample.measured().and_then(|measured| measured.volume_temperature);
        seawater::density(at.unwrap_or_else(analysis::laboratory).kelvin(), salinity, 0.0) / 1000.0
    }

    /// kg/L of pure water where volumes were measured.
    fn pure_density(&self) -> f64 {
        let at = self.sample.measured().and_then(|measured| measured.volume_temperature);
        water::density(at.unwrap_or_else(analysis::laboratory).kelvin()) / 1000.0
    }
}

fn per_water(moles: &Quantity, factor: f64) -> Result<Quantity, EquilibriumError> {
    let unit = Unit::parse("mol/kg(water)").expect("a known unit");
    Quantity::from_partials(moles.value() * factor, unit, &[(moles, factor)])
        .map_err(|error| EquilibriumError::Unreachable(error.to_string()))
}

/// A number of five digits, for messages.
pub(super) fn short(number: f64) -> String {
    format!("{number:.4e}").parse::<f64>().unwrap_or(number).to_string()
}
