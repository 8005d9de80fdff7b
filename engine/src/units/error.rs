//! What can be wrong with a unit or a number given in one.

use super::Kind;
use crate::nearest;

/// Why a unit was refused.
#[derive(Clone, Debug, PartialEq, thiserror::Error)]
#[non_exhaustive]
pub enum UnitError {
    /// No unit has this spelling.
    #[error("unknown unit `{unit}`{}{}", suggestion(.nearest), accepted(.kind))]
    Unknown {
        /// The unit, or the part of it that is not known.
        unit: String,
        /// The nearest spelling that exists.
        nearest: Option<String>,
        /// What was being asked for, where the caller said so.
        kind: Option<Kind>,
    },
    /// The text does not read as a unit.
    #[error("`{unit}` does not read as a unit: {reason}")]
    Malformed {
        /// The text.
        unit: String,
        /// What is wrong with it, and what to write.
        reason: String,
    },
    /// A unit, but of something else.
    #[error("`{unit}` is no unit of {}{}", .kind.name(), accepted(&Some(*.kind)))]
    WrongKind {
        /// The unit given.
        unit: String,
        /// The kind asked for.
        kind: Kind,
    },
    /// The two units measure different things.
    #[error("`{from}` cannot be turned into `{to}`: {reason}")]
    NotConvertible {
        /// The unit at hand.
        from: String,
        /// The unit asked for.
        to: String,
        /// What tells them apart.
        reason: String,
    },
    /// A power of a unit that has no meaning here.
    #[error(
        "`{unit}` to the power {power} has no meaning: a unit takes powers that are fractions with a denominator of at most 12, up to 99"
    )]
    Power {
        /// The unit.
        unit: String,
        /// The exponent asked for.
        power: f64,
    },
    /// No kind has this name.
    #[error("unknown kind of unit `{name}`{}; the kinds are {}", suggestion(.nearest), Kind::ALL.map(Kind::name).join(", "))]
    UnknownKind {
        /// The name given.
        name: String,
        /// The nearest that exists.
        nearest: Option<String>,
    },
    /// A temperature below 0 K.
    #[error("a temperature of {celsius} degC is below absolute zero, -273.15 degC")]
    BelowAbsoluteZero {
        /// The temperature in degrees Celsius.
        celsius: f64,
    },
    /// A pressure that is negative or no number.
    #[error("a pressure of {bar} bar is not possible: pressures are absolute, 0 bar or more")]
    NegativePressure {
        /// The pressure in bar.
        bar: f64,
    },
}

impl UnitError {
    /// The same error, saying what kind was being asked for and suggesting a unit of that kind if one is near.
    pub(crate) fn asked_for(self, asked: Kind) -> Self {
        match self {
            Self::Unknown { unit, nearest, .. } => {
                let of_that_kind = nearest::nearest(&unit, asked.units().iter().copied());
                let nearest = of_that_kind.map(str::to_owned).or(nearest);
                Self::Unknown { unit, nearest, kind: Some(asked) }
            }
            other => other,
        }
    }
}

fn suggestion(nearest: &Option<String>) -> String {
    nearest.as_ref().map(|name| format!(" (did you mean `{name}`?)")).unwrap_or_default()
}

fn accepted(kind: &Option<Kind>) -> String {
    kind.map(|kind| format!("; units of {}: {}", kind.name(), kind.units().join(", "))).unwrap_or_default()
}
