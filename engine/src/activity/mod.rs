//! Activity coefficients of dissolved species: one equation family a file.
//!
//! A [`Model`] answers three questions, all on the molal scale: ln γ of a species, its derivative, and the activity of
//! the solvent that belongs to the same γ. Molalities and ionic strength are in mol/kg(water).

mod davies;

pub use davies::Davies;

/// What is assumed about activities: an equation for the solutes, and where the activity of water comes from.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Model {
    /// Activity coefficients of the solutes.
    pub solutes: Solutes,
    /// Activity of the solvent.
    pub water: Water,
}

/// Equation for the activity coefficients of the solutes.
#[derive(Debug, Clone, Copy, PartialEq)]
#[non_exhaustive]
pub enum Solutes {
    /// γ = 1.
    Ideal,
    /// The Davies equation.
    Davies(Davies),
}

/// Where the activity of water comes from.
#[derive(Debug, Clone, Copy, PartialEq)]
pub enum Water {
    /// From the equation for the solutes, by Gibbs-Duhem; 1 for [`Solutes::Ideal`].
    Consistent,
    /// A stated activity, as its natural logarithm.
    Stated(f64),
}

impl Model {
    /// γ = 1 and water at unit activity.
    pub const IDEAL: Self = Self { solutes: Solutes::Ideal, water: Water::Consistent };

    /// The Davies equation with the activity of water that follows from it.
    #[must_use]
    pub fn davies(davies: Davies) -> Self {
        Self { solutes: Solutes::Davies(davies), water: Water::Consistent }
    }

    /// The same model with the activity of water stated as its natural logarithm.
    #[must_use]
    pub fn with_ln_water_activity(self, ln_water_activity: f64) -> Self {
        Self { water: Water::Stated(ln_water_activity), ..self }
    }

    /// ln γ of a species.
    #[must_use]
    pub fn ln_gamma(&self, charge: f64, ionic_strength: f64) -> f64 {
        match &self.solutes {
            Solutes::Ideal => 0.0,
            Solutes::Davies(davies) => davies.ln_gamma(charge, ionic_strength),
        }
    }

    /// d ln γ / dI, kg(water)/mol.
    #[must_use]
    pub fn d_ln_gamma(&self, charge: f64, ionic_strength: f64) -> f64 {
        match &self.solutes {
            Solutes::Ideal => 0.0,
            Solutes::Davies(davies) => davies.d_ln_gamma(charge, ionic_strength),
        }
    }

    /// ln of the activity of water; `total_molality` is Σ m over all solutes.
    #[must_use]
    pub fn ln_water_activity(&self, total_molality: f64, ionic_strength: f64) -> f64 {
        match (self.water, &self.solutes) {
            (Water::Stated(ln_water_activity), _) => ln_water_activity,
            (Water::Consistent, Solutes::Ideal) => 0.0,
            (Water::Consistent, Solutes::Davies(davies)) => {
                davies.ln_water_activity(total_molality, ionic_strength)
            }
        }
    }

    /// ∂ ln a_w / ∂ Σm and ∂ ln a_w / ∂I, kg(water)/mol.
    #[must_use]
    pub fn d_ln_water_activity(&self, ionic_strength: f64) -> (f64, f64) {
        match (self.water, &self.solutes) {
            (Water::Stated(_), _) | (Water::Consistent, Solutes::Ideal) => (0.0, 0.0),
            (Water::Consistent, Solutes::Davies(davies)) => davies.d_ln_water_activity(ionic_strength),
        }
    }

    /// Whether ln γ of any ion changes with the ionic strength.
    #[must_use]
    pub fn depends_on_ionic_strength(&self) -> bool {
        !matches!(self.solutes, Solutes::Ideal)
    }

    /// Ionic strength beyond which the equation extrapolates, if it has such a limit.
    #[must_use]
    pub fn valid_to(&self) -> Option<f64> {
        match self.solutes {
            Solutes::Ideal => None,
            Solutes::Davies(_) => Some(Davies::VALID_TO),
        }
    }
}
