//! Specific ion interaction theory (Brønsted, Scatchard, Guggenheim) as in the reviews of the NEA (Grenthe et al. 1992,
//! Chemical Thermodynamics of Uranium, appendix B; recalled).
//!
//! ```text
//! ln γ_j = -z_j² D(I) + Σ_k ε_jk m_k,     D(I) = A x / (1 + 1.5 x),     x = √I
//! ```
//!
//! ε is symmetric and does not depend on I, so there is one excess Gibbs energy behind it and the activity of water is free
//! of a path:
//!
//! ```text
//! ln a_w = -M_w ( Σ m_j [1 - A z_j² x s(1.5 x)] + Σ_(j<k) ε_jk m_j m_k )
//! ```

use super::electrostatic;

/// B å of every ion, (kg/mol)^½: the reviews' convention at all temperatures.
const SCREENING: f64 = 1.5;

/// The equation with its coefficients.
#[derive(Debug, Clone, PartialEq)]
pub struct Sit {
    /// Debye-Hückel A in the natural form, (kg/mol)^½.
    pub a_ln: f64,
    /// The pairs whose coefficient is not zero; each once.
    pub pairs: Vec<Pair>,
}

/// Two solutes that interact.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Pair {
    /// Positions among the solver's species.
    pub solutes: (usize, usize),
    /// ε in the natural form, kg/mol.
    pub epsilon: f64,
}

impl Sit {
    /// Ionic strength in mol/kg(water) up to which the reviews use it.
    pub const VALID_TO: f64 = 3.5;

    /// The part of ln γ that the ionic strength determines.
    #[must_use]
    pub fn ln_gamma(&self, charge: f64, ionic_strength: f64) -> f64 {
        -charge * charge * self.a_ln * electrostatic::term(SCREENING, ionic_strength)
    }

    /// Its derivative by I; minus infinity for an ion at I = 0.
    #[must_use]
    pub fn d_ln_gamma(&self, charge: f64, ionic_strength: f64) -> f64 {
        if charge == 0.0 {
            return 0.0;
        }
        -charge * charge * self.a_ln * electrostatic::d_term(SCREENING, ionic_strength)
    }

    pub(super) fn osmotic_excess(&self, charge: f64, ionic_strength: f64) -> f64 {
        -charge * charge * self.a_ln * electrostatic::mean_term(SCREENING, ionic_strength)
    }

    /// `Σ ε_jk m_j m_k` over the pairs.
    pub(super) fn pair_sum(&self, molalities: &[f64]) -> f64 {
        self.pairs
            .iter()
            .map(|pair| pair.epsilon * molalities[pair.solutes.0] * molalities[pair.solutes.1])
            .sum()
    }
}
