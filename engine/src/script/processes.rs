//! Processes in scripts: titrations, Gran's plot, paths of many steps, random draws.

use rhai::plugin::*;
use rhai::{Array, Dynamic, FnPtr, INT, Map};

use super::closure::Closure;
use super::faults::advised;
use super::named::named;
use super::reaction::plain;
use super::show::Style;
use super::state::{one, settings};
use super::{Fail, Host, ScriptResult, Vocabulary, column, docs, fail};
use crate::equilibrium::{EquilibriumError, State, equilibrate};
use crate::ledger::{Ledger, shipped};
use crate::named::{Named, Value};
use crate::present::plot::Plot;
use crate::present::{Column, Table};
use crate::process::{
    self, Gran, GranError, MonteCarloError, Readings, Run, Titration, TitrationError, Vary,
};
use crate::quantity::Quantity;
use crate::units::{self, Kind, Unit};
use crate::water::{Sample, Titrant};

/// Registers the functions and the type.
pub(super) fn register(vocabulary: &mut Vocabulary) {
    vocabulary
        .module(rhai::exported_module!(process_functions))
        .pure(&["titrate", "gran", "path", "monte_carlo", "equivalence_points"])
        .native::<Gran>("Gran", show_gran);
}

fn show_gran(gran: &Gran, style: &Style) -> String {
    let style = if style.ascii { units::Style::Ascii } else { units::Style::Unicode };
    let milli = Unit::parse("meq/L").expect("a known unit");
    let alkalinity = gran.alkalinity.to(&milli).unwrap_or_else(|_| gran.alkalinity.clone());
    format!(
        "Gran line through {} readings: equivalence at {}, alkalinity {}",
        gran.n_points,
        gran.volume.display(style),
        alkalinity.display(style)
    )
}

impl From<TitrationError> for Fail {
    fn from(error: TitrationError) -> Self {
        let fault = advised(&error.to_string());
        match error {
            TitrationError::Volume(_) => fault.key("add"),
            TitrationError::SampleVolume(_) => fault.key("sample_volume"),
            TitrationError::Equilibrium(error) => error.into(),
            _ => fault,
        }
    }
}

impl From<GranError> for Fail {
    fn from(error: GranError) -> Self {
        let fault = advised(&error.to_string());
        match error {
            GranError::Between(..) | GranError::TooFew { .. } => fault.key("between"),
            GranError::SampleVolume(_) => fault.key("sample_volume"),
            GranError::NoAcid(_) => fault.key("titrant"),
            GranError::Volume(_) => fault.argument(0),
            GranError::Equilibrium(error) => error.into(),
            _ => fault,
        }
    }
}

impl From<MonteCarloError> for Fail {
    fn from(error: MonteCarloError) -> Self {
        let fault = advised(&error.to_string());
        match error {
            MonteCarloError::Draws(_) => fault.key("draws"),
            MonteCarloError::NoInput { .. } | MonteCarloError::Nothing(_) => fault.key("vary"),
            MonteCarloError::Equilibrium(error) => error.into(),
            _ => fault,
        }
    }
}

/// The ledger and the other options of a map.
fn options(map: &Map) -> Result<(Named, Option<Ledger>), Fail> {
    let mut map = map.clone();
    let ledger = map.remove("ledger").map(|ledger| {
        ledger.try_cast::<Ledger>().ok_or_else(|| fail("`ledger` takes a ledger").key("ledger"))
    });
    Ok((named(&map)?, ledger.transpose()?))
}

fn required<T>(key: &str, example: &str, found: Option<T>) -> Result<T, Fail> {
    found.ok_or_else(|| fail(format!("`{key}` is needed")).help(format!("write `{key}: {example}`")))
}

/// Numbers from a list or a column.
fn numbers(what: &str, values: &Dynamic) -> Result<Vec<f64>, Fail> {
    let list = match values.read_lock::<Column>() {
        Some(column) => column::values_of(&column),
        None => values.clone().try_cast::<Array>().ok_or_else(|| {
            fail(format!("{what} are a list or a column of numbers, not {}", docs::described(values)))
        })?,
    };
    list.iter().map(|value| plain(what, value)).collect()
}

fn numbers_of(key: &str, found: Option<Value>) -> Result<Option<Vec<f64>>, Fail> {
    let number = |value: &Value| match value {
        Value::Number(number) => Ok(*number),
        other => Err(fail(format!("`{key}` takes a list of numbers, not of {}", other.kind())).key(key)),
    };
    match found {
        None => Ok(None),
        Some(Value::List(values)) => values.iter().map(number).collect::<Result<_, _>>().map(Some),
        Some(other) => Err(fail(format!("`{key}` takes a list of numbers, not {}", other.kind())).key(key)),
    }
}

/// The keys that a titration and its evaluation share.
struct Burette {
    titrant: Titrant,
    /// L.
    sample_volume: Quantity,
    unit: Unit,
}

impl Burette {
    fn read(options: &mut Named) -> Result<Self, Fail> {
        let titrant = required("titrant", "\"0.1 mol/L HCl\"", options.text("titrant").map_err(Fail::from)?)?;
        let titrant = Titrant::parse(&titrant).map_err(|message| advised(&message).key("titrant"))?;
        let volume = options.quantity("sample_volume", Kind::Volume).map_err(Fail::from)?;
        let volume = required("sample_volume", "\"100 mL\"", volume)?;
        let litre = Unit::parse("L").expect("a known unit");
        let sample_volume = volume.to(&litre).map_err(|error| Fail::from(error).key("sample_volume"))?;
        let unit = options.text("unit").map_err(Fail::from)?.unwrap_or_else(|| "mL".into());
        let unit = Kind::Volume.parse_unit(&unit).map_err(|error| Fail::from(error).key("unit"))?;
        Ok(Self { titrant, sample_volume, unit })
    }
}

fn vary(found: Option<Value>) -> Result<Vary, Fail> {
    let text = |value: Value| match value {
        Value::Text(text) => Ok(text),
        other => Err(fail(format!("`vary` names inputs by texts, not {}", other.kind())).key("vary")),
    };
    match found {
        None => Ok(Vary::All),
        Some(Value::Text(word)) => Ok(match word.as_str() {
            "all" => Vary::All,
            "measured" => Vary::Measured,
            "constants" => Vary::Constants,
            _ => Vary::Named(vec![word]),
        }),
        Some(Value::List(names)) => names.into_iter().map(text).collect::<Result<_, _>>().map(Vary::Named),
        Some(other) => Err(fail(format!(
            "`vary` is \"all\", \"measured\", \"constants\" or a list of inputs, not {}",
            other.kind()
        ))
        .key("vary")),
    }
}

#[allow(
    clippy::cast_possible_truncation,
    clippy::cast_sign_loss,
    reason = "checked to be whole and not negative"
)]
fn whole(options: &mut Named, key: &str, default: u64) -> Result<u64, Fail> {
    let Some(number) = options.number(key).map_err(Fail::from)? else { return Ok(default) };
    if number < 0.0 || number.fract() != 0.0 || number > 1e15 {
        return Err(fail(format!("`{key}` is a whole number, zero or more, not {number}")).key(key));
    }
    Ok(number as u64)
}

/// The water a closure returned, at equilibrium.
fn step_state(host: &Host, made: &Dynamic, ledger: Option<&Ledger>) -> ScriptResult<Result<State, String>> {
    host.stop().check()?;
    if let Some(state) = made.read_lock::<State>() {
        return Ok(Ok(state.clone()));
    }
    let Some(sample) = made.clone().try_cast::<Sample>() else {
        let made = docs::described(made);
        return fail(format!("the closure of a path returns a sample or a state, not {made}"))
            .argument(2)
            .raise();
    };
    match equilibrate(&sample, ledger, &settings(host)) {
        Err(EquilibriumError::Stopped) => host.stop().check().map(|()| Err("interrupted".into())),
        other => Ok(other.map_err(|error| error.to_string())),
    }
}

fn walk(
    context: &NativeCallContext,
    start: &Dynamic,
    values: &Dynamic,
    step: &FnPtr,
    map: &Map,
) -> ScriptResult<Run> {
    let host = Host::of(context);
    let (mut options, ledger) = options(map)?;
    let keep = options.texts("keep").map_err(Fail::from)?.unwrap_or_default();
    let title = options.text("title").map_err(Fail::from)?.unwrap_or_else(|| "x".into());
    options.finish().map_err(Fail::from)?;
    let given = numbers("values of a path", values).map_err(|fault| fault.argument(1))?;
    let start = match (start.read_lock::<State>(), start.clone().try_cast::<Sample>()) {
        (Some(state), _) => state.clone(),
        (None, Some(sample)) => one(&host, &sample, ledger.as_ref())?,
        (None, None) => {
            let found = docs::described(start);
            return fail(format!("a path starts from a sample or a state, not {found}")).argument(0).raise();
        }
    };
    let worker = Closure::new(context, step);
    let total = given.len() as u64;
    let values: Vec<Dynamic> = given.iter().map(|value| Dynamic::from(*value)).collect();
    let unknown = |error: EquilibriumError| Box::<rhai::EvalAltResult>::from(Fail::from(error).key("keep"));
    process::path(start, &title, &given, &keep, unknown, |water, position| {
        host.progress("path", position as u64, total);
        let made = worker.worker().call((water, values[position].clone()))?;
        step_state(&host, &made, ledger.as_ref())
    })
}

/// Processes and how measured ones are read.
#[export_module]
mod process_functions {
    use super::*;

    /// A titration: an equilibrium after every volume of titrant, as a run. Keys: `titrant` (a concentration and a neutral
    /// formula, several joined by ` + `), `sample_volume`, `add` (volumes, in `unit`, mL unless given), `ledger`. Volumes
    /// are measured at 20 degC unless the sample says otherwise, and add up. Surroundings of the water are kept.
    /// Laboratory acids need eye protection and the local rules.
    ///
    /// ```rhai
    /// let lake = sample(#{ pH: 8.2, alkalinity: "2 meq/L", Ca: "1 mmol/L" });
    /// let run = titrate(lake, #{ titrant: "0.1 mol/L HCl", sample_volume: "100 mL", add: linspace(0, 4, 9) });
    /// run.table(["volume", "pH"]).len   // 9
    /// ```
    #[rhai_fn(return_raw)]
    pub fn titrate(context: NativeCallContext, water: Sample, options: Map) -> ScriptResult<Run> {
        let host = Host::of(&context);
        let mut map = options.clone();
        let add = map.remove("add").map(|add| numbers("volumes", &add).map_err(|fault| fault.key("add")));
        let add = required("add", "linspace(0, 5, 51)", add.transpose()?)?;
        let (mut options, ledger) = super::options(&map)?;
        let burette = Burette::read(&mut options)?;
        options.finish().map_err(Fail::from)?;
        let Burette { titrant, sample_volume, unit } = burette;
        let titration = Titration::new(&water, titrant, &sample_volume, unit, ledger.as_ref());
        let titration = titration.map_err(Fail::from)?;
        let total = add.len() as u64;
        let run = titration.run(&add, &settings(&host), &|done| host.progress("titrate", done as u64, total));
        host.stop().check()?;
        Ok(run.map_err(Fail::from)?)
    }
    /// Where the pH of a titration changes fastest: volume, pH, and the titrant up to there per litre of sample.
    ///
    /// ```rhai
    /// let lake = sample(#{ pH: 8.2, alkalinity: "2 meq/L", Ca: "1 mmol/L" });
    /// let run = titrate(lake, #{ titrant: "0.1 mol/L HCl", sample_volume: "100 mL", add: linspace(0, 4, 21) });
    /// fmt(run.equivalence_points().row(0)["volume"], ".2f")   // "2.00"
    /// ```
    #[rhai_fn(name = "equivalence_points", get = "equivalence_points", pure, return_raw)]
    pub fn equivalence_points(run: &mut Run) -> ScriptResult<Table> {
        Ok(process::equivalence_points(run, &crate::solve::Settings::default()).map_err(Fail::from)?)
    }

    /// Gran's plot of measured volumes and pH: keys `sample_volume`, `titrant`, `between` (the pH range of the line),
    /// `unit` of the volumes (mL), `ledger`. Gives `.volume`, `.alkalinity`, `.slope`, `.scatter`, `.n`, `.table()`.
    ///
    /// ```rhai
    /// let volumes = [2.4, 2.6, 2.8, 3.0];
    /// let pHs = [3.41, 3.24, 3.12, 3.03];
    /// let line = gran(volumes, pHs, #{ sample_volume: "100 mL", titrant: "0.1 mol/L HCl", between: [3.0, 3.5] });
    /// fmt(line.volume.value, ".2f")   // "1.97"
    /// ```
    #[rhai_fn(return_raw)]
    pub fn gran(volumes: Dynamic, readings: Dynamic, options: Map) -> ScriptResult<Gran> {
        let (mut options, ledger) = super::options(&options)?;
        let Burette { titrant, sample_volume, unit } = Burette::read(&mut options)?;
        let between = numbers_of("between", options.take("between"))?;
        let between = required("between", "[3.0, 3.8]", between)?;
        options.finish().map_err(Fail::from)?;
        let &[low, high] = between.as_slice() else {
            return fail("`between` takes the lower and the higher pH: `[3.0, 3.8]`").key("between").raise();
        };
        let ledger = match ledger {
            Some(ledger) => ledger,
            None => shipped::ledger("freshwater", None).map_err(Fail::from)?,
        };
        let readings = Readings {
            volumes: numbers("volumes", &volumes).map_err(|fault| fault.argument(0))?,
            ph: numbers("pH values", &readings).map_err(|fault| fault.argument(1))?,
            unit,
            sample_volume,
            titrant,
            between: (low, high),
        };
        Ok(process::gran(readings, &ledger).map_err(Fail::from)?)
    }
    /// Equivalence volume, with the uncertainty of the line.
    #[rhai_fn(name = "volume", get = "volume", pure)]
    pub fn gran_volume(gran: &mut Gran) -> Quantity {
        gran.volume.clone()
    }
    /// Alkalinity of the sample, eq/L, with the uncertainties of the line, the titrant and the sample's volume.
    #[rhai_fn(name = "alkalinity", get = "alkalinity", pure)]
    pub fn gran_alkalinity(gran: &mut Gran) -> Quantity {
        gran.alkalinity.clone()
    }
    /// Slope of the line, per volume: the titrant's concentration over the activity coefficient of H^+ inverted.
    #[rhai_fn(name = "slope", get = "slope", pure)]
    pub fn gran_slope(gran: &mut Gran) -> f64 {
        gran.slope
    }
    /// Standard deviation of Gran's function about the line.
    #[rhai_fn(name = "scatter", get = "scatter", pure)]
    pub fn gran_scatter(gran: &mut Gran) -> f64 {
        gran.scatter
    }
    /// Number of readings the line was fitted to.
    #[rhai_fn(name = "n", get = "n", pure)]
    pub fn gran_points(gran: &mut Gran) -> INT {
        gran.n_points as INT
    }
    /// The plot as a table: volume, pH, Gran's function F, and the line where it was fitted.
    #[rhai_fn(name = "table", get = "table", pure)]
    pub fn gran_table(gran: &mut Gran) -> Table {
        gran.table()
    }

    /// The plot drawn: Gran's function F = (V0 + v) 10^-pH of every reading, the line, and the equivalence volume.
    ///
    /// ```rhai
    /// let volumes = [2.4, 2.6, 2.8, 3.0];
    /// let pHs = [3.41, 3.24, 3.12, 3.03];
    /// gran(volumes, pHs, #{ sample_volume: "100 mL", titrant: "0.1 mol/L HCl", between: [3.0, 3.5] }).plot()
    /// ```
    #[rhai_fn(name = "plot", get = "plot", pure)]
    pub fn gran_plot(gran: &mut Gran) -> Plot {
        gran.plot()
    }

    /// A path: the closure makes of the water before it, without surroundings, the water of the next step; its
    /// equilibrium is a row and the start of the step after. It starts from a sample or a state.
    ///
    /// ```rhai
    /// let lake = sample(#{ pH: 8, alkalinity: "2 meq/kg", Ca: "1 mmol/kg" });
    /// let run = path(lake, [0.5, 0.5], |water, x| water.dose("HCl", quantity(x, "mmol/kg")));
    /// fmt(run.states[1].alkalinity.value, ".4f")   // "0.0010"
    /// ```
    #[rhai_fn(name = "path", return_raw)]
    pub fn path(
        context: NativeCallContext,
        start: Dynamic,
        values: Dynamic,
        step: FnPtr,
    ) -> ScriptResult<Run> {
        walk(&context, &start, &values, &step, &Map::new())
    }
    /// The same with options: `keep` (solids that go along where they are there), `title` of the axis, `ledger`.
    #[rhai_fn(name = "path", return_raw)]
    pub fn path_with(
        context: NativeCallContext,
        start: Dynamic,
        values: Dynamic,
        step: FnPtr,
        options: Map,
    ) -> ScriptResult<Run> {
        walk(&context, &start, &values, &step, &options)
    }

    /// The same water with every input drawn from its uncertainty, as a run: keys `draws` (1000), `seed` (1), `vary`
    /// (`"all"`, `"measured"`, `"constants"`, or inputs by the names that budgets give them), `ledger`.
    ///
    /// ```rhai
    /// let lake = sample(#{ pH: "8.15 +/- 0.02", alkalinity: "2.35 meq/kg", Ca: "1.03 +/- 0.02 mmol/kg" });
    /// let run = monte_carlo(lake, #{ draws: 50, seed: 7, vary: "measured" });
    /// run.summary(["pH", "SI(calcite)"]).len   // 2
    /// ```
    #[rhai_fn(name = "monte_carlo", return_raw)]
    pub fn monte_carlo(context: NativeCallContext, water: Sample, options: Map) -> ScriptResult<Run> {
        let host = Host::of(&context);
        let (mut options, ledger) = super::options(&options)?;
        let draws = whole(&mut options, "draws", 1000)?;
        let seed = whole(&mut options, "seed", 1)?;
        let vary = vary(options.take("vary"))?;
        options.finish().map_err(Fail::from)?;
        let run = process::monte_carlo(
            &water,
            (usize::try_from(draws).unwrap_or(usize::MAX), seed),
            &vary,
            ledger.as_ref(),
            &settings(&host),
            &|done| host.progress("monte carlo", done as u64, draws),
        );
        host.stop().check()?;
        Ok(run.map_err(Fail::from)?)
    }
    /// What the draws say of some observables, beside the value as given and its first-order uncertainty.
    #[rhai_fn(name = "summary", pure, return_raw)]
    pub fn monte_carlo_summary(run: &mut Run, observables: Array) -> ScriptResult<Table> {
        let text = |item: &Dynamic| {
            item.clone()
                .into_string()
                .map_err(|found| fail(format!("observables are texts, not {found}")).argument(0))
        };
        let observables = observables.iter().map(text).collect::<Result<Vec<_>, _>>()?;
        Ok(process::monte_carlo::summary(run, &observables).map_err(Fail::from)?)
    }
}
