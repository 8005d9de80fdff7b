//! Numbers in scripts: real division, powers and logarithms, number formats, evenly spaced values.
//!
//! Whole numbers and decimals mix freely: `1/2` is 0.5 and `sqrt(2)` needs no decimal point.

use rhai::plugin::*;
use rhai::{Array, Dynamic, FLOAT, INT};

use super::{Fail, ScriptResult, fail};

/// The operator that `/` becomes when a script is read (`syntax.rs`): register a native type's division under this name.
pub const DIVIDE: &str = "÷";

/// The operator between a value and its standard uncertainty.
pub const PLUS_MINUS: &str = "±";

/// Writes `x` as `spec` says: `.3f` decimals, `.3e` scientific, `.3g` significant digits.
///
/// # Errors
///
/// Fails for any other `spec`.
pub fn format_number(x: FLOAT, spec: &str) -> Result<String, Fail> {
    let wrong = || {
        fail(format!("unknown number format `{spec}`"))
            .help("write `.3f` (decimals), `.3e` (scientific) or `.3g` (significant digits)")
            .argument(1)
    };
    let (digits, kind) = spec
        .strip_prefix('.')
        .and_then(|rest| rest.split_at_checked(rest.len().checked_sub(1)?))
        .ok_or_else(wrong)?;
    let digits = digits.parse::<usize>().ok().filter(|&digits| digits <= 40).ok_or_else(wrong)?;
    match kind {
        "f" => Ok(format!("{x:.digits$}")),
        "e" => Ok(format!("{x:.digits$e}")),
        "g" => Ok(general(x, digits.max(1))),
        _ => Err(wrong()),
    }
}

/// `digits` significant digits, without trailing zeros; scientific below 1e-4 and from 10^`digits` on.
#[must_use]
pub fn general(x: FLOAT, digits: usize) -> String {
    if x == 0.0 || !x.is_finite() {
        return format!("{x}");
    }
    let scientific = format!("{x:.*e}", digits - 1);
    let (mantissa, exponent) = scientific.split_once('e').unwrap_or((&scientific, "0"));
    let exponent: i32 = exponent.parse().unwrap_or(0);
    if exponent < -4 || exponent >= i32::try_from(digits).unwrap_or(i32::MAX) {
        return format!("{}e{exponent}", trim_zeros(mantissa));
    }
    let decimals = usize::try_from(i32::try_from(digits).unwrap_or(i32::MAX) - 1 - exponent).unwrap_or(0);
    trim_zeros(&format!("{x:.decimals$}")).to_owned()
}

fn trim_zeros(text: &str) -> &str {
    if text.contains('.') { text.trim_end_matches('0').trim_end_matches('.') } else { text }
}

/// A script value as a number.
///
/// # Errors
///
/// Fails, naming `function`, for anything but a whole number or a decimal.
pub fn real(function: &str, value: &Dynamic) -> Result<FLOAT, Fail> {
    if let Ok(x) = value.as_float() {
        return Ok(x);
    }
    value.as_int().map(|x| x as FLOAT).map_err(|_| {
        fail(format!("`{function}` takes numbers, not {}", super::words::a_type(value.type_name())))
    })
}

fn divide_reals(x: FLOAT, y: FLOAT) -> ScriptResult<FLOAT> {
    if y == 0.0 {
        return fail("division by zero").raise();
    }
    Ok(x / y)
}

fn power_of(x: FLOAT, y: FLOAT) -> ScriptResult<FLOAT> {
    let power = x.powf(y);
    if power.is_nan() && !x.is_nan() && !y.is_nan() {
        return fail(format!("`pow({}, {})` is not a real number", general(x, 6), general(y, 6)))
            .help("a negative number has only whole powers")
            .raise();
    }
    if x == 0.0 && y < 0.0 {
        return fail("zero to a negative power is a division by zero").raise();
    }
    Ok(power)
}

fn logarithm(name: &str, x: FLOAT, f: impl Fn(FLOAT) -> FLOAT) -> ScriptResult<FLOAT> {
    if x <= 0.0 {
        return fail(format!("`{name}` of {} does not exist: it takes numbers above zero", general(x, 6)))
            .raise();
    }
    Ok(f(x))
}

fn square_root(x: FLOAT) -> ScriptResult<FLOAT> {
    if x < 0.0 {
        return fail(format!("`sqrt` of {} does not exist: it takes zero and numbers above", general(x, 6)))
            .raise();
    }
    Ok(x.sqrt())
}

/// The number of values asked for, as an array may hold it.
fn count(function: &str, n: INT, least: INT) -> Result<usize, Fail> {
    const MOST: INT = 10_000_000;
    let wrong = || fail(format!("`{function}` makes {least} to {MOST} values, not {n}")).argument(2);
    if (least..=MOST).contains(&n) { usize::try_from(n).map_err(|_| wrong()) } else { Err(wrong()) }
}

/// `n` evenly spaced values; the ends are exact.
fn spaced(a: FLOAT, b: FLOAT, n: usize, f: impl Fn(FLOAT) -> FLOAT) -> Array {
    let last = (n - 1) as FLOAT;
    (0..n).map(|i| f(if i + 1 == n { b } else { a + (b - a) * (i as FLOAT / last) }).into()).collect()
}

/// Powers, logarithms, formats and evenly spaced values.
#[export_module]
#[allow(clippy::cast_precision_loss, reason = "a script's whole numbers are counts and charges")]
pub(super) mod number_functions {
    /// x to the power y. Dimensionless.
    ///
    /// ```rhai
    /// pow(10, -2)   // 0.01
    /// ```
    #[rhai_fn(return_raw)]
    pub fn pow(x: FLOAT, y: FLOAT) -> ScriptResult<FLOAT> {
        power_of(x, y)
    }
    #[rhai_fn(name = "pow", return_raw)]
    pub fn pow_int_int(x: INT, y: INT) -> ScriptResult<FLOAT> {
        power_of(x as FLOAT, y as FLOAT)
    }
    #[rhai_fn(name = "pow", return_raw)]
    pub fn pow_int_real(x: INT, y: FLOAT) -> ScriptResult<FLOAT> {
        power_of(x as FLOAT, y)
    }
    #[rhai_fn(name = "pow", return_raw)]
    pub fn pow_real_int(x: FLOAT, y: INT) -> ScriptResult<FLOAT> {
        power_of(x, y as FLOAT)
    }

    /// 10 to the power x: the way back from a log K or a pH. Dimensionless.
    ///
    /// ```rhai
    /// fmt(exp10(-6.352), ".3e")   // "4.446e-7"
    /// ```
    pub fn exp10(x: FLOAT) -> FLOAT {
        (10.0 as FLOAT).powf(x)
    }
    #[rhai_fn(name = "exp10")]
    pub fn exp10_int(x: INT) -> FLOAT {
        (10.0 as FLOAT).powf(x as FLOAT)
    }

    /// e to the power x. Dimensionless.
    ///
    /// ```rhai
    /// exp(0)   // 1
    /// ```
    pub fn exp(x: FLOAT) -> FLOAT {
        x.exp()
    }
    #[rhai_fn(name = "exp")]
    pub fn exp_int(x: INT) -> FLOAT {
        (x as FLOAT).exp()
    }

    /// Natural logarithm of x, x above zero. Dimensionless.
    ///
    /// ```rhai
    /// fmt(ln(10), ".4f")   // "2.3026"
    /// ```
    #[rhai_fn(return_raw)]
    pub fn ln(x: FLOAT) -> ScriptResult<FLOAT> {
        logarithm("ln", x, FLOAT::ln)
    }
    #[rhai_fn(name = "ln", return_raw)]
    pub fn ln_int(x: INT) -> ScriptResult<FLOAT> {
        logarithm("ln", x as FLOAT, FLOAT::ln)
    }

    /// Decimal logarithm of x, x above zero. Dimensionless.
    ///
    /// ```rhai
    /// log10(1e-7)   // -7
    /// ```
    #[rhai_fn(return_raw)]
    pub fn log10(x: FLOAT) -> ScriptResult<FLOAT> {
        logarithm("log10", x, FLOAT::log10)
    }
    #[rhai_fn(name = "log10", return_raw)]
    pub fn log10_int(x: INT) -> ScriptResult<FLOAT> {
        logarithm("log10", x as FLOAT, FLOAT::log10)
    }

    /// Square root of x, x not below zero.
    ///
    /// ```rhai
    /// sqrt(16)   // 4
    /// ```
    #[rhai_fn(return_raw)]
    pub fn sqrt(x: FLOAT) -> ScriptResult<FLOAT> {
        square_root(x)
    }
    #[rhai_fn(name = "sqrt", return_raw)]
    pub fn sqrt_int(x: INT) -> ScriptResult<FLOAT> {
        square_root(x as FLOAT)
    }

    /// Size of x without its sign, in the unit of x.
    ///
    /// ```rhai
    /// abs(-2)   // 2
    /// ```
    #[rhai_fn(return_raw)]
    pub fn abs(x: Dynamic) -> ScriptResult<FLOAT> {
        Ok(real("abs", &x)?.abs())
    }

    /// The smaller of two numbers.
    ///
    /// ```rhai
    /// min(2, 0.5)   // 0.5
    /// ```
    #[rhai_fn(return_raw)]
    pub fn min(a: Dynamic, b: Dynamic) -> ScriptResult<FLOAT> {
        Ok(real("min", &a)?.min(real("min", &b)?))
    }

    /// The larger of two numbers.
    ///
    /// ```rhai
    /// max(2, 0.5)   // 2
    /// ```
    #[rhai_fn(return_raw)]
    pub fn max(a: Dynamic, b: Dynamic) -> ScriptResult<FLOAT> {
        Ok(real("max", &a)?.max(real("max", &b)?))
    }

    /// Quotient of two whole numbers without its fraction (`a/b` is always the real quotient).
    ///
    /// ```rhai
    /// idiv(7, 2)   // 3
    /// ```
    #[rhai_fn(return_raw)]
    pub fn idiv(a: INT, b: INT) -> ScriptResult<INT> {
        match a.checked_div(b) {
            Some(quotient) => Ok(quotient),
            None => fail("division by zero").raise(),
        }
    }

    /// x as text: `.3f` decimals, `.3e` scientific, `.3g` significant digits.
    ///
    /// ```rhai
    /// fmt(0.00012345, ".2e")   // "1.23e-4"
    /// ```
    #[rhai_fn(return_raw)]
    pub fn fmt(x: Dynamic, format: &str) -> ScriptResult<String> {
        Ok(format_number(real("fmt", &x)?, format)?)
    }

    /// n evenly spaced values from a to b, both included; same unit as a and b.
    ///
    /// ```rhai
    /// linspace(0, 1, 5)   // [0, 0.25, 0.5, 0.75, 1]
    /// ```
    #[rhai_fn(return_raw)]
    pub fn linspace(a: Dynamic, b: Dynamic, n: INT) -> ScriptResult<Array> {
        let (a, b) = (real("linspace", &a)?, real("linspace", &b)?);
        Ok(spaced(a, b, count("linspace", n, 2)?, |x| x))
    }

    /// n values from a to b, both included and above zero, evenly spaced in their logarithm; same unit as a and b.
    ///
    /// ```rhai
    /// logspace(1, 1000, 4)   // [1, 10, 100, 1000]
    /// ```
    #[rhai_fn(return_raw)]
    pub fn logspace(a: Dynamic, b: Dynamic, n: INT) -> ScriptResult<Array> {
        let (first, last) = (real("logspace", &a)?, real("logspace", &b)?);
        if !(first > 0.0 && last > 0.0) {
            return fail("`logspace` takes two numbers above zero, the first and the last value")
                .help("for exponents write `linspace(-6, -3, 7).map(|x| exp10(x))`")
                .raise();
        }
        let mut values = spaced(first.log10(), last.log10(), count("logspace", n, 2)?, exp10);
        if let Some(value) = values.first_mut() {
            *value = first.into();
        }
        if let Some(value) = values.last_mut() {
            *value = last.into();
        }
        Ok(values)
    }

    /// Values from a in steps of `step`, b included when a whole number of steps reaches it; same unit as a and b.
    ///
    /// ```rhai
    /// steps(4, 5, 0.25)   // [4, 4.25, 4.5, 4.75, 5]
    /// ```
    #[rhai_fn(return_raw)]
    pub fn steps(a: Dynamic, b: Dynamic, step: Dynamic) -> ScriptResult<Array> {
        let (a, b, step) = (real("steps", &a)?, real("steps", &b)?, real("steps", &step)?);
        let turns = (b - a) / step;
        if !turns.is_finite() || turns < 0.0 {
            return fail(format!(
                "steps of {} do not lead from {} to {}",
                general(step, 6),
                general(a, 6),
                general(b, 6)
            ))
            .argument(2)
            .raise();
        }
        // A step such as 0.1 has no exact binary form: b counts as reached within a millionth of a step.
        let whole = (turns + 1e-6).floor();
        let n = count("steps", (whole as INT).saturating_add(1), 1)?;
        let reached = (turns - whole).abs() <= 1e-6;
        Ok((0..n).map(|i| if reached && i + 1 == n { b } else { a + step * i as FLOAT }.into()).collect())
    }

    #[rhai_fn(name = "÷", return_raw)]
    pub fn divide(x: FLOAT, y: FLOAT) -> ScriptResult<FLOAT> {
        divide_reals(x, y)
    }
    #[rhai_fn(name = "÷", return_raw)]
    pub fn divide_int_int(x: INT, y: INT) -> ScriptResult<FLOAT> {
        divide_reals(x as FLOAT, y as FLOAT)
    }
    #[rhai_fn(name = "÷", return_raw)]
    pub fn divide_int_real(x: INT, y: FLOAT) -> ScriptResult<FLOAT> {
        divide_reals(x as FLOAT, y)
    }
    #[rhai_fn(name = "÷", return_raw)]
    pub fn divide_real_int(x: FLOAT, y: INT) -> ScriptResult<FLOAT> {
        divide_reals(x, y as FLOAT)
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[track_caller]
    fn formatted(x: FLOAT, spec: &str, expected: &str) {
        assert_eq!(format_number(x, spec).expect("a known format"), expected);
    }

    #[test]
    fn formats() {
        formatted(1234.5, ".2e", "1.23e3");
        formatted(1234.5, ".0f", "1234");
        formatted(0.000_012_345, ".3g", "1.23e-5");
        formatted(1234.5, ".6g", "1234.5");
        formatted(1234.5, ".2g", "1.2e3");
        formatted(9.999, ".2g", "10");
        formatted(0.0, ".3g", "0");
        formatted(-0.5, ".3f", "-0.500");
        for wrong in ["", ".", "3e", ".e", ".3x", ".-1e", ".99999f", "é", ".3é"] {
            assert!(format_number(1.0, wrong).is_err(), "{wrong}");
        }
    }
}
