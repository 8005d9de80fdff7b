//! A gas phase around a water: ideal, saturated with the vapour of water, of given volume or of given pressure.
//!
//! ```text
//! given volume      n_i = (V/RT) p_i             rows with amounts, shift ln(V/RT), V per kilogram of water
//! given pressure    Σ p_i = P - p(H2O)           an ideal mixture, which may vanish
//! ```
//!
//! The mole of vapour itself is not taken from the water: some 20 mg a litre of gas at 25 degC.

use super::assemble::System;
use super::beside::{ActsOn, Host, HostKind, Load, Member, Place, Stated, change};
use super::error::EquilibriumError;
use super::treatment::find;
use crate::chem::Species;
use crate::physics::constants::{BAR, GAS_CONSTANT};
use crate::quantity::Quantity;
use crate::units::{Temperature, Unit};
use crate::water::Sample;
use crate::water::neighbour::{GasPhase, Kept};

/// Moles of an ideal gas in a litre at a bar.
pub(super) fn moles_per_litre_bar(at: Temperature) -> f64 {
    BAR * 1e-3 / (GAS_CONSTANT * at.kelvin())
}

/// Pressure of vapour over pure water, bar: a fit of Antoine type (Buck, A.L. (1981) J. Appl. Meteorol. 20, 1527-1532;
/// recalled), good to 0.1 % between 0 and 50 degC.
pub(super) fn vapour_pressure(at: Temperature) -> f64 {
    let t = at.celsius();
    6.1121e-3 * ((18.678 - t / 234.5) * t / (257.14 + t)).exp()
}

/// Its change per kelvin.
pub(super) fn vapour_slope(at: Temperature) -> f64 {
    let t = at.celsius();
    let exponent =
        (18.678 - 2.0 * t / 234.5) / (257.14 + t) - (18.678 - t / 234.5) * t / ((257.14 + t) * (257.14 + t));
    vapour_pressure(at) * exponent
}

/// A gas phase in indices, with what is in it at the start.
pub(super) fn read(
    gas: &GasPhase,
    sample: &Sample,
    system: &System,
    water: f64,
) -> Result<(Host, Vec<Load>), EquilibriumError> {
    let litres = gas.volume.value() / water;
    let place = match gas.kept {
        Kept::Volume => Place::Rows(0),
        Kept::Pressure(_) => Place::Mixture(0),
    };
    let shift = match place {
        Place::Rows(_) => (litres * moles_per_litre_bar(system.temperature())).ln(),
        Place::Mixture(_) => 0.0,
    };
    // It is filled as the water was when it was analysed.
    let per_bar = moles_per_litre_bar(sample.setting().temperature) * litres;
    let (mut members, mut loads) = (Vec::new(), Vec::new());
    for (name, pressure) in &gas.pressures {
        let species = find(system.ledger(), name, Species::is_gas, "gas")?.clone();
        let (formed, row) = system.phase(&species).expect("its components were brought in");
        let mut row = row.clone();
        row.ln_k += shift;
        let per_litre = per_bar * pressure.value() / gas.volume.value();
        loads.push((
            moles(per_bar * pressure.value(), &[(pressure, per_bar), (&gas.volume, per_litre)])?,
            change(system, &formed.stoichiometry),
        ));
        members.push(Member { species, row });
    }
    let (kind, stated) = match &gas.kept {
        Kept::Volume => {
            let by = 1.0 / gas.volume.value();
            let acts_on = ActsOn::Rows(0..members.len());
            (HostKind::GasOfVolume(litres), Stated { quantity: gas.volume.clone(), acts_on, by })
        }
        Kept::Pressure(pressure) => {
            let dry = pressure.value() - vapour_pressure(system.temperature());
            if dry <= 0.0 {
                return Err(EquilibriumError::Unreachable(format!(
                    "a gas at {pressure} cannot lie over water of {:.1} degC, whose vapour alone has {:.4} bar: the water boils",
                    system.temperature().celsius(),
                    pressure.value() - dry
                )));
            }
            let stated = Stated { quantity: pressure.clone(), acts_on: ActsOn::Target, by: 1.0 / dry };
            (HostKind::GasOfPressure { dry, vapour_slope: vapour_slope(system.temperature()) }, stated)
        }
    };
    Ok((Host { name: gas.name.clone(), kind, members, place, stated: vec![stated] }, loads))
}

/// Moles per kilogram of water with what they depend on.
pub(super) fn moles(value: f64, partials: &[(&Quantity, f64)]) -> Result<Quantity, EquilibriumError> {
    Quantity::from_partials(value, Unit::known("mol/kg(water)"), partials)
        .map_err(|error| EquilibriumError::Unreachable(error.to_string()))
}
