//! Where a constant came from: every published or typed value in it, how many times over, and what was done to it.

use std::fmt;
use std::sync::Arc;

use super::log_k::LogK;
use super::rational::{self, Rational};
use crate::quantity::{Input, Part};
use crate::units::Temperature;

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

/// How an input beside log K itself acts on log10 K: the derivative, a function of temperature.
///
/// An enthalpy does nothing at the temperature log K was stated for, and more the further away from it.
#[derive(Debug, Clone, PartialEq)]
pub struct Influence {
    /// The input.
    pub input: Input,
    /// ∂ log10 K/∂ input, a function of temperature.
    pub on_log_k: LogK,
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

/// The origins of a constant with their multiples, what else its uncertainty comes from, and the conversions it went
/// through.
#[derive(Debug, Clone, Default, PartialEq)]
pub struct History {
    uses: Vec<(Arc<Origin>, Rational)>,
    influences: Vec<Influence>,
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

impl Influence {
    /// An input that moves log10 K by `sensitivity` per unit, at every temperature.
    #[must_use]
    pub fn constant(input: Input, sensitivity: f64) -> Self {
        Self { input, on_log_k: LogK::function(&[(super::log_k::Term::One, sensitivity)]) }
    }

    /// The sensitivity at a temperature.
    #[must_use]
    pub fn at(&self, temperature: Temperature) -> Part {
        // At its own temperature an enthalpy does nothing; what rounding leaves of its sensitivity is dropped.
        let sensitivity = self.on_log_k.nearest_to(temperature).0;
        let sensitivity = if sensitivity.abs() < 1e-13 { 0.0 } else { sensitivity };
        Part { input: self.input.clone(), sensitivity }
    }

    /// The influences of the inputs of a quantity on which log10 K depends with the derivative `on_log_k`.
    #[must_use]
    pub fn through(parts: &[Part], on_log_k: &LogK) -> Vec<Self> {
        let influence =
            |part: &Part| Self { input: part.input.clone(), on_log_k: on_log_k.scaled(part.sensitivity) };
        parts.iter().map(influence).collect()
    }
}

impl History {
    /// The history of a value just stated.
    #[must_use]
    pub fn of(origin: Origin) -> Self {
        Self { uses: vec![(Arc::new(origin), 1.into())], ..Self::default() }
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

    /// What acts on log10 K beside the stated values: enthalpies, heat capacities, parameters of conversions.
    #[must_use]
    pub fn influences(&self) -> &[Influence] {
        &self.influences
    }

    /// The inputs behind the value with the sensitivity of log10 K to each, enthalpies left out.
    #[must_use]
    pub fn parts(&self) -> Vec<Part> {
        let parts = self.uses.iter().flat_map(|(origin, multiple)| {
            let multiple = rational::to_f64(*multiple);
            origin.parts.iter().map(move |part| part.scaled(multiple))
        });
        parts.collect()
    }

    /// Every input behind the value at a temperature, with the sensitivity of log10 K to it.
    #[must_use]
    pub fn parts_at(&self, temperature: Temperature) -> Vec<Part> {
        let influences = self.influences.iter().map(|influence| influence.at(temperature));
        self.parts().into_iter().chain(influences).collect()
    }

    /// The same with every origin changed; what else acts on the value, and the conversions, are kept.
    ///
    /// # Errors
    ///
    /// The first that `change` returns.
    pub fn with_origins<E>(&self, change: impl Fn(&Origin) -> Result<Origin, E>) -> Result<Self, E> {
        let changed = self.uses.iter().map(|(origin, multiple)| Ok((Arc::new(change(origin)?), *multiple)));
        Ok(Self { uses: changed.collect::<Result<_, E>>()?, ..self.clone() })
    }

    /// The history of Kⁿ.
    #[must_use]
    pub fn times(&self, multiple: Rational) -> Self {
        let uses = self.uses.iter().map(|(origin, own)| (origin.clone(), own * multiple));
        let scaled = |influence: &Influence| Influence {
            input: influence.input.clone(),
            on_log_k: influence.on_log_k.scaled(rational::to_f64(multiple)),
        };
        Self {
            uses: uses.filter(|(_, m)| *m != 0.into()).collect(),
            influences: self.influences.iter().map(scaled).collect(),
            conversions: self.conversions.clone(),
        }
    }

    /// The history of a product; an origin used by both is one use.
    #[must_use]
    pub fn plus(&self, other: &Self) -> Self {
        let mut sum = self.influenced(other.influences.clone());
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

    /// The same with every influence as it is at one temperature.
    #[must_use]
    pub fn frozen_at(&self, temperature: Temperature) -> Self {
        let frozen = self.influences.iter().map(|influence| influence.at(temperature));
        let influences = frozen.map(|part| Influence::constant(part.input, part.sensitivity)).collect();
        Self { influences, ..self.clone() }.influenced(vec![])
    }

    /// The same with more that acts on it. Influences of one input are added; what cancels leaves.
    #[must_use]
    pub fn influenced(&self, more: Vec<Influence>) -> Self {
        let mut history = self.clone();
        for new in more {
            match history.influences.iter_mut().find(|known| known.input == new.input) {
                Some(known) => {
                    known.on_log_k =
                        known.on_log_k.plus(&new.on_log_k).expect("influences are functions of temperature");
                }
                None => history.influences.push(new),
            }
        }
        history.influences.retain(|influence| !influence.on_log_k.is_zero());
        history
    }
}
