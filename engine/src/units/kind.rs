//! The kinds of value a person gives, each with its default unit and the units it may be given in.

use std::sync::LazyLock;

use super::{Dimension, Unit, UnitError};
use crate::nearest::nearest;

/// What is being measured.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash)]
pub enum Kind {
    /// How much of a substance a water holds, per kilogram or litre.
    Amount,
    /// How much of a substance there is, by itself.
    AmountOfSubstance,
    /// Acid-base capacity, per kilogram or litre; here mol counts as eq.
    Alkalinity,
    /// Temperature.
    Temperature,
    /// Pressure, partial pressure, fugacity.
    Pressure,
    /// Electric potential.
    Potential,
    /// Energy per mole: enthalpy, Gibbs energy.
    Energy,
    /// Entropy or heat capacity per mole.
    Entropy,
    /// Volume per mole.
    MolarVolume,
    /// Compressibility per mole: change of molar volume with pressure.
    MolarCompressibility,
    /// Mass per mole.
    MolarMass,
    /// Interaction coefficient between ions: log units per molality, so `kg/mol` means `kg(water)/mol`.
    InteractionCoefficient,
    /// Volume.
    Volume,
    /// Mass.
    Mass,
    /// Mass per volume.
    Density,
    /// Salinity, absolute or practical.
    Salinity,
    /// Length, depth.
    Length,
    /// Surface area per mass.
    SpecificArea,
    /// Charge stored per area and potential.
    Capacitance,
    /// A pure number: fraction, pH, log K.
    Fraction,
}

/// The units of a kind given by name: what `units("amount")` lists.
///
/// # Errors
///
/// [`UnitError::UnknownKind`], listing the kinds.
pub fn units_of(kind: &str) -> Result<&'static [&'static str], UnitError> {
    Kind::named(kind).map(Kind::units)
}

impl Kind {
    /// Every kind, in the order in which they are listed.
    pub const ALL: [Self; 20] = [
        Self::Amount,
        Self::AmountOfSubstance,
        Self::Alkalinity,
        Self::Temperature,
        Self::Pressure,
        Self::Potential,
        Self::Energy,
        Self::Entropy,
        Self::MolarVolume,
        Self::MolarCompressibility,
        Self::MolarMass,
        Self::InteractionCoefficient,
        Self::Volume,
        Self::Mass,
        Self::Density,
        Self::Salinity,
        Self::Length,
        Self::SpecificArea,
        Self::Capacitance,
        Self::Fraction,
    ];

    /// The kind with this name.
    ///
    /// # Errors
    ///
    /// [`UnitError::UnknownKind`] with the nearest name and the list.
    pub fn named(name: &str) -> Result<Self, UnitError> {
        Self::ALL.into_iter().find(|kind| kind.name() == name).ok_or_else(|| UnitError::UnknownKind {
            name: name.to_owned(),
            nearest: nearest(name, Self::ALL.map(Self::name)).map(str::to_owned),
        })
    }

    /// The kind's name in messages and in `units("…")`.
    #[must_use]
    pub fn name(self) -> &'static str {
        self.entry().0
    }

    /// The units to offer, the default first.
    #[must_use]
    pub fn units(self) -> &'static [&'static str] {
        self.entry().1
    }

    /// The unit of a bare number.
    #[must_use]
    pub fn default_unit(self) -> Unit {
        Unit::known(self.units()[0])
    }

    /// Whether a value of this kind may be given in the unit.
    ///
    /// By dimension, so that units not listed (`mmol/m3`) pass too.
    #[must_use]
    pub fn accepts(self, unit: &Unit) -> bool {
        ACCEPTED[self as usize].contains(&unit.dimension())
            && (unit.expressed_as().is_none() || self.is_of_a_substance())
    }

    /// Reads a unit of this kind.
    ///
    /// # Errors
    ///
    /// [`UnitError::Unknown`] and [`UnitError::WrongKind`] list the kind's units; [`UnitError::Malformed`] says what
    /// to write.
    pub fn parse_unit(self, text: &str) -> Result<Unit, UnitError> {
        let unit = Unit::parse(text).map_err(|error| error.asked_for(self))?;
        self.check(&unit)?;
        Ok(unit)
    }

    /// Refuses a unit of another kind.
    ///
    /// # Errors
    ///
    /// [`UnitError::WrongKind`], listing this kind's units.
    pub fn check(self, unit: &Unit) -> Result<(), UnitError> {
        if self.accepts(unit) {
            Ok(())
        } else {
            Err(UnitError::WrongKind { unit: unit.symbol(), kind: self })
        }
    }

    /// Every unit listed for some kind.
    pub(super) fn every_unit() -> impl Iterator<Item = &'static str> {
        Self::ALL.into_iter().flat_map(|kind| kind.units().iter().copied())
    }

    fn is_of_a_substance(self) -> bool {
        matches!(self, Self::Amount | Self::AmountOfSubstance | Self::Alkalinity)
    }

    fn entry(self) -> (&'static str, &'static [&'static str]) {
        match self {
            Self::Amount => ("amount", AMOUNT),
            Self::AmountOfSubstance => (
                "amount of substance",
                &["mol", "mmol", "umol", "nmol", "eq", "meq", "ueq", "kg", "g", "mg", "ug"],
            ),
            Self::Alkalinity => ("alkalinity", ALKALINITY),
            Self::Temperature => ("temperature", &["degC", "K", "degF"]),
            Self::Pressure => {
                ("pressure", &["bar", "mbar", "atm", "matm", "uatm", "Pa", "hPa", "kPa", "MPa", "dbar"])
            }
            Self::Potential => ("potential", &["V", "mV"]),
            Self::Energy => ("energy", &["kJ/mol", "J/mol", "kcal/mol", "cal/mol"]),
            Self::Entropy => ("entropy", &["J/(mol K)", "kJ/(mol K)", "cal/(mol K)", "kcal/(mol K)"]),
            Self::MolarVolume => ("molar volume", &["cm3/mol", "mL/mol", "L/mol", "m3/mol"]),
            Self::MolarCompressibility => ("molar compressibility", &["cm3/(mol bar)", "cm3/(mol MPa)"]),
            Self::MolarMass => ("molar mass", &["g/mol", "kg/mol"]),
            Self::InteractionCoefficient => ("interaction coefficient", &["kg/mol", "kg(water)/mol"]),
            Self::Volume => ("volume", &["L", "mL", "uL", "cm3", "m3"]),
            Self::Mass => ("mass", &["kg", "g", "mg", "ug", "kg(water)", "kg(solution)"]),
            Self::Density => ("density", &["kg/L", "g/mL", "g/cm3", "kg/m3", "g/L"]),
            Self::Salinity => ("salinity", &["g/kg", "g/kg(solution)", "PSU"]),
            Self::Length => ("length", &["m", "cm", "mm", "um", "nm", "km", "angstrom"]),
            Self::SpecificArea => ("specific area", &["m2/g", "m2/kg"]),
            Self::Capacitance => ("capacitance", &["F/m2"]),
            Self::Fraction => ("fraction", &["1", "%"]),
        }
    }
}

/// The dimensions of the listed units, by position in [`Kind::ALL`]: worked out once, since surveys ask for every cell.
static ACCEPTED: LazyLock<[Vec<Dimension>; Kind::ALL.len()]> = LazyLock::new(|| {
    Kind::ALL.map(|kind| {
        let mut dimensions: Vec<Dimension> = Vec::new();
        for dimension in kind.units().iter().map(|listed| Unit::known(listed).dimension()) {
            if !dimensions.contains(&dimension) {
                dimensions.push(dimension);
            }
        }
        dimensions
    })
});

const AMOUNT: &[&str] = &[
    "mol/kg",
    "mmol/kg",
    "umol/kg",
    "nmol/kg",
    "mol/kg(water)",
    "mol/kg(solution)",
    "mol/L",
    "mmol/L",
    "umol/L",
    "nmol/L",
    "eq/kg",
    "meq/kg",
    "ueq/kg",
    "eq/kg(water)",
    "eq/kg(solution)",
    "eq/L",
    "meq/L",
    "ueq/L",
    "g/kg",
    "mg/kg",
    "ug/kg",
    "ng/kg",
    "mg/kg(water)",
    "mg/kg(solution)",
    "g/L",
    "mg/L",
    "ug/L",
    "ng/L",
    "ppm",
    "ppb",
];

const ALKALINITY: &[&str] = &[
    "eq/kg",
    "meq/kg",
    "ueq/kg",
    "eq/kg(water)",
    "eq/kg(solution)",
    "eq/L",
    "meq/L",
    "ueq/L",
    "mol/kg",
    "mmol/kg",
    "umol/kg",
    "mol/kg(water)",
    "mol/kg(solution)",
    "mol/L",
    "mmol/L",
    "umol/L",
    "mg/L",
    "mg/kg",
    "mg/kg(water)",
    "mg/kg(solution)",
    "ppm",
];
