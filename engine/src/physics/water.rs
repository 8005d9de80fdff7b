//! Pure water: density, static relative permittivity and the Debye-Hückel coefficients that follow from them.
//!
//! Density at 1 atm: Kell (1975) J. Chem. Eng. Data 20, 97-105. Permittivity: IAPWS R8-97, that is Fernández et al.
//! (1997) J. Phys. Chem. Ref. Data 26, 1125-1166, a Kirkwood equation with an empirical g-factor.

use super::constants::{AVOGADRO, BOLTZMANN, ELEMENTARY_CHARGE, LN_10, VACUUM_PERMITTIVITY, ZERO_CELSIUS};
use std::f64::consts::PI;

/// Density of air-free water at 1 atm, kg/m³, after Kell (1975).
///
/// `temperature_k` in kelvin. Kell's t is on the IPTS-68; the difference to the ITS-90 (below 0.03 K) is left alone and
/// is worth at most 0.004 kg/m³ between 0 and 50 °C.
///
/// # Validity
///
/// 0 to 100 °C stated to 0.003 kg/m³ at best; the equation itself runs to 150 °C, where the water is superheated at 1 atm.
///
/// # Examples
///
/// ```
/// use lysocline_engine::physics::water::density;
///
/// assert!((density(298.15) - 997.045).abs() < 5e-4); // Kell's table, 25 °C
/// ```
#[must_use]
pub fn density(temperature_k: f64) -> f64 {
    let t = temperature_k - ZERO_CELSIUS;
    let numerator = [999.839_52, 16.945_176, -7.987_040_1e-3, -46.170_461e-6, 105.563_02e-9, -280.542_53e-12];
    numerator.iter().rev().fold(0.0, |sum, a| sum * t + a) / (1.0 + 16.879_850e-3 * t)
}

/// Density of water under pressure, kg/m³: that of [`density`] compressed with the secant bulk modulus of pure water of the
/// equation of state of 1980 (UNESCO 1981, Technical Papers in Marine Science 38; coefficients recalled, held to its check
/// values by the tests).
///
/// ```text
/// ρ = ρ(1 atm) / (1 - p / K),     K = K_w + A p + B p²,     p above 1 atm
/// ```
///
/// # Validity
///
/// 0 to 40 °C and 1000 bar above the atmosphere; at 100 °C the compression is still right to 5 %.
#[must_use]
pub fn density_at(temperature_k: f64, pressure_bar: f64) -> f64 {
    const ATMOSPHERE: f64 = 1.01325; // bar
    const MODULUS: [f64; 5] = [19_652.21, 148.420_6, -2.327_105, 1.360_477e-2, -5.155_288e-5];
    const LINEAR: [f64; 4] = [3.239_908, 1.437_13e-3, 1.160_92e-4, -5.779_05e-7];
    const SQUARE: [f64; 3] = [8.509_35e-5, -6.122_93e-6, 5.278_7e-8];

    let t = temperature_k - ZERO_CELSIUS;
    let at_t = |coefficients: &[f64]| coefficients.iter().rev().fold(0.0, |sum, a| sum * t + a);
    let p = pressure_bar - ATMOSPHERE;
    density(temperature_k) / (1.0 - p / (at_t(&MODULUS) + p * (at_t(&LINEAR) + p * at_t(&SQUARE))))
}

/// Static relative permittivity ε of water, dimensionless, after IAPWS R8-97.
///
/// `temperature_k` in kelvin (ITS-90), `density` in kg/m³.
///
/// ```text
/// ε = (1 + A + 5B + √(9 + 2A + 18B + A² + 10AB + 9B²)) / (4 - 4B)
/// A = N_A μ² ρ g / (ε₀ k T),   B = N_A α ρ / (3 ε₀)        (ρ in mol/m³)
/// ```
///
/// The formulation was fitted with the constants of 1986, so it keeps them instead of the ones in
/// [`constants`](super::constants).
///
/// # Validity
///
/// 238 to 873 K, to 1200 MPa. Uncertainty about 0.03 % near 25 °C.
#[must_use]
pub fn relative_permittivity(temperature_k: f64, density: f64) -> f64 {
    const AVOGADRO_1986: f64 = 6.022_136_7e23;
    const BOLTZMANN_1986: f64 = 1.380_658e-23;
    const VACUUM_PERMITTIVITY_1986: f64 = 1.0 / (4e-7 * PI * 299_792_458.0 * 299_792_458.0);
    const POLARIZABILITY: f64 = 1.636e-40; // C² m² J⁻¹
    const DIPOLE_MOMENT: f64 = 6.138e-30; // C m
    const MOLAR_MASS: f64 = 0.018_015_268; // kg/mol

    let molar_density = density / MOLAR_MASS;
    let dipoles = AVOGADRO_1986 * DIPOLE_MOMENT.powi(2) * molar_density
        / (VACUUM_PERMITTIVITY_1986 * BOLTZMANN_1986 * temperature_k);
    let a = dipoles * g_factor(temperature_k, density);
    let b = AVOGADRO_1986 * POLARIZABILITY * molar_density / (3.0 * VACUUM_PERMITTIVITY_1986);
    let root = (9.0 + 2.0 * a + 18.0 * b + a * a + 10.0 * a * b + 9.0 * b * b).sqrt();
    (1.0 + a + 5.0 * b + root) / (4.0 - 4.0 * b)
}

/// Kirkwood's correlation factor g in the form of Harris and Alder, the twelve terms of IAPWS R8-97.
///
/// The coefficients were recalled, not copied from the release; the tests hold them to its check point.
fn g_factor(temperature_k: f64, density: f64) -> f64 {
    /// (N, power of ρ/ρc, power of Tc/T)
    const TERMS: [(f64, i32, f64); 11] = [
        (0.978_224_486_826, 1, 0.25),
        (-0.957_771_379_375, 1, 1.0),
        (0.237_511_794_148, 1, 2.5),
        (0.714_692_244_396, 2, 1.5),
        (-0.298_217_036_956, 3, 1.5),
        (-0.108_863_472_196, 3, 2.5),
        (0.949_327_488_264e-1, 4, 2.0),
        (-0.980_469_816_509e-2, 5, 2.0),
        (0.165_167_634_970e-4, 6, 5.0),
        (0.937_359_795_772e-4, 7, 0.5),
        (-0.123_179_218_720e-9, 10, 10.0),
    ];
    const LAST: f64 = 0.196_096_504_426e-2;
    const CRITICAL_TEMPERATURE: f64 = 647.096; // K
    const CRITICAL_DENSITY: f64 = 322.0; // kg/m³

    let delta = density / CRITICAL_DENSITY;
    let tau = CRITICAL_TEMPERATURE / temperature_k;
    let terms: f64 = TERMS.iter().map(|&(n, i, j)| n * delta.powi(i) * tau.powf(j)).sum();
    1.0 + terms + LAST * delta * (temperature_k / 228.0 - 1.0).powf(-1.2)
}

/// Debye-Hückel A in the decadic form, `log10 γ = -A z² √I`, (kg/mol)^½.
///
/// ```text
/// A = √(2π N_A ρ) l_B^(3/2) / ln 10,    l_B = e² / (4π ε₀ ε k T)
/// ```
///
/// `temperature_k` in kelvin; `density` ρ in kg/m³ ([`density`]); `permittivity` ε relative
/// ([`relative_permittivity`]).
#[must_use]
pub fn debye_huckel_a(temperature_k: f64, density: f64, permittivity: f64) -> f64 {
    let bjerrum_length = ELEMENTARY_CHARGE.powi(2)
        / (4.0 * PI * VACUUM_PERMITTIVITY * permittivity * BOLTZMANN * temperature_k);
    (2.0 * PI * AVOGADRO * density).sqrt() * bjerrum_length.powf(1.5) / LN_10
}

/// Debye-Hückel B, the reciprocal screening length over √I, (kg/mol)^½ m⁻¹ (times 1e-10: per ångström).
///
/// ```text
/// B = √(2 e² N_A ρ / (ε₀ ε k T))
/// ```
///
/// Arguments as for [`debye_huckel_a`].
#[must_use]
pub fn debye_huckel_b(temperature_k: f64, density: f64, permittivity: f64) -> f64 {
    let thermal = VACUUM_PERMITTIVITY * permittivity * BOLTZMANN * temperature_k;
    (2.0 * ELEMENTARY_CHARGE.powi(2) * AVOGADRO * density / thermal).sqrt()
}

/// Debye-Hückel A (log10, (kg/mol)^½) and B ((kg/mol)^½ m⁻¹) at a temperature in kelvin and a pressure in bar.
#[must_use]
pub fn debye_huckel(temperature_k: f64, pressure_bar: f64) -> (f64, f64) {
    let density = density_at(temperature_k, pressure_bar);
    let permittivity = relative_permittivity(temperature_k, density);
    (
        debye_huckel_a(temperature_k, density, permittivity),
        debye_huckel_b(temperature_k, density, permittivity),
    )
}

/// Moles of water in a kilogram of it.
pub const MOLES_PER_KG: f64 = 1000.0 / 18.015_268;

/// Vapour pressure of pure water over liquid, bar; `None` outside 273.15 K to the critical point, 647.096 K.
///
/// Wagner & Pruss (1993), J. Phys. Chem. Ref. Data 22, 783, as in IAPWS SR1-86(1992).
#[must_use]
pub fn saturation_pressure(temperature_k: f64) -> Option<f64> {
    const CRITICAL_K: f64 = 647.096;
    const CRITICAL_BAR: f64 = 220.64;
    const TERMS: [(f64, f64); 6] = [
        (-7.859_517_83, 1.0),
        (1.844_082_59, 1.5),
        (-11.786_649_7, 3.0),
        (22.680_741_1, 3.5),
        (-15.961_871_9, 4.0),
        (1.801_225_02, 7.5),
    ];
    if !(273.15..=CRITICAL_K).contains(&temperature_k) {
        return None;
    }
    let tau = 1.0 - temperature_k / CRITICAL_K;
    let sum: f64 = TERMS.iter().map(|(a, power)| a * tau.powf(*power)).sum();
    Some(CRITICAL_BAR * (sum * CRITICAL_K / temperature_k).exp())
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Check values of the equation of state of 1980 for S = 0 (UNESCO 1981; recalled): ρ(5 °C, 1000 bar) and ρ(25 °C, 1000
    /// bar), kg/m³. Its density at 1 atm is another formula and differs by up to 0.01.
    /// 611.657 Pa at the triple point, and one atmosphere at the normal boiling point, 373.1243 K, as IAPWS has them;
    /// recalled.
    #[test]
    fn vapour_pressure_meets_the_triple_and_the_boiling_point() {
        let bar = |kelvin: f64| saturation_pressure(kelvin).expect("liquid");
        assert!((bar(273.16) / 0.006_116_57 - 1.0).abs() < 1e-4);
        assert!((bar(373.1243) / 1.013_25 - 1.0).abs() < 1e-5);
        assert_eq!(saturation_pressure(700.0), None);
    }

    #[test]
    fn compressed_water_reproduces_the_equation_of_state_of_1980() {
        for (t, rho) in [(5.0, 1044.12802), (25.0, 1037.90204)] {
            let found = density_at(t + ZERO_CELSIUS, 1001.01325);
            assert!((found - rho).abs() < 0.02, "{t} °C: {found}");
        }
        assert_eq!(density_at(298.15, 1.01325), density(298.15));
    }

    /// Pressure raises density and permittivity, and so lowers A.
    #[test]
    fn pressure_lowers_the_limiting_slope() {
        let (surface, deep) = (debye_huckel(277.15, 1.01325).0, debye_huckel(277.15, 400.0).0);
        assert!(deep < surface && deep > 0.97 * surface, "{surface} {deep}");
    }

    /// (t °C, IAPWS-95 density kg/m³, ε, A, B per Å): IAPWS-95 density, IAPWS R8-97 permittivity and CODATA 2018, as
    /// evaluated by independent implementations of both standards at 0.101325 MPa.
    const IAPWS: [(f64, f64, f64, f64, f64); 15] = [
        (0.0, 999.844, 87.904, 0.49043, 0.32452),
        (5.0, 999.967, 85.916, 0.49395, 0.32531),
        (15.0, 999.103, 82.078, 0.50149, 0.32686),
        (20.0, 998.207, 80.223, 0.50553, 0.32764),
        (25.0, 997.048, 78.408, 0.50978, 0.32843),
        (35.0, 994.033, 74.898, 0.51888, 0.33004),
        (40.0, 992.216, 73.201, 0.52375, 0.33087),
        (50.0, 988.035, 69.916, 0.53411, 0.33257),
        (55.0, 985.693, 68.328, 0.53962, 0.33344),
        (60.0, 983.196, 66.774, 0.54533, 0.33433),
        (65.0, 980.551, 65.256, 0.55127, 0.33524),
        (75.0, 974.843, 62.318, 0.56379, 0.3371),
        (80.0, 971.79, 60.898, 0.57038, 0.33806),
        (85.0, 968.611, 59.509, 0.57719, 0.33903),
        (95.0, 961.888, 56.825, 0.59148, 0.34101),
    ];

    /// The check point distributed with implementations of IAPWS R8-97.
    #[test]
    fn permittivity_reproduces_the_check_point() {
        assert!((relative_permittivity(298.15, 999.242866) - 78.590_725_0).abs() < 5e-8);
    }

    #[test]
    fn permittivity_and_coefficients_follow_the_iapws_grid() {
        for (t, rho, eps, a, b) in IAPWS {
            let t_k = t + ZERO_CELSIUS;
            let permittivity = relative_permittivity(t_k, rho);
            assert!((permittivity - eps).abs() < 6e-4, "ε at {t} °C: {permittivity}");
            let slope = debye_huckel_a(t_k, rho, permittivity);
            assert!((slope - a).abs() < 1e-5, "A at {t} °C: {slope}");
            let screening = debye_huckel_b(t_k, rho, permittivity) * 1e-10;
            assert!((screening - b).abs() < 1e-5, "B at {t} °C: {screening}");
        }
    }

    /// Kell's density differs from IAPWS-95 by at most 0.0042 kg/m³ up to 50 °C, and A barely notices.
    #[test]
    fn density_is_close_to_iapws_95() {
        for (t, rho, _, a, _) in IAPWS.into_iter().filter(|row| row.0 <= 50.0) {
            let t_k = t + ZERO_CELSIUS;
            let kell = density(t_k);
            assert!((kell - rho).abs() <= 0.0042 + 5e-4, "density at {t} °C: {kell}");
            let slope = debye_huckel_a(t_k, kell, relative_permittivity(t_k, kell));
            assert!((slope - a).abs() < 1e-5, "A at {t} °C: {slope}");
        }
    }

    /// Kell (1975), values of his equation, kg/m³.
    #[test]
    fn density_reproduces_kell() {
        let table = [
            (0.0, 999.84),
            (5.0, 999.964),
            (15.0, 999.1),
            (20.0, 998.204),
            (25.0, 997.045),
            (40.0, 992.216),
            (50.0, 988.036),
        ];
        for (t, rho) in table {
            assert!((density(t + ZERO_CELSIUS) - rho).abs() < 6e-4, "density at {t} °C");
        }
    }
}
