//! Indices of the trade that ask what a water would do: each is one more equilibrium of its dissolved totals.

use super::analysis::ln_saturation;
use super::error::EquilibriumError;
use super::state::State;
use crate::solve::scalar::{self, Tolerance};
use crate::solve::{Reservoir, Settings, solve};
use crate::water::Treatment;

const LN_10: f64 = std::f64::consts::LN_10;
/// ln of the fugacities of CO2, bar, between which the saturation pH is looked for.
const FUGACITIES: (f64, f64) = (-30.0, 5.0);
const FUGACITY_INTERVALS: usize = 20;

/// Calcium carbonate that a water deposits until calcite is at equilibrium, mol/kg(water); negative if it dissolves some.
///
/// # Errors
///
/// Returns that the ledger knows no calcite, or why there is no equilibrium.
pub fn carbonate_potential(state: &State) -> Result<f64, EquilibriumError> {
    let calcite = Treatment::Saturate { solid: "calcite".into(), index: 0.0 };
    let water = state.sample(&[])?.treated(calcite);
    let water = water.map_err(|error| EquilibriumError::Unreachable(error.to_string()))?;
    super::equilibrate(&water, None, &Settings::default())?.solid_amount("calcite")
}

/// pH less the pH at which the same water, with its calcium and alkalinity, would be at equilibrium with calcite.
///
/// Langelier, W.F. (1936) The analytical control of anti-corrosion water treatment, J. Am. Water Works Assoc. 28,
/// 1500-1521 (recalled). That pH is reached by giving or taking CO2, which leaves calcium and alkalinity as they are.
///
/// # Errors
///
/// Returns that the water has no calcium or carbon, or that no amount of CO2 saturates it.
pub fn langelier(state: &State) -> Result<f64, EquilibriumError> {
    let system = state.system();
    let ledger = system.ledger();
    let absent = || EquilibriumError::Unreachable("the water has no calcium or no carbon".into());
    let (_, calcite) = system.phase(ledger.find_phase("calcite")?).ok_or_else(absent)?;
    let (_, gas) = system.phase(ledger.find_phase("CO2(g)")?).ok_or_else(absent)?;
    let mut problem = system.problem(state.dissolved());
    problem.reservoirs.push(Reservoir { row: gas.clone(), ln_value: 0.0 });
    let mut ph = 0.0;
    let mut saturation = |ln_fugacity: f64| {
        problem.reservoirs[0].ln_value = ln_fugacity;
        let converged = solve(&problem, system.model(), &Settings::default(), None);
        let converged =
            converged.map_err(|error| EquilibriumError::named(error, system, &["CO2(g)".into()], &[]))?;
        ph = -converged.ln_a[system.proton()] / LN_10;
        Ok::<f64, EquilibriumError>(ln_saturation(calcite, &converged))
    };
    // With nearly all CO2 taken away carbonate vanishes too, and saturation falls again: of two roots the trade's is the
    // one with more CO2.
    let tolerance = Tolerance { x: 1e-12, f: 1e-12 };
    let roots = scalar::all_roots(&mut saturation, FUGACITIES, FUGACITY_INTERVALS, tolerance)?.roots;
    let Some(root) = roots.last() else {
        let why = "no amount of CO2 brings this water to equilibrium with calcite";
        return Err(EquilibriumError::Unreachable(why.into()));
    };
    saturation(root.x)?;
    Ok(state.ph() - ph)
}
