//! The chi-square distribution: how probable a sum of squares is if the stated uncertainties are right.

/// The probability that chi-square with `degrees` degrees of freedom exceeds `value`: the regularised upper incomplete
/// gamma function Q(degrees/2, value/2) (Abramowitz & Stegun 1964, 26.4.19); its series (6.5.29) below the mean, its
/// continued fraction (6.5.31) above. Relative error below 1e-12.
#[must_use]
pub fn probability_above(value: f64, degrees: usize) -> f64 {
    if degrees == 0 || value <= 0.0 {
        return 1.0;
    }
    let (a, x) = (degrees as f64 / 2.0, value / 2.0);
    let scale = (a * x.ln() - x - ln_gamma_of_half(degrees)).exp();
    let q = if x < a + 1.0 { 1.0 - scale * series(a, x) } else { scale * continued_fraction(a, x) };
    q.clamp(0.0, 1.0)
}

/// ln Γ(n/2) from Γ(1/2) = √π, Γ(1) = 1 and Γ(x + 1) = x Γ(x).
fn ln_gamma_of_half(n: usize) -> f64 {
    let start = if n.is_multiple_of(2) { 0.0 } else { 0.5 * std::f64::consts::PI.ln() };
    let first = if n.is_multiple_of(2) { 2 } else { 1 };
    start + (first..n).step_by(2).map(|m| (m as f64 / 2.0).ln()).sum::<f64>()
}

fn series(a: f64, x: f64) -> f64 {
    let mut term = 1.0 / a;
    let mut sum = term;
    let mut n = a;
    while term > sum * f64::EPSILON {
        n += 1.0;
        term *= x / n;
        sum += term;
    }
    sum
}

/// Evaluated by the method of Lentz (1976).
fn continued_fraction(a: f64, x: f64) -> f64 {
    let mut b = x + 1.0 - a;
    let mut c = f64::INFINITY;
    let mut d = 1.0 / b;
    let mut fraction = d;
    for i in 1..10_000 {
        let factor = -f64::from(i) * (f64::from(i) - a);
        b += 2.0;
        d = 1.0 / (factor * d + b);
        c = b + factor / c;
        let change = c * d;
        fraction *= change;
        if (change - 1.0).abs() < f64::EPSILON {
            break;
        }
    }
    fraction
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Percentage points printed in every table of chi-square (Abramowitz & Stegun 1964, table 26.8).
    #[test]
    fn percentage_points_are_those_of_the_tables() {
        for (degrees, probability, value) in [
            (1, 0.05, 3.84146),
            (1, 0.995, 0.0000392704),
            (2, 0.01, 9.21034),
            (3, 0.5, 2.36597),
            (5, 0.1, 9.23635),
            (10, 0.95, 3.94030),
            (10, 0.001, 29.5883),
            (30, 0.05, 43.7729),
            (100, 0.9, 82.3581),
        ] {
            let got = probability_above(value, degrees);
            assert!((got / probability - 1.0).abs() < 5e-5, "{degrees} {value}: {got}");
        }
    }

    #[test]
    fn two_degrees_are_an_exponential() {
        for value in [0.1, 1.0, 3.9, 4.1, 50.0] {
            assert!((probability_above(value, 2) / f64::exp(-value / 2.0) - 1.0).abs() < 1e-12);
        }
        assert_eq!(probability_above(1.0, 0), 1.0);
    }
}
