//! What an amount is an amount of: an element, one of its oxidation states, or a species it is expressed as.

use std::fmt;

use crate::chem::{Element, Rational, Species};
use crate::nearest::nearest;

/// The subject of a measured amount.
#[derive(Debug, Clone, PartialEq, Eq)]
pub enum Analyte {
    /// An element in whatever form: `Ca`, `Si`.
    Element(Element),
    /// An element in one oxidation state, in Stock notation: `Fe(II)`, `S(VI)`, `N(-III)`.
    State(Element, i32),
    /// All of a species' element and oxidation state, expressed as that species: `SO4^2-`.
    Species(Species),
}

/// Why a key names no analyte.
#[derive(Debug, Clone, PartialEq, Eq, thiserror::Error)]
#[non_exhaustive]
pub enum AnalyteError {
    /// Hydrogen and oxygen are counted by water and pH.
    #[error(
        "`{0}` is not given as an amount: hydrogen and oxygen follow from the water, its pH and its alkalinity; the dissolved \
         gases are `O2(aq)` and `H2(aq)`"
    )]
    OfWater(String),
    /// One species of the carbonate system, which says nothing of the others.
    #[error("`{0}` is not measured as such: give `alkalinity` or `DIC`, and `pH` or `fCO2`")]
    Carbonate(String),
    /// An ion written without its charge, as laboratories do.
    #[error("`{key}` is an ion: write `{ion}`")]
    Charge {
        /// The key.
        key: String,
        /// The ion it stands for.
        ion: &'static str,
    },
    /// A species with more than one element besides H and O.
    #[error("`{species}` holds {elements}: give each of them as an amount of its own")]
    Several {
        /// The species.
        species: String,
        /// Its elements.
        elements: String,
    },
    /// An oxidation state that cannot be read.
    #[error("`{0}` is no oxidation state: write it in Roman numerals, as in `Fe(II)`, `N(-III)` or `Fe(0)`")]
    OxidationState(String),
    /// No element, oxidation state or species.
    #[error("`{name}` is no element, oxidation state or species{}", help(.nearest.as_deref()))]
    Unknown {
        /// The key.
        name: String,
        /// The nearest element symbol.
        nearest: Option<String>,
    },
}

fn help(nearest: Option<&str>) -> String {
    nearest.map(|name| format!("; did you mean `{name}`?")).unwrap_or_default()
}

impl Analyte {
    /// Reads a key of a sample.
    ///
    /// # Errors
    ///
    /// Returns why the key names nothing that can be given as an amount.
    pub fn parse(key: &str) -> Result<Self, AnalyteError> {
        if let Some(element) = Element::from_symbol(key) {
            return if matches!(element, Element::H | Element::O) {
                Err(AnalyteError::OfWater(key.into()))
            } else {
                Ok(Self::Element(element))
            };
        }
        if let Some((symbol, numeral)) = key.strip_suffix(')').and_then(|key| key.split_once('('))
            && let Some(element) = Element::from_symbol(symbol)
        {
            let state = roman(numeral).ok_or_else(|| AnalyteError::OxidationState(key.into()))?;
            if matches!(element, Element::H | Element::O) && state != 0 {
                return Err(AnalyteError::OfWater(key.into()));
            }
            return Ok(Self::State(element, state));
        }
        if let Some((_, ion)) = WITHOUT_CHARGE.iter().find(|(written, _)| *written == key) {
            return Err(AnalyteError::Charge { key: key.into(), ion });
        }
        match Species::parse(key) {
            Ok(species) => Self::of_species(species),
            Err(_) => {
                let nearest = nearest(key, Element::symbols().iter().copied()).map(str::to_string);
                Err(AnalyteError::Unknown { name: key.into(), nearest })
            }
        }
    }

    fn of_species(species: Species) -> Result<Self, AnalyteError> {
        let elements: Vec<&str> = species.elements_beside_water().map(Element::symbol).collect();
        match elements.as_slice() {
            [] if is_gas_of_water(&species) => Ok(Self::Species(species)),
            [] => Err(AnalyteError::OfWater(species.to_string())),
            ["C"] if CARBONATE.contains(&species.key()) => Err(AnalyteError::Carbonate(species.to_string())),
            [_] => Ok(Self::Species(species)),
            several => {
                Err(AnalyteError::Several { species: species.to_string(), elements: several.join(" and ") })
            }
        }
    }

    /// The element counted.
    #[must_use]
    pub fn element(&self) -> Element {
        match self {
            Self::Element(element) | Self::State(element, _) => *element,
            Self::Species(species) => {
                let own = species.elements_beside_water().next();
                // Dissolved oxygen and hydrogen hold no other.
                own.unwrap_or_else(|| species.composition()[0].0)
            }
        }
    }

    /// Moles of the element in a mole of the analyte.
    #[must_use]
    pub fn atoms(&self) -> Rational {
        match self {
            Self::Species(species) => species.count(self.element()),
            _ => 1.into(),
        }
    }

    /// Molar mass of the analyte as written, g/mol.
    #[must_use]
    pub fn molar_mass(&self) -> Option<f64> {
        match self {
            Self::Element(element) | Self::State(element, _) => element.mass(),
            Self::Species(species) => species.molar_mass(),
        }
    }

    /// Oxidation state of the element, where the analyte fixes it: hydrogen counts +1 and oxygen -2.
    #[must_use]
    pub fn oxidation_state(&self) -> Option<Rational> {
        match self {
            Self::Element(_) => None,
            Self::State(_, state) => Some(Rational::from_integer(i64::from(*state))),
            Self::Species(species) => oxidation_state(species, self.element()),
        }
    }
}

/// Dissolved oxygen and hydrogen, which are measured though their element is water's own.
fn is_gas_of_water(species: &Species) -> bool {
    matches!(species.key(), "O2(aq)" | "H2(aq)")
}

/// Mean oxidation state of an element in a species, hydrogen counted +1 and oxygen -2; `None` if it is not the only
/// other element.
#[must_use]
pub fn oxidation_state(species: &Species, element: Element) -> Option<Rational> {
    let count = species.count(element);
    if count == 0.into() || species.elements_beside_water().any(|other| other != element) {
        return None;
    }
    let others = |own: Element| if own == element { 0.into() } else { species.count(own) };
    let rest = others(Element::H) - others(Element::O) * 2;
    Some((Rational::from_integer(i64::from(species.charge())) - rest) / count)
}

impl fmt::Display for Analyte {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            Self::Element(element) => write!(f, "{element}"),
            Self::State(element, state) => write!(f, "{element}({})", to_roman(*state)),
            Self::Species(species) => write!(f, "{species}"),
        }
    }
}

/// Species of the carbonate system: what a titration calls free CO2 is `fCO2` or follows from pH.
const CARBONATE: [&str; 6] = ["HCO3^-", "CO3^2-", "CO2(aq)", "H2CO3(aq)", "HCO3(aq)", "CO3(aq)"];

/// Ions as laboratories write them.
const WITHOUT_CHARGE: [(&str, &str); 8] = [
    ("SO4", "SO4^2-"),
    ("NO3", "NO3^-"),
    ("NO2", "NO2^-"),
    ("NH4", "NH4^+"),
    ("PO4", "PO4^3-"),
    ("HPO4", "HPO4^2-"),
    ("H2PO4", "H2PO4^-"),
    ("BO3", "BO3^3-"),
];

const NUMERALS: [&str; 10] = ["0", "I", "II", "III", "IV", "V", "VI", "VII", "VIII", "IX"];

fn roman(text: &str) -> Option<i32> {
    let (sign, numeral) = match text.strip_prefix(['-', '−']) {
        Some(rest) => (-1, rest),
        None => (1, text.strip_prefix('+').unwrap_or(text)),
    };
    NUMERALS.iter().position(|known| *known == numeral).map(|value| sign * value as i32)
}

/// The oxidation state in Roman numerals: `II`, `-III`, `0`.
#[must_use]
pub fn to_roman(state: i32) -> String {
    let numeral = NUMERALS.get(state.unsigned_abs() as usize).copied().unwrap_or("?");
    format!("{}{numeral}", if state < 0 { "-" } else { "" })
}

#[cfg(test)]
mod tests {
    use super::*;

    #[track_caller]
    fn case(key: &str, element: &str, state: Option<i64>) {
        let analyte = Analyte::parse(key).unwrap();
        assert_eq!(analyte.element().symbol(), element);
        assert_eq!(analyte.oxidation_state(), state.map(Rational::from_integer), "{key}");
        assert_eq!(Analyte::parse(&analyte.to_string()).unwrap(), analyte);
    }

    #[test]
    fn keys_name_elements_states_and_species() {
        case("Ca", "Ca", None);
        case("Fe(II)", "Fe", Some(2));
        case("N(-III)", "N", Some(-3));
        case("SO4^2-", "S", Some(6));
        case("NO3^-", "N", Some(5));
        case("NH4^+", "N", Some(-3));
        case("H4SiO4(aq)", "Si", Some(4));
        case("O2(aq)", "O", Some(0));
        case("O2", "O", Some(0));
        case("O(0)", "O", Some(0));
        case("H2(aq)", "H", Some(0));
    }

    #[test]
    fn what_is_no_analyte_says_why() {
        let message = |key: &str| Analyte::parse(key).unwrap_err().to_string();
        assert!(message("HCO3^-").ends_with("give `alkalinity` or `DIC`, and `pH` or `fCO2`"));
        assert!(message("CO2").contains("is not measured as such"));
        assert_eq!(message("SO4"), "`SO4` is an ion: write `SO4^2-`");
        assert!(message("H").contains("follow from the water"));
        assert!(message("OH^-").contains("follow from the water"));
        assert!(message("O(-II)").contains("follow from the water"));
        assert_eq!(message("NaCl"), "`NaCl(aq)` holds Na and Cl: give each of them as an amount of its own");
        assert_eq!(
            message("Fe(2)"),
            "`Fe(2)` is no oxidation state: write it in Roman numerals, as in `Fe(II)`, `N(-III)` or `Fe(0)`"
        );
        assert!(message("alkalinty").contains("is no element"));
    }
}
