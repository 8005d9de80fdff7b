//! Physical constants in SI units, CODATA 2018 (Tiesinga et al. 2021, J. Phys. Chem. Ref. Data 50, 033105).
//!
//! Since the redefinition of the SI in 2019 all but [`VACUUM_PERMITTIVITY`] are exact.

/// Avogadro constant N_A, mol⁻¹.
pub const AVOGADRO: f64 = 6.022_140_76e23;

/// Boltzmann constant k_B, J/K.
pub const BOLTZMANN: f64 = 1.380_649e-23;

/// Elementary charge e, C.
pub const ELEMENTARY_CHARGE: f64 = 1.602_176_634e-19;

/// Molar gas constant R = N_A k_B, J/(mol K).
pub const GAS_CONSTANT: f64 = AVOGADRO * BOLTZMANN;

/// Faraday constant F = N_A e, C/mol.
pub const FARADAY: f64 = AVOGADRO * ELEMENTARY_CHARGE;

/// Permittivity of vacuum ε₀, F/m; standard uncertainty 1.3e-21.
pub const VACUUM_PERMITTIVITY: f64 = 8.854_187_812_8e-12;

/// Standard atmosphere, Pa (exact).
pub const STANDARD_ATMOSPHERE: f64 = 101_325.0;

/// The bar, Pa (exact).
pub const BAR: f64 = 1e5;

/// 0 °C in kelvin (exact).
pub const ZERO_CELSIUS: f64 = 273.15;

/// Natural logarithm of 10: `ln x = LN_10 · log10 x`.
pub const LN_10: f64 = std::f64::consts::LN_10;

/// Molar mass of water, kg/mol (IAPWS-95; Vienna standard mean ocean water).
pub const WATER_MOLAR_MASS: f64 = 18.015_268e-3;

#[cfg(test)]
mod tests {
    use super::*;

    /// The products agree with the rounded values CODATA 2018 prints for them.
    #[test]
    fn derived_constants_match_the_printed_ones() {
        assert!((GAS_CONSTANT - 8.314_462_618).abs() < 5e-10);
        assert!((FARADAY - 96_485.332_12).abs() < 5e-6);
    }
}
