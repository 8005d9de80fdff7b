//! Quantities from text, with or without a unit and an uncertainty.
//!
//! ```text
//! 41.2 mg/L      41.2 +/- 0.8 mg/L      (41.2 ± 0.8) mg/L      41.2 mg/L +/- 2 %      41.2(8) mg/L      41.2
//! ```

use super::{Quantity, QuantityError};
use crate::units::{Kind, Unit, UnitError};

impl Quantity {
    /// Reads a value of a kind; a bare number is in the kind's default unit. `label` names the input in budgets.
    ///
    /// # Errors
    ///
    /// [`QuantityError::Text`] saying what to write, [`QuantityError::Sigma`] for a negative uncertainty,
    /// [`QuantityError::Unit`] listing the units of the kind.
    pub fn parse(text: &str, kind: Kind, label: &str) -> Result<Self, QuantityError> {
        read(text, &kind.default_unit(), label, |unit| kind.parse_unit(unit))
    }

    /// Reads a value in any unit; a bare number is in `default_unit`.
    ///
    /// # Errors
    ///
    /// As [`Quantity::parse`].
    pub fn parse_any(text: &str, default_unit: &Unit, label: &str) -> Result<Self, QuantityError> {
        read(text, default_unit, label, Unit::parse)
    }
}

fn read(
    text: &str,
    default_unit: &Unit,
    label: &str,
    parse_unit: impl Fn(&str) -> Result<Unit, UnitError>,
) -> Result<Quantity, QuantityError> {
    let written = Written::split(text)?;
    let unit = written.unit.map_or(Ok(default_unit.clone()), parse_unit)?;
    let sigma = match &written.sigma {
        Some(sigma) => Some(sigma.in_unit(written.value, &unit, text)?),
        None => None,
    };
    Quantity::measured(written.value, unit, sigma, label)
}

/// The pieces of the text.
struct Written<'a> {
    value: f64,
    unit: Option<&'a str>,
    sigma: Option<WrittenSigma<'a>>,
}

struct WrittenSigma<'a> {
    number: f64,
    unit: Option<&'a str>,
}

impl<'a> Written<'a> {
    fn split(text: &'a str) -> Result<Self, QuantityError> {
        if let Some(concise) = Self::concise(text)? {
            return Ok(concise);
        }
        let (inside, unit_outside) = split_brackets(text)?;
        let Some((left, right)) = split_sigma(inside) else {
            let (value, unit) = number_and_unit(inside, text)?;
            let unit = one_unit(unit, unit_outside, text)?;
            return Ok(Self { value, unit, sigma: None });
        };
        let (value, unit) = number_and_unit(left, text)?;
        let (number, sigma_unit) = number_and_unit(right, text)?;
        let sigma = |unit| Some(WrittenSigma { number, unit });
        match (unit, sigma_unit.map(percent_first)) {
            (None | Some("%"), Some((true, None))) if unit_outside.is_none() => Err(refused(
                text,
                "the `%` may belong to the value or not; write `(5.0 +/- 0.2) %` or `5.0 +/- 0.2`",
            )),
            // 41.2 +/- 2 % mg/L, (41.2 +/- 2 %) mg/L
            (None, Some((true, behind))) => {
                Ok(Self { value, unit: one_unit(behind, unit_outside, text)?, sigma: sigma(Some("%")) })
            }
            // 41.2 +/- 0.8 mg/L, (41.2 +/- 0.8) mg/L
            (None, _) => {
                Ok(Self { value, unit: one_unit(sigma_unit, unit_outside, text)?, sigma: sigma(None) })
            }
            // 41.2 mg/L +/- 0.8, 41.2 mg/L +/- 2 %, 41.2 mg/L +/- 800 ug/L
            (Some(_), _) => {
                Ok(Self { value, unit: one_unit(unit, unit_outside, text)?, sigma: sigma(sigma_unit) })
            }
        }
    }
}

impl<'a> Written<'a> {
    /// `-3.30(12) mg/L`: the digits in brackets are the uncertainty of the last digits of the value (JCGM 100:2008, 7.2.2).
    fn concise(text: &'a str) -> Result<Option<Self>, QuantityError> {
        let piece = text.trim();
        let (number, behind) = piece.split_at(number_end(piece));
        let Some((digits, unit)) = behind.strip_prefix('(').and_then(|behind| behind.split_once(')')) else {
            return Ok(None);
        };
        if digits.is_empty() || digits.len() > 15 || !digits.bytes().all(|byte| byte.is_ascii_digit()) {
            return Ok(None);
        }
        if number.contains(['e', 'E']) {
            return Err(refused(
                text,
                "write the uncertainty of a number with an exponent as `1.2e-3 +/- 0.1e-3`",
            ));
        }
        let (value, _) = number_and_unit(number, text)?;
        let decimals = number.split_once('.').map_or(0, |(_, decimals)| decimals.len());
        let number: f64 = digits.parse().map_err(|_| refused(text, &expected_number(digits)))?;
        let sigma = WrittenSigma { number: number / 10_f64.powi(decimals as i32), unit: None };
        let unit = unit.trim();
        Ok(Some(Self { value, unit: (!unit.is_empty()).then_some(unit), sigma: Some(sigma) }))
    }
}

impl WrittenSigma<'_> {
    /// The uncertainty in the unit of the value.
    fn in_unit(&self, value: f64, unit: &Unit, text: &str) -> Result<f64, QuantityError> {
        match self.unit {
            None => Ok(self.number),
            Some("%") if unit.has_own_zero() => {
                let reason = format!("a percentage of `{unit}` is unclear; write, say, `+/- 0.2 {unit}`");
                Err(refused(text, &reason))
            }
            Some("%") => Ok(self.number / 100.0 * value.abs()),
            Some(symbol) => {
                let own = Unit::parse(symbol)?;
                let substance = own.expressed_as().or(unit.expressed_as());
                Ok(self.number * own.with_expressed_as(substance).interval_in(unit)?)
            }
        }
    }
}

/// `(41.2 ± 0.8) mg/L` into what is inside the brackets and the unit behind them.
fn split_brackets(text: &str) -> Result<(&str, Option<&str>), QuantityError> {
    let trimmed = text.trim();
    let Some(opened) = trimmed.strip_prefix('(') else { return Ok((trimmed, None)) };
    let (inside, unit) = opened.split_once(')').ok_or_else(|| refused(text, "a `)` is missing"))?;
    let unit = unit.trim();
    Ok((inside.trim(), (!unit.is_empty()).then_some(unit)))
}

fn split_sigma(text: &str) -> Option<(&str, &str)> {
    ["+/-", "±"].iter().find_map(|sign| text.split_once(sign)).map(|(l, r)| (l.trim(), r.trim()))
}

/// Whether a text begins with `%`, and the unit behind it.
fn percent_first(unit: &str) -> (bool, Option<&str>) {
    match unit.strip_prefix('%').map(str::trim) {
        None => (false, Some(unit)),
        Some(behind) => (true, (!behind.is_empty()).then_some(behind)),
    }
}

fn one_unit<'a>(
    inside: Option<&'a str>,
    outside: Option<&'a str>,
    text: &str,
) -> Result<Option<&'a str>, QuantityError> {
    match (inside, outside) {
        (Some(_), Some(_)) => Err(refused(text, "it has two units; write `(41.2 +/- 0.8) mg/L`")),
        (inside, outside) => Ok(inside.or(outside)),
    }
}

fn number_and_unit<'a>(piece: &'a str, text: &str) -> Result<(f64, Option<&'a str>), QuantityError> {
    let end = number_end(piece);
    let (number, rest) = piece.split_at(end);
    refuse_decimal_comma(number, rest, text)?;
    if rest.trim_start().starts_with(['×', '·', '*']) || rest.trim_start().starts_with("x ") {
        return Err(refused(text, &format!("write a power of ten as `{number}e-3`")));
    }
    let number: f64 = number.replace('−', "-").parse().map_err(|_| refused(text, &expected_number(piece)))?;
    if !number.is_finite() {
        return Err(refused(text, "the number is too large"));
    }
    let unit = rest.trim();
    Ok((number, (!unit.is_empty()).then_some(unit)))
}

/// Where the number at the front ends: sign, digits, point, and an exponent only if digits follow it.
fn number_end(text: &str) -> usize {
    let signed = |at: usize| {
        text[at..].chars().next().filter(|c| "+-−".contains(*c)).map_or(at, |c| at + c.len_utf8())
    };
    let digits = |at: usize| text[at..].find(|c: char| !c.is_ascii_digit()).map_or(text.len(), |n| at + n);
    let mut end = digits(signed(0));
    if text[end..].starts_with('.') {
        end = digits(end + 1);
    }
    if text[end..].starts_with(['e', 'E']) {
        let exponent = signed(end + 1);
        if digits(exponent) > exponent {
            end = digits(exponent);
        }
    }
    end
}

fn refuse_decimal_comma(number: &str, rest: &str, text: &str) -> Result<(), QuantityError> {
    let Some(after) = rest.strip_prefix(',') else { return Ok(()) };
    let n_digits = after.find(|c: char| !c.is_ascii_digit()).unwrap_or(after.len());
    if n_digits == 0 {
        return Ok(());
    }
    let digits = &after[..n_digits];
    let advice = match n_digits {
        3 => format!("write `{number}.{digits}` for a decimal point, `{number}{digits}` for thousands"),
        _ => format!("write `{number}.{digits}` with a decimal point"),
    };
    Err(refused(text, &advice))
}

fn expected_number(piece: &str) -> String {
    match piece {
        "" => "a number is missing; write, say, `41.2 mg/L` or `41.2 +/- 0.8 mg/L`".to_owned(),
        _ => format!("a number was expected where `{piece}` stands"),
    }
}

fn refused(text: &str, reason: &str) -> QuantityError {
    QuantityError::Text { text: text.trim().to_owned(), reason: reason.to_owned() }
}
