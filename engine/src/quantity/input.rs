//! The independent inputs that uncertainty comes from.

use std::cmp::Ordering;
use std::hash::{Hash, Hasher};
use std::sync::Arc;
use std::sync::atomic::{self, AtomicU64};

use super::QuantityError;

/// One independent written value: a measurement, or a published constant.
///
/// Copies are the same input. So are two inputs named alike, which makes a ledger constant one input however often
/// the ledger is loaded.
#[derive(Clone, Debug)]
pub struct Input(Arc<Described>);

#[derive(Debug)]
struct Described {
    key: Key,
    label: String,
    sigma: Option<f64>,
}

/// What makes two inputs the same.
#[derive(Clone, Debug, PartialEq, Eq, PartialOrd, Ord, Hash)]
pub(super) enum Key {
    /// Published: the same wherever it is read.
    Named(String),
    /// Written once in a script or data file.
    Written(u64),
}

static N_WRITTEN: AtomicU64 = AtomicU64::new(0);

impl Input {
    /// A new input, independent of every other. `sigma` is its standard uncertainty, `None` where not stated.
    ///
    /// # Errors
    ///
    /// [`QuantityError::Sigma`] when `sigma` is negative or no finite number.
    pub fn written(label: &str, sigma: Option<f64>) -> Result<Self, QuantityError> {
        Self::new(Key::Written(N_WRITTEN.fetch_add(1, atomic::Ordering::Relaxed)), label, sigma)
    }

    /// The input with this name, the same each time it is made. The name has to stand for one published value, so it
    /// says which edition or source, too.
    ///
    /// # Errors
    ///
    /// As [`Input::written`].
    pub fn named(name: &str, label: &str, sigma: Option<f64>) -> Result<Self, QuantityError> {
        Self::new(Key::Named(name.to_owned()), label, sigma)
    }

    /// What to call it in a budget.
    #[must_use]
    pub fn label(&self) -> &str {
        &self.0.label
    }

    /// The name under which it is the same wherever it is read; `None` for a value written once.
    #[must_use]
    pub fn name(&self) -> Option<&str> {
        match &self.0.key {
            Key::Named(name) => Some(name),
            Key::Written(_) => None,
        }
    }

    /// Its standard uncertainty in its own unit; `None` where not stated, which is not zero.
    #[must_use]
    pub fn sigma(&self) -> Option<f64> {
        self.0.sigma
    }

    /// The same input with another standard uncertainty: how a ledger fills in what was not stated.
    ///
    /// # Errors
    ///
    /// As [`Input::written`].
    pub fn with_sigma(&self, sigma: Option<f64>) -> Result<Self, QuantityError> {
        Self::new(self.0.key.clone(), &self.0.label, sigma)
    }

    /// The same input under another label.
    #[must_use]
    pub fn called(&self, label: &str) -> Self {
        Self(Arc::new(Described { key: self.0.key.clone(), label: label.to_owned(), sigma: self.0.sigma }))
    }

    pub(super) fn key(&self) -> &Key {
        &self.0.key
    }

    /// Of two copies of one input, the one that states its uncertainty; of two that do, the larger.
    pub(super) fn better_stated(&self, other: &Self) -> Self {
        if other.sigma() > self.sigma() { other.clone() } else { self.clone() }
    }

    fn new(key: Key, label: &str, sigma: Option<f64>) -> Result<Self, QuantityError> {
        match sigma {
            Some(sigma) if !(sigma.is_finite() && sigma >= 0.0) => {
                Err(QuantityError::Sigma { label: label.to_owned(), sigma })
            }
            _ => Ok(Self(Arc::new(Described { key, label: label.to_owned(), sigma }))),
        }
    }
}

impl PartialEq for Input {
    fn eq(&self, other: &Self) -> bool {
        self.cmp(other) == Ordering::Equal
    }
}

impl Eq for Input {}

impl Hash for Input {
    fn hash<H: Hasher>(&self, state: &mut H) {
        self.0.key.hash(state);
    }
}

impl PartialOrd for Input {
    fn partial_cmp(&self, other: &Self) -> Option<Ordering> {
        Some(self.cmp(other))
    }
}

impl Ord for Input {
    fn cmp(&self, other: &Self) -> Ordering {
        if Arc::ptr_eq(&self.0, &other.0) { Ordering::Equal } else { self.0.key.cmp(&other.0.key) }
    }
}
