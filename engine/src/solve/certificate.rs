//! What is checked about an answer, however it was found.

use super::Phases;
use super::dense::Lu;
use super::exact::DoubleSum;
use super::ionic_strength::Settled;
use super::settings::Settings;
use super::system::{System, ln_sum};
use crate::activity::Model;

/// How well an answer satisfies its equations, and how far it can be trusted.
#[derive(Debug, Clone, PartialEq)]
pub struct Certificate {
    /// Largest error of a balance of the components, summed in twice the precision, relative to the sum of its
    /// absolute terms; an amount delivered counts by the terms it is the difference of.
    pub balance: f64,
    /// Component of that balance.
    pub balance_idx: usize,
    /// Largest `|ln P - ln N|` of a balance in the dominant basis, which also sees traces.
    pub residual: f64,
    /// Bound on the rounding of ln c of any species: the unit roundoff times the terms that it is a sum of.
    pub ln_c_rounding: f64,
    /// Bound on the error of ln c of any species at the given activity coefficients, from a contraction argument; `None`
    /// where it does not apply.
    pub ln_c_error: Option<f64>,
    /// Largest ln saturation of an absent phase: the distance to its formation, as a negative number. Minus infinity
    /// without one.
    pub saturation: f64,
    /// Largest |ln saturation| of a phase that is present.
    pub present_saturation: f64,
    /// Smallest amount of a phase that is present, mol/kg(water): the distance to its disappearance. Infinite without one.
    pub smallest_amount: f64,
    /// Error of the ionic strength, relative.
    pub ionic_strength: f64,
    /// Largest difference of the specific part of an ln γ from that of the composition; 0 where the model has none.
    pub ln_gamma: f64,
    /// Number of ionic strengths seen that agree with their composition; the answer belongs to the lowest.
    pub ionic_strength_roots: usize,
    /// Whether the ionic strength is beyond the range of the activity model.
    pub outside_validity: bool,
    /// Relative change of a basis concentration per relative change of the totals, `max_j Σ_k |∂ln c_j/∂T_k| |T_k|`, at
    /// constant activity coefficients. Totals known to a relative u give concentrations known to `condition · u`.
    pub condition: f64,
}

impl Certificate {
    /// Whether every tolerance is met.
    #[must_use]
    pub fn meets(&self, settings: &Settings) -> bool {
        self.balance <= settings.balance
            && self.residual <= settings.stalled_residual
            && self.saturation <= settings.saturation
            && self.present_saturation <= settings.saturation
            && self.smallest_amount >= 0.0
            && self.ionic_strength <= settings.ionic_strength
            && self.ln_gamma <= settings.ln_gamma
    }
}

/// Checks a settled system together with what was read out of it.
pub(super) fn certify(system: &System, settled: &Settled, phases: &Phases, model: &Model) -> Certificate {
    let (balance, balance_idx) = worst_balance(system, phases);
    let reduced = &settled.reduced;
    let roundings = (0..reduced.species.len()).map(|i| reduced.rounding(i, &settled.point.y));
    let ln_c_rounding = roundings.fold(0.0, f64::max);
    let (ln_c_error, condition) = error_and_condition(system, settled, ln_c_rounding);
    let minerals = || phases.mineral_ln_saturation.iter().zip(&phases.mineral_present);
    let absent = minerals().filter(|(_, present)| !**present).map(|(saturation, _)| *saturation);
    let present = (0..).zip(&phases.mineral_present).filter(|(_, present)| **present);
    let present = present.map(|(p, _)| saturation_from_components(system, system.mineral_row(p)));
    let amounts = phases.mineral_amount.iter().zip(&phases.mineral_present);
    let amounts = amounts.filter(|(_, present)| **present).map(|(n, _)| *n);
    let mixtures = |wanted: bool| {
        let mixtures = phases.mixtures.iter().enumerate().zip(&system.mixture_present);
        mixtures.filter(move |(_, present)| **present == wanted).map(|(mixture, _)| mixture)
    };
    let absent = absent.chain(mixtures(false).map(|(_, mixture)| mixture.ln_saturation));
    let present = present.chain(mixtures(true).map(|(p, _)| mixture_saturation(system, p)));
    let amounts = amounts.chain(mixtures(true).map(|(_, mixture)| mixture.amount));
    Certificate {
        balance,
        balance_idx,
        residual: settled.point.worst,
        ln_c_rounding,
        ln_c_error,
        saturation: absent.fold(f64::NEG_INFINITY, f64::max),
        present_saturation: present.map(f64::abs).fold(0.0, f64::max),
        smallest_amount: amounts.fold(f64::INFINITY, f64::min),
        ionic_strength: relative(settled.ionic_strength_residual, settled.ionic_strength),
        ln_gamma: settled.ln_gamma_residual,
        ionic_strength_roots: settled.roots,
        outside_validity: model.valid_to().is_some_and(|limit| settled.ionic_strength > limit),
        condition,
    }
}

/// ln of the sum of the saturations of the members of a mixture.
fn mixture_saturation(system: &System, mixture_idx: usize) -> f64 {
    let members = system.problem.member_rows(mixture_idx).filter(|row| !system.absent[*row]);
    ln_sum(&members.map(|row| saturation_from_components(system, row)).collect::<Vec<_>>())
}

/// ln saturation of a pure phase or member from the activities of the components, independent of the basis it is part of.
fn saturation_from_components(system: &System, row: usize) -> f64 {
    let components = &system.basis.input_row(row)[..system.problem.n_components];
    let made_of = components.iter().enumerate().filter(|(_, nu)| **nu != 0.0);
    system.g[row] + made_of.map(|(k, nu)| nu * system.level_of(system.basis.unit_row(k))).sum::<f64>()
}

fn relative(error: f64, size: f64) -> f64 {
    if error == 0.0 { 0.0 } else { error.abs() / size }
}

/// Largest relative error of a balance in the components as given, with its index.
fn worst_balance(system: &System, phases: &Phases) -> (f64, usize) {
    let basis = &system.basis;
    let first_reservoir = system.problem.reservoir_row(0);
    let first_mineral = system.mineral_row(0);
    let amounts = (0..).zip(&system.ln_c).map(|(row, ln_c): (usize, &f64)| (row, ln_c.exp(), 0.0));
    let delivered = phases.reservoir_amount.iter().zip(&phases.reservoir_terms);
    let delivered = (first_reservoir..).zip(delivered).map(|(row, (amount, terms))| (row, -amount, *terms));
    let minerals = (first_mineral..).zip(&phases.mineral_amount).map(|(row, amount)| (row, *amount, 0.0));
    let terms: Vec<(usize, f64, f64)> =
        amounts.chain(delivered).chain(minerals).filter(|(_, x, _)| *x != 0.0).collect();
    let n = system.problem.n_components;
    let (mut sums, mut magnitudes) = (vec![DoubleSum::default(); n], vec![0.0; n]);
    for &(row, amount, difference_of) in &terms {
        for (k, coefficient) in basis.input_row(row)[..n].iter().enumerate() {
            if *coefficient != 0.0 {
                sums[k].add_product(*coefficient, amount);
                magnitudes[k] += coefficient.abs() * amount.abs().max(difference_of);
            }
        }
    }
    let mut worst = (0.0, 0);
    for (k, (mut sum, mut magnitude)) in sums.into_iter().zip(magnitudes).enumerate() {
        for part in system.problem.totals[k].parts() {
            sum.add_product(-basis.scale(k), part);
            magnitude += (basis.scale(k) * part).abs();
        }
        let error = relative(sum.take(), magnitude);
        if error > worst.0 || error.is_nan() {
            worst = (error, k);
        }
    }
    worst
}

/// Bound on the error of ln c, and condition with respect to the totals.
///
/// With `δ = max |J⁻¹F| + max |J⁻¹| dF`, C the largest Σ|ν'| of a species and κ the largest row sum of |J⁻¹| |J|: if
/// `(exp(4 C δ) - 1) κ <= 1/2`, then `y - J⁻¹F(y)` contracts the box of radius 2δ into itself, so the solution is in it.
/// The rounding of ln c itself comes on top.
fn error_and_condition(system: &System, settled: &Settled, ln_c_rounding: f64) -> (Option<f64>, f64) {
    let (reduced, point) = (&settled.reduced, &settled.point);
    let n = reduced.n();
    let (mut jacobian, mut lu) = (Vec::new(), Lu::default());
    point.jacobian(reduced, &mut jacobian);
    if !lu.factor(&jacobian, n) {
        return (None, f64::INFINITY);
    }
    let inverse = lu.inverse();
    let (absolute, rounding) = point.absolute_jacobian(reduced);
    let absolute_sums: Vec<f64> = absolute.chunks_exact(n.max(1)).map(|row| row.iter().sum()).collect();
    let totals = relative_totals(system, settled);
    let (mut shift, mut noise, mut kappa, mut condition) = (0.0_f64, 0.0_f64, 0.0_f64, 0.0_f64);
    for row in inverse.chunks_exact(n.max(1)) {
        let weighted = |values: &[f64]| row.iter().zip(values).map(|(a, f)| a.abs() * f).sum::<f64>();
        shift = shift.max(row.iter().zip(&point.residual).map(|(a, f)| a * f).sum::<f64>().abs());
        noise = noise.max(weighted(&rounding));
        kappa = kappa.max(weighted(&absolute_sums));
        let change = |per_total: &[f64]| row.iter().zip(per_total).map(|(a, t)| a * t).sum::<f64>().abs();
        condition = condition.max(totals.chunks_exact(n.max(1)).map(change).sum());
    }
    let delta = shift + noise;
    let applies = (4.0 * reduced.row_max * delta).exp_m1() * kappa <= 0.5;
    (applies.then_some(2.0 * delta * reduced.row_max + ln_c_rounding), condition)
}

/// Change of each F per relative change of each total, `T_k (B⁻¹)_kj / P_j`; by totals.
fn relative_totals(system: &System, settled: &Settled) -> Vec<f64> {
    let columns = &settled.reduced.columns;
    let per_supply: Vec<f64> = (0..columns.len()).map(|j| settled.point.per_supply(j)).collect();
    let mut changes = Vec::with_capacity(system.basis.n * columns.len());
    for (k, total) in system.problem.totals.iter().enumerate() {
        let change = |(&column, per_supply): (&usize, &f64)| {
            total.to_f64() * system.basis.total_factor(k, column) * per_supply
        };
        changes.extend(columns.iter().zip(&per_supply).map(change));
    }
    changes
}
