//! One cell of a table: a number, a text, or the fact that there is none.

use std::sync::Arc;

/// What stands in one row of one column.
#[derive(Debug, Clone, PartialEq)]
pub enum Cell {
    /// A number in the unit of its column.
    Number {
        /// The value itself.
        value: f64,
        /// Its standard uncertainty in the same unit; `None` where none was stated, which is not zero.
        sigma: Option<f64>,
    },
    /// A text.
    Text(Arc<str>),
    /// No value.
    Missing {
        /// Why there is none, as shown in place of the value: `absent`, `no match`.
        reason: Option<Arc<str>>,
    },
}

impl Cell {
    /// A number without stated uncertainty.
    #[must_use]
    pub fn number(value: f64) -> Self {
        Self::Number { value, sigma: None }
    }

    /// A number with its standard uncertainty, both in the unit of the column.
    #[must_use]
    pub fn uncertain(value: f64, sigma: f64) -> Self {
        Self::Number { value, sigma: Some(sigma) }
    }

    /// A text.
    #[must_use]
    pub fn text(text: &str) -> Self {
        Self::Text(text.into())
    }

    /// No value, and nothing to say about it.
    #[must_use]
    pub fn missing() -> Self {
        Self::Missing { reason: None }
    }

    /// No value, for this reason.
    #[must_use]
    pub fn missing_because(reason: &str) -> Self {
        Self::Missing { reason: Some(reason.into()) }
    }

    /// The number, if it is one.
    #[must_use]
    pub fn value(&self) -> Option<f64> {
        match self {
            Self::Number { value, .. } => Some(*value),
            Self::Text(_) | Self::Missing { .. } => None,
        }
    }

    /// The standard uncertainty of the number, if one was stated.
    #[must_use]
    pub fn sigma(&self) -> Option<f64> {
        match self {
            Self::Number { sigma, .. } => *sigma,
            Self::Text(_) | Self::Missing { .. } => None,
        }
    }

    /// The text, if it is one.
    #[must_use]
    pub fn as_text(&self) -> Option<&str> {
        match self {
            Self::Text(text) => Some(text),
            Self::Number { .. } | Self::Missing { .. } => None,
        }
    }

    /// Whether there is no value.
    #[must_use]
    pub fn is_missing(&self) -> bool {
        matches!(self, Self::Missing { .. })
    }
}

impl From<f64> for Cell {
    fn from(value: f64) -> Self {
        Self::number(value)
    }
}

impl From<&str> for Cell {
    fn from(text: &str) -> Self {
        Self::text(text)
    }
}

impl<T: Into<Cell>> From<Option<T>> for Cell {
    fn from(cell: Option<T>) -> Self {
        cell.map_or_else(Self::missing, Into::into)
    }
}
