//! Named arguments, wherever they come from: a map in a script or a table in a file.
//!
//! A reader takes the keys it knows out of [`Named`] and then calls [`Named::finish`], which refuses what is left. Every
//! fault names its key, so that a script can point at the key and a file at the line.

use std::collections::BTreeMap;

use crate::nearest::nearest;
use crate::quantity::Quantity;
use crate::units::Kind;

/// The value behind a key.
#[derive(Debug, Clone)]
pub enum Value {
    /// A bare number, in the default unit of the key.
    Number(f64),
    /// A text, often a number with its unit.
    Text(String),
    /// A value with its uncertainty.
    Quantity(Quantity),
    /// `true` or `false`.
    Flag(bool),
    /// A list.
    List(Vec<Value>),
    /// A map.
    Map(BTreeMap<String, Value>),
}

/// A fault with the key it belongs to.
#[derive(Debug, Clone, PartialEq, thiserror::Error)]
#[error("{message}")]
pub struct KeyFault {
    /// The key at fault.
    pub key: String,
    /// What is wrong with it and what would have been right.
    pub message: String,
}

/// Keys with their values, taken out one by one.
#[derive(Debug, Clone, Default)]
pub struct Named {
    entries: BTreeMap<String, Value>,
    known: Vec<String>,
}

impl Value {
    /// What the value is, for messages.
    #[must_use]
    pub fn kind(&self) -> &'static str {
        match self {
            Self::Number(_) => "a number",
            Self::Text(_) => "a text",
            Self::Quantity(_) => "a quantity",
            Self::Flag(_) => "true or false",
            Self::List(_) => "a list",
            Self::Map(_) => "a map",
        }
    }
}

impl KeyFault {
    /// A fault of `key`.
    pub fn new(key: impl Into<String>, message: impl Into<String>) -> Self {
        Self { key: key.into(), message: message.into() }
    }
}

impl Named {
    /// Arguments to be read.
    #[must_use]
    pub fn new(entries: BTreeMap<String, Value>) -> Self {
        Self { entries, known: vec![] }
    }

    /// Whether a key is there.
    #[must_use]
    pub fn has(&self, key: &str) -> bool {
        self.entries.contains_key(key)
    }

    /// Takes a key out, if it is there.
    pub fn take(&mut self, key: &str) -> Option<Value> {
        self.known.push(key.into());
        self.entries.remove(key)
    }

    /// Takes out a text.
    ///
    /// # Errors
    ///
    /// Returns a fault if something else is there.
    pub fn text(&mut self, key: &str) -> Result<Option<String>, KeyFault> {
        match self.take(key) {
            None => Ok(None),
            Some(Value::Text(text)) => Ok(Some(text)),
            Some(other) => Err(KeyFault::new(key, format!("`{key}` takes a text, not {}", other.kind()))),
        }
    }

    /// Takes out a plain number.
    ///
    /// # Errors
    ///
    /// Returns a fault if something else, or no finite number, is there.
    pub fn number(&mut self, key: &str) -> Result<Option<f64>, KeyFault> {
        match self.take(key) {
            None => Ok(None),
            Some(Value::Number(number)) if number.is_finite() => Ok(Some(number)),
            Some(other) => Err(KeyFault::new(key, format!("`{key}` takes a number, not {}", other.kind()))),
        }
    }

    /// Takes out a quantity of a kind; a bare number is in that kind's default unit.
    ///
    /// # Errors
    ///
    /// Returns a fault if it cannot be read, or is of another kind.
    pub fn quantity(&mut self, key: &str, kind: Kind) -> Result<Option<Quantity>, KeyFault> {
        self.take(key).map(|value| quantity(key, value, kind)).transpose()
    }

    /// Takes out a list of texts; a single text is a list of one.
    ///
    /// # Errors
    ///
    /// Returns a fault if something else is there.
    pub fn texts(&mut self, key: &str) -> Result<Option<Vec<String>>, KeyFault> {
        let fault = |found: &Value| {
            KeyFault::new(key, format!("`{key}` takes a list of texts, not {}", found.kind()))
        };
        match self.take(key) {
            None => Ok(None),
            Some(Value::Text(text)) => Ok(Some(vec![text])),
            Some(Value::List(values)) => values
                .into_iter()
                .map(|value| match value {
                    Value::Text(text) => Ok(text),
                    other => Err(fault(&other)),
                })
                .collect::<Result<_, _>>()
                .map(Some),
            Some(other) => Err(fault(&other)),
        }
    }

    /// Every key that is left, with its value.
    pub fn rest(&mut self) -> BTreeMap<String, Value> {
        std::mem::take(&mut self.entries)
    }

    /// Refuses what no reader took.
    ///
    /// # Errors
    ///
    /// Returns the first unknown key with the nearest known one.
    pub fn finish(self) -> Result<(), KeyFault> {
        let Some(key) = self.entries.into_keys().next() else { return Ok(()) };
        let help = match nearest(&key, self.known.iter().map(String::as_str)) {
            Some(close) => format!("did you mean `{close}`?"),
            None => format!("the keys are {}", crate::text::list(&self.known)),
        };
        let message = format!("unknown key `{key}`; {help}");
        Err(KeyFault::new(key, message))
    }
}

/// Reads one value as a quantity of a kind.
///
/// # Errors
///
/// Returns a fault of `key` if it cannot be read, or is of another kind.
pub fn quantity(key: &str, value: Value, kind: Kind) -> Result<Quantity, KeyFault> {
    let fault = |message: String| KeyFault::new(key, format!("`{key}`: {message}"));
    let read = match value {
        Value::Number(number) => Quantity::measured(number, kind.default_unit(), None, key),
        Value::Text(text) => Quantity::parse(&text, kind, key),
        Value::Quantity(quantity) => Ok(quantity),
        other => return Err(fault(format!("takes {}, not {}", kind.name(), other.kind()))),
    };
    let read = read.map_err(|error| fault(error.to_string()))?;
    kind.check(read.unit()).map_err(|error| fault(error.to_string()))?;
    if read.value().is_finite() { Ok(read) } else { Err(fault("is no finite number".into())) }
}
