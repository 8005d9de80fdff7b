//! Seawater as far as scales of pH need it: ionic strength, water content, total sulfate and fluoride, and the constants
//! of HSO4^- and HF.
//!
//! `salinity` is practical salinity, `temperature_k` in kelvin; amounts are per kilogram of solution unless said otherwise.

/// Reference salinity per unit of practical salinity, g/kg. Millero et al. (2008) Deep-Sea Research I 55, 50-72.
pub const REFERENCE_SALINITY_PER_SALINITY: f64 = 35.165_04 / 35.0;

/// Mean molar mass of sea salt, g/mol: of the reference composition, same source (computed from its mole fractions).
pub const SEA_SALT_MOLAR_MASS: f64 = 31.403_821_8;

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

/// Density, kg/m3, at a hydrostatic pressure in bar above that of the surface.
///
/// The equation of state of 1980: UNESCO (1981) Technical Papers in Marine Science 36 and 38, Millero et al. (1980)
/// Deep-Sea Research 27A, 255-264, Millero and Poisson (1981) ibid. 28A, 625-629 (recalled; meets the printed check
/// values). Temperatures are read on the scale of 1968, 0.006 K above that of 1990 at 25 degC.
///
/// # Validity
///
/// Salinity to 42, -2 to 40 degC, to 1000 bar.
#[must_use]
pub fn density(temperature_k: f64, salinity: f64, hydrostatic_bar: f64) -> f64 {
    let t = (temperature_k - 273.15) * 1.000_24;
    let s = salinity;
    let poly = |c: &[f64]| c.iter().rev().fold(0.0, |sum, c| sum * t + c);
    let water = poly(&[999.842_594, 6.793_952e-2, -9.095_29e-3, 1.001_685e-4, -1.120_083e-6, 6.536_332e-9]);
    let surface = water
        + s * poly(&[8.244_93e-1, -4.0899e-3, 7.6438e-5, -8.2467e-7, 5.3875e-9])
        + s * s.sqrt() * poly(&[-5.724_66e-3, 1.0227e-4, -1.6546e-6])
        + 4.8314e-4 * s * s;
    // The secant bulk modulus, bar.
    let modulus = poly(&[19_652.21, 148.4206, -2.327_105, 1.360_477e-2, -5.155_288e-5])
        + s * poly(&[54.6746, -0.603_459, 1.099_87e-2, -6.1670e-5])
        + s * s.sqrt() * poly(&[7.944e-2, 1.6483e-2, -5.3009e-4]);
    let a = poly(&[3.239_908, 1.437_13e-3, 1.160_92e-4, -5.779_05e-7])
        + s * poly(&[2.2838e-3, -1.0981e-5, -1.6078e-6])
        + s * s.sqrt() * 1.910_75e-4;
    let b = poly(&[8.509_35e-5, -6.122_93e-6, 5.2787e-8]) + s * poly(&[-9.9348e-7, 2.0816e-8, 9.1697e-10]);
    let p = hydrostatic_bar;
    surface / (1.0 - p / (modulus + a * p + b * p * p))
}

/// Pressure above that of the surface, dbar, at a depth in metres and a latitude in degrees.
///
/// Saunders (1981) J. Physical Oceanography 11, 573-574 (recalled): within 0.1 dbar to 5000 m, and 1 dbar to 10 000 m, of
/// integrating a standard ocean of 0 degC and salinity 35.
#[must_use]
pub fn pressure_at_depth(depth_m: f64, latitude_deg: f64) -> f64 {
    let (c1, c2) = saunders(latitude_deg);
    ((1.0 - c1) - ((1.0 - c1).powi(2) - 4.0 * c2 * depth_m).sqrt()) / (2.0 * c2)
}

/// Depth in metres at a pressure above that of the surface, dbar, and a latitude in degrees: the same turned round.
#[must_use]
pub fn depth_at_pressure(pressure_dbar: f64, latitude_deg: f64) -> f64 {
    let (c1, c2) = saunders(latitude_deg);
    (1.0 - c1) * pressure_dbar - c2 * pressure_dbar * pressure_dbar
}

fn saunders(latitude_deg: f64) -> (f64, f64) {
    ((5.92 + 5.25 * latitude_deg.to_radians().sin().powi(2)) * 1e-3, 2.21e-6)
}

/// Practical salinity from the conductivity ratio to seawater of salinity 35 at 15 degC and the surface, a temperature on
/// the scale of 1968 in degC and a pressure in dbar above that of the surface.
///
/// The practical salinity scale of 1978: UNESCO (1981) Technical Papers in Marine Science 37 (recalled; meets the printed
/// check values).
///
/// # Validity
///
/// Salinity 2 to 42, -2 to 35 degC.
#[must_use]
pub fn practical_salinity(conductivity_ratio: f64, t68_celsius: f64, pressure_dbar: f64) -> f64 {
    let (r, t, p) = (conductivity_ratio, t68_celsius, pressure_dbar);
    let poly = |c: &[f64], x: f64| c.iter().rev().fold(0.0, |sum, c| sum * x + c);
    let r_t = poly(&[0.676_609_7, 2.005_64e-2, 1.104_259e-4, -6.9698e-7, 1.0031e-9], t);
    let by_pressure = 1.0
        + p * poly(&[2.070e-5, -6.370e-10, 3.989e-15], p)
            / (1.0 + 3.426e-2 * t + 4.464e-4 * t * t + (4.215e-1 - 3.107e-3 * t) * r);
    let x = (r / (by_pressure * r_t)).sqrt();
    let away = (t - 15.0) / (1.0 + 0.0162 * (t - 15.0));
    poly(&[0.0080, -0.1692, 25.3851, 14.0941, -7.0261, 2.7081], x)
        + away * poly(&[0.0005, -0.0056, -0.0066, -0.0375, 0.0636, -0.0144], x)
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

    /// Printed check values of UNESCO (1981), temperatures on the scale of 1968.
    #[test]
    fn density_meets_its_printed_values() {
        for (s, t68, p, printed) in [
            (0.0, 5.0, 0.0, 999.966_75),
            (35.0, 5.0, 0.0, 1027.67547),
            (35.0, 25.0, 0.0, 1023.34306),
            (0.0, 5.0, 1000.0, 1044.12802),
            (35.0, 25.0, 1000.0, 1062.53817),
            (35.0, 5.0, 1000.0, 1069.48914),
        ] {
            let found = density(t68 / 1.000_24 + 273.15, s, p);
            assert!((found - printed).abs() < 6e-6, "{found} for {printed}");
        }
    }

    /// The thermodynamic standard of 2010, its Gibbs function (computed apart, with version 3.6.23 of its own library): the
    /// equation of 1980 is within 0.003 kg/m3 of it; of absolute salinity, degC, bar.
    #[test]
    fn density_is_that_of_the_standard_of_2010_but_for_the_third_decimal() {
        for (absolute, celsius, bar, standard) in [
            (35.165_04, 0.0, 0.0, 1028.107185),
            (35.165_04, 10.0, 100.0, 1031.432763),
            (5.023_577_142_857_142, 15.0, 0.0, 1002.953413),
            (40.188_617_142_857_15, 30.0, 50.0, 1027.590338),
        ] {
            let found = density(celsius + 273.15, absolute / REFERENCE_SALINITY_PER_SALINITY, bar);
            assert!((found - standard).abs() < 0.003, "{found} for {standard}");
        }
    }

    /// Reference salinity of practical salinity 7.2 by the same: 7.233951086 g/kg.
    #[test]
    fn reference_salinity_is_in_proportion() {
        assert!((7.2 * REFERENCE_SALINITY_PER_SALINITY - 7.233_951_086).abs() < 5e-10);
    }

    /// Printed check values of UNESCO (1983): 37.245628 and 27.995347.
    #[test]
    fn practical_salinity_meets_its_printed_values() {
        assert!((practical_salinity(1.2, 20.0, 2000.0) - 37.245_628).abs() < 6e-7);
        assert!((practical_salinity(0.65, 5.0, 1500.0) - 27.995_347).abs() < 6e-7);
    }

    /// The standard of 2010 gives 5100.902 dbar at 5000 m and 4902.190 m at 5000 dbar, at 45 degrees (computed apart);
    /// Saunders states 0.1 dbar to 5000 dbar against the tables of 1983.
    #[test]
    fn depth_and_pressure_turn_round() {
        assert!((depth_at_pressure(5000.0, 45.0) - 4902.190).abs() < 0.5);
        assert!((pressure_at_depth(5000.0, 45.0) - 5100.902).abs() < 0.5);
        let back = depth_at_pressure(pressure_at_depth(3210.0, 30.0), 30.0);
        assert!((back - 3210.0).abs() < 1e-9);
    }

    /// Reference composition (Millero et al. 2008): I = 0.72263, sulfate 0.0282352, fluoride 6.8306e-5.
    #[test]
    fn totals_are_those_of_the_reference_composition() {
        assert!((ionic_strength(35.0) / 0.722_63 - 1.0).abs() < 3e-4);
        assert!((total_sulfate(35.0) / 0.028_235_2 - 1.0).abs() < 3e-5);
        assert!((total_fluoride(35.0) / 6.8306e-5 - 1.0).abs() < 4e-4);
    }
}
