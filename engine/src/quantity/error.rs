//! What can go wrong with quantities.

use super::Quantity;
use crate::units::UnitError;

/// Why a quantity could not be read or computed.
#[derive(Clone, Debug, PartialEq, thiserror::Error)]
#[non_exhaustive]
pub enum QuantityError {
    /// The unit was refused.
    #[error(transparent)]
    Unit(#[from] UnitError),
    /// The text does not read as a value with a unit.
    #[error("`{text}` does not read as a quantity: {reason}")]
    Text {
        /// The text.
        text: String,
        /// What is wrong with it, and what to write.
        reason: String,
    },
    /// A standard uncertainty that cannot be one.
    #[error(
        "the standard uncertainty of `{label}` is {sigma}: it must be a number, 0 or more; leave it out when it is not known"
    )]
    Sigma {
        /// The input.
        label: String,
        /// The value given.
        sigma: f64,
    },
    /// A coverage factor that cannot be one.
    #[error("the coverage factor is {coverage}: it must be above 0, such as 2 for a 2-sigma interval")]
    Coverage {
        /// The value given.
        coverage: f64,
    },
    /// Two quantities whose units do not fit the operation.
    #[error("cannot {verb} `{left}` {preposition} `{right}`: {reason}")]
    DifferentUnits {
        /// add, subtract, compare.
        verb: &'static str,
        /// and, from, with.
        preposition: &'static str,
        /// The first unit.
        left: String,
        /// The second unit.
        right: String,
        /// What tells them apart, or what to write.
        reason: String,
    },
    /// A function that is defined for pure numbers only.
    #[error("`{function}` takes a pure number, not a value in `{unit}`: divide by 1 {unit} first")]
    NeedsPureNumber {
        /// The function.
        function: &'static str,
        /// The unit it was given.
        unit: String,
    },
    /// No finite result, or no finite slope for the uncertainty to follow.
    #[error("{operation} has no finite result, or no finite slope, at {value}")]
    Undefined {
        /// What was being computed.
        operation: String,
        /// Where.
        value: f64,
    },
    /// A correlation coefficient out of range.
    #[error("a correlation coefficient is {r}: it must lie between -1 and 1")]
    Coefficient {
        /// The value given.
        r: f64,
    },
    /// A correlation matrix of the wrong form.
    #[error(
        "correlation of {n} quantities takes at least two of them and a symmetric {n} by {n} matrix with 1 on its diagonal"
    )]
    MatrixShape {
        /// How many quantities.
        n: usize,
    },
    /// Correlation asked for something computed, or for a value with itself.
    #[error("correlation is declared between different written values, but `{label}` {}", inputs_in_words(*.n_inputs))]
    NotOneInput {
        /// The quantity.
        label: String,
        /// How many inputs it depends on.
        n_inputs: usize,
    },
    /// Coefficients that no set of numbers could have.
    #[error(
        "these correlation coefficients cannot all hold at once (their matrix is not positive semidefinite): two inputs that both follow a third closely also follow each other; declare all coefficients of a set in one call, with enough digits"
    )]
    Impossible,
    /// Two different coefficients for one pair.
    #[error(
        "two inputs are correlated with {before} in one place and {now} in another: declare the coefficient once"
    )]
    AlreadyCorrelated {
        /// The coefficient in one operand.
        before: f64,
        /// The coefficient in the other.
        now: f64,
    },
}

impl QuantityError {
    pub(super) fn different_units(
        verb: &'static str,
        left: &Quantity,
        preposition: &'static str,
        right: &Quantity,
    ) -> Self {
        let (a, b) = (left.unit(), right.unit());
        let reason = if a.has_own_zero() && b.has_own_zero() {
            let step = a.counted_from_absolute_zero();
            format!("both count from a zero of their own; give the difference in `{step}`")
        } else if a.is_dimensionless() || b.is_dimensionless() {
            "a plain number has no unit; give it one, such as `quantity(2, \"mg/L\")`".to_owned()
        } else {
            match a.convert(1.0, b) {
                Err(UnitError::NotConvertible { reason, .. }) => reason,
                _ => format!("say that they are the same by converting one, such as `.to(\"{a}\")`"),
            }
        };
        Self::DifferentUnits { verb, preposition, left: a.symbol(), right: b.symbol(), reason }
    }
}

fn inputs_in_words(n_inputs: usize) -> String {
    match n_inputs {
        0 => "is an exact number".to_owned(),
        1 => "appears twice".to_owned(),
        n => format!("is computed from {n} of them"),
    }
}
