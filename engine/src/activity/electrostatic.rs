//! The electrostatic term that the models share, `x / (1 + βx)` with x = √I and β the screening of the ion's size.
//!
//! Its part in the activity of water is the integral of Gibbs-Duhem along a path of constant proportions:
//!
//! ```text
//! (1/I) ∫₀ᴵ I' d[x/(1 + βx)] = x s(βx),     s(y) = y⁻³ ∫₀ʸ u²/(1 + u)² du = (y + y/(1 + y) - 2 ln(1 + y)) / y³
//! ```

/// `x / (1 + βx)`; `beta` and the square root of the ionic strength are reciprocal, (kg/mol)^½ and (mol/kg)^½.
pub(super) fn term(beta: f64, ionic_strength: f64) -> f64 {
    let x = ionic_strength.sqrt();
    x / (1.0 + beta * x)
}

/// Its derivative by I; infinite at I = 0.
pub(super) fn d_term(beta: f64, ionic_strength: f64) -> f64 {
    let x = ionic_strength.sqrt();
    0.5 / (x * (1.0 + beta * x).powi(2))
}

/// Its integral mean, `x s(βx)`.
pub(super) fn mean_term(beta: f64, ionic_strength: f64) -> f64 {
    let x = ionic_strength.sqrt();
    x * s(beta * x)
}

/// s(y), 1/3 at zero; by its series where the closed form cancels.
fn s(y: f64) -> f64 {
    if y < 0.1 {
        // 1/3 - 2y/4 + 3y²/5 - ...; the eighteenth term is below 1e-17
        (0..18).rev().fold(0.0, |sum, k| f64::from(k + 1) / f64::from(k + 3) - y * sum)
    } else {
        (y + y / (1.0 + y) - 2.0 * y.ln_1p()) / y.powi(3)
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    /// The two forms meet, and the integral is Simpson's.
    #[test]
    fn the_mean_is_the_integral() {
        for (beta, i) in [(1.0, 1e-8), (1.0, 0.0099), (1.0, 0.0101), (3.0, 0.1), (1.5, 3.0), (0.0, 0.5)] {
            let (panels, end) = (2000, f64::sqrt(i));
            let integrand = |x: f64| (x / (1.0 + beta * x)).powi(2);
            let h = end / f64::from(panels);
            let interior: f64 =
                (1..panels).map(|k| integrand(f64::from(k) * h) * if k % 2 == 1 { 4.0 } else { 2.0 }).sum();
            let integral = (interior + integrand(end)) * h / 3.0 / i;
            assert!((mean_term(beta, i) / integral - 1.0).abs() < 1e-10, "β {beta}, I {i}");
        }
    }

    #[test]
    fn the_derivative_is_the_difference_quotient() {
        for (beta, i) in [(1.0, 1e-4), (1.5, 0.1), (3.0, 2.0)] {
            let h = 1e-5 * i;
            let quotient = (term(beta, i + h) - term(beta, i - h)) / (2.0 * h);
            assert!((quotient / d_term(beta, i) - 1.0).abs() < 1e-8);
        }
    }
}
