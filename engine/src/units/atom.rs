//! The single units, each with its size in SI base units. Everything else is composed of these.

use super::Dimension;
use super::dimension::Base;
use super::dimension::Base::{
    Amount, BareKg, Charge, Equivalents, Length, Mass, PracticalSalinity, SolutionMass, Temperature, Time,
    WaterMass,
};

/// One indivisible unit, such as `mg`.
#[derive(Debug)]
pub(super) struct Atom {
    /// As printed in plain text.
    pub symbol: &'static str,
    /// Other accepted spellings (`µ` becomes `u` before the look-up).
    aliases: &'static [&'static str],
    /// Size in SI base units is `mantissa` times ten to `power_of_ten`: kept apart so that mg to g is exact.
    pub mantissa: f64,
    pub power_of_ten: i32,
    /// Where the unit counts from: its own zero lies this many units above the absolute zero.
    pub zero: f64,
    exponents: &'static [(Base, i32)],
}

impl Atom {
    pub fn dimension(&self) -> Dimension {
        Dimension::of(self.exponents)
    }

    /// Whether the unit counts from a zero of its own (degC, degF, dbar).
    pub fn has_own_zero(&self) -> bool {
        self.zero != 0.0
    }
}

/// The atom with this spelling.
pub(super) fn find(spelling: &str) -> Option<&'static Atom> {
    ATOMS.iter().find(|atom| atom.symbol == spelling || atom.aliases.contains(&spelling))
}

/// Every spelling as printed.
pub(super) fn symbols() -> impl Iterator<Item = &'static str> {
    ATOMS.iter().map(|atom| atom.symbol)
}

/// A `kg` that stands below the fraction line and does not say of what.
pub(super) static BARE_KG: Atom = atom("kg", 1.0, 0, &[(BareKg, 1)]);

const fn atom(
    symbol: &'static str,
    mantissa: f64,
    power_of_ten: i32,
    exponents: &'static [(Base, i32)],
) -> Atom {
    Atom { symbol, aliases: &[], mantissa, power_of_ten, zero: 0.0, exponents }
}

const fn also(atom: Atom, aliases: &'static [&'static str]) -> Atom {
    Atom { aliases, ..atom }
}

/// A unit whose zero lies `zero` units above the absolute one.
const fn counted_from(zero: f64, atom: Atom) -> Atom {
    Atom { zero, ..atom }
}

const VOLUME: &[(Base, i32)] = &[(Length, 3)];
const PRESSURE: &[(Base, i32)] = &[(Mass, 1), (Length, -1), (Time, -2)];
const ENERGY: &[(Base, i32)] = &[(Mass, 1), (Length, 2), (Time, -2)];
const POTENTIAL: &[(Base, i32)] = &[(Mass, 1), (Length, 2), (Time, -2), (Charge, -1)];
const CAPACITANCE: &[(Base, i32)] = &[(Mass, -1), (Length, -2), (Time, 2), (Charge, 2)];
const MASS_IN_SOLUTION: &[(Base, i32)] = &[(Mass, 1), (SolutionMass, -1)];

static ATOMS: &[Atom] = &[
    atom("mol", 1.0, 0, &[(Amount, 1)]),
    atom("mmol", 1.0, -3, &[(Amount, 1)]),
    atom("umol", 1.0, -6, &[(Amount, 1)]),
    atom("nmol", 1.0, -9, &[(Amount, 1)]),
    atom("eq", 1.0, 0, &[(Equivalents, 1)]),
    atom("meq", 1.0, -3, &[(Equivalents, 1)]),
    atom("ueq", 1.0, -6, &[(Equivalents, 1)]),
    atom("neq", 1.0, -9, &[(Equivalents, 1)]),
    atom("kg", 1.0, 0, &[(Mass, 1)]),
    atom("g", 1.0, -3, &[(Mass, 1)]),
    atom("mg", 1.0, -6, &[(Mass, 1)]),
    atom("ug", 1.0, -9, &[(Mass, 1)]),
    atom("ng", 1.0, -12, &[(Mass, 1)]),
    atom("kg(water)", 1.0, 0, &[(WaterMass, 1)]),
    atom("kg(solution)", 1.0, 0, &[(SolutionMass, 1)]),
    atom("ppm", 1.0, -6, MASS_IN_SOLUTION),
    atom("ppb", 1.0, -9, MASS_IN_SOLUTION),
    also(atom("L", 1.0, -3, VOLUME), &["l"]),
    also(atom("mL", 1.0, -6, VOLUME), &["ml"]),
    also(atom("uL", 1.0, -9, VOLUME), &["ul"]),
    atom("m", 1.0, 0, &[(Length, 1)]),
    atom("cm", 1.0, -2, &[(Length, 1)]),
    atom("mm", 1.0, -3, &[(Length, 1)]),
    atom("um", 1.0, -6, &[(Length, 1)]),
    atom("nm", 1.0, -9, &[(Length, 1)]),
    atom("km", 1.0, 3, &[(Length, 1)]),
    also(atom("angstrom", 1.0, -10, &[(Length, 1)]), &["Å"]),
    atom("s", 1.0, 0, &[(Time, 1)]),
    atom("K", 1.0, 0, &[(Temperature, 1)]),
    also(counted_from(273.15, atom("degC", 1.0, 0, &[(Temperature, 1)])), &["°C", "℃"]),
    also(counted_from(459.67, atom("degF", 5.0 / 9.0, 0, &[(Temperature, 1)])), &["°F", "℉"]),
    atom("bar", 1.0, 5, PRESSURE),
    atom("mbar", 1.0, 2, PRESSURE),
    atom("Pa", 1.0, 0, PRESSURE),
    atom("hPa", 1.0, 2, PRESSURE),
    atom("kPa", 1.0, 3, PRESSURE),
    atom("MPa", 1.0, 6, PRESSURE),
    atom("atm", 1.01325, 5, PRESSURE),
    atom("matm", 1.01325, 2, PRESSURE),
    atom("uatm", 1.01325, -1, PRESSURE),
    // Sea pressure: 0 dbar is one standard atmosphere absolute (IOC, SCOR and IAPSO 2010).
    counted_from(10.1325, atom("dbar", 1.0, 4, PRESSURE)),
    atom("V", 1.0, 0, POTENTIAL),
    atom("mV", 1.0, -3, POTENTIAL),
    atom("C", 1.0, 0, &[(Charge, 1)]),
    atom("F", 1.0, 0, CAPACITANCE),
    atom("kJ", 1.0, 3, ENERGY),
    atom("J", 1.0, 0, ENERGY),
    atom("kcal", 4.184, 3, ENERGY),
    atom("cal", 4.184, 0, ENERGY),
    also(atom("PSU", 1.0, 0, &[(PracticalSalinity, 1)]), &["psu"]),
    atom("%", 1.0, -2, &[]),
    atom("1", 1.0, 0, &[]),
];
