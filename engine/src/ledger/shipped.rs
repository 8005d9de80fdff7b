//! The constants and ledgers that come with the program.

use std::collections::BTreeMap;
use std::sync::OnceLock;

use lysocline_stdlib::{CONSTANTS, LEDGERS};

use super::file::{self, ConstantFile, FileFault};
use super::ledger::Ledger;
use super::standard_formation::Elements;
use crate::nearest::nearest;
use crate::text::list;

/// Why a ledger cannot be had by name.
#[derive(Debug, Clone, PartialEq, thiserror::Error)]
#[non_exhaustive]
pub enum ShippedError {
    /// No ledger of this name is shipped.
    #[error("no ledger `{name}` is shipped: there are {}{}", list(&names()), help(.nearest.as_deref()))]
    Unknown {
        /// The name asked for.
        name: String,
        /// The nearest shipped name.
        nearest: Option<String>,
    },
    /// The edition asked for is not in this version of the program.
    #[error("`{name}` has the edition `{has}` here, not `{asked}`")]
    Edition {
        /// The ledger.
        name: String,
        /// The edition that is shipped.
        has: String,
        /// The one asked for.
        asked: String,
    },
    /// A shipped file is at fault: a defect of the program, kept from panicking.
    #[error("the shipped ledger `{name}` cannot be read: {}", .faults.join("; "))]
    Broken {
        /// The ledger.
        name: String,
        /// Faults with their files and lines.
        faults: Vec<String>,
    },
}

fn help(nearest: Option<&str>) -> String {
    nearest.map(|name| format!("; did you mean `{name}`?")).unwrap_or_default()
}

/// Names of the shipped ledgers.
#[must_use]
pub fn names() -> Vec<&'static str> {
    LEDGERS.iter().map(|(name, _)| *name).collect()
}

/// A shipped ledger, of a given edition if one is asked for; read once.
///
/// # Errors
///
/// [`ShippedError::Unknown`] or [`ShippedError::Edition`].
pub fn ledger(name: &str, edition: Option<&str>) -> Result<Ledger, ShippedError> {
    let found = match super::in_force::instead_of(name) {
        Some(stand_in) => stand_in,
        None => as_shipped(name)?,
    };
    match (edition, found.edition()) {
        (Some(asked), Some(has)) if asked != has => {
            Err(ShippedError::Edition { name: name.into(), has: has.into(), asked: asked.into() })
        }
        _ => Ok(found),
    }
}

/// The same as shipped and without being noted as used: for looking names up.
///
/// # Errors
///
/// As [`ledger`].
pub fn as_shipped(name: &str) -> Result<Ledger, ShippedError> {
    static READ: [OnceLock<Result<Ledger, ShippedError>>; LEDGERS.len()] =
        [const { OnceLock::new() }; LEDGERS.len()];
    let Some((read, (name, text))) = READ.iter().zip(LEDGERS).find(|(_, (own, _))| *own == name) else {
        let nearest = nearest(name, names()).map(str::to_string);
        return Err(ShippedError::Unknown { name: name.into(), nearest });
    };
    read.get_or_init(|| build(name, text)).clone()
}

/// Every shipped file of constants, by key.
///
/// # Errors
///
/// Faults with their files and lines.
pub fn constant_files() -> Result<&'static BTreeMap<&'static str, ConstantFile>, Vec<String>> {
    static FILES: OnceLock<Result<BTreeMap<&str, ConstantFile>, Vec<String>>> = OnceLock::new();
    let read = || {
        let mut files = BTreeMap::new();
        let mut faults = Vec::new();
        for (key, text) in CONSTANTS {
            match file::read_constants(key, text) {
                Ok(file) => drop(files.insert(*key, file)),
                Err(found) => faults.extend(in_file(key, &found)),
            }
        }
        if faults.is_empty() { Ok(files) } else { Err(faults) }
    };
    FILES.get_or_init(read).as_ref().map_err(Clone::clone)
}

fn build(name: &str, text: &str) -> Result<Ledger, ShippedError> {
    let broken =
        |faults: Vec<FileFault>| ShippedError::Broken { name: name.into(), faults: in_file(name, &faults) };
    file::build(&file::read_ledger(text).map_err(broken)?).map_err(broken)
}

/// Entropies of the elements that formation data count from where their own file gives none (Cox et al. 1989).
pub(super) fn elements() -> &'static Elements {
    const KEY: &str = "cox1989";
    static ELEMENTS: OnceLock<Elements> = OnceLock::new();
    let read = || {
        let text = CONSTANTS.iter().find(|(key, _)| *key == KEY);
        text.map_or_else(Elements::default, |(_, text)| file::read_elements(KEY, text))
    };
    ELEMENTS.get_or_init(read)
}

fn in_file(key: &str, faults: &[FileFault]) -> Vec<String> {
    faults.iter().map(|fault| format!("{key}.toml, {fault}")).collect()
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::units::Temperature;
    use approx::assert_abs_diff_eq;

    #[test]
    fn every_shipped_ledger_is_read() {
        for name in names() {
            ledger(name, None).unwrap_or_else(|error| panic!("{error}"));
        }
        assert!(ledger("freshwter", None).unwrap_err().to_string().contains("did you mean `freshwater`?"));
        assert!(ledger("freshwater", Some("1066-10")).is_err());
    }

    #[test]
    fn components_are_simple_ions() {
        let book = ledger("freshwater", None).unwrap();
        let components: Vec<&str> = book.formations().components.iter().map(|s| s.key()).collect();
        for ion in ["H2O", "H^+", "Ca^2+", "Mg^2+", "Na^+", "Cl^-", "SO4^2-", "CO3^2-", "NO3^-"] {
            assert!(components.contains(&ion), "{ion} in {components:?}");
        }
        assert!(book.formations().leftovers.is_empty());
    }

    #[test]
    fn a_derived_constant_is_the_sum_of_published_ones() {
        let book = ledger("freshwater", None).unwrap();
        let dissolution = book.derive("CaCO3(calcite) + CO2(g) + H2O <=> Ca^2+ + 2 HCO3^-").unwrap();
        // Plummer & Busenberg (1982): -8.480 - 1.468 - 6.352 + 10.329, the gas counted from 1 bar.
        let expected = -8.4798 - 1.4679 - 6.3519 + 10.3289 - 1.01325_f64.log10();
        let log_k = dissolution.log_k_at(Temperature::from_celsius(25.0).unwrap()).unwrap();
        assert_abs_diff_eq!(log_k.value(), expected, epsilon = 2e-4);
        assert_eq!(dissolution.constant().unwrap().history.uses().len(), 4);
        assert_abs_diff_eq!(log_k.sigma().unwrap(), 0.04, epsilon = 1e-12); // four constants of 0.02 each
        let unreachable = book.derive("CaCO3(calcite) <=> Ca^2+ + CO3^2- + Pb^2+").unwrap_err();
        assert!(unreachable.to_string().contains("not balanced"), "{unreachable}");
    }
}
