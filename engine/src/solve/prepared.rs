//! One stoichiometry solved again and again: the tableau and the dominant basis stay from one solve to the next.

use super::exact::Total;
use super::problem::Problem;
use super::settings::{Input, Settings, SolveError};
use super::system::System;
use super::{Converged, attempt, solve};
use crate::activity::Model;

/// A problem whose numbers change from solve to solve while its stoichiometry stays: a sweep, a titration, random draws.
///
/// # Examples
///
/// ```
/// use lysocline_engine::activity::Model;
/// use lysocline_engine::solve::{Prepared, Problem, Row, Settings, Total};
///
/// let species = vec![Row::new(&[(0, 1)], 0.0), Row::new(&[(0, 2)], 3.0)];
/// let totals = vec![Total::from(1e-3)];
/// let mut prepared = Prepared::new(Problem { n_components: 1, species, totals, ..Problem::default() })?;
/// for total in [1e-3, 2e-3, 3e-3] {
///     prepared.set_total(0, Total::from(total))?;
///     let c = &prepared.solve(&Model::IDEAL, &Settings::default())?.ln_c;
///     assert!((c[0].exp() + 2.0 * c[1].exp() - total).abs() < 1e-17);
/// }
/// # Ok::<(), lysocline_engine::solve::SolveError>(())
/// ```
#[derive(Debug, Clone)]
pub struct Prepared {
    problem: Problem,
    last: Option<Box<Converged>>,
}

impl Prepared {
    /// Checks a problem.
    ///
    /// # Errors
    ///
    /// Returns `BadInput` when it is malformed.
    pub fn new(problem: Problem) -> Result<Self, SolveError> {
        problem.validate()?;
        Ok(Self { problem, last: None })
    }

    /// The problem as it stands.
    #[must_use]
    pub fn problem(&self) -> &Problem {
        &self.problem
    }

    /// Changes one total.
    ///
    /// # Errors
    ///
    /// Returns `BadInput`, with nothing changed, for an unknown component or a number that is not finite.
    pub fn set_total(&mut self, component: usize, total: Total) -> Result<(), SolveError> {
        let is_finite = total.to_f64().is_finite();
        let place = self.problem.totals.get_mut(component).filter(|_| is_finite);
        place.map(|place| *place = total).ok_or(SolveError::BadInput { input: Input::Totals, idx: component })
    }

    /// Changes ln K of one species.
    ///
    /// # Errors
    ///
    /// As [`Prepared::set_total`].
    pub fn set_ln_k(&mut self, species_idx: usize, ln_k: f64) -> Result<(), SolveError> {
        let row = self.problem.species.get_mut(species_idx).filter(|_| ln_k.is_finite());
        let fault = SolveError::BadInput { input: Input::Species, idx: species_idx };
        row.map(|row| row.ln_k = ln_k).ok_or(fault)
    }

    /// Changes the value that one reservoir holds.
    ///
    /// # Errors
    ///
    /// As [`Prepared::set_total`].
    pub fn set_reservoir(&mut self, reservoir_idx: usize, ln_value: f64) -> Result<(), SolveError> {
        let reservoir = self.problem.reservoirs.get_mut(reservoir_idx).filter(|_| ln_value.is_finite());
        let fault = SolveError::BadInput { input: Input::Reservoir, idx: reservoir_idx };
        reservoir.map(|reservoir| reservoir.ln_value = ln_value).ok_or(fault)
    }

    /// Solves, from the latest answer if there is one. The answer does not depend on it beyond rounding.
    ///
    /// # Errors
    ///
    /// As [`solve`].
    pub fn solve(&mut self, model: &Model, settings: &Settings) -> Result<&Converged, SolveError> {
        let warm = self.last.take().map(|last| last.warm);
        let near = warm.and_then(|warm| {
            let start = (warm.ionic_strength, warm.ln_water_activity);
            attempt(System::resume(&self.problem, warm), model, settings, start).ok()
        });
        let converged = match near {
            Some(converged) => converged,
            // No answer from there proves nothing; one from scratch says why.
            None => solve(&self.problem, model, settings, None)?,
        };
        Ok(self.last.insert(Box::new(converged)))
    }
}
