//! The coupling through activity coefficients: one scalar, the ionic strength, and around it the activity of water.
//!
//! At a given I the problem is convex. The root of `r(I) = ½ Σ z² c(I) - I` is bracketed, since r(0) is not negative and
//! the totals bound the charge from above, and then closed in on by interpolation. ln a_w changes the constants of rows
//! that involve the solvent by a few percent of the total molality, so a fixed point around it contracts quickly.

use super::inner::{Point, Reduced};
use super::phases;
use super::scalar::{self, Sample, Tolerance};
use super::settings::{Settings, SolveError};
use super::specific;
use super::system::System;
use crate::activity::{Composition, Model};

/// A composition with the activity coefficients that belong to it.
pub(super) struct Settled {
    pub(super) reduced: Reduced,
    pub(super) point: Point,
    pub(super) ionic_strength: f64,
    /// `½ Σ z² c - I`.
    pub(super) ionic_strength_residual: f64,
    /// Number of ionic strengths seen that agree with their composition.
    pub(super) roots: usize,
    pub(super) ln_water_activity: f64,
    /// Largest difference of the specific part of an ln γ from that of the composition.
    pub(super) ln_gamma_residual: f64,
}

/// Solves with consistent activity coefficients and activity of water, starting from the values given.
pub(super) fn settle(
    system: &mut System,
    model: &Model,
    settings: &Settings,
    start: (f64, f64),
) -> Result<Settled, SolveError> {
    const MOST_PASSES: usize = 60;

    if model.is_specific() {
        return specific::settle(system, model, settings, start);
    }
    // What an earlier model left behind.
    system.specific.fill(0.0);
    let (mut guess, mut ln_water_activity) = start;
    let solvent_matters = system.problem.rows().any(|(row, _)| row.water != 0.0);
    let mut change = f64::INFINITY;
    // Where rounding stops all progress: ln a_w is the size of its own terms.
    let stalled = |change: f64, before: f64, size: f64| {
        change >= before && change <= 100.0 * settings.ln_water_activity * (1.0 + size)
    };
    for _ in 0..MOST_PASSES {
        let mut settled = at_solvent(system, model, settings, ln_water_activity, guess)?;
        let updated = ln_water_activity_of(system, model, settled.ionic_strength);
        let before = change;
        change = (updated - ln_water_activity).abs();
        let settles = change <= settings.ln_water_activity || stalled(change, before, updated.abs());
        if !solvent_matters || settles {
            settled.ln_water_activity = if solvent_matters { ln_water_activity } else { updated };
            return Ok(settled);
        }
        ln_water_activity = updated;
        guess = settled.ionic_strength;
    }
    Err(SolveError::WaterActivityNotConverged { change })
}

/// Solves at one activity of water and one specific part of every ln γ, the system's.
pub(super) fn at_solvent(
    system: &mut System,
    model: &Model,
    settings: &Settings,
    ln_water_activity: f64,
    guess: f64,
) -> Result<Settled, SolveError> {
    Coupling { system, model, settings, ln_water_activity, last: None }.root(guess)
}

/// ln of the activity of water that belongs to the composition of the latest solve.
pub(super) fn ln_water_activity_of(system: &System, model: &Model, ionic_strength: f64) -> f64 {
    let molalities = system.molalities();
    model.ln_water_activity(Composition { charges: &system.charges, molalities: &molalities, ionic_strength })
}

/// Solves as a function of the ionic strength, at one activity of water.
struct Coupling<'a, 'p> {
    system: &'a mut System<'p>,
    model: &'a Model,
    settings: &'a Settings,
    ln_water_activity: f64,
    /// The latest solve.
    last: Option<(Sample, Reduced, Point)>,
}

impl Coupling<'_, '_> {
    fn root(mut self, guess: f64) -> Result<Settled, SolveError> {
        if !self.model.depends_on_ionic_strength() {
            return self.without_coupling();
        }
        let start = self.sample(guess)?;
        let mut root = if self.agrees(start) { start } else { self.search(start)? };
        let mut roots = 1;
        // With specific parts the electrostatic one levels off, and nothing makes γ grow with I alone.
        if root.x > 1.0 && !self.model.is_specific() {
            let all = self.scan(root)?;
            roots = all.len().max(1);
            root = all.first().copied().unwrap_or(root);
        }
        self.settled(root, roots)
    }

    /// γ does not depend on I: one solve gives both.
    fn without_coupling(mut self) -> Result<Settled, SolveError> {
        let at_zero = self.sample(0.0)?;
        let mut settled = self.settled(at_zero, 1)?;
        settled.ionic_strength = at_zero.f;
        settled.ionic_strength_residual = 0.0;
        Ok(settled)
    }

    /// r(I).
    fn sample(&mut self, ionic_strength: f64) -> Result<Sample, SolveError> {
        self.system.effort.ionic_strengths += 1;
        self.system.set_activities(self.model, ionic_strength, self.ln_water_activity);
        let (reduced, point) = phases::settle(self.system, self.settings)?;
        let species = &self.system.problem.species;
        let dissolved = reduced.species.iter().filter_map(|i| species.get(*i)).zip(&point.c);
        let implied = 0.5 * dissolved.map(|(row, c)| row.charge.powi(2) * c).sum::<f64>();
        let sample = Sample { x: ionic_strength, f: implied - ionic_strength };
        self.last = Some((sample, reduced, point));
        Ok(sample)
    }

    fn agrees(&self, sample: Sample) -> bool {
        sample.f.abs() <= 0.1 * self.settings.ionic_strength * sample.x
    }

    /// Walks from the start, by growing multiples of r, until r changes sign; then closes in.
    fn search(&mut self, start: Sample) -> Result<Sample, SolveError> {
        const FARTHEST: f64 = 1e3;
        const SHORTEST: f64 = 1e-3;

        let (mut here, mut factor) = (start, 1.0);
        loop {
            // r(I) + I is not negative, so the first step, the plain fixed point, stays at I >= 0.
            let x = (here.x + factor * here.f).clamp(0.0, FARTHEST);
            if here.x == FARTHEST && here.f > 0.0 {
                return Err(SolveError::NoIonicStrength { searched_to: FARTHEST });
            }
            let next = match self.sample(x) {
                // Overshot to where γ exhausts the precision of the inner solve: a shorter step will do.
                Err(SolveError::NotConverged { .. }) if x > here.x && factor > SHORTEST => {
                    factor /= 4.0;
                    continue;
                }
                next => next?,
            };
            if self.agrees(next) || next.f == 0.0 {
                return Ok(next);
            }
            if (next.f > 0.0) != (here.f > 0.0) {
                let tolerance =
                    Tolerance { x: 0.0, f: 0.1 * self.settings.ionic_strength * here.x.min(next.x) };
                let (low, high) = if here.x < next.x { (here, next) } else { (next, here) };
                return scalar::root_between(&mut |x| Ok(self.sample(x)?.f), low, high, tolerance);
            }
            here = next;
            factor *= 2.0;
        }
    }

    /// All roots up to well above one of them, ascending: beyond I of 1 there may be several.
    ///
    /// The answer is the lowest. Above the known root γ soon runs to hundreds of powers of ten; where that exhausts the
    /// precision of the inner solve, r counts as negative, which is its sign at the far end.
    fn scan(&mut self, root: Sample) -> Result<Vec<Sample>, SolveError> {
        let tolerance = Tolerance { x: 0.0, f: 0.1 * self.settings.ionic_strength * root.x };
        let residual = |x| match self.sample(x) {
            Err(SolveError::NotConverged { .. }) if x > root.x => Ok(-f64::MAX),
            sample => Ok(sample?.f),
        };
        Ok(scalar::all_roots(residual, (0.0, 4.0 * root.x), 32, tolerance)?.roots)
    }

    /// The solve at `root`, which is repeated if it was not the latest.
    fn settled(mut self, root: Sample, roots: usize) -> Result<Settled, SolveError> {
        if self.last.as_ref().is_none_or(|(sample, ..)| sample.x != root.x) {
            self.sample(root.x)?;
        }
        let (sample, reduced, point) =
            self.last.ok_or(SolveError::NoIonicStrength { searched_to: root.x })?;
        Ok(Settled {
            reduced,
            point,
            ionic_strength: sample.x,
            ionic_strength_residual: sample.f,
            roots,
            ln_water_activity: self.ln_water_activity,
            ln_gamma_residual: 0.0,
        })
    }
}
