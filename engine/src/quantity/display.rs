//! Quantities as text: the uncertainty to two significant digits, the value to match.

use std::fmt;

use super::Quantity;
use crate::units::{Style, Unit};

/// The relative uncertainty below which none is shown: a double does not resolve it.
pub const UNRESOLVED: f64 = 1e-13;

pub(super) fn quantity(quantity: &Quantity, style: Style) -> String {
    let shown = quantity.sigma().filter(|sigma| *sigma > quantity.value.abs() * UNRESOLVED);
    let number = match shown {
        Some(sigma) => with_sigma(quantity.value, sigma, style),
        None => plain(quantity.value),
    };
    let written = if *quantity.unit() == Unit::one() {
        number
    } else {
        format!("{number} {}", quantity.unit().display(style))
    };
    // An uncertainty that leaves inputs out must not pass for the whole.
    let unstated = quantity.parts().iter().filter(|part| part.input.sigma().is_none()).count();
    if shown.is_some() && unstated > 0 {
        format!("{written} ({} without uncertainty)", crate::text::count(unstated, "input"))
    } else {
        written
    }
}

impl fmt::Display for Quantity {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str(&self.display(Style::Unicode))
    }
}

/// Six significant digits show all that a laboratory value carries, and hide what binary fractions add.
const N_DIGITS: i32 = 6;
/// Exponents outside these are written in powers of ten.
const PLAIN_EXPONENTS: std::ops::Range<i32> = -4..7;

fn plain(value: f64) -> String {
    if value == 0.0 || !value.is_finite() {
        return format!("{}", value + 0.0);
    }
    let exponent = exponent_of(value, N_DIGITS);
    if PLAIN_EXPONENTS.contains(&exponent) {
        trim_zeros(&fixed(value, N_DIGITS - 1 - exponent)).to_owned()
    } else {
        let mantissa = shifted(value, -exponent);
        format!("{}e{exponent}", trim_zeros(&fixed(mantissa, N_DIGITS - 1)))
    }
}

fn with_sigma(value: f64, sigma: f64, style: Style) -> String {
    let sign = match style {
        Style::Unicode => "±",
        Style::Ascii => "+/-",
    };
    let last_digit = exponent_of(sigma, 2) - 1;
    let leading = exponent_of(value, N_DIGITS).max(last_digit + 1);
    if value != 0.0 && leading - last_digit > MAX_DIGITS {
        return format!("{} {sign} {}", plain(value), plain(sigma));
    }
    let exponent = if PLAIN_EXPONENTS.contains(&leading) { 0 } else { leading };
    let (value, sigma) = without_shared_zero(
        rounded(shifted(value, -exponent), last_digit - exponent),
        rounded(shifted(sigma, -exponent), last_digit - exponent),
    );
    match exponent {
        0 => format!("{value} {sign} {sigma}"),
        _ => format!("{value}e{exponent} {sign} {sigma}e{exponent}"),
    }
}

/// More digits than these say less than the two numbers beside each other.
const MAX_DIGITS: i32 = 10;

/// 41.20 ± 0.80 says no more than 41.2 ± 0.8.
fn without_shared_zero(mut value: String, mut sigma: String) -> (String, String) {
    if value.contains('.') && value.ends_with('0') && sigma.ends_with('0') {
        value.pop();
        sigma.pop();
    }
    (value.trim_end_matches('.').to_owned(), sigma.trim_end_matches('.').to_owned())
}

/// The decimal exponent of a number once rounded to so many digits: 0.0996 to two digits is 0.10, so -1.
fn exponent_of(number: f64, n_digits: i32) -> i32 {
    let written = format!("{:.*e}", usize::try_from(n_digits - 1).unwrap_or(0), number);
    written.split_once('e').and_then(|(_, exponent)| exponent.parse().ok()).unwrap_or(0)
}

/// The number times ten to a power, through decimal text so that no digit is spoilt.
fn shifted(number: f64, power: i32) -> f64 {
    let written = format!("{number:e}");
    let shifted = written.split_once('e').and_then(|(mantissa, exponent)| {
        format!("{mantissa}e{}", exponent.parse::<i32>().ok()? + power).parse().ok()
    });
    shifted.unwrap_or(number)
}

/// Written without exponent, up to the digit that stands for ten to `last_digit`: 52345 to the hundreds is 52300.
fn rounded(number: f64, last_digit: i32) -> String {
    if last_digit > 0 {
        return fixed(shifted(shifted(number, -last_digit).round(), last_digit), 0);
    }
    fixed(number, -last_digit)
}

fn fixed(number: f64, decimals: i32) -> String {
    let written = format!("{:.*}", usize::try_from(decimals).unwrap_or(0), number);
    match written.strip_prefix('-') {
        Some(zero) if zero.chars().all(|c| c == '0' || c == '.') => zero.to_owned(),
        _ => written,
    }
}

fn trim_zeros(number: &str) -> &str {
    if number.contains('.') { number.trim_end_matches('0').trim_end_matches('.') } else { number }
}
