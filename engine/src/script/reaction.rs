//! `Reaction` in scripts: equations with constants that reverse, scale and add.

use rhai::plugin::*;
use rhai::{Array, Dynamic, FLOAT, INT, Map};

use super::column::drawn;
use super::faults::advised;
use super::named::{named, value};
use super::numbers::real;
use super::show::Style;
use super::{Fail, Host, ScriptResult, Vocabulary, fail};
use crate::chem::reaction::{self as chemistry, salinity};
use crate::chem::{EquationError, GasStandard, PhScale, Rational, Reaction, ReactionError, Species, Trail};
use crate::ledger::{Combined, LedgerError, combine_routes};
use crate::named::{Named, Value};
use crate::present::Table;
use crate::quantity::Quantity;
use crate::units::{Kind, Pressure, Style as Alphabet, Temperature, Unit};

/// Registers the type.
pub(super) fn register(vocabulary: &mut Vocabulary) {
    vocabulary
        .module(rhai::exported_module!(reaction_functions))
        .pure(&[
            "reaction",
            "combine",
            "log_k_at",
            "coefficient",
            "at",
            "assume_enthalpy",
            "to_gas_standard",
            "to_pressure",
            "to_kc",
            "to_kp",
            "to_molal",
            "to_ionic_strength",
            "to_ph_scale",
            "trail",
        ])
        .native::<Reaction>("Reaction", show)
        .native::<Trail>("Trail", |trail, style| drawn(&trail.table(), style));
}

/// `CO2(aq) + H2O ⇌ HCO3⁻ + H⁺   log K = -6.352 ± 0.010 (25 °C)`.
fn show(reaction: &Reaction, style: &Style) -> String {
    let equation = if style.ascii { reaction.equation().to_string() } else { reaction.equation().pretty() };
    let (Ok(log_k), Ok(constant)) = (reaction.log_k(), reaction.constant()) else { return equation };
    let alphabet = if style.ascii { Alphabet::Ascii } else { Alphabet::Unicode };
    let degree = if style.ascii { "degC" } else { "°C" };
    format!("{equation}   log K = {} ({} {degree})", log_k.display(alphabet), constant.temperature.celsius())
}

impl From<ReactionError> for Fail {
    fn from(error: ReactionError) -> Self {
        match error {
            ReactionError::Option(fault) => fault.into(),
            ReactionError::Equation(error) => error.into(),
            other => advised(&other.to_string()),
        }
    }
}

impl From<EquationError> for Fail {
    fn from(error: EquationError) -> Self {
        advised(&error.to_string()).argument(0)
    }
}

impl From<LedgerError> for Fail {
    fn from(error: LedgerError) -> Self {
        match error {
            LedgerError::Reaction(error) => error.into(),
            other => advised(&other.to_string()),
        }
    }
}

/// A temperature given as a number in degC, a text with its unit, or a quantity.
pub(super) fn temperature(given: &Dynamic) -> Result<Temperature, Fail> {
    let read = chemistry::temperature("temperature", value(given)?);
    read.map_err(|fault| fail(fault.message))
}

/// The reaction found, with a warning where several routes lead to it.
pub(super) fn told(context: &NativeCallContext, combined: Combined) -> Reaction {
    if let Some(routes) = combined.routes {
        Host::of(context).message(&format!("warning: `{}`: {routes}", combined.reaction));
    }
    combined.reaction
}

/// A number or text as a quantity of a kind.
pub(super) fn quantity(what: &str, given: &Dynamic, kind: Kind) -> Result<Quantity, Fail> {
    crate::named::quantity(what, value(given)?, kind).map_err(|fault| fail(fault.message))
}

fn with_value(equation: &str, key: &str, value: Value) -> ScriptResult<Reaction> {
    let options = Named::new([(key.to_string(), value)].into());
    Ok(Reaction::read(equation, None, options, None).map_err(Fail::from)?)
}

fn multiple(number: FLOAT) -> Result<Rational, Fail> {
    chemistry::multiple(number).map_err(fail)
}

fn optional(value: Option<f64>, kind: Kind) -> Dynamic {
    value.map_or(Dynamic::UNIT, |value| Dynamic::from(Quantity::exact(value, kind.default_unit())))
}

/// So many kelvin from its own temperature a constant without a stated range deserves a warning.
const FAR: f64 = 50.0;

/// Warns once a call where a constant is read outside the range it was stated for.
fn warn_outside(
    context: &NativeCallContext,
    reaction: &Reaction,
    temperature: Temperature,
) -> ScriptResult<()> {
    let constant = reaction.constant().map_err(Fail::from)?;
    let outside = constant.log_k.outside(temperature);
    let away = (temperature.kelvin() - constant.temperature.kelvin()).abs();
    let celsius = temperature.celsius();
    match constant.log_k.range() {
        Some(range) if outside > 0.0 => Host::of(context).message(&format!(
            "warning: log K of `{reaction}` is stated for {:.0} to {:.0} degC; {celsius:.1} degC is {outside:.1} K outside",
            range.lowest.celsius(),
            range.highest.celsius(),
        )),
        None if away > FAR => Host::of(context).message(&format!(
            "warning: log K of `{reaction}` states no range of temperature; {celsius:.1} degC is {away:.0} K from its own"
        )),
        _ => {}
    }
    Ok(())
}

/// A temperature, pressure or salinity that log K is asked for.
struct Asked {
    temperature: Temperature,
    pressure: Option<Pressure>,
    salinity: Option<f64>,
}

impl Asked {
    fn read(reaction: &Reaction, map: &Map) -> Result<Self, Fail> {
        let mut options = named(map)?;
        let constant = reaction.constant()?;
        let given = options.take("temperature");
        let temperature =
            given.map_or(Ok(constant.temperature), |given| chemistry::temperature("temperature", given))?;
        let pressure = options.quantity("pressure", Kind::Pressure)?;
        let pressure = pressure.map(|given| Pressure::try_from(&given)).transpose()?;
        let salinity = options.take("salinity").map(|given| salinity("salinity", given)).transpose()?;
        options.finish()?;
        Ok(Self { temperature, pressure, salinity })
    }
}

fn no_options() -> Named {
    Named::new([].into())
}

/// Reactions and their constants.
#[export_module]
mod reaction_functions {
    use super::*;

    /// A reaction without a constant: its stoichiometry, checked for elements and charge.
    ///
    /// ```rhai
    /// reaction("CO2(aq) + H2O <=> HCO3^- + H^+").coefficient("H^+")   // 1
    /// ```
    #[rhai_fn(name = "reaction", return_raw)]
    pub fn reaction_alone(equation: &str) -> ScriptResult<Reaction> {
        Ok(Reaction::stoichiometry(equation).map_err(Fail::from)?)
    }

    /// A reaction with log10 K at 25 degC, or with a map of options: one of `log_k`, `ln_k`, `k`, `pk`, `gibbs` (kJ/mol)
    /// and `log_k_terms`; `enthalpy` (kJ/mol), `heat_capacity` (J/(mol K)), `volume` (cm3/mol), `temperature` (degC),
    /// `pressure` (bar), `value_at`, `sigma`, `sigma_of`, `range`, `source`, `provenance`; and the conditions
    /// `ionic_strength` (mol/kg), `medium`, `salinity`, `ph_scale`, `basis`, `gas_standard`. A unit of `k` fixes the last two.
    ///
    /// ```rhai
    /// let k1 = reaction("CO2(aq) + H2O <=> HCO3^- + H^+", #{ log_k: -6.352, enthalpy: "9.11 kJ/mol" });
    /// fmt(k1.log_k_at("10 degC").value, ".3f")   // "-6.437"
    /// ```
    #[rhai_fn(name = "reaction", return_raw)]
    pub fn reaction_with_options(equation: &str, options: Map) -> ScriptResult<Reaction> {
        Ok(Reaction::read(equation, None, named(&options)?, None).map_err(Fail::from)?)
    }
    #[rhai_fn(name = "reaction", return_raw)]
    pub fn reaction_with_real(equation: &str, log_k: FLOAT) -> ScriptResult<Reaction> {
        with_value(equation, "log_k", Value::Number(log_k))
    }
    #[rhai_fn(name = "reaction", return_raw)]
    pub fn reaction_with_int(equation: &str, log_k: INT) -> ScriptResult<Reaction> {
        with_value(equation, "log_k", Value::Number(log_k as f64))
    }
    #[rhai_fn(name = "reaction", return_raw)]
    pub fn reaction_with_text(equation: &str, log_k: &str) -> ScriptResult<Reaction> {
        with_value(equation, "log_k", Value::Text(log_k.into()))
    }
    #[rhai_fn(name = "reaction", return_raw)]
    pub fn reaction_with_quantity(equation: &str, log_k: Quantity) -> ScriptResult<Reaction> {
        with_value(equation, "log_k", Value::Quantity(log_k))
    }

    /// The reaction written the other way round: log K changes sign.
    #[rhai_fn(name = "-", return_raw)]
    pub fn reversed(reaction: Reaction) -> ScriptResult<Reaction> {
        Ok(reaction.times((-1).into()).map_err(Fail::from)?)
    }
    /// The sum of two reactions: their constants multiply.
    #[rhai_fn(name = "+", return_raw)]
    pub fn sum(left: Reaction, right: Reaction) -> ScriptResult<Reaction> {
        Ok(left.plus(&right).map_err(Fail::from)?)
    }
    /// One reaction less another.
    #[rhai_fn(name = "-", return_raw)]
    pub fn difference(left: Reaction, right: Reaction) -> ScriptResult<Reaction> {
        Ok(left.plus(&right.times((-1).into()).map_err(Fail::from)?).map_err(Fail::from)?)
    }
    /// A reaction taken several times over: its constant is raised to that power.
    #[rhai_fn(name = "*", return_raw)]
    pub fn times_real(number: FLOAT, reaction: Reaction) -> ScriptResult<Reaction> {
        Ok(reaction.times(multiple(number)?).map_err(Fail::from)?)
    }
    #[rhai_fn(name = "*", return_raw)]
    pub fn times_int(number: INT, reaction: Reaction) -> ScriptResult<Reaction> {
        times_real(number as f64, reaction)
    }
    #[rhai_fn(name = "*", return_raw)]
    pub fn by_real(reaction: Reaction, number: FLOAT) -> ScriptResult<Reaction> {
        times_real(number, reaction)
    }
    #[rhai_fn(name = "*", return_raw)]
    pub fn by_int(reaction: Reaction, number: INT) -> ScriptResult<Reaction> {
        times_real(number as f64, reaction)
    }
    /// Whether two reactions are the same equation with the same constant.
    #[rhai_fn(name = "==")]
    pub fn same(left: Reaction, right: Reaction) -> bool {
        left == right
    }
    #[rhai_fn(name = "!=")]
    pub fn different(left: Reaction, right: Reaction) -> bool {
        left != right
    }

    /// log10 K at the reaction's own temperature; dimensionless.
    ///
    /// ```rhai
    /// reaction("HCO3^- <=> CO3^2- + H^+", -10.329).log_k.value   // -10.329
    /// ```
    #[rhai_fn(name = "log_k", get = "log_k", pure, return_raw)]
    pub fn log_k(reaction: &mut Reaction) -> ScriptResult<Quantity> {
        Ok(reaction.log_k().map_err(Fail::from)?)
    }
    /// ln K at the reaction's own temperature; dimensionless.
    #[rhai_fn(name = "ln_k", get = "ln_k", pure, return_raw)]
    pub fn ln_k(reaction: &mut Reaction) -> ScriptResult<Quantity> {
        let log_k = reaction.log_k().map_err(Fail::from)?;
        Ok((&log_k * std::f64::consts::LN_10).map_err(|error| fail(error.to_string()))?)
    }
    /// K at the reaction's own temperature, on the molal activity scale.
    #[rhai_fn(name = "k", get = "k", pure, return_raw)]
    pub fn k(reaction: &mut Reaction) -> ScriptResult<Quantity> {
        let log_k = reaction.log_k().map_err(Fail::from)?;
        Ok(log_k.exp10().map_err(|error| fail(error.to_string()))?)
    }
    /// -log10 K at the reaction's own temperature.
    #[rhai_fn(name = "pk", get = "pk", pure, return_raw)]
    pub fn pk(reaction: &mut Reaction) -> ScriptResult<Quantity> {
        Ok(-reaction.log_k().map_err(Fail::from)?)
    }
    /// Standard Gibbs energy of reaction, kJ/mol.
    #[rhai_fn(name = "gibbs", get = "gibbs", pure, return_raw)]
    pub fn gibbs(reaction: &mut Reaction) -> ScriptResult<Quantity> {
        Ok(reaction.gibbs().map_err(Fail::from)?)
    }
    /// Enthalpy of reaction, kJ/mol, at the reaction's own temperature; `()` where it is not known.
    #[rhai_fn(name = "enthalpy", get = "enthalpy", pure, return_raw)]
    pub fn enthalpy(reaction: &mut Reaction) -> ScriptResult<Dynamic> {
        let enthalpy = reaction.enthalpy_quantity().map_err(Fail::from)?;
        Ok(enthalpy.map_or(Dynamic::UNIT, Dynamic::from))
    }
    /// Entropy of reaction, J/(mol K), at the reaction's own temperature; `()` where it is not known.
    #[rhai_fn(name = "entropy", get = "entropy", pure, return_raw)]
    pub fn entropy(reaction: &mut Reaction) -> ScriptResult<Dynamic> {
        Ok(optional(reaction.entropy().map_err(Fail::from)?, Kind::Entropy))
    }
    /// The reaction's own temperature, degC.
    #[rhai_fn(name = "temperature", get = "temperature", pure, return_raw)]
    pub fn own_temperature(reaction: &mut Reaction) -> ScriptResult<Quantity> {
        let celsius = reaction.constant().map_err(Fail::from)?.temperature.celsius();
        Ok(Quantity::exact(celsius, Kind::Temperature.default_unit()))
    }
    /// The equation as text.
    #[rhai_fn(name = "equation", get = "equation", pure)]
    pub fn equation(reaction: &mut Reaction) -> String {
        reaction.equation().to_string()
    }
    /// The species that take part, as texts.
    #[rhai_fn(name = "species", get = "species", pure)]
    pub fn species(reaction: &mut Reaction) -> Array {
        reaction.equation().terms().iter().map(|(species, _)| species.key().to_string().into()).collect()
    }
    /// Where the constant comes from, as text; one source a line.
    #[rhai_fn(name = "source", get = "source", pure, return_raw)]
    pub fn source(reaction: &mut Reaction) -> ScriptResult<String> {
        let history = &reaction.constant().map_err(Fail::from)?.history;
        let mut sources: Vec<&str> =
            history.uses().iter().filter_map(|(origin, _)| origin.source.as_deref()).collect();
        sources.dedup();
        Ok(sources.join("\n"))
    }
    /// What must agree before constants are added, as text.
    #[rhai_fn(name = "conditions", get = "conditions", pure, return_raw)]
    pub fn conditions(reaction: &mut Reaction) -> ScriptResult<String> {
        let constant = reaction.constant().map_err(Fail::from)?;
        let range = constant
            .log_k
            .range()
            .map(|range| format!(", {:.0} to {:.0} degC", range.lowest.celsius(), range.highest.celsius()));
        let fixed = constant.log_k.only_at().map(|at| format!(", known at {} degC only", at.celsius()));
        let conditions = constant.conditions.describe(reaction.terms().map_err(Fail::from)?);
        Ok(format!("{conditions}{}{}", range.unwrap_or_default(), fixed.unwrap_or_default()))
    }

    /// Stoichiometric coefficient of a species: positive for products, negative for reactants, 0 if it takes no part.
    ///
    /// ```rhai
    /// reaction("H2O <=> H^+ + OH^-").coefficient("H2O")   // -1
    /// ```
    #[rhai_fn(pure, return_raw)]
    pub fn coefficient(reaction: &mut Reaction, species: &str) -> ScriptResult<FLOAT> {
        let species = Species::parse(species).map_err(|error| fail(error.to_string()).argument(0))?;
        Ok(crate::chem::rational::to_f64(reaction.equation().coefficient(&species)))
    }

    /// log10 K at a temperature (degC, or text with a unit); warns outside the stated range.
    ///
    /// ```rhai
    /// fmt(ledger("freshwater").reaction("calcite").log_k_at("10 degC").value, ".3f")   // "-8.410"
    /// ```
    #[rhai_fn(return_raw)]
    pub fn log_k_at(context: NativeCallContext, reaction: Reaction, at: Dynamic) -> ScriptResult<Quantity> {
        let asked = match at.read_lock::<Map>() {
            None => Asked { temperature: temperature(&at)?, pressure: None, salinity: None },
            Some(map) => Asked::read(&reaction, &map)?,
        };
        let reaction = match asked.salinity {
            Some(salinity) => {
                reaction.at_salinity(salinity).map_err(|error| Fail::from(error).key("salinity"))?
            }
            None => reaction,
        };
        warn_outside(&context, &reaction, asked.temperature)?;
        let there = match asked.pressure {
            Some(pressure) => reaction.to_pressure(pressure, asked.temperature).map_err(Fail::from)?,
            None => reaction,
        };
        Ok(there.log_k_at(asked.temperature).map_err(Fail::from)?)
    }

    /// The same reaction with its constant known at one temperature alone, so that it adds to others known there.
    ///
    /// ```rhai
    /// ledger("freshwater").reaction("K1").at("10 degC").enthalpy == ()   // true
    /// ```
    #[rhai_fn(return_raw)]
    pub fn at(context: NativeCallContext, reaction: Reaction, at: Dynamic) -> ScriptResult<Reaction> {
        let at = temperature(&at)?;
        warn_outside(&context, &reaction, at)?;
        Ok(reaction.at(at).map_err(Fail::from)?)
    }

    /// The same reaction with an enthalpy of reaction assumed, kJ/mol, for one known at a single temperature.
    ///
    /// ```rhai
    /// let k = reaction("Na^+ + HCO3^- <=> NaHCO3(aq)", -0.25).assume_enthalpy("0 kJ/mol");
    /// k.log_k_at("5 degC").value   // -0.25
    /// ```
    #[rhai_fn(return_raw)]
    pub fn assume_enthalpy(reaction: Reaction, enthalpy: Dynamic) -> ScriptResult<Reaction> {
        let enthalpy = quantity("enthalpy", &enthalpy, Kind::Energy)?;
        Ok(reaction.assume_enthalpy(&enthalpy).map_err(Fail::from)?)
    }

    /// The same reaction with gases counted from `"1 bar"` or `"1 atm"`: 0.0057 log units per mole of gas.
    ///
    /// ```rhai
    /// let kh = reaction("CO2(g) <=> CO2(aq)", #{ log_k: -1.468, gas_standard: "1 atm" });
    /// fmt(kh.to_gas_standard("1 bar").log_k.value, ".4f")   // "-1.4737"
    /// ```
    #[rhai_fn(return_raw)]
    pub fn to_gas_standard(reaction: Reaction, standard: &str) -> ScriptResult<Reaction> {
        let read = GasStandard::parse(standard);
        let standard = read.ok_or_else(|| {
            fail(format!("`{standard}` is no gas standard")).help("write `\"1 bar\"` or `\"1 atm\"`")
        })?;
        Ok(reaction.to_gas_standard(standard).map_err(Fail::from)?)
    }

    /// The same reaction at another pressure (bar), by its `volume` of reaction; known at its own temperature alone.
    ///
    /// ```rhai
    /// let kw = reaction("H2O <=> H^+ + OH^-", #{ log_k: -14.0, volume: "-22.3 cm3/mol" });
    /// fmt(kw.to_pressure("500 bar").log_k.value, ".2f")   // "-13.81"
    /// ```
    #[rhai_fn(return_raw)]
    pub fn to_pressure(reaction: Reaction, pressure: Dynamic) -> ScriptResult<Reaction> {
        let pressure =
            Pressure::try_from(&quantity("pressure", &pressure, Kind::Pressure)?).map_err(Fail::from)?;
        let own = reaction.constant().map_err(Fail::from)?.temperature;
        Ok(reaction.to_pressure(pressure, own).map_err(Fail::from)?)
    }

    /// Kc: the same reaction with gases counted in mol/L, as ideal gases.
    ///
    /// ```rhai
    /// let kp = reaction("N2O4(g) <=> 2 NO2(g)", #{ k: "0.148 bar" });
    /// fmt(kp.to_kc().k.value, ".5f")   // "0.00597"
    /// ```
    #[rhai_fn(name = "to_kc", return_raw)]
    pub fn to_kc(reaction: Reaction) -> ScriptResult<Reaction> {
        Ok(reaction.to_kc(no_options()).map_err(Fail::from)?)
    }
    #[rhai_fn(name = "to_kc", return_raw)]
    pub fn to_kc_with(reaction: Reaction, options: Map) -> ScriptResult<Reaction> {
        Ok(reaction.to_kc(named(&options)?).map_err(Fail::from)?)
    }
    /// Kp: the same reaction with gases counted by pressure from 1 bar.
    ///
    /// ```rhai
    /// reaction("N2O4(g) <=> 2 NO2(g)", #{ k: "0.00597 mol/L" }).to_kp().conditions
    /// ```
    #[rhai_fn(name = "to_kp", return_raw)]
    pub fn to_kp(reaction: Reaction) -> ScriptResult<Reaction> {
        Ok(reaction.to_kp(no_options()).map_err(Fail::from)?)
    }
    #[rhai_fn(name = "to_kp", return_raw)]
    pub fn to_kp_with(reaction: Reaction, options: Map) -> ScriptResult<Reaction> {
        Ok(reaction.to_kp(named(&options)?).map_err(Fail::from)?)
    }

    /// The same reaction with dissolved species counted per kilogram of water, from mol/L by the `density` of the medium,
    /// or from mol/kg(solution) of seawater.
    ///
    /// ```rhai
    /// let k = reaction("Zn^2+ + Cl^- <=> ZnCl^+", #{ log_k: 0.1, medium: "1 mol/L NaCl", basis: "molar" });
    /// k.to_molal(#{ density: "1.0365 kg/L" }).conditions
    /// ```
    #[rhai_fn(name = "to_molal", return_raw)]
    pub fn to_molal(reaction: Reaction) -> ScriptResult<Reaction> {
        Ok(reaction.to_molal(no_options()).map_err(Fail::from)?)
    }
    #[rhai_fn(name = "to_molal", return_raw)]
    pub fn to_molal_with(reaction: Reaction, options: Map) -> ScriptResult<Reaction> {
        Ok(reaction.to_molal(named(&options)?).map_err(Fail::from)?)
    }

    /// The same reaction at another ionic strength (mol/kg of water), by activity coefficients of `"davies"` or `"sit"`.
    /// Options: `A`, `b`, `delta_epsilon`, `temperature`, `ph_scale`, `beyond_range`.
    ///
    /// ```rhai
    /// let k2 = reaction("HCO3^- <=> CO3^2- + H^+", -10.329);
    /// fmt(k2.to_ionic_strength(0.1, "davies", #{ A: 0.5098 }).log_k.value, ".3f")   // "-9.900"
    /// ```
    #[rhai_fn(name = "to_ionic_strength", return_raw)]
    pub fn to_ionic_strength(reaction: Reaction, target: Dynamic, model: &str) -> ScriptResult<Reaction> {
        to_ionic_strength_with(reaction, target, model, Map::new())
    }
    #[rhai_fn(name = "to_ionic_strength", return_raw)]
    pub fn to_ionic_strength_with(
        reaction: Reaction,
        target: Dynamic,
        model: &str,
        options: Map,
    ) -> ScriptResult<Reaction> {
        let target = plain("an ionic strength", &target)?;
        Ok(reaction.to_ionic_strength(target, model, named(&options)?).map_err(Fail::from)?)
    }

    /// The same reaction with `H^+` on another scale of pH: `"free"`, `"total"`, `"seawater"`, `"nbs"` or `"activity"`. The
    /// last two need an `activity_coefficient`.
    ///
    /// ```rhai
    /// let k = reaction("B(OH)3(aq) + H2O <=> B(OH)4^- + H^+",
    ///     #{ pk: 8.5975, medium: "seawater", salinity: 35, ph_scale: "total" });
    /// fmt(k.to_ph_scale("free").pk.value, ".3f")   // "8.705"
    /// ```
    #[rhai_fn(name = "to_ph_scale", return_raw)]
    pub fn to_ph_scale(reaction: Reaction, scale: &str) -> ScriptResult<Reaction> {
        to_ph_scale_with(reaction, scale, Map::new())
    }
    #[rhai_fn(name = "to_ph_scale", return_raw)]
    pub fn to_ph_scale_with(reaction: Reaction, scale: &str, options: Map) -> ScriptResult<Reaction> {
        let scale = PhScale::parse(scale).ok_or_else(|| {
            let known = crate::text::list(&PhScale::ALL.map(PhScale::word));
            fail(format!("`{scale}` is no scale of pH")).help(format!("the scales are {known}")).argument(1)
        })?;
        Ok(reaction.to_ph_scale(scale, named(&options)?).map_err(Fail::from)?)
    }

    /// Every stated value in the constant with its multiple, source and share of the variance, and every conversion: shown
    /// as a table; `.text()` tells it in sentences.
    ///
    /// ```rhai
    /// ledger("freshwater").derive("CaCO3(calcite) + H^+ <=> Ca^2+ + HCO3^-").trail().len   // 2
    /// ```
    #[rhai_fn(name = "trail", get = "trail", pure, return_raw)]
    pub fn trail(reaction: &mut Reaction) -> ScriptResult<Trail> {
        Ok(reaction.trail().map_err(Fail::from)?)
    }
    /// The trail as a table.
    #[rhai_fn(name = "table", get = "table", pure)]
    pub fn trail_table(trail: &mut Trail) -> Table {
        trail.table()
    }
    /// The trail in sentences, for a methods section.
    #[rhai_fn(name = "text", get = "text", pure)]
    pub fn trail_text(trail: &mut Trail) -> String {
        trail.text()
    }
    /// The conversions made, as texts.
    #[rhai_fn(name = "conversions", get = "conversions", pure)]
    pub fn trail_conversions(trail: &mut Trail) -> Array {
        trail.conversions().iter().map(|words| words.clone().into()).collect()
    }
    /// How many values and parameters the constant was made of; conversions are not counted.
    #[rhai_fn(name = "len", get = "len", pure)]
    pub fn trail_len(trail: &mut Trail) -> INT {
        trail.rows().len() as INT
    }

    /// The constant of an equation as a sum of the given reactions, with exact multiples. Where several sums reach it, that
    /// of least variance is taken if uncertainties are stated, else the one with fewest constants; a warning says how far
    /// the routes lie apart.
    ///
    /// ```rhai
    /// let k1 = reaction("CO2(aq) + H2O <=> HCO3^- + H^+", -6.352);
    /// let k2 = reaction("HCO3^- <=> CO3^2- + H^+", -10.329);
    /// fmt(combine("CO2(aq) + H2O <=> CO3^2- + 2 H^+", [k1, k2]).log_k.value, ".3f")   // "-16.681"
    /// ```
    #[rhai_fn(return_raw)]
    pub fn combine(context: NativeCallContext, target: &str, reactions: Array) -> ScriptResult<Reaction> {
        let read = reactions.iter().map(|item| {
            item.clone().try_cast::<Reaction>().ok_or_else(|| {
                fail(format!(
                    "`combine` takes reactions, not {}",
                    super::super::words::a_type(item.type_name())
                ))
                .argument(1)
            })
        });
        let reactions = read.collect::<Result<Vec<_>, _>>()?;
        let combined = combine_routes(target, &reactions.iter().collect::<Vec<_>>()).map_err(Fail::from)?;
        Ok(told(&context, combined))
    }
}

/// A plain number in a script.
pub(super) fn plain(what: &str, given: &Dynamic) -> Result<f64, Fail> {
    match given.read_lock::<Quantity>() {
        Some(quantity) => {
            quantity.to(&Unit::one()).map(|q| q.value()).map_err(|error| fail(error.to_string()))
        }
        None => real(what, given),
    }
}
