//! CO2 between seawater and air: fugacity, partial pressure and mole fraction in dry air.
//!
//! ```text
//! f = p exp((B + 2 δ) P/(R T))          p = x (P - p_H2O)
//! ```
//!
//! B is the second virial coefficient of CO2 and δ its cross term with air, the mole fraction of CO2 being small; P is the
//! pressure of the air, not of the water: a fugacity in the deep is that of the water brought to the surface at its
//! temperature, as the constant of Weiss (1974) is used without its pressure term.

use super::constants::{BAR, STANDARD_ATMOSPHERE};

/// Gas constant of Weiss (1974), cm3 atm/(mol K).
const R_CM3_ATM: f64 = 82.057_46;

/// The fugacity of CO2 in air over its partial pressure, at T kelvin.
///
/// Weiss (1974) Marine Chemistry 2, 203-215, equation 9 (recalled).
///
/// # Validity
///
/// 0 to 40 degC, mole fractions of CO2 up to some per mille.
#[must_use]
pub fn fugacity_factor(t: f64, air_bar: f64) -> f64 {
    let air_atm = air_bar * BAR / STANDARD_ATMOSPHERE;
    ((virial_coefficient(t) + 2.0 * cross_virial_coefficient(t)) * air_atm / (R_CM3_ATM * t)).exp()
}

/// Second virial coefficient of CO2, cm3/mol, at T kelvin. Weiss (1974), equation 6 (recalled); -8 to 40 degC.
#[must_use]
pub fn virial_coefficient(t: f64) -> f64 {
    -1636.75 + (12.0408 + (-3.279_57e-2 + 3.165_28e-5 * t) * t) * t
}

/// Cross virial term of CO2 and air, cm3/mol, at T kelvin. Weiss (1974), equation 11 (recalled); 0 to 40 degC.
#[must_use]
pub fn cross_virial_coefficient(t: f64) -> f64 {
    57.7 - 0.118 * t
}

/// Vapour pressure of seawater of a practical salinity, bar, at T kelvin.
///
/// Weiss and Price (1980) Marine Chemistry 8, 347-359, equation 10 (recalled).
///
/// # Validity
///
/// Salinity to 40, 0 to 40 degC; 0.1 % below the vapour pressure of pure water at salinity 0.
#[must_use]
pub fn vapour_pressure(t: f64, salinity: f64) -> f64 {
    let t = t / 100.0;
    let atm = (24.4543 - 67.4509 / t - 4.8489 * t.ln() - 0.000_544 * salinity).exp();
    atm * STANDARD_ATMOSPHERE / BAR
}

/// [CO2] of water in equilibrium with moist air at one atmosphere, per mole fraction of CO2 in dry air:
/// mol/(kg(solution) atm), at T kelvin.
///
/// Weiss and Price (1980), table 6 (recalled): K0, vapour pressure and fugacity in one, a second route to them.
#[must_use]
pub fn moist_air_solubility(t: f64, salinity: f64) -> f64 {
    let t = t / 100.0;
    (-162.8301 + 218.2968 / t + 90.9241 * t.ln() - 1.476_96 * t * t
        + salinity * (0.025_695 - 0.025_225 * t + 0.004_986_7 * t * t))
        .exp()
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Printed check values of the guide of 2007, procedure 24: B = -123.2 and δ = 22.5 cm3/mol at 25 degC.
    #[test]
    fn virial_coefficients_meet_their_printed_values() {
        assert!((virial_coefficient(298.15) + 123.2).abs() < 0.05);
        assert!((cross_virial_coefficient(298.15) - 22.5).abs() < 0.05);
        assert!((fugacity_factor(298.15, 1.01325) - 0.996_81).abs() < 5e-6);
    }

    /// Computed apart from this code to ten digits: ln of the vapour pressure in atm.
    #[test]
    fn vapour_pressure_meets_its_check_values() {
        for (s, t, ln) in [(20.0, 30.0, -3.184_297_384), (38.0, 25.0, -3.486_581_713)] {
            assert!(((vapour_pressure(t + 273.15, s) / 1.01325).ln() - ln).abs() < 7e-10);
        }
    }
}
