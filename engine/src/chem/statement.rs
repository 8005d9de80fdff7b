//! What is said of a constant in named options, before it is made one.

use super::conditions::Conditions;
use super::equation::Equation;
use super::history::{History, Influence, Origin, Provenance};
use super::log_k::{LogK, Range, Salinities, Term};
use super::pressure::Volume;
use super::rational::{self, Rational};
use super::reaction::{Constant, ReactionError};
use super::salinity_term::{Product, SalinityTerm};
use super::stated_conditions;
use crate::named::{self, KeyFault, Named, Value};
use crate::nearest::nearest;
use crate::physics::constants::{GAS_CONSTANT, LN_10};
use crate::quantity::{Input, Part, Quantity};
use crate::text::list;
use crate::units::{Kind, Temperature, Unit};

/// Gas constant in kJ/(mol K).
const R_KJ: f64 = GAS_CONSTANT / 1000.0;
/// How far a stated value may lie from the typed function: half a unit of its second decimal.
const TYPING_TOLERANCE: f64 = 0.005;

/// What was said of a constant, before it is made one.
pub(super) struct Statement {
    value: Option<Stated>,
    enthalpy: Option<Quantity>,
    heat_capacity: Option<Quantity>,
    temperature: Option<Temperature>,
    value_at: Option<ValueAt>,
    sigma: Option<f64>,
    /// By how many standard uncertainties the one stated is wide.
    coverage: f64,
    range: Option<Range>,
    salinities: Option<Salinities>,
    volume: Option<Volume>,
    conditions: Conditions,
    source: Option<String>,
    provenance: Provenance,
}

enum Stated {
    /// The key it was given under, and log10 K at the reaction's temperature.
    LogK(&'static str, Quantity),
    /// Gibbs energy of reaction, kJ/mol.
    Gibbs(Quantity),
    Terms(Vec<(Product, f64)>),
}

impl Statement {
    pub(super) fn read(mut options: Named, equation: &Equation) -> Result<Self, KeyFault> {
        let mut stated = stated_conditions::read(&mut options, equation)?;
        let statement = Self {
            value: read_value(&mut options, &mut stated, equation)?,
            enthalpy: options.quantity("enthalpy", Kind::Energy)?,
            heat_capacity: options.quantity("heat_capacity", Kind::Entropy)?,
            temperature: options
                .take("temperature")
                .map(|value| temperature("temperature", value))
                .transpose()?,
            value_at: options.take("value_at").map(read_value_at).transpose()?,
            sigma: read_sigma(&mut options)?,
            coverage: options.text("sigma_of")?.map_or(Ok(1.0), |text| coverage(&text))?,
            range: options.take("range").map(read_range).transpose()?,
            salinities: options.take("salinity_range").map(read_salinities).transpose()?,
            volume: Volume::read(&mut options)?,
            conditions: stated.conditions.clone(),
            source: options.text("source")?,
            provenance: read_provenance(&mut options)?,
        };
        let depends_on_salinity = matches!(&statement.value, Some(self::Stated::Terms(terms)) if LogK::of(terms.clone()).depends_on_salinity());
        stated_conditions::check_salinity(&stated, depends_on_salinity)?;
        options.take("note");
        options.finish()?;
        Ok(statement)
    }

    pub(super) fn constant(
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
                let log_k = LogK::of(terms);
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
        if let Some(value_at) = self.value_at {
            let salinity = value_at.salinity.or(self.conditions.medium.salinity()).unwrap_or(0.0);
            check_typing(&log_k.at_salinity(salinity), value_at)?;
        }
        if let Some(range) = self.range {
            log_k = log_k.within(range);
        }
        if let Some(salinities) = self.salinities {
            log_k = log_k.within_salinities(salinities);
        }
        let stated_sigma = self.sigma.or_else(|| own_sigma(&parts));
        if self.coverage != 1.0 && stated_sigma.is_none() {
            let message =
                "`sigma_of` says how wide the stated uncertainty is: give `sigma`, or `+/-` with the value";
            return Err(KeyFault::new("sigma_of", message).into());
        }
        let parts = match (self.sigma, identity) {
            // A typed value keeps its own inputs, so that copies of it stay correlated.
            (None, None) if !parts.is_empty() && self.coverage == 1.0 => parts,
            (_, identity) => {
                let sigma = stated_sigma.map(|sigma| sigma / self.coverage);
                let input = match identity {
                    Some(identity) => Input::named(identity, &label, sigma),
                    None => Input::written(&label, sigma),
                };
                let input = input.map_err(|error| KeyFault::new("sigma", error.to_string()))?;
                vec![Part { input, sensitivity: 1.0 }]
            }
        };
        let influences = self.temperature_influences(temperature, &label, identity);
        let origin = Origin {
            label,
            equation: equation.to_string(),
            stated,
            source: self.source,
            provenance: self.provenance,
            parts,
        };
        let history = History::of(origin).influenced(influences);
        let (conditions, volume) = (self.conditions, self.volume);
        Ok(Some(Constant { log_k, temperature, conditions, volume, history }))
    }

    fn at_temperature(&self, value: f64, temperature: Temperature) -> LogK {
        match (&self.enthalpy, &self.heat_capacity) {
            (None, None) => LogK::only(value, temperature),
            (enthalpy, heat_capacity) => {
                let enthalpy = enthalpy.as_ref().map_or(0.0, |q| kilojoule(q, Kind::Energy).value());
                let heat_capacity =
                    heat_capacity.as_ref().map_or(0.0, |q| kilojoule(q, Kind::Entropy).value() / 1000.0);
                LogK::van_t_hoff(value, temperature, enthalpy, heat_capacity)
            }
        }
    }

    /// How the enthalpy and the heat capacity act on log K away from the temperature it is stated for.
    fn temperature_influences(&self, at: Temperature, label: &str, identity: Option<&str>) -> Vec<Influence> {
        let of = |given: &Option<Quantity>, kind, word: &str, per_unit: LogK| {
            let Some(given) = given else { return vec![] };
            let given = kilojoule(given, kind);
            let named = identity.map(|identity| {
                given.published_as(&format!("{identity}/{word}"), &format!("{word} of {label}"))
            });
            let given = named.and_then(Result::ok).unwrap_or(given);
            // A value typed here is called after its key; a budget has to say whose it is.
            let called = |part: &Part| match part.input.label() == word.replace(' ', "_") {
                true => Part { input: part.input.called(&format!("{word} of {label}")), ..part.clone() },
                false => part.clone(),
            };
            Influence::through(&given.parts().iter().map(called).collect::<Vec<_>>(), &per_unit)
        };
        let mut influences =
            of(&self.enthalpy, Kind::Energy, "enthalpy", LogK::van_t_hoff(0.0, at, 1.0, 0.0));
        influences.extend(of(
            &self.heat_capacity,
            Kind::Entropy,
            "heat capacity",
            LogK::van_t_hoff(0.0, at, 0.0, 1e-3),
        ));
        influences
    }

    fn given_without_value(&self) -> Option<&'static str> {
        [
            ("enthalpy", self.enthalpy.is_some()),
            ("heat_capacity", self.heat_capacity.is_some()),
            ("value_at", self.value_at.is_some()),
            ("volume", self.volume.is_some()),
            ("sigma", self.sigma.is_some()),
            ("range", self.range.is_some()),
        ]
        .into_iter()
        .find_map(|(key, given)| given.then_some(key))
    }
}

/// In the default unit of its kind: kJ/mol, J/(mol K).
fn kilojoule(quantity: &Quantity, kind: Kind) -> Quantity {
    quantity.to(&kind.default_unit()).expect("checked to be of its kind")
}

/// How many standard uncertainties wide an interval of this coverage is, for a normal distribution (JCGM 100:2008,
/// table G.1).
fn coverage(text: &str) -> Result<f64, KeyFault> {
    const COVERAGES: [(&str, f64); 8] = [
        ("68 %", 1.0),
        ("68.27 %", 1.0),
        ("90 %", 1.645),
        ("95 %", 1.960),
        ("95.45 %", 2.0),
        ("99 %", 2.576),
        ("99.73 %", 3.0),
        ("50 %", 0.6745),
    ];
    let spaced = format!("{} %", text.trim().trim_end_matches('%').trim_end());
    COVERAGES.iter().find(|(known, _)| *known == spaced).map(|(_, width)| *width).ok_or_else(|| {
        let known = COVERAGES.map(|(known, _)| known);
        KeyFault::new(
            "sigma_of",
            format!("`{text}` is no coverage of an uncertainty: known are {}", list(&known)),
        )
    })
}

/// `14.8435 - 3404.71/T - 0.032786 T`.
fn written(terms: &[(Product, f64)]) -> String {
    let mut text = String::new();
    for (term, coefficient) in terms {
        let sign = match (text.is_empty(), *coefficient < 0.0) {
            (true, true) => "-",
            (true, false) => "",
            (false, true) => " - ",
            (false, false) => " + ",
        };
        let size = coefficient.abs();
        text.push_str(&match term.written().as_str() {
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

fn read_value(
    options: &mut Named,
    conditions: &mut stated_conditions::Stated,
    equation: &Equation,
) -> Result<Option<Stated>, KeyFault> {
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
    if let Some(value) = options.take("k") {
        let k = read_k(value, conditions, equation)?;
        let log_k = k.log10().map_err(|_| KeyFault::new("k", "`k` must be above zero"))?;
        given.push(("k", Stated::LogK("k", log_k)));
    }
    if let Some(gibbs) = options.quantity("gibbs", Kind::Energy)? {
        given.push(("gibbs", Stated::Gibbs(gibbs)));
    }
    for (option, of_log_k) in TERMS {
        if let Some(value) = options.take(option) {
            given.push((option, Stated::Terms(read_terms(option, of_log_k, value)?)));
        }
    }
    if given.len() > 1 {
        let keys: Vec<&str> = given.iter().map(|(key, _)| *key).collect();
        let message = format!("{} state the constant more than once: keep one", list(&keys));
        return Err(KeyFault::new(keys[1], message));
    }
    Ok(given.pop().map(|(_, stated)| stated))
}

/// K, a pure number or one with a unit that fixes how its species are counted.
fn read_k(
    value: Value,
    conditions: &mut stated_conditions::Stated,
    equation: &Equation,
) -> Result<Quantity, KeyFault> {
    let k = match &value {
        Value::Text(text) => Quantity::parse_any(text, &Unit::one(), "k")
            .map_err(|error| KeyFault::new("k", format!("`k`: {error}")))?,
        Value::Quantity(quantity) => quantity.clone(),
        _ => return named::quantity("k", value, Kind::Fraction),
    };
    if k.unit().is_dimensionless() {
        return named::quantity("k", Value::Quantity(k), Kind::Fraction);
    }
    conditions.of_unit(&k, equation)
}

/// Terms as they were published: of log10 K, of ln K or of pK, with what turns a coefficient into one of log10 K.
pub(super) const TERMS: [(&str, f64); 3] =
    [("log_k_terms", 1.0), ("ln_k_terms", 1.0 / LN_10), ("pk_terms", -1.0)];

/// Reads the terms of a function of temperature and salinity, `#{ "1": 14.8, "1/T": -3404.7 }`.
///
/// # Errors
///
/// A fault of `log_k_terms` that names the term.
pub fn terms(value: Value) -> Result<Vec<(Product, f64)>, KeyFault> {
    read_terms("log_k_terms", 1.0, value)
}

/// Terms of a map, each coefficient times `of_log_k`.
fn read_terms(option: &str, of_log_k: f64, value: Value) -> Result<Vec<(Product, f64)>, KeyFault> {
    let fault = |message: String| KeyFault::new(option, message);
    let known: Vec<&str> = Term::ALL.map(Term::written).into_iter().chain(["ln(T)"]).collect();
    let Value::Map(map) = value else {
        return Err(fault(format!(
            "`{option}` takes a map of terms, not {}: the terms are {}",
            value.kind(),
            list(&known)
        )));
    };
    let mut terms = Vec::new();
    for (key, value) in map {
        let Some(parsed) = Product::parse(&key) else {
            let help = nearest(&key, known.iter().copied())
                .map(|close| format!("; did you mean `{close}`?"))
                .unwrap_or_default();
            return Err(fault(format!(
                "`{key}` is no term of log K: the terms are {}, and in seawater their products with {}{help}",
                list(&known),
                list(&SalinityTerm::ALL[1..].iter().map(|term| term.written()).collect::<Vec<_>>())
            )));
        };
        let Value::Number(coefficient) = value else {
            return Err(fault(format!("the coefficient of `{key}` must be a number, not {}", value.kind())));
        };
        terms.extend(parsed.into_iter().map(|(product, factor)| (product, coefficient * of_log_k * factor)));
    }
    if terms.is_empty() { Err(fault(format!("`{option}` is empty"))) } else { Ok(terms) }
}

/// Where log K is stated to have a value, in a check of the typing.
#[derive(Clone, Copy)]
struct ValueAt {
    temperature: Temperature,
    /// Practical salinity; `None`: the medium's own.
    salinity: Option<f64>,
    log_k: f64,
}

fn read_value_at(value: Value) -> Result<ValueAt, KeyFault> {
    let fault = || {
        KeyFault::new(
            "value_at",
            "`value_at` takes a temperature, in seawater a salinity, and log K there: `[\"25 degC\", -8.48]`",
        )
    };
    let Value::List(mut values) = value else { return Err(fault()) };
    let Some(Value::Number(log_k)) = values.pop() else { return Err(fault()) };
    let mut values = values.into_iter();
    let (Some(at), salinity, None) = (values.next(), values.next(), values.next()) else {
        return Err(fault());
    };
    let salinity = salinity.map(|value| stated_conditions::salinity("value_at", value)).transpose()?;
    Ok(ValueAt { temperature: temperature("value_at", at)?, salinity, log_k })
}

fn check_typing(log_k: &LogK, stated: ValueAt) -> Result<(), KeyFault> {
    let (at, expected) = (stated.temperature, stated.log_k);
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

fn read_salinities(value: Value) -> Result<Salinities, KeyFault> {
    let fault = || KeyFault::new("salinity_range", "`salinity_range` takes two salinities: write `[5, 45]`");
    let Value::List(values) = value else { return Err(fault()) };
    let Ok([lowest, highest]) = <[Value; 2]>::try_from(values) else { return Err(fault()) };
    let read = |value| stated_conditions::salinity("salinity_range", value);
    let (lowest, highest) = (read(lowest)?, read(highest)?);
    if lowest > highest { Err(fault()) } else { Ok(Salinities { lowest, highest }) }
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
