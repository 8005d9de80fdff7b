//! The ledger whose constants move least so that every cycle closes.
//!
//! Generalised least squares: log10 K change by d of least dᵀ Σ⁻¹ d with C (l + d) = 0, so a constant moves the more the
//! less certain it is (see [`super::least_squares`]). A change is a constant shift; temperature functions keep their
//! shape. Afterwards the constants are correlated, and less uncertain: both are kept as their dependence on the inputs
//! they were adjusted by.

use std::sync::Arc;

use super::audit::{ROUNDING, Survey};
use super::chi_square::probability_above;
use super::elimination::Sparse;
use super::least_squares::{Weights, dot};
use super::ledger::{Ledger, LedgerError};
use crate::chem::{Constant, History, Origin, Provenance, Reaction, rational};
use crate::quantity::Part;
use crate::units::Temperature;

/// How a ledger was reconciled.
#[derive(Debug, Clone)]
pub struct Reconciliation {
    /// The temperature at which every cycle closes.
    pub temperature: Temperature,
    /// Number of cycles.
    pub n_cycles: usize,
    /// Constants in cycles, the most suspect first.
    pub moves: Vec<Move>,
    /// Sum of squares of the independent misclosures in their standard deviations.
    pub chi_square: f64,
    /// Number of independent cycles.
    pub degrees_of_freedom: usize,
    /// The probability of a larger chi-square if all stated uncertainties are right.
    pub probability: f64,
}

/// What became of one constant.
#[derive(Debug, Clone, PartialEq)]
pub struct Move {
    /// The reaction's name.
    pub name: String,
    /// log10 K before.
    pub before: f64,
    /// log10 K after.
    pub after: f64,
    /// Standard uncertainty before.
    pub sigma_before: f64,
    /// Standard uncertainty after.
    pub sigma_after: f64,
    /// Standardised residual (Baarda 1968): how many standard deviations this constant alone misses what all others
    /// say of it. Above 3 it is suspect. Constants that only ever share one cycle cannot be told apart: they have the same.
    pub residual: f64,
}

impl Move {
    /// The change in standard uncertainties of the constant.
    #[must_use]
    pub fn in_sigmas(&self) -> f64 {
        let change = self.after - self.before;
        if change.abs() <= ROUNDING { 0.0 } else { change / self.sigma_before }
    }
}

pub(super) fn reconcile(
    ledger: &Ledger,
    temperature: Temperature,
) -> Result<(Ledger, Reconciliation), LedgerError> {
    let survey = Survey::of(ledger, temperature)?;
    check_stated(&survey)?;
    let misclosures: Vec<f64> = survey.cycles.iter().map(|cycle| survey.misclosure(cycle)).collect();
    let weights = Weights::of(survey.cycles.iter().map(|cycle| survey.scatter.combined(cycle)).collect());
    check_movable(&survey, &weights.remainder(&misclosures))?;

    let weighted = weights.times(&misclosures);
    let shift_of_inputs = weights.to_inputs(&weighted);
    let chi_square = dot(&misclosures, &weighted);
    let degrees_of_freedom = weights.independent.len();
    let mut moves = Vec::new();
    let mut reconciled = ledger.clone();
    for index in 0..survey.reactions.len() {
        let own = &survey.scatter.rows[index];
        if !survey.cycles.iter().any(|cycle| cycle.contains_key(&index)) {
            continue;
        }
        let shift = -dot(own, &shift_of_inputs);
        let with_cycles: Vec<f64> = weights.cycles.iter().map(|cycle| dot(cycle, own)).collect();
        let taken = weights.to_inputs(&weights.times(&with_cycles));
        let left: Vec<f64> = own.iter().zip(&taken).map(|(own, taken)| own - taken).collect();
        moves.push(Move {
            name: survey.names[index].clone(),
            before: survey.log_k[index],
            after: survey.log_k[index] + shift,
            sigma_before: dot(own, own).sqrt(),
            sigma_after: dot(&left, &left).sqrt(),
            residual: residual(index, &survey.cycles, &weights, &weighted),
        });
        let adjusted = adjusted(survey.reactions[index], shift, &survey, &taken, degrees_of_freedom)?;
        reconciled = reconciled.replace(&survey.names[index], &adjusted)?;
    }
    moves.sort_by(|a, b| b.residual.abs().total_cmp(&a.residual.abs()).then_with(|| a.name.cmp(&b.name)));
    let reconciliation = Reconciliation {
        temperature,
        n_cycles: survey.cycles.len(),
        moves,
        chi_square,
        degrees_of_freedom,
        probability: probability_above(chi_square, degrees_of_freedom),
    };
    Ok((reconciled.with_reconciliation(Arc::new(reconciliation.clone())), reconciliation))
}

fn check_stated(survey: &Survey<'_>) -> Result<(), LedgerError> {
    let in_cycles =
        (0..survey.reactions.len()).filter(|index| survey.cycles.iter().any(|c| c.contains_key(index)));
    let unstated: Vec<String> = in_cycles
        .filter(|index| !survey.states_sigma(*index))
        .map(|index| survey.names[index].clone())
        .collect();
    if unstated.is_empty() { Ok(()) } else { Err(LedgerError::Unstated(unstated)) }
}

/// A cycle of constants that are all exact, or that move together, cannot be closed.
fn check_movable(survey: &Survey<'_>, remainders: &[f64]) -> Result<(), LedgerError> {
    let open = remainders.iter().position(|remainder| remainder.abs() > ROUNDING);
    let Some(open) = open else { return Ok(()) };
    let names = survey.cycles[open].keys().map(|index| survey.names[*index].clone()).collect();
    Err(LedgerError::Immovable { names, misclosure: remainders[open] })
}

/// w = (Cᵀ W m)ᵢ / √(Cᵀ W C)ᵢᵢ, the test of one constant against all others.
fn residual(index: usize, cycles: &[Sparse], weights: &Weights, weighted: &[f64]) -> f64 {
    let multiples: Vec<f64> = cycles
        .iter()
        .map(|cycle| cycle.get(&index).map_or(0.0, |multiple| rational::to_f64(*multiple)))
        .collect();
    let variance = dot(&multiples, &weights.times(&multiples));
    if variance > 0.0 { dot(&multiples, weighted) / variance.sqrt() } else { 0.0 }
}

/// The constant shifted, and depending on the inputs as the adjustment makes it.
fn adjusted(
    reaction: &Reaction,
    shift: f64,
    survey: &Survey<'_>,
    taken: &[f64],
    n_cycles: usize,
) -> Result<Reaction, LedgerError> {
    let constant = reaction.constant()?;
    let inputs = survey.scatter.inputs.iter().zip(taken).filter(|(_, taken)| **taken != 0.0);
    let parts = inputs.filter_map(|(input, taken)| {
        let sigma = input.sigma().filter(|sigma| *sigma > 0.0)?;
        Some(Part { input: input.clone(), sensitivity: -taken / sigma })
    });
    let adjustment = Origin {
        label: "adjustment".into(),
        equation: reaction.equation().to_string(),
        stated: format!("log K {shift:+.4} closes {n_cycles} cycles"),
        source: Some("generalised least squares over the cycles of the ledger".into()),
        provenance: Provenance::Computed,
        parts: parts.collect(),
    };
    let history = constant.history.plus(&History::of(adjustment));
    let adjusted = Constant { log_k: constant.log_k.shifted(shift), history, ..constant.clone() };
    Ok(Reaction::of(reaction.equation().clone(), adjusted))
}

/// The reaction with a standard uncertainty of log10 K where none was stated.
pub(super) fn assume_sigma(reaction: &Reaction, sigma: f64) -> Result<Reaction, LedgerError> {
    if reaction.log_k()?.sigma().is_some() {
        return Ok(reaction.clone());
    }
    let constant = reaction.constant()?;
    let history = constant.history.with_origins(|origin| filled(origin, sigma))?;
    let history = history.converted(format!("uncertainty not stated: {sigma} assumed for log K"));
    Ok(Reaction::of(reaction.equation().clone(), Constant { history, ..constant.clone() }))
}

fn filled(origin: &Origin, sigma: f64) -> Result<Origin, LedgerError> {
    let share = sigma / (origin.parts.len() as f64).sqrt();
    let parts = origin.parts.iter().map(|part| {
        let sensitivity = part.sensitivity.abs();
        let input = part.input.with_sigma(Some(share / if sensitivity > 0.0 { sensitivity } else { 1.0 }));
        Ok(Part { input: input.map_err(|_| LedgerError::Sigma(sigma))?, sensitivity: part.sensitivity })
    });
    Ok(Origin { parts: parts.collect::<Result<_, LedgerError>>()?, ..origin.clone() })
}
