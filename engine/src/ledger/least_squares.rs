//! Generalised least squares over cycles of reactions.
//!
//! ```text
//! l   log10 K of the reactions                 A   their sensitivities to independent inputs, times the inputs' sigma
//! C   cycles: C l should be zero               Σ = A Aᵀ, the covariance of l
//! d = -Σ Cᵀ (C Σ Cᵀ)⁻¹ C l                     the change of least dᵀ Σ⁻¹ d that closes every cycle
//! ```
//!
//! Constants that share an input move together, so Σ need not be invertible, and cycles of shared inputs can make
//! C Σ Cᵀ singular; it is inverted over a largest set of cycles that say something new.

use super::elimination::Sparse;
use crate::chem::{Reaction, rational};
use crate::quantity::Input;
use crate::units::Temperature;

/// A pivot that is left with less than this share of its diagonal says nothing new.
const DEPENDENT: f64 = 1e-9;
/// A sum of sensitivities below this share of its largest term is a remainder of rounding.
const CANCELS: f64 = 1e-9;

/// Sensitivities of log10 K to its inputs at one temperature, each times the input's standard uncertainty: one row a reaction.
pub(super) struct Scatter {
    pub inputs: Vec<Input>,
    pub rows: Vec<Vec<f64>>,
}

impl Scatter {
    /// Inputs that state no uncertainty are left out: whether that is allowed is for the caller to ask.
    pub fn of(reactions: &[&Reaction], temperature: Temperature) -> Self {
        let parts: Vec<_> = reactions
            .iter()
            .map(|reaction| reaction.constant().map(|constant| constant.history.parts_at(temperature)))
            .map(Result::unwrap_or_default)
            .collect();
        let mut inputs: Vec<Input> = parts
            .iter()
            .flatten()
            .filter(|part| part.input.sigma().is_some())
            .map(|p| p.input.clone())
            .collect();
        inputs.sort();
        inputs.dedup();
        let mut rows = vec![vec![0.0; inputs.len()]; reactions.len()];
        for (row, parts) in rows.iter_mut().zip(&parts) {
            for part in parts {
                if let (Some(sigma), Ok(column)) = (part.input.sigma(), inputs.binary_search(&part.input)) {
                    row[column] += part.sensitivity * sigma;
                }
            }
        }
        Self { inputs, rows }
    }

    /// The row of a sum of reactions; what cancels but for rounding is zero.
    pub fn combined(&self, multiples: &Sparse) -> Vec<f64> {
        let mut sum = vec![(0.0_f64, 0.0_f64); self.inputs.len()];
        for (index, multiple) in multiples {
            let multiple = rational::to_f64(*multiple);
            for ((total, largest), own) in sum.iter_mut().zip(&self.rows[*index]) {
                *total += multiple * own;
                *largest = largest.max((multiple * own).abs());
            }
        }
        sum.into_iter()
            .map(|(total, largest)| if total.abs() <= CANCELS * largest { 0.0 } else { total })
            .collect()
    }

    /// Standard uncertainty of a sum of reactions.
    pub fn sigma(&self, multiples: &Sparse) -> f64 {
        let row = self.combined(multiples);
        dot(&row, &row).sqrt()
    }
}

/// The covariance C Σ Cᵀ of cycles, inverted over those that are independent.
pub(super) struct Weights {
    /// Sensitivities of each cycle: C A.
    pub cycles: Vec<Vec<f64>>,
    /// Cycles that say something new.
    pub independent: Vec<usize>,
    /// The inverse over the independent cycles, by rows; zero elsewhere.
    inverse: Vec<Vec<f64>>,
}

impl Weights {
    pub fn of(cycles: Vec<Vec<f64>>) -> Self {
        let covariance: Vec<Vec<f64>> =
            cycles.iter().map(|a| cycles.iter().map(|b| dot(a, b)).collect()).collect();
        let (independent, factor) = factor(&covariance);
        let inverse = invert(&independent, &factor, cycles.len());
        Self { cycles, independent, inverse }
    }

    /// (C Σ Cᵀ)⁻¹ times a vector with one entry a cycle.
    pub fn times(&self, vector: &[f64]) -> Vec<f64> {
        self.inverse.iter().map(|row| dot(row, vector)).collect()
    }

    /// The part of a misclosure that no change of the inputs accounts for: zero for independent cycles.
    pub fn remainder(&self, misclosures: &[f64]) -> Vec<f64> {
        let weighted = self.times(misclosures);
        let inputs = self.to_inputs(&weighted);
        self.cycles
            .iter()
            .zip(misclosures)
            .map(|(cycle, misclosure)| misclosure - dot(cycle, &inputs))
            .collect()
    }

    /// (C A)ᵀ times a vector with one entry a cycle.
    pub fn to_inputs(&self, vector: &[f64]) -> Vec<f64> {
        let n_inputs = self.cycles.first().map_or(0, Vec::len);
        let mut sum = vec![0.0; n_inputs];
        for (cycle, weight) in self.cycles.iter().zip(vector) {
            for (total, own) in sum.iter_mut().zip(cycle) {
                *total += weight * own;
            }
        }
        sum
    }
}

pub(super) fn dot(a: &[f64], b: &[f64]) -> f64 {
    a.iter().zip(b).map(|(a, b)| a * b).sum()
}

/// Cholesky factor over the independent rows, largest remaining pivot first: the pivots, and the rows of L in the order
/// of the pivots.
fn factor(matrix: &[Vec<f64>]) -> (Vec<usize>, Vec<Vec<f64>>) {
    let n = matrix.len();
    let mut pivots: Vec<usize> = Vec::new();
    // Column k of L belongs to pivot k; kept for every row, so that pivots can be chosen.
    let mut columns: Vec<Vec<f64>> = Vec::new();
    let mut left: Vec<f64> = (0..n).map(|i| matrix[i][i]).collect();
    loop {
        let free = (0..n).filter(|i| !pivots.contains(i) && left[*i] > DEPENDENT * matrix[*i][*i]);
        let Some(pivot) = free.max_by(|a, b| left[*a].total_cmp(&left[*b]).then(b.cmp(a))) else { break };
        let root = left[pivot].sqrt();
        let column: Vec<f64> = (0..n)
            .map(|i| (matrix[i][pivot] - columns.iter().map(|c| c[i] * c[pivot]).sum::<f64>()) / root)
            .collect();
        for (left, entry) in left.iter_mut().zip(&column) {
            *left -= entry * entry;
        }
        pivots.push(pivot);
        columns.push(column);
    }
    let rows = pivots.iter().map(|pivot| columns.iter().map(|column| column[*pivot]).collect()).collect();
    (pivots, rows)
}

fn invert(pivots: &[usize], factor: &[Vec<f64>], n: usize) -> Vec<Vec<f64>> {
    let mut inverse = vec![vec![0.0; n]; n];
    let rank = pivots.len();
    for (k, column) in pivots.iter().enumerate() {
        let mut x = vec![0.0; rank];
        for i in 0..rank {
            let unit = f64::from(u8::from(i == k));
            x[i] = (unit - dot(&factor[i][..i], &x[..i])) / factor[i][i];
        }
        for i in (0..rank).rev() {
            let above: f64 = (i + 1..rank).map(|j| factor[j][i] * x[j]).sum();
            x[i] = (x[i] - above) / factor[i][i];
        }
        for (row, value) in pivots.iter().zip(&x) {
            inverse[*row][*column] = *value;
        }
    }
    inverse
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_inverse_is_one_where_the_cycles_are_independent() {
        let cycles = vec![vec![1.0, 2.0, 0.0], vec![0.0, 1.0, -1.0], vec![3.0, 0.5, 0.0]];
        let weights = Weights::of(cycles.clone());
        for k in 0..3 {
            let column: Vec<f64> = cycles.iter().map(|cycle| dot(cycle, &cycles[k])).collect();
            for (i, value) in weights.times(&column).into_iter().enumerate() {
                assert!((value - f64::from(u8::from(i == k))).abs() < 1e-12);
            }
        }
    }

    #[test]
    fn a_cycle_that_repeats_another_is_left_out_and_its_contradiction_is_seen() {
        let weights = Weights::of(vec![vec![1.0, 2.0], vec![2.0, 4.0]]);
        assert_eq!(weights.independent.len(), 1);
        let rest = |misclosures: [f64; 2]| {
            weights.remainder(&misclosures).iter().map(|r| r.abs()).fold(0.0, f64::max)
        };
        assert!(rest([0.1, 0.2]) < 1e-12);
        assert!(rest([0.1, 0.3]) > 0.01);
    }
}
