//! What acts on a constant beside its own value, as entries of ledger files: the uncertainty of an enthalpy, of a heat
//! capacity, of a parameter of a conversion.
//!
//! ```toml
//! influences = [{ of = "enthalpy of K2", sigma = 0.4, log_k_terms = { "1" = 0.175, "1/T" = -52.2 } }]
//! ```
//!
//! `log_k_terms` is the derivative of log10 K by the input, a function of temperature; `sigma` is left out where none was
//! stated; `input` names the input where it is the same in several constants.

use crate::chem::reaction;
use crate::chem::{Influence, LogK};
use crate::named::{KeyFault, Named, Value};
use crate::quantity::Input;

const KEY: &str = "influences";

/// The lines of an entry; nothing where nothing acts.
#[must_use]
pub fn written(influences: &[Influence], quoted: impl Fn(&str) -> String) -> String {
    let entry = |influence: &Influence| {
        let mut keys = vec![format!("of = {}", quoted(influence.input.label()))];
        keys.extend(influence.input.name().map(|name| format!("input = {}", quoted(name))));
        keys.extend(influence.input.sigma().map(|sigma| format!("sigma = {sigma:?}")));
        let terms = influence.on_log_k.terms().unwrap_or_default();
        let terms: Vec<String> =
            terms.iter().map(|(term, value)| format!("{} = {value:?}", quoted(&term.written()))).collect();
        keys.push(format!("log_k_terms = {{ {} }}", terms.join(", ")));
        format!("  {{ {} }},\n", keys.join(", "))
    };
    if influences.is_empty() {
        return String::new();
    }
    format!("{KEY} = [\n{}]\n", influences.iter().map(entry).collect::<String>())
}

/// Reads the list; `identity` is that of the constant, and names inputs without a name of their own.
///
/// # Errors
///
/// The first fault.
pub fn read(value: Value, identity: &str) -> Result<Vec<Influence>, KeyFault> {
    let Value::List(entries) = value else {
        return Err(KeyFault::new(KEY, format!("`{KEY}` takes a list of tables, not {}", value.kind())));
    };
    entries.into_iter().map(|entry| read_one(entry, identity)).collect()
}

fn read_one(entry: Value, identity: &str) -> Result<Influence, KeyFault> {
    let fault = |message: String| KeyFault::new(KEY, message);
    let inner = |error: KeyFault| fault(format!("`{KEY}`: {}", error.message));
    let Value::Map(keys) = entry else {
        return Err(fault(format!("`{KEY}` takes a list of tables, not of {}", entry.kind())));
    };
    let mut named = Named::new(keys);
    let needs = |key: &str| fault(format!("`{KEY}`: each needs `{key}`"));
    let of = named.text("of").map_err(inner)?.ok_or_else(|| needs("of"))?;
    let name = named.text("input").map_err(inner)?.unwrap_or_else(|| format!("{identity}/{of}"));
    let sigma = named.number("sigma").map_err(inner)?;
    let terms = named.take("log_k_terms").ok_or_else(|| needs("log_k_terms"))?;
    let terms = reaction::terms(terms).map_err(inner)?;
    named.finish().map_err(inner)?;
    let input = Input::named(&name, &of, sigma).map_err(|error| fault(format!("`{KEY}`: {error}")))?;
    Ok(Influence { input, on_log_k: LogK::of(terms) })
}
