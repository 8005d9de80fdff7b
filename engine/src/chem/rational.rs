//! Exact stoichiometric numbers: coefficients such as 1/2, 4.5 and 1.75 without rounding.

/// A stoichiometric coefficient or subscript.
pub type Rational = num_rational::Ratio<i64>;

/// Reads `2`, `0.5`, `4.50` or `1/2` exactly; `None` for anything else, or for more digits than 64 bits hold.
#[must_use]
pub fn parse(text: &str) -> Option<Rational> {
    if let Some((numerator, denominator)) = text.split_once('/') {
        let denominator = whole(denominator)?;
        let numerator = whole(numerator)?;
        return (denominator != 0).then(|| Rational::new(numerator, denominator));
    }
    let (integer, fraction) = text.split_once('.').unwrap_or((text, ""));
    if fraction.len() > 9 || (fraction.is_empty() && text.contains('.')) {
        return None;
    }
    let scale = 10_i64.pow(fraction.len() as u32);
    let fraction = if fraction.is_empty() { 0 } else { whole(fraction)? };
    let numerator = whole(integer)?.checked_mul(scale)?.checked_add(fraction)?;
    Some(Rational::new(numerator, scale))
}

/// The value as a float.
#[must_use]
pub fn to_f64(value: Rational) -> f64 {
    *value.numer() as f64 / *value.denom() as f64
}

/// Written as people write a coefficient: `2`, `0.5`, `1/3`.
#[must_use]
pub fn text(value: Rational) -> String {
    let mut denominator = *value.denom();
    for prime in [2, 5] {
        while denominator % prime == 0 {
            denominator /= prime;
        }
    }
    if denominator == 1 { to_f64(value).to_string() } else { format!("{}/{}", value.numer(), value.denom()) }
}

/// The rational a float stands for, if it has few digits: `0.5`, `-2`, `1.75`.
#[must_use]
pub fn from_f64(value: f64) -> Option<Rational> {
    let magnitude = parse(&value.abs().to_string())?;
    Some(if value < 0.0 { -magnitude } else { magnitude })
}

fn whole(digits: &str) -> Option<i64> {
    (!digits.is_empty() && digits.bytes().all(|b| b.is_ascii_digit())).then(|| digits.parse().ok()).flatten()
}

#[cfg(test)]
mod tests {
    use super::*;

    #[track_caller]
    fn case(input: &str, expected: Option<(i64, i64)>) {
        assert_eq!(parse(input), expected.map(|(n, d)| Rational::new(n, d)), "{input}");
    }

    #[test]
    fn coefficients_are_exact() {
        case("2", Some((2, 1)));
        case("0.5", Some((1, 2)));
        case("1/2", Some((1, 2)));
        case("1.75", Some((7, 4)));
        case("1/0", None);
        case("1.", None);
        case("1e3", None);
        case("", None);
        case("99999999999999999999", None);
    }

    #[test]
    fn text_returns_what_was_read() {
        for written in ["2", "0.5", "1.75", "1/3"] {
            assert_eq!(text(parse(written).unwrap()), written);
        }
    }
}
