//! Seawater as far as scales of pH need it: ionic strength, water content, total sulfate and fluoride, and the constants
//! of HSO4^- and HF.
//!
//! `salinity` is practical salinity, `temperature_k` in kelvin; amounts are per kilogram of solution unless said otherwise.

/// Ionic strength, mol/kg(water): 19.924 S/(1000 - 1.005 S).
///
/// Dickson, Sabine and Christian (2007) PICES Special Publication 3, chapter 5 (recalled).
#[must_use]
pub fn ionic_strength(salinity: f64) -> f64 {
    19.924 * salinity / (1000.0 - 1.005 * salinity)
}

/// Mass of water in a kilogram of solution, kg: 1 - 0.001005 S, from the same source.
#[must_use]
pub fn water_content(salinity: f64) -> f64 {
    1.0 - 0.001_005 * salinity
}

/// Total sulfate, mol/kg(solution). Morris and Riley (1966) Deep-Sea Research 13, 699-705 (recalled).
#[must_use]
pub fn total_sulfate(salinity: f64) -> f64 {
    0.14 / 96.062 * salinity / 1.806_55
}

/// Total fluoride, mol/kg(solution). Riley (1965) Deep-Sea Research 12, 219-220 (recalled).
#[must_use]
pub fn total_fluoride(salinity: f64) -> f64 {
    6.7e-5 / 18.998 * salinity / 1.806_55
}

/// K = [H^+][SO4^2-]/[HSO4^-], mol/kg(solution), free hydrogen ion.
///
/// Dickson (1990) J. Chem. Thermodynamics 22, 113-127.
///
/// # Validity
///
/// Salinity 5 to 45, 0 to 45 degC.
#[must_use]
pub fn k_bisulfate(temperature_k: f64, salinity: f64) -> f64 {
    let (t, i) = (temperature_k, ionic_strength(salinity));
    let ln_k = -4276.1 / t + 141.328 - 23.093 * t.ln()
        + (-13856.0 / t + 324.57 - 47.986 * t.ln()) * i.sqrt()
        + (35474.0 / t - 771.54 + 114.723 * t.ln()) * i
        - 2698.0 / t * i.powf(1.5)
        + 1776.0 / t * i * i;
    ln_k.exp() * water_content(salinity)
}

/// K = [H^+][F^-]/[HF], mol/kg(solution), free hydrogen ion.
///
/// Dickson and Riley (1979) Marine Chemistry 7, 89-99 (recalled).
///
/// # Validity
///
/// Salinity to 45, 0 to 45 degC.
#[must_use]
pub fn k_fluoride(temperature_k: f64, salinity: f64) -> f64 {
    let ln_k = 1590.2 / temperature_k - 12.641 + 1.525 * ionic_strength(salinity).sqrt();
    ln_k.exp() * water_content(salinity)
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Printed check value of Dickson, Sabine and Christian (2007): ln K = -2.30 at salinity 35 and 25 degC.
    #[test]
    fn bisulfate_meets_its_printed_value() {
        assert!((k_bisulfate(298.15, 35.0).ln() + 2.30).abs() < 0.005);
    }

    /// Printed check value of the handbook of 1994: ln K = -5.80 on the total scale at salinity 35 and 25 degC.
    #[test]
    fn fluoride_meets_its_printed_value() {
        let total = 1.0 + total_sulfate(35.0) / k_bisulfate(298.15, 35.0);
        assert!((k_fluoride(298.15, 35.0).ln() + total.ln() + 5.80).abs() < 0.005);
    }

    /// Reference composition (Millero et al. 2008): I = 0.72263, sulfate 0.0282352, fluoride 6.8306e-5.
    #[test]
    fn totals_are_those_of_the_reference_composition() {
        assert!((ionic_strength(35.0) / 0.722_63 - 1.0).abs() < 3e-4);
        assert!((total_sulfate(35.0) / 0.028_235_2 - 1.0).abs() < 3e-5);
        assert!((total_fluoride(35.0) / 6.8306e-5 - 1.0).abs() < 4e-4);
    }
}
