//! Buffers and the indicator that measurements of pH in seawater are calibrated with, on the total scale.

use crate::units::Temperature;

/// pH(total) of 0.04 mol/kg(water) equimolal tris buffer in synthetic seawater of a practical salinity.
///
/// DelValls and Dickson (1998) Deep-Sea Research I 45, 1541-1554 (recalled).
///
/// # Validity
///
/// Salinity 20 to 40, 0 to 45 degC.
#[must_use]
pub fn ph_of_tris(temperature: Temperature, salinity: f64) -> f64 {
    let (t, s) = (temperature.kelvin(), salinity);
    (11_911.08 - 18.2499 * s - 0.039_336 * s * s) / t - 366.270_59
        + 0.539_936_07 * s
        + 0.000_163_29 * s * s
        + (64.522_43 - 0.084_041 * s) * t.ln()
        - 0.111_498_58 * t
}

/// pH(total) of 0.04 mol/kg(water) equimolal 2-aminopyridine buffer in synthetic seawater.
///
/// Dickson (1993) Marine Chemistry 44, 131-142 (recalled).
///
/// # Validity
///
/// Salinity 30 to 40, 15 to 35 degC.
#[must_use]
pub fn ph_of_aminopyridine(temperature: Temperature, salinity: f64) -> f64 {
    let (t, s) = (temperature.kelvin(), salinity);
    (111.35 + 5.448_75 * s) / t + 41.6775 - 0.015_683 * s - 6.208_15 * t.ln() - (1.0 - 0.001_06 * s).log10()
}

/// pH(total) from the absorbances of m-cresol purple, `ratio` = A(578 nm)/A(434 nm), pure dye in seawater.
///
/// Clayton and Byrne (1993) Deep-Sea Research 40, 2115-2129, with the correction of +0.0047 (recalled).
///
/// # Validity
///
/// Salinity 30 to 37, 20 to 30 degC.
///
/// # Returns
///
/// `None` for a ratio outside that of the two forms of the dye.
#[must_use]
pub fn ph_of_absorbances(ratio: f64, temperature: Temperature, salinity: f64) -> Option<f64> {
    let forms = (ratio - 0.006_91) / (2.2220 - ratio * 0.1331);
    (forms > 0.0).then(|| pk_of_cresol_purple(temperature, salinity) + forms.log10())
}

/// pK2 of m-cresol purple, total scale; same source and validity.
#[must_use]
pub fn pk_of_cresol_purple(temperature: Temperature, salinity: f64) -> f64 {
    1245.69 / temperature.kelvin() + 3.8275 + 0.002_11 * (35.0 - salinity)
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Printed check values at salinity 35 and 25 degC: 8.0936, 6.7866, 8.0056.
    #[test]
    fn buffers_meet_their_printed_values() {
        let t = Temperature::REFERENCE;
        assert!((ph_of_tris(t, 35.0) - 8.0936).abs() < 1e-4);
        assert!((ph_of_aminopyridine(t, 35.0) - 6.7866).abs() < 1e-4);
        assert!((pk_of_cresol_purple(t, 35.0) - 8.0056).abs() < 1e-4);
    }
}
