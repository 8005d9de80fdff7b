//! How a water resists: its buffer intensity, and the buffer factors of the sea.
//!
//! Buffer intensity is how much strong base raises the pH (Van Slyke, D.D. (1922) On the measurement of buffer values,
//! J. Biol. Chem. 52, 525-570; recalled):
//!
//! ```text
//! β = d alkalinity / d pH = -dT_H / dpH      at constant totals of everything else
//! ```
//!
//! Buffer factors are how CO2, hydrogen ion and carbonate answer to carbon and to alkalinity.
//!
//! ```text
//! γ_X = (∂ ln [CO2]/∂X)⁻¹    β_X = (∂ ln [H^+]/∂X)⁻¹    ω_X = (∂ ln [CO3^2-]/∂X)⁻¹      X = DIC at constant alkalinity, or
//! Revelle factor = DIC/γ_DIC                                                              alkalinity at constant DIC
//! ```
//!
//! Egleston, Sabine and Morel (2010) Global Biogeochemical Cycles 24, GB1002; Revelle and Suess (1957) Tellus 9, 18-27.
//! All are read from the linearised equilibrium of the water alone, closed to gases and apart from its solids, with every
//! acid it holds, so they are the derivatives themselves.

use super::acid_base::{ALKALINITY_PH, ZeroLevel};
use super::assemble::carriers;
use super::error::EquilibriumError;
use super::state::State;
use super::uncertainty::{Slopes, Variable};
use crate::chem::{Element, Species, rational};
use crate::physics::constants::LN_10;
use crate::solve::sensitivity::{Found, Sensitivities};
use crate::solve::{Converged, Problem, Settings, solve};

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

/// Of ln of a concentration, for derivatives of a buffer factor.
const STEP: f64 = 1e-4;

/// A buffer factor, in the unit of the state's totals: mol/kg(water), in seawater mol/kg(solution).
///
/// # Errors
///
/// Returns that the water holds no inorganic carbon.
pub fn buffer_factor(state: &State, of: Answering, by: Added) -> Result<f64, EquilibriumError> {
    BufferFactor::new(state, of, by)?.value()
}

/// The derivatives of a buffer factor by ln of each concentration, by central differences: the linearised equilibrium is
/// one of concentrations where activities are ideal, as in seawater.
///
/// # Returns
///
/// `None` where activity coefficients take part: its uncertainty is not worked out then.
///
/// # Errors
///
/// As [`buffer_factor`].
pub fn buffer_factor_slopes(
    state: &State,
    of: Answering,
    by: Added,
) -> Result<Option<Slopes>, EquilibriumError> {
    if !state.system().ledger().is_marine() {
        return Ok(None);
    }
    let factor = BufferFactor::new(state, of, by)?;
    let slope = |i: usize| {
        let moved = |by: f64| {
            let mut converged = factor.converged.clone();
            converged.ln_c[i] += by;
            factor.at(&converged)
        };
        Ok((Variable::LnMolality(i), (moved(STEP)? - moved(-STEP)?) / (2.0 * STEP)))
    };
    (0..factor.problem.species.len()).map(slope).collect::<Result<Slopes, _>>().map(Some)
}

/// The water alone, closed to gases and apart from its solids, and what is asked of it.
struct BufferFactor<'a> {
    state: &'a State,
    problem: Problem,
    converged: Converged,
    of: Answering,
    by: Added,
}

impl<'a> BufferFactor<'a> {
    fn new(state: &'a State, of: Answering, by: Added) -> Result<Self, EquilibriumError> {
        let system = state.system();
        let problem = system.problem(state.dissolved());
        let converged = solve(&problem, system.model(), &Settings::default(), Some(&state.converged().warm));
        let converged = converged.map_err(|error| EquilibriumError::named(error, system, &[], &[]))?;
        Ok(Self { state, problem, converged, of, by })
    }

    fn value(&self) -> Result<f64, EquilibriumError> {
        self.at(&self.converged)
    }

    /// At concentrations that need not be those of the equilibrium.
    fn at(&self, converged: &Converged) -> Result<f64, EquilibriumError> {
        let (state, problem, system) = (self.state, &self.problem, self.state.system());
        let absent = || EquilibriumError::Unreachable("the water holds no inorganic carbon".into());
        let sensitivities = Sensitivities::new(problem, system.model(), converged, &[]).ok_or_else(absent)?;

        let mut weight = Found::zero(problem);
        match self.of {
            Answering::HydrogenIon => weight.ln_a[system.proton()] = 1.0,
            Answering::CarbonDioxide => {
                weight.ln_c[position(state, "CO2(aq)").ok_or_else(absent)?] = 1.0;
            }
            Answering::Carbonate => weight.ln_c[position(state, "CO3^2-").ok_or_else(absent)?] = 1.0,
        }
        let by_totals = sensitivities.pull(&weight).totals;
        let derivative = match self.by {
            Added::Alkalinity => -by_totals[system.proton()],
            Added::Carbon => {
                let carriers = carriers(system.ledger().formations(), Element::C);
                let carbon =
                    carriers.first().and_then(|j| system.components().iter().position(|own| own == j));
                let carbon = carbon.ok_or_else(absent)?;
                // The protons that carbon of the zero level brings keep the alkalinity.
                let level = ZeroLevel::at(system.ledger(), ALKALINITY_PH);
                let protons = rational::to_f64(level.of_component(system.components()[carbon]));
                by_totals[carbon] + protons * by_totals[system.proton()]
            }
        };
        Ok(1.0 / derivative)
    }
}

/// Equivalents of strong base per kilogram of water and unit of pH.
///
/// # Errors
///
/// Returns that the water does not change smoothly, or that its pH would not change at all.
pub fn intensity(state: &State) -> Result<f64, EquilibriumError> {
    let fault = |why: &str| EquilibriumError::Unreachable(why.into());
    let system = state.system();
    let problem = system.problem(state.dissolved());
    // As solved, the water may have had a pH held, or gases and solids around it.
    let alone = solve(&problem, system.model(), &Settings::default(), None)
        .map_err(|error| EquilibriumError::named(error, system, &[], &[]))?;
    let sensitivities = Sensitivities::new(&problem, system.model(), &alone, &[])
        .ok_or_else(|| fault("the water does not change smoothly here"))?;
    let mut weight = Found::zero(&problem);
    weight.ln_a[system.proton()] = -1.0 / LN_10;
    let by_protons = sensitivities.pull(&weight).totals[system.proton()];
    if by_protons < 0.0 { Ok(-1.0 / by_protons) } else { Err(fault("its pH does not answer to a base")) }
}

fn position(state: &State, species: &str) -> Option<usize> {
    state.system().solute(&Species::parse(species).ok()?)
}
