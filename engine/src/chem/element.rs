//! The chemical elements and their atomic masses.
//!
//! Masses are the standard atomic weights of IUPAC (Prohaska, T. et al. (2022) Standard atomic weights of the elements
//! 2021, Pure Appl. Chem. 94, 573-600), conventional values where the report gives an interval; entered from memory.
//! Elements without a standard atomic weight are left out: they can be named but not weighed.

use std::fmt;

/// A chemical element, by its atomic number; or [`Element::SITE`].
#[derive(Debug, Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Hash)]
pub struct Element(u8);

impl Element {
    /// Hydrogen.
    pub const H: Self = Self(1);
    /// Carbon.
    pub const C: Self = Self(6);
    /// Oxygen.
    pub const O: Self = Self(8);

    /// X, a site of a solid that the name in brackets says: one place for a charge on an exchanger, `NaX(clay)`, or one
    /// group of a surface, `XOH(ferric oxide)`. It is balanced like an element and weighs nothing.
    pub const SITE: Self = Self(119);

    /// The element with this symbol, `Ca`; capitals matter.
    #[must_use]
    pub fn from_symbol(symbol: &str) -> Option<Self> {
        SYMBOLS.iter().position(|known| *known == symbol).map(|index| Self(index as u8 + 1))
    }

    /// The symbol, `Ca`.
    #[must_use]
    pub fn symbol(self) -> &'static str {
        SYMBOLS[self.0 as usize - 1]
    }

    /// Atomic mass in g/mol, if the element has a standard atomic weight.
    #[must_use]
    pub fn mass(self) -> Option<f64> {
        MASSES.binary_search_by(|(symbol, _)| symbol.cmp(&self.symbol())).ok().map(|index| MASSES[index].1)
    }

    /// Every symbol, in order of atomic number, and X.
    #[must_use]
    pub fn symbols() -> &'static [&'static str] {
        &SYMBOLS
    }
}

impl fmt::Display for Element {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str(self.symbol())
    }
}

#[rustfmt::skip]
const SYMBOLS: [&str; 119] = [
    "H", "He",
    "Li", "Be", "B", "C", "N", "O", "F", "Ne",
    "Na", "Mg", "Al", "Si", "P", "S", "Cl", "Ar",
    "K", "Ca", "Sc", "Ti", "V", "Cr", "Mn", "Fe", "Co", "Ni", "Cu", "Zn", "Ga", "Ge", "As", "Se", "Br", "Kr",
    "Rb", "Sr", "Y", "Zr", "Nb", "Mo", "Tc", "Ru", "Rh", "Pd", "Ag", "Cd", "In", "Sn", "Sb", "Te", "I", "Xe",
    "Cs", "Ba", "La", "Ce", "Pr", "Nd", "Pm", "Sm", "Eu", "Gd", "Tb", "Dy", "Ho", "Er", "Tm", "Yb", "Lu",
    "Hf", "Ta", "W", "Re", "Os", "Ir", "Pt", "Au", "Hg", "Tl", "Pb", "Bi", "Po", "At", "Rn",
    "Fr", "Ra", "Ac", "Th", "Pa", "U", "Np", "Pu", "Am", "Cm", "Bk", "Cf", "Es", "Fm", "Md", "No", "Lr",
    "Rf", "Db", "Sg", "Bh", "Hs", "Mt", "Ds", "Rg", "Cn", "Nh", "Fl", "Mc", "Lv", "Ts", "Og",
    "X",
];

/// Symbol and mass in g/mol, by symbol.
#[rustfmt::skip]
const MASSES: [(&str, f64); 85] = [
    ("Ag", 107.8682), ("Al", 26.9815384), ("Ar", 39.95), ("As", 74.921595), ("Au", 196.966570), ("B", 10.81),
    ("Ba", 137.327), ("Be", 9.0121831), ("Bi", 208.98040), ("Br", 79.904), ("C", 12.011), ("Ca", 40.078),
    ("Cd", 112.414), ("Ce", 140.116), ("Cl", 35.45), ("Co", 58.933194), ("Cr", 51.9961), ("Cs", 132.90545196),
    ("Cu", 63.546), ("Dy", 162.500), ("Er", 167.259), ("Eu", 151.964), ("F", 18.998403162), ("Fe", 55.845),
    ("Ga", 69.723), ("Gd", 157.249), ("Ge", 72.630), ("H", 1.008), ("He", 4.002602), ("Hf", 178.486),
    ("Hg", 200.592), ("Ho", 164.930329), ("I", 126.90447), ("In", 114.818), ("Ir", 192.217), ("K", 39.0983),
    ("Kr", 83.798), ("La", 138.90547), ("Li", 6.94), ("Lu", 174.96669), ("Mg", 24.305), ("Mn", 54.938043),
    ("Mo", 95.95), ("N", 14.007), ("Na", 22.98976928), ("Nb", 92.90637), ("Nd", 144.242), ("Ne", 20.1797),
    ("Ni", 58.6934), ("O", 15.999), ("Os", 190.23), ("P", 30.973761998), ("Pa", 231.03588), ("Pb", 207.2),
    ("Pd", 106.42), ("Pr", 140.90766), ("Pt", 195.084), ("Rb", 85.4678), ("Re", 186.207), ("Rh", 102.90549),
    ("Ru", 101.07), ("S", 32.06), ("Sb", 121.760), ("Sc", 44.955907), ("Se", 78.971), ("Si", 28.085),
    ("Sm", 150.36), ("Sn", 118.710), ("Sr", 87.62), ("Ta", 180.94788), ("Tb", 158.925354), ("Te", 127.60),
    ("Th", 232.0377), ("Ti", 47.867), ("Tl", 204.38), ("Tm", 168.934219), ("U", 238.02891), ("V", 50.9415),
    ("W", 183.84), ("X", 0.0), ("Xe", 131.293), ("Y", 88.905838), ("Yb", 173.045), ("Zn", 65.38), ("Zr", 91.222),
];

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn masses_are_found_by_symbol() {
        assert!(MASSES.is_sorted_by(|a, b| a.0 < b.0));
        for (symbol, mass) in MASSES {
            assert_eq!(Element::from_symbol(symbol).and_then(Element::mass), Some(mass));
        }
        assert_eq!(Element::from_symbol("Tc").unwrap().mass(), None);
        assert_eq!(Element::from_symbol("ca"), None);
    }

    #[test]
    fn the_named_elements_are_themselves() {
        assert_eq!((Element::H.symbol(), Element::C.symbol(), Element::O.symbol()), ("H", "C", "O"));
    }
}
