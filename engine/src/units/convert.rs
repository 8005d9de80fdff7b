//! Conversion between units: what may be converted, and the arithmetic of it.

use super::dimension::{Base, Exponent};
use super::unit::Factor;
use super::{Unit, UnitError};

impl Unit {
    /// Whether one of this unit is exactly one of the other, however they are written.
    #[must_use]
    pub fn is_same_size(&self, other: &Self) -> bool {
        self.dimension() == other.dimension()
            && self.expressed_as == other.expressed_as
            && self.scale_to(other) == (1.0, 0)
            && self.zero() == other.zero()
    }

    /// A value given in this unit, in another unit.
    ///
    /// degC, degF and dbar count from their own zero: 25 degC is 298.15 K, 0 dbar is 1.01325 bar. Two exchanges are
    /// made silently because the numbers are the same: mol for eq (1 mol of charge is 1 eq), and a bare `/kg` for a
    /// mass.
    ///
    /// # Errors
    ///
    /// [`UnitError::NotConvertible`] when the units measure different things or hold for different substances.
    pub fn convert(&self, value: f64, to: &Self) -> Result<f64, UnitError> {
        if self == to {
            return Ok(value);
        }
        self.check_convertible(to)?;
        Ok(rescale(value + self.zero(), self.scale_to(to)) - to.zero())
    }

    /// What one step of this unit is in steps of another: 1 degF is 5/9 K, whatever their zeros.
    ///
    /// # Errors
    ///
    /// As [`Unit::convert`].
    pub fn interval_in(&self, to: &Self) -> Result<f64, UnitError> {
        if self == to {
            return Ok(1.0);
        }
        self.check_convertible(to)?;
        Ok(rescale(1.0, self.scale_to(to)))
    }

    /// The unit in which a product with this one is taken: `K` for degC and degF, `bar` for dbar.
    #[must_use]
    pub fn counted_from_absolute_zero(&self) -> Self {
        match self.own_zero() {
            None => self.clone(),
            Some(_) if self.dimension().exponent(Base::Temperature) != Exponent::ZERO => Self::known("K"),
            Some(_) => Self::known("bar"),
        }
    }

    /// Whether the unit counts from a zero of its own, as degC does; `J/degC` does not.
    #[must_use]
    pub fn has_own_zero(&self) -> bool {
        self.own_zero().is_some()
    }

    fn own_zero(&self) -> Option<f64> {
        match &*self.factors {
            [Factor { atom, exponent }] if atom.has_own_zero() && *exponent == Exponent::ONE => {
                Some(atom.zero)
            }
            _ => None,
        }
    }

    fn zero(&self) -> f64 {
        self.own_zero().unwrap_or(0.0)
    }

    fn check_convertible(&self, to: &Self) -> Result<(), UnitError> {
        if self.expressed_as != to.expressed_as {
            return Err(self.different_substances(to));
        }
        let loosely = |unit: &Self| {
            unit.dimension().counting(Base::Equivalents, Base::Amount).counting(Base::BareKg, Base::Mass)
        };
        if loosely(self) == loosely(to) {
            return Ok(());
        }
        Err(UnitError::NotConvertible {
            from: self.symbol(),
            to: to.symbol(),
            reason: self.difference_in_words(to),
        })
    }

    fn difference_in_words(&self, to: &Self) -> String {
        let (from, to) = (self.dimension(), to.dimension());
        let differ = |base| from.exponent(base) != to.exponent(base);
        let kilograms =
            [Base::WaterMass, Base::SolutionMass, Base::BareKg].into_iter().filter(|&b| differ(b)).count();
        if differ(Base::PracticalSalinity) {
            "practical salinity is a conductivity ratio, no mass fraction".to_owned()
        } else if kilograms > 1 {
            "water and solution weigh differently; say `kg(water)` or `kg(solution)` on both sides".to_owned()
        } else if kilograms == 1 && differ(Base::Length) {
            "the density is needed".to_owned()
        } else if (differ(Base::Amount) || differ(Base::Equivalents)) && differ(Base::Mass) {
            "the molar mass is needed".to_owned()
        } else {
            "they measure different things".to_owned()
        }
    }

    pub(super) fn different_substances(&self, other: &Self) -> UnitError {
        UnitError::NotConvertible {
            from: self.symbol(),
            to: other.symbol(),
            reason: "they are expressed as different substances".to_owned(),
        }
    }

    /// The size of this unit in the other, as a number times a power of ten.
    fn scale_to(&self, to: &Self) -> (f64, i32) {
        let ((above, power_above), (below, power_below)) = (self.size(), to.size());
        (above / below, power_above - power_below)
    }

    /// The size in SI base units. Equal factors meet the same arithmetic, so that a ratio of equal sizes is exactly 1.
    fn size(&self) -> (f64, i32) {
        self.factors
            .iter()
            .map(Factor::size)
            .fold((1.0, 0), |(mantissa, power_of_ten), (m, p)| (mantissa * m, power_of_ten + p))
    }
}

impl Factor {
    fn size(&self) -> (f64, i32) {
        if self.exponent.is_integer() {
            let power = *self.exponent.numer();
            return (self.atom.mantissa.powi(power), self.atom.power_of_ten * power);
        }
        let power = f64::from(*self.exponent.numer()) / f64::from(*self.exponent.denom());
        (self.atom.mantissa.powf(power) * 10f64.powf(f64::from(self.atom.power_of_ten) * power), 0)
    }
}

/// Multiplies by an exact power of ten, or divides by one, so that a decimal shift rounds once.
fn rescale(value: f64, (mantissa, power_of_ten): (f64, i32)) -> f64 {
    let value = value * mantissa;
    match power_of_ten {
        0 => value,
        1.. => value * 10f64.powi(power_of_ten),
        _ => value / 10f64.powi(-power_of_ten),
    }
}
