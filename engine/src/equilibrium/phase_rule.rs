//! What a state says of itself beside the solver's certificate: its phases, its charge, and whether it is a solution.

use super::error::EquilibriumError;
use super::state::State;
use crate::physics::water::{MOLES_PER_KG, saturation_pressure};

/// Gibbs' phase rule, F = C - P + 2.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct PhaseRule {
    /// Independent components, water counted: one less than the ledger's, since the charges of a solution add up.
    pub components: usize,
    /// The phases in equilibrium: the solution, the gases and solids whose activity is fixed, the solids present.
    pub phases: Vec<String>,
}

/// Solutes above this, mol per kg of water, leave no solution in water to speak of.
const MOST_SOLUTE: f64 = 1000.0;

impl PhaseRule {
    /// Degrees of freedom, temperature and pressure counted; negative where fixed values had to agree by chance.
    #[must_use]
    pub fn freedom(&self) -> i64 {
        self.components as i64 - self.phases.len() as i64 + 2
    }
}

impl State {
    /// The phase rule for what is there.
    #[must_use]
    pub fn phase_rule(&self) -> PhaseRule {
        let system = self.system();
        let gases = self.of().treatments().iter().filter_map(|treatment| match treatment {
            crate::water::Treatment::OpenTo { gas, .. } => Some(gas.clone()),
            _ => None,
        });
        let solids = self.solids().iter().filter(|solid| solid.amount != 0.0);
        let solids =
            solids.map(|solid| solid.species.mineral_name().unwrap_or(solid.species.key()).to_owned());
        let mut phases: Vec<String> = gases.chain(solids).collect();
        phases.sort();
        phases.dedup();
        phases.insert(0, "solution".to_owned());
        // Water is one more than the solver's components, the charge balance one less.
        PhaseRule { components: system.n_components(), phases }
    }

    /// The charge of the species less that of the dissolved components they are made of, relative to the sum of charges
    /// of either sign: both are the charge misfit of the analysis.
    #[must_use]
    pub fn charge_error(&self) -> f64 {
        let system = self.system();
        let charges = |k: usize| f64::from(system.component_species(k).charge());
        let given: f64 = self.dissolved().iter().enumerate().map(|(k, total)| charges(k) * total).sum();
        let solutes = system.solutes().zip(&self.converged().ln_c);
        let borne = solutes.map(|(formed, ln_c)| f64::from(formed.species.charge()) * ln_c.exp());
        let (sum, size) = borne.fold((0.0, 0.0), |(sum, size), own| (sum + own, size + own.abs()));
        if size == 0.0 { 0.0 } else { (sum - given).abs() / size }
    }

    /// Refuses a composition that is no solution in water.
    pub(super) fn check_dilution(&self) -> Result<(), EquilibriumError> {
        let Some((name, most)) = self.most_solute() else { return Ok(()) };
        if most <= MOST_SOLUTE {
            return Ok(());
        }
        Err(EquilibriumError::BeyondModel(format!("`{name}` would reach {most:.1e} mol/kg(water)")))
    }

    /// What is said of a water that is hardly one: more solute than water, or steam.
    pub(super) fn strange_water(&self) -> Vec<String> {
        let mut said = Vec::new();
        if let Some((name, most)) = self.most_solute()
            && most > MOLES_PER_KG
        {
            said.push(format!(
                "there is more of `{name}`, {most:.0} mol/kg(water), than of water: no constant here holds for that"
            ));
        }
        let (temperature, pressure) = (self.temperature(), self.pressure().bar());
        if let Some(boiling) = saturation_pressure(temperature.kelvin())
            && pressure < boiling * 0.98
        {
            said.push(format!(
                "at {:.0} degC pure water boils below {boiling:.3} bar, and the pressure is {pressure:.3} bar",
                temperature.celsius()
            ));
        }
        said
    }

    /// The solute of the largest molality.
    fn most_solute(&self) -> Option<(String, f64)> {
        let solutes = self.system().solutes().zip(&self.converged().ln_c);
        let most = solutes.max_by(|a, b| a.1.total_cmp(b.1))?;
        Some((most.0.species.to_string(), most.1.exp()))
    }
}
