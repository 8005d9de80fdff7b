//! Values with a unit and a standard uncertainty, propagated to first order with correlation (JCGM 100:2008, the GUM).
//!
//! ```text
//! u²(y) = Σ_i Σ_j  (∂y/∂x_i) (∂y/∂x_j) r(x_i, x_j) u(x_i) u(x_j)          (its equations 10 and 16)
//! ```
//!
//! A [`Quantity`] y remembers its inputs x_i and its sensitivity ∂y/∂x_i to each, so that quantities sharing an input
//! are correlated without a word said: `k - k` is 0 ± 0. An input whose standard uncertainty was not stated counts as
//! unknown, never as zero; it is left out of u(y) and reported by [`Quantity::budget`].
//!
//! ```
//! use lysocline_engine::quantity::Quantity;
//! use lysocline_engine::units::{Kind, Style};
//!
//! let calcium = Quantity::parse("41.2 +/- 0.8 mg/L", Kind::Amount, "Ca")?;
//! let twice = (&calcium * 2.0)?;
//! assert_eq!(twice.display(Style::Ascii), "82.4 +/- 1.6 mg/L");
//! assert_eq!((&calcium - &calcium)?.sigma(), Some(0.0));
//! # Ok::<(), lysocline_engine::quantity::QuantityError>(())
//! ```

use std::cmp::Ordering;
use std::sync::Arc;

use crate::units::{KgOf, Pressure, Style, Temperature, Unit};

mod arithmetic;
mod budget;
mod correlation;
mod display;
mod error;
mod input;
mod parse;

#[cfg(test)]
mod gum_examples;
#[cfg(test)]
mod propagation_tests;
#[cfg(test)]
mod tests;

pub use budget::{Budget, BudgetRow, UnstatedInput};
pub use correlation::{correlate, correlate_all, correlation};
pub(crate) use display::UNRESOLVED;
pub use error::QuantityError;
pub use input::Input;

use correlation::Correlations;

/// A value in a unit, with its sensitivity to every input it was computed from.
///
/// Cheap to clone; copies share their inputs.
#[derive(Clone, Debug)]
pub struct Quantity {
    value: f64,
    unit: Unit,
    parts: Arc<[Part]>,
    correlations: Correlations,
}

/// One input of a quantity and the quantity's sensitivity to it.
#[derive(Clone, Debug, PartialEq)]
pub struct Part {
    /// The independent input x.
    pub input: Input,
    /// ∂y/∂x, in units of y per unit of x.
    pub sensitivity: f64,
}

impl Part {
    /// The part of `factor` times the quantity.
    #[must_use]
    pub fn scaled(&self, factor: f64) -> Self {
        Self { input: self.input.clone(), sensitivity: self.sensitivity * factor }
    }
}

impl Quantity {
    /// A number known exactly: a count, a definition, a chosen condition.
    #[must_use]
    pub fn exact(value: f64, unit: Unit) -> Self {
        Self { value, unit, parts: Arc::from([]), correlations: Correlations::none() }
    }

    /// A measured value: one new input, independent of all others.
    ///
    /// # Errors
    ///
    /// [`QuantityError::Sigma`] when `sigma` is negative or no finite number.
    pub fn measured(value: f64, unit: Unit, sigma: Option<f64>, label: &str) -> Result<Self, QuantityError> {
        Ok(Self::of_input(value, unit, Input::written(label, sigma)?))
    }

    /// A value published with an expanded uncertainty U = k u; `coverage` is k, so 2 for a 2-sigma interval.
    ///
    /// # Errors
    ///
    /// [`QuantityError::Sigma`] when `expanded` is negative, [`QuantityError::Coverage`] when `coverage` is not
    /// positive.
    pub fn uncertain(
        value: f64,
        expanded: f64,
        unit: Unit,
        coverage: f64,
        label: &str,
    ) -> Result<Self, QuantityError> {
        if !(coverage.is_finite() && coverage > 0.0) {
            return Err(QuantityError::Coverage { coverage });
        }
        Self::measured(value, unit, Some(expanded / coverage), label)
    }

    /// The value of one input, such as a ledger constant with a name of its own.
    #[must_use]
    pub fn of_input(value: f64, unit: Unit, input: Input) -> Self {
        Self::from_parts(value, unit, vec![Part { input, sensitivity: 1.0 }])
    }

    /// A value with known sensitivities to its inputs. Parts of the same input are added.
    #[must_use]
    pub fn from_parts(value: f64, unit: Unit, parts: Vec<Part>) -> Self {
        Self { value, unit, parts: gather(parts), correlations: Correlations::none() }
    }

    /// A value computed from quantities, by the chain rule: ∂y/∂x = Σ ∂y/∂q ∂q/∂x.
    ///
    /// `partials` pairs each quantity q with ∂y/∂q in the units of y per unit of q. This is how a solver's result
    /// receives its uncertainty.
    ///
    /// # Errors
    ///
    /// [`QuantityError::Undefined`] when the value or a partial is no finite number; the errors of combining
    /// declared correlations that contradict each other.
    pub fn from_partials(value: f64, unit: Unit, partials: &[(&Self, f64)]) -> Result<Self, QuantityError> {
        let mut correlations = Correlations::none();
        let mut parts = Vec::with_capacity(partials.iter().map(|(q, _)| q.parts.len()).sum());
        for (quantity, partial) in partials {
            correlations = correlations.union(&quantity.correlations)?;
            parts.extend(
                quantity
                    .parts
                    .iter()
                    .map(|part| Part { input: part.input.clone(), sensitivity: part.sensitivity * partial }),
            );
        }
        if !value.is_finite() || parts.iter().any(|part| !part.sensitivity.is_finite()) {
            return Err(QuantityError::Undefined { operation: "this calculation".to_owned(), value });
        }
        Ok(Self { value, unit, parts: gather(parts), correlations })
    }

    /// The value, in [`Quantity::unit`].
    #[must_use]
    pub fn value(&self) -> f64 {
        self.value
    }

    /// The unit.
    #[must_use]
    pub fn unit(&self) -> &Unit {
        &self.unit
    }

    /// The inputs and the sensitivities to them, sorted by input.
    #[must_use]
    pub fn parts(&self) -> &[Part] {
        &self.parts
    }

    /// The standard uncertainty from the inputs that state one, in the unit of the value (for degC: in K).
    ///
    /// # Returns
    ///
    /// 0 when the value depends on no input; `None` when it depends only on inputs without a stated uncertainty.
    #[must_use]
    pub fn sigma(&self) -> Option<f64> {
        if self.parts.is_empty() {
            return Some(0.0);
        }
        let stated = self.parts.iter().any(|part| part.input.sigma().is_some());
        stated.then(|| correlation::covariance(self, self, &self.correlations).max(0.0).sqrt())
    }

    /// The standard uncertainty as a fraction of the value; temperatures and sea pressures count from absolute zero.
    ///
    /// # Returns
    ///
    /// `None` when the uncertainty is not stated or the value is zero.
    #[must_use]
    pub fn relative(&self) -> Option<f64> {
        let absolute = self.to(&self.unit.counted_from_absolute_zero()).ok()?;
        let relative = absolute.sigma()? / absolute.value.abs();
        relative.is_finite().then_some(relative)
    }

    /// The same quantity in another unit; see [`Unit::convert`].
    ///
    /// # Errors
    ///
    /// [`QuantityError::Unit`] when the units measure different things.
    pub fn to(&self, unit: &Unit) -> Result<Self, QuantityError> {
        if *unit == self.unit {
            return Ok(self.clone());
        }
        let value = self.unit.convert(self.value, unit)?;
        Self::from_partials(value, unit.clone(), &[(self, self.unit.interval_in(unit)?)])
    }

    /// A computed number given a unit, keeping its inputs: what `quantity(x, "mg/L")` means. A value that has a unit
    /// already is converted.
    ///
    /// # Errors
    ///
    /// As [`Quantity::to`].
    pub fn given_in(&self, unit: &Unit) -> Result<Self, QuantityError> {
        if self.unit.is_dimensionless() {
            Ok(Self { unit: unit.clone(), ..self.to(&Unit::one())? })
        } else {
            self.to(unit)
        }
    }

    /// The same value as a published one: the input of this name, wherever it is read. See [`Input::named`].
    ///
    /// # Errors
    ///
    /// [`QuantityError::Sigma`] when the uncertainty has outgrown what a number can hold.
    pub fn published_as(&self, name: &str, label: &str) -> Result<Self, QuantityError> {
        Ok(Self::of_input(self.value, self.unit.clone(), Input::named(name, label, self.sigma())?))
    }

    /// The value with every input moved by `z` of its standard uncertainties, to first order: one random draw when `z`
    /// gives a standard normal number for each input. Inputs that state no uncertainty stay.
    #[must_use]
    pub fn value_moved(&self, z: impl Fn(&Input) -> f64) -> f64 {
        let moves = self
            .parts
            .iter()
            .filter_map(|part| Some(part.sensitivity * part.input.sigma()? * z(&part.input)));
        self.value + correlation::sum_by_size(moves.collect())
    }

    /// The same quantity with every bare `/kg` made plain; see [`Unit::per_kg_of`].
    #[must_use]
    pub fn per_kg_of(&self, what: KgOf) -> Self {
        Self { unit: self.unit.per_kg_of(what), ..self.clone() }
    }

    /// The correlation coefficient declared for two of the inputs; 0 where none was, 1 for an input and itself.
    #[must_use]
    pub fn input_correlation(&self, a: &Input, b: &Input) -> f64 {
        if a == b { 1.0 } else { self.correlations.coefficient(a.key(), b.key()) }
    }

    /// Which of two quantities is larger, by value alone; units of the same dimension are converted.
    ///
    /// # Errors
    ///
    /// [`QuantityError::DifferentUnits`] when the units cannot be compared.
    pub fn compare(&self, other: &Self) -> Result<Ordering, QuantityError> {
        let other_value = arithmetic::value_in(other, &self.unit)
            .ok_or_else(|| QuantityError::different_units("compare", self, "with", other))?;
        let undefined = || QuantityError::Undefined { operation: "a comparison".to_owned(), value: f64::NAN };
        self.value.partial_cmp(&other_value).ok_or_else(undefined)
    }

    /// Where the uncertainty comes from.
    #[must_use]
    pub fn budget(&self) -> Budget {
        budget::budget(self)
    }

    /// The quantity written out: `41.2 ± 0.8 mg/L`.
    #[must_use]
    pub fn display(&self, style: Style) -> String {
        display::quantity(self, style)
    }
}

impl From<f64> for Quantity {
    fn from(value: f64) -> Self {
        Self::exact(value, Unit::one())
    }
}

impl TryFrom<&Quantity> for Temperature {
    type Error = QuantityError;

    /// The value alone, without its uncertainty.
    fn try_from(quantity: &Quantity) -> Result<Self, QuantityError> {
        Ok(Self::from_kelvin(quantity.to(&Unit::known("K"))?.value)?)
    }
}

impl TryFrom<&Quantity> for Pressure {
    type Error = QuantityError;

    /// The value alone, without its uncertainty.
    fn try_from(quantity: &Quantity) -> Result<Self, QuantityError> {
        Ok(Self::from_bar(quantity.to(&Unit::known("bar"))?.value)?)
    }
}

/// Sorts parts by input, adds up those of one input, and drops what cancels but for rounding.
fn gather(mut parts: Vec<Part>) -> Arc<[Part]> {
    parts.sort_by(|a, b| a.input.cmp(&b.input));
    let mut gathered: Vec<Part> = Vec::with_capacity(parts.len());
    for part in parts {
        match gathered.last_mut().filter(|last| last.input == part.input) {
            Some(last) => {
                last.sensitivity = sum_or_zero(last.sensitivity, part.sensitivity);
                last.input = last.input.better_stated(&part.input);
            }
            None => gathered.push(part),
        }
    }
    gathered.retain(|part| part.sensitivity != 0.0);
    gathered.into()
}

/// The sum, with a remainder of rounding taken for the zero it is: otherwise `k/3 + 2*k/3 - k` would still list k.
fn sum_or_zero(a: f64, b: f64) -> f64 {
    let sum = a + b;
    if sum.abs() <= 4.0 * f64::EPSILON * a.abs().max(b.abs()) { 0.0 } else { sum }
}
