//! Reactions as rows of coefficients over one list of species, and the cycles among them.

use std::collections::BTreeMap;

use super::elimination::{Combination, Echelon, Sparse, TooLarge};
use super::ledger::LedgerError;
use crate::chem::{Equation, Reaction, Species};
use crate::units::Temperature;

/// Reactions with the species that take part in any of them.
pub(super) struct Network<'a> {
    reactions: Vec<&'a Reaction>,
    columns: BTreeMap<&'a Species, usize>,
}

/// Reactions brought to echelon form: a set in which none implies another, and the cycles all others close.
pub(super) struct Eliminated {
    pub echelon: Echelon,
    /// Multiples of the reactions that add up to nothing, one cycle for each reaction that is not needed; that one
    /// is taken once.
    pub cycles: Vec<(usize, Sparse)>,
}

impl<'a> Network<'a> {
    pub fn new(reactions: Vec<&'a Reaction>) -> Self {
        let mut columns = BTreeMap::new();
        for (species, _) in reactions.iter().flat_map(|reaction| reaction.equation().terms()) {
            let next = columns.len();
            columns.entry(species).or_insert(next);
        }
        Self { reactions, columns }
    }

    /// Adds the reactions one by one: those that come early are needed, those that come late close cycles.
    ///
    /// # Errors
    ///
    /// [`LedgerError::TooLarge`].
    pub fn eliminate(&self, order: impl IntoIterator<Item = usize>) -> Result<Eliminated, LedgerError> {
        let mut echelon = Echelon::default();
        let mut cycles = Vec::new();
        for index in order {
            let equation = self.reactions[index].equation();
            let row = self.row(equation).expect("its own species");
            let added = echelon.add(index, row);
            if let Some(cycle) = added.map_err(|TooLarge| LedgerError::TooLarge(equation.to_string()))? {
                cycles.push((index, cycle.multiples));
            }
        }
        Ok(Eliminated { echelon, cycles })
    }

    /// The multiples of reactions that add up to an equation.
    ///
    /// # Errors
    ///
    /// [`LedgerError::Unreachable`] with the species no combination accounts for, [`LedgerError::TooLarge`].
    pub fn reach(&self, echelon: &Echelon, target: &'a Equation) -> Result<Sparse, LedgerError> {
        let unreachable = |left_over: Vec<&Species>| LedgerError::Unreachable {
            target: target.to_string(),
            left_over: left_over.iter().map(|species| species.key().to_string()).collect(),
        };
        let row = self.row(target).map_err(unreachable)?;
        let mut wanted = Combination { row, ..Combination::default() };
        echelon.reduce(&mut wanted).map_err(|TooLarge| LedgerError::TooLarge(target.to_string()))?;
        if wanted.row.is_empty() {
            return Ok(wanted.multiples.into_iter().map(|(index, multiple)| (index, -multiple)).collect());
        }
        let left_over = |species: &&'a Species| wanted.row.contains_key(&self.columns[*species]);
        Err(unreachable(self.columns.keys().copied().filter(left_over).collect()))
    }

    /// log10 K of a reaction, at the nearest temperature it is known at.
    pub fn log_k(&self, index: usize, temperature: Temperature) -> f64 {
        self.reactions[index].constant().map_or(0.0, |constant| constant.log_k.nearest_to(temperature).0)
    }

    /// The row of an equation, or the species that are in no reaction.
    fn row(&self, equation: &'a Equation) -> Result<Sparse, Vec<&'a Species>> {
        let terms = equation.terms();
        let unknown: Vec<&Species> =
            terms.iter().map(|(species, _)| species).filter(|s| !self.columns.contains_key(s)).collect();
        if unknown.is_empty() {
            Ok(terms.iter().map(|(species, coefficient)| (self.columns[species], *coefficient)).collect())
        } else {
            Err(unknown)
        }
    }
}
