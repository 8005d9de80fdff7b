//! Which pure phases are present: an active set in the manner of non-negative least squares (Lawson & Hanson 1974).
//!
//! The Gibbs energy is convex in the amounts of the phases and its gradient is minus their ln saturation. So the most
//! supersaturated phase enters; if an amount would turn negative, the amounts move from their old values towards the
//! new ones until the first reaches zero and that phase leaves. A phase made of phases already present is exchanged for
//! the one it exhausts first. The energy falls with every change, so the loop ends.
//!
//! It is convex in the amounts of mixtures too; those that are present are settled within each step (`mixtures`).

use super::inner::{Point, Reduced};
use super::mixtures::{self, Amounts};
use super::settings::{Settings, SolveError};
use super::system::{Column, System};

/// Solves for composition and phases at given activity coefficients.
pub(super) fn settle(system: &mut System, settings: &Settings) -> Result<(Reduced, Point), SolveError> {
    let most_changes = 100 + 20 * (system.problem.minerals.len() + system.problem.mixtures.len());
    let before = system.effort.phase_changes;
    loop {
        let amounts = mixtures::converge(system, settings)?;
        if system.effort.phase_changes - before > most_changes {
            return Err(SolveError::PhasesNotSettled { changes: most_changes });
        }
        if let Some(column) = move_to_new_amounts(system) {
            system.leave(column);
            continue;
        }
        let converged = match amounts {
            Amounts::Settled(converged) => *converged,
            Amounts::Rising { mixture_idx } => return Err(SolveError::UnboundedMixture { mixture_idx }),
        };
        match most_supersaturated(system, settings.saturation) {
            None => return Ok(converged),
            Some(Candidate::Mixture(mixture_idx)) => system.enter_mixture(mixture_idx),
            Some(Candidate::Mineral(mineral_idx)) => {
                if !system.enter(mineral_idx) {
                    exchange(system, mineral_idx)?;
                }
            }
        }
    }
}

/// Columns held by a mineral, with the mineral.
pub(super) fn present(system: &System) -> Vec<(usize, usize)> {
    (0..system.basis.n)
        .filter(|&column| system.column[column] == Column::Held)
        .filter_map(|column| system.mineral_of(column).map(|mineral_idx| (column, mineral_idx)))
        .collect()
}

/// Amounts smaller than this share of their balance are rounding.
const ROUNDING: f64 = 1e-15;

const LARGEST: f64 = 1e300;

/// Whether a mineral is present in a negative amount, before it is told to leave.
pub(super) fn any_used_up(system: &mut System) -> bool {
    present(system).into_iter().any(|(column, _)| {
        let (amount, magnitude) = system.held_amount(column);
        amount < -ROUNDING * magnitude.min(LARGEST)
    })
}

/// Moves the amounts towards those that balance the solution; returns the column of the first that reaches zero.
fn move_to_new_amounts(system: &mut System) -> Option<usize> {
    let mut first: Option<(f64, usize)> = None;
    let mut moved = Vec::new();
    for (column, mineral_idx) in present(system) {
        let (amount, magnitude) = system.held_amount(column);
        // A phase far from its place may ask for e^700; an infinite amount would spoil the proportions.
        let amount = if amount.is_nan() { -LARGEST } else { amount.clamp(-LARGEST, LARGEST) };
        let old = system.mineral_amount[mineral_idx];
        if amount < -ROUNDING * magnitude.min(LARGEST) {
            let share = old / (old - amount);
            if first.is_none_or(|(least, _)| share < least) {
                first = Some((share, column));
            }
        }
        moved.push((mineral_idx, old, amount));
    }
    let share = first.map_or(1.0, |(share, _)| share);
    for p in (0..system.mixture_present.len()).filter(|p| system.mixture_present[*p]).collect::<Vec<_>>() {
        let amount = system.level_of(system.amount_row(p)).exp();
        system.mixture_amount[p] += share * (amount - system.mixture_amount[p]);
    }
    for (mineral_idx, old, amount) in moved {
        let moved = match share {
            0.0 => old,
            1.0 => amount,
            share => old + share * (amount - old),
        };
        system.mineral_amount[mineral_idx] = moved.max(0.0);
    }
    let (_, column) = first?;
    if let Some(mineral_idx) = system.mineral_of(column) {
        system.mineral_amount[mineral_idx] = 0.0;
    }
    Some(column)
}

/// A phase that may form.
enum Candidate {
    Mineral(usize),
    Mixture(usize),
}

/// The absent phase with the largest ln saturation above the tolerance.
fn most_supersaturated(system: &System, tolerance: f64) -> Option<Candidate> {
    let mut most: Option<(f64, Candidate)> = None;
    for mineral_idx in 0..system.problem.minerals.len() {
        let row = system.mineral_row(mineral_idx);
        if system.absent[row] || system.basis.column_of(row).is_some() {
            continue;
        }
        let saturation = system.level_of(row);
        if saturation > most.as_ref().map_or(tolerance, |most| most.0) {
            most = Some((saturation, Candidate::Mineral(mineral_idx)));
        }
    }
    for mixture_idx in (0..system.mixture_present.len()).filter(|p| !system.mixture_present[*p]) {
        let saturation = system.mixture_saturation(mixture_idx);
        if saturation > most.as_ref().map_or(tolerance, |most| most.0) {
            most = Some((saturation, Candidate::Mixture(mixture_idx)));
        }
    }
    most.map(|(_, candidate)| candidate)
}

/// Replaces one of the present phases that a mineral consists of by that mineral: the one used up first.
fn exchange(system: &mut System, mineral_idx: usize) -> Result<(), SolveError> {
    let row = system.mineral_row(mineral_idx);
    let mut first: Option<(f64, usize)> = None;
    let parts: Vec<(usize, usize, f64)> = present(system)
        .into_iter()
        .map(|(column, part)| (column, part, system.basis.coefficient(row, column)))
        .collect();
    for &(column, part, consumed) in &parts {
        if consumed > 0.0 {
            let amount = system.mineral_amount[part] / consumed;
            if first.is_none_or(|(least, _)| amount < least) {
                first = Some((amount, column));
            }
        }
    }
    let (amount, leaving) = first.ok_or(SolveError::Unbounded { mineral_idx })?;
    for (column, part, consumed) in parts {
        let left = system.mineral_amount[part] - consumed * amount;
        system.mineral_amount[part] = if column == leaving { 0.0 } else { left.max(0.0) };
    }
    system.mineral_amount[mineral_idx] = amount;
    system.basis.pivot(row, leaving);
    system.hold(leaving);
    Ok(())
}
