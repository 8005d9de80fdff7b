//! Roots of a function of one variable, for conditions that are not the gradient of the convex problem.
//!
//! Such a condition (an alkalinity beside a carbonate concentration, a titrant that closes the charge) stays outside the
//! convex solve as one equation in one unknown. It may have no root, one, or several: [`all_roots`] says how many it saw
//! and never picks one silently. Within a bracket the method is Brent's (1973, Algorithms for Minimization without
//! Derivatives; recalled): inverse quadratic interpolation or secant, with bisection as the safeguard.

/// When a root is good enough: either condition suffices.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Tolerance {
    /// Width of the bracket, absolute.
    pub x: f64,
    /// Size of the function, absolute.
    pub f: f64,
}

/// An argument with its value.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Sample {
    /// Argument.
    pub x: f64,
    /// f(x).
    pub f: f64,
}

/// What a search over an interval saw.
#[derive(Debug, Clone, PartialEq)]
pub struct Roots {
    /// The roots, ascending.
    pub roots: Vec<Sample>,
    /// The samples that bracketed them, and everything else that was evaluated on the way, ascending.
    pub samples: Vec<Sample>,
}

/// All sign changes of `f` between `from` and `to`, each refined to a root.
///
/// Samples at `intervals + 1` equally spaced arguments (pass the logarithm of what varies over decades) and, where |f|
/// has a minimum without a change of sign, looks inside it for a pair of roots. Two roots closer together than the
/// search resolves there can still be missed; more intervals see more.
///
/// # Errors
///
/// Returns the first error of `f`.
pub fn all_roots<E>(
    mut f: impl FnMut(f64) -> Result<f64, E>,
    (from, to): (f64, f64),
    intervals: usize,
    tolerance: Tolerance,
) -> Result<Roots, E> {
    let mut samples = Vec::with_capacity(intervals + 1);
    for k in 0..=intervals {
        let share = k as f64 / intervals.max(1) as f64;
        let x = from + share * (to - from);
        samples.push(Sample { x, f: f(x)? });
    }
    add_hidden_minima(&mut f, &mut samples, tolerance)?;
    let mut roots = Vec::new();
    for k in 0..samples.len() {
        if samples[k].f == 0.0 {
            roots.push(samples[k]);
        } else if k > 0 && samples[k - 1].f * samples[k].f < 0.0 {
            roots.push(root_between(&mut f, samples[k - 1], samples[k], tolerance)?);
        }
    }
    Ok(Roots { roots, samples })
}

/// The root between two arguments where `f` has opposite signs.
///
/// Returns the better end of the last bracket. A value that is not finite is taken as it is: its sign counts.
///
/// # Errors
///
/// Returns the first error of `f`.
pub fn root_between<E>(
    f: &mut impl FnMut(f64) -> Result<f64, E>,
    low: Sample,
    high: Sample,
    tolerance: Tolerance,
) -> Result<Sample, E> {
    const MOST_EVALUATIONS: usize = 200;

    // `best` and `opposite` bracket the root; `previous` is the last `best`.
    let (mut best, mut opposite) = if low.f.abs() < high.f.abs() { (low, high) } else { (high, low) };
    let mut previous = opposite;
    let mut last_step = f64::INFINITY;
    for _ in 0..MOST_EVALUATIONS {
        let half = 0.5 * (opposite.x - best.x);
        let smallest = 0.5 * tolerance.x + 2.0 * f64::EPSILON * best.x.abs();
        if best.f == 0.0 || best.f.abs() <= tolerance.f || half.abs() <= smallest {
            break;
        }
        let interpolated = interpolate(previous, best, opposite);
        let shrinks = interpolated.abs() < 0.5 * last_step.abs();
        let inside = interpolated * half > 0.0 && interpolated.abs() < 1.5 * half.abs();
        let step = if shrinks && inside && interpolated.is_finite() { interpolated } else { half };
        last_step = step;
        let step = if step.abs() < smallest { smallest.copysign(half) } else { step };
        let x = best.x + step;
        let new = Sample { x, f: f(x)? };
        previous = best;
        if (new.f > 0.0) != (best.f > 0.0) {
            opposite = best;
        }
        best = new;
        if opposite.f.abs() < best.f.abs() {
            previous = best;
            std::mem::swap(&mut best, &mut opposite);
        }
    }
    Ok(best)
}

/// Step from `best` to the root of the interpolant: inverse quadratic through three values, else the secant.
fn interpolate(previous: Sample, best: Sample, opposite: Sample) -> f64 {
    let distinct = previous.f != best.f && previous.f != opposite.f;
    if distinct && previous.x != opposite.x {
        let (r, s, t) = (best.f / opposite.f, best.f / previous.f, previous.f / opposite.f);
        let numerator = s * (t * (r - t) * (opposite.x - best.x) - (1.0 - r) * (best.x - previous.x));
        numerator / ((t - 1.0) * (r - 1.0) * (s - 1.0))
    } else {
        best.f * (opposite.x - best.x) / (best.f - opposite.f)
    }
}

/// Inserts the arguments of local minima of |f| that turn out to have the other sign.
fn add_hidden_minima<E>(
    f: &mut impl FnMut(f64) -> Result<f64, E>,
    samples: &mut Vec<Sample>,
    tolerance: Tolerance,
) -> Result<(), E> {
    let mut found = Vec::new();
    for triple in samples.windows(3) {
        let (a, b, c) = (triple[0], triple[1], triple[2]);
        let one_sign = a.f * b.f > 0.0 && b.f * c.f > 0.0;
        if one_sign && b.f.abs() <= a.f.abs() && b.f.abs() <= c.f.abs() {
            found.extend(sign_change_near(f, a, b, c, tolerance)?);
        }
    }
    samples.extend(found);
    samples.sort_by(|a, b| a.x.total_cmp(&b.x));
    Ok(())
}

/// Golden-section search for the minimum of |f|, ended by a change of sign.
fn sign_change_near<E>(
    f: &mut impl FnMut(f64) -> Result<f64, E>,
    a: Sample,
    b: Sample,
    c: Sample,
    tolerance: Tolerance,
) -> Result<Option<Sample>, E> {
    const GOLDEN: f64 = 0.381_966_011_250_105_1;

    let (mut left, mut middle, mut right) = (a, b, c);
    for _ in 0..60 {
        if right.x - left.x <= tolerance.x {
            break;
        }
        let upper = right.x - middle.x > middle.x - left.x;
        let x = if upper {
            middle.x + GOLDEN * (right.x - middle.x)
        } else {
            middle.x - GOLDEN * (middle.x - left.x)
        };
        let new = Sample { x, f: f(x)? };
        if new.f * middle.f <= 0.0 {
            return Ok(Some(new));
        }
        match (new.f.abs() < middle.f.abs(), upper) {
            (true, true) => (left, middle) = (middle, new),
            (true, false) => (right, middle) = (middle, new),
            (false, true) => right = new,
            (false, false) => left = new,
        }
    }
    Ok(None)
}

#[cfg(test)]
mod tests {
    use super::*;
    use std::convert::Infallible;

    const TIGHT: Tolerance = Tolerance { x: 1e-14, f: 0.0 };

    fn ok(f: impl Fn(f64) -> f64) -> impl FnMut(f64) -> Result<f64, Infallible> {
        move |x| Ok(f(x))
    }

    #[test]
    fn brent_finds_hard_roots_in_few_evaluations() {
        type Case = (fn(f64) -> f64, f64, f64, f64);
        let cases: [Case; 4] = [
            (|x| x.cos() - x, 0.0, 1.0, 0.739_085_133_215_160_6),
            (|x| (x - 1.0).powi(3), 0.0, 3.0, 1.0),
            (|x| x.exp() - 1e-8, -30.0, 30.0, -18.420_680_743_952_367),
            (|x| if x > 0.3 { 1.0 } else { -1.0 }, 0.0, 1.0, 0.3),
        ];
        for (f, a, b, root) in cases {
            let mut evaluations = 0;
            let mut counted = |x| {
                evaluations += 1;
                Ok::<_, Infallible>(f(x))
            };
            let (low, high) = (Sample { x: a, f: f(a) }, Sample { x: b, f: f(b) });
            let found = root_between(&mut counted, low, high, TIGHT).unwrap();
            assert!((found.x - root).abs() < 1e-12 || found.f == 0.0, "{root}: {found:?}");
            assert!(evaluations < 110, "{root}: {evaluations} evaluations");
        }
    }

    #[test]
    fn all_roots_are_reported_in_order() {
        let roots =
            all_roots(ok(|x| (x - 0.1) * (x - 0.45) * (x - 0.8)), (0.0, 1.0), 10, TIGHT).unwrap().roots;
        let x: Vec<f64> = roots.iter().map(|root| root.x).collect();
        assert_eq!(x.len(), 3);
        assert!((x[0] - 0.1).abs() < 1e-12 && (x[1] - 0.45).abs() < 1e-12 && (x[2] - 0.8).abs() < 1e-12);
    }

    #[test]
    fn a_pair_of_roots_between_two_samples_is_seen() {
        let roots = all_roots(ok(|x| (x - 0.5312) * (x - 0.5313)), (0.0, 1.0), 10, TIGHT).unwrap().roots;
        assert_eq!(roots.len(), 2);
        assert!(
            all_roots(ok(|x| (x - 0.53).powi(2) + 1e-3), (0.0, 1.0), 10, TIGHT).unwrap().roots.is_empty()
        );
    }
}
