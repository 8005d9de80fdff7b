//! Reference electrodes and the scale of pe.

use super::constants::{FARADAY, GAS_CONSTANT, LN_10};

/// A reference electrode whose potential against the standard hydrogen electrode is linear in temperature.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Electrode {
    /// The name it is given by.
    pub name: &'static str,
    /// Potential against the standard hydrogen electrode at 25 degC, V; liquid junction included.
    pub potential: f64,
    /// Change with temperature, V/K.
    pub per_kelvin: f64,
}

/// Common reference electrodes, from 10 to 40 degC, to about 3 mV.
///
/// Values in the field manual of Nordstrom, D.K. and Wilde, F.D. (2005) Reduction-oxidation potential (electrode method),
/// U.S. Geological Survey Techniques of Water-Resources Investigations, book 9, chapter A6.5 (recalled, as straight lines
/// through 10 and 40 degC; 0.199 V for silver chloride and 0.244 V for calomel in saturated KCl at 25 degC were seen again).
pub const ELECTRODES: [Electrode; 4] = [
    Electrode { name: "Ag/AgCl saturated KCl", potential: 0.199, per_kelvin: -1.00e-3 },
    Electrode { name: "Ag/AgCl 3.5 mol/L KCl", potential: 0.205, per_kelvin: -0.74e-3 },
    Electrode { name: "Ag/AgCl 3 mol/L KCl", potential: 0.209, per_kelvin: -0.76e-3 },
    Electrode { name: "calomel saturated KCl", potential: 0.244, per_kelvin: -0.67e-3 },
];

/// Temperatures, degC, between which [`ELECTRODES`] hold.
pub const ELECTRODE_RANGE: (f64, f64) = (10.0, 40.0);

impl Electrode {
    /// Potential against the standard hydrogen electrode, V, at a temperature in degC.
    #[must_use]
    pub fn at(&self, celsius: f64) -> f64 {
        self.potential + self.per_kelvin * (celsius - 25.0)
    }
}

/// Volts per unit of pe at a temperature in kelvin: `ln(10) R T/F`, 0.05916 V at 25 degC.
#[must_use]
pub fn volts_per_pe(kelvin: f64) -> f64 {
    LN_10 * GAS_CONSTANT * kelvin / FARADAY
}

#[cfg(test)]
mod tests {
    use super::*;
    use approx::assert_abs_diff_eq;

    #[test]
    fn the_slope_at_room_temperature_is_the_textbook_one() {
        assert_abs_diff_eq!(volts_per_pe(298.15), 0.059_159, epsilon = 1e-6);
    }

    /// Ag/AgCl in saturated KCl: 0.214 V at 10, 0.184 V at 40 degC, the ends of the published table.
    #[test]
    fn electrodes_follow_the_temperature() {
        assert_abs_diff_eq!(ELECTRODES[0].at(10.0), 0.214, epsilon = 1e-12);
        assert_abs_diff_eq!(ELECTRODES[0].at(40.0), 0.184, epsilon = 1e-12);
    }
}
