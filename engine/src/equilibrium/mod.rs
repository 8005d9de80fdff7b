//! From a sample and a ledger to a state: names become indices and come back.
//!
//! [`equilibrate`] reads as the work is done: [`System`] assembles rows of numbers for the species that can occur,
//! [`analysis`] fixes the conserved totals from what was measured, [`treatment`] acts on them, and a [`State`] answers
//! questions in the user's names and units.

pub mod acid_base;
pub mod activity;
mod adjust;
pub mod analysis;
pub mod assemble;
pub mod beside;
mod beside_answers;
#[cfg(test)]
mod beside_tests;
pub mod buffer;
mod dissolved_mass;
mod dosing;
mod error;
mod exchanger;
pub mod gas_mixture;
mod gas_phase;
mod indices;
mod mixture;
pub mod observable;
mod phase_rule;
pub mod predominance;
pub mod redox;
pub mod state;
pub mod surface;
mod trail;
pub mod treatment;
pub mod uncertainty;

pub use assemble::System;
pub use dosing::Dosed;
pub use error::EquilibriumError;
pub use gas_mixture::GasState;
pub use observable::{Asked, Observable, ObservableError};
pub use phase_rule::PhaseRule;
pub use state::State;
pub use trail::trail;

use crate::ledger::{GasModel, Ledger, shipped};
use crate::solve::Settings;
use crate::water::{Analysis, Neighbour, Sample, Treatment};

/// The equilibrium of a sample, with the ledger given, else the one that travels with it, else `freshwater`.
///
/// # Errors
///
/// Returns what the ledger does not know, what the analysis leaves open, or why there is no equilibrium.
pub fn equilibrate(
    sample: &Sample,
    ledger: Option<&Ledger>,
    settings: &Settings,
) -> Result<State, EquilibriumError> {
    let ledger = ledger_of(sample, ledger)?;
    check_gases(sample, &ledger)?;
    let mut analysed = match sample.analysis() {
        Analysis::Measured(measured) => analysis::analyse(sample, measured, &ledger, settings)?,
        Analysis::Spoilt(reason) => return Err(EquilibriumError::Spoilt(reason.clone())),
        Analysis::Mixed(parts) => mixture::mix(sample, parts, &ledger, settings)?,
        Analysis::Dissolved(dissolved) => analysis::restore(sample, dissolved, &ledger)?,
    };
    let mut resolved = sample.clone();
    if adjust::is_needed(sample) {
        let notes;
        (resolved, notes) = adjust::resolve(sample, &analysed, settings)?;
        analysed.notes.extend(notes);
    }
    let first = analysed.outcome.take();
    let outcomes = match first {
        Some(first) if sample.treatments().is_empty() && !measured_elsewhere(sample) => vec![first],
        first => {
            let treated = treatment::treat(&resolved, &analysed, settings)?;
            first.into_iter().chain([treated]).collect()
        }
    };
    let state = State::new(sample.clone(), analysed, outcomes);
    state.check_dilution()?;
    Ok(state)
}

/// The ledger a sample is computed with, in the sea that the sample is of.
fn ledger_of(sample: &Sample, given: Option<&Ledger>) -> Result<Ledger, EquilibriumError> {
    let sea = sample.sea();
    if let (Analysis::Mixed(parts), None) = (sample.analysis(), &sea)
        && parts.iter().any(|(part, _)| part.sea().is_some())
    {
        let why = "seawater and other water hold by different constants: mix them with `estuary(river, sea, [0.5])`";
        return Err(EquilibriumError::Unreachable(why.into()));
    }
    let ledger = match given.or(sample.ledger()) {
        Some(ledger) => ledger.clone(),
        None => shipped::ledger(if sea.is_some() { "seawater" } else { "freshwater" }, None)?,
    };
    match sea {
        Some(sea) => Ok(ledger.in_sea(sea)?),
        None if ledger.is_marine() => Err(EquilibriumError::Unreachable(format!(
            "the constants of the ledger `{}` are functions of salinity: write the water as `seawater(#{{ salinity: 35, … }})`",
            ledger.name()
        ))),
        None => Ok(ledger),
    }
}

/// A gas phase beside the water is a mixture of ideal gases, whose pressures are their fugacities.
fn check_gases(sample: &Sample, ledger: &Ledger) -> Result<(), EquilibriumError> {
    let is_gas = |treatment: &Treatment| matches!(treatment, Treatment::Beside(neighbour) if matches!(**neighbour, Neighbour::Gas(_)));
    if ledger.gas_model() == GasModel::Ideal || !sample.treatments().iter().any(is_gas) {
        return Ok(());
    }
    let why = "a gas phase beside the water is ideal: take a ledger `.with_gas_model(\"ideal\")` for it";
    Err(EquilibriumError::Unreachable(why.into()))
}

/// Whether the analysis holds at another temperature than the water's own, to which it is then brought.
fn measured_elsewhere(sample: &Sample) -> bool {
    sample.measured().is_some_and(|measured| measured.measured_at.is_some())
}
