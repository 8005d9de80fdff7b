//! Constants under pressure: the volume of reaction.
//!
//! ```text
//! log10 K(p) = log10 K(p₀) - ΔV (p - p₀)/(R T ln 10)
//! ```
//!
//! with ΔV constant between the two pressures; over hundreds of bar its own change with pressure begins to count.

use super::conditions::{Conditions, HoldingPressure};
use super::history::Influence;
use super::reaction::{Constant, Reaction, ReactionError};
use crate::physics::constants::{GAS_CONSTANT, LN_10};
use crate::quantity::{Part, Quantity};
use crate::units::{Kind, Pressure, Temperature};

/// Gas constant in cm3 bar/(mol K).
const R_CM3_BAR: f64 = GAS_CONSTANT * 10.0;

/// A volume of reaction: of the products less that of the reactants.
#[derive(Debug, Clone, PartialEq)]
pub struct Volume {
    cm3_per_mol: f64,
    parts: Vec<Part>,
}

impl Volume {
    /// From a quantity of kind [`Kind::MolarVolume`].
    #[must_use]
    pub fn of(volume: &Quantity) -> Self {
        let volume = volume.to(&Kind::MolarVolume.default_unit()).expect("checked to be a molar volume");
        Self { cm3_per_mol: volume.value(), parts: volume.parts().to_vec() }
    }

    /// In cm3/mol, with its uncertainty.
    #[must_use]
    pub fn quantity(&self) -> Quantity {
        Quantity::from_parts(self.cm3_per_mol, Kind::MolarVolume.default_unit(), self.parts.clone())
    }

    /// Of the reaction taken `n` times.
    #[must_use]
    pub fn times(&self, n: f64) -> Self {
        let parts = self.parts.iter().map(|part| part.scaled(n)).collect();
        Self { cm3_per_mol: n * self.cm3_per_mol, parts }
    }

    /// Of the sum of two reactions.
    #[must_use]
    pub fn plus(&self, other: &Self) -> Self {
        let parts = self.parts.iter().chain(&other.parts).cloned().collect();
        Self { cm3_per_mol: self.cm3_per_mol + other.cm3_per_mol, parts }
    }
}

impl Reaction {
    /// The constant at another pressure, at its own temperature or another; known there alone.
    ///
    /// # Errors
    ///
    /// [`ReactionError::Conversion`] where no `volume` is given; as [`Reaction::log_k_at`].
    pub fn to_pressure(&self, pressure: Pressure, temperature: Temperature) -> Result<Self, ReactionError> {
        let constant = self.constant()?;
        let target = HoldingPressure(pressure.bar());
        if target == constant.conditions.pressure {
            return Ok(self.clone());
        }
        let volume = constant.volume.as_ref().ok_or_else(|| {
            ReactionError::Conversion(format!(
                "log K of `{self}` is known at {} only; give the reaction its `volume`, in cm3/mol",
                constant.conditions.pressure
            ))
        })?;
        let per_cm3 =
            -(target.0 - constant.conditions.pressure.0) / (R_CM3_BAR * temperature.kelvin() * LN_10);
        let shift = volume.cm3_per_mol * per_cm3;
        let influences = volume
            .parts
            .iter()
            .map(|part| Influence::constant(part.input.clone(), part.sensitivity * per_cm3))
            .collect();
        let there = self.at(temperature)?;
        let constant = there.constant()?;
        let words = format!(
            "pressure {} to {target}: volume of reaction {} taken as constant, log K {shift:+.4}",
            constant.conditions.pressure,
            volume.quantity()
        );
        let converted = Constant {
            log_k: constant.log_k.shifted(shift),
            conditions: Conditions { pressure: target, ..constant.conditions.clone() },
            history: constant.history.influenced(influences).converted(words),
            ..constant.clone()
        };
        Ok(Self::of(self.equation().clone(), converted))
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::named::{Named, Value};

    fn reaction(options: &[(&str, &str)]) -> Reaction {
        let options = options.iter().map(|(key, text)| (key.to_string(), Value::Text(text.to_string())));
        Reaction::read("H2O <=> H^+ + OH^-", None, Named::new(options.collect()), None).unwrap()
    }

    /// By hand: 22.3 cm3/mol over 999 bar at 298.15 K is 22.3 * 999/(83.1446 * 298.15 * 2.302585) = 0.3903.
    #[test]
    fn a_negative_volume_raises_the_constant() {
        let water = reaction(&[("log_k", "-14 +/- 0.01"), ("volume", "-22.3 +/- 0.5 cm3/mol")]);
        let deep = water.to_pressure(Pressure::from_bar(1000.0).unwrap(), Temperature::REFERENCE).unwrap();
        let log_k = deep.log_k().unwrap();
        assert!((log_k.value() + 14.0 - 0.3903).abs() < 5e-5, "{log_k}");
        // 0.5/22.3 of the shift, beside the 0.01 of log K.
        let sigma = (0.01_f64.powi(2) + (0.3903_f64 * 0.5 / 22.3).powi(2)).sqrt();
        assert!((log_k.sigma().unwrap() - sigma).abs() < 1e-6);
        assert!(deep.plus(&water).is_err());
    }

    #[test]
    fn without_a_volume_the_pressure_stays() {
        let error = reaction(&[("log_k", "-14")])
            .to_pressure(Pressure::from_bar(100.0).unwrap(), Temperature::REFERENCE)
            .unwrap_err();
        assert_eq!(
            error.to_string(),
            "log K of `H2O <=> H^+ + OH^-` is known at 1 bar only; give the reaction its `volume`, in cm3/mol"
        );
    }
}
