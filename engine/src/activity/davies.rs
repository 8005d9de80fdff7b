//! Activity coefficients of ions from the Davies equation (Davies 1962, Ion Association, Butterworths; recalled).
//!
//! ```text
//! ln γ = -z² f(I),    f(I) = A ( √I / (1 + √I) - b I ),    A = ln 10 · A(decadic),  b = 0.3
//! ```
//!
//! Uncharged species have γ = 1. The activity of water follows from the same equation by Gibbs-Duhem along a path of
//! constant proportions (every molality grows by one factor, so Σ m z² = 2I):
//!
//! ```text
//! d ln a_w = -M_w Σ m d ln(m γ)    =>    ln a_w = -M_w ( Σ m - ∫₀ᴵ 2 I' f'(I') dI' )
//! ∫₀ᴵ 2 I' f' dI' = A ( 2 [ (1 + x) - 2 ln(1 + x) - 1/(1 + x) ] - b I² ),    x = √I
//! ```

use super::electrostatic;
use crate::physics::constants::{LN_10, WATER_MOLAR_MASS};

/// The Davies equation with its two coefficients.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Davies {
    /// Debye-Hückel A in the natural form, (kg/mol)^½.
    a_ln: f64,
    /// Coefficient of the linear term, kg/mol.
    b: f64,
}

impl Davies {
    /// Ionic strength in mol/kg(water) beyond which the equation extrapolates.
    pub const VALID_TO: f64 = 0.5;

    /// From the decadic Debye-Hückel A, (kg/mol)^½ (see
    /// [`debye_huckel_a`](crate::physics::water::debye_huckel_a)), with b = 0.3 kg/mol.
    #[must_use]
    pub fn new(debye_huckel_a: f64) -> Self {
        Self { a_ln: debye_huckel_a * LN_10, b: 0.3 }
    }

    /// The same with another coefficient of the linear term, kg/mol (0.2 in Davies' paper of 1938; recalled).
    #[must_use]
    pub fn with_b(self, b: f64) -> Self {
        Self { b, ..self }
    }

    /// ln γ of one species, molal scale. `ionic_strength` in mol/kg(water).
    ///
    /// # Examples
    ///
    /// ```
    /// use lysocline_engine::activity::Davies;
    ///
    /// let gamma = Davies::new(0.509).ln_gamma(1.0, 0.1).exp();
    /// assert!((gamma - 0.7816).abs() < 5e-5); // by hand from the equation
    /// ```
    #[must_use]
    pub fn ln_gamma(&self, charge: f64, ionic_strength: f64) -> f64 {
        let x = ionic_strength.sqrt();
        -charge * charge * self.a_ln * (x / (1.0 + x) - self.b * ionic_strength)
    }

    /// d ln γ / dI, kg(water)/mol; minus infinity for an ion at I = 0.
    #[must_use]
    pub fn d_ln_gamma(&self, charge: f64, ionic_strength: f64) -> f64 {
        if charge == 0.0 {
            return 0.0;
        }
        let x = ionic_strength.sqrt();
        -charge * charge * self.a_ln * (0.5 / (x * (1.0 + x).powi(2)) - self.b)
    }

    /// ln of the activity of water. `total_molality` is Σ m over all solutes, mol/kg(water).
    #[must_use]
    pub fn ln_water_activity(&self, total_molality: f64, ionic_strength: f64) -> f64 {
        let electrostatic = 2.0 * ionic_strength * electrostatic::mean_term(1.0, ionic_strength)
            - self.b * ionic_strength.powi(2);
        -WATER_MOLAR_MASS * (total_molality - self.a_ln * electrostatic)
    }

    /// ∂ ln a_w / ∂ Σm and ∂ ln a_w / ∂I, kg(water)/mol.
    #[must_use]
    pub fn d_ln_water_activity(&self, ionic_strength: f64) -> (f64, f64) {
        // 2 I f'(I), which vanishes with I like √I.
        let x = ionic_strength.sqrt();
        let electrostatic = self.a_ln * (x / (1.0 + x).powi(2) - 2.0 * self.b * ionic_strength);
        (-WATER_MOLAR_MASS, WATER_MOLAR_MASS * electrostatic)
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    const DAVIES: Davies = Davies { a_ln: 0.51 * LN_10, b: 0.3 };

    #[test]
    fn dilute_ions_and_uncharged_species_are_ideal() {
        assert_eq!(DAVIES.ln_gamma(2.0, 0.0), 0.0);
        assert_eq!(DAVIES.ln_gamma(0.0, 0.7), 0.0);
        assert_eq!(DAVIES.ln_water_activity(0.0, 0.0), 0.0);
    }

    #[test]
    fn the_limiting_law_holds_at_low_ionic_strength() {
        let i: f64 = 1e-10;
        assert!((DAVIES.ln_gamma(2.0, i) / (-4.0 * 0.51 * LN_10 * i.sqrt()) - 1.0).abs() < 2e-5);
    }

    #[test]
    fn the_derivative_is_the_difference_quotient() {
        for i in [1e-4, 0.01, 0.3, 2.0] {
            let h = 1e-5 * i;
            let quotient = (DAVIES.ln_gamma(2.0, i + h) - DAVIES.ln_gamma(2.0, i - h)) / (2.0 * h);
            assert!((quotient / DAVIES.d_ln_gamma(2.0, i) - 1.0).abs() < 1e-8, "I = {i}");
        }
    }

    #[test]
    fn the_derivative_of_the_water_activity_is_the_difference_quotient() {
        for i in [1e-4, 0.01, 0.3, 2.0] {
            let h = 1e-4 * i;
            let (above, below) = (DAVIES.ln_water_activity(0.1, i + h), DAVIES.ln_water_activity(0.1, i - h));
            let quotient = (above - below) / (2.0 * h);
            assert!((quotient / DAVIES.d_ln_water_activity(i).1 - 1.0).abs() < 1e-7, "I = {i}");
        }
    }

    /// Gibbs-Duhem by quadrature: 2 I f'(I) integrated over x = √I with Simpson's rule.
    #[test]
    fn water_activity_satisfies_gibbs_duhem() {
        for i in [1e-9_f64, 1e-6, 3.9e-4, 4.1e-4, 0.01, 0.1, 0.5, 3.0] {
            let integrand = |x: f64| {
                let slope = if x == 0.0 { 0.0 } else { -2.0 * x * x * DAVIES.d_ln_gamma(1.0, x * x) };
                slope * 2.0 * x
            };
            let (panels, end) = (2000, i.sqrt());
            let h = end / f64::from(panels);
            let interior: f64 =
                (1..panels).map(|k| integrand(f64::from(k) * h) * if k % 2 == 1 { 4.0 } else { 2.0 }).sum();
            let integral = (integrand(0.0) + interior + integrand(end)) * h / 3.0;
            let closed = DAVIES.ln_water_activity(0.0, i) / WATER_MOLAR_MASS;
            assert!((closed / integral - 1.0).abs() < 1e-9, "I = {i}: {closed} {integral}");
        }
    }
}
