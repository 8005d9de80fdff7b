//! The stoichiometric matrix expressed in any basis of its rows, exactly.
//!
//! Conditioning depends on the basis, not on the chemistry: expressed through its most concentrated species a system is
//! well conditioned whatever its constants. A change of basis is a pivot, as in the simplex method. The tableau holds
//! `det(B) ν B⁻¹` as integers in `f64` and is pivoted without division remainders (Edmonds 1967, Bareiss 1968;
//! recalled), so any number of pivots leaves it exact.

use super::exact::{ExactSum, Total, two_product};
use super::problem::{Coefficient, Row};
use num_traits::ToPrimitive;

/// Integers up to here are exact in `f64`.
const EXACT: f64 = 9_007_199_254_740_992.0;

/// Rows in terms of the basis: `row_i = Σ_j coefficient(i, j) · row(basis column j)`.
///
/// The rows are those of the problem followed by one unit row a component; the unit rows are the first basis and carry
/// the inverse of every later one.
#[derive(Debug, Clone)]
pub(super) struct Basis {
    /// Columns: components, then mixtures.
    pub(super) n: usize,
    n_rows: usize,
    /// Least common denominator of each component's column; component j is counted in units of 1/scale[j].
    scale: Vec<f64>,
    /// Integer rows in the components themselves, n_rows x n.
    input: Vec<f64>,
    /// The tableau: determinant times coefficients, n_rows x n.
    tableau: Vec<f64>,
    determinant: f64,
    row_of_column: Vec<usize>,
    column_of_row: Vec<Option<usize>>,
    pub(super) pivots: usize,
}

impl Basis {
    /// The tableau of `rows` in the basis of the unit rows. A row of a mixture contains that mixture's column once.
    ///
    /// `None` when the coefficients have no small common denominator.
    pub(super) fn new<'r>(
        rows: impl Iterator<Item = (&'r Row, Option<usize>)>,
        n_components: usize,
        n_mixtures: usize,
    ) -> Option<Self> {
        let rows: Vec<(&Row, Option<usize>)> = rows.collect();
        let n = n_components + n_mixtures;
        let scale = common_denominators(&rows, n)?;
        let n_rows = rows.len() + n;
        let mut input = vec![0.0; n_rows * n];
        for (entries, (row, mixture)) in input.chunks_exact_mut(n.max(1)).zip(&rows) {
            if let Some(p) = mixture {
                entries[n_components + p] = 1.0;
            }
            for &(j, nu) in &row.stoichiometry {
                entries[j] = scaled(nu, scale[j])?;
            }
        }
        let mut column_of_row = vec![None; n_rows];
        for j in 0..n {
            input[(rows.len() + j) * n + j] = 1.0;
            column_of_row[rows.len() + j] = Some(j);
        }
        let scale = scale.into_iter().map(|s| s as f64).collect();
        let row_of_column = (rows.len()..n_rows).collect();
        Some(Self {
            n,
            n_rows,
            scale,
            tableau: input.clone(),
            input,
            determinant: 1.0,
            row_of_column,
            column_of_row,
            pivots: 0,
        })
    }

    /// Whether the tableau is that of the same rows, so that its basis can be taken over.
    pub(super) fn same_rows(&self, other: &Self) -> bool {
        self.n == other.n && self.scale == other.scale && self.input == other.input
    }

    /// The row that is the basis row of a column.
    pub(super) fn row_of(&self, column: usize) -> usize {
        self.row_of_column[column]
    }

    /// The column of a basis row.
    pub(super) fn column_of(&self, row: usize) -> Option<usize> {
        self.column_of_row[row]
    }

    /// Coefficient of the basis row of `column` in `row`.
    pub(super) fn coefficient(&self, row: usize, column: usize) -> f64 {
        self.tableau[row * self.n + column] / self.determinant
    }

    /// The integers `determinant · coefficient` of one row.
    pub(super) fn scaled_row(&self, row: usize) -> &[f64] {
        &self.tableau[row * self.n..(row + 1) * self.n]
    }

    pub(super) fn determinant(&self) -> f64 {
        self.determinant
    }

    /// Row of component `k`'s unit vector.
    pub(super) fn unit_row(&self, component: usize) -> usize {
        self.n_rows - self.n + component
    }

    pub(super) fn is_unit(&self, row: usize) -> bool {
        row >= self.n_rows - self.n
    }

    /// λ of a component per level of its unit row (the common denominator of its column).
    pub(super) fn scale(&self, component: usize) -> f64 {
        self.scale[component]
    }

    /// Coefficient of a component in a row, times its scale: an integer.
    pub(super) fn input_row(&self, row: usize) -> &[f64] {
        &self.input[row * self.n..(row + 1) * self.n]
    }

    /// Factor of total `component` in the transformed total of `column`.
    pub(super) fn total_factor(&self, component: usize, column: usize) -> f64 {
        self.coefficient(self.unit_row(component), column) * self.scale[component]
    }

    /// Total of the basis row of `column`: `(B⁻ᵀ T)_column`, summed without rounding, so that its sign is exact.
    pub(super) fn total(&self, column: usize, totals: &[Total], sum: &mut ExactSum) -> f64 {
        for (k, total) in totals.iter().enumerate() {
            let integer = self.tableau[self.unit_row(k) * self.n + column];
            if integer == 0.0 {
                continue;
            }
            let (factor, rest) = two_product(integer, self.scale[k]);
            for part in total.parts().into_iter().filter(|part| *part != 0.0) {
                sum.add_product(factor, part);
                if rest != 0.0 {
                    sum.add_product(rest, part);
                }
            }
        }
        sum.take() / self.determinant
    }

    /// Puts `row` into the basis in place of the basis row of `column`.
    ///
    /// Returns false, with nothing changed, when the pivot is zero or the integers would outgrow `f64`.
    pub(super) fn pivot(&mut self, row: usize, column: usize) -> bool {
        let n = self.n;
        let pivot_row: Vec<f64> = self.scaled_row(row).to_vec();
        let (pivot, old) = (pivot_row[column], self.determinant);
        if pivot == 0.0 || !self.fits(row, column) {
            return false;
        }
        for entries in self.tableau.chunks_exact_mut(n) {
            let in_column = entries[column];
            if in_column == 0.0 {
                if pivot != old {
                    entries.iter_mut().for_each(|entry| *entry = *entry * pivot / old);
                }
                continue;
            }
            for (entry, above) in entries.iter_mut().zip(&pivot_row) {
                *entry = (*entry * pivot - in_column * above) / old;
            }
            entries[column] = in_column;
        }
        self.determinant = pivot;
        let leaving = std::mem::replace(&mut self.row_of_column[column], row);
        self.column_of_row[leaving] = None;
        self.column_of_row[row] = Some(column);
        self.pivots += 1;
        true
    }

    /// Whether all products of the pivot stay exact.
    fn fits(&self, row: usize, column: usize) -> bool {
        let pivot = self.tableau[row * self.n + column].abs();
        let row_max = self.scaled_row(row).iter().fold(0.0_f64, |max, entry| max.max(entry.abs()));
        let (mut all_max, mut column_max) = (0.0_f64, 0.0_f64);
        for entries in self.tableau.chunks_exact(self.n) {
            column_max = column_max.max(entries[column].abs());
            all_max = entries.iter().fold(all_max, |max, entry| max.max(entry.abs()));
        }
        all_max * pivot + column_max * row_max < EXACT
    }
}

/// Least common denominator of each component's coefficients.
fn common_denominators(rows: &[(&Row, Option<usize>)], n: usize) -> Option<Vec<i64>> {
    const LIMIT: i64 = 1 << 20;
    let mut scale = vec![1_i64; n];
    let fractions = rows.iter().flat_map(|(row, _)| &row.stoichiometry).filter(|(_, nu)| *nu.denom() != 1);
    for (j, nu) in fractions {
        let denominator = *nu.denom();
        let missing = *Coefficient::new(denominator, scale[*j]).reduced().numer();
        scale[*j] = scale[*j].checked_mul(missing).filter(|s| (1..=LIMIT).contains(s))?;
    }
    Some(scale)
}

fn scaled(nu: Coefficient, scale: i64) -> Option<f64> {
    let numerator = if scale == 1 { *nu.numer() } else { nu.numer().checked_mul(scale / nu.denom())? };
    numerator.to_f64().filter(|value| value.abs() < f64::from(1 << 30))
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Four rows in three components, one with fractions.
    fn rows() -> Vec<Row> {
        let half = Row {
            stoichiometry: vec![(0, Coefficient::new(1, 2)), (2, Coefficient::new(-2, 3))],
            ..Row::new(&[], 0.0)
        };
        vec![
            Row::new(&[(0, 2), (1, 1)], 0.0),
            half,
            Row::new(&[(0, -3), (1, 4), (2, 5)], 0.0),
            Row::new(&[(1, 7)], 0.0),
        ]
    }

    /// Every row, put together from the basis rows with its coefficients, is the row that was given.
    #[test]
    fn rows_are_recovered_from_any_basis() {
        let rows = rows();
        let mut basis = Basis::new(rows.iter().map(|row| (row, None)), 3, 0).unwrap();
        for (row, column) in [(0, 0), (1, 2), (2, 1), (3, 0), (0, 2)] {
            assert!(basis.pivot(row, column), "pivot on row {row}");
            for row in 0..rows.len() + 3 {
                for component in 0..3 {
                    let from_basis: f64 = (0..3)
                        .map(|j| basis.coefficient(row, j) * basis.input_row(basis.row_of(j))[component])
                        .sum();
                    let given = basis.input_row(row)[component];
                    assert!((from_basis - given).abs() < 1e-13, "row {row}, component {component}");
                }
            }
        }
        assert_eq!(basis.column_of(3), Some(0));
    }

    /// The small difference of two totals keeps what lies below the precision of either.
    #[test]
    fn transformed_totals_are_exact() {
        let rows = [Row::new(&[(0, 1), (1, 1), (2, 1)], 0.0)];
        let mut basis = Basis::new(rows.iter().map(|row| (row, None)), 3, 0).unwrap();
        let mut sum = ExactSum::default();
        assert!(basis.pivot(0, 2));
        let equal = [Total::from(0.5), Total::from(0.5), Total::from(0.5)];
        assert_eq!(basis.total(0, &equal, &mut sum), 0.0);
        let close = [Total::from(0.5) + Total::from(1e-25), Total::from(0.5), Total::from(0.5)];
        assert!((basis.total(0, &close, &mut sum) / 1e-25 - 1.0).abs() < 1e-6);
    }

    #[test]
    fn pivots_that_would_round_are_refused() {
        let huge = [Row::new(&[(0, 1 << 29), (1, 1)], 0.0), Row::new(&[(0, 1), (1, 1 << 29)], 0.0)];
        let mut basis = Basis::new(huge.iter().map(|row| (row, None)), 2, 0).unwrap();
        assert!(!basis.pivot(0, 0));
        assert_eq!(basis.determinant(), 1.0);
    }
}
