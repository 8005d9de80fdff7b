//! How much there is of each mixture that is present.
//!
//! With the amounts N as unknowns Φ has a saddle, to which Newton's method usually leads. Where it does not, there is a
//! way that cannot fail: at a given N the members of a mixture are ordinary species, as in a gas of given volume, so the
//! problem is convex, and the sum of their fractions falls as N grows. That sum is the slope in N of a concave function
//! (the Gibbs energy with its sign changed), which is climbed by one amount after the other. A mixture whose fractions do
//! not add up to one however little there is of it leaves.

use super::inner::{self, Point, Reduced};
use super::phases;
use super::scalar::{self, Sample, Tolerance};
use super::settings::{Settings, SolveError};
use super::system::{Column, System};

/// What was found about the amounts.
pub(super) enum Amounts {
    /// The fractions of every mixture that is still present add up to one.
    Settled(Box<(Reduced, Point)>),
    /// They do not, and on the way minerals that are present were used up, or there is very much of this mixture.
    Rising { mixture_idx: usize },
}

/// ln of more than can form.
const VERY_MUCH: f64 = 300.0;

/// ln of less than counts beside no amount at all, even where activity coefficients run to thousands of powers of ten.
const VERY_LITTLE: f64 = -1e5;

/// Solves for composition and amounts of mixtures at given activity coefficients and present phases.
pub(super) fn converge(system: &mut System, settings: &Settings) -> Result<Amounts, SolveError> {
    const MOST_ROUNDS: usize = 60;

    if present(system).is_empty() || any_held(system) {
        hold(system);
        let converged = inner::converge(system, settings)?;
        // A balance may have asked for a mixture meanwhile.
        if present(system).is_empty() {
            return Ok(settled(converged));
        }
        release(system);
    }
    for round in 0..MOST_ROUNDS {
        let start = Start::of(system);
        let before = ln_amounts(system);
        if let Some(converged) = inner::converge_saddle(system, settings)? {
            return Ok(settled(converged));
        }
        start.restore(system);
        // One round brings Newton's method near; those after it have to do better.
        let tolerance = 10_f64.powi(-1 - i32::try_from(round).unwrap_or(i32::MAX).min(12));
        for mixture_idx in present(system) {
            match close(system, settings, mixture_idx, tolerance)? {
                Closed::Amount => {}
                Closed::Left => break,
                Closed::Endless => return Ok(Amounts::Rising { mixture_idx }),
            }
            // Mixtures that draw on minerals beyond what there is of them can rise together without end.
            if round > 1 && phases::any_used_up(system) {
                return Ok(Amounts::Rising { mixture_idx });
            }
        }
        if present(system).is_empty() {
            return Ok(settled(inner::converge(system, settings)?));
        }
        if round > 1 {
            stride(system, settings, &before)?;
        }
        release(system);
    }
    Err(SolveError::NotConverged { iterations: system.effort.iterations, residual: f64::INFINITY })
}

/// Goes on in the direction of the latest round, in doubled steps, while the Gibbs energy falls: amounts that depend on
/// each other move slowly one after the other.
fn stride(system: &mut System, settings: &Settings, before: &[(usize, f64)]) -> Result<(), SolveError> {
    const MOST_DOUBLINGS: i32 = 8;

    let here = ln_amounts(system);
    if here.len() != before.len() {
        return Ok(());
    }
    let change: Vec<f64> = here.iter().zip(before).map(|((_, new), (_, old))| new - old).collect();
    let slope_at = |system: &mut System, share: f64| -> Result<f64, SolveError> {
        for ((p, ln_amount), change) in here.iter().zip(&change) {
            system.hold_mixture(*p, (ln_amount + share * change).clamp(VERY_LITTLE, VERY_MUCH));
        }
        inner::converge(system, settings)?;
        let slope = |((p, _), change): (&(usize, f64), &f64)| {
            change * system.level_of(system.amount_row(*p)).exp() * system.mixture_saturation(*p).exp_m1()
        };
        Ok(here.iter().zip(&change).map(slope).sum())
    };
    let mut share = 0.0;
    for doubling in 0..MOST_DOUBLINGS {
        let farther = 2_f64.powi(doubling);
        if slope_at(system, farther)? <= 0.0 {
            break;
        }
        share = farther;
    }
    slope_at(system, share)?;
    Ok(())
}

fn ln_amounts(system: &System) -> Vec<(usize, f64)> {
    present(system).into_iter().map(|p| (p, system.level_of(system.amount_row(p)))).collect()
}

fn settled(converged: (Reduced, Point)) -> Amounts {
    Amounts::Settled(Box::new(converged))
}

fn present(system: &System) -> Vec<usize> {
    (0..system.mixture_present.len()).filter(|p| system.mixture_present[*p]).collect()
}

/// Whether the amount of a mixture is held, as it is on entry.
fn any_held(system: &System) -> bool {
    present(system).into_iter().any(|p| {
        let column = system.basis.column_of(system.amount_row(p));
        column.is_some_and(|column| system.column[column] == Column::Held)
    })
}

/// Holds all amounts where they are.
fn hold(system: &mut System) {
    for p in present(system) {
        let ln_amount = system.level_of(system.amount_row(p));
        system.hold_mixture(p, ln_amount.clamp(VERY_LITTLE, VERY_MUCH));
    }
}

fn release(system: &mut System) {
    present(system).into_iter().for_each(|p| system.release_mixture(p));
}

/// Where an attempt began.
struct Start {
    basis: super::basis::Basis,
    level: Vec<f64>,
    column: Vec<Column>,
    absent: Vec<bool>,
}

impl Start {
    fn of(system: &System) -> Self {
        Self {
            basis: system.basis.clone(),
            level: system.level.clone(),
            column: system.column.clone(),
            absent: system.absent.clone(),
        }
    }

    /// Goes back, and holds all amounts.
    fn restore(self, system: &mut System) {
        let pivots = system.basis.pivots;
        system.basis = self.basis;
        system.basis.pivots = pivots;
        system.level = self.level;
        system.column = self.column;
        system.absent = self.absent;
        hold(system);
    }
}

/// What became of the amount of one mixture while the others were held.
enum Closed {
    Amount,
    Left,
    Endless,
}

/// Finds the amount at which the fractions of a mixture add up to one.
fn close(
    system: &mut System,
    settings: &Settings,
    mixture_idx: usize,
    tolerance: f64,
) -> Result<Closed, SolveError> {
    let start = system.level_of(system.amount_row(mixture_idx));
    let excess = |system: &mut System, ln_amount: f64| -> Result<f64, SolveError> {
        system.hold_mixture(mixture_idx, ln_amount);
        inner::converge(system, settings)?;
        Ok(system.mixture_saturation(mixture_idx))
    };
    let mut here = Sample { x: start, f: excess(system, start)? };
    let mut step = here.f.abs().clamp(0.5, 20.0);
    while here.f.abs() > tolerance {
        if here.f > 0.0 && here.x >= VERY_MUCH {
            return Ok(Closed::Endless);
        }
        if here.f < 0.0 && here.x <= VERY_LITTLE {
            system.leave_mixture(mixture_idx);
            return Ok(Closed::Left);
        }
        let x = (here.x + step * here.f.signum()).clamp(VERY_LITTLE, VERY_MUCH);
        let next = Sample { x, f: excess(system, x)? };
        if (next.f > 0.0) != (here.f > 0.0) {
            let (low, high) = if here.x < next.x { (here, next) } else { (next, here) };
            let tolerance = Tolerance { x: 0.0, f: tolerance };
            let root = scalar::root_between(&mut |x| excess(system, x), low, high, tolerance)?;
            excess(system, root.x)?;
            return Ok(Closed::Amount);
        }
        here = next;
        step *= 2.0;
    }
    Ok(Closed::Amount)
}
