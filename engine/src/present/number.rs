//! Numbers for people: as many digits as can be read, and no more than are known.
//!
//! A number with a standard uncertainty is rounded where its uncertainty is, which is given to two digits
//! (JCGM 100:2008, 7.2.6). One without is shown with [`SIGNIFICANT_DIGITS`], never with digits it does not have:
//! a pH entered as 8.15 stays 8.15. Files get every digit instead (see [`write`](super::write)).

use super::column::Content;
use super::{Cell, Column, Style, Title, notation};
use crate::quantity::UNRESOLVED;

/// Digits of a number of which nothing says how well it is known.
pub const SIGNIFICANT_DIGITS: usize = 4;

/// The relative uncertainty below which a number is not rounded to it: its digits would fill the line.
const NEGLIGIBLE: f64 = 1e-9;

/// The powers of ten of the leading digit between which numbers are written without one: 0.001 to below 1e6.
const PLAIN_EXPONENTS: std::ops::RangeInclusive<i32> = -3..=5;

/// One number on its own: `8.153`, `1.235e-5`, `inf`.
///
/// # Examples
///
/// ```
/// use lysocline_engine::present::number;
///
/// assert_eq!(number::shown(8.153_427), "8.153");
/// assert_eq!(number::shown(8.15), "8.15");
/// assert_eq!(number::shown(1.234_56e-5), "1.235e-5");
/// ```
#[must_use]
pub fn shown(value: f64) -> String {
    Form::of_each(value).write(value)
}

/// One number with its standard uncertainty: `41.20 ± 0.80`, `(1.234 ± 0.020)e-5`; with `+/-` in plain style.
///
/// # Examples
///
/// ```
/// use lysocline_engine::present::{Style, number};
///
/// assert_eq!(number::shown_with_sigma(41.234, 0.796, Style::default()), "41.23 ± 0.80");
/// ```
#[must_use]
pub fn shown_with_sigma(value: f64, sigma: f64, style: Style) -> String {
    Pieces::uncertain(value, sigma, Form::of_each(value), style).join()
}

/// The cells of a column as text, set so that decimal points and `±` stand below one another when the texts are
/// aligned on the right; those of different quantities are set each on its own. Missing values are shown as their reason, or as a dash.
#[must_use]
pub fn shown_column(column: &Column, style: Style) -> Vec<String> {
    let unlike = column.content() == Content::Unlike;
    let form = if unlike { ColumnForm::Each } else { ColumnForm::of(column.cells()) };
    let pieces: Vec<Option<Pieces>> =
        column.cells().iter().map(|cell| Pieces::of_cell(cell, form, style)).collect();
    let longest = |part: fn(&Pieces) -> &str| {
        pieces.iter().flatten().map(|pieces| part(pieces).chars().count()).max().unwrap_or(0)
    };
    let widths = (longest(|pieces| &pieces.fraction), longest(|pieces| &pieces.sigma));
    let word = |text: &str| match column.content() {
        Content::Chemistry => notation::shown(text, style),
        Content::Titles => notation::shown_title(&Title::parse(text), style),
        Content::Ordinary | Content::Unlike => text.to_owned(),
    };
    let texts = column.cells().iter().zip(&pieces).map(|(cell, pieces)| match (cell, pieces) {
        (_, Some(pieces)) if unlike => pieces.join(),
        (_, Some(pieces)) => pieces.padded(widths),
        (Cell::Text(text), None) => word(text),
        (Cell::Missing { reason: Some(reason) }, None) => reason.to_string(),
        _ => if style.plain { "-" } else { "–" }.to_owned(),
    });
    texts.collect()
}

/// How a number is written.
#[derive(Clone, Copy, Debug, PartialEq)]
enum Form {
    /// `8.15`: with this many decimals.
    Decimals(usize),
    /// `8.15e-5`: with this many decimals before the power of ten.
    Scientific(usize),
}

impl Form {
    /// The form of a number on its own.
    fn of_each(value: f64) -> Self {
        let exponent = exponent(value);
        if value == 0.0 || PLAIN_EXPONENTS.contains(&exponent) || is_whole(value) {
            let decimals = SIGNIFICANT_DIGITS as i32 - 1 - exponent;
            Self::Decimals(at_least_zero(decimals).min(own_decimals(value)))
        } else {
            Self::Scientific((SIGNIFICANT_DIGITS - 1).min(own_mantissa_decimals(value)))
        }
    }

    fn write(self, value: f64) -> String {
        let text = match self {
            _ if !value.is_finite() => value.to_string(),
            Self::Decimals(decimals) => format!("{value:.decimals$}"),
            Self::Scientific(_) if value == 0.0 => "0".to_owned(),
            Self::Scientific(decimals) => format!("{value:.decimals$e}"),
        };
        without_sign_of_zero(text)
    }
}

/// How the numbers of a column are written.
#[derive(Clone, Copy, Debug, PartialEq)]
enum ColumnForm {
    /// All of them alike.
    Alike(Form),
    /// Each as on its own: they span too many powers of ten for common decimals.
    Each,
}

impl ColumnForm {
    /// Common decimals where at most two powers of ten lie between the numbers, or where some are negative: those
    /// are logarithms and differences, of which absolute digits count. A power of ten on every number where half
    /// of them need one.
    fn of(cells: &[Cell]) -> Self {
        let numbers: Vec<f64> =
            cells.iter().filter_map(Cell::value).filter(|value| value.is_finite() && *value != 0.0).collect();
        let exponents = numbers.iter().map(|value| exponent(*value));
        let (Some(smallest), Some(largest)) = (exponents.clone().min(), exponents.clone().max()) else {
            return Self::Alike(Form::Decimals(0));
        };
        let extreme = exponents.filter(|exponent| !PLAIN_EXPONENTS.contains(exponent)).count();
        let signed = numbers.iter().any(|value| *value < 0.0);
        let digits = SIGNIFICANT_DIGITS as i32 - 1;
        let decimals = match largest - smallest {
            _ if numbers.iter().all(|value| is_whole(*value)) => 0,
            _ if signed && PLAIN_EXPONENTS.contains(&largest) => digits - largest,
            0 | 1 if extreme == 0 => digits - smallest,
            2 if extreme == 0 => digits - 1 - smallest,
            _ if 2 * extreme >= numbers.len() => {
                let own = numbers.iter().map(|value| own_mantissa_decimals(*value)).max().unwrap_or(0);
                return Self::Alike(Form::Scientific(own.min(SIGNIFICANT_DIGITS - 1)));
            }
            _ => return Self::Each,
        };
        let own = numbers.iter().map(|value| own_decimals(*value)).max().unwrap_or(0);
        Self::Alike(Form::Decimals(at_least_zero(decimals).min(own)))
    }

    fn for_value(self, value: f64) -> Form {
        match self {
            Self::Alike(form) => form,
            Self::Each => Form::of_each(value),
        }
    }
}

/// A number in the parts that are aligned with those of its neighbours.
struct Pieces {
    /// Up to the decimal point.
    whole: String,
    /// From the decimal point on, the power of ten included.
    fraction: String,
    /// From the `±` on.
    sigma: String,
}

impl Pieces {
    fn of_cell(cell: &Cell, form: ColumnForm, style: Style) -> Option<Self> {
        match cell {
            Cell::Number { value, sigma: None } => Some(Self::certain(&form.for_value(*value).write(*value))),
            Cell::Number { value, sigma: Some(sigma) } => {
                Some(Self::uncertain(*value, *sigma, form.for_value(*value), style))
            }
            Cell::Text(_) | Cell::Missing { .. } => None,
        }
    }

    fn certain(text: &str) -> Self {
        let point = text.find(['.', 'e']).unwrap_or(text.len());
        Self { whole: text[..point].to_owned(), fraction: text[point..].to_owned(), sigma: String::new() }
    }

    /// `form` says whether to write a power of ten; the digits are those of `sigma`.
    fn uncertain(value: f64, sigma: f64, form: Form, style: Style) -> Self {
        if sigma > 0.0 && sigma < value.abs() * UNRESOLVED {
            return Self::certain(&form.write(value));
        }
        let sign = if style.plain { "+/-" } else { "±" };
        let known = value.is_finite() && sigma.is_finite() && sigma > value.abs() * NEGLIGIBLE;
        let (text, sigma, power) = match form {
            _ if !known => (form.write(value), shown(sigma), String::new()),
            Form::Decimals(_) => (rounded(value, sigma), rounded(sigma, sigma), String::new()),
            Form::Scientific(_) => {
                let exponent = exponent(if value.abs() > sigma { value } else { sigma });
                let scale = 10_f64.powi(exponent);
                let (value, sigma) = (value / scale, sigma / scale);
                (rounded(value, sigma), rounded(sigma, sigma), format!("e{exponent}"))
            }
        };
        let bracketed = !power.is_empty();
        let pieces = Self::certain(&if bracketed { format!("({text}") } else { text });
        let closing = if bracketed { ")" } else { "" };
        Self { sigma: format!(" {sign} {sigma}{closing}{power}"), ..pieces }
    }

    fn join(&self) -> String {
        format!("{}{}{}", self.whole, self.fraction, self.sigma)
    }

    fn padded(&self, (fraction, sigma): (usize, usize)) -> String {
        format!("{}{:<fraction$}{:<sigma$}", self.whole, self.fraction, self.sigma)
    }
}

/// `value` rounded to the second digit of `sigma`.
fn rounded(value: f64, sigma: f64) -> String {
    let decimals = 1 - exponent_of_rounded(sigma, 2);
    let text = match usize::try_from(decimals) {
        Ok(decimals) => format!("{value:.decimals$}"),
        Err(_) => {
            let unit = 10_f64.powi(-decimals);
            format!("{:.0}", (value / unit).round() * unit)
        }
    };
    without_sign_of_zero(text)
}

/// The power of ten of the leading digit, once rounded to [`SIGNIFICANT_DIGITS`]; 0 of zero.
fn exponent(value: f64) -> i32 {
    exponent_of_rounded(value, SIGNIFICANT_DIGITS)
}

/// Formatted, not computed: a logarithm is off by one where rounding carries, as at 9.9996.
fn exponent_of_rounded(value: f64, digits: usize) -> i32 {
    let decimals = digits - 1;
    let text = format!("{value:.decimals$e}");
    text.split_once('e').and_then(|(_, exponent)| exponent.parse().ok()).unwrap_or(0)
}

/// Decimals of the shortest text that reads back as this number.
fn own_decimals(value: f64) -> usize {
    value.to_string().split_once('.').map_or(0, |(_, decimals)| decimals.len())
}

/// The same before its power of ten.
fn own_mantissa_decimals(value: f64) -> usize {
    let text = format!("{value:e}");
    text.split_once('.').and_then(|(_, rest)| rest.split_once('e')).map_or(0, |(decimals, _)| decimals.len())
}

/// A count, or a number entered like one.
fn is_whole(value: f64) -> bool {
    value.fract() == 0.0 && value.abs() < 1e9
}

fn at_least_zero(decimals: i32) -> usize {
    usize::try_from(decimals).unwrap_or(0)
}

/// -0.0004 to two decimals is 0.00, not -0.00.
fn without_sign_of_zero(text: String) -> String {
    match text.strip_prefix('-') {
        Some(rest) if rest.chars().all(|c| c == '0' || c == '.') => rest.to_owned(),
        _ => text,
    }
}

#[cfg(test)]
mod tests {
    use super::{Cell, Column, Style, shown, shown_column, shown_with_sigma};

    #[track_caller]
    fn case(value: f64, expected: &str) {
        assert_eq!(shown(value), expected);
    }

    #[test]
    fn single_numbers() {
        case(8.15, "8.15");
        case(8.153_427, "8.153");
        case(0.1 + 0.2, "0.3000"); // has more digits than are shown
        case(0.001_234_56, "0.001235");
        case(0.000_999_96, "0.001000"); // rounding carries into the plain range
        case(0.000_999_4, "9.994e-4");
        case(1.234_567e-5, "1.235e-5");
        case(420e-6, "4.2e-4");
        case(123_456.7, "123457");
        case(1_234_567.8, "1.235e6");
        case(1_234_567.0, "1234567"); // whole
        case(6.022e23, "6.022e23");
        case(0.0, "0");
        case(-0.0, "0");
        case(-2.5, "-2.5");
        case(f64::NEG_INFINITY, "-inf");
        case(f64::NAN, "NaN");
    }

    #[track_caller]
    fn with_sigma(value: f64, sigma: f64, expected: &str) {
        assert_eq!(shown_with_sigma(value, sigma, Style::default()), expected);
    }

    #[test]
    fn numbers_with_sigma() {
        with_sigma(41.2, 0.8, "41.20 ± 0.80");
        with_sigma(8.153_4, 0.019_6, "8.153 ± 0.020");
        with_sigma(41.2, 0.0996, "41.20 ± 0.10"); // rounding carries
        with_sigma(1234.5, 96.0, "1234 ± 96");
        with_sigma(1234.5, 123.0, "1230 ± 120");
        with_sigma(-0.001, 0.35, "0.00 ± 0.35");
        with_sigma(1.234_56e-5, 2e-7, "(1.235 ± 0.020)e-5");
        with_sigma(1e-9, 2e-7, "(0.0 ± 2.0)e-7");
        with_sigma(8.15, 0.0, "8.15 ± 0");
        with_sigma(8.15, 2e-12, "8.15 ± 2e-12");
        with_sigma(8.15, 2e-60, "8.15");
        with_sigma(8.15, f64::INFINITY, "8.15 ± inf");
        let plain = Style { plain: true, width: None };
        assert_eq!(shown_with_sigma(41.2, 0.8, plain), "41.20 +/- 0.80");
    }

    #[track_caller]
    fn column(cells: &[f64], expected: &[&str]) {
        assert_eq!(shown_column(&Column::numbers("x", cells.iter().copied()), Style::default()), expected);
    }

    #[test]
    fn columns_share_their_decimals() {
        column(&[8.15, 7.9, 10.0], &["8.15", "7.90", "10.00"]);
        column(&[8.153_427, 7.9, 10.0], &["8.153", "7.900", "10.000"]);
        column(&[41.234_5, 141.271_3, 5.118_2], &["41.23", "141.27", "5.12"]);
        column(&[12.0, 150.0, 3.0], &["12", "150", "3"]);
    }

    #[test]
    fn differences_and_logarithms_keep_absolute_digits() {
        column(&[-1.234_56, 0.000_123, 0.45], &["-1.235", "0.000", "0.450"]);
        column(&[-3.123_4, -12.345_6], &["-3.12", "-12.35"]);
    }

    #[test]
    fn wide_ranges() {
        column(&[350.0, 0.812_34, 41.2], &["350     ", "0.8123", "41.2   "]);
        column(&[2.345e-3, 1.234e-8, 0.0], &["2.345e-3", "1.234e-8", "0       "]);
        column(&[140.25, 2.5, 0.000_5], &["140.2 ", "2.5 ", "5e-4"]);
    }

    #[test]
    fn uncertainties_stand_below_one_another() {
        let cells =
            [Cell::uncertain(41.2, 0.8), Cell::number(8.5), Cell::uncertain(120.0, 11.0), Cell::missing()];
        let texts = shown_column(&Column::new("Ca [mg/L]", cells), Style::default());
        assert_eq!(texts, ["41.20 ± 0.80", "8.5        ", "120    ± 11  ", "–"]);
    }

    fn error_of(text: &str, value: f64) -> f64 {
        (text.trim().parse::<f64>().unwrap() - value).abs()
    }

    proptest::proptest! {
        /// Four digits: half a unit of the fourth is at most 1/2000 of the number.
        #[test]
        fn a_number_is_shown_to_four_digits(value in proptest::num::f64::NORMAL) {
            let shown = shown(value);
            proptest::prop_assert!(error_of(&shown, value) <= value.abs() / 1999.0, "{value:e} as {shown}");
        }

        /// Whatever stands beside it, a positive number keeps three digits.
        #[test]
        fn positive_numbers_of_a_column_keep_three_digits(
            exponents in proptest::collection::vec(-12.0..9.0_f64, 1..8),
        ) {
            let numbers: Vec<f64> = exponents.iter().map(|exponent| 10_f64.powf(*exponent)).collect();
            let texts = shown_column(&Column::numbers("x", numbers.iter().copied()), Style::default());
            for (text, number) in texts.iter().zip(&numbers) {
                proptest::prop_assert!(error_of(text, *number) <= number / 199.0, "{texts:?}");
            }
        }

        /// Rounding takes away at most half a unit of the second digit of sigma, a twentieth of sigma.
        #[test]
        fn a_number_is_rounded_where_its_uncertainty_is(value in -1e5..1e5_f64, log_sigma in -4.0..4.0_f64) {
            let sigma = 10_f64.powf(log_sigma);
            let shown = shown_with_sigma(value, sigma, Style::default());
            // A power of ten belongs to both: `(1.2 ± 0.3)e-4`.
            let (numbers, power) = shown.split_once(")e").unwrap_or((&shown, "0"));
            let (text, sigma_text) = numbers.trim_start_matches('(').split_once(" ± ").unwrap();
            let unit = 10_f64.powi(power.parse().unwrap());
            proptest::prop_assert!(error_of(text, value / unit) * unit <= sigma * 0.0501, "{value} ± {sigma} as {shown}");
            proptest::prop_assert!(error_of(sigma_text, sigma / unit) * unit <= sigma * 0.0501, "{value} ± {sigma} as {shown}");
        }
    }
}
