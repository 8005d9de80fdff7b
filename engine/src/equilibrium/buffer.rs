//! Buffer factors: how CO2, hydrogen ion and carbonate answer to carbon and to alkalinity.
//!
//! ```text
//! γ_X = (∂ ln [CO2]/∂X)⁻¹    β_X = (∂ ln [H^+]/∂X)⁻¹    ω_X = (∂ ln [CO3^2-]/∂X)⁻¹      X = DIC at constant alkalinity, or
//! Revelle factor = DIC/γ_DIC                                                              alkalinity at constant DIC
//! ```
//!
//! Egleston, Sabine and Morel (2010) Global Biogeochemical Cycles 24, GB1002; Revelle and Suess (1957) Tellus 9, 18-27.
//! They are read from the linearised equilibrium of the water closed off, with every acid it holds, so they are the
//! derivatives themselves.

use super::acid_base::{ALKALINITY_PH, ZeroLevel};
use super::assemble::carriers;
use super::error::EquilibriumError;
use super::state::State;
use crate::chem::{Element, Species, rational};
use crate::solve::sensitivity::{Found, Sensitivities};
use crate::solve::{Settings, solve};

/// What answers.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Answering {
    /// γ.
    CarbonDioxide,
    /// β.
    HydrogenIon,
    /// ω.
    Carbonate,
}

/// What is added.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Added {
    /// Inorganic carbon, at constant alkalinity.
    Carbon,
    /// Alkalinity, at constant inorganic carbon.
    Alkalinity,
}

/// A buffer factor, in the unit of the state's totals: mol/kg(water), in seawater mol/kg(solution).
///
/// # Errors
///
/// Returns that the water holds no inorganic carbon.
pub fn buffer_factor(state: &State, of: Answering, by: Added) -> Result<f64, EquilibriumError> {
    let system = state.system();
    let absent = || EquilibriumError::Unreachable("the water holds no inorganic carbon".into());
    let problem = system.problem(state.dissolved());
    let converged = solve(&problem, system.model(), &Settings::default(), Some(&state.converged().warm));
    let converged = converged.map_err(|error| EquilibriumError::named(error, system, &[], &[]))?;
    let sensitivities = Sensitivities::new(&problem, system.model(), &converged, &[]).ok_or_else(absent)?;

    let mut weight = Found::zero(&problem);
    match of {
        Answering::HydrogenIon => weight.ln_a[system.proton()] = 1.0,
        Answering::CarbonDioxide => weight.ln_c[position(state, "CO2(aq)").ok_or_else(absent)?] = 1.0,
        Answering::Carbonate => weight.ln_c[position(state, "CO3^2-").ok_or_else(absent)?] = 1.0,
    }
    let by_totals = sensitivities.pull(&weight).totals;
    let derivative = match by {
        Added::Alkalinity => -by_totals[system.proton()],
        Added::Carbon => {
            let carriers = carriers(system.ledger().formations(), Element::C);
            let carbon = carriers.first().and_then(|j| system.components().iter().position(|own| own == j));
            let carbon = carbon.ok_or_else(absent)?;
            // The protons that carbon of the zero level brings keep the alkalinity.
            let level = ZeroLevel::at(system.ledger(), ALKALINITY_PH);
            let protons = rational::to_f64(level.of_component(system.components()[carbon]));
            by_totals[carbon] + protons * by_totals[system.proton()]
        }
    };
    Ok(1.0 / derivative)
}

fn position(state: &State, species: &str) -> Option<usize> {
    state.system().solute(&Species::parse(species).ok()?)
}
