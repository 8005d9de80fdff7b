//! Shipped constants a ledger could use in place of its own.

use super::formation::in_bar;
use super::ledger::{Ledger, LedgerError};
use super::shipped;
use super::standard_formation::by;
use crate::chem::{Equation, Rational, Reaction};

/// A shipped constant for a reaction of the ledger: of the same name, or of the same equation however it is written.
#[derive(Debug, Clone)]
pub struct Alternative {
    /// The ledger's reaction.
    pub name: String,
    /// Author and year: `Rimstidt 1980`.
    pub author: String,
    /// The alternative, gases counted from 1 bar.
    pub reaction: Reaction,
}

pub(super) fn alternatives(ledger: &Ledger) -> Vec<Alternative> {
    let Ok(files) = shipped::constant_files() else { return vec![] };
    let mut found = Vec::new();
    for (name, own) in ledger.reactions() {
        for (key, file) in files {
            for (other_name, other) in &file.constants {
                let stands_for = other_name == name || is_same_equation(own.equation(), other.equation());
                let Ok(reaction) = in_bar(other) else { continue };
                if stands_for && reaction != *own {
                    let author = by(key).trim_start_matches(", ").to_string();
                    found.push(Alternative { name: name.to_string(), author, reaction });
                }
            }
        }
    }
    found
}

pub(super) fn find(ledger: &Ledger, name: &str, author: &str) -> Result<Reaction, LedgerError> {
    ledger.reaction(name)?;
    let plain = |text: &str| text.to_lowercase().replace([' ', ','], "");
    let alternatives: Vec<Alternative> =
        alternatives(ledger).into_iter().filter(|a| a.name == name).collect();
    let found = alternatives.iter().find(|alternative| plain(&alternative.author) == plain(author));
    found.map(|alternative| alternative.reaction.clone()).ok_or_else(|| LedgerError::NoAlternative {
        name: name.into(),
        author: author.into(),
        known: alternatives.iter().map(|alternative| alternative.author.clone()).collect(),
    })
}

/// Whether two equations say the same, perhaps reversed or taken several times.
fn is_same_equation(a: &Equation, b: &Equation) -> bool {
    let (Some((species, own)), true) = (a.terms().first(), a.terms().len() == b.terms().len()) else {
        return false;
    };
    let factor = b.coefficient(species) / own;
    factor != Rational::from_integer(0)
        && a.terms().iter().all(|(species, n)| b.coefficient(species) == n * factor)
}
