//! The state of a solve: the tableau in the current basis, the level of every basis row, and which phases are present.
//!
//! Every row has a *level* `g + ν·λ`: ln c of a species, ln of the saturation of a phase or reservoir (zero when it is
//! present), λ of a component. The levels of the basis rows are the unknowns.
//!
//! A mixture has a column of its own, whose level is ln of its amount N, and its members are rows like species with that
//! column in them: `ln n_k = ln N + g_k + ν_k·λ`. That the fractions add up to one is the balance of the column,
//! `Σ n_k - N = 0`, in which the row of the mixture as a whole counts negatively. While it is absent its column is held
//! at zero, where the level of a member is ln of the fraction that it would have.

use super::basis::Basis;
use super::exact::ExactSum;
use super::problem::{Problem, Row};
use super::settings::SolveError;
use crate::activity::Model;

/// What the level of a column's basis row is.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(super) enum Column {
    /// An unknown.
    Free,
    /// Held: at zero by a reservoir or a phase that is present, or at a given amount of a mixture.
    Held,
    /// Minus infinity: nothing that is left contains the basis row.
    Absent,
}

/// Where an earlier solve ended, as a start for a problem with the same rows.
#[derive(Debug, Clone)]
pub struct Warm {
    pub(super) basis: Basis,
    level: Vec<f64>,
    pub(super) column: Vec<Column>,
    mineral_amount: Vec<f64>,
    mixture_present: Vec<bool>,
    n_species: usize,
    specific: Vec<f64>,
    pub(super) ionic_strength: f64,
    pub(super) ln_water_activity: f64,
}

impl Warm {
    /// Whether the same rows play the same parts in `system`.
    fn fits(&self, system: &System) -> bool {
        let parts = (self.n_species, self.mineral_amount.len(), self.mixture_present.len());
        let problem = system.problem;
        parts == (problem.first_member(), problem.minerals.len(), problem.mixtures.len())
            && self.basis.same_rows(&system.basis)
    }
}

/// The solver's working state.
#[derive(Debug)]
pub(super) struct System<'p> {
    pub(super) problem: &'p Problem,
    pub(super) basis: Basis,
    /// Constant part of each row's level; 0 for unit rows.
    pub(super) g: Vec<f64>,
    /// ln γ of each species.
    pub(super) ln_gamma: Vec<f64>,
    /// Charge number of each species.
    pub(super) charges: Vec<f64>,
    /// The specific part of each ln γ: zero where the model has none.
    pub(super) specific: Vec<f64>,
    /// Mixture of each member and of each mixture as a whole.
    mixture_of: Vec<usize>,
    /// Level of each column's basis row.
    pub(super) level: Vec<f64>,
    pub(super) column: Vec<Column>,
    /// Rows that a total of zero excludes.
    pub(super) absent: Vec<bool>,
    /// ln of the amount of each species, other, member and mixture at the end of the latest inner solve; minus infinity for
    /// those absent.
    pub(super) ln_c: Vec<f64>,
    /// Amount of each mineral, mol/kg(water).
    pub(super) mineral_amount: Vec<f64>,
    pub(super) mixture_present: Vec<bool>,
    /// Amount of each mixture, mol/kg(water).
    pub(super) mixture_amount: Vec<f64>,
    pub(super) sum: ExactSum,
    pub(super) effort: Effort,
}

/// What a solve took.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Default)]
pub struct Effort {
    /// Steps of the inner solver: Newton steps and rounds of sweeps.
    pub iterations: usize,
    /// Evaluations of all concentrations.
    pub evaluations: usize,
    /// Changes of basis.
    pub pivots: usize,
    /// Entries and exits of phases.
    pub phase_changes: usize,
    /// Values of the ionic strength tried.
    pub ionic_strengths: usize,
}

impl<'p> System<'p> {
    /// The system at its starting point.
    pub(super) fn new(problem: &'p Problem, warm: Option<&Warm>) -> Result<Self, SolveError> {
        let basis = Basis::new(problem.rows(), problem.n_components, problem.mixtures.len())
            .ok_or(SolveError::CoefficientsTooLarge)?;
        let mut system = Self::on(problem, basis);
        match warm.filter(|warm| warm.fits(&system)) {
            Some(warm) => system = Self::resume(problem, warm.clone()),
            None => system.start_cold()?,
        }
        Ok(system)
    }

    /// The system where an earlier solve of the same rows ended.
    pub(super) fn resume(problem: &'p Problem, warm: Warm) -> Self {
        let mut system = Self {
            level: warm.level,
            column: warm.column,
            mineral_amount: warm.mineral_amount,
            mixture_present: warm.mixture_present,
            specific: warm.specific,
            ..Self::on(problem, warm.basis)
        };
        system.basis.pivots = 0;
        for column in 0..system.basis.n {
            if system.column[column] == Column::Absent {
                // The total may have changed since; if it is still zero the reduction finds it again.
                system.column[column] = Column::Free;
                let total = system.total(column);
                system.level[column] = starting_level(total);
            }
        }
        system
    }

    /// A tableau without a start.
    fn on(problem: &'p Problem, basis: Basis) -> Self {
        let mut column = vec![Column::Free; basis.n];
        column[problem.n_components..].fill(Column::Held);
        Self {
            problem,
            g: vec![0.0; basis.unit_row(0) + basis.n],
            ln_gamma: vec![0.0; problem.species.len()],
            mixture_of: problem.rows().filter_map(|(_, mixture)| mixture).collect(),
            charges: problem.species.iter().map(|row| row.charge).collect(),
            specific: vec![0.0; problem.species.len()],
            ln_c: vec![f64::NEG_INFINITY; problem.n_amounts()],
            level: vec![0.0; basis.n],
            column,
            absent: vec![false; basis.unit_row(0)],
            mineral_amount: vec![0.0; problem.minerals.len()],
            mixture_present: vec![false; problem.mixtures.len()],
            mixture_amount: vec![0.0; problem.mixtures.len()],
            sum: ExactSum::default(),
            effort: Effort::default(),
            basis,
        }
    }

    /// Where this solve ended.
    pub(super) fn warm(self, ionic_strength: f64, ln_water_activity: f64) -> Warm {
        Warm {
            basis: self.basis,
            level: self.level,
            column: self.column,
            n_species: self.problem.first_member(),
            specific: self.specific,
            mineral_amount: self.mineral_amount,
            mixture_present: self.mixture_present,
            ionic_strength,
            ln_water_activity,
        }
    }

    /// Each component near its total, then the reservoirs into the basis.
    fn start_cold(&mut self) -> Result<(), SolveError> {
        for (k, total) in self.problem.totals.iter().enumerate() {
            self.level[k] = starting_level(total.to_f64()) / self.basis.scale(k);
        }
        for reservoir_idx in 0..self.problem.reservoirs.len() {
            let row = self.problem.reservoir_row(reservoir_idx);
            let column = (0..self.basis.n)
                .find(|&j| self.column[j] == Column::Free && self.basis.pivot(row, j))
                .ok_or(SolveError::Overdetermined { reservoir_idx })?;
            self.column[column] = Column::Held;
            self.level[column] = 0.0;
        }
        Ok(())
    }

    pub(super) fn mineral_row(&self, mineral_idx: usize) -> usize {
        self.problem.mineral_row(mineral_idx)
    }

    /// The mineral that is the basis row of a column.
    pub(super) fn mineral_of(&self, column: usize) -> Option<usize> {
        let minerals = self.mineral_row(0)..self.mineral_row(self.problem.minerals.len());
        let row = self.basis.row_of(column);
        minerals.contains(&row).then(|| row - minerals.start)
    }

    /// The reservoir that is the basis row of a column.
    pub(super) fn reservoir_of(&self, column: usize) -> Option<usize> {
        let reservoirs = self.problem.reservoir_row(0)..self.mineral_row(0);
        let row = self.basis.row_of(column);
        reservoirs.contains(&row).then(|| row - reservoirs.start)
    }

    /// The mixture that a row of the tableau belongs to.
    pub(super) fn mixture_of(&self, row: usize) -> Option<usize> {
        self.mixture_of.get(row.checked_sub(self.problem.first_member())?).copied()
    }

    /// Whether a row with an amount takes part: not excluded by the totals, nor of a mixture that is absent.
    pub(super) fn takes_part(&self, row: usize) -> bool {
        !self.absent[row] && self.mixture_of(row).is_none_or(|p| self.mixture_present[p])
    }

    /// Unit row of the column of a mixture; its level is ln of the amount.
    pub(super) fn amount_row(&self, mixture_idx: usize) -> usize {
        self.basis.unit_row(self.problem.n_components + mixture_idx)
    }

    /// Recomputes the constant part of every level for a new ionic strength and activity of water.
    pub(super) fn set_activities(&mut self, model: &Model, ionic_strength: f64, ln_water_activity: f64) {
        let problem = self.problem;
        for (i, ln_gamma) in self.ln_gamma.iter_mut().enumerate() {
            *ln_gamma = model.ln_gamma(i, self.charges[i], ionic_strength) + self.specific[i];
        }
        let solvent = |water: f64| if water == 0.0 { 0.0 } else { water * ln_water_activity };
        let species = problem.species.iter().zip(&self.ln_gamma).map(|(row, gamma)| (row, *gamma));
        let others = problem.others.iter().map(|row| (row, 0.0));
        let reservoirs = problem.reservoirs.iter().map(|held| (&held.row, held.ln_value));
        let minerals = problem.minerals.iter().map(|mineral| (&mineral.row, mineral.ln_target));
        let members = problem.mixtures.iter();
        let members =
            members.flat_map(|mixture| mixture.members.iter().map(|member| (member, mixture.ln_target)));
        let constant = |(row, offset): (&Row, f64)| row.ln_k + solvent(row.water) - offset;
        for (g, row) in self.g.iter_mut().zip(species.chain(others).chain(members)) {
            *g = constant(row);
        }
        for (g, row) in self.g[problem.n_amounts()..].iter_mut().zip(reservoirs.chain(minerals)) {
            *g = constant(row);
        }
    }

    /// Molality of each species after the latest inner solve, mol/kg(water). Shape `(n_species,)`.
    pub(super) fn molalities(&self) -> Vec<f64> {
        self.ln_c[..self.charges.len()].iter().map(|ln_c| ln_c.exp()).collect()
    }

    /// Total of a column's basis row, exact in sign.
    pub(super) fn total(&mut self, column: usize) -> f64 {
        self.basis.total(column, &self.problem.totals, &mut self.sum)
    }

    /// Level of any row from the levels of the basis rows; minus infinity if it contains something absent.
    pub(super) fn level_of(&self, row: usize) -> f64 {
        let mut sum = 0.0;
        for (column, entry) in self.basis.scaled_row(row).iter().enumerate() {
            if *entry != 0.0 {
                sum += entry * (self.level[column] - self.g[self.basis.row_of(column)]);
            }
        }
        self.g[row] + sum / self.basis.determinant()
    }

    /// Puts a mineral into the basis in place of the least concentrated species that it is made of.
    ///
    /// Returns false when it is made of held rows only.
    pub(super) fn enter(&mut self, mineral_idx: usize) -> bool {
        let row = self.mineral_row(mineral_idx);
        self.replace_least(row).is_some_and(|column| self.hold(column))
    }

    /// Marks a column whose basis row is a phase as held.
    pub(super) fn hold(&mut self, column: usize) -> bool {
        self.column[column] = Column::Held;
        self.level[column] = 0.0;
        self.effort.phase_changes += 1;
        true
    }

    /// Takes the mineral of a column out of the basis, in favour of the most concentrated species that can replace it.
    pub(super) fn leave(&mut self, column: usize) {
        self.effort.phase_changes += 1;
        self.column[column] = Column::Free;
        let mut species: Vec<(f64, usize)> = (0..self.problem.n_amounts())
            .filter(|&i| self.takes_part(i) && self.basis.scaled_row(i)[column] != 0.0)
            .map(|i| (self.level_of(i), i))
            .collect();
        species.sort_by(|a, b| b.0.total_cmp(&a.0));
        for (level, row) in species {
            if self.basis.pivot(row, column) {
                self.level[column] = level;
                return;
            }
        }
        // No species contains it: the unit row of some component takes its place and the reduction deals with it.
        let unit = (0..self.problem.n_components).map(|k| self.basis.unit_row(k));
        for row in unit.collect::<Vec<_>>() {
            if self.basis.column_of(row).is_none() && self.basis.pivot(row, column) {
                return;
            }
        }
    }

    /// Lets a mixture form, at first in a given amount.
    pub(super) fn enter_mixture(&mut self, mixture_idx: usize) {
        self.mixture_present[mixture_idx] = true;
        self.effort.phase_changes += 1;
        let ln_amount = self.starting_ln_amount(mixture_idx);
        self.hold_mixture(mixture_idx, ln_amount);
    }

    /// ln of a small part of what the totals could make of the members.
    fn starting_ln_amount(&self, mixture_idx: usize) -> f64 {
        const PART: f64 = 0.01;

        let most = |row: &Row| {
            let shares = row.stoichiometry.iter().filter(|(_, nu)| *nu.numer() > 0);
            shares
                .map(|(j, _)| self.problem.totals[*j].to_f64())
                .filter(|total| *total > 0.0)
                .fold(1.0, f64::min)
        };
        (PART * self.problem.mixtures[mixture_idx].members.iter().map(most).fold(0.0, f64::max)).ln()
    }

    /// Puts the amount of a mixture that is present into the basis and holds it at a value.
    pub(super) fn hold_mixture(&mut self, mixture_idx: usize, ln_amount: f64) {
        let row = self.amount_row(mixture_idx);
        let column = self.basis.column_of(row).or_else(|| self.replace_least(row));
        if let Some(column) = column {
            self.column[column] = Column::Held;
            self.level[column] = ln_amount;
        }
    }

    /// Makes the held amount of a mixture an unknown.
    pub(super) fn release_mixture(&mut self, mixture_idx: usize) {
        if let Some(column) = self.basis.column_of(self.amount_row(mixture_idx)) {
            self.column[column] = Column::Free;
        }
    }

    /// Takes a mixture away with all its members.
    pub(super) fn leave_mixture(&mut self, mixture_idx: usize) {
        self.effort.phase_changes += 1;
        self.hold_mixture(mixture_idx, 0.0);
        self.mixture_present[mixture_idx] = false;
        self.mixture_amount[mixture_idx] = 0.0;
        for column in 0..self.basis.n {
            let row = self.basis.row_of(column);
            if self.column[column] == Column::Free && self.mixture_of(row) == Some(mixture_idx) {
                self.leave(column);
            }
        }
    }

    /// Puts a row into the basis in place of the least concentrated free row that it contains.
    fn replace_least(&mut self, row: usize) -> Option<usize> {
        let mut columns: Vec<usize> = (0..self.basis.n)
            .filter(|&j| self.column[j] == Column::Free && self.basis.scaled_row(row)[j] != 0.0)
            .collect();
        columns.sort_by(|a, b| self.level[*a].total_cmp(&self.level[*b]));
        columns.into_iter().find(|&j| self.basis.pivot(row, j))
    }

    /// ln of the fraction of each member of a mixture, or of the one it would have.
    pub(super) fn ln_fractions(&self, mixture_idx: usize) -> Vec<f64> {
        let ln_amount = self.level_of(self.amount_row(mixture_idx));
        let ln_x = |row: usize| match self.absent[row] {
            true => f64::NEG_INFINITY,
            false => self.level_of(row) - ln_amount,
        };
        self.problem.member_rows(mixture_idx).map(ln_x).collect()
    }

    /// ln of the sum of the fractions.
    pub(super) fn mixture_saturation(&self, mixture_idx: usize) -> f64 {
        ln_sum(&self.ln_fractions(mixture_idx))
    }

    /// Amount of the held row of a column that balances the dissolved species, and the sum of its absolute terms.
    ///
    /// Summed without rounding, over the very concentrations that are reported, so that the balances of the components
    /// close even where the amount is a small difference.
    pub(super) fn held_amount(&mut self, column: usize) -> (f64, f64) {
        let total = self.total(column);
        let (mut plain, mut magnitude) = (total, total.abs());
        self.sum.add(total);
        let first_whole = self.problem.whole_row(0);
        for (row, ln_c) in self.ln_c.iter().enumerate() {
            let coefficient =
                self.basis.coefficient(row, column) * if row < first_whole { 1.0 } else { -1.0 };
            if coefficient != 0.0 {
                let c = ln_c.exp();
                plain -= coefficient * c;
                magnitude += (coefficient * c).abs();
                self.sum.add_product(-coefficient, c);
            }
        }
        let exact = self.sum.take();
        // Error-free sums know no infinity; beyond it only the sign matters.
        (if magnitude.is_finite() { exact } else { plain }, magnitude)
    }
}

/// ln of a sum of exponentials.
pub(super) fn ln_sum(values: &[f64]) -> f64 {
    let largest = values.iter().copied().fold(f64::NEG_INFINITY, f64::max);
    if !largest.is_finite() {
        return largest;
    }
    largest + values.iter().map(|value| (value - largest).exp()).sum::<f64>().ln()
}

/// ln of a concentration to begin with for a component of this total.
fn starting_level(total: f64) -> f64 {
    /// Where nothing is known, the hydrogen ion of neutral water.
    const UNKNOWN: f64 = -16.0;
    if total > 0.0 { total.ln() - 1.0 } else { UNKNOWN }
}
