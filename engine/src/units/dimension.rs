//! Dimensions as rational exponents over a few base quantities.

use num_rational::Ratio;
use num_traits::Zero;

/// An exponent of a unit or dimension; rational, so that `kg^(1/2)` can be said exactly.
pub type Exponent = Ratio<i32>;

/// The base quantities. SI, with coulomb for ampere, and with what the trade keeps apart.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash, PartialOrd, Ord)]
pub enum Base {
    /// Amount of substance, mol.
    Amount,
    /// Amount of charge or of acid-base capacity, eq: kept apart from mol, since 1 mol of Ca^2+ is 2 eq.
    Equivalents,
    /// Mass of what is dissolved, kg.
    Mass,
    /// Length, m.
    Length,
    /// Time, s.
    Time,
    /// Electric charge, C.
    Charge,
    /// Temperature, K.
    Temperature,
    /// Mass of the solvent water, kg(water).
    WaterMass,
    /// Mass of the whole solution, kg(solution).
    SolutionMass,
    /// A bare `/kg`: water or solution, for the caller to say which ([`super::Unit::per_kg_of`]).
    BareKg,
    /// Practical salinity (a conductivity ratio, so no mass fraction), PSU.
    PracticalSalinity,
}

const N_BASES: usize = 11;

/// Exponents over the base quantities; multiplication of units adds them.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash)]
pub struct Dimension([Exponent; N_BASES]);

impl Dimension {
    /// The dimension of a pure number.
    pub const NONE: Self = Self([Exponent::ZERO; N_BASES]);

    /// A dimension from `(base, exponent)` pairs; bases left out have exponent 0.
    #[must_use]
    pub fn of(exponents: &[(Base, i32)]) -> Self {
        exponents.iter().fold(Self::NONE, |dimension, &(base, exponent)| {
            dimension.times(&Self::base(base), Exponent::from_integer(exponent))
        })
    }

    /// The exponent of one base quantity.
    #[must_use]
    pub fn exponent(&self, base: Base) -> Exponent {
        self.0[base as usize]
    }

    /// This dimension times `other` raised to `power`.
    #[must_use]
    pub fn times(&self, other: &Self, power: Exponent) -> Self {
        // Most exponents are zero, and fractions are slow to add.
        let sum = |i: usize| if other.0[i].is_zero() { self.0[i] } else { self.0[i] + other.0[i] * power };
        Self(std::array::from_fn(sum))
    }

    /// The same with `from` counted as `into`, for conversions that the caller has allowed.
    #[must_use]
    pub(super) fn counting(mut self, from: Base, into: Base) -> Self {
        let moved = std::mem::replace(&mut self.0[from as usize], Exponent::ZERO);
        self.0[into as usize] += moved;
        self
    }

    fn base(base: Base) -> Self {
        let mut exponents = [Exponent::ZERO; N_BASES];
        exponents[base as usize] = Exponent::ONE;
        Self(exponents)
    }
}
