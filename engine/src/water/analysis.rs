//! The analysis of a water: what was measured, and what of it fixes the proton total.

use std::collections::BTreeMap;

use super::analyte::Analyte;
use super::concentration::{self, Amount};
use super::redox::Redox;
use crate::chem::{Species, reaction};
use crate::ledger::Sea;
use crate::named::{KeyFault, Named, Value};
use crate::nearest::nearest;
use crate::quantity::Quantity;
use crate::text::list;
use crate::units::{Kind, Pressure, Temperature};

/// Totals to start from: those of a laboratory analysis, or those an earlier equilibrium left dissolved.
#[derive(Debug, Clone)]
pub enum Analysis {
    /// Measured amounts and what fixes the proton total.
    Measured(Box<Measured>),
    /// What an earlier equilibrium left.
    Dissolved(Dissolved),
    /// Waters mixed, with the share of each in the water's mass.
    Mixed(Vec<(super::Sample, f64)>),
    /// A row of a survey that could not be read, with the reason.
    Spoilt(String),
}

/// What an earlier equilibrium left dissolved.
#[derive(Debug, Clone, Default)]
pub struct Dissolved {
    /// Moles of species per kilogram of water whose elements and charge are the water's totals.
    pub totals: Vec<(Species, Quantity)>,
    /// The water's temperature in kelvin, where it is uncertain.
    pub temperature: Option<Quantity>,
    /// Names of the redox couples in equilibrium.
    pub couples: Vec<String>,
}

/// A laboratory analysis, read and in range, not yet converted to one basis.
#[derive(Debug, Clone, Default)]
pub struct Measured {
    /// Amounts by analyte, with the key each was given under.
    pub amounts: Vec<Given>,
    /// pH, alkalinity, inorganic carbon and CO2, as measured.
    pub evidence: Evidence,
    /// The key whose total absorbs the charge misfit.
    pub make_up: Option<String>,
    /// Density of the solution in kg/L, if it was measured.
    pub density: Option<f64>,
    /// The temperature at which volumes were measured.
    pub volume_temperature: Option<Temperature>,
    /// The water's own temperature in kelvin, unless it is known exactly.
    pub temperature: Option<Quantity>,
    /// pe, Eh or ORP as measured, and the couples in equilibrium.
    pub redox: Redox,
    /// Salinity, pressure and scale of pH of a seawater.
    pub sea: Option<Sea>,
    /// The temperature at which pH, the fugacity of CO2 or both were measured, where that is not the water's own.
    pub measured_at: Option<Temperature>,
}

/// An amount with what it is of and the key it was given under.
pub type Given = (Analyte, String, Amount);

/// What was measured of the acid-base state.
#[derive(Debug, Clone, Default)]
pub struct Evidence {
    /// -log10 a(H⁺), or the demand for electroneutrality.
    pub ph: Option<Ph>,
    /// Alkalinity in equivalents.
    pub alkalinity: Option<Amount>,
    /// Dissolved inorganic carbon in moles.
    pub dic: Option<Amount>,
    /// Fugacity of CO2 in bar.
    pub co2: Option<Quantity>,
    /// Which two to use where three or more were measured.
    pub from: Option<Vec<String>>,
}

/// What is said of pH.
#[derive(Debug, Clone)]
pub enum Ph {
    /// A measured value.
    Measured(Quantity),
    /// Whatever makes the charges add up.
    Electroneutral,
}

/// Conditions of a sample, split off the analysis since treatments change them.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Setting {
    /// Temperature.
    pub temperature: Temperature,
    /// Pressure.
    pub pressure: Pressure,
    /// Kilograms of water.
    pub water: f64,
}

/// Everything read from the keys of a sample.
#[derive(Debug, Clone)]
pub struct Read {
    /// What the sample is called.
    pub name: Option<String>,
    /// Temperature, pressure and amount of water.
    pub setting: Setting,
    /// The analysis.
    pub measured: Measured,
    /// Defaults that were used, in words.
    pub defaults: Vec<String>,
    /// How what was given was taken, in words.
    pub notes: Vec<String>,
}

/// The keys of a sample besides amounts.
pub const KEYS: [&str; 21] = [
    "name",
    "temperature",
    "pressure",
    "volume_temperature",
    "density",
    "water",
    "pH",
    "alkalinity",
    "DIC",
    "fCO2",
    "pCO2",
    "xCO2",
    "from",
    "make_up",
    "pe",
    "Eh",
    "ORP",
    "electrode",
    "couples",
    "labels",
    "ledger",
];

/// Keys of later landings, refused with a word rather than as misspelt.
const NOT_YET: [(&str, &str); 4] = [
    ("salinity", "it belongs to `seawater(#{ … })`"),
    ("ph_scale", "outside seawater pH is -log10 of the activity of H^+"),
    ("pH_temperature", "give pH as it is at the sample's temperature; `seawater(#{ … })` takes both"),
    ("fCO2_temperature", "`seawater(#{ … })` takes it"),
];

/// A bare total above this, mol/kg(water), is taken for a forgotten unit.
const LARGEST_BARE_TOTAL: f64 = 20.0;
/// The same for alkalinity and inorganic carbon, of which waters hold less.
const LARGEST_BARE_CARBON: f64 = 1.0;

/// Reads the keys of a sample.
///
/// # Errors
///
/// Returns the first fault with its key.
pub fn read(entries: BTreeMap<String, Value>) -> Result<Read, KeyFault> {
    let mut named = Named::new(entries);
    let mut defaults = Vec::new();
    let name = named.text("name")?;
    let (setting, temperature) = read_setting(&mut named, &mut defaults)?;
    let density = read_density(&mut named)?;
    let volume_temperature =
        named.take("volume_temperature").map(|v| reaction::temperature("volume_temperature", v));
    let mut measured = Measured {
        evidence: {
            let co2 = read_co2(&mut named, setting.pressure)?;
            read_evidence(&mut named, co2)?
        },
        make_up: named.text("make_up")?,
        redox: super::redox::read(&mut named, setting.temperature)?,
        density,
        volume_temperature: volume_temperature.transpose()?,
        temperature,
        ..Measured::default()
    };
    for (key, value) in named.rest() {
        measured.amounts.push(read_amount(key, value, &[])?);
    }
    check_make_up(&measured)?;
    check_neutrality(&measured.evidence)?;
    if measured.evidence.dic.is_some()
        && measured.amounts.iter().any(|(analyte, ..)| analyte.element().symbol() == "C")
    {
        return Err(KeyFault::new("DIC", "`DIC` and `C` state the same carbon: keep one"));
    }
    Ok(Read { name, setting, measured, defaults, notes: vec![] })
}

/// The setting, and the temperature in kelvin where it was measured.
pub(super) fn read_setting(
    named: &mut Named,
    defaults: &mut Vec<String>,
) -> Result<(Setting, Option<Quantity>), KeyFault> {
    let mut uncertain = None;
    let temperature = match named.quantity("temperature", Kind::Temperature)? {
        Some(given) => {
            let kelvin = given.to(&crate::units::Unit::parse("K").expect("a known unit")).ok();
            // An unstated uncertainty is unknown, not zero; what a sweep chooses is exact.
            uncertain = kelvin.filter(|kelvin| kelvin.sigma() != Some(0.0));
            reaction::temperature("temperature", Value::Quantity(given))?
        }
        None => {
            defaults.push("temperature 25 degC".into());
            Temperature::REFERENCE
        }
    };
    let pressure = named.quantity("pressure", Kind::Pressure)?;
    let pressure = match pressure {
        Some(quantity) => pressure_of("pressure", &quantity)?,
        None => Pressure::ATMOSPHERE,
    };
    let water = named.quantity("water", Kind::Mass)?.map(|quantity| {
        let kilogram = crate::units::Unit::parse("kg").expect("a known unit");
        quantity
            .to(&kilogram)
            .map(|mass| mass.value())
            .map_err(|error| KeyFault::new("water", error.to_string()))
    });
    let water = water.transpose()?.unwrap_or(1.0);
    if water <= 0.0 {
        return Err(KeyFault::new("water", "`water` must be above zero"));
    }
    Ok((Setting { temperature, pressure, water }, uncertain))
}

/// A pressure in bar, above zero.
///
/// # Errors
///
/// A fault of `key`.
pub fn pressure_of(key: &str, quantity: &Quantity) -> Result<Pressure, KeyFault> {
    Pressure::try_from(quantity).map_err(|error| KeyFault::new(key, format!("`{key}`: {error}")))
}

pub(super) fn read_density(named: &mut Named) -> Result<Option<f64>, KeyFault> {
    let Some(quantity) = named.quantity("density", Kind::Density)? else { return Ok(None) };
    let unit = crate::units::Unit::parse("kg/L").expect("a known unit");
    let density = quantity.to(&unit).map_err(|error| KeyFault::new("density", error.to_string()))?.value();
    if (0.5..=3.0).contains(&density) {
        Ok(Some(density))
    } else {
        Err(KeyFault::new("density", format!("`density` is {density} kg/L, which no water has")))
    }
}

/// pH, alkalinity and inorganic carbon, beside the fugacity of CO2 in bar.
pub(super) fn read_evidence(named: &mut Named, co2: Option<Quantity>) -> Result<Evidence, KeyFault> {
    let ph = match named.take("pH") {
        None => None,
        Some(Value::Text(text)) if text == "electroneutral" => Some(Ph::Electroneutral),
        Some(value) => {
            let ph = crate::named::quantity("pH", value, Kind::Fraction)?;
            if !(-2.0..=17.0).contains(&ph.value()) {
                return Err(KeyFault::new("pH", format!("pH {} lies outside -2 to 17", ph.value())));
            }
            Some(Ph::Measured(ph))
        }
    };
    let amount = |key: &str, given: Option<Quantity>, read: fn(&Quantity) -> Result<Amount, String>| {
        given
            .map(|given| read(&given).map_err(|message| KeyFault::new(key, format!("`{key}`: {message}"))))
            .transpose()
    };
    let alkalinity = bare_below(named, "alkalinity", "meq/L")?;
    let alkalinity =
        alkalinity.map(|given| crate::named::quantity("alkalinity", given, Kind::Alkalinity)).transpose()?;
    let alkalinity = amount("alkalinity", alkalinity, concentration::alkalinity)?;
    let dic = bare_below(named, "DIC", "mmol/L")?;
    let dic = dic.map(|given| crate::named::quantity("DIC", given, Kind::Amount)).transpose()?;
    let dic = amount("DIC", dic, |given| {
        concentration::amount(&Analyte::parse("C").expect("carbon is an element"), given)
    })?;
    if let Some(dic) = &dic {
        not_negative("DIC", dic)?;
    }
    let evidence = Evidence { ph, alkalinity, dic, co2, from: named.texts("from")? };
    check_pair(&evidence)?;
    Ok(evidence)
}

/// Takes a value out, unless it is a bare number too large to be meant.
fn bare_below(named: &mut Named, key: &str, unit: &str) -> Result<Option<Value>, KeyFault> {
    match named.take(key) {
        Some(Value::Number(number)) if number.abs() > LARGEST_BARE_CARBON => {
            Err(KeyFault::new(key, format!("`{key}`: {number} mol/kg? write \"{number} {unit}\"")))
        }
        value => Ok(value),
    }
}

/// Fugacity in bar; an ideal gas's partial pressure is its fugacity, and a mole fraction that of the total pressure.
fn read_co2(named: &mut Named, pressure: Pressure) -> Result<Option<Quantity>, KeyFault> {
    let mut found: Option<(&str, Quantity)> = None;
    for (key, kind) in [("fCO2", Kind::Pressure), ("pCO2", Kind::Pressure), ("xCO2", Kind::Fraction)] {
        let Some(given) = named.quantity(key, kind)? else { continue };
        if let Some((other, _)) = &found {
            return Err(KeyFault::new(key, format!("`{other}` and `{key}` state the same CO2: keep one")));
        }
        let bar = Kind::Pressure.default_unit();
        let fugacity = if kind == Kind::Pressure {
            given.to(&bar)
        } else {
            Quantity::from_partials(given.value() * pressure.bar(), bar, &[(&given, pressure.bar())])
        };
        let fugacity = fugacity.map_err(|error| KeyFault::new(key, error.to_string()))?;
        if fugacity.value() <= 0.0 {
            return Err(KeyFault::new(key, format!("`{key}` must be above zero")));
        }
        found = Some((key, fugacity));
    }
    Ok(found.map(|(_, fugacity)| fugacity))
}

impl Evidence {
    /// The keys that were given, of `pH`, `alkalinity`, `DIC` and `fCO2`.
    #[must_use]
    pub fn given(&self) -> Vec<&'static str> {
        [
            ("pH", self.ph.is_some()),
            ("alkalinity", self.alkalinity.is_some()),
            ("DIC", self.dic.is_some()),
            ("fCO2", self.co2.is_some()),
        ]
        .into_iter()
        .filter_map(|(key, given)| given.then_some(key))
        .collect()
    }

    /// The keys that fix the proton total: those in `from`, else all that were given.
    #[must_use]
    pub fn used(&self) -> Vec<&'static str> {
        let chosen = |key: &&str| self.from.as_ref().is_none_or(|from| from.iter().any(|name| name == key));
        self.given().into_iter().filter(chosen).collect()
    }

    /// Whether `key` is among [`Evidence::used`].
    #[must_use]
    pub fn uses(&self, key: &str) -> bool {
        self.used().contains(&key)
    }
}

fn check_pair(evidence: &Evidence) -> Result<(), KeyFault> {
    let given = evidence.given();
    if let Some(from) = &evidence.from {
        for name in from {
            if !given.contains(&name.as_str()) {
                let message = format!("`from` names `{name}`, which was not given: {} were", list(&given));
                return Err(KeyFault::new("from", message));
            }
        }
        if from.len() != 2 {
            return Err(KeyFault::new("from", "`from` names two of `pH`, `alkalinity`, `DIC` and `fCO2`"));
        }
    }
    if evidence.used().len() > 2 {
        let message = format!(
            "{} are more than fix the water: name two, as in `from: [\"pH\", \"alkalinity\"]`; the others become misfits",
            list(&given)
        );
        return Err(KeyFault::new(given[2], message));
    }
    Ok(())
}

/// Reads an amount by its key; `more` are keys beside [`KEYS`] that a misspelt one may be meant as.
pub(super) fn read_amount(key: String, value: Value, more: &[&'static str]) -> Result<Given, KeyFault> {
    if let Some((_, why)) = NOT_YET.iter().find(|(later, _)| *later == key) {
        return Err(KeyFault::new(key.clone(), format!("`{key}` is not read here: {why}")));
    }
    let analyte = Analyte::parse(&key).map_err(|error| {
        let message = match nearest(&key, KEYS.into_iter().chain(more.iter().copied())) {
            Some(close) if !matches!(error, super::analyte::AnalyteError::Carbonate(_)) => {
                format!("unknown key `{key}`; did you mean `{close}`?")
            }
            _ => error.to_string(),
        };
        KeyFault::new(key.clone(), message)
    })?;
    if let Value::Number(number) = value
        && number.abs() > LARGEST_BARE_TOTAL
    {
        let message = format!("`{key}`: {number} mol/kg? write \"{number} mg/L\"");
        return Err(KeyFault::new(key, message));
    }
    amount_of(analyte, key, value)
}

/// Reads an amount of a named analyte under a key of its own.
pub(super) fn read_amount_of(analyte: &str, key: &str, value: Value) -> Result<Given, KeyFault> {
    let analyte = Analyte::parse(analyte).map_err(|error| KeyFault::new(key, error.to_string()))?;
    amount_of(analyte, key.into(), value)
}

fn amount_of(analyte: Analyte, key: String, value: Value) -> Result<Given, KeyFault> {
    let given = crate::named::quantity(&key, value, Kind::Amount)?;
    let amount = concentration::amount(&analyte, &given);
    let amount = amount.map_err(|message| KeyFault::new(key.clone(), format!("`{key}`: {message}")))?;
    not_negative(&key, &amount)?;
    Ok((analyte, key, amount))
}

fn not_negative(key: &str, amount: &Amount) -> Result<(), KeyFault> {
    if amount.moles.value() < 0.0 {
        return Err(KeyFault::new(key, format!("`{key}` is negative: an amount is zero or more")));
    }
    Ok(())
}

/// Alkalinity and the charge of a water are the same combination of its totals, so the one follows from the other: together
/// they leave carbon open.
pub(super) fn check_neutrality(evidence: &Evidence) -> Result<(), KeyFault> {
    let is_neutral = matches!(evidence.ph, Some(Ph::Electroneutral));
    if !(is_neutral && evidence.uses("pH") && evidence.uses("alkalinity")) {
        return Ok(());
    }
    Err(KeyFault::new(
        "alkalinity",
        "`pH: \"electroneutral\"` fixes `alkalinity` as well, as the charge of the other ions, and leaves the carbon open: \
         give `DIC` or `fCO2` in its place",
    ))
}

pub(super) fn check_make_up(measured: &Measured) -> Result<(), KeyFault> {
    let Some(key) = &measured.make_up else { return Ok(()) };
    if matches!(measured.evidence.ph, Some(Ph::Electroneutral)) {
        return Err(KeyFault::new(
            "make_up",
            format!(
                "`pH: \"electroneutral\"` and `make_up: \"{key}\"` both make the charges add up: keep one"
            ),
        ));
    }
    if measured.amounts.iter().any(|(_, own, _)| own == key) {
        return Ok(());
    }
    let keys: Vec<&str> = measured.amounts.iter().map(|(_, own, _)| own.as_str()).collect();
    Err(KeyFault::new(
        "make_up",
        format!("`make_up` names `{key}`, which was not given: {} were", list(&keys)),
    ))
}
