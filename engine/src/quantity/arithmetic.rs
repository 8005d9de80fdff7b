//! Arithmetic with units and first-order uncertainty. Every operator gives a `Result`, since units may not fit.

use std::cmp::Ordering;
use std::ops::{Add, Div, Mul, Neg, Sub};

use super::{Quantity, QuantityError};
use crate::units::Unit;

type Outcome = Result<Quantity, QuantityError>;

impl Quantity {
    /// Integer power.
    ///
    /// # Errors
    ///
    /// As [`Quantity::powf`].
    pub fn powi(&self, power: i32) -> Outcome {
        self.powf(f64::from(power))
    }

    /// Power; the unit is raised too.
    ///
    /// # Errors
    ///
    /// [`QuantityError::Undefined`] where the power or its slope has no value (a root of a negative number, a root of
    /// an uncertain zero); [`QuantityError::Unit`] for a power no unit can take.
    pub fn powf(&self, power: f64) -> Outcome {
        let x = ready_for_product(self)?;
        let unit = x.unit.powf(power)?;
        let slope = if power == 0.0 { 0.0 } else { power * x.value.powf(power - 1.0) };
        x.function("a power", unit, x.value.powf(power), slope)
    }

    /// Square root.
    ///
    /// # Errors
    ///
    /// As [`Quantity::powf`].
    pub fn sqrt(&self) -> Outcome {
        let x = ready_for_product(self)?;
        let unit = x.unit.powf(0.5)?;
        // Correctly rounded, which a power of one half need not be.
        let root = x.value.sqrt();
        x.function("a power", unit, root, 0.5 / root)
    }

    /// e to this power.
    ///
    /// # Errors
    ///
    /// [`QuantityError::NeedsPureNumber`] when the quantity has a dimension; [`QuantityError::Undefined`] on overflow.
    pub fn exp(&self) -> Outcome {
        let x = self.pure("exp")?;
        let y = x.value.exp();
        x.function("exp", Unit::one(), y, y)
    }

    /// 10 to this power.
    ///
    /// # Errors
    ///
    /// As [`Quantity::exp`].
    pub fn exp10(&self) -> Outcome {
        let x = self.pure("exp10")?;
        let y = 10f64.powf(x.value);
        x.function("exp10", Unit::one(), y, y * std::f64::consts::LN_10)
    }

    /// Natural logarithm.
    ///
    /// # Errors
    ///
    /// [`QuantityError::NeedsPureNumber`] when the quantity has a dimension; [`QuantityError::Undefined`] for zero and
    /// below.
    pub fn ln(&self) -> Outcome {
        let x = self.pure("ln")?;
        x.function("ln", Unit::one(), x.value.ln(), 1.0 / x.value)
    }

    /// Logarithm to base 10.
    ///
    /// # Errors
    ///
    /// As [`Quantity::ln`].
    pub fn log10(&self) -> Outcome {
        let x = self.pure("log10")?;
        x.function("log10", Unit::one(), x.value.log10(), 1.0 / (x.value * std::f64::consts::LN_10))
    }

    /// Absolute value.
    #[must_use]
    pub fn abs(&self) -> Quantity {
        if self.value < 0.0 { -self } else { self.clone() }
    }

    /// The smaller of two.
    ///
    /// # Errors
    ///
    /// As [`Quantity::compare`].
    pub fn min(&self, other: &Quantity) -> Outcome {
        Ok(if self.compare(other)? == Ordering::Greater { other.clone() } else { self.clone() })
    }

    /// The larger of two.
    ///
    /// # Errors
    ///
    /// As [`Quantity::compare`].
    pub fn max(&self, other: &Quantity) -> Outcome {
        Ok(if self.compare(other)? == Ordering::Less { other.clone() } else { self.clone() })
    }

    /// The quantity as a pure number, so that `50 %` enters a function as 0.5.
    fn pure(&self, function: &'static str) -> Outcome {
        if self.unit.is_dimensionless() {
            self.to(&Unit::one())
        } else {
            Err(QuantityError::NeedsPureNumber { function, unit: self.unit.symbol() })
        }
    }

    fn function(&self, name: &str, unit: Unit, value: f64, slope: f64) -> Outcome {
        Quantity::from_partials(value, unit, &[(self, slope)]).map_err(|error| named(error, name, self.value))
    }
}

impl Neg for &Quantity {
    type Output = Quantity;

    /// Temperatures in degC change sign as written.
    fn neg(self) -> Quantity {
        let parts = self.parts.iter().cloned().map(|mut part| {
            part.sensitivity = -part.sensitivity;
            part
        });
        Quantity { value: -self.value, parts: parts.collect(), ..self.clone() }
    }
}

impl Neg for Quantity {
    type Output = Quantity;

    fn neg(self) -> Quantity {
        -&self
    }
}

/// The value of a quantity in a unit of exactly the same dimension and substance.
pub(super) fn value_in(quantity: &Quantity, unit: &Unit) -> Option<f64> {
    if quantity.unit == *unit {
        return Some(quantity.value);
    }
    let alike =
        quantity.unit.dimension() == unit.dimension() && quantity.unit.expressed_as() == unit.expressed_as();
    alike.then(|| quantity.unit.convert(quantity.value, unit).ok()).flatten()
}

/// 25 degC + 5 K is 30 degC, but 25 degC + 5 degC has no meaning.
fn add(a: &Quantity, b: &Quantity) -> Outcome {
    let differ = || QuantityError::different_units("add", a, "and", b);
    if b.unit.has_own_zero() {
        return if a.unit.has_own_zero() { Err(differ()) } else { add(b, a) };
    }
    value_in(b, &a.unit).ok_or_else(differ)?;
    shifted(a, b, 1.0)
}

/// 30 degC - 25 degC is 5 K, and 30 degC - 5 K is 25 degC.
fn subtract(a: &Quantity, b: &Quantity) -> Outcome {
    value_in(b, &a.unit).ok_or_else(|| QuantityError::different_units("subtract", b, "from", a))?;
    if b.unit.has_own_zero() {
        let absolute = b.unit.counted_from_absolute_zero();
        return shifted(&a.to(&absolute)?, &b.to(&absolute)?, -1.0);
    }
    shifted(a, b, -1.0)
}

/// a ± b in the unit of a, with b taken as a step.
fn shifted(a: &Quantity, b: &Quantity, sign: f64) -> Outcome {
    let step = sign * b.unit.interval_in(&a.unit)?;
    Quantity::from_partials(a.value + step * b.value, a.unit.clone(), &[(a, 1.0), (b, step)])
        .map_err(|error| named(error, "a sum", a.value))
}

fn multiply(a: &Quantity, b: &Quantity) -> Outcome {
    let (a, b) = (ready_for_product(a)?, ready_for_product(b)?);
    let unit = a.unit.times(&b.unit)?;
    Quantity::from_partials(a.value * b.value, unit, &[(&a, b.value), (&b, a.value)])
        .map_err(|error| named(error, "a product", a.value))
}

fn divide(a: &Quantity, b: &Quantity) -> Outcome {
    let (a, b) = (ready_for_product(a)?, ready_for_product(b)?);
    let unit = a.unit.over(&b.unit)?;
    let ratio = a.value / b.value;
    Quantity::from_partials(ratio, unit, &[(&a, 1.0 / b.value), (&b, -ratio / b.value)])
        .map_err(|error| named(error, "a division", b.value))
}

/// Counted from absolute zero (25 degC doubles to 596.3 K), and pure numbers as such (50 % of a value is half of it).
fn ready_for_product(quantity: &Quantity) -> Outcome {
    if quantity.unit.is_dimensionless() {
        return quantity.to(&Unit::one());
    }
    quantity.to(&quantity.unit.counted_from_absolute_zero())
}

fn named(error: QuantityError, operation: &str, value: f64) -> QuantityError {
    match error {
        QuantityError::Undefined { .. } => {
            QuantityError::Undefined { operation: operation.to_owned(), value }
        }
        other => other,
    }
}

/// An operator for quantities and plain numbers, by value and by reference.
macro_rules! operator {
    ($trait:ident, $method:ident, $function:ident) => {
        operator!($trait, $method, $function, &Quantity, &Quantity, |a, b| $function(a, b));
        operator!($trait, $method, $function, &Quantity, Quantity, |a, b| $function(a, &b));
        operator!($trait, $method, $function, Quantity, &Quantity, |a, b| $function(&a, b));
        operator!($trait, $method, $function, Quantity, Quantity, |a, b| $function(&a, &b));
        operator!($trait, $method, $function, &Quantity, f64, |a, b| $function(a, &b.into()));
        operator!($trait, $method, $function, Quantity, f64, |a, b| $function(&a, &b.into()));
        operator!($trait, $method, $function, f64, &Quantity, |a, b| $function(&a.into(), b));
        operator!($trait, $method, $function, f64, Quantity, |a, b| $function(&a.into(), &b));
    };
    ($trait:ident, $method:ident, $function:ident, $left:ty, $right:ty, |$a:ident, $b:ident| $body:expr) => {
        impl $trait<$right> for $left {
            type Output = Result<Quantity, QuantityError>;

            fn $method(self, $b: $right) -> Self::Output {
                let $a = self;
                $body
            }
        }
    };
}

operator!(Add, add, add);
operator!(Sub, sub, subtract);
operator!(Mul, mul, multiply);
operator!(Div, div, divide);
