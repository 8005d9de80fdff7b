//! A reaction: an equation and, where one is known, its equilibrium constant.
//!
//! K belongs to the reaction as written, with products positive. Written the other way round log K changes sign, taken n
//! times it is multiplied by n, and added reactions add their log K.

use std::fmt;

use super::conditions::{Conditions, GasStandard};
use super::equation::{Equation, EquationError};
use super::history::{History, Origin, Provenance};
use super::log_k::{LogK, LogKError, Range, Term};
use super::rational::{self, Rational};
use crate::named::{self, KeyFault, Named, Value};
use crate::nearest::nearest;
use crate::physics::constants::GAS_CONSTANT;
use crate::quantity::{Input, Part, Quantity};
use crate::text::list;
use crate::units::{Kind, Temperature, Unit};

const LN_10: f64 = std::f64::consts::LN_10;
/// Gas constant in kJ/(mol K).
const R_KJ: f64 = GAS_CONSTANT / 1000.0;
/// How far a stated value may lie from the typed function: half a unit of its second decimal.
const TYPING_TOLERANCE: f64 = 0.005;

/// An equation with its constant; a value, never changed in place.
#[derive(Clone, PartialEq)]
pub struct Reaction {
    equation: Equation,
    constant: Option<Constant>,
}

/// An equilibrium constant: its value, the temperature it is quoted at, its conditions and its history.
#[derive(Debug, Clone, PartialEq)]
pub struct Constant {
    /// log10 K.
    pub log_k: LogK,
    /// The reaction's own temperature, at which it is quoted.
    pub temperature: Temperature,
    /// The conditions in which it holds.
    pub conditions: Conditions,
    /// Where it came from.
    pub history: History,
}

/// Why a reaction cannot be made, or cannot answer.
#[derive(Debug, Clone, PartialEq, thiserror::Error)]
#[non_exhaustive]
pub enum ReactionError {
    /// The equation is at fault.
    #[error(transparent)]
    Equation(#[from] EquationError),
    /// An option is at fault.
    #[error(transparent)]
    Option(#[from] KeyFault),
    /// There is an equation and no constant.
    #[error("`{0}` has no constant: give it one, as in `reaction(\"{0}\", #{{ log_k: -6.35 }})`")]
    NoConstant(String),
    /// The constant says nothing at the temperature asked for.
    #[error(
        "log K of `{equation}` is {why}; give it an `enthalpy` or `log_k_terms`, or use `.at(\"25 degC\")`"
    )]
    Temperature {
        /// The reaction.
        equation: String,
        /// What is known.
        why: LogKError,
    },
    /// A term known at one temperature meets one that is a function.
    #[error(
        "log K of `{fixed}` is known at {known:.2} degC only, that of `{other}` is not: give `{fixed}` an `enthalpy`, \
         or add `.at(\"{known:.0} degC\")` to the other"
    )]
    NoCommonTemperature {
        /// The reaction known at one temperature.
        fixed: String,
        /// The reaction it was added to.
        other: String,
        /// That temperature in degC.
        known: f64,
    },
    /// Gas constants with different standard pressures.
    #[error(
        "`{left}` counts gases from {left_standard}, `{right}` from {right_standard}: \
         convert one with `.to_gas_standard(\"{left_standard}\")`"
    )]
    GasStandards {
        /// The left reaction.
        left: String,
        /// Its standard.
        left_standard: GasStandard,
        /// The right reaction.
        right: String,
        /// Its standard.
        right_standard: GasStandard,
    },
    /// One has a constant, the other none.
    #[error("`{0}` has no constant, so the sum has none either: give it one, or add the equations alone")]
    OneWithoutConstant(String),
}

impl Reaction {
    /// Stoichiometry alone.
    ///
    /// # Errors
    ///
    /// Returns what is wrong with the equation.
    pub fn stoichiometry(equation: &str) -> Result<Self, ReactionError> {
        Ok(Self { equation: Equation::parse(equation)?, constant: None })
    }

    /// A reaction with its constant from named options: one of `log_k`, `ln_k`, `k`, `pk`, `gibbs` (kJ/mol) or
    /// `log_k_terms`; `enthalpy` (kJ/mol), `heat_capacity` (J/(mol K)), `temperature`, `value_at`, `sigma`, `range`,
    /// `gas_standard`, `source`, `provenance`, `note`.
    ///
    /// `name` labels it in histories. `identity` is a text that is the same whenever the same published constant is
    /// read again, so that its uncertainty is counted once; values typed by a user have none.
    ///
    /// # Errors
    ///
    /// Returns what is wrong with the equation, or with an option, naming its key.
    pub fn read(
        equation: &str,
        name: Option<&str>,
        options: Named,
        identity: Option<&str>,
    ) -> Result<Self, ReactionError> {
        let equation = Equation::parse(equation)?;
        let constant = Statement::read(options)?.constant(&equation, name, identity)?;
        Ok(Self { equation, constant })
    }

    /// A reaction of an equation and a constant that belong together.
    #[must_use]
    pub fn of(equation: Equation, constant: Constant) -> Self {
        Self { equation, constant: Some(constant) }
    }

    /// The equation.
    #[must_use]
    pub fn equation(&self) -> &Equation {
        &self.equation
    }

    /// The constant.
    ///
    /// # Errors
    ///
    /// [`ReactionError::NoConstant`] if the reaction is stoichiometry alone.
    pub fn constant(&self) -> Result<&Constant, ReactionError> {
        self.constant.as_ref().ok_or_else(|| ReactionError::NoConstant(self.equation.to_string()))
    }

    /// log10 K at the reaction's own temperature.
    ///
    /// # Errors
    ///
    /// As [`Reaction::constant`].
    pub fn log_k(&self) -> Result<Quantity, ReactionError> {
        self.log_k_at(self.constant()?.temperature)
    }

    /// log10 K at a temperature; whether that lies in the constant's range is for the caller to ask
    /// ([`LogK::outside`]).
    ///
    /// # Errors
    ///
    /// [`ReactionError::NoConstant`], or [`ReactionError::Temperature`] where nothing is known.
    pub fn log_k_at(&self, temperature: Temperature) -> Result<Quantity, ReactionError> {
        let constant = self.constant()?;
        let value = constant.log_k.at(temperature);
        let value =
            value.map_err(|why| ReactionError::Temperature { equation: self.equation.to_string(), why })?;
        Ok(Quantity::from_parts(value, Unit::one(), constant.history.parts()))
    }

    /// Standard Gibbs energy of reaction, kJ/mol: -RT ln K at the reaction's own temperature.
    ///
    /// # Errors
    ///
    /// As [`Reaction::constant`].
    pub fn gibbs(&self) -> Result<Quantity, ReactionError> {
        let constant = self.constant()?;
        let factor = -R_KJ * constant.temperature.kelvin() * LN_10;
        let value = constant.log_k.nearest_to(constant.temperature).0 * factor;
        let parts = constant.history.parts().iter().map(|part| part.scaled(factor)).collect();
        Ok(Quantity::from_parts(value, Kind::Energy.default_unit(), parts))
    }

    /// Enthalpy of reaction, kJ/mol, at the reaction's own temperature; `None` where it is not known.
    ///
    /// # Errors
    ///
    /// As [`Reaction::constant`].
    pub fn enthalpy(&self) -> Result<Option<f64>, ReactionError> {
        let constant = self.constant()?;
        Ok(constant.log_k.enthalpy(constant.temperature))
    }

    /// Entropy of reaction, J/(mol K): (ΔH - ΔG)/T; `None` where the enthalpy is not known.
    ///
    /// # Errors
    ///
    /// As [`Reaction::constant`].
    pub fn entropy(&self) -> Result<Option<f64>, ReactionError> {
        let temperature = self.constant()?.temperature.kelvin();
        let gibbs = self.gibbs()?.value();
        Ok(self.enthalpy()?.map(|enthalpy| 1000.0 * (enthalpy - gibbs) / temperature))
    }

    /// The reaction `multiple` times over: Kⁿ. A negative multiple writes it the other way round.
    ///
    /// # Errors
    ///
    /// Returns that nothing is left if `multiple` is zero.
    pub fn times(&self, multiple: Rational) -> Result<Self, ReactionError> {
        let equation = self.equation.times(multiple)?;
        let constant = self.constant.as_ref().map(|constant| Constant {
            log_k: constant.log_k.times(multiple),
            history: constant.history.times(multiple),
            ..constant.clone()
        });
        Ok(Self { equation, constant })
    }

    /// The sum of two reactions: K₁ K₂.
    ///
    /// # Errors
    ///
    /// Returns why the constants cannot be multiplied: one is missing, they share no temperature, or they count gases
    /// from different pressures.
    pub fn plus(&self, other: &Self) -> Result<Self, ReactionError> {
        let equation = self.equation.plus(&other.equation)?;
        let constant = match (&self.constant, &other.constant) {
            (Some(left), Some(right)) => Some(self.product(left, other, right)?),
            (None, None) => None,
            (None, Some(_)) => return Err(ReactionError::OneWithoutConstant(self.equation.to_string())),
            (Some(_), None) => return Err(ReactionError::OneWithoutConstant(other.equation.to_string())),
        };
        Ok(Self { equation, constant })
    }

    fn product(&self, left: &Constant, other: &Self, right: &Constant) -> Result<Constant, ReactionError> {
        let log_k = left.log_k.plus(&right.log_k).map_err(|_| {
            let (fixed, at, other) = match (left.log_k.only_at(), right.log_k.only_at()) {
                (Some(at), _) => (&self.equation, at, &other.equation),
                (None, Some(at)) => (&other.equation, at, &self.equation),
                (None, None) => unreachable!("functions of temperature always add"),
            };
            ReactionError::NoCommonTemperature {
                fixed: fixed.to_string(),
                other: other.to_string(),
                known: at.celsius(),
            }
        })?;
        let history = left.history.plus(&right.history);
        let conditions = self.common_conditions(left, other, right)?;
        // A product of functions is quoted at the left one's temperature.
        let temperature = log_k.only_at().unwrap_or(left.temperature);
        Ok(Constant { log_k, temperature, conditions, history })
    }

    /// A reaction without gases goes with any gas standard.
    fn common_conditions(
        &self,
        left: &Constant,
        other: &Self,
        right: &Constant,
    ) -> Result<Conditions, ReactionError> {
        let (a, b) = (left.conditions.gas_standard, right.conditions.gas_standard);
        match (self.has_gas(), other.has_gas()) {
            (true, true) if a != b => Err(ReactionError::GasStandards {
                left: self.equation.to_string(),
                left_standard: a,
                right: other.equation.to_string(),
                right_standard: b,
            }),
            (false, true) => Ok(right.conditions),
            _ => Ok(left.conditions),
        }
    }

    fn has_gas(&self) -> bool {
        self.equation.terms().iter().any(|(species, _)| species.is_gas())
    }

    /// The same with its constant known at `temperature` alone, so that it adds to others known there.
    ///
    /// # Errors
    ///
    /// As [`Reaction::log_k_at`].
    pub fn at(&self, temperature: Temperature) -> Result<Self, ReactionError> {
        let constant = self.constant()?;
        let log_k = constant.log_k.frozen_at(temperature);
        let log_k =
            log_k.map_err(|why| ReactionError::Temperature { equation: self.equation.to_string(), why })?;
        let constant = Constant { log_k, temperature, ..constant.clone() };
        Ok(Self { equation: self.equation.clone(), constant: Some(constant) })
    }

    /// The same with an enthalpy of reaction assumed; its constant, known at one temperature, becomes a function.
    ///
    /// # Errors
    ///
    /// As [`Reaction::constant`], or that `enthalpy` is no energy per mole.
    pub fn assume_enthalpy(&self, enthalpy: &Quantity) -> Result<Self, ReactionError> {
        let constant = self.constant()?;
        let kilojoules = enthalpy.to(&Kind::Energy.default_unit());
        let kilojoules = kilojoules.map_err(|error| KeyFault::new("enthalpy", error.to_string()))?.value();
        let (value, at) = (constant.log_k.nearest_to(constant.temperature).0, constant.temperature);
        let mut log_k = LogK::van_t_hoff(value, at, kilojoules, 0.0);
        if let Some(range) = constant.log_k.range() {
            log_k = log_k.within(range);
        }
        let history =
            constant.history.converted(format!("enthalpy of reaction assumed: {kilojoules} kJ/mol"));
        Ok(Self::of(self.equation.clone(), Constant { log_k, history, ..constant.clone() }))
    }

    /// The same with gases counted from another standard pressure.
    ///
    /// # Errors
    ///
    /// As [`Reaction::constant`].
    pub fn to_gas_standard(&self, standard: GasStandard) -> Result<Self, ReactionError> {
        let constant = self.constant()?;
        let from = constant.conditions.gas_standard;
        if from == standard {
            return Ok(self.clone());
        }
        let shift = from.shift_to(standard, self.equation.gas_made());
        let mut history = constant.history.clone();
        if self.has_gas() {
            history = history.converted(format!("gas standard {from} to {standard}: log K {shift:+.4}"));
        }
        let constant = Constant {
            log_k: constant.log_k.shifted(shift),
            conditions: Conditions { gas_standard: standard },
            history,
            ..constant.clone()
        };
        Ok(Self { equation: self.equation.clone(), constant: Some(constant) })
    }
}

impl fmt::Display for Reaction {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        fmt::Display::fmt(&self.equation, f)
    }
}

impl fmt::Debug for Reaction {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        write!(f, "{:?} {:?}", self.equation, self.constant)
    }
}

/// What was said of a constant, before it is made one.
struct Statement {
    value: Option<Stated>,
    enthalpy: Option<Quantity>,
    heat_capacity: Option<Quantity>,
    temperature: Option<Temperature>,
    value_at: Option<(Temperature, f64)>,
    sigma: Option<f64>,
    range: Option<Range>,
    conditions: Conditions,
    source: Option<String>,
    provenance: Provenance,
}

enum Stated {
    /// The key it was given under, and log10 K at the reaction's temperature.
    LogK(&'static str, Quantity),
    /// Gibbs energy of reaction, kJ/mol.
    Gibbs(Quantity),
    Terms(Vec<(Term, f64)>),
}

impl Statement {
    fn read(mut options: Named) -> Result<Self, KeyFault> {
        let statement = Self {
            value: read_value(&mut options)?,
            enthalpy: options.quantity("enthalpy", Kind::Energy)?,
            heat_capacity: options.quantity("heat_capacity", Kind::Entropy)?,
            temperature: options
                .take("temperature")
                .map(|value| temperature("temperature", value))
                .transpose()?,
            value_at: options.take("value_at").map(read_value_at).transpose()?,
            sigma: read_sigma(&mut options)?,
            range: options.take("range").map(read_range).transpose()?,
            conditions: read_conditions(&mut options)?,
            source: options.text("source")?,
            provenance: read_provenance(&mut options)?,
        };
        options.take("note");
        options.finish()?;
        Ok(statement)
    }

    fn constant(
        mut self,
        equation: &Equation,
        name: Option<&str>,
        identity: Option<&str>,
    ) -> Result<Option<Constant>, ReactionError> {
        let temperature = self.temperature.unwrap_or(Temperature::REFERENCE);
        let label = name.map_or_else(|| equation.to_string(), str::to_string);
        let Some(value) = self.value.take() else {
            return match self.given_without_value() {
                Some(key) => {
                    let message =
                        format!("`{key}` needs a constant beside it: give `log_k`, `log_k_terms` or `gibbs`");
                    Err(KeyFault::new(key, message).into())
                }
                None => Ok(None),
            };
        };
        let (mut log_k, parts, stated) = match value {
            Stated::Terms(terms) => {
                if self.enthalpy.is_some() || self.heat_capacity.is_some() {
                    let message =
                        "`log_k_terms` already fix the enthalpy: leave `enthalpy` and `heat_capacity` out";
                    return Err(KeyFault::new("log_k_terms", message).into());
                }
                let log_k = LogK::function(&terms);
                let stated = format!("log K = {}", written(&log_k.terms().unwrap_or_default()));
                (log_k, vec![], stated)
            }
            Stated::LogK(key, quantity) => {
                let (value, parts) = (quantity.value(), quantity.parts().to_vec());
                let stated = format!("{} = {value} at {} degC", key.replace('_', " "), temperature.celsius());
                (self.at_temperature(value, temperature), parts, stated)
            }
            Stated::Gibbs(gibbs) => {
                let factor = -1.0 / (R_KJ * temperature.kelvin() * LN_10);
                let gibbs = gibbs.to(&Kind::Energy.default_unit()).expect("checked to be an energy");
                let parts = gibbs.parts().iter().map(|part| part.scaled(factor)).collect();
                let stated =
                    format!("Gibbs energy {} kJ/mol at {} degC", gibbs.value(), temperature.celsius());
                (self.at_temperature(gibbs.value() * factor, temperature), parts, stated)
            }
        };
        if let Some((at, expected)) = self.value_at {
            check_typing(&log_k, at, expected)?;
        }
        if let Some(range) = self.range {
            log_k = log_k.within(range);
        }
        let parts = match (self.sigma, identity) {
            // A typed value keeps its own inputs, so that copies of it stay correlated.
            (None, None) if !parts.is_empty() => parts,
            (sigma, identity) => {
                let sigma = sigma.or_else(|| own_sigma(&parts));
                let input = match identity {
                    Some(identity) => Input::named(identity, &label, sigma),
                    None => Input::written(&label, sigma),
                };
                let input = input.map_err(|error| KeyFault::new("sigma", error.to_string()))?;
                vec![Part { input, sensitivity: 1.0 }]
            }
        };
        let origin = Origin {
            label,
            equation: equation.to_string(),
            stated,
            source: self.source,
            provenance: self.provenance,
            parts,
        };
        Ok(Some(Constant { log_k, temperature, conditions: self.conditions, history: History::of(origin) }))
    }

    fn at_temperature(&self, value: f64, temperature: Temperature) -> LogK {
        let kilojoule = |quantity: &Quantity, kind: Kind| {
            quantity.to(&kind.default_unit()).expect("checked to be of its kind").value()
        };
        match (&self.enthalpy, &self.heat_capacity) {
            (None, None) => LogK::only(value, temperature),
            (enthalpy, heat_capacity) => {
                let enthalpy = enthalpy.as_ref().map_or(0.0, |q| kilojoule(q, Kind::Energy));
                let heat_capacity =
                    heat_capacity.as_ref().map_or(0.0, |q| kilojoule(q, Kind::Entropy) / 1000.0);
                LogK::van_t_hoff(value, temperature, enthalpy, heat_capacity)
            }
        }
    }

    fn given_without_value(&self) -> Option<&'static str> {
        [
            ("enthalpy", self.enthalpy.is_some()),
            ("heat_capacity", self.heat_capacity.is_some()),
            ("value_at", self.value_at.is_some()),
            ("sigma", self.sigma.is_some()),
            ("range", self.range.is_some()),
        ]
        .into_iter()
        .find_map(|(key, given)| given.then_some(key))
    }
}

/// `14.8435 - 3404.71/T - 0.032786 T`.
fn written(terms: &[(Term, f64)]) -> String {
    let mut text = String::new();
    for (term, coefficient) in terms {
        let sign = match (text.is_empty(), *coefficient < 0.0) {
            (true, true) => "-",
            (true, false) => "",
            (false, true) => " - ",
            (false, false) => " + ",
        };
        let size = coefficient.abs();
        text.push_str(&match term.written() {
            "1" => format!("{sign}{size}"),
            inverse if inverse.starts_with("1/") => format!("{sign}{size}{}", &inverse[1..]),
            other => format!("{sign}{size} {other}"),
        });
    }
    text
}

/// The standard uncertainty of a value as it was written.
fn own_sigma(parts: &[Part]) -> Option<f64> {
    match parts {
        [part] => part.input.sigma().map(|sigma| sigma * part.sensitivity.abs()),
        _ => None,
    }
}

fn read_value(options: &mut Named) -> Result<Option<Stated>, KeyFault> {
    let mut given: Vec<(&'static str, Stated)> = Vec::new();
    let mut log_k_of =
        |options: &mut Named, key: &'static str, log_k: fn(&Quantity) -> Result<Quantity, String>| {
            let Some(quantity) = options.quantity(key, Kind::Fraction)? else { return Ok(()) };
            let value = log_k(&quantity).map_err(|why| KeyFault::new(key, format!("`{key}` {why}")))?;
            given.push((key, Stated::LogK(key, value)));
            Ok::<(), KeyFault>(())
        };
    log_k_of(options, "log_k", |q| Ok(q.clone()))?;
    log_k_of(options, "pk", |q| Ok(-q))?;
    log_k_of(options, "ln_k", |q| (q / LN_10).map_err(|error| error.to_string()))?;
    log_k_of(options, "k", |q| q.log10().map_err(|_| "must be above zero".into()))?;
    if let Some(gibbs) = options.quantity("gibbs", Kind::Energy)? {
        given.push(("gibbs", Stated::Gibbs(gibbs)));
    }
    if let Some(value) = options.take("log_k_terms") {
        given.push(("log_k_terms", Stated::Terms(read_terms(value)?)));
    }
    if given.len() > 1 {
        let keys: Vec<&str> = given.iter().map(|(key, _)| *key).collect();
        let message = format!("{} state the constant more than once: keep one", list(&keys));
        return Err(KeyFault::new(keys[1], message));
    }
    Ok(given.pop().map(|(_, stated)| stated))
}

fn read_terms(value: Value) -> Result<Vec<(Term, f64)>, KeyFault> {
    let fault = |message: String| KeyFault::new("log_k_terms", message);
    let known: Vec<&str> = Term::ALL.map(Term::written).into_iter().chain(["ln(T)"]).collect();
    let Value::Map(map) = value else {
        return Err(fault(format!(
            "`log_k_terms` takes a map of terms, not {}: the terms are {}",
            value.kind(),
            list(&known)
        )));
    };
    let mut terms = Vec::new();
    for (key, value) in map {
        let Some((term, factor)) = Term::parse(&key) else {
            let help = nearest(&key, known.iter().copied())
                .map(|close| format!("; did you mean `{close}`?"))
                .unwrap_or_default();
            return Err(fault(format!("`{key}` is no term of log K: the terms are {}{help}", list(&known))));
        };
        let Value::Number(coefficient) = value else {
            return Err(fault(format!("the coefficient of `{key}` must be a number, not {}", value.kind())));
        };
        terms.push((term, coefficient * factor));
    }
    if terms.is_empty() { Err(fault("`log_k_terms` is empty".into())) } else { Ok(terms) }
}

fn read_value_at(value: Value) -> Result<(Temperature, f64), KeyFault> {
    let fault = || {
        KeyFault::new("value_at", "`value_at` takes a temperature and log K there: `[\"25 degC\", -8.48]`")
    };
    let Value::List(values) = value else { return Err(fault()) };
    let Ok([at, Value::Number(expected)]) = <[Value; 2]>::try_from(values) else { return Err(fault()) };
    Ok((temperature("value_at", at)?, expected))
}

fn check_typing(log_k: &LogK, at: Temperature, expected: f64) -> Result<(), KeyFault> {
    let value = log_k.at(at).map_err(|why| KeyFault::new("value_at", format!("log K is {why}")))?;
    // A value printed to fewer decimals than that may differ by half its last one.
    let decimals = expected.to_string().split_once('.').map_or(0, |(_, fraction)| fraction.len());
    let tolerance = TYPING_TOLERANCE.max(0.5 * 10_f64.powi(-(decimals.min(9) as i32))) * (1.0 + 1e-9);
    if (value - expected).abs() <= tolerance {
        return Ok(());
    }
    let message = format!(
        "the terms give log K = {value:.4} at {} degC, but `value_at` says {expected}: check the coefficients",
        at.celsius()
    );
    Err(KeyFault::new("value_at", message))
}

fn read_sigma(options: &mut Named) -> Result<Option<f64>, KeyFault> {
    match options.number("sigma")? {
        Some(sigma) if sigma < 0.0 => Err(KeyFault::new(
            "sigma",
            format!("`sigma` is a standard uncertainty and cannot be negative: {sigma}"),
        )),
        sigma => Ok(sigma),
    }
}

fn read_range(value: Value) -> Result<Range, KeyFault> {
    let fault = |message: &str| {
        KeyFault::new("range", format!("`range` {message}: write `[\"0 degC\", \"90 degC\"]`"))
    };
    let Value::List(values) = value else { return Err(fault("takes two temperatures")) };
    let Ok([lowest, highest]) = <[Value; 2]>::try_from(values) else {
        return Err(fault("takes two temperatures"));
    };
    let (lowest, highest) = (temperature("range", lowest)?, temperature("range", highest)?);
    if lowest.kelvin() > highest.kelvin() {
        return Err(fault("starts above its end"));
    }
    Ok(Range { lowest, highest })
}

fn read_conditions(options: &mut Named) -> Result<Conditions, KeyFault> {
    let Some(text) = options.text("gas_standard")? else { return Ok(Conditions::default()) };
    let gas_standard = GasStandard::parse(&text).ok_or_else(|| {
        KeyFault::new("gas_standard", format!("`{text}` is no gas standard: it is `1 bar` or `1 atm`"))
    })?;
    Ok(Conditions { gas_standard })
}

fn read_provenance(options: &mut Named) -> Result<Provenance, KeyFault> {
    let Some(word) = options.text("provenance")? else { return Ok(Provenance::default()) };
    Provenance::parse(&word).ok_or_else(|| {
        KeyFault::new(
            "provenance",
            format!("`{word}` is no provenance: it is `read`, `computed`, `memory` or `stated`"),
        )
    })
}

/// Reads a temperature given under `key`.
///
/// # Errors
///
/// Returns a fault of `key` if it is no temperature.
pub fn temperature(key: &str, value: Value) -> Result<Temperature, KeyFault> {
    let quantity = named::quantity(key, value, Kind::Temperature)?;
    Temperature::try_from(&quantity).map_err(|error| KeyFault::new(key, format!("`{key}`: {error}")))
}

/// Reads a multiple given as a float: exact if it has few digits.
///
/// # Errors
///
/// Returns the words for a number that is no small fraction.
pub fn multiple(value: f64) -> Result<Rational, String> {
    let exact = rational::from_f64(value).filter(|multiple| *multiple != 0.into());
    exact.ok_or_else(|| format!("a reaction is taken a plain number of times, such as 2 or 0.5, not {value}"))
}
