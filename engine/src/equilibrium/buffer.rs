//! Buffer intensity: how much strong base raises the pH of a water.
//!
//! ```text
//! β = d alkalinity / d pH = -dT_H / dpH      at constant totals of everything else
//! ```
//!
//! Van Slyke, D.D. (1922) On the measurement of buffer values, J. Biol. Chem. 52, 525-570 (recalled). It is that of the
//! water alone, closed to gases and apart from its solids, and comes exactly from the sensitivities of one solved water.

use super::error::EquilibriumError;
use super::state::State;
use crate::physics::constants::LN_10;
use crate::solve::sensitivity::{Found, Sensitivities};
use crate::solve::{Settings, solve};

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
