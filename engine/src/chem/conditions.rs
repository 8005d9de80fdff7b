//! The conditions in which a constant holds: what must agree before constants add.
//!
//! Five things besides temperature say what the number of a constant means: the medium, the unit in which dissolved
//! species are counted, what `H^+` stands for, how gases are counted, and the pressure. [`Terms`] says which of them
//! concern a reaction: one without gases, say, has nothing to do with the standard of gases.

use std::fmt;

use super::equation::Equation;
use super::formula::Species;
use super::rational::{self, Rational};
use crate::physics::constants::{BAR, STANDARD_ATMOSPHERE};

/// Everything besides temperature that fixes what a constant means.
#[derive(Debug, Clone, PartialEq, Default)]
pub struct Conditions {
    /// The solution in which it was measured, or infinite dilution.
    pub medium: Medium,
    /// How dissolved species are counted.
    pub solutes: SoluteUnit,
    /// What `H^+` stands for.
    pub ph_scale: PhScale,
    /// How gases are counted.
    pub gases: GasUnit,
    /// Pressure on the solution.
    pub pressure: HoldingPressure,
}

/// The solution in which a constant holds.
#[derive(Debug, Clone, PartialEq, Default)]
pub enum Medium {
    /// Zero ionic strength: every term is an activity.
    #[default]
    InfiniteDilution,
    /// An ionic strength: every term is a concentration (but see [`PhScale::Activity`]).
    IonicStrength {
        /// In mol per `per`.
        value: f64,
        /// Litre of solution or kilogram of water.
        per: SoluteUnit,
        /// The salt that makes it up; `None` where it was not said.
        salt: Option<String>,
    },
    /// Seawater of a practical salinity.
    Seawater {
        /// Practical salinity.
        salinity: f64,
    },
}

/// How dissolved species are counted.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Default)]
pub enum SoluteUnit {
    /// mol/kg(water).
    #[default]
    Molal,
    /// mol/L.
    Molar,
    /// mol/kg(solution), the marine convention.
    PerKgSolution,
}

/// What `H^+` stands for in a constant.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Default)]
pub enum PhScale {
    /// The activity of the hydrogen ion.
    #[default]
    Activity,
    /// The concentration of the free hydrogen ion.
    Free,
    /// Free hydrogen ion and HSO4^-.
    Total,
    /// Free hydrogen ion, HSO4^- and HF.
    Seawater,
    /// 10^-pH measured against dilute buffers of the (former) National Bureau of Standards.
    Nbs,
}

/// How gases are counted.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum GasUnit {
    /// By fugacity, relative to a standard: Kp.
    Pressure(GasStandard),
    /// In mol/L: Kc.
    Concentration,
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

/// The pressure, in bar, at which a constant holds.
#[derive(Debug, Clone, Copy)]
pub struct HoldingPressure(pub f64);

/// Which terms a reaction has, so which conditions concern it.
#[derive(Debug, Clone, Copy)]
pub struct Terms {
    /// Coefficients of dissolved species, summed; `H^+` left out where it is an activity.
    pub solutes: Rational,
    /// Whether any species is dissolved.
    pub has_solutes: bool,
    /// Coefficient of `H^+`.
    pub protons: Rational,
    /// Whether any species is a gas.
    pub has_gases: bool,
}

/// One condition in which two constants differ.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Mismatch {
    /// What the left constant holds for.
    pub left: String,
    /// What the right one holds for.
    pub right: String,
    /// The conversion to call.
    pub conversion: String,
}

impl Conditions {
    /// The conditions of a sum: what each term is concerned with.
    ///
    /// # Errors
    ///
    /// Returns the first condition in which the two differ and which concerns both.
    pub fn common(&self, own: Terms, other: &Self, others: Terms) -> Result<Self, Mismatch> {
        let medium =
            merged(own.has_solutes, &self.medium, others.has_solutes, &other.medium, Medium::conversion)?;
        let solutes = merged(
            own.solutes != 0.into(),
            &self.solutes,
            others.solutes != 0.into(),
            &other.solutes,
            SoluteUnit::conversion,
        )?;
        let ph_scale = merged(
            own.protons != 0.into(),
            &self.ph_scale,
            others.protons != 0.into(),
            &other.ph_scale,
            PhScale::conversion,
        )?;
        let gases = merged(own.has_gases, &self.gases, others.has_gases, &other.gases, GasUnit::conversion)?;
        let pressure =
            merged(true, &self.pressure, true, &other.pressure, |to, _| format!(".to_pressure(\"{to}\")"))?;
        Ok(Self { medium, solutes, ph_scale, gases, pressure })
    }

    /// In words, for a reaction with these terms; what does not concern it is left out.
    #[must_use]
    pub fn describe(&self, terms: Terms) -> String {
        let mut words = Vec::new();
        let diluted = self.medium == Medium::InfiniteDilution;
        if terms.has_solutes {
            let unit = match (self.solutes, diluted) {
                (SoluteUnit::Molal, true) => "molal activities".to_string(),
                (SoluteUnit::Molar, true) => "molar activities".to_string(),
                (unit, _) => format!("concentrations in {unit}"),
            };
            words.push(if diluted { unit } else { format!("{unit}, {}", self.medium) });
        }
        if terms.protons != 0.into() && !diluted {
            words.push(self.ph_scale.to_string());
        }
        if terms.has_gases {
            words.push(self.gases.to_string());
        }
        if self.pressure != HoldingPressure::default() {
            words.push(format!("at {}", self.pressure));
        }
        if words.is_empty() { "activities of pure phases".into() } else { words.join(", ") }
    }

    /// What keeps a constant out of a ledger of seawater, where concentrations in mol/kg(solution) are required, `H^+` on
    /// the free, total or seawater scale. Gases may be counted from 1 atm.
    #[must_use]
    pub fn unfit_for_sea_ledger(&self, terms: Terms) -> Option<Mismatch> {
        let medium = match self.medium {
            Medium::Seawater { .. } => self.medium.clone(),
            _ => Medium::Seawater { salinity: 35.0 },
        };
        let ph_scale = match self.ph_scale {
            PhScale::Activity | PhScale::Nbs => PhScale::Total,
            scale => scale,
        };
        let gases = match self.gases {
            GasUnit::Concentration => GasUnit::default(),
            gases => gases,
        };
        let standard = Self {
            medium,
            solutes: SoluteUnit::PerKgSolution,
            ph_scale,
            gases,
            pressure: HoldingPressure::default(),
        };
        standard.common(terms, self, terms).err()
    }

    /// What keeps a constant out of a ledger, where molal activities at zero ionic strength and 1 bar are required.
    ///
    /// # Returns
    ///
    /// What it holds for instead and the conversion to call; `None` where it fits. Gases may be counted from 1 atm.
    #[must_use]
    pub fn unfit_for_ledger(&self, terms: Terms) -> Option<Mismatch> {
        let standard = Self { gases: GasUnit::default(), ..Self::default() };
        let gases = match self.gases {
            GasUnit::Pressure(_) => GasUnit::default(),
            GasUnit::Concentration => GasUnit::Concentration,
        };
        standard.common(terms, &Self { gases, ..self.clone() }, terms).err()
    }
}

/// The condition both go with: that of the one it concerns.
fn merged<T: Clone + PartialEq + fmt::Display>(
    concerns_left: bool,
    left: &T,
    concerns_right: bool,
    right: &T,
    conversion: impl Fn(&T, &T) -> String,
) -> Result<T, Mismatch> {
    match (concerns_left, concerns_right) {
        (true, true) if left != right => Err(Mismatch {
            left: left.to_string(),
            right: right.to_string(),
            conversion: conversion(left, right),
        }),
        (false, true) => Ok(right.clone()),
        _ => Ok(left.clone()),
    }
}

impl Terms {
    /// The terms of an equation under conditions.
    #[must_use]
    pub fn of(equation: &Equation, conditions: &Conditions) -> Self {
        let proton = Species::proton();
        let dissolved = || equation.terms().iter().filter(|(species, _)| species.is_solute());
        Self {
            solutes: dissolved()
                .filter(|(species, _)| *species != proton || conditions.counts_protons())
                .map(|(_, coefficient)| *coefficient)
                .sum(),
            has_solutes: dissolved().next().is_some(),
            protons: equation.coefficient(&proton),
            has_gases: equation.terms().iter().any(|(species, _)| species.is_gas()),
        }
    }
}

impl Conditions {
    /// Whether `H^+` is counted in the unit of the other solutes, not as an activity of its own.
    #[must_use]
    pub fn counts_protons(&self) -> bool {
        self.medium == Medium::InfiniteDilution || !matches!(self.ph_scale, PhScale::Activity | PhScale::Nbs)
    }
}

impl Medium {
    /// Ionic strength in mol/kg(water).
    ///
    /// # Returns
    ///
    /// `None` where it is stated per litre. Seawater: the formula of Dickson, Sabine and Christian (2007), PICES
    /// Special Publication 3, chapter 5.
    #[must_use]
    pub fn ionic_strength(&self) -> Option<f64> {
        match self {
            Self::InfiniteDilution => Some(0.0),
            Self::IonicStrength { value, per: SoluteUnit::Molal, .. } => Some(*value),
            Self::IonicStrength { .. } => None,
            Self::Seawater { salinity } => Some(crate::physics::seawater::ionic_strength(*salinity)),
        }
    }

    /// Practical salinity, of seawater.
    #[must_use]
    pub fn salinity(&self) -> Option<f64> {
        match self {
            Self::Seawater { salinity } => Some(*salinity),
            _ => None,
        }
    }

    fn conversion(target: &Self, other: &Self) -> String {
        if let (Self::Seawater { salinity }, Self::Seawater { .. }) = (target, other) {
            return format!(".at_salinity({salinity})");
        }
        let towards = if *target == Self::InfiniteDilution { target } else { other };
        match towards.ionic_strength() {
            Some(ionic_strength) => format!(".to_ionic_strength({ionic_strength:?}, \"davies\")"),
            None => ".to_molal(#{ density: … })".into(),
        }
    }
}

impl SoluteUnit {
    fn conversion(_: &Self, _: &Self) -> String {
        ".to_molal(#{ density: … })".into()
    }
}

impl PhScale {
    /// Reads `free`, `total`, `seawater`, `nbs` or `activity`.
    #[must_use]
    pub fn parse(text: &str) -> Option<Self> {
        Self::ALL.into_iter().find(|scale| scale.word() == text)
    }

    /// Every scale.
    pub const ALL: [Self; 5] = [Self::Free, Self::Total, Self::Seawater, Self::Nbs, Self::Activity];

    /// As it is written in options.
    #[must_use]
    pub fn word(self) -> &'static str {
        match self {
            Self::Activity => "activity",
            Self::Free => "free",
            Self::Total => "total",
            Self::Seawater => "seawater",
            Self::Nbs => "nbs",
        }
    }

    fn conversion(target: &Self, _: &Self) -> String {
        format!(".to_ph_scale(\"{}\", …)", target.word())
    }
}

impl GasUnit {
    fn conversion(target: &Self, other: &Self) -> String {
        match (target, other) {
            (Self::Concentration, _) => ".to_kc()".into(),
            (_, Self::Concentration) => ".to_kp()".into(),
            (Self::Pressure(standard), _) => format!(".to_gas_standard(\"{standard}\")"),
        }
    }
}

impl Default for GasUnit {
    fn default() -> Self {
        Self::Pressure(GasStandard::default())
    }
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

impl Default for HoldingPressure {
    fn default() -> Self {
        Self(1.0)
    }
}

impl PartialEq for HoldingPressure {
    /// 1 bar and 1 atm count as the same: the difference moves log K by some 1e-5.
    fn eq(&self, other: &Self) -> bool {
        (self.0 - other.0).abs() < 0.02
    }
}

impl fmt::Display for HoldingPressure {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        write!(f, "{} bar", self.0)
    }
}

impl fmt::Display for Medium {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            Self::InfiniteDilution => f.write_str("zero ionic strength"),
            Self::IonicStrength { value, per, salt: None } => write!(f, "I = {value} {per}"),
            Self::IonicStrength { value, per, salt: Some(salt) } => write!(f, "I = {value} {per} of {salt}"),
            Self::Seawater { salinity } => write!(f, "seawater of salinity {salinity}"),
        }
    }
}

impl fmt::Display for SoluteUnit {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str(match self {
            Self::Molal => "mol/kg(water)",
            Self::Molar => "mol/L",
            Self::PerKgSolution => "mol/kg(solution)",
        })
    }
}

impl fmt::Display for PhScale {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str(match self {
            Self::Activity => "H^+ as activity",
            Self::Free => "pH on the free scale",
            Self::Total => "pH on the total scale",
            Self::Seawater => "pH on the seawater scale",
            Self::Nbs => "pH on the NBS scale",
        })
    }
}

impl fmt::Display for GasUnit {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            Self::Pressure(standard) => write!(f, "gases counted from {standard}"),
            Self::Concentration => f.write_str("gases in mol/L"),
        }
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

    #[test]
    fn conditions_concern_a_reaction_by_its_terms() {
        let seawater = Conditions {
            medium: Medium::Seawater { salinity: 35.0 },
            solutes: SoluteUnit::PerKgSolution,
            ph_scale: PhScale::Total,
            ..Conditions::default()
        };
        let terms = |equation: &str, conditions: &Conditions| {
            Terms::of(&Equation::parse(equation).unwrap(), conditions)
        };
        let gases = terms("N2O4(g) <=> 2 NO2(g)", &Conditions::default());
        let acid = terms("HCO3^- <=> CO3^2- + H^+", &seawater);
        let sum = Conditions::default().common(gases, &seawater, acid).unwrap();
        assert_eq!(sum, seawater);
        assert!(Conditions::default().common(acid, &seawater, acid).is_err());
        assert_eq!(
            seawater.describe(acid),
            "concentrations in mol/kg(solution), seawater of salinity 35, pH on the total scale"
        );
        assert_eq!(Conditions::default().describe(gases), "gases counted from 1 bar");
    }
}
