//! `<`, `<=`, `>`, `>=` that refuse what has no order.
//!
//! The interpreter's own operators answer `false` to `"8.1" < 9` and to `() < 9`, which is what a misspelt key gives:
//! a wrong number would pass silently. A native type joins by [`super::Vocabulary::ordered`].

use std::cmp::Ordering;

use rhai::plugin::*;
use rhai::{Dynamic, ImmutableString};

use super::{Fail, ScriptResult, fail, words};

/// The operators that the signs become when a script is read, and the signs.
pub(super) const ORDERINGS: [(&str, &str); 4] = [("⋖", "<"), ("⩽", "<="), ("⋗", ">"), ("⩾", ">=")];

/// The order of two plain values; `None` when one is not a number (NaN), which is neither below nor above anything.
fn plain_order(a: &Dynamic, b: &Dynamic) -> Result<Option<Ordering>, Fail> {
    if let (Ok(a), Ok(b)) = (a.as_int(), b.as_int()) {
        return Ok(Some(a.cmp(&b)));
    }
    if let (Ok(a), Ok(b)) = (super::numbers::real("<", a), super::numbers::real("<", b)) {
        return Ok(a.partial_cmp(&b));
    }
    if let (Some(a), Some(b)) = (a.read_lock::<ImmutableString>(), b.read_lock::<ImmutableString>()) {
        return Ok(Some(a.cmp(&b)));
    }
    if let (Ok(a), Ok(b)) = (a.as_char(), b.as_char()) {
        return Ok(Some(a.cmp(&b)));
    }
    let (left, right) = (words::a_type(a.type_name()), words::a_type(b.type_name()));
    let message = fail(format!("cannot compare {left} with {right}"));
    Err(if a.is_unit() || b.is_unit() { message.help(words::MISSING_KEY) } else { message })
}

/// Whether an order is what an operator asks for.
pub(super) type Holds = fn(Ordering) -> bool;

/// What each of [`ORDERINGS`] asks for, in the same order.
pub(super) const HOLDS: [Holds; 4] = [Ordering::is_lt, Ordering::is_le, Ordering::is_gt, Ordering::is_ge];

/// The four orderings of plain values; anything no native type has claimed ends here too, and is refused.
#[export_module]
pub(super) mod comparisons {
    #[rhai_fn(name = "⋖", return_raw)]
    pub fn below(a: Dynamic, b: Dynamic) -> ScriptResult<bool> {
        Ok(plain_order(&a, &b)?.is_some_and(Ordering::is_lt))
    }
    #[rhai_fn(name = "⩽", return_raw)]
    pub fn not_above(a: Dynamic, b: Dynamic) -> ScriptResult<bool> {
        Ok(plain_order(&a, &b)?.is_some_and(Ordering::is_le))
    }
    #[rhai_fn(name = "⋗", return_raw)]
    pub fn above(a: Dynamic, b: Dynamic) -> ScriptResult<bool> {
        Ok(plain_order(&a, &b)?.is_some_and(Ordering::is_gt))
    }
    #[rhai_fn(name = "⩾", return_raw)]
    pub fn not_below(a: Dynamic, b: Dynamic) -> ScriptResult<bool> {
        Ok(plain_order(&a, &b)?.is_some_and(Ordering::is_ge))
    }
}
