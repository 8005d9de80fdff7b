//! Exact rational elimination of a set of reactions.
//!
//! Each reaction is a row of stoichiometric coefficients over species; the rows are brought to reduced echelon form
//! with columns taken in a given order, so that the species that come first are expressed by those that come last. The
//! multiples of the original reactions that make up each reduced row are kept: log K of a reduced row is the same sum
//! of the original log K. Coefficients are rationals, so nothing is lost however many rows are combined.

use std::collections::BTreeMap;

use crate::chem::Rational;

/// A sparse row: column, or reaction, to coefficient; no zeros.
pub type Sparse = BTreeMap<usize, Rational>;

/// Reactions in reduced echelon form.
#[derive(Debug, Clone, Default)]
pub struct Echelon {
    /// Pivot column to its row, in which the pivot's coefficient is 1.
    rows: BTreeMap<usize, Combination>,
}

/// A row and how it was made.
#[derive(Debug, Clone, Default, PartialEq)]
pub struct Combination {
    /// Coefficient of each species.
    pub row: Sparse,
    /// Multiple of each original reaction.
    pub multiples: Sparse,
}

impl Echelon {
    /// Adds reaction number `index`. A reaction that earlier ones already imply is not added: the combination that
    /// closes the cycle is returned, with an empty row.
    pub fn add(&mut self, index: usize, row: Sparse) -> Option<Combination> {
        self.add_combination(Combination { row, multiples: Sparse::from([(index, 1.into())]) })
    }

    /// The same for a combination of reactions.
    pub fn add_combination(&mut self, mut added: Combination) -> Option<Combination> {
        self.reduce(&mut added);
        let Some((&pivot, &coefficient)) = added.row.first_key_value() else { return Some(added) };
        added.scale(coefficient.recip());
        for row in self.rows.values_mut() {
            row.eliminate(pivot, &added);
        }
        self.rows.insert(pivot, added);
        None
    }

    /// Takes every pivot column out of a row.
    pub fn reduce(&self, combination: &mut Combination) {
        let pivots: Vec<usize> =
            combination.row.keys().copied().filter(|c| self.rows.contains_key(c)).collect();
        for pivot in pivots {
            combination.eliminate(pivot, &self.rows[&pivot]);
        }
    }

    /// The row whose pivot is `column`.
    #[must_use]
    pub fn row_of(&self, column: usize) -> Option<&Combination> {
        self.rows.get(&column)
    }
}

impl Combination {
    fn scale(&mut self, factor: Rational) {
        for value in self.row.values_mut().chain(self.multiples.values_mut()) {
            *value *= factor;
        }
    }

    /// Subtracts the multiple of `other` that takes `column` out of the row.
    fn eliminate(&mut self, column: usize, other: &Self) {
        let Some(factor) = self.row.get(&column).map(|c| c / other.row[&column]) else { return };
        subtract(&mut self.row, &other.row, factor);
        subtract(&mut self.multiples, &other.multiples, factor);
    }
}

fn subtract(from: &mut Sparse, row: &Sparse, factor: Rational) {
    for (column, coefficient) in row {
        let entry = from.entry(*column).or_insert_with(|| 0.into());
        *entry -= coefficient * factor;
        if *entry == 0.into() {
            from.remove(column);
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn row(coefficients: &[(usize, i64)]) -> Sparse {
        coefficients.iter().map(|(column, c)| (*column, Rational::from_integer(*c))).collect()
    }

    #[test]
    fn early_columns_are_expressed_by_late_ones() {
        // 0 = 1 + 2 and 1 = 2 + 3: so 0 = 2 (2) + 3.
        let mut echelon = Echelon::default();
        assert!(echelon.add(0, row(&[(0, -1), (1, 1), (2, 1)])).is_none());
        assert!(echelon.add(1, row(&[(1, -1), (2, 1), (3, 1)])).is_none());
        assert_eq!(echelon.row_of(0).unwrap().row, row(&[(0, 1), (2, -2), (3, -1)]));
        assert_eq!(echelon.row_of(0).unwrap().multiples, row(&[(0, -1), (1, -1)]));
        assert!(echelon.row_of(2).is_none());
    }

    #[test]
    fn a_cycle_returns_the_multiples_that_close_it() {
        let mut echelon = Echelon::default();
        echelon.add(0, row(&[(0, -1), (1, 1)]));
        echelon.add(1, row(&[(1, -2), (2, 2)]));
        let cycle = echelon.add(2, row(&[(0, -1), (2, 1)])).unwrap();
        assert!(cycle.row.is_empty());
        // Reaction 2 less reaction 0 less half of reaction 1 leaves nothing.
        let half = Rational::new(-1, 2);
        assert_eq!(cycle.multiples, Sparse::from([(0, (-1).into()), (1, half), (2, 1.into())]));
    }
}
