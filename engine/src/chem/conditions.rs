//! The conditions in which a constant holds: what must agree before constants add.
//!
//! Constants here are on the molal activity scale at zero ionic strength. What a constant involving gases still leaves
//! open is the pressure that counts as unit fugacity.

use std::fmt;

use super::rational::{self, Rational};
use crate::physics::constants::{BAR, STANDARD_ATMOSPHERE};

/// Everything besides temperature that fixes what a constant means.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Default)]
pub struct Conditions {
    /// The fugacity at which a gas has unit activity.
    pub gas_standard: GasStandard,
}

/// The fugacity at which a gas has unit activity.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Default)]
pub enum GasStandard {
    /// 1 bar, the IUPAC standard pressure since 1982.
    #[default]
    Bar,
    /// 1 atm = 1.01325 bar, as in older tables.
    Atm,
}

impl GasStandard {
    /// Reads `1 bar` or `1 atm`.
    #[must_use]
    pub fn parse(text: &str) -> Option<Self> {
        match text.split_whitespace().collect::<Vec<_>>().as_slice() {
            ["1", "bar"] => Some(Self::Bar),
            ["1", "atm"] => Some(Self::Atm),
            _ => None,
        }
    }

    /// The standard fugacity in bar.
    #[must_use]
    pub fn bar(self) -> f64 {
        match self {
            Self::Bar => 1.0,
            Self::Atm => STANDARD_ATMOSPHERE / BAR,
        }
    }

    /// What is added to log10 K of a reaction making `gas_made` moles of gas when its standard becomes `target`.
    ///
    /// The activity of a gas is f/f°, so K grows by (f°/f°')ⁿ: 0.0057 per mole of gas from 1 atm to 1 bar.
    #[must_use]
    pub fn shift_to(self, target: Self, gas_made: Rational) -> f64 {
        rational::to_f64(gas_made) * (self.bar() / target.bar()).log10()
    }
}

impl fmt::Display for GasStandard {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str(match self {
            Self::Bar => "1 bar",
            Self::Atm => "1 atm",
        })
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn henry_constants_in_atm_become_smaller_in_bar() {
        // CO2(g) <=> CO2(aq) uses up a mole of gas; 0.0057 is log10 1.01325.
        let shift = GasStandard::Atm.shift_to(GasStandard::Bar, Rational::from_integer(-1));
        assert!((shift + 1.01325_f64.log10()).abs() < 1e-15);
        assert_eq!(GasStandard::Bar.shift_to(GasStandard::Bar, Rational::from_integer(3)), 0.0);
    }

    #[test]
    fn standards_are_read() {
        assert_eq!(GasStandard::parse(" 1  atm "), Some(GasStandard::Atm));
        assert_eq!(GasStandard::parse("atm"), None);
    }
}
