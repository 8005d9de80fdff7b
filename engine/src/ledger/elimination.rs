//! Exact rational elimination of a set of reactions.
//!
//! Each reaction is a row of stoichiometric coefficients over species; the rows are brought to reduced echelon form
//! with columns taken in a given order, so that the species that come first are expressed by those that come last. The
//! multiples of the original reactions that make up each reduced row are kept: log K of a reduced row is the same sum
//! of the original log K. Coefficients are rationals, so nothing is lost however many rows are combined; those of chemistry
//! stay small, and where absurd ones outgrow 64 bits that is an error.

use std::collections::BTreeMap;

use num_traits::{CheckedMul, CheckedSub};

use crate::chem::Rational;

/// A sparse row: column, or reaction, to coefficient; no zeros.
pub type Sparse = BTreeMap<usize, Rational>;

/// A coefficient that outgrew 64 bits.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct TooLarge;

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
    ///
    /// # Errors
    ///
    /// [`TooLarge`]; nothing is added then.
    pub fn add(&mut self, index: usize, row: Sparse) -> Result<Option<Combination>, TooLarge> {
        self.add_combination(Combination { row, multiples: Sparse::from([(index, 1.into())]) })
    }

    /// The same for a combination of reactions.
    ///
    /// # Errors
    ///
    /// As [`Echelon::add`].
    pub fn add_combination(&mut self, mut added: Combination) -> Result<Option<Combination>, TooLarge> {
        self.reduce(&mut added)?;
        let Some((&pivot, &coefficient)) = added.row.first_key_value() else { return Ok(Some(added)) };
        added.scale(coefficient.recip())?;
        let concerned = self.rows.iter().filter(|(_, row)| row.row.contains_key(&pivot));
        let without_pivot = concerned.map(|(column, row)| {
            let mut row = row.clone();
            row.eliminate(pivot, &added)?;
            Ok((*column, row))
        });
        let changed: Vec<(usize, Combination)> = without_pivot.collect::<Result<_, TooLarge>>()?;
        self.rows.extend(changed);
        self.rows.insert(pivot, added);
        Ok(None)
    }

    /// Takes every pivot column out of a row.
    ///
    /// # Errors
    ///
    /// [`TooLarge`].
    pub fn reduce(&self, combination: &mut Combination) -> Result<(), TooLarge> {
        let pivots: Vec<usize> =
            combination.row.keys().copied().filter(|c| self.rows.contains_key(c)).collect();
        pivots.into_iter().try_for_each(|pivot| combination.eliminate(pivot, &self.rows[&pivot]))
    }

    /// The row whose pivot is `column`.
    #[must_use]
    pub fn row_of(&self, column: usize) -> Option<&Combination> {
        self.rows.get(&column)
    }
}

impl Combination {
    fn scale(&mut self, factor: Rational) -> Result<(), TooLarge> {
        for value in self.row.values_mut().chain(self.multiples.values_mut()) {
            *value = value.checked_mul(&factor).ok_or(TooLarge)?;
        }
        Ok(())
    }

    /// Subtracts the multiple of `other`, whose pivot is `column`, that takes it out of the row.
    fn eliminate(&mut self, column: usize, other: &Self) -> Result<(), TooLarge> {
        let Some(factor) = self.row.get(&column).copied() else { return Ok(()) };
        subtract(&mut self.row, &other.row, factor)?;
        subtract(&mut self.multiples, &other.multiples, factor)
    }
}

/// Subtracts a multiple of a row.
pub(super) fn subtract(from: &mut Sparse, row: &Sparse, factor: Rational) -> Result<(), TooLarge> {
    for (column, coefficient) in row {
        let entry = from.entry(*column).or_insert_with(|| 0.into());
        let product = coefficient.checked_mul(&factor).ok_or(TooLarge)?;
        *entry = entry.checked_sub(&product).ok_or(TooLarge)?;
        if *entry == 0.into() {
            from.remove(column);
        }
    }
    Ok(())
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
        assert_eq!(echelon.add(0, row(&[(0, -1), (1, 1), (2, 1)])), Ok(None));
        assert_eq!(echelon.add(1, row(&[(1, -1), (2, 1), (3, 1)])), Ok(None));
        assert_eq!(echelon.row_of(0).unwrap().row, row(&[(0, 1), (2, -2), (3, -1)]));
        assert_eq!(echelon.row_of(0).unwrap().multiples, row(&[(0, -1), (1, -1)]));
        assert!(echelon.row_of(2).is_none());
    }

    #[test]
    fn a_cycle_returns_the_multiples_that_close_it() {
        let mut echelon = Echelon::default();
        echelon.add(0, row(&[(0, -1), (1, 1)])).unwrap();
        echelon.add(1, row(&[(1, -2), (2, 2)])).unwrap();
        let cycle = echelon.add(2, row(&[(0, -1), (2, 1)])).unwrap().unwrap();
        assert!(cycle.row.is_empty());
        // Reaction 2 less reaction 0 less half of reaction 1 leaves nothing.
        let half = Rational::new(-1, 2);
        assert_eq!(cycle.multiples, Sparse::from([(0, (-1).into()), (1, half), (2, 1.into())]));
    }

    #[test]
    fn coefficients_that_outgrow_64_bits_are_an_error() {
        let mut echelon = Echelon::default();
        let primes = [999_999_937, 999_999_929, 999_999_893, 999_999_883];
        let mut added = primes.iter().enumerate().map(|(k, prime)| {
            echelon.add(k, row(&[(k, *prime), (k + 1, prime - 6)])).and_then(|_| {
                let mut all = Combination { row: row(&[(0, 1)]), ..Combination::default() };
                echelon.reduce(&mut all)
            })
        });
        assert!(added.any(|outcome| outcome == Err(TooLarge)));
    }
}
