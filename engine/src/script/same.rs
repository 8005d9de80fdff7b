//! Whether two script values are the same to the last bit.

use std::any::Any;

use rhai::{Array, Dynamic, FnPtr, Map};

use super::ScriptEngine;
use crate::chem::Reaction;
use crate::equilibrium::State;
use crate::ledger::Ledger;
use crate::present::plot::Plot;
use crate::present::{Column, Table};
use crate::process::Run;
use crate::quantity::Quantity;
use crate::water::Sample;

/// Whether `a` and `b` are the same: numbers in every bit, collections member by member, closures by what they captured
/// and their code, and native values by what they hold. What none of these covers is compared by how it is shown.
#[must_use]
pub fn same(engine: &ScriptEngine, a: &Dynamic, b: &Dynamic) -> bool {
    let (a, b) = (a.flatten_clone(), b.flatten_clone());
    if a.type_id() != b.type_id() {
        return false;
    }
    if let (Ok(a), Ok(b)) = (a.as_float(), b.as_float()) {
        return a.to_bits() == b.to_bits();
    }
    if let (Some(a), Some(b)) = (a.read_lock::<Array>(), b.read_lock::<Array>()) {
        return a.len() == b.len() && a.iter().zip(b.iter()).all(|(a, b)| same(engine, a, b));
    }
    if let (Some(a), Some(b)) = (a.read_lock::<Map>(), b.read_lock::<Map>()) {
        let keys = a.keys().eq(b.keys());
        return keys && a.values().zip(b.values()).all(|(a, b)| same(engine, a, b));
    }
    if let (Some(a), Some(b)) = (a.read_lock::<FnPtr>(), b.read_lock::<FnPtr>()) {
        let (mut captured_a, mut captured_b) = (a.iter_curry(), b.iter_curry());
        let named = a.is_anonymous() == b.is_anonymous() && (a.is_anonymous() || a.fn_name() == b.fn_name());
        return named
            && a.iter_curry().count() == b.iter_curry().count()
            && captured_a.all(|a| captured_b.next().is_some_and(|b| same(engine, a, b)));
    }
    native(&a, &b).unwrap_or_else(|| engine.show(&a) == engine.show(&b))
}

/// The native types, each by what it holds.
fn native(a: &Dynamic, b: &Dynamic) -> Option<bool> {
    fn by<T: Any + Clone + Send + Sync>(
        a: &Dynamic,
        b: &Dynamic,
        same: impl Fn(&T, &T) -> bool,
    ) -> Option<bool> {
        Some(same(&*a.read_lock::<T>()?, &*b.read_lock::<T>()?))
    }
    by(a, b, same_quantity)
        .or_else(|| by(a, b, same_state))
        .or_else(|| by(a, b, same_run))
        .or_else(|| by(a, b, |a: &Table, b: &Table| bits(a) == bits(b)))
        .or_else(|| by(a, b, |a: &Column, b: &Column| format!("{a:?}") == format!("{b:?}")))
        .or_else(|| by(a, b, |a: &Plot, b: &Plot| format!("{a:?}") == format!("{b:?}")))
        .or_else(|| by(a, b, |a: &Ledger, b: &Ledger| a.digest() == b.digest()))
        .or_else(|| by(a, b, |a: &Reaction, b: &Reaction| same_reaction(a, b)))
        .or_else(|| by(a, b, |a: &Sample, b: &Sample| sample_text(a) == sample_text(b)))
}

/// `Debug` of a float gives the shortest text that reads back as the same number, so equal texts are equal bits.
fn bits(table: &Table) -> String {
    format!("{:?}", table.columns())
}

fn same_quantity(a: &Quantity, b: &Quantity) -> bool {
    let text =
        |quantity: &Quantity| format!("{:?} {:?} {:?}", quantity.value(), quantity.unit(), quantity.sigma());
    text(a) == text(b)
}

fn same_reaction(a: &Reaction, b: &Reaction) -> bool {
    let text = |reaction: &Reaction| {
        let log_k = reaction.constant().ok().map(|constant| format!("{:?}", constant.log_k));
        let sigma = reaction.log_k().ok().map(|log_k| format!("{:?}", log_k.sigma()));
        format!("{} {log_k:?} {sigma:?}", reaction.equation())
    };
    text(a) == text(b)
}

fn same_state(a: &State, b: &State) -> bool {
    let text = |state: &State| {
        let (species, phases) = (bits(&state.species()), bits(&state.phases()));
        format!("{:?} {:?} {:?} {species} {phases}", state.dissolved(), state.temperature(), state.pressure())
    };
    text(a) == text(b)
}

fn same_run(a: &Run, b: &Run) -> bool {
    let outcome = |pair: (&Result<State, String>, &Result<State, String>)| match pair {
        (Ok(a), Ok(b)) => same_state(a, b),
        (Err(a), Err(b)) => a == b,
        _ => false,
    };
    a.len() == b.len() && a.outcomes().iter().zip(b.outcomes()).all(outcome)
}

/// What was measured and done, without the identities of its inputs, which are new in every run.
fn sample_text(sample: &Sample) -> String {
    let entries: Vec<String> =
        sample.entries().iter().map(|(key, value)| format!("{key}: {value:?}")).collect();
    let entries: Vec<String> = entries.iter().map(|text| without_identities(text)).collect();
    let ledger = sample.ledger().map(Ledger::digest);
    format!("{:?} {entries:?} {:?} {ledger:?}", sample.name(), sample.treatments())
}

/// `Written(17)` numbers an input in the order it was written.
fn without_identities(text: &str) -> String {
    let mut pieces = text.split("Written(");
    let first = pieces.next().unwrap_or("").to_owned();
    pieces.fold(first, |text, piece| text + piece.trim_start_matches(|c: char| c.is_ascii_digit()))
}
