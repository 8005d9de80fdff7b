//! Exact zeros and impossible totals, by the signs of one balance at a time.
//!
//! In any basis the balance of a free basis row reads `Σ ν'_i c_i + Σ ν'_p n_p = b'` with every c and n at least zero.
//! If all ν' have one sign, b' of the other sign is impossible, and b' = 0 makes every term exactly zero. Signs of ν'
//! and b' are exact, so the verdict is a proof, and column j of the inverse basis is its certificate (Farkas).

use super::settings::SolveError;
use super::system::{Column, System};

/// Removes what must be exactly zero and brings in minerals without which no balance can close.
///
/// Returns whether anything changed. Repeats until nothing does.
pub(super) fn reduce(system: &mut System) -> Result<bool, SolveError> {
    let mut changed = false;
    loop {
        let mut again = false;
        for column in 0..system.basis.n {
            if system.column[column] == Column::Free {
                again |= reduce_balance(system, column)?;
            }
        }
        if !again {
            return Ok(changed);
        }
        changed = true;
    }
}

/// Which signs the coefficients of one balance have.
#[derive(Default)]
struct Signs {
    positive: bool,
    negative: bool,
}

impl Signs {
    fn note(&mut self, coefficient: f64) {
        self.positive |= coefficient > 0.0;
        self.negative |= coefficient < 0.0;
    }
}

fn reduce_balance(system: &mut System, column: usize) -> Result<bool, SolveError> {
    let total = system.total(column);
    let mut species = Signs::default();
    let first_whole = system.problem.whole_row(0);
    for row in 0..system.problem.n_amounts() {
        if system.takes_part(row) {
            let coefficient = system.basis.scaled_row(row)[column] * system.basis.determinant();
            species.note(if row < first_whole { coefficient } else { -coefficient });
        }
    }
    let lacks_supply = !species.positive && total >= 0.0;
    let lacks_sink = !species.negative && total <= 0.0;
    if !lacks_supply && !lacks_sink {
        return Ok(false);
    }
    // A side of the balance is empty. Either nothing can fill it, or a phase of the right sign must.
    let phases = candidate_phases(system, column);
    let supply = species.positive || phases.iter().any(|(_, nu)| *nu > 0.0);
    let sink = species.negative || phases.iter().any(|(_, nu)| *nu < 0.0);
    if total == 0.0 && !(supply && sink) {
        remove(system, column, &phases);
        return Ok(true);
    }
    if (total > 0.0 && !supply) || (total < 0.0 && !sink) {
        return Err(infeasible(system, column, total));
    }
    let fills = |nu: f64| (lacks_supply && nu > 0.0) || (lacks_sink && nu < 0.0);
    for &(row, _) in phases.iter().filter(|(_, nu)| fills(*nu)) {
        if let Some(mixture_idx) = system.mixture_of(row) {
            system.enter_mixture(mixture_idx);
            return Ok(true);
        }
        if system.basis.pivot(row, column) {
            return Ok(system.hold(column));
        }
    }
    Ok(false)
}

/// (row, coefficient in the column) of the minerals, and of the members of mixtures, that are neither excluded nor
/// present.
fn candidate_phases(system: &System, column: usize) -> Vec<(usize, f64)> {
    let minerals = system.mineral_row(0)..system.mineral_row(system.problem.minerals.len());
    let minerals = minerals.filter(|row| !system.absent[*row] && system.basis.column_of(*row).is_none());
    let members = system.problem.species.len()..system.problem.whole_row(0);
    let members = members.filter(|row| !system.absent[*row] && !system.takes_part(*row));
    minerals
        .chain(members)
        .map(|row| (row, system.basis.coefficient(row, column)))
        .filter(|(_, nu)| *nu != 0.0)
        .collect()
}

fn remove(system: &mut System, column: usize, phases: &[(usize, f64)]) {
    for row in 0..system.problem.n_amounts() {
        if system.takes_part(row) && system.basis.coefficient(row, column) != 0.0 {
            system.absent[row] = true;
        }
    }
    for &(row, _) in phases {
        system.absent[row] = true;
    }
    system.column[column] = Column::Absent;
    system.level[column] = f64::NEG_INFINITY;
}

fn infeasible(system: &System, column: usize, value: f64) -> SolveError {
    let combination = (0..system.problem.n_components)
        .map(|k| (k, system.basis.total_factor(k, column)))
        .filter(|(_, factor)| *factor != 0.0)
        .collect();
    SolveError::Infeasible { combination, value }
}
