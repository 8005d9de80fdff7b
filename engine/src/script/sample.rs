//! `Sample` in scripts: waters, surveys and treatments.

use std::collections::BTreeMap;

use rhai::plugin::*;
use rhai::{Array, Dynamic, Map};

use super::faults::advised;
use super::named::{named, one_or_many, value};
use super::reaction::{plain, quantity};
use super::show::Style;
use super::{Fail, Host, ScriptResult, Vocabulary, fail};
use crate::ledger::{Ledger, shipped};
use crate::named::Value;
use crate::nearest::nearest;
use crate::quantity::Quantity;
use crate::text::{count, list};
use crate::units::{Kind, Pressure, Temperature, Unit};
use crate::water::csv_text::{Below, CsvOptions};
use crate::water::{Sample, SampleError, Survey, SurveyError, Treatment};

/// Registers the type.
pub(super) fn register(vocabulary: &mut Vocabulary) {
    vocabulary
        .module(rhai::exported_module!(sample_functions))
        .pure(&[
            "sample",
            "but",
            "with_ledger",
            "open_to",
            "saturate",
            "allow",
            "hold",
            "warm_to",
            "compress_to",
        ])
        .native::<Sample>("Sample", show);
}

fn show(sample: &Sample, style: &Style) -> String {
    let kind = if sample.sea().is_some() { "seawater" } else { "water" };
    let name = sample.name().map_or_else(|| kind.to_string(), |name| format!("{kind} \"{name}\""));
    let degree = if style.ascii { "degC" } else { "°C" };
    let keys: Vec<&str> = sample
        .entries()
        .keys()
        .map(String::as_str)
        .filter(|key| !["name", "temperature", "pressure"].contains(key))
        .collect();
    let measured = if keys.is_empty() { String::new() } else { format!(": {}", keys.join(", ")) };
    let treatments: Vec<String> = sample.treatments().iter().map(words).collect();
    let treated = if treatments.is_empty() { String::new() } else { format!("; {}", treatments.join(", ")) };
    format!("{name}, {} {degree}{measured}{treated}", trimmed(sample.setting().temperature.celsius()))
}

fn trimmed(number: f64) -> String {
    super::numbers::general(number, 6)
}

fn words(treatment: &Treatment) -> String {
    match treatment {
        Treatment::OpenTo { gas, fugacity } => format!("open to {gas} at {} bar", trimmed(*fugacity)),
        Treatment::Saturate { solid, index } if *index == 0.0 => format!("saturated with {solid}"),
        Treatment::Saturate { solid, index } => format!("saturated with {solid} at SI {}", trimmed(*index)),
        Treatment::Allow { solid, above } if *above == 0.0 => format!("{solid} may form"),
        Treatment::Allow { solid, above } => format!("{solid} may form above SI {}", trimmed(*above)),
        Treatment::WithSolid { solid, amount } => format!("with {solid}, {}", amount.moles),
        Treatment::Dose(dose) => format!("dosed with {} {}", dose.amount.moles, dose.reagent),
        Treatment::Remove(dose) => format!("{} {} removed", dose.amount.moles, dose.reagent),
        Treatment::Concentrate(factor) => format!("concentrated {} times", trimmed(*factor)),
        Treatment::AddSolution { volume, solution, .. } => {
            let formulas: Vec<&str> = solution.solutes.iter().map(|(formula, _)| formula.as_str()).collect();
            format!("with {} L of a solution of {}", trimmed(*volume), list(&formulas))
        }
        Treatment::Adjust(adjust) => {
            let reagents: Vec<&str> = adjust.reagents.iter().map(|(name, ..)| name.as_str()).collect();
            let targets: Vec<String> =
                adjust.targets.iter().map(|(name, target)| format!("{name} {target}")).collect();
            format!("adjusted with {} to {}", list(&reagents), list(&targets))
        }
        Treatment::Beside(neighbour) => format!("beside {}", neighbour.name()),
        Treatment::HoldPh { ph, reagent: None } => format!("held at pH {}", trimmed(*ph)),
        Treatment::HoldPh { ph, reagent: Some(reagent) } => {
            format!("held at pH {} with {reagent}", trimmed(*ph))
        }
        Treatment::HoldPe { pe, reagent: None } => format!("held at pe {}", trimmed(*pe)),
        Treatment::HoldPe { pe, reagent: Some(reagent) } => {
            format!("held at pe {} with {reagent}", trimmed(*pe))
        }
        Treatment::WarmTo(temperature) => format!("brought to {} degC", trimmed(temperature.celsius())),
        Treatment::CompressTo(pressure) => format!("brought to {} bar", trimmed(pressure.bar())),
    }
}

impl From<SampleError> for Fail {
    fn from(error: SampleError) -> Self {
        match error {
            SampleError::Key(fault) => fault.into(),
            SampleError::Ledger(error) => error.into(),
            other => fail(other.to_string()),
        }
    }
}

impl From<SurveyError> for Fail {
    fn from(error: SurveyError) -> Self {
        advised(&error.to_string()).argument(0)
    }
}

/// A mineral or gas must be known to some shipped ledger, or to the sample's own; whether the ledger finally used knows
/// it is checked at equilibrium.
pub(super) fn known(sample: &Sample, name: &str) -> Result<(), Fail> {
    let shipped: Vec<Ledger> =
        shipped::names().iter().filter_map(|name| shipped::as_shipped(name).ok()).collect();
    if sample.ledger().is_some() || shipped.iter().any(|ledger| ledger.find_phase(name).is_ok()) {
        return Ok(());
    }
    let names: Vec<&str> =
        shipped.iter().flat_map(|ledger| ledger.phases_by_name()).map(|(name, _)| name).collect();
    let help = nearest(name, names.iter().copied()).map(|near| format!("did you mean `{near}`?"));
    let advice = "a mineral or gas of your own belongs to a ledger: use `.with_ledger(book)` first";
    Err(fail(format!("no shipped ledger knows a mineral or gas `{name}`"))
        .help(help.unwrap_or_else(|| advice.into()))
        .argument(0))
}

pub(super) fn treated(sample: &Sample, treatment: Treatment) -> ScriptResult<Sample> {
    Ok(sample.treated(treatment).map_err(Fail::from)?)
}

/// A treatment with the uncertainty its value was written with.
fn treated_to(sample: &Sample, treatment: Treatment, stated: &Quantity) -> ScriptResult<Sample> {
    Ok(sample.treated_to(treatment, stated).map_err(Fail::from)?)
}

/// A chosen value in the default unit of its kind, with the uncertainty it was written with.
fn chosen(what: &str, given: &Dynamic, kind: Kind) -> Result<Quantity, Fail> {
    let given = quantity(what, given, kind)?;
    given.to(&kind.default_unit()).map_err(|error| fail(error.to_string()))
}

/// A bare fugacity above this, bar, is taken for a forgotten unit.
const LARGEST_BARE_FUGACITY: f64 = 10.0;

fn fugacity(gas: &str, given: &Dynamic) -> Result<Quantity, Fail> {
    let value = value(given)?;
    if let Value::Text(text) = &value
        && (text.ends_with("ppm") || text.ends_with("ppb"))
    {
        return Err(fail("a gas is given by its fugacity, not in ppm")
            .help("write `\"420 uatm\"`, or the mole fraction times the pressure")
            .argument(1));
    }
    if let Value::Number(number) = value
        && number > LARGEST_BARE_FUGACITY
    {
        return Err(fail(format!("{number} bar?"))
            .help(format!("write `\"{number} uatm\"`, or `\"{number} bar\"` if you mean it"))
            .argument(1));
    }
    let what = format!("fugacity of {gas}");
    let fugacity = crate::named::quantity(&what, value, Kind::Pressure)
        .map_err(|fault| fail(fault.message).argument(1))?;
    let wrong = |message: String| fail(message).argument(1);
    Pressure::try_from(&fugacity).map_err(|error| wrong(error.to_string()))?;
    fugacity.to(&Kind::Pressure.default_unit()).map_err(|error| wrong(error.to_string()))
}

fn entries(map: &Map) -> Result<BTreeMap<String, Value>, Fail> {
    let mut entries = BTreeMap::new();
    for (key, given) in map {
        let read = value(given).map_err(|error| error.key(key.to_string()))?;
        entries.insert(key.to_string(), read);
    }
    Ok(entries)
}

/// A sample of a script's keys, by one of the readers of samples; `ledger` is the one it is computed with.
pub(super) fn sample_of(
    keys: &Map,
    read: fn(BTreeMap<String, Value>) -> Result<Sample, SampleError>,
) -> ScriptResult<Sample> {
    let mut keys = keys.clone();
    let ledger = keys.remove("ledger").map(|ledger| {
        ledger.try_cast::<Ledger>().ok_or_else(|| fail("`ledger` takes a ledger").key("ledger"))
    });
    let ledger = ledger.transpose()?;
    let sample = read(entries(&keys)?).map_err(Fail::from)?;
    Ok(ledger.map_or(sample.clone(), |ledger| sample.with_ledger(&ledger)))
}

fn csv_options(options: &Map) -> Result<CsvOptions, Fail> {
    let mut options = named(options)?;
    let missing = options.texts("missing").map_err(Fail::from)?.unwrap_or_default();
    let below = match options.text("below").map_err(Fail::from)?.as_deref() {
        None | Some("half") => Below::Half,
        Some("zero") => Below::Zero,
        Some("limit") => Below::Limit,
        Some("skip") => Below::Skip,
        Some(other) => {
            let words = ["half", "zero", "limit", "skip"];
            return Err(fail(format!("`below` is one of {}, not `{other}`", list(&words))).key("below"));
        }
    };
    let mut renames = |key: &str| -> Result<BTreeMap<String, String>, Fail> {
        match options.take(key) {
            None => Ok(BTreeMap::new()),
            Some(Value::Map(map)) => map
                .into_iter()
                .map(|(from, to)| match to {
                    Value::Text(to) => Ok((from, to)),
                    other => {
                        Err(fail(format!("`{key}` takes a map of texts, not {}", other.kind())).key(from))
                    }
                })
                .collect(),
            Some(other) => Err(fail(format!("`{key}` takes a map of texts, not {}", other.kind())).key(key)),
        }
    };
    let (columns, units) = (renames("columns")?, renames("units")?);
    options.finish().map_err(Fail::from)?;
    Ok(CsvOptions { missing, below, columns, units })
}

fn survey(context: &NativeCallContext, name: &str, options: &CsvOptions) -> ScriptResult<Array> {
    let host = Host::of(context);
    let path = host.files().path_to_read(name).map_err(|error| Fail::from(error).argument(0))?;
    let bytes =
        std::fs::read(&path).map_err(|error| fail(format!("cannot read `{name}`: {error}")).argument(0))?;
    let survey = Survey::read(&bytes, options).map_err(|error| match error {
        SurveyError::Csv(error) => fail(format!("{name}: {error}")).argument(0),
        other => fail(format!("{name}: {other}")).argument(0),
    })?;
    let mut told = vec![count(survey.samples.len(), "row")];
    if !survey.replacements.is_empty() {
        told.push(format!(
            "{} below the detection limit replaced",
            count(survey.replacements.len(), "value")
        ));
    }
    if !survey.faults.is_empty() {
        told.push(format!(
            "{} that cannot be read, whose equilibrium fails with the reason",
            count(survey.faults.len(), "row")
        ));
    }
    host.message(&format!("{name}: {}", told.join(", ")));
    Ok(survey.samples.into_iter().map(Dynamic::from).collect())
}

/// Waters and what is done to them.
#[export_module]
mod sample_functions {
    use super::*;

    /// A water sample from its analysis. Keys: `name`, `temperature` (degC), `pressure` (bar), `pH`, `alkalinity`, `DIC`,
    /// `fCO2`, `pCO2`, `xCO2`, `from`, `make_up`, `density`, `volume_temperature`, `water`, `pe` (a number, or a couple such as
    /// `"Fe(III)/Fe(II)"`), `Eh` (V against the standard hydrogen electrode), `ORP` with `electrode`, `couples` (`"all"` or a
    /// list), and amounts of elements, oxidation states or species with their units. A bare number is mol/kg(water).
    ///
    /// ```rhai
    /// let lake = sample(#{ temperature: "8.5 degC", pH: 8.15, alkalinity: "2.35 meq/L", Ca: "41.2 mg/L" });
    /// fmt(lake.equilibrate().SI("calcite").value, ".2f")   // "0.28"
    /// ```
    #[rhai_fn(name = "sample", return_raw)]
    pub fn sample(keys: Map) -> ScriptResult<Sample> {
        sample_of(&keys, Sample::read)
    }

    /// Samples from a CSV file beside the script, with units in its header: `Ca [mg/L]`, `alkalinity [mg/L as CaCO3]`.
    #[rhai_fn(name = "read_samples", return_raw)]
    pub fn read_samples(context: NativeCallContext, file: &str) -> ScriptResult<Array> {
        survey(&context, file, &CsvOptions::default())
    }
    /// The same with options: `missing` (texts that mean no value), `below` (`"half"`, `"zero"`, `"limit"`, `"skip"`),
    /// `columns` and `units` (new headers and units by the file's).
    #[rhai_fn(name = "read_samples", return_raw)]
    pub fn read_samples_with(context: NativeCallContext, file: &str, options: Map) -> ScriptResult<Array> {
        survey(&context, file, &csv_options(&options)?)
    }

    /// What the sample is called, or `()`.
    #[rhai_fn(name = "name", get = "name", pure)]
    pub fn sample_name(sample: &mut Sample) -> Dynamic {
        sample.name().map_or(Dynamic::UNIT, |name| name.to_string().into())
    }
    /// Defaults used and detection limits replaced, as texts.
    #[rhai_fn(name = "warnings", get = "warnings", pure)]
    pub fn sample_warnings(sample: &mut Sample) -> Array {
        sample.notes().iter().map(|note| note.clone().into()).collect()
    }

    /// The same analysis with some keys changed; nothing is simulated. A key set to `()` is taken out.
    ///
    /// ```rhai
    /// let lake = sample(#{ pH: 8.0, Ca: "40 mg/L" });
    /// lake.but(#{ pH: 7.0 }).equilibrate().pH.value   // 7
    /// ```
    #[rhai_fn(pure, return_raw)]
    pub fn but(sample: &mut Sample, changes: Map) -> ScriptResult<Sample> {
        let mut read = BTreeMap::new();
        for (key, given) in changes {
            let change = if given.is_unit() {
                None
            } else {
                Some(value(&given).map_err(|error| error.key(key.to_string()))?)
            };
            read.insert(key.to_string(), change);
        }
        Ok(sample.but(read).map_err(Fail::from)?)
    }
    /// The same water, computed with this ledger unless another is named.
    #[rhai_fn(pure)]
    pub fn with_ledger(sample: &mut Sample, ledger: Ledger) -> Sample {
        sample.with_ledger(&ledger)
    }

    /// The water in contact with so much of a gas that its fugacity stays fixed (bar, or text with a unit).
    ///
    /// ```rhai
    /// let rain = sample(#{ pH: "electroneutral" }).open_to("CO2(g)", "420 uatm");
    /// fmt(rain.equilibrate().pH.value, ".2f")   // "5.60"
    /// ```
    #[rhai_fn(pure, return_raw)]
    pub fn open_to(sample: &mut Sample, gas: &str, fugacity: Dynamic) -> ScriptResult<Sample> {
        known(sample, gas)?;
        let stated = super::fugacity(gas, &fugacity)?;
        treated_to(sample, Treatment::OpenTo { gas: gas.into(), fugacity: stated.value() }, &stated)
    }
    /// The water in contact with as much of a solid as it will dissolve or deposit: SI 0.
    #[rhai_fn(name = "saturate", pure, return_raw)]
    pub fn saturate(sample: &mut Sample, solid: &str) -> ScriptResult<Sample> {
        known(sample, solid)?;
        treated(sample, Treatment::Saturate { solid: solid.into(), index: 0.0 })
    }
    /// The same, kept at another saturation index.
    #[rhai_fn(name = "saturate", pure, return_raw)]
    pub fn saturate_at(sample: &mut Sample, solid: &str, index: Dynamic) -> ScriptResult<Sample> {
        known(sample, solid)?;
        let stated = chosen(&format!("saturation index of {solid}"), &index, Kind::Fraction)?;
        treated_to(sample, Treatment::Saturate { solid: solid.into(), index: stated.value() }, &stated)
    }
    /// Solids that may form where the water is supersaturated: a name or a list of names.
    ///
    /// ```rhai
    /// let water = sample(#{ pH: 9, alkalinity: "3 meq/L", Ca: "80 mg/L" }).allow("calcite");
    /// water.equilibrate().amount("calcite").value > 0   // true
    /// ```
    #[rhai_fn(name = "allow", pure, return_raw)]
    pub fn allow(sample: &mut Sample, solids: Dynamic) -> ScriptResult<Sample> {
        allow_above(sample, solids, Dynamic::from(0.0))
    }
    /// The same, forming only above a saturation index.
    #[rhai_fn(name = "allow", pure, return_raw)]
    pub fn allow_above(sample: &mut Sample, solids: Dynamic, above: Dynamic) -> ScriptResult<Sample> {
        let mut water = sample.clone();
        for solid in one_or_many(&solids)? {
            known(sample, &solid)?;
            let stated = chosen(&format!("saturation index of {solid}"), &above, Kind::Fraction)?;
            water = treated_to(&water, Treatment::Allow { solid, above: stated.value() }, &stated)?;
        }
        Ok(water)
    }
    /// A value kept through all treatments: `.hold("pH", 7)`, by hydrogen ions against inert charge, or `.hold("pe", 4)`, by
    /// electrons.
    ///
    /// ```rhai
    /// let water = sample(#{ pH: 7, Fe: "1 mg/L" }).hold("pH", 7).hold("pe", -3).equilibrate();
    /// water.get("total(Fe(II))").value / water.total("Fe").value > 0.99   // true
    /// ```
    #[rhai_fn(name = "hold", pure, return_raw)]
    pub fn hold(
        context: NativeCallContext,
        sample: &mut Sample,
        what: &str,
        value: Dynamic,
    ) -> ScriptResult<Sample> {
        if what == "pH" {
            Host::of(&context).message("warning: pH is held by hydrogen ions against inert charge; name a reagent, such as `\"NaOH\"`, to hold it by one");
        }
        hold_with(sample, what, value, None)
    }
    /// The same, brought about by a reagent: `.hold("pH", 7, "NaOH")`. How much of it is `added(NaOH)`. Dosing of acids
    /// and bases in practice follows local codes and licensed judgement.
    #[rhai_fn(name = "hold", pure, return_raw)]
    pub fn hold_by(sample: &mut Sample, what: &str, value: Dynamic, reagent: &str) -> ScriptResult<Sample> {
        hold_with(sample, what, value, Some(reagent.to_string()))
    }
    /// The same totals at another temperature (degC, or text with a unit).
    ///
    /// ```rhai
    /// let warm = sample(#{ temperature: 5, pH: 8, alkalinity: "2 meq/L" }).warm_to("25 degC");
    /// warm.equilibrate().temperature.value   // 25
    /// ```
    #[rhai_fn(pure, return_raw)]
    pub fn warm_to(sample: &mut Sample, to: Dynamic) -> ScriptResult<Sample> {
        let stated = quantity("temperature", &to, Kind::Temperature)?;
        let temperature =
            Temperature::try_from(&stated).map_err(|error| fail(error.to_string()).argument(0))?;
        let kelvin = stated.to(&Unit::known("K")).map_err(|error| fail(error.to_string()))?;
        treated_to(sample, Treatment::WarmTo(temperature), &kelvin)
    }
    /// The same totals at another pressure (bar, or text with a unit). Constants are not corrected for pressure yet.
    #[rhai_fn(pure, return_raw)]
    pub fn compress_to(sample: &mut Sample, to: Dynamic) -> ScriptResult<Sample> {
        let pressure = quantity("pressure", &to, Kind::Pressure)?;
        let pressure = Pressure::try_from(&pressure).map_err(|error| fail(error.to_string()).argument(0))?;
        treated(sample, Treatment::CompressTo(pressure))
    }
    /// Whether two samples are made of the same values.
    #[rhai_fn(name = "==")]
    pub fn same_sample(left: Sample, right: Sample) -> bool {
        format!("{:?} {:?}", left.entries(), left) == format!("{:?} {:?}", right.entries(), right)
    }
    #[rhai_fn(name = "!=")]
    pub fn other_sample(left: Sample, right: Sample) -> bool {
        !same_sample(left, right)
    }
}

fn hold_with(sample: &Sample, what: &str, value: Dynamic, reagent: Option<String>) -> ScriptResult<Sample> {
    if !["pH", "pe"].contains(&what) {
        return fail(format!("`{what}` cannot be held"))
            .help("only `pH` and `pe` can; a gas is held by `.open_to`, a solid by `.saturate`")
            .argument(0)
            .raise();
    }
    if let Some(reagent) = &reagent {
        let ledger = match sample.ledger() {
            Some(ledger) => ledger.clone(),
            None => shipped::ledger("freshwater", None).map_err(Fail::from)?,
        };
        crate::equilibrium::treatment::reagent(&ledger, reagent)
            .map_err(|error| fail(error.to_string()).argument(2))?;
    }
    let stated = chosen(if what == "pe" { "pe" } else { "pH" }, &value, Kind::Fraction)?;
    let treatment = match what {
        "pe" => Treatment::HoldPe { pe: stated.value(), reagent },
        _ => Treatment::HoldPh { ph: stated.value(), reagent },
    };
    treated_to(sample, treatment, &stated)
}

/// Numbers of an axis: a list of numbers.
pub(super) fn numbers(what: &str, values: &Array) -> Result<Vec<f64>, Fail> {
    values.iter().map(|value| plain(what, value)).collect()
}
