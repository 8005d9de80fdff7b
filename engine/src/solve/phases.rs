//! Which pure phases are present: an active set in the manner of non-negative least squares (Lawson & Hanson 1974).
//!
//! The Gibbs energy is convex in the amounts of the phases and its gradient is minus their ln saturation. So the most
//! supersaturated phase enters; if an amount would turn negative, the amounts move from their old values towards the
//! new ones until the first reaches zero and that phase leaves. A phase made of phases already present is exchanged for
//! the one it exhausts first. The energy falls with every change, so the loop ends.

use super::inner::{self, Point, Reduced};
use super::settings::{Settings, SolveError};
use super::system::{Column, System};

/// Solves for composition and phases at given activity coefficients.
pub(super) fn settle(system: &mut System, settings: &Settings) -> Result<(Reduced, Point), SolveError> {
    let most_changes = 100 + 20 * system.problem.minerals.len();
    let before = system.effort.phase_changes;
    loop {
        let converged = inner::converge(system, settings)?;
        if system.effort.phase_changes - before > most_changes {
            return Err(SolveError::PhasesNotSettled { changes: most_changes });
        }
        if let Some(column) = move_to_new_amounts(system) {
            system.leave(column);
            continue;
        }
        let Some(mineral_idx) = most_supersaturated(system, settings.saturation) else {
            return Ok(converged);
        };
        if !system.enter(mineral_idx) {
            exchange(system, mineral_idx)?;
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

/// Moves the amounts towards those that balance the solution; returns the column of the first that reaches zero.
fn move_to_new_amounts(system: &mut System) -> Option<usize> {
    /// Amounts smaller than this share of their balance are rounding.
    const ROUNDING: f64 = 1e-15;
    const LARGEST: f64 = 1e300;

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

/// The absent mineral with the largest ln saturation above the tolerance.
fn most_supersaturated(system: &System, tolerance: f64) -> Option<usize> {
    let mut most: Option<(f64, usize)> = None;
    for mineral_idx in 0..system.problem.minerals.len() {
        let row = system.mineral_row(mineral_idx);
        if system.absent[row] || system.basis.column_of(row).is_some() {
            continue;
        }
        let saturation = system.level_of(row);
        if saturation > most.map_or(tolerance, |most| most.0) {
            most = Some((saturation, mineral_idx));
        }
    }
    most.map(|(_, mineral_idx)| mineral_idx)
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
