//! Second virial coefficients of gases, and the fugacity they give.
//!
//! ```text
//! Z = 1 + B P/(R T)          ln φ = B P/(R T)          f = φ p
//! ```
//!
//! B by the corresponding states of Tsonopoulos (1974) AIChE J. 20, 263-272 (recalled), for gases without a dipole:
//!
//! ```text
//! B Pc/(R Tc) = f0(T/Tc) + ω f1(T/Tc)
//! f0 = 0.1445 - 0.330/Tr - 0.1385/Tr² - 0.0121/Tr³ - 0.000607/Tr⁸
//! f1 = 0.0637 + 0.331/Tr² - 0.423/Tr³ - 0.008/Tr⁸
//! ```

use super::constants::GAS_CONSTANT;

/// Critical temperature, K, critical pressure, bar, and acentric factor of a gas.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Critical {
    /// K.
    pub temperature: f64,
    /// bar.
    pub pressure: f64,
    /// Pitzer's.
    pub acentric: f64,
}

/// Gases by formula; the constants as in Poling, Prausnitz & O'Connell (2001), appendix A (recalled).
const GASES: [(&str, Critical); 5] = [
    ("CO2(g)", Critical { temperature: 304.13, pressure: 73.77, acentric: 0.2239 }),
    ("O2(g)", Critical { temperature: 154.58, pressure: 50.43, acentric: 0.0222 }),
    ("N2(g)", Critical { temperature: 126.19, pressure: 33.96, acentric: 0.0372 }),
    ("CH4(g)", Critical { temperature: 190.56, pressure: 45.99, acentric: 0.0115 }),
    ("H2S(g)", Critical { temperature: 373.1, pressure: 90.0, acentric: 0.1005 }),
];

/// Two terms hold up to about half the critical density, where the compressibility has left 1 by so much.
pub const MOST_CORRECTION: f64 = 0.3;

/// The constants of a gas, by its formula, `CO2(g)`.
#[must_use]
pub fn critical(gas: &str) -> Option<Critical> {
    GASES.iter().find(|(name, _)| *name == gas).map(|(_, critical)| *critical)
}

/// The gases whose constants are known.
#[must_use]
pub fn gases() -> Vec<&'static str> {
    GASES.iter().map(|(name, _)| *name).collect()
}

impl Critical {
    /// B, cm3/mol, at T kelvin.
    #[must_use]
    pub fn second_virial(&self, temperature_k: f64) -> f64 {
        let x = self.temperature / temperature_k;
        let (x2, x3, x8) = (x * x, x.powi(3), x.powi(8));
        let simple = 0.1445 - 0.330 * x - 0.1385 * x2 - 0.0121 * x3 - 0.000_607 * x8;
        let acentric = 0.0637 + 0.331 * x2 - 0.423 * x3 - 0.008 * x8;
        let volume = 10.0 * GAS_CONSTANT * self.temperature / self.pressure;
        (simple + self.acentric * acentric) * volume
    }

    /// ln of the fugacity coefficient at T kelvin under P bar, by the rule of Lewis & Randall where the gas is one of
    /// several: that of the pure gas under the whole pressure.
    #[must_use]
    pub fn ln_fugacity_coefficient(&self, temperature_k: f64, pressure_bar: f64) -> f64 {
        self.second_virial(temperature_k) * pressure_bar / (10.0 * GAS_CONSTANT * temperature_k)
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::physics::gas_exchange;

    /// Recommended values at 25 degC of Dymond & Smith (1980), cm3/mol, recalled.
    #[test]
    fn second_virial_coefficients_are_near_the_recommended_ones() {
        for (gas, b, within) in
            [("CO2(g)", -123.2, 2.0), ("CH4(g)", -42.8, 1.0), ("N2(g)", -4.7, 1.0), ("O2(g)", -16.1, 1.0)]
        {
            let found = critical(gas).expect("known").second_virial(298.15);
            assert!((found - b).abs() < within, "{gas}: {found}");
        }
    }

    /// Against the fit of Weiss (1974) to measurements on CO2, over its range.
    #[test]
    fn carbon_dioxide_follows_its_measurements() {
        for t in [273.15, 283.15, 298.15, 313.15] {
            let found = critical("CO2(g)").expect("known").second_virial(t);
            assert!((found - gas_exchange::virial_coefficient(t)).abs() < 3.0, "{t}: {found}");
        }
    }

    /// Pure CO2 at one atmosphere and 25 degC: 0.995 (Weiss 1974, text; recalled).
    #[test]
    fn pure_carbon_dioxide_at_one_atmosphere() {
        let phi = critical("CO2(g)").expect("known").ln_fugacity_coefficient(298.15, 1.01325).exp();
        assert!((phi - 0.995).abs() < 2e-4, "{phi}");
    }
}
