//! Activity coefficients of dissolved species: one equation family a file.
//!
//! Every model is a part that the ionic strength alone determines and, for some, a part that depends on which species there
//! are, called *specific*:
//!
//! ```text
//! ln γ_i = f_i(I) + g_i(m)
//! ```
//!
//! A [`Model`] answers for both parts, their derivatives, and the activity of the solvent that belongs to the same γ, all on
//! the molal scale. Molalities and ionic strength are in mol/kg(water).

mod davies;
mod debye_huckel;
mod electrostatic;
mod sit;
#[cfg(test)]
mod tests;

pub use davies::Davies;
pub use debye_huckel::{DebyeHuckel, IonCoefficients};
pub use sit::{Pair, Sit};

use crate::physics::constants::WATER_MOLAR_MASS;

/// What is assumed about activities: an equation for the solutes, and where the activity of water comes from.
#[derive(Debug, Clone, PartialEq)]
pub struct Model {
    /// Activity coefficients of the solutes.
    pub solutes: Solutes,
    /// Activity of the solvent.
    pub water: Water,
}

/// Equation for the activity coefficients of the solutes.
#[derive(Debug, Clone, PartialEq)]
#[non_exhaustive]
pub enum Solutes {
    /// γ = 1.
    Ideal,
    /// The Davies equation.
    Davies(Davies),
    /// Debye-Hückel with the size of each ion, and a linear term.
    DebyeHuckel(DebyeHuckel),
    /// Specific ion interaction.
    Sit(Sit),
}

/// Where the activity of water comes from.
#[derive(Debug, Clone, Copy, PartialEq)]
pub enum Water {
    /// From the equation for the solutes, by Gibbs-Duhem; 1 for [`Solutes::Ideal`].
    Consistent,
    /// A stated activity, as its natural logarithm.
    Stated(f64),
}

/// The solutes of a water, in the order of the solver's species.
#[derive(Debug, Clone, Copy)]
pub struct Composition<'a> {
    /// Charge numbers. Shape `(n_species,)`.
    pub charges: &'a [f64],
    /// mol/kg(water). Shape `(n_species,)`.
    pub molalities: &'a [f64],
    /// mol/kg(water).
    pub ionic_strength: f64,
}

/// Derivatives of ln a_w.
#[derive(Debug, Clone, PartialEq)]
pub struct WaterSlopes {
    /// By the molality of each solute at given I, kg(water)/mol. Shape `(n_species,)`.
    pub by_molality: Vec<f64>,
    /// By the ionic strength at given molalities, kg(water)/mol.
    pub by_ionic_strength: f64,
}

impl Model {
    /// γ = 1 and water at unit activity.
    pub const IDEAL: Self = Self { solutes: Solutes::Ideal, water: Water::Consistent };

    /// The Davies equation with the activity of water that follows from it.
    #[must_use]
    pub fn davies(davies: Davies) -> Self {
        Self::consistent(Solutes::Davies(davies))
    }

    /// An equation with the activity of water that follows from it.
    #[must_use]
    pub fn consistent(solutes: Solutes) -> Self {
        Self { solutes, water: Water::Consistent }
    }

    /// The same model with the activity of water stated as its natural logarithm.
    #[must_use]
    pub fn with_ln_water_activity(self, ln_water_activity: f64) -> Self {
        Self { water: Water::Stated(ln_water_activity), ..self }
    }

    /// What the equation is called.
    #[must_use]
    pub fn name(&self) -> &'static str {
        match &self.solutes {
            Solutes::Ideal => "ideal solution",
            Solutes::Davies(_) => "Davies equation",
            Solutes::DebyeHuckel(own) if own.solutes.iter().all(|ion| ion.linear == 0.0) => {
                "extended Debye-Hueckel equation"
            }
            Solutes::DebyeHuckel(_) => "Truesdell-Jones equation",
            Solutes::Sit(_) => "specific ion interaction equation",
        }
    }

    /// Ionic strength beyond which the equation extrapolates, if it has such a limit.
    #[must_use]
    pub fn valid_to(&self) -> Option<f64> {
        match &self.solutes {
            Solutes::Ideal => None,
            Solutes::Davies(_) => Some(Davies::VALID_TO),
            Solutes::DebyeHuckel(own) => Some(own.valid_to),
            Solutes::Sit(_) => Some(Sit::VALID_TO),
        }
    }

    /// Whether ln γ of any ion changes with the ionic strength.
    #[must_use]
    pub fn depends_on_ionic_strength(&self) -> bool {
        !matches!(self.solutes, Solutes::Ideal)
    }

    /// The part of ln γ of a solute that the ionic strength determines.
    #[must_use]
    pub fn ln_gamma(&self, solute: usize, charge: f64, ionic_strength: f64) -> f64 {
        match &self.solutes {
            Solutes::Ideal => 0.0,
            Solutes::Davies(own) => own.ln_gamma(charge, ionic_strength),
            Solutes::DebyeHuckel(own) => own.ln_gamma(solute, charge, ionic_strength),
            Solutes::Sit(own) => own.ln_gamma(charge, ionic_strength),
        }
    }

    /// Its derivative by I, kg(water)/mol; not finite for an ion at I = 0.
    #[must_use]
    pub fn d_ln_gamma(&self, solute: usize, charge: f64, ionic_strength: f64) -> f64 {
        match &self.solutes {
            Solutes::Ideal => 0.0,
            Solutes::Davies(own) => own.d_ln_gamma(charge, ionic_strength),
            Solutes::DebyeHuckel(own) => own.d_ln_gamma(solute, charge, ionic_strength),
            Solutes::Sit(own) => own.d_ln_gamma(charge, ionic_strength),
        }
    }

    /// Whether ln γ has a specific part.
    #[must_use]
    pub fn is_specific(&self) -> bool {
        matches!(&self.solutes, Solutes::Sit(own) if !own.pairs.is_empty())
    }

    /// The specific part of ln γ of every solute, into `specific`. Shapes `(n_species,)`.
    pub fn specific(&self, molalities: &[f64], specific: &mut [f64]) {
        specific.fill(0.0);
        self.for_each_specific_slope(|i, k, slope| specific[i] += slope * molalities[k]);
    }

    /// The derivatives of the specific parts that are not zero: solute, by the molality of which solute, kg(water)/mol.
    pub fn for_each_specific_slope(&self, mut take: impl FnMut(usize, usize, f64)) {
        if let Solutes::Sit(own) = &self.solutes {
            for &Pair { solutes: (i, k), epsilon } in &own.pairs {
                take(i, k, epsilon);
                take(k, i, epsilon);
            }
        }
    }

    /// The same model with its specific part multiplied by a factor: the path along which a solve can be continued.
    #[must_use]
    pub fn with_specific_scaled(&self, factor: f64) -> Self {
        let mut scaled = self.clone();
        if let Solutes::Sit(own) = &mut scaled.solutes {
            own.pairs.iter_mut().for_each(|pair| pair.epsilon *= factor);
        }
        scaled
    }

    /// ln γ of every solute. Shape `(n_species,)`.
    #[must_use]
    pub fn ln_gammas(&self, at: Composition<'_>) -> Vec<f64> {
        let mut ln_gammas = vec![0.0; at.charges.len()];
        self.specific(at.molalities, &mut ln_gammas);
        for (i, (ln_gamma, charge)) in ln_gammas.iter_mut().zip(at.charges).enumerate() {
            *ln_gamma += self.ln_gamma(i, *charge, at.ionic_strength);
        }
        ln_gammas
    }

    /// ln of the activity of water.
    #[must_use]
    pub fn ln_water_activity(&self, at: Composition<'_>) -> f64 {
        let total = || at.molalities.iter().sum::<f64>();
        match (self.water, &self.solutes) {
            (Water::Stated(ln_water_activity), _) => ln_water_activity,
            (Water::Consistent, Solutes::Ideal) => 0.0,
            (Water::Consistent, Solutes::Davies(own)) => own.ln_water_activity(total(), at.ionic_strength),
            (Water::Consistent, _) => {
                -WATER_MOLAR_MASS * (total() + self.osmotic_excess(at) + self.pair_sum(at.molalities))
            }
        }
    }

    /// The derivatives of ln a_w.
    #[must_use]
    pub fn d_ln_water_activity(&self, at: Composition<'_>) -> WaterSlopes {
        let n = at.charges.len();
        match (self.water, &self.solutes) {
            (Water::Stated(_), _) | (Water::Consistent, Solutes::Ideal) => {
                WaterSlopes { by_molality: vec![0.0; n], by_ionic_strength: 0.0 }
            }
            (Water::Consistent, Solutes::Davies(own)) => {
                let (by_total, by_ionic_strength) = own.d_ln_water_activity(at.ionic_strength);
                WaterSlopes { by_molality: vec![by_total; n], by_ionic_strength }
            }
            (Water::Consistent, _) => self.water_slopes(at),
        }
    }

    fn water_slopes(&self, at: Composition<'_>) -> WaterSlopes {
        let mut osmotic = vec![0.0; at.charges.len()];
        self.specific(at.molalities, &mut osmotic);
        let mut by_ionic_strength = 0.0;
        for (i, (osmotic, charge)) in osmotic.iter_mut().zip(at.charges).enumerate() {
            let excess = self.excess(i, *charge, at.ionic_strength);
            *osmotic += 1.0 + excess;
            if at.ionic_strength > 0.0 && at.molalities[i] > 0.0 {
                // Of an integral mean over I: the integrand less the mean, over I.
                let slope = self.d_ln_gamma(i, *charge, at.ionic_strength) - excess / at.ionic_strength;
                by_ionic_strength += at.molalities[i] * slope;
            }
        }
        let by_molality = osmotic.iter().map(|osmotic| -WATER_MOLAR_MASS * osmotic).collect();
        WaterSlopes { by_molality, by_ionic_strength: -WATER_MOLAR_MASS * by_ionic_strength }
    }

    /// `Σ m_i (w_i - 1)`.
    fn osmotic_excess(&self, at: Composition<'_>) -> f64 {
        let solutes = at.charges.iter().zip(at.molalities).enumerate();
        solutes.map(|(i, (charge, m))| m * self.excess(i, *charge, at.ionic_strength)).sum()
    }

    /// What a mole of a solute adds to -ln a_w / M_w beyond its number, by the part that I determines: `(1/I) ∫ I' df`.
    fn excess(&self, solute: usize, charge: f64, ionic_strength: f64) -> f64 {
        match &self.solutes {
            Solutes::DebyeHuckel(own) => own.osmotic_excess(solute, charge, ionic_strength),
            Solutes::Sit(own) => own.osmotic_excess(charge, ionic_strength),
            // Has closed forms of its own.
            Solutes::Ideal | Solutes::Davies(_) => 0.0,
        }
    }

    fn pair_sum(&self, molalities: &[f64]) -> f64 {
        match &self.solutes {
            Solutes::Sit(own) => own.pair_sum(molalities),
            _ => 0.0,
        }
    }
}
