//! The convex inner problem: given activity coefficients and given the phases that are present, find the levels.
//!
//! ```text
//! minimise  Φ(y) = Σ c_i(y) - b'·y,    ln c_i = g'_i + ν'_i·y        (y: levels of the free basis rows)
//! ```
//!
//! The gradient is the mass balance. With P_j the sum of the positive terms of balance j and N_j that of the negative
//! ones (b' counted on the side where it is positive) the residual is `F_j = ln P_j - ln N_j`: its Jacobian has bounded
//! entries and Newton's method on it converges from far away. Steps are accepted on Φ, which is convex, not on |F|,
//! which can cycle. Where that fails, sweeps that majorise Φ balance by balance cannot increase it.

use super::dense::Lu;
use super::feasibility;
use super::settings::{Settings, SolveError};
use super::system::{Column, System};

/// Above this logarithm, sums are formed relative to their largest term.
const LARGE: f64 = 600.0;

/// Where the residual decides and Φ no longer does.
const NEAR: f64 = 0.5;

/// A species replaces a basis row that it exceeds by this factor (as a logarithm): ln 3.
const REBASE: f64 = 1.0986;

/// The problem restricted to free columns and species that are not absent, by rows.
#[derive(Debug, Default)]
pub(super) struct Reduced {
    pub(super) columns: Vec<usize>,
    /// Rows with amounts: species and members, then mixtures as a whole.
    pub(super) species: Vec<usize>,
    /// How many of them come before the mixtures as a whole, which count negatively in the balances.
    n_counted: usize,
    start: Vec<usize>,
    entries: Vec<(u32, f64)>,
    /// ln c of each species where all free levels are zero.
    g: Vec<f64>,
    /// Sum of the absolute terms of each g, which bounds its rounding.
    g_size: Vec<f64>,
    /// Total of each free basis row.
    pub(super) b: Vec<f64>,
    /// Largest Σ_j |ν'_ij| of any species.
    pub(super) row_max: f64,
    /// Largest |ν'_ij| of each column.
    column_max: Vec<f64>,
}

impl Reduced {
    /// Reads the tableau; called after every change of basis.
    fn build(&mut self, system: &mut System) {
        let basis = &system.basis;
        self.columns.clear();
        self.columns.extend((0..basis.n).filter(|&j| system.column[j] == Column::Free));
        self.species.clear();
        self.species.extend((0..system.problem.n_amounts()).filter(|&i| system.takes_part(i)));
        let first_whole = system.problem.whole_row(0);
        self.n_counted = self.species.partition_point(|&row| row < first_whole);
        self.start.clear();
        self.start.push(0);
        self.entries.clear();
        self.g.clear();
        self.g_size.clear();
        self.column_max.clear();
        self.column_max.resize(self.columns.len(), 0.0);
        self.row_max = 0.0;
        let reciprocal = 1.0 / basis.determinant();
        let unimodular = basis.determinant().abs() == 1.0;
        for &row in &self.species {
            let scaled = basis.scaled_row(row);
            let coefficient =
                |j: usize| if unimodular { scaled[j] * reciprocal } else { scaled[j] / basis.determinant() };
            let mut g = system.g[row];
            let mut g_size = g.abs();
            for (j, _) in scaled.iter().enumerate().filter(|(_, entry)| **entry != 0.0) {
                let held = if system.column[j] == Column::Held { system.level[j] } else { 0.0 };
                let term = coefficient(j) * (held - system.g[basis.row_of(j)]);
                g += term;
                g_size += term.abs();
            }
            let mut row_sum = 0.0;
            for (k, &j) in self.columns.iter().enumerate() {
                if scaled[j] != 0.0 {
                    let nu = coefficient(j);
                    self.entries.push((k as u32, nu));
                    row_sum += nu.abs();
                    self.column_max[k] = self.column_max[k].max(nu.abs());
                }
            }
            self.row_max = self.row_max.max(row_sum);
            self.g.push(g);
            self.g_size.push(g_size);
            self.start.push(self.entries.len());
        }
        self.b.clear();
        for k in 0..self.columns.len() {
            let total = system.total(self.columns[k]);
            self.b.push(total);
        }
    }

    /// (free column, coefficient) of one species.
    pub(super) fn row(&self, i: usize) -> &[(u32, f64)] {
        &self.entries[self.start[i]..self.start[i + 1]]
    }

    pub(super) fn n(&self) -> usize {
        self.columns.len()
    }

    /// Sign with which a row counts in the balances.
    fn sign(&self, i: usize) -> f64 {
        if i < self.n_counted { 1.0 } else { -1.0 }
    }

    /// Largest change of any ln c along a step.
    fn largest_change(&self, step: &[f64]) -> f64 {
        (0..self.species.len()).map(|i| self.change(i, step).abs()).fold(0.0, f64::max)
    }

    fn change(&self, i: usize, step: &[f64]) -> f64 {
        self.row(i).iter().map(|&(k, nu)| nu * step[k as usize]).sum()
    }

    /// Bound on the rounding of ln c of a species, from the absolute terms that it is summed from.
    pub(super) fn rounding(&self, i: usize, y: &[f64]) -> f64 {
        let size = self.row(i).iter().fold(self.g_size[i], |sum, &(k, nu)| sum + (nu * y[k as usize]).abs());
        f64::EPSILON * (4.0 + size)
    }
}

/// All quantities at one vector of levels.
#[derive(Debug, Clone, Default)]
pub(super) struct Point {
    pub(super) y: Vec<f64>,
    pub(super) ln_c: Vec<f64>,
    pub(super) c: Vec<f64>,
    /// P_j and N_j without b', in units of exp(shift).
    supply: Vec<f64>,
    demand: Vec<f64>,
    shift: Vec<(f64, f64)>,
    /// ln P_j and ln N_j with b'.
    ln_p: Vec<f64>,
    ln_n: Vec<f64>,
    /// 1/P_j and 1/N_j, where nothing is shifted.
    per_p: Vec<f64>,
    per_n: Vec<f64>,
    pub(super) residual: Vec<f64>,
    /// Largest |F_j|; not finite if any is.
    pub(super) worst: f64,
    /// Whether the sums are shifted.
    shifted: bool,
}

impl Point {
    pub(super) fn evaluate(&mut self, reduced: &Reduced) {
        let n = reduced.n();
        self.ln_c.clear();
        let mut largest = f64::NEG_INFINITY;
        for i in 0..reduced.species.len() {
            let mut ln_c = reduced.g[i];
            for &(k, nu) in reduced.row(i) {
                ln_c += nu * self.y[k as usize];
            }
            largest = if ln_c > largest { ln_c } else { largest };
            self.ln_c.push(ln_c);
        }
        self.c.clear();
        self.c.extend(self.ln_c.iter().map(|ln_c| ln_c.exp()));
        let Self { supply, demand, ln_p, ln_n, per_p, per_n, residual, .. } = self;
        for sums in [supply, demand, ln_p, ln_n, per_p, per_n, residual] {
            sums.clear();
            sums.resize(n, 0.0);
        }
        self.shift.clear();
        self.shift.resize(n, (0.0, 0.0));
        self.shifted = largest > LARGE;
        if !self.shifted {
            self.add_up(reduced);
        }
        if self.shifted || !self.worst.is_finite() || self.has_lost_precision() {
            self.add_up_shifted(reduced);
        }
    }

    fn add_up(&mut self, reduced: &Reduced) {
        for (i, c) in self.c.iter().enumerate() {
            let c = reduced.sign(i) * c;
            for &(k, nu) in reduced.row(i) {
                let term = nu * c;
                if term > 0.0 {
                    self.supply[k as usize] += term;
                } else {
                    self.demand[k as usize] -= term;
                }
            }
        }
        self.worst = 0.0;
        for k in 0..reduced.n() {
            let b = reduced.b[k];
            let (p, n) = (self.supply[k] + (-b).max(0.0), self.demand[k] + b.max(0.0));
            (self.ln_p[k], self.ln_n[k]) = (p.ln(), n.ln());
            (self.per_p[k], self.per_n[k]) = (1.0 / p, 1.0 / n);
            self.finish(k);
        }
    }

    /// Whether a sum is so small that its terms are no longer normal numbers.
    fn has_lost_precision(&self) -> bool {
        self.ln_p.iter().chain(&self.ln_n).any(|ln_sum| *ln_sum < -LARGE)
    }

    /// The same where a sum over- or underflows: every sum relative to its largest term.
    fn add_up_shifted(&mut self, reduced: &Reduced) {
        self.shifted = true;
        let none = f64::NEG_INFINITY;
        for (shift, b) in self.shift.iter_mut().zip(&reduced.b) {
            let ln_b = b.abs().ln();
            *shift = if *b < 0.0 { (ln_b, none) } else { (none, ln_b) };
        }
        for i in 0..reduced.species.len() {
            for &(k, nu) in reduced.row(i) {
                let shift = &mut self.shift[k as usize];
                let side = if reduced.sign(i) * nu > 0.0 { &mut shift.0 } else { &mut shift.1 };
                *side = side.max(self.ln_c[i] + nu.abs().ln());
            }
        }
        self.supply.fill(0.0);
        self.demand.fill(0.0);
        for i in 0..reduced.species.len() {
            for &(k, nu) in reduced.row(i) {
                let (k, (up, down)) = (k as usize, self.shift[k as usize]);
                let nu = reduced.sign(i) * nu;
                if nu > 0.0 {
                    self.supply[k] += nu * (self.ln_c[i] - up).exp();
                } else {
                    self.demand[k] -= nu * (self.ln_c[i] - down).exp();
                }
            }
        }
        self.worst = 0.0;
        for k in 0..reduced.n() {
            let (b, (up, down)) = (reduced.b[k], self.shift[k]);
            let with =
                |sum: f64, b: f64, shift: f64| sum + if b > 0.0 { (b.ln() - shift).exp() } else { 0.0 };
            self.ln_p[k] = up + with(self.supply[k], -b, up).ln();
            self.ln_n[k] = down + with(self.demand[k], b, down).ln();
            self.finish(k);
        }
    }

    /// F_j from its two sums; keeps a residual that is not finite visible.
    fn finish(&mut self, k: usize) {
        self.residual[k] = self.ln_p[k] - self.ln_n[k];
        let size = self.residual[k].abs();
        if size > self.worst || size.is_nan() {
            self.worst = if size.is_finite() { size } else { f64::INFINITY };
        }
    }

    /// `ν c` over the side of the balance that it belongs to.
    fn weight(&self, i: usize, k: usize, nu: f64) -> f64 {
        if !self.shifted {
            return nu * self.c[i] * if nu > 0.0 { self.per_p[k] } else { self.per_n[k] };
        }
        let ln_side = if nu > 0.0 { self.ln_p[k] } else { self.ln_n[k] };
        nu * (self.ln_c[i] - ln_side).exp()
    }

    /// Jacobian of F by rows.
    pub(super) fn jacobian(&self, reduced: &Reduced, jacobian: &mut Vec<f64>) {
        let n = reduced.n();
        jacobian.clear();
        jacobian.resize(n * n, 0.0);
        for i in 0..reduced.species.len() {
            let (row, sign) = (reduced.row(i), reduced.sign(i));
            for &(j, nu) in row {
                let j = j as usize;
                let weight = self.weight(i, j, sign * nu);
                let target = &mut jacobian[j * n..(j + 1) * n];
                for &(k, other) in row {
                    target[k as usize] += weight * other;
                }
            }
        }
    }

    /// Reciprocal of P_j.
    pub(super) fn per_supply(&self, j: usize) -> f64 {
        (-self.ln_p[j]).exp()
    }

    /// The Jacobian with every term taken absolute, and a bound on the rounding of each F_j.
    pub(super) fn absolute_jacobian(&self, reduced: &Reduced) -> (Vec<f64>, Vec<f64>) {
        let n = reduced.n();
        let (mut absolute, mut rounding) = (vec![0.0; n * n], vec![4.0 * f64::EPSILON; n]);
        for i in 0..reduced.species.len() {
            let ln_c_rounding = reduced.rounding(i, &self.y);
            for &(j, nu) in reduced.row(i) {
                let j = j as usize;
                let weight = self.weight(i, j, reduced.sign(i) * nu).abs();
                rounding[j] += weight * ln_c_rounding;
                for &(k, other) in reduced.row(i) {
                    absolute[j * n + k as usize] += weight * other.abs();
                }
            }
        }
        (absolute, rounding)
    }

    /// Scale that keeps Φ finite.
    fn phi_shift(&self) -> f64 {
        let largest = self.ln_c.iter().copied().fold(0.0, f64::max);
        if largest > LARGE { largest - LARGE } else { 0.0 }
    }

    /// Φ here minus Φ at `from`, over exp(shift), term by term so that small terms count.
    fn phi_above(&self, from: &Self, reduced: &Reduced, shift: f64) -> f64 {
        let species: f64 = if shift == 0.0 {
            self.c.iter().zip(&from.c).map(|(new, old)| new - old).sum()
        } else {
            self.ln_c.iter().zip(&from.ln_c).map(|(new, old)| (new - shift).exp() - (old - shift).exp()).sum()
        };
        let totals: f64 =
            self.y.iter().zip(&from.y).zip(&reduced.b).map(|((new, old), b)| b * (new - old)).sum();
        species - totals * (-shift).exp()
    }

    /// Slope of Φ along a step, over exp(shift).
    fn slope(&self, step: &[f64], shift: f64) -> f64 {
        let gradient = |k: usize| (self.ln_p[k] - shift).exp() - (self.ln_n[k] - shift).exp();
        step.iter().enumerate().map(|(k, d)| gradient(k) * d).sum()
    }

    /// The logarithmic change of level that closes balance k if all its terms scale with the level (by ± one power).
    fn balancing_change(&self, reduced: &Reduced, k: usize) -> f64 {
        let (up, down) = self.shift[k];
        let (ln_supply, ln_demand) = (up + self.supply[k].ln(), down + self.demand[k].ln());
        let b = reduced.b[k];
        if b == 0.0 {
            return (ln_demand - ln_supply) / 2.0;
        }
        let ln_b = b.abs().ln();
        let mean = (ln_supply + ln_demand) / 2.0;
        let scale = ln_b.max(mean);
        let (b_part, product) = ((ln_b - scale).exp(), (2.0 * (mean - scale)).exp());
        let ln_root = scale + ((b_part + (b_part * b_part + 4.0 * product).sqrt()) / 2.0).ln();
        if b > 0.0 { ln_root - ln_supply } else { ln_demand - ln_root }
    }
}

/// Solves the inner problem from the system's levels, changing the basis as concentrations do.
///
/// On return the levels of the free columns are the solution.
pub(super) fn converge(system: &mut System, settings: &Settings) -> Result<(Reduced, Point), SolveError> {
    let mut newton = Newton::new(system)?;
    newton.relax();
    for _ in 0..settings.max_iterations {
        settings.check_stop()?;
        newton.rebase()?;
        if newton.here.worst <= settings.residual {
            return Ok(newton.finish());
        }
        newton.system.effort.iterations += 1;
        let before = newton.here.worst;
        if newton.step() {
            continue;
        }
        if before <= settings.stalled_residual || newton.is_rounding(settings) {
            return Ok(newton.finish());
        }
        let swept = newton.sweep();
        if !swept && newton.here.worst < 4.0 {
            newton.convex_step();
        }
    }
    let (iterations, residual) = (newton.system.effort.iterations, newton.here.worst);
    Err(SolveError::NotConverged { iterations, residual })
}

/// Solves the same with unknown amounts of mixtures, from a start near enough. `None` if Newton's method does not get
/// there.
pub(super) fn converge_saddle(
    system: &mut System,
    settings: &Settings,
) -> Result<Option<(Reduced, Point)>, SolveError> {
    const MOST_STEPS: usize = 40;

    let mut newton = Newton::new(system)?;
    for _ in 0..MOST_STEPS {
        settings.check_stop()?;
        newton.rebase()?;
        if newton.here.worst <= settings.residual {
            return Ok(Some(newton.finish()));
        }
        newton.system.effort.iterations += 1;
        if !newton.saddle_step() {
            let is_settled = newton.here.worst <= settings.stalled_residual || newton.is_rounding(settings);
            return Ok(is_settled.then(|| newton.finish()));
        }
    }
    Ok(None)
}

/// The (species, column) where a species exceeds the basis row that it could replace by the largest factor.
///
/// A unit row is no species and gives way to any, the most concentrated first.
fn best_exchange(system: &System, ln_c: &[f64], refused: &[(usize, usize)]) -> Option<(usize, usize)> {
    const UNIT_ROW: f64 = -1e9;

    let basis = &system.basis;
    let floor = |column: usize| match basis.is_unit(basis.row_of(column)) {
        true => UNIT_ROW,
        false => system.level[column],
    };
    let floors: Vec<f64> = (0..basis.n)
        .map(|column| if system.column[column] == Column::Free { floor(column) } else { f64::INFINITY })
        .collect();
    let mut best: Option<(f64, (usize, usize))> = None;
    for (row, &level) in ln_c.iter().enumerate() {
        if level == f64::NEG_INFINITY || basis.column_of(row).is_some() {
            continue;
        }
        for (column, (entry, floor)) in basis.scaled_row(row).iter().zip(&floors).enumerate() {
            let gain = level - floor;
            if *entry != 0.0 && gain > best.map_or(REBASE, |best| best.0) && !refused.contains(&(row, column))
            {
                best = Some((gain, (row, column)));
            }
        }
    }
    best.map(|(_, exchange)| exchange)
}

/// State and storage of the iteration.
struct Newton<'s, 'p> {
    system: &'s mut System<'p>,
    reduced: Reduced,
    here: Point,
    trial: Point,
    jacobian: Vec<f64>,
    direction: Vec<f64>,
    lu: Lu,
}

impl<'s, 'p> Newton<'s, 'p> {
    fn new(system: &'s mut System<'p>) -> Result<Self, SolveError> {
        let mut newton = Self {
            reduced: Reduced::default(),
            here: Point::default(),
            trial: Point::default(),
            jacobian: Vec::new(),
            direction: Vec::new(),
            lu: Lu::default(),
            system,
        };
        loop {
            feasibility::reduce(newton.system)?;
            if !newton.choose_basis(&newton.levels_from_system()) {
                break;
            }
        }
        newton.reload();
        Ok(newton)
    }

    fn finish(self) -> (Reduced, Point) {
        for (k, &column) in self.reduced.columns.iter().enumerate() {
            self.system.level[column] = self.here.y[k];
        }
        self.system.ln_c.fill(f64::NEG_INFINITY);
        for (&row, &ln_c) in self.reduced.species.iter().zip(&self.here.ln_c) {
            self.system.ln_c[row] = ln_c;
        }
        (self.reduced, self.here)
    }

    /// ln c of every species (not only those that are left) at the system's levels.
    fn levels_from_system(&self) -> Vec<f64> {
        let level = |i| if self.system.takes_part(i) { self.system.level_of(i) } else { f64::NEG_INFINITY };
        (0..self.system.problem.n_amounts()).map(level).collect()
    }

    /// Reads the tableau and evaluates at the system's levels.
    fn reload(&mut self) {
        self.reduced.build(self.system);
        self.here.y.clear();
        self.here.y.extend(self.reduced.columns.iter().map(|&column| self.system.level[column]));
        self.evaluate_here();
    }

    fn evaluate_here(&mut self) {
        self.here.evaluate(&self.reduced);
        self.system.effort.evaluations += 1;
    }

    /// Pivots until no species exceeds by far a basis row that it could replace. Returns whether it did.
    fn choose_basis(&mut self, ln_c: &[f64]) -> bool {
        let mut changed = false;
        let mut refused: Vec<(usize, usize)> = Vec::new();
        while let Some((row, column)) = best_exchange(self.system, ln_c, &refused) {
            if self.system.basis.pivot(row, column) {
                self.system.level[column] = ln_c[row];
                changed = true;
            } else {
                refused.push((row, column));
            }
        }
        changed
    }

    /// Changes the basis if the concentrations ask for it.
    fn rebase(&mut self) -> Result<(), SolveError> {
        let outgrown = |i: usize| {
            let ln_c = self.here.ln_c[i];
            self.reduced.row(i).iter().any(|&(k, _)| ln_c - self.here.y[k as usize] > REBASE)
        };
        if !(0..self.reduced.species.len()).any(outgrown) {
            return Ok(());
        }
        for (k, &column) in self.reduced.columns.iter().enumerate() {
            self.system.level[column] = self.here.y[k];
        }
        let mut ln_c = vec![f64::NEG_INFINITY; self.system.problem.n_amounts()];
        for (k, &row) in self.reduced.species.iter().enumerate() {
            ln_c[row] = self.here.ln_c[k];
        }
        if !self.choose_basis(&ln_c) {
            return Ok(());
        }
        while feasibility::reduce(self.system)? {
            self.choose_basis(&self.levels_from_system());
        }
        self.reload();
        Ok(())
    }

    /// Sweeps over all balances at once, kept while they help: cheap progress from a far start.
    fn relax(&mut self) {
        const MOST_SWEEPS: usize = 30;

        for _ in 0..MOST_SWEEPS {
            if self.here.worst <= 4.0 {
                return;
            }
            let change = |k: usize| self.here.residual[k] / self.reduced.column_max[k];
            self.trial.y.clear();
            self.trial.y.extend((0..self.reduced.n()).map(|k| self.here.y[k] - change(k)));
            self.evaluate_trial();
            if self.trial.worst >= self.here.worst {
                return;
            }
            std::mem::swap(&mut self.here, &mut self.trial);
        }
    }

    fn evaluate_trial(&mut self) {
        self.trial.evaluate(&self.reduced);
        self.system.effort.evaluations += 1;
    }

    /// Evaluates at `here + t · direction`.
    fn try_step(&mut self, t: f64) {
        self.trial.y.clear();
        self.trial.y.extend(self.here.y.iter().zip(&self.direction).map(|(y, d)| y + t * d));
        self.evaluate_trial();
    }

    /// Finds the direction of Newton's method on F, and the largest change of any ln c along it; `None` where it is not to
    /// be believed.
    fn newton_direction(&mut self) -> Option<f64> {
        /// Longest believable change of any ln c.
        const GARBAGE: f64 = 400.0;

        if !self.here.worst.is_finite() {
            return None;
        }
        let n = self.reduced.n();
        self.here.jacobian(&self.reduced, &mut self.jacobian);
        if !self.lu.factor(&self.jacobian, n) {
            return None;
        }
        self.direction.resize(n, 0.0);
        self.lu.solve(&self.here.residual, &mut self.direction);
        self.direction.iter_mut().for_each(|d| *d = -*d);
        let longest = self.reduced.largest_change(&self.direction);
        (longest <= GARBAGE && self.direction.iter().all(|d| d.is_finite())).then_some(longest)
    }

    /// One Newton step on F, shortened until |F| falls: for unknown amounts of mixtures, where Φ has no minimum but a
    /// saddle. Returns whether it was accepted.
    fn saddle_step(&mut self) -> bool {
        /// Longest change of any ln c.
        const CAP: f64 = 20.0;

        let Some(longest) = self.newton_direction() else { return false };
        for fraction in [1.0, 0.5, 0.25, 0.0625] {
            let t = fraction * (CAP / longest).min(1.0);
            self.try_step(t);
            if self.trial.worst < (1.0 - 1e-4 * t) * self.here.worst {
                std::mem::swap(&mut self.here, &mut self.trial);
                return true;
            }
        }
        false
    }

    /// One Newton step on F. Returns whether it was accepted.
    fn step(&mut self) -> bool {
        /// Longest accepted change of any ln c.
        const CAP: f64 = 60.0;

        let Some(longest) = self.newton_direction() else { return false };
        if self.here.worst <= NEAR {
            self.try_step(1.0);
            if self.trial.worst < self.here.worst {
                std::mem::swap(&mut self.here, &mut self.trial);
                return true;
            }
            if self.here.worst < 1e-8 {
                return false;
            }
        }
        self.descend((CAP / longest).min(1.0))
    }

    /// Accepts the direction on a sufficient decrease of Φ; very short steps are left to the sweeps.
    fn descend(&mut self, longest: f64) -> bool {
        const SUFFICIENT: f64 = 1e-4;
        const SHORTEST: f64 = 0.03;

        let shift = self.here.phi_shift();
        let slope = self.here.slope(&self.direction, shift);
        if slope.is_nan() || slope >= 0.0 {
            return false;
        }
        for fraction in [1.0, 0.5, 0.125] {
            let t = fraction * longest;
            if t < SHORTEST {
                return false;
            }
            self.try_step(t);
            if self.trial.worst.is_finite()
                && self.trial.phi_above(&self.here, &self.reduced, shift) <= SUFFICIENT * t * slope
            {
                std::mem::swap(&mut self.here, &mut self.trial);
                return true;
            }
        }
        false
    }

    /// Majorise-minimise sweeps: Φ cannot increase. Returns whether the residual fell by the wanted share.
    fn sweep(&mut self) -> bool {
        let wanted = 0.6 * self.here.worst;
        for _ in 0..20 {
            for k in 0..self.reduced.n() {
                let change = self.here.balancing_change(&self.reduced, k) / self.reduced.row_max;
                if change.is_finite() {
                    self.here.y[k] += change;
                }
            }
            self.evaluate_here();
            if self.here.worst <= wanted {
                return true;
            }
        }
        false
    }

    /// Whether the residual is no larger than its own rounding, as it may be far from the final ionic strength, where
    /// logarithms of concentrations run into the thousands. The certificate is not so lenient.
    fn is_rounding(&self, settings: &Settings) -> bool {
        self.here.worst < 1e-8 && {
            let (_, rounding) = self.here.absolute_jacobian(&self.reduced);
            self.here.residual.iter().zip(&rounding).all(|(f, bound)| f.abs() <= bound.max(settings.residual))
        }
    }

    /// A Newton step on Φ itself, short enough that its Hessian changes by a known factor.
    fn convex_step(&mut self) {
        const BOX: f64 = 2.0;

        let n = self.reduced.n();
        let mut hessian = vec![0.0; n * n];
        for (i, c) in self.here.c.iter().enumerate() {
            let row = self.reduced.row(i);
            for &(j, nu) in row {
                for &(k, other) in row {
                    hessian[j as usize * n + k as usize] += c * nu * other;
                }
            }
        }
        let scale: Vec<f64> = (0..n).map(|k| hessian[k * n + k].sqrt()).collect();
        if scale.iter().any(|s| !(s.is_finite() && *s > 0.0)) {
            return;
        }
        for j in 0..n {
            for k in 0..n {
                hessian[j * n + k] /= scale[j] * scale[k];
            }
        }
        if !self.lu.factor(&hessian, n) {
            return;
        }
        let gradient: Vec<f64> =
            (0..n).map(|k| (self.here.ln_p[k].exp() - self.here.ln_n[k].exp()) / scale[k]).collect();
        self.direction.resize(n, 0.0);
        self.lu.solve(&gradient, &mut self.direction);
        self.direction.iter_mut().zip(&scale).for_each(|(d, s)| *d = -*d / s);
        if self.direction.iter().all(|d| d.is_finite()) {
            let longest = self.reduced.largest_change(&self.direction);
            self.descend((BOX / longest).min(1.0));
        }
    }
}
