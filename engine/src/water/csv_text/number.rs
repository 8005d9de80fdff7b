//! One cell of a column of numbers.

/// Why the text of a cell is no number, and what would be.
#[derive(Debug, Clone, PartialEq, thiserror::Error)]
#[non_exhaustive]
pub enum CellFault {
    /// A comma before the decimals.
    #[error("`{text}` has a decimal comma: write `{with_point}`")]
    DecimalComma {
        /// The text of the cell.
        text: String,
        /// The same with a point.
        with_point: String,
    },
    /// A comma before three digits: one number or another, a thousand times smaller.
    #[error("`{text}` could be {as_thousands} or {as_decimal}: write it without a comma")]
    UnclearComma {
        /// The text of the cell.
        text: String,
        /// The number if the comma separates thousands.
        as_thousands: String,
        /// The number if it is a decimal comma.
        as_decimal: String,
    },
    /// Digits in groups.
    #[error("`{text}` has its digits in groups: write `{without}`")]
    GroupedDigits {
        /// The text of the cell.
        text: String,
        /// The same without the marks between groups.
        without: String,
    },
    /// Above the range of the method.
    #[error(
        "`{text}` is a lower bound, not a value: leave the cell empty, or give a value with its uncertainty"
    )]
    LowerBound {
        /// The text of the cell.
        text: String,
    },
    /// Below nothing.
    #[error("`{text}`: a detection limit is a positive number")]
    Limit {
        /// The text of the cell.
        text: String,
    },
    /// A number followed by something like a unit.
    #[error("`{text}`: a unit belongs in the header, as `… [{unit}]`")]
    Unit {
        /// The text of the cell.
        text: String,
        /// What follows the number.
        unit: String,
    },
    /// A formula that failed in a spreadsheet.
    #[error("`{text}` is an error of the spreadsheet the file comes from")]
    SpreadsheetError {
        /// The text of the cell.
        text: String,
    },
    /// An uncertainty below zero.
    #[error("`{text}`: a standard uncertainty cannot be negative")]
    NegativeSigma {
        /// The text of the cell.
        text: String,
    },
    /// An uncertainty in the cell and another in its column.
    #[error("`{text}` is a second uncertainty: the cell of the value states one already")]
    SigmaTwice {
        /// The text of the cell.
        text: String,
    },
    /// A number too large to be held.
    #[error("`{text}` is too large a number")]
    TooLarge {
        /// The text of the cell.
        text: String,
    },
    /// Anything else.
    #[error("`{text}` is not a number; if it marks a missing value, name it in `missing`")]
    NotANumber {
        /// The text of the cell.
        text: String,
    },
}

/// What the text of a cell says.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(super) enum Reading {
    /// `41.2` or `41.2 +/- 0.8`.
    Value { value: f64, sigma: Option<f64> },
    /// `<0.05`.
    Below { limit: f64 },
}

impl Reading {
    pub(super) fn of(text: &str) -> Result<Self, CellFault> {
        let text = text.trim();
        if text.starts_with(['>', '≥']) {
            return Err(CellFault::LowerBound { text: text.to_owned() });
        }
        if let Some(limit) = text.strip_prefix(['<', '≤']) {
            let whole_text = || text.to_owned();
            return match value(limit.trim_start_matches('=')) {
                Ok(limit) if limit > 0.0 => Ok(Self::Below { limit }),
                Ok(_) => Err(CellFault::Limit { text: whole_text() }),
                Err(CellFault::NotANumber { .. }) => Err(CellFault::NotANumber { text: whole_text() }),
                Err(fault) => Err(fault),
            };
        }
        match text.split_once('±').or_else(|| text.split_once("+/-")) {
            Some((number, uncertainty)) => {
                Ok(Self::Value { value: value(number)?, sigma: Some(sigma(uncertainty)?) })
            }
            None => Ok(Self::Value { value: value(text)?, sigma: None }),
        }
    }
}

/// A standard uncertainty: a number that is not negative.
pub(super) fn sigma(text: &str) -> Result<f64, CellFault> {
    let sigma = value(text)?;
    if sigma < 0.0 { Err(CellFault::NegativeSigma { text: text.trim().to_owned() }) } else { Ok(sigma) }
}

/// The number, if the text is one as programs write it: digits, at most one point, at most one power of ten.
pub(super) fn plain(text: &str) -> Option<f64> {
    let text = text.trim().replace('\u{2212}', "-"); // the minus of typesetting
    let is_plain = text.starts_with(|c: char| c.is_ascii_digit() || "+-.".contains(c))
        && text.chars().all(|c| c.is_ascii_digit() || "+-.eE".contains(c));
    text.parse().ok().filter(|_| is_plain)
}

/// A number to three significant digits, for a message.
pub(super) fn to_three_digits(value: f64) -> f64 {
    format!("{value:.2e}").parse().unwrap_or(value)
}

fn value(text: &str) -> Result<f64, CellFault> {
    let text = text.trim();
    match plain(text) {
        Some(value) if value.is_finite() => Ok(value),
        Some(_) => Err(CellFault::TooLarge { text: text.to_owned() }),
        None => Err(fault(text)),
    }
}

fn fault(text: &str) -> CellFault {
    let owned = || text.to_owned();
    if text.starts_with('#') {
        return CellFault::SpreadsheetError { text: owned() };
    }
    if let Some(fault) = comma_fault(text).or_else(|| grouped_fault(text)) {
        return fault;
    }
    // The longest beginning that is a number; what follows it would be a unit if it begins like one.
    let ends = text.char_indices().map(|(at, _)| at).rev();
    let number_end = ends.into_iter().find(|at| plain(&text[..*at]).is_some());
    match number_end.map(|at| text[at..].trim()) {
        Some(unit) if unit.starts_with(|c: char| c.is_alphabetic() || "%°".contains(c)) => {
            CellFault::Unit { text: owned(), unit: unit.to_owned() }
        }
        _ => CellFault::NotANumber { text: owned() },
    }
}

/// `8,15` and `1,234`.
fn comma_fault(text: &str) -> Option<CellFault> {
    let (whole, decimals) = text.split_once(',')?;
    let with_point = format!("{whole}.{decimals}");
    plain(&with_point)?;
    let (text, unsigned) = (text.to_owned(), whole.trim_start_matches(['+', '-', '\u{2212}']));
    let is_group = decimals.len() == 3 && (1..=3).contains(&unsigned.len()) && !unsigned.starts_with('0');
    Some(if is_group && decimals.chars().all(|c| c.is_ascii_digit()) {
        CellFault::UnclearComma { text, as_thousands: format!("{whole}{decimals}"), as_decimal: with_point }
    } else {
        CellFault::DecimalComma { text, with_point }
    })
}

/// `1 234.5`, `1'234`, `1,234,567.8` and `1.234,5`: a mark between groups of three digits, another before decimals.
fn grouped_fault(text: &str) -> Option<CellFault> {
    let marks = [
        (',', '.'),
        ('.', ','),
        (' ', '.'),
        (' ', ','),
        ('\u{A0}', '.'),
        ('\u{202F}', '.'),
        ('\'', '.'),
        ('’', '.'),
    ];
    marks.into_iter().find_map(|(mark, point)| {
        let (whole, decimals) = text.split_once(point).map_or((text, None), |(w, d)| (w, Some(d)));
        let mut groups = whole.split(mark);
        let first = groups.next()?.trim_start_matches(['+', '-']);
        let rest: Vec<&str> = groups.collect();
        let is_digits = |group: &str| group.chars().all(|c| c.is_ascii_digit());
        let grouped = (1..=3).contains(&first.len())
            && is_digits(first)
            && !rest.is_empty()
            && rest.iter().all(|group| group.len() == 3 && is_digits(group));
        let joined = whole.replace(mark, "");
        let without = decimals.map_or(joined.clone(), |decimals| format!("{joined}.{decimals}"));
        (grouped && plain(&without).is_some())
            .then(|| CellFault::GroupedDigits { text: text.to_owned(), without })
    })
}

#[cfg(test)]
mod tests {
    use super::{Reading, plain};

    #[track_caller]
    fn value(text: &str, value: f64, sigma: Option<f64>) {
        assert_eq!(Reading::of(text), Ok(Reading::Value { value, sigma }));
    }

    #[test]
    fn numbers() {
        value("8.15", 8.15, None);
        value(" -1.5e-3 ", -1.5e-3, None);
        value("+7", 7.0, None);
        value(".5", 0.5, None);
        value("\u{2212}2", -2.0, None);
        value("41.2 +/- 0.8", 41.2, Some(0.8));
        value("41.2±0.8", 41.2, Some(0.8));
        assert_eq!(Reading::of("< 0.05"), Ok(Reading::Below { limit: 0.05 }));
        assert_eq!(Reading::of("<=0.05"), Ok(Reading::Below { limit: 0.05 }));
        for word in ["inf", "NaN", "e", "-", "1e", "--1", ""] {
            assert_eq!(plain(word), None, "{word}");
        }
    }

    #[track_caller]
    fn fault(text: &str, expected: &str) {
        assert_eq!(Reading::of(text).unwrap_err().to_string(), expected);
    }

    #[test]
    fn faults() {
        fault("8,15", "`8,15` has a decimal comma: write `8.15`");
        fault("-0,5", "`-0,5` has a decimal comma: write `-0.5`");
        fault("0,125", "`0,125` has a decimal comma: write `0.125`");
        fault("< 0,05", "`0,05` has a decimal comma: write `0.05`");
        fault("41.2 ± 0,8", "`0,8` has a decimal comma: write `0.8`");
        fault("1,234", "`1,234` could be 1234 or 1.234: write it without a comma");
        fault("1,234.5", "`1,234.5` has its digits in groups: write `1234.5`");
        fault("1,234,567", "`1,234,567` has its digits in groups: write `1234567`");
        fault("1.234,5", "`1.234,5` has its digits in groups: write `1234.5`");
        fault("1 234.5", "`1 234.5` has its digits in groups: write `1234.5`");
        fault("1'234", "`1'234` has its digits in groups: write `1234`");
        fault(
            ">200",
            "`>200` is a lower bound, not a value: leave the cell empty, or give a value with its uncertainty",
        );
        fault("<0", "`<0`: a detection limit is a positive number");
        fault("<", "`<` is not a number; if it marks a missing value, name it in `missing`");
        fault("41.2 mg/L", "`41.2 mg/L`: a unit belongs in the header, as `… [mg/L]`");
        fault("41.2%", "`41.2%`: a unit belongs in the header, as `… [%]`");
        fault("#DIV/0!", "`#DIV/0!` is an error of the spreadsheet the file comes from");
        fault("41.2 +/- -0.8", "`-0.8`: a standard uncertainty cannot be negative");
        fault("1e999", "`1e999` is too large a number");
        fault("n.d.", "`n.d.` is not a number; if it marks a missing value, name it in `missing`");
        fault("8.15*", "`8.15*` is not a number; if it marks a missing value, name it in `missing`");
        fault(
            "12.05.2024",
            "`12.05.2024` is not a number; if it marks a missing value, name it in `missing`",
        );
        fault("nan", "`nan` is not a number; if it marks a missing value, name it in `missing`");
    }
}
