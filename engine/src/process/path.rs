//! A path: each step starts from the water that the step before left.

use super::run::Run;
use crate::equilibrium::{EquilibriumError, State};
use crate::present::Column;
use crate::water::Sample;

/// Walks along `values` from a state. `step` is given the water before it, without surroundings and with those of the
/// solids in `keep` that are there, and returns what became of it.
///
/// A step that fails ends the path: the rows after it fail too, and say so.
///
/// # Errors
///
/// A name in `keep` that the ledger does not know, by way of `fault`, or the first error of `step`.
pub fn path<E>(
    start: State,
    title: &str,
    values: &[f64],
    keep: &[String],
    fault: impl Fn(EquilibriumError) -> E,
    mut step: impl FnMut(Sample, usize) -> Result<Result<State, String>, E>,
) -> Result<Run, E> {
    let mut outcomes: Vec<Result<State, String>> = Vec::with_capacity(values.len());
    let mut water = left(&start, keep).map_err(&fault)?;
    let mut ended = None;
    for position in 0..values.len() {
        if let Some(row) = ended {
            outcomes.push(Err(format!("the path ended at row {row}, which failed")));
            continue;
        }
        let outcome = step(water.clone(), position)?;
        match &outcome {
            Ok(state) => water = left(state, keep).map_err(&fault)?,
            Err(_) => ended = Some(position),
        }
        outcomes.push(outcome);
    }
    Ok(Run::new(vec![Column::numbers(title, values.iter().copied())], outcomes))
}

/// What a state leaves for the next step.
fn left(state: &State, keep: &[String]) -> Result<Sample, EquilibriumError> {
    let mut there = Vec::new();
    for name in keep {
        if state.solid_amount(name)? > 0.0 {
            there.push(name.as_str());
        }
    }
    state.sample(&there)
}
