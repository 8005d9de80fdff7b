//! Activity coefficients that depend on which species there are, not on the ionic strength alone.
//!
//! With the specific part s of every ln γ, and ln a_w, held, the problem is that of `ionic_strength`: convex inside a bracketed
//! root. Outside is the fixed point
//!
//! ```text
//! s = g(m(s, ln a_w)),    ln a_w = w(m(s, ln a_w))
//! ```
//!
//! which Newton's method solves: at any (s, ln a_w) all other equations hold, so the point is the answer of a problem whose
//! ln γ and ln a_w are off by known amounts, and the implicit function theorem says where the answer goes as these vanish.
//! A step is halved until the largest change of s falls. Where that fails, g is taken from 0 to its whole in steps, each from
//! the answer of the one before. With specific parts an equilibrium need not be unique; this one is reached from g = 0.

use super::ionic_strength::{Settled, at_solvent, ln_water_activity_of};
use super::sensitivity::{Given, Place, Sensitivities, own_supplies};
use super::settings::{Settings, SolveError};
use super::system::System;
use crate::activity::Model;

/// Solves with consistent activity coefficients and activity of water; `start` as in `ionic_strength::settle`.
pub(super) fn settle(
    system: &mut System,
    model: &Model,
    settings: &Settings,
    start: (f64, f64),
) -> Result<Settled, SolveError> {
    let here =
        Held { specific: system.specific.clone(), ionic_strength: start.0, ln_water_activity: start.1 };
    match approach(system, model, settings, here) {
        Err(error) if is_of_the_numerics(&error) => continued(system, model, settings),
        done => Ok(done?.0),
    }
}

/// What is held while the rest is solved, and a guess of the ionic strength.
#[derive(Debug, Clone)]
struct Held {
    specific: Vec<f64>,
    ionic_strength: f64,
    ln_water_activity: f64,
}

/// A solve with what was held, and by how much the composition disagrees with it.
struct Reached {
    held: Held,
    settled: Settled,
    /// `g - s` of each species.
    off: Vec<f64>,
    water_off: f64,
}

impl Reached {
    fn at(system: &mut System, model: &Model, settings: &Settings, held: Held) -> Result<Self, SolveError> {
        system.specific.copy_from_slice(&held.specific);
        let settled = at_solvent(system, model, settings, held.ln_water_activity, held.ionic_strength)?;
        let molalities = system.molalities();
        let mut off = vec![0.0; molalities.len()];
        model.specific(&molalities, &mut off);
        off.iter_mut().zip(&held.specific).for_each(|(off, specific)| *off -= specific);
        let water_off = ln_water_activity_of(system, model, settled.ionic_strength) - held.ln_water_activity;
        Ok(Self { held, settled, off, water_off })
    }

    /// Largest change of an ln γ, or of ln a_w.
    fn change(&self) -> f64 {
        self.off.iter().fold(self.water_off.abs(), |largest, off| largest.max(off.abs()))
    }

    /// What the fixed point would hold next.
    fn plain(&self) -> Held {
        Held {
            specific: self
                .held
                .specific
                .iter()
                .zip(&self.off)
                .map(|(specific, off)| specific + off)
                .collect(),
            ionic_strength: self.settled.ionic_strength,
            ln_water_activity: self.held.ln_water_activity + self.water_off,
        }
    }

    /// What Newton's method would hold next; the plain fixed point where the linear system has no answer.
    fn next(&self, system: &System, model: &Model) -> Held {
        let problem = system.problem;
        let place = Place {
            basis: &system.basis,
            column: &system.column,
            ln_amounts: &system.ln_c,
            ionic_strength: self.settled.ionic_strength,
            reservoir_amount: &vec![0.0; problem.reservoirs.len()],
        };
        let given =
            Given { ln_gamma: self.off.clone(), ln_water_activity: self.water_off, ..Given::zero(problem) };
        let linear = Sensitivities::about(problem, model, &place, &own_supplies(problem));
        let mut held = Held { ionic_strength: self.settled.ionic_strength, ..self.held.clone() };
        let (strength, water, by_species) = match linear.map(|linear| linear.push(&given)) {
            Some(found) => (found.ionic_strength, found.ln_water_activity, found.ln_gamma),
            None => (0.0, self.water_off, self.off.clone()),
        };
        held.ionic_strength = (held.ionic_strength + strength).max(0.0);
        held.ln_water_activity += water;
        for (i, (specific, change)) in held.specific.iter_mut().zip(by_species).enumerate() {
            let by_strength = match strength {
                0.0 => 0.0,
                _ => model.d_ln_gamma(i, system.charges[i], self.settled.ionic_strength) * strength,
            };
            *specific += change - by_strength;
        }
        held
    }
}

/// Newton's method from what is held, with steps halved until they help.
fn approach(
    system: &mut System,
    model: &Model,
    settings: &Settings,
    start: Held,
) -> Result<(Settled, Held), SolveError> {
    const MOST_STEPS: usize = 40;
    const MOST_HALVINGS: usize = 6;

    let mut here = Reached::at(system, model, settings, start)?;
    for _ in 0..MOST_STEPS {
        // A step beyond the tolerance costs one inner solve and leaves rounding alone.
        let good = here.change() <= 1e-2 * settings.ln_gamma;
        if good {
            return Ok(here.finish());
        }
        let next = here.next(system, model);
        let mut better = improved(system, model, settings, &here, &next, MOST_HALVINGS)?;
        if better.is_none() && here.change() > settings.ln_gamma {
            // Where a phase comes or goes the linear system is that of one side only; the fixed point knows both.
            better = improved(system, model, settings, &here, &here.plain(), MOST_HALVINGS)?;
        }
        let Some(better) = better else {
            if here.change() <= settings.ln_gamma {
                // The latest solve was a trial: the system goes back to the best.
                return Ok(Reached::at(system, model, settings, here.held)?.finish());
            }
            break;
        };
        here = better;
    }
    Err(SolveError::ActivityNotConverged { change: here.change() })
}

impl Reached {
    fn finish(mut self) -> (Settled, Held) {
        self.settled.ln_gamma_residual = self.change();
        self.settled.ln_water_activity = self.held.ln_water_activity;
        self.held.ionic_strength = self.settled.ionic_strength;
        (self.settled, self.held)
    }
}

/// The first of the steps to `next`, half of it, … after which less is off than before.
fn improved(
    system: &mut System,
    model: &Model,
    settings: &Settings,
    here: &Reached,
    next: &Held,
    halvings: usize,
) -> Result<Option<Reached>, SolveError> {
    let mut share = 1.0;
    for _ in 0..=halvings {
        match Reached::at(system, model, settings, between(&here.held, next, share)) {
            Ok(trial) if trial.change() < here.change() => return Ok(Some(trial)),
            Err(error) if !is_of_the_numerics(&error) => return Err(error),
            _ => share /= 2.0,
        }
    }
    Ok(None)
}

fn between(from: &Held, to: &Held, share: f64) -> Held {
    if share == 1.0 {
        return to.clone();
    }
    let mix = |a: f64, b: f64| a + share * (b - a);
    Held {
        specific: from.specific.iter().zip(&to.specific).map(|(a, b)| mix(*a, *b)).collect(),
        ionic_strength: mix(from.ionic_strength, to.ionic_strength),
        ln_water_activity: mix(from.ln_water_activity, to.ln_water_activity),
    }
}

/// From no specific part to the whole, in steps that shorten where one fails.
fn continued(system: &mut System, model: &Model, settings: &Settings) -> Result<Settled, SolveError> {
    const SHORTEST: f64 = 1e-3;

    let none = vec![0.0; system.problem.species.len()];
    let mut held = Held { specific: none, ionic_strength: 0.0, ln_water_activity: 0.0 };
    let (mut reached, mut step) = (0.0, 0.25);
    loop {
        let factor = f64::min(reached + step, 1.0);
        match approach(system, &model.with_specific_scaled(factor), settings, held.clone()) {
            Ok((settled, _)) if factor == 1.0 => return Ok(settled),
            Ok((_, next)) => (held, reached, step) = (next, factor, step * 2.0),
            Err(error) if step > SHORTEST && is_of_the_numerics(&error) => step /= 4.0,
            Err(error) => return Err(error),
        }
    }
}

/// Whether another start may help; the other errors are of the problem.
fn is_of_the_numerics(error: &SolveError) -> bool {
    matches!(
        error,
        SolveError::NotConverged { .. }
            | SolveError::PhasesNotSettled { .. }
            | SolveError::NoIonicStrength { .. }
            | SolveError::ActivityNotConverged { .. }
    )
}
