//! What a measured amount does to all others by its mass.
//!
//! An amount per litre, or per kilogram of solution, becomes one per kilogram of water by what else is dissolved: a
//! milligram more of one substance leaves less water for every other. Small, but a derivative that left it out would be
//! right to four digits only.

use super::uncertainty::Conditions;
use crate::units::KgOf;
use crate::water::analysis::Measured;
use crate::water::concentration::{Amount, Per, SALT_TERM, Solution};

/// Grams per mole that carbonate alkalinity and dissolved carbon are counted with: hydrogencarbonate.
pub const CARBONATE_MASS: f64 = 61.017;

/// The measured alkalinity, else carbon, whose mass is counted.
#[must_use]
pub fn carbonate(measured: &Measured) -> Option<&Amount> {
    measured.evidence.alkalinity.as_ref().or(measured.evidence.dic.as_ref())
}

/// Adds to the change of all totals by each measured amount what it changes through the dissolved mass. `amounts` belong
/// to the entries of `conditions.measured`, in their order; `water_density` in kg/L.
pub fn account(
    conditions: &mut Conditions,
    amounts: &[&Amount],
    measured: &Measured,
    solution: &Solution,
    water_density: f64,
) {
    // In seawater the water content goes with salinity, whatever else was measured.
    if solution.basis == KgOf::Solution {
        return;
    }
    let n_totals = conditions.measured.first().map_or(0, |(_, change)| change.len());
    let slope = |per| per_dissolved(per, solution, measured.density.is_some());
    let mut by_mass = vec![0.0; n_totals];
    for (amount, (moles, change)) in amounts.iter().zip(&conditions.measured) {
        for (total, change) in by_mass.iter_mut().zip(change) {
            *total += moles.value() * change * slope(amount.per);
        }
    }
    let mass = |grams: f64, amount: &Amount| grams / 1000.0 * amount.per.to_litre(water_density);
    for ((analyte, _, amount), (_, change)) in measured.amounts.iter().zip(&mut conditions.measured) {
        let mass = mass(analyte.molar_mass().unwrap_or(0.0), amount);
        change.iter_mut().zip(&by_mass).for_each(|(change, by_mass)| *change += mass * by_mass);
    }
    if let Some(amount) = carbonate(measured) {
        let mass = mass(CARBONATE_MASS, amount);
        let change = by_mass.iter().map(|by_mass| mass * by_mass).collect();
        conditions.measured.push((amount.moles.clone(), change));
    }
}

/// d ln(factor to a kilogram of water) / d(dissolved mass), L/kg. A stated density stays; otherwise salts raise it.
fn per_dissolved(per: Per, solution: &Solution, density_is_stated: bool) -> f64 {
    let denser = if density_is_stated { 0.0 } else { SALT_TERM };
    match per {
        Per::Water => 0.0,
        Per::Litre => (1.0 - denser) / solution.water_per_litre(),
        Per::Solution => (1.0 - denser) / solution.water_per_litre() + denser / solution.density,
    }
}
