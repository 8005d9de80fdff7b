//! `expect`: a script that carries its own expected answers.

use rhai::Dynamic;
use rhai::plugin::*;

use super::numbers::general;
use super::reaction::plain;
use super::{Fail, ScriptResult, Vocabulary, fail};
use crate::quantity::Quantity;

/// Registers the function.
pub(super) fn register(vocabulary: &mut Vocabulary) {
    vocabulary.module(rhai::exported_module!(expect_functions));
}

/// The value as a number in its own unit.
fn own_number(given: &Dynamic) -> Result<f64, Fail> {
    match given.read_lock::<Quantity>() {
        Some(quantity) => Ok(quantity.value()),
        None => plain("`expect`", given),
    }
}

/// An absolute tolerance, or a percentage of the expected value.
fn tolerance(given: &Dynamic, expected: f64) -> Result<f64, Fail> {
    let wrong = || fail("a tolerance is a number, or a percentage such as `\"0.5 %\"`").argument(3);
    let number = match given.read_lock::<rhai::ImmutableString>() {
        None => plain("a tolerance", given).map_err(|_| wrong())?,
        Some(text) => {
            let percent = text.trim().strip_suffix('%').and_then(|number| number.trim().parse::<f64>().ok());
            percent.ok_or_else(wrong)? / 100.0 * expected.abs()
        }
    };
    if number >= 0.0 { Ok(number) } else { Err(wrong()) }
}

/// Checks inside a script.
#[export_module]
mod expect_functions {
    use super::*;

    /// Fails the run when a value is further from the expected one than a tolerance: a number in the value's own unit, or
    /// a percentage.
    ///
    /// ```rhai
    /// expect("pH of rain", sample(#{ pH: "electroneutral" }).open_to("CO2(g)", "420 uatm").equilibrate().pH, 5.6, 0.01)
    /// ```
    #[rhai_fn(return_raw)]
    pub fn expect(label: &str, value: Dynamic, expected: Dynamic, tolerance: Dynamic) -> ScriptResult<()> {
        let found = own_number(&value)?;
        let expected = own_number(&expected)?;
        let allowed = super::tolerance(&tolerance, expected)?;
        if (found - expected).abs() <= allowed {
            return Ok(());
        }
        let (found, expected, allowed) = (general(found, 8), general(expected, 8), general(allowed, 3));
        fail(format!("`{label}` is {found}, expected {expected} within {allowed}")).argument(1).raise()
    }
}
