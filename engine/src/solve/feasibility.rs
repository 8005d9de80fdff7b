//! Exact zeros and impossible totals: first by the signs of one balance at a time, on demand by a linear programme.
//!
//! In any basis the balance of a free basis row reads `Σ ν'_i c_i + Σ ν'_p n_p = b'` with every c and n at least zero.
//! If all ν' have one sign, b' of the other sign is impossible, and b' = 0 makes every term exactly zero. Signs of ν'
//! and b' are exact, so the verdict is a proof, and column j of the inverse basis is its certificate (Farkas).
//!
//! If there is such a balance, in whatever basis, then pivoting finds it: [`zeros`] looks for amounts of at least ε each
//! by the least-index rule (Bland 1977; recalled), which never cycles, and the basis where that rule finds no way on shows
//! the balance. The tableau is exact, so there is nothing to round and nothing to verify.

use super::problem::Problem;
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

/// The rows that the totals force to be exactly zero.
///
/// # Errors
///
/// Returns `Infeasible` with its proof when no amounts have these totals; `Overdetermined` and `CoefficientsTooLarge` as
/// for a solve.
pub(super) fn zeros(problem: &Problem) -> Result<Vec<bool>, SolveError> {
    let mut system = System::new(problem, None)?;
    loop {
        replace_components(&mut system)?;
        let Some((column, total)) = least_violated(&mut system) else { return Ok(system.absent) };
        match way_out(&system, column) {
            // A pivot beyond exact arithmetic leaves the question open; what was found holds.
            Some(row) if !system.basis.pivot(row, column) => return Ok(system.absent),
            Some(_) => {}
            None if total < 0.0 => return Err(infeasible(&system, column, total)),
            None => {
                let phases = terms(&system, column).filter(|(row, _)| *row >= system.problem.first_member());
                let phases: Vec<(usize, f64)> = phases.collect();
                remove(&mut system, column, &phases);
            }
        }
    }
}

/// Everything that may have an amount in the balance of a column, with its coefficient.
fn terms(system: &System, column: usize) -> impl Iterator<Item = (usize, f64)> {
    let minerals = system.mineral_row(0)..system.mineral_row(system.problem.minerals.len());
    let rows = (0..system.problem.whole_row(0)).chain(minerals).filter(|row| !system.absent[*row]);
    rows.map(move |row| (row, system.basis.coefficient(row, column))).filter(|(_, nu)| *nu != 0.0)
}

/// Puts something with an amount in the place of each component in the basis, which has none.
fn replace_components(system: &mut System) -> Result<(), SolveError> {
    for column in 0..system.basis.n {
        if system.column[column] != Column::Free || !system.basis.is_unit(system.basis.row_of(column)) {
            continue;
        }
        let row =
            terms(system, column).map(|(row, _)| row).find(|row| system.basis.column_of(*row).is_none());
        if row.is_some_and(|row| system.basis.pivot(row, column)) {
            continue;
        }
        let total = system.total(column);
        if row.is_none() && total != 0.0 {
            return Err(infeasible(system, column, total));
        }
        remove(system, column, &[]);
    }
    Ok(())
}

/// The column of least basis row whose amount is negative, or zero and negative once every species takes ε; with the
/// amount.
fn least_violated(system: &mut System) -> Option<(usize, f64)> {
    let mut columns: Vec<usize> = (0..system.basis.n).filter(|j| system.column[*j] == Column::Free).collect();
    columns.sort_by_key(|j| system.basis.row_of(*j));
    columns.into_iter().find_map(|column| {
        let total = system.total(column);
        let n_species = system.problem.first_member();
        let taken = |system: &System| {
            let species = terms(system, column).filter(|(row, _)| *row < n_species);
            species.map(|(_, nu)| nu).sum::<f64>()
        };
        (total < 0.0 || (total == 0.0 && taken(system) > 0.0)).then_some((column, total))
    })
}

/// The least row that can take the place of a basis row whose amount is too small.
fn way_out(system: &System, column: usize) -> Option<usize> {
    terms(system, column)
        .find(|(row, nu)| *nu < 0.0 && system.basis.column_of(*row).is_none())
        .map(|(row, _)| row)
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
    let members = system.problem.first_member()..system.problem.whole_row(0);
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

/// The balance of a column as a combination of totals, in integers without a common factor, so that anybody can check it.
fn infeasible(system: &System, column: usize, value: f64) -> SolveError {
    let basis = &system.basis;
    let sign = basis.determinant().signum();
    let factor = |k: usize| sign * basis.scaled_row(basis.unit_row(k))[column] * basis.scale(k);
    let mut combination: Vec<(usize, f64)> = (0..system.problem.n_components)
        .map(|k| (k, factor(k)))
        .filter(|(_, factor)| *factor != 0.0)
        .collect();
    let common = combination.iter().fold(0.0, |divisor, (_, factor)| common_divisor(divisor, factor.abs()));
    combination.iter_mut().for_each(|(_, factor)| *factor /= common);
    SolveError::Infeasible { combination, value: value * (basis.determinant().abs() / common) }
}

/// Greatest common divisor of two whole numbers.
fn common_divisor(a: f64, b: f64) -> f64 {
    if b == 0.0 { a } else { common_divisor(b, a % b) }
}
