//! Errors of the rooms as scripts see them: the message, and what to write instead on a line of its own.

use rhai::EvalAltResult;

use super::{Fail, fail};
use crate::named::KeyFault;
use crate::present::TableError;
use crate::quantity::QuantityError;
use crate::units::UnitError;

/// A failure from a text in which advice follows the first `; ` outside of back-ticks.
#[must_use]
pub fn advised(text: &str) -> Fail {
    match split_advice(text) {
        Some((message, advice)) => fail(message).help(advice),
        None => fail(text),
    }
}

fn split_advice(text: &str) -> Option<(&str, &str)> {
    let is_outside = |at: &usize| text[..*at].matches('`').count().is_multiple_of(2);
    let at = text.match_indices("; ").map(|(at, _)| at).find(is_outside)?;
    Some((&text[..at], &text[at + 2..]))
}

impl From<KeyFault> for Fail {
    fn from(fault: KeyFault) -> Self {
        advised(&fault.message).key(fault.key)
    }
}

impl From<UnitError> for Fail {
    fn from(error: UnitError) -> Self {
        advised(&error.to_string())
    }
}

impl From<QuantityError> for Fail {
    fn from(error: QuantityError) -> Self {
        advised(&error.to_string())
    }
}

impl From<TableError> for Fail {
    fn from(error: TableError) -> Self {
        match &error {
            TableError::UnknownColumn { asked, nearest, columns } => fail(format!("no column `{asked}`"))
                .maybe_help(nearest.as_ref().map(|name| format!("did you mean `{name}`?")))
                .help(match columns.as_slice() {
                    [] => "the table has no columns".to_owned(),
                    columns => format!("the columns are {}", crate::text::list(columns)),
                }),
            _ => advised(&error.to_string()),
        }
    }
}

/// Lets native functions end a room's call with `?`.
macro_rules! raised {
    ($($error:ty),* $(,)?) => {
        $(impl From<$error> for Box<EvalAltResult> {
            fn from(error: $error) -> Self {
                Fail::from(error).into()
            }
        })*
    };
}

raised!(KeyFault, UnitError, QuantityError, TableError);

#[cfg(test)]
mod tests {
    use super::*;

    #[track_caller]
    fn case(text: &str, message: &str, help: &[&str]) {
        let fail = advised(text);
        assert_eq!(
            (fail.message.as_str(), fail.help),
            (message, help.iter().map(|&line| line.to_owned()).collect())
        );
    }

    #[test]
    fn advice_stands_behind_a_semicolon_outside_of_names() {
        case(
            "unknown unit `mgL`; units of amount: mol/kg",
            "unknown unit `mgL`",
            &["units of amount: mol/kg"],
        );
        case("`1; 2` does not read as a quantity", "`1; 2` does not read as a quantity", &[]);
        case("plain", "plain", &[]);
    }

    #[test]
    fn a_fault_of_a_key_points_at_the_key() {
        let fail = Fail::from(KeyFault::new("ph", "unknown key `ph`; did you mean `pH`?"));
        assert_eq!(fail, super::fail("unknown key `ph`").help("did you mean `pH`?").key("ph"));
    }
}
