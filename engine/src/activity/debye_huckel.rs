//! The extended Debye-Hückel equation with the size of each ion, and its extension by a linear term.
//!
//! ```text
//! ln γ_i = -A z_i² x / (1 + B å_i x) + b_i I,     x = √I
//! ```
//!
//! With b = 0 it is the equation that Kielland (1937, J. Am. Chem. Soc. 59, 1675-1678) tabulated ion sizes å for, with å and
//! b fitted to mean activity coefficients that of Truesdell & Jones (1974, J. Res. U.S. Geol. Survey 2, 233-248). Sizes
//! that differ make the equations of two ions mutually inconsistent (∂ ln γ_i/∂ m_j is not ∂ ln γ_j/∂ m_i), so what
//! belongs to them as the activity of water depends on the path of integration; here it is that of constant proportions:
//!
//! ```text
//! ln a_w = -M_w Σ m_i w_i,     w_i = 1 - A z_i² x s(B å_i x) + b_i I / 2          (s: see `electrostatic`)
//! ```

use super::electrostatic;

/// The equation with its coefficients for each solute.
#[derive(Debug, Clone, PartialEq)]
pub struct DebyeHuckel {
    /// Debye-Hückel A in the natural form, (kg/mol)^½.
    pub a_ln: f64,
    /// Debye-Hückel B, (kg/mol)^½ per ångström.
    pub b: f64,
    /// In the order of the solver's species. Shape `(n_species,)`.
    pub solutes: Vec<IonCoefficients>,
    /// Ionic strength beyond which the coefficients extrapolate, mol/kg(water).
    pub valid_to: f64,
}

/// The coefficients of one solute.
#[derive(Debug, Clone, Copy, PartialEq, Default)]
pub struct IonCoefficients {
    /// Ion size å, ångström.
    pub size: f64,
    /// b in the natural form, kg/mol.
    pub linear: f64,
}

impl DebyeHuckel {
    /// ln γ of a solute.
    #[must_use]
    pub fn ln_gamma(&self, solute: usize, charge: f64, ionic_strength: f64) -> f64 {
        let IonCoefficients { size, linear } = self.solutes[solute];
        -charge * charge * self.a_ln * electrostatic::term(self.b * size, ionic_strength)
            + linear * ionic_strength
    }

    /// d ln γ / dI; minus infinity for an ion at I = 0.
    #[must_use]
    pub fn d_ln_gamma(&self, solute: usize, charge: f64, ionic_strength: f64) -> f64 {
        let IonCoefficients { size, linear } = self.solutes[solute];
        if charge == 0.0 {
            return linear;
        }
        -charge * charge * self.a_ln * electrostatic::d_term(self.b * size, ionic_strength) + linear
    }

    /// `w_i - 1`: what a mole of the solute adds to -ln a_w / M_w beyond its number.
    pub(super) fn osmotic_excess(&self, solute: usize, charge: f64, ionic_strength: f64) -> f64 {
        let IonCoefficients { size, linear } = self.solutes[solute];
        -charge * charge * self.a_ln * electrostatic::mean_term(self.b * size, ionic_strength)
            + linear * ionic_strength / 2.0
    }
}
