//! Where a constant came from: every published or typed value in it, how many times over, and what was done to it.

use std::fmt;
use std::sync::Arc;

use super::rational::{self, Rational};
use crate::quantity::Part;

/// One value as it was stated, by a publication or by the person at the keyboard.
#[derive(Debug, Clone, PartialEq)]
pub struct Origin {
    /// What it is called: an entry's name, or the equation where it has none.
    pub label: String,
    /// The equation it was stated for.
    pub equation: String,
    /// The value as stated: `log K = -6.352 at 25 degC`, or the function of temperature.
    pub stated: String,
    /// Publication, or `None` where the user gave no source.
    pub source: Option<String>,
    /// How the value got here.
    pub provenance: Provenance,
    /// The independent inputs behind its uncertainty, with the sensitivity of log10 K to each.
    pub parts: Vec<Part>,
}

/// How a value got into the ledger.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Default)]
pub enum Provenance {
    /// Seen in the source.
    Read,
    /// Computed from values that were.
    Computed,
    /// Recalled and cross-checked, not seen in the source: to be confirmed before it is relied on.
    Memory,
    /// Typed by the user.
    #[default]
    Stated,
}

/// The origins of a constant with their multiples, and the conversions it went through.
#[derive(Debug, Clone, Default, PartialEq)]
pub struct History {
    uses: Vec<(Arc<Origin>, Rational)>,
    conversions: Vec<String>,
}

impl Provenance {
    /// Reads the word used in constant files.
    #[must_use]
    pub fn parse(word: &str) -> Option<Self> {
        match word {
            "read" => Some(Self::Read),
            "computed" => Some(Self::Computed),
            "memory" => Some(Self::Memory),
            "stated" => Some(Self::Stated),
            _ => None,
        }
    }
}

impl fmt::Display for Provenance {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str(match self {
            Self::Read => "read",
            Self::Computed => "computed",
            Self::Memory => "memory",
            Self::Stated => "stated",
        })
    }
}

impl History {
    /// The history of a value just stated.
    #[must_use]
    pub fn of(origin: Origin) -> Self {
        Self { uses: vec![(Arc::new(origin), 1.into())], conversions: vec![] }
    }

    /// Origins with their multiples, in order of first use; none with multiple zero.
    #[must_use]
    pub fn uses(&self) -> &[(Arc<Origin>, Rational)] {
        &self.uses
    }

    /// Conversions in the order they were made, in words.
    #[must_use]
    pub fn conversions(&self) -> &[String] {
        &self.conversions
    }

    /// The inputs behind the value with the sensitivity of log10 K to each.
    #[must_use]
    pub fn parts(&self) -> Vec<Part> {
        let parts = self.uses.iter().flat_map(|(origin, multiple)| {
            let multiple = rational::to_f64(*multiple);
            origin.parts.iter().map(move |part| part.scaled(multiple))
        });
        parts.collect()
    }

    /// The history of Kⁿ.
    #[must_use]
    pub fn times(&self, multiple: Rational) -> Self {
        let uses = self.uses.iter().map(|(origin, own)| (origin.clone(), own * multiple));
        Self { uses: uses.filter(|(_, m)| *m != 0.into()).collect(), conversions: self.conversions.clone() }
    }

    /// The history of a product; an origin used by both is one use.
    #[must_use]
    pub fn plus(&self, other: &Self) -> Self {
        let mut sum = self.clone();
        for (origin, multiple) in &other.uses {
            match sum.uses.iter_mut().find(|(present, _)| present == origin) {
                Some((_, own)) => *own += multiple,
                None => sum.uses.push((origin.clone(), *multiple)),
            }
        }
        sum.uses.retain(|(_, multiple)| *multiple != 0.into());
        for conversion in &other.conversions {
            if !sum.conversions.contains(conversion) {
                sum.conversions.push(conversion.clone());
            }
        }
        sum
    }

    /// The same with a conversion written down.
    #[must_use]
    pub fn converted(&self, conversion: String) -> Self {
        let mut history = self.clone();
        history.conversions.push(conversion);
        history
    }
}
