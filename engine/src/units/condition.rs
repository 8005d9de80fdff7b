//! Temperature and pressure as a person gives them, checked on entry.

use super::UnitError;

/// An absolute temperature.
#[derive(Clone, Copy, Debug, PartialEq, PartialOrd)]
pub struct Temperature {
    kelvin: f64,
}

impl Temperature {
    /// 25 degC, the reference temperature of most tables.
    pub const REFERENCE: Self = Self { kelvin: 298.15 };

    /// From degrees Celsius.
    ///
    /// # Errors
    ///
    /// [`UnitError::BelowAbsoluteZero`] below -273.15 degC or for a value that is no finite number.
    pub fn from_celsius(celsius: f64) -> Result<Self, UnitError> {
        Self::from_kelvin(celsius + ZERO_CELSIUS)
    }

    /// From kelvin.
    ///
    /// # Errors
    ///
    /// [`UnitError::BelowAbsoluteZero`] below 0 K or for a value that is no finite number.
    pub fn from_kelvin(kelvin: f64) -> Result<Self, UnitError> {
        if kelvin.is_finite() && kelvin >= 0.0 {
            Ok(Self { kelvin })
        } else {
            Err(UnitError::BelowAbsoluteZero { celsius: kelvin - ZERO_CELSIUS })
        }
    }

    /// In kelvin.
    #[must_use]
    pub fn kelvin(self) -> f64 {
        self.kelvin
    }

    /// In degrees Celsius.
    #[must_use]
    pub fn celsius(self) -> f64 {
        self.kelvin - ZERO_CELSIUS
    }
}

/// An absolute pressure.
#[derive(Clone, Copy, Debug, PartialEq, PartialOrd)]
pub struct Pressure {
    bar: f64,
}

impl Pressure {
    /// One standard atmosphere, 1.01325 bar.
    pub const ATMOSPHERE: Self = Self { bar: BAR_PER_ATM };

    /// From bar, absolute.
    ///
    /// # Errors
    ///
    /// [`UnitError::NegativePressure`] below 0 bar or for a value that is no finite number.
    pub fn from_bar(bar: f64) -> Result<Self, UnitError> {
        if bar.is_finite() && bar >= 0.0 {
            Ok(Self { bar })
        } else {
            Err(UnitError::NegativePressure { bar })
        }
    }

    /// From standard atmospheres, absolute.
    ///
    /// # Errors
    ///
    /// As [`Pressure::from_bar`].
    pub fn from_atm(atm: f64) -> Result<Self, UnitError> {
        Self::from_bar(atm * BAR_PER_ATM)
    }

    /// From pascal, absolute.
    ///
    /// # Errors
    ///
    /// As [`Pressure::from_bar`].
    pub fn from_pascal(pascal: f64) -> Result<Self, UnitError> {
        Self::from_bar(pascal / 1e5)
    }

    /// From sea pressure, which is 0 dbar at the surface under one standard atmosphere.
    ///
    /// # Errors
    ///
    /// As [`Pressure::from_bar`].
    pub fn from_sea_pressure_dbar(dbar: f64) -> Result<Self, UnitError> {
        Self::from_bar(BAR_PER_ATM + dbar / 10.0)
    }

    /// In bar.
    #[must_use]
    pub fn bar(self) -> f64 {
        self.bar
    }

    /// In standard atmospheres.
    #[must_use]
    pub fn atm(self) -> f64 {
        self.bar / BAR_PER_ATM
    }

    /// In pascal.
    #[must_use]
    pub fn pascal(self) -> f64 {
        self.bar * 1e5
    }

    /// Pressure above the sea surface's, in dbar.
    #[must_use]
    pub fn sea_pressure_dbar(self) -> f64 {
        (self.bar - BAR_PER_ATM) * 10.0
    }
}

const ZERO_CELSIUS: f64 = 273.15;
const BAR_PER_ATM: f64 = 1.01325;
