//! log10 K as a function of temperature, and of salinity in seawater: a vector over a fixed set of terms.
//!
//! ```text
//! log10 K(T)    = a + b T + c/T + d log10 T + e/T² + f T² + g √T + …          T in kelvin
//! log10 K(T, S) = Σ_ij a_ij fᵢ(T) gⱼ(S)                        gⱼ = 1, √S, S, …: see [`super::salinity_term`]
//! ```
//!
//! Published functions are of this form, and so is the van 't Hoff equation with constant enthalpy and heat capacity of
//! reaction (integrated from T₀, R in kJ/(mol K)):
//!
//! ```text
//! ln K(T) = ln K(T₀) - (ΔH - T₀ ΔCp)/R (1/T - 1/T₀) + ΔCp/R ln(T/T₀)
//! ```
//!
//! Functions of one form add and scale exactly, term by term: no sampling, no refitting. A constant known at one
//! temperature only is kept apart, since nothing can be said of it elsewhere.

use std::collections::BTreeMap;

use super::rational::{self, Rational};
use super::salinity_term::{Product, SalinityTerm};
use crate::physics::constants::GAS_CONSTANT;
use crate::units::Temperature;

const LN_10: f64 = std::f64::consts::LN_10;
/// Gas constant in kJ/(mol K).
const R_KJ: f64 = GAS_CONSTANT / 1000.0;

/// One term of the vector; `ln T` is read as `log10 T` times ln 10.
#[derive(Debug, Clone, Copy, PartialEq, Eq, PartialOrd, Ord)]
pub enum Term {
    /// 1.
    One,
    /// T.
    T,
    /// 1/T.
    InverseT,
    /// log10 T.
    Log10T,
    /// 1/T².
    InverseT2,
    /// T².
    T2,
    /// √T.
    SqrtT,
    /// 1/ln T.
    InverseLnT,
}

/// log10 K with its dependence on temperature (and salinity) and the range in which that holds.
#[derive(Debug, Clone, PartialEq)]
pub struct LogK {
    dependence: Dependence,
    range: Option<Range>,
    salinities: Option<Salinities>,
}

/// A range of practical salinity, both ends included.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Salinities {
    /// The lowest salinity.
    pub lowest: f64,
    /// The highest salinity.
    pub highest: f64,
}

#[derive(Debug, Clone, PartialEq)]
enum Dependence {
    /// Coefficients that are not zero.
    Function(Coefficients),
    /// Known at one temperature only.
    Only { value: f64, at: Temperature },
}

type Coefficients = BTreeMap<Product, f64>;

/// A range of temperatures, both ends included.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Range {
    /// The lowest temperature.
    pub lowest: Temperature,
    /// The highest temperature.
    pub highest: Temperature,
}

/// Why two constants do not add, or one has no value.
#[derive(Debug, Clone, PartialEq, thiserror::Error)]
#[non_exhaustive]
pub enum LogKError {
    /// Asked for at a temperature where nothing is known.
    #[error("known at {known:.2} degC only, not at {asked:.2} degC")]
    OneTemperature {
        /// Where it is known, degC.
        known: f64,
        /// Where it was asked for, degC.
        asked: f64,
    },
    /// One of two terms is known at one temperature only, and the other is not known there alone.
    #[error("one is known at {known:.2} degC only")]
    NoCommonTemperature {
        /// Where it is known, degC.
        known: f64,
    },
}

impl Term {
    /// Every term, in the order coefficients are kept.
    pub const ALL: [Self; 8] = [
        Self::One,
        Self::T,
        Self::InverseT,
        Self::Log10T,
        Self::InverseT2,
        Self::T2,
        Self::SqrtT,
        Self::InverseLnT,
    ];

    /// Reads a term as it is written in `log_k_terms`, with the factor its coefficient takes (ln 10 for `ln(T)`).
    #[must_use]
    pub fn parse(text: &str) -> Option<(Self, f64)> {
        let term = match text.replace(' ', "").as_str() {
            "1" => Self::One,
            "T" => Self::T,
            "1/T" => Self::InverseT,
            "log10(T)" => Self::Log10T,
            "ln(T)" => return Some((Self::Log10T, LN_10)),
            "1/T^2" => Self::InverseT2,
            "T^2" => Self::T2,
            "sqrt(T)" => Self::SqrtT,
            "1/ln(T)" => Self::InverseLnT,
            _ => return None,
        };
        Some((term, 1.0))
    }

    /// As it is written in `log_k_terms`.
    #[must_use]
    pub fn written(self) -> &'static str {
        match self {
            Self::One => "1",
            Self::T => "T",
            Self::InverseT => "1/T",
            Self::Log10T => "log10(T)",
            Self::InverseT2 => "1/T^2",
            Self::T2 => "T^2",
            Self::SqrtT => "sqrt(T)",
            Self::InverseLnT => "1/ln(T)",
        }
    }

    /// Its value at T kelvin.
    #[must_use]
    pub fn at(self, t: f64) -> f64 {
        match self {
            Self::One => 1.0,
            Self::T => t,
            Self::InverseT => 1.0 / t,
            Self::Log10T => t.log10(),
            Self::InverseT2 => 1.0 / (t * t),
            Self::T2 => t * t,
            Self::SqrtT => t.sqrt(),
            Self::InverseLnT => 1.0 / t.ln(),
        }
    }

    /// d(term)/dT.
    fn slope(self, t: f64) -> f64 {
        match self {
            Self::One => 0.0,
            Self::T => 1.0,
            Self::InverseT => -1.0 / (t * t),
            Self::Log10T => 1.0 / (t * LN_10),
            Self::InverseT2 => -2.0 / (t * t * t),
            Self::T2 => 2.0 * t,
            Self::SqrtT => 0.5 / t.sqrt(),
            Self::InverseLnT => -1.0 / (t * t.ln() * t.ln()),
        }
    }

    /// d²(term)/dT².
    fn curvature(self, t: f64) -> f64 {
        match self {
            Self::One | Self::T => 0.0,
            Self::InverseT => 2.0 / t.powi(3),
            Self::Log10T => -1.0 / (t * t * LN_10),
            Self::InverseT2 => 6.0 / t.powi(4),
            Self::T2 => 2.0,
            Self::SqrtT => -0.25 / (t * t.sqrt()),
            Self::InverseLnT => (1.0 + 2.0 / t.ln()) / (t * t.ln()).powi(2),
        }
    }
}

impl LogK {
    /// A published function of temperature.
    #[must_use]
    pub fn function(coefficients: &[(Term, f64)]) -> Self {
        Self::of(coefficients.iter().map(|(term, coefficient)| (Product::of(*term), *coefficient)))
    }

    /// A published function of temperature and salinity.
    #[must_use]
    pub fn of(coefficients: impl IntoIterator<Item = (Product, f64)>) -> Self {
        let mut vector = Coefficients::new();
        add(&mut vector, coefficients);
        Self { dependence: Dependence::Function(vector), range: None, salinities: None }
    }

    /// A value at one temperature, nothing known elsewhere.
    #[must_use]
    pub fn only(value: f64, at: Temperature) -> Self {
        Self { dependence: Dependence::Only { value, at }, range: None, salinities: None }
    }

    /// The van 't Hoff equation from a value at T₀.
    ///
    /// `enthalpy` ΔH in kJ/mol and `heat_capacity` ΔCp in kJ/(mol K), both of reaction at `at` and 1 bar.
    #[must_use]
    pub fn van_t_hoff(value: f64, at: Temperature, enthalpy: f64, heat_capacity: f64) -> Self {
        let t0 = at.kelvin();
        let inverse = -(enthalpy - t0 * heat_capacity) / (R_KJ * LN_10);
        let logarithm = heat_capacity / R_KJ; // of log10 T, as ln T / ln 10 = log10 T
        let one = value - inverse / t0 - logarithm * t0.log10();
        Self::function(&[(Term::One, one), (Term::InverseT, inverse), (Term::Log10T, logarithm)])
    }

    /// The same, stated to hold within `range`.
    #[must_use]
    pub fn within(mut self, range: Range) -> Self {
        self.range = Some(range);
        self
    }

    /// The same, one value at `at`, with nothing claimed elsewhere.
    ///
    /// # Errors
    ///
    /// [`LogKError::OneTemperature`] if nothing is known at `at`.
    pub fn frozen_at(&self, at: Temperature) -> Result<Self, LogKError> {
        Ok(Self { dependence: Dependence::Only { value: self.at(at)?, at }, ..self.clone() })
    }

    /// The same stated to hold within a range of salinity.
    #[must_use]
    pub fn within_salinities(mut self, salinities: Salinities) -> Self {
        self.salinities = Some(salinities);
        self
    }

    /// The function of temperature that it is at one salinity: exact, as every term is a product.
    #[must_use]
    pub fn at_salinity(&self, salinity: f64) -> Self {
        let dependence = match &self.dependence {
            Dependence::Function(vector) => {
                let mut there = Coefficients::new();
                add(
                    &mut there,
                    vector.iter().map(|(product, c)| {
                        (Product::of(product.temperature), c * product.salinity.at(salinity))
                    }),
                );
                Dependence::Function(there)
            }
            only => only.clone(),
        };
        Self { dependence, ..self.clone() }
    }

    /// Whether it depends on salinity.
    #[must_use]
    pub fn depends_on_salinity(&self) -> bool {
        self.vector().is_some_and(|vector| vector.keys().any(|product| product.salinity != SalinityTerm::One))
    }

    /// The stated range of salinity.
    #[must_use]
    pub fn salinities(&self) -> Option<Salinities> {
        self.salinities
    }

    /// log10 K at a temperature, whether or not it lies in the stated range (see [`LogK::outside`]); a function of
    /// salinity counts at zero salinity (see [`LogK::at_salinity`]).
    ///
    /// # Errors
    ///
    /// [`LogKError::OneTemperature`] if nothing is known there.
    pub fn at(&self, temperature: Temperature) -> Result<f64, LogKError> {
        match &self.dependence {
            Dependence::Function(vector) => Ok(sum(vector, |term| term.at(temperature.kelvin()))),
            Dependence::Only { value, at } if same(*at, temperature) => Ok(*value),
            Dependence::Only { at, .. } => {
                Err(LogKError::OneTemperature { known: at.celsius(), asked: temperature.celsius() })
            }
        }
    }

    /// log10 K at a temperature, or, if it is known at one temperature only, there; with the distance in kelvin.
    #[must_use]
    pub fn nearest_to(&self, temperature: Temperature) -> (f64, f64) {
        match &self.dependence {
            Dependence::Function(vector) => (sum(vector, |term| term.at(temperature.kelvin())), 0.0),
            Dependence::Only { value, at } => (*value, (temperature.kelvin() - at.kelvin()).abs()),
        }
    }

    /// Enthalpy of reaction, kJ/mol: ΔH = R ln 10 T² d(log10 K)/dT. `None` if known at one temperature only.
    #[must_use]
    pub fn enthalpy(&self, temperature: Temperature) -> Option<f64> {
        let t = temperature.kelvin();
        Some(R_KJ * LN_10 * t * t * sum(self.vector()?, |term| term.slope(t)))
    }

    /// Heat capacity of reaction, kJ/(mol K): the derivative of [`LogK::enthalpy`].
    #[must_use]
    pub fn heat_capacity(&self, temperature: Temperature) -> Option<f64> {
        let t = temperature.kelvin();
        let vector = self.vector()?;
        Some(R_KJ * LN_10 * sum(vector, |term| 2.0 * t * term.slope(t) + t * t * term.curvature(t)))
    }

    /// The one temperature it is known at, if it is no function of temperature.
    #[must_use]
    pub fn only_at(&self) -> Option<Temperature> {
        match self.dependence {
            Dependence::Function(_) => None,
            Dependence::Only { at, .. } => Some(at),
        }
    }

    /// Coefficients that are not zero, if it is a function of temperature.
    #[must_use]
    pub fn terms(&self) -> Option<Vec<(Product, f64)>> {
        Some(self.vector()?.iter().map(|(product, coefficient)| (*product, *coefficient)).collect())
    }

    /// The stated range of temperature.
    #[must_use]
    pub fn range(&self) -> Option<Range> {
        self.range
    }

    /// By how many kelvin a temperature lies outside the stated range; 0 inside, or where none is stated.
    #[must_use]
    pub fn outside(&self, temperature: Temperature) -> f64 {
        self.range.map_or(0.0, |range| range.distance(temperature))
    }

    /// log10 of Kⁿ.
    #[must_use]
    pub fn times(&self, multiple: Rational) -> Self {
        self.scaled(rational::to_f64(multiple))
    }

    /// The function times a number.
    #[must_use]
    pub fn scaled(&self, n: f64) -> Self {
        let dependence = match &self.dependence {
            Dependence::Function(vector) => {
                let mut scaled = Coefficients::new();
                add(&mut scaled, vector.iter().map(|(product, coefficient)| (*product, n * coefficient)));
                Dependence::Function(scaled)
            }
            Dependence::Only { value, at } => Dependence::Only { value: n * value, at: *at },
        };
        Self { dependence, ..self.clone() }
    }

    /// log10 of a product of constants, in the range common to both.
    ///
    /// # Errors
    ///
    /// [`LogKError::NoCommonTemperature`] if one is known at a single temperature and the other is not known just there.
    pub fn plus(&self, other: &Self) -> Result<Self, LogKError> {
        use Dependence::{Function, Only};
        let dependence = match (&self.dependence, &other.dependence) {
            (Function(a), Function(b)) => {
                let mut sum = a.clone();
                add(&mut sum, b.iter().map(|(product, coefficient)| (*product, *coefficient)));
                Function(sum)
            }
            (Only { value: a, at }, Only { value: b, at: other }) if same(*at, *other) => {
                Only { value: a + b, at: *at }
            }
            (Only { at, .. }, _) | (_, Only { at, .. }) => {
                return Err(LogKError::NoCommonTemperature { known: at.celsius() });
            }
        };
        let range = match (self.range, other.range) {
            (Some(a), Some(b)) => Some(a.common(b)),
            (a, b) => a.or(b),
        };
        let salinities = match (self.salinities, other.salinities) {
            (Some(a), Some(b)) => Some(a.common(b)),
            (a, b) => a.or(b),
        };
        Ok(Self { dependence, range, salinities })
    }

    /// log10 K + `shift`, as when the standard state of a gas changes.
    #[must_use]
    pub fn shifted(&self, shift: f64) -> Self {
        let mut shifted = self.clone();
        match &mut shifted.dependence {
            Dependence::Function(vector) => add(vector, [(Product::of(Term::One), shift)]),
            Dependence::Only { value, .. } => *value += shift,
        }
        shifted
    }

    /// log10 K with terms added, as when gases are counted otherwise: a function everywhere, else at its one temperature.
    #[must_use]
    pub fn with_terms(&self, terms: &[(Term, f64)]) -> Self {
        match self.only_at() {
            None => self.plus(&Self::function(terms)).expect("functions of temperature add"),
            Some(at) => self.shifted(terms.iter().map(|(term, c)| c * term.at(at.kelvin())).sum()),
        }
    }

    /// Whether it is zero at all temperatures.
    #[must_use]
    pub fn is_zero(&self) -> bool {
        match &self.dependence {
            Dependence::Function(vector) => vector.is_empty(),
            Dependence::Only { value, .. } => *value == 0.0,
        }
    }

    fn vector(&self) -> Option<&Coefficients> {
        match &self.dependence {
            Dependence::Function(vector) => Some(vector),
            Dependence::Only { .. } => None,
        }
    }
}

impl Range {
    /// By how many kelvin a temperature lies outside; 0 inside.
    #[must_use]
    pub fn distance(self, temperature: Temperature) -> f64 {
        let t = temperature.kelvin();
        // A reading at the end of the range, such as 90 degC, must not fall out by a rounding error.
        let below = self.lowest.kelvin() - t;
        let above = t - self.highest.kelvin();
        let distance = below.max(above);
        if distance > 1e-9 { distance } else { 0.0 }
    }

    fn common(self, other: Self) -> Self {
        let later = |a: Temperature, b: Temperature| if a.kelvin() >= b.kelvin() { a } else { b };
        let earlier = |a: Temperature, b: Temperature| if a.kelvin() <= b.kelvin() { a } else { b };
        Self { lowest: later(self.lowest, other.lowest), highest: earlier(self.highest, other.highest) }
    }
}

impl Salinities {
    /// By how much a salinity lies outside; 0 inside.
    #[must_use]
    pub fn distance(self, salinity: f64) -> f64 {
        (self.lowest - salinity).max(salinity - self.highest).max(0.0)
    }

    fn common(self, other: Self) -> Self {
        Self { lowest: self.lowest.max(other.lowest), highest: self.highest.min(other.highest) }
    }
}

/// Adds coefficients; what cancels leaves.
fn add(vector: &mut Coefficients, more: impl IntoIterator<Item = (Product, f64)>) {
    for (product, coefficient) in more {
        *vector.entry(product).or_insert(0.0) += coefficient;
    }
    vector.retain(|_, coefficient| *coefficient != 0.0);
}

/// At zero salinity, where every factor of salinity but 1 vanishes.
fn sum(vector: &Coefficients, value: impl Fn(Term) -> f64) -> f64 {
    let terms = vector.iter().filter(|(product, _)| product.salinity == SalinityTerm::One);
    terms.map(|(product, c)| c * value(product.temperature)).sum()
}

fn same(a: Temperature, b: Temperature) -> bool {
    (a.kelvin() - b.kelvin()).abs() < 1e-9
}

#[cfg(test)]
mod tests {
    use super::*;
    use approx::assert_abs_diff_eq;

    fn celsius(t: f64) -> Temperature {
        Temperature::from_celsius(t).unwrap()
    }

    /// Calcite, Plummer & Busenberg (1982).
    fn calcite() -> LogK {
        LogK::function(&[
            (Term::One, -171.9065),
            (Term::T, -0.077993),
            (Term::InverseT, 2839.319),
            (Term::Log10T, 71.595),
        ])
    }

    #[test]
    fn a_published_function_gives_its_stated_value_and_enthalpy() {
        assert_abs_diff_eq!(calcite().at(celsius(25.0)).unwrap(), -8.480, epsilon = 5e-4);
        // The paper states -2.297 kcal/mol at 25 degC.
        assert_abs_diff_eq!(calcite().enthalpy(celsius(25.0)).unwrap() / 4.184, -2.297, epsilon = 5e-4);
    }

    #[test]
    fn slopes_are_those_of_the_function() {
        let all = LogK::function(&Term::ALL.map(|term| (term, 1.0)));
        for t in [5.0, 25.0, 90.0] {
            let step = 1e-3;
            let (low, high) = (celsius(t - step), celsius(t + step));
            let slope = (all.at(high).unwrap() - all.at(low).unwrap()) / (2.0 * step);
            let enthalpy = R_KJ * LN_10 * celsius(t).kelvin().powi(2) * slope;
            assert_abs_diff_eq!(all.enthalpy(celsius(t)).unwrap(), enthalpy, epsilon = enthalpy.abs() * 1e-7);
            let heat = (all.enthalpy(high).unwrap() - all.enthalpy(low).unwrap()) / (2.0 * step);
            assert_abs_diff_eq!(all.heat_capacity(celsius(t)).unwrap(), heat, epsilon = heat.abs() * 1e-7);
        }
    }

    #[test]
    fn van_t_hoff_keeps_value_enthalpy_and_heat_capacity() {
        let t0 = celsius(25.0);
        let log_k = LogK::van_t_hoff(-6.352, t0, 9.11, -0.37);
        assert_abs_diff_eq!(log_k.at(t0).unwrap(), -6.352, epsilon = 1e-12);
        assert_abs_diff_eq!(log_k.enthalpy(t0).unwrap(), 9.11, epsilon = 1e-10);
        assert_abs_diff_eq!(log_k.heat_capacity(t0).unwrap(), -0.37, epsilon = 1e-12);
        assert_abs_diff_eq!(log_k.enthalpy(celsius(35.0)).unwrap(), 9.11 - 3.7, epsilon = 1e-10);
    }

    #[test]
    fn sums_hold_in_the_common_range() {
        let range = |a, b| Range { lowest: celsius(a), highest: celsius(b) };
        let sum = calcite()
            .within(range(0.0, 90.0))
            .plus(&calcite().times(2.into()).within(range(5.0, 80.0)))
            .unwrap();
        assert_eq!(sum.range(), Some(range(5.0, 80.0)));
        assert_abs_diff_eq!(
            sum.at(celsius(25.0)).unwrap(),
            3.0 * calcite().at(celsius(25.0)).unwrap(),
            epsilon = 1e-10
        );
        assert_abs_diff_eq!(sum.outside(celsius(90.0)), 10.0, epsilon = 1e-9);
        assert_abs_diff_eq!(sum.outside(celsius(80.0)), 0.0);
    }

    #[test]
    fn one_temperature_is_not_stretched() {
        let only = LogK::only(-0.25, celsius(25.0));
        assert_eq!(only.at(celsius(25.0)), Ok(-0.25));
        assert_eq!(
            only.at(celsius(10.0)).unwrap_err().to_string(),
            "known at 25.00 degC only, not at 10.00 degC"
        );
        assert!(only.plus(&calcite()).is_err());
        assert!(only.plus(&calcite().frozen_at(celsius(25.0)).unwrap()).is_ok());
        assert_eq!(only.enthalpy(celsius(25.0)), None);
    }
}
