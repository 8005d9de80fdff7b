//! Profiles of the water column: where in depth a mineral stops being supersaturated.

use crate::equilibrium::{EquilibriumError, State};
use crate::physics::seawater;

/// Depth in metres at which Ω of a mineral falls through 1, by interpolation that is linear in depth; `latitude` in
/// degrees turns the pressures of the states into depths.
///
/// # Returns
///
/// The shallowest such depth; `None` where the column is above, or below, saturation throughout.
///
/// # Errors
///
/// Returns what a state has no answer to.
pub fn saturation_horizon(
    states: &[State],
    mineral: &str,
    latitude: f64,
) -> Result<Option<f64>, EquilibriumError> {
    let mut column = Vec::with_capacity(states.len());
    for state in states {
        let omega = state.get(&format!("Omega({mineral})"));
        let omega = omega.map_err(|error| EquilibriumError::Unreachable(error.to_string()))?;
        let depth = seawater::depth_at_pressure(state.pressure().sea_pressure_dbar(), latitude);
        column.push((depth, omega.value()));
    }
    column.sort_by(|a, b| a.0.total_cmp(&b.0));
    Ok(falls_through(&column, 1.0))
}

/// Where a value known at points of a column, shallowest first, falls through a level.
fn falls_through(column: &[(f64, f64)], level: f64) -> Option<f64> {
    column.windows(2).find_map(|pair| {
        let [(above, high), (below, low)] = pair else { return None };
        let falls = *high >= level && *low < level;
        falls.then(|| above + (below - above) * (high - level) / (high - low))
    })
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_horizon_lies_between_the_bottles_around_it() {
        let column = [(0.0, 3.0), (1000.0, 1.5), (2000.0, 0.5), (3000.0, 0.4)];
        assert_eq!(falls_through(&column, 1.0), Some(1500.0));
        assert_eq!(falls_through(&column, 0.1), None);
        assert_eq!(falls_through(&column[..1], 1.0), None);
    }
}
