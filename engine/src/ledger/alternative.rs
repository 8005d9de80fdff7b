//! Shipped constants a ledger could use in place of its own.

use super::composition::Constituent;
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
    let candidates = ledger.reactions().flat_map(|(name, own)| {
        candidates(ledger, name, own).filter(move |alternative| alternative.reaction != *own)
    });
    candidates.collect()
}

/// Author and year of what is in use where there is a choice.
pub(super) fn choices(ledger: &Ledger) -> Vec<(String, String)> {
    let mut choices = Vec::new();
    for (name, own) in ledger.reactions() {
        let (used, others): (Vec<_>, Vec<_>) =
            candidates(ledger, name, own).partition(|alternative| alternative.reaction == *own);
        if !others.is_empty() {
            let author = used.first().map_or_else(|| "your own".into(), |used| used.author.clone());
            choices.push((name.to_string(), author));
        }
    }
    for own in ledger.composition() {
        let (used, others): (Vec<_>, Vec<_>) =
            constituents(&own.name).partition(|(_, constituent)| *constituent == own);
        if !others.is_empty() {
            let author = used.first().map_or_else(|| "your own".into(), |(author, _)| author.clone());
            choices.push((own.name.clone(), author));
        }
    }
    choices
}

pub(super) fn find(ledger: &Ledger, name: &str, author: &str) -> Result<Reaction, LedgerError> {
    let own = ledger.reaction(name)?;
    let candidates: Vec<Alternative> = candidates(ledger, name, own).collect();
    let found = candidates.iter().find(|alternative| plain(&alternative.author) == plain(author));
    found.map(|alternative| alternative.reaction.clone()).ok_or_else(|| LedgerError::NoAlternative {
        name: name.into(),
        author: author.into(),
        known: candidates.into_iter().map(|alternative| alternative.author).collect(),
    })
}

pub(super) fn find_constituent(_: &Ledger, name: &str, author: &str) -> Result<Constituent, LedgerError> {
    let candidates: Vec<(String, &Constituent)> = constituents(name).collect();
    let found = candidates.iter().find(|(own, _)| plain(own) == plain(author));
    found.map(|(_, constituent)| (*constituent).clone()).ok_or_else(|| LedgerError::NoAlternative {
        name: name.into(),
        author: author.into(),
        known: candidates.into_iter().map(|(author, _)| author).collect(),
    })
}

/// Every shipped constant for one of the ledger's reactions, the one in use among them.
fn candidates<'a>(
    ledger: &'a Ledger,
    name: &'a str,
    own: &'a Reaction,
) -> impl Iterator<Item = Alternative> + 'a {
    let files = shipped::constant_files().into_iter().flatten();
    files.flat_map(move |(key, file)| {
        file.constants.iter().filter_map(move |(other_name, other)| {
            let stands_for = other_name == name || is_same_equation(own.equation(), other.equation());
            let reaction = ledger.fitting(other).ok().filter(|_| stands_for)?;
            Some(Alternative { name: name.to_string(), author: author(key), reaction })
        })
    })
}

/// Every shipped constituent of seawater of a name, by author and year.
fn constituents(name: &str) -> impl Iterator<Item = (String, &'static Constituent)> {
    let files = shipped::constant_files().into_iter().flatten();
    files.flat_map(move |(key, file)| {
        let named = file.composition.iter().filter(move |constituent| constituent.name == name);
        named.map(move |constituent| (author(key), constituent))
    })
}

fn author(file_key: &str) -> String {
    by(file_key).trim_start_matches(", ").to_string()
}

fn plain(text: &str) -> String {
    text.to_lowercase().replace([' ', ',', '-'], "")
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
