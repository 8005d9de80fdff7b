//! Constants under pressure: the volume of reaction.
//!
//! ```text
//! log10 K(p) = log10 K(p₀) - ΔV (p - p₀)/(R T ln 10)
//! ```
//!
//! with ΔV constant between the two pressures; over hundreds of bar its own change with pressure begins to count. In
//! seawater both are published as functions of temperature (Millero 1979, 1983, 1995), with p above that of the surface:
//!
//! ```text
//! ln K(p)/K(0) = -ΔV p/(R T) + Δκ p²/(2 R T)      ΔV = a₀ + a₁ t + a₂ t²    Δκ = b₀ + b₁ t    t in degC
//! ```

use super::conditions::{Conditions, HoldingPressure, PhScale};
use super::history::Influence;
use super::reaction::{Constant, Reaction, ReactionError};
use crate::named::{KeyFault, Named, Value};
use crate::physics::constants::LN_10;
use crate::quantity::{Part, Quantity};
use crate::text::list;
use crate::units::{Kind, Pressure, Temperature};

/// Gas constant in cm3 bar/(mol K) as CODATA gave it in 2006: the one that published volumes are used with.
const R_OF_VOLUMES: f64 = 83.144_72;

/// A volume of reaction: of the products less that of the reactants.
#[derive(Debug, Clone, PartialEq)]
pub struct Volume {
    /// Coefficients of 1, t and t², cm3/mol, t in degC.
    volume: [f64; 3],
    /// Coefficients of 1 and t, cm3/(mol bar).
    compressibility: [f64; 2],
    parts: Vec<Part>,
}

impl Volume {
    /// Takes `volume`, or `volume_terms` with `compressibility_terms`, out of the options.
    pub(super) fn read(options: &mut Named) -> Result<Option<Self>, KeyFault> {
        let volume = options.quantity("volume", Kind::MolarVolume)?;
        let terms = options.take("volume_terms");
        let compressibility = options.take("compressibility_terms");
        match (volume, terms, compressibility) {
            (None, None, None) => Ok(None),
            (Some(volume), None, None) => Ok(Some(Self::of(&volume))),
            (None, Some(terms), compressibility) => Ok(Some(Self {
                volume: coefficients("volume_terms", ["1", "t", "t^2"], Some(terms))?,
                compressibility: coefficients("compressibility_terms", ["1", "t"], compressibility)?,
                parts: vec![],
            })),
            (Some(_), ..) => {
                Err(KeyFault::new("volume", "`volume` and terms of it state the same: keep one"))
            }
            (None, None, Some(_)) => Err(KeyFault::new(
                "compressibility_terms",
                "`compressibility_terms` need `volume_terms` beside them",
            )),
        }
    }

    /// The options it is read from, each with its terms.
    #[must_use]
    pub fn written(&self) -> [(&'static str, Vec<(&'static str, f64)>); 2] {
        let volume = ["1", "t", "t^2"].into_iter().zip(self.volume).collect();
        let compressibility = ["1", "t"].into_iter().zip(self.compressibility).collect();
        [("volume_terms", volume), ("compressibility_terms", compressibility)]
    }

    /// ln K(p)/K(0), p being the pressure in bar above that at which K(0) holds.
    #[must_use]
    pub fn ln_factor(&self, pressure_bar: f64, temperature: Temperature) -> f64 {
        let t = temperature.celsius();
        let volume = self.volume[0] + (self.volume[1] + self.volume[2] * t) * t;
        let compressibility = self.compressibility[0] + self.compressibility[1] * t;
        (-volume + 0.5 * compressibility * pressure_bar) * pressure_bar
            / (R_OF_VOLUMES * temperature.kelvin())
    }

    /// From a quantity of kind [`Kind::MolarVolume`].
    #[must_use]
    pub fn of(volume: &Quantity) -> Self {
        let volume = volume.to(&Kind::MolarVolume.default_unit()).expect("checked to be a molar volume");
        let parts = volume.parts().to_vec();
        Self { volume: [volume.value(), 0.0, 0.0], compressibility: [0.0; 2], parts }
    }

    /// In cm3/mol at a temperature, with its uncertainty.
    #[must_use]
    pub fn quantity(&self, temperature: Temperature) -> Quantity {
        let t = temperature.celsius();
        let volume = self.volume[0] + (self.volume[1] + self.volume[2] * t) * t;
        Quantity::from_parts(volume, Kind::MolarVolume.default_unit(), self.parts.clone())
    }

    /// Of the reaction taken `n` times.
    #[must_use]
    pub fn times(&self, n: f64) -> Self {
        let parts = self.parts.iter().map(|part| part.scaled(n)).collect();
        Self {
            volume: self.volume.map(|c| n * c),
            compressibility: self.compressibility.map(|c| n * c),
            parts,
        }
    }

    /// Of the sum of two reactions.
    #[must_use]
    pub fn plus(&self, other: &Self) -> Self {
        let parts = self.parts.iter().chain(&other.parts).cloned().collect();
        Self {
            volume: std::array::from_fn(|i| self.volume[i] + other.volume[i]),
            compressibility: std::array::from_fn(|i| self.compressibility[i] + other.compressibility[i]),
            parts,
        }
    }
}

/// Coefficients of powers of t by their names; those left out are zero.
fn coefficients<const N: usize>(
    key: &str,
    names: [&str; N],
    given: Option<Value>,
) -> Result<[f64; N], KeyFault> {
    let fault = || KeyFault::new(key, format!("`{key}` takes a map of numbers for {}", list(&names)));
    let mut read = [0.0; N];
    let map = match given {
        None => return Ok(read),
        Some(Value::Map(map)) => map,
        Some(_) => return Err(fault()),
    };
    for (name, value) in map {
        match (names.iter().position(|known| *known == name), value) {
            (Some(i), Value::Number(number)) => read[i] = number,
            _ => return Err(fault()),
        }
    }
    Ok(read)
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
        if matches!(constant.conditions.ph_scale, PhScale::Total | PhScale::Nbs)
            && self.terms()?.protons != 0.into()
        {
            return Err(ReactionError::Conversion(format!(
                "the volume of `{self}` holds on the seawater scale: convert it with `.to_ph_scale(\"seawater\")` first"
            )));
        }
        let above = target.0 - constant.conditions.pressure.0;
        let per_cm3 = -above / (R_OF_VOLUMES * temperature.kelvin() * LN_10);
        let shift = volume.ln_factor(above, temperature) / LN_10;
        let influences = volume
            .parts
            .iter()
            .map(|part| Influence::constant(part.input.clone(), part.sensitivity * per_cm3))
            .collect();
        let there = self.at(temperature)?;
        let constant = there.constant()?;
        let words = format!(
            "pressure {} to {target}: volume of reaction {}, log K {shift:+.4}",
            constant.conditions.pressure,
            volume.quantity(temperature)
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
