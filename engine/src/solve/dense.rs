//! Small dense linear systems. Below about thirty unknowns plain loops are as fast as any library.

/// LU factors with row pivoting of an n x n matrix stored by rows.
#[derive(Debug, Clone, Default)]
pub(crate) struct Lu {
    n: usize,
    factors: Vec<f64>,
    permutation: Vec<usize>,
}

impl Lu {
    /// Factors `matrix` (n x n, by rows), reusing the storage. Returns false when a pivot is zero or not finite.
    pub(crate) fn factor(&mut self, matrix: &[f64], n: usize) -> bool {
        self.n = n;
        self.factors.clear();
        self.factors.extend_from_slice(matrix);
        self.permutation.clear();
        self.permutation.extend(0..n);
        (0..n).all(|k| self.eliminate(k))
    }

    fn eliminate(&mut self, k: usize) -> bool {
        let (n, a) = (self.n, &mut self.factors);
        let mut pivot_row = k;
        for row in k + 1..n {
            if a[row * n + k].abs() > a[pivot_row * n + k].abs() {
                pivot_row = row;
            }
        }
        let pivot = a[pivot_row * n + k];
        if pivot == 0.0 || !pivot.is_finite() {
            return false;
        }
        if pivot_row != k {
            self.permutation.swap(k, pivot_row);
            let (upper, lower) = a.split_at_mut(pivot_row * n);
            upper[k * n..k * n + n].swap_with_slice(&mut lower[..n]);
        }
        let (upper, lower) = a.split_at_mut((k + 1) * n);
        let pivot_tail = &upper[k * n + k + 1..];
        for row in lower.chunks_exact_mut(n) {
            if row[k] == 0.0 {
                continue;
            }
            let factor = row[k] / pivot;
            row[k] = factor;
            for (entry, above) in row[k + 1..].iter_mut().zip(pivot_tail) {
                *entry -= factor * above;
            }
        }
        true
    }

    /// Writes the solution of `A x = rhs` to `x` (both of length n).
    pub(crate) fn solve(&self, rhs: &[f64], x: &mut [f64]) {
        let n = self.n;
        for row in 0..n {
            let below = &self.factors[row * n..row * n + row];
            let known: f64 = below.iter().zip(&x[..row]).map(|(a, b)| a * b).sum();
            x[row] = rhs[self.permutation[row]] - known;
        }
        for row in (0..n).rev() {
            let above = &self.factors[row * n + row + 1..(row + 1) * n];
            let known: f64 = above.iter().zip(&x[row + 1..n]).map(|(a, b)| a * b).sum();
            x[row] = (x[row] - known) / self.factors[row * n + row];
        }
    }

    /// Writes the solution of `Aᵀ x = rhs` to `x` (both of length n).
    pub(crate) fn solve_transposed(&self, rhs: &[f64], x: &mut [f64]) {
        let n = self.n;
        let mut y = rhs.to_vec();
        for row in 0..n {
            y[row] /= self.factors[row * n + row];
            for later in row + 1..n {
                y[later] -= self.factors[row * n + later] * y[row];
            }
        }
        for row in (0..n).rev() {
            for earlier in 0..row {
                y[earlier] -= self.factors[row * n + earlier] * y[row];
            }
        }
        for (value, row) in y.into_iter().zip(&self.permutation) {
            x[*row] = value;
        }
    }

    /// The inverse, n x n by rows.
    pub(crate) fn inverse(&self) -> Vec<f64> {
        let n = self.n;
        let mut inverse = vec![0.0; n * n];
        let (mut unit, mut column) = (vec![0.0; n], vec![0.0; n]);
        for k in 0..n {
            unit[k] = 1.0;
            self.solve(&unit, &mut column);
            unit[k] = 0.0;
            for (row, value) in column.iter().enumerate() {
                inverse[row * n + k] = *value;
            }
        }
        inverse
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn inverse_times_matrix_is_one() {
        let matrix = [0.0, 2.0, 1.0, 1.0, -1.0, 3.0, 4.0, 0.5, 0.0];
        let mut lu = Lu::default();
        assert!(lu.factor(&matrix, 3));
        let inverse = lu.inverse();
        for i in 0..3 {
            for j in 0..3 {
                let product: f64 = (0..3).map(|k| inverse[i * 3 + k] * matrix[k * 3 + j]).sum();
                assert!((product - f64::from(u8::from(i == j))).abs() < 1e-14);
            }
        }
    }

    #[test]
    fn the_transposed_solution_is_a_row_of_the_inverse() {
        let matrix = [0.0, 2.0, 1.0, 1.0, -1.0, 3.0, 4.0, 0.5, 0.0];
        let (mut lu, mut row) = (Lu::default(), [0.0; 3]);
        assert!(lu.factor(&matrix, 3));
        let inverse = lu.inverse();
        lu.solve_transposed(&[0.0, 1.0, 0.0], &mut row);
        for k in 0..3 {
            assert!((row[k] - inverse[3 + k]).abs() < 1e-15);
        }
    }

    #[test]
    fn singular_matrices_are_refused() {
        assert!(!Lu::default().factor(&[1.0, 2.0, 2.0, 4.0], 2));
    }
}
