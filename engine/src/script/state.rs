//! `State` and `Run` in scripts: what is there at equilibrium, of one water or of many.

use rhai::plugin::*;
use rhai::{Array, Dynamic, FnPtr, INT, Map};

use super::closure::Closure;
use super::faults::advised;
use super::named::named;
use super::sample::numbers;
use super::show::Style;
use super::{Fail, Host, ScriptResult, Vocabulary, fail};
use crate::equilibrium::{Asked, EquilibriumError, Observable, ObservableError, State, equilibrate};
use crate::ledger::Ledger;
use crate::named::Value;
use crate::present::{Cell, Column, Table};
use crate::process::{Axis, Run, RunError, SweepError, run, sweep};
use crate::quantity::Quantity;
use crate::solve::{Certificate, Settings};
use crate::text::count;
use crate::water::Sample;

/// Registers the types.
pub(super) fn register(vocabulary: &mut Vocabulary) {
    vocabulary
        .module(rhai::exported_module!(state_functions))
        .module(rhai::exported_module!(run_functions))
        .pure(&[
            "equilibrate",
            "sweep",
            "get",
            "SI",
            "Omega",
            "molality",
            "activity",
            "gamma",
            "total",
            "fugacity",
        ])
        .pure(&["amount", "observables", "certificate", "warnings", "failures", "states", "table", "column"])
        .native::<State>("State", show_state)
        .native::<Run>("Run", show_run);
}

fn show_state(state: &State, style: &Style) -> String {
    let read = |asked: &str, decimals: usize| {
        state
            .get(asked)
            .map_or_else(|_| "absent".to_string(), |answer| format!("{:.decimals$}", answer.value()))
    };
    let number = |asked: &str| {
        state.get(asked).map_or_else(|_| "absent".into(), |answer| super::numbers::general(answer.value(), 4))
    };
    let degree = if style.ascii { "degC" } else { "°C" };
    let name = state.of().name().map_or_else(|| "state".to_string(), |name| format!("state of \"{name}\""));
    let sea = state.system().ledger().sea();
    let (scale, kg) = sea.map_or((String::new(), "kg(water)"), |sea| {
        (format!(" ({} scale)", sea.ph_scale.word()), "kg(solution)")
    });
    let mut lines = vec![
        format!("{name} at {} {degree}", read("temperature", 1)),
        format!("  pH {}{scale}   ionic strength {} mol/{kg}", read("pH", 3), number("ionic_strength")),
        format!(
            "  alkalinity {} meq/{kg}   DIC {} mmol/{kg}   charge error {} %",
            number("alkalinity [meq/kg]"),
            number("DIC [mmol/kg]"),
            read("charge_error", 1)
        ),
    ];
    lines.extend(state.choices().map(|choices| format!("  {choices}")));
    lines.extend(state.warnings().iter().map(|warning| format!("  note: {warning}")));
    lines.push("  `.species()`, `.phases()` and `.get(\"SI(calcite)\")` show more".to_string());
    lines.join("\n")
}

fn show_run(run: &Run, _: &Style) -> String {
    let failed = run.outcomes().iter().filter(|outcome| outcome.is_err()).count();
    let axes: Vec<String> = run.axes().iter().map(|axis| axis.title().to_string()).collect();
    let failures = if failed == 0 { String::new() } else { format!(", {failed} failed (`.failures()`)") };
    let notes = run.warnings().len();
    let notes =
        if notes == 0 { String::new() } else { format!(", {} (`.warnings()`)", count(notes, "note")) };
    let shown = format!(
        "run of {} over {}{failures}{notes}; `.table([\"pH\", …])` shows it",
        count(run.len(), "state"),
        axes.join(", ")
    );
    match choices_of(run).as_slice() {
        [] => shown,
        [same] => format!("{shown}\n  {same}"),
        several => format!("{shown}\n  computed with {} choices of constants", several.len()),
    }
}

/// The choices of constants that the seawaters of a run were computed with, each once.
fn choices_of(run: &Run) -> Vec<String> {
    let states = run.outcomes().iter().filter_map(|outcome| outcome.as_ref().ok());
    let choices: std::collections::BTreeSet<String> = states.filter_map(State::choices).collect();
    choices.into_iter().collect()
}

impl From<EquilibriumError> for Fail {
    fn from(error: EquilibriumError) -> Self {
        match error {
            EquilibriumError::Ledger(error) => error.into(),
            other => advised(&other.to_string()),
        }
    }
}

impl From<ObservableError> for Fail {
    fn from(error: ObservableError) -> Self {
        advised(&error.to_string()).argument(0)
    }
}

impl From<RunError> for Fail {
    fn from(error: RunError) -> Self {
        match error {
            RunError::Observable(error) => error.into(),
            RunError::Table(error) => error.into(),
        }
    }
}

impl From<SweepError> for Fail {
    fn from(error: SweepError) -> Self {
        match error {
            SweepError::Observable(error) => error.into(),
            SweepError::Sample(error) => error.into(),
            other => advised(&other.to_string()),
        }
    }
}

pub(super) fn settings(host: &Host) -> Settings {
    Settings { stop: Some(host.stop().flag()), ..Settings::default() }
}

/// One water; an interruption is passed on as such.
pub(super) fn one(host: &Host, sample: &Sample, ledger: Option<&Ledger>) -> ScriptResult<State> {
    match equilibrate(sample, ledger, &settings(host)) {
        Ok(state) => Ok(state),
        Err(error) => {
            host.stop().check()?;
            Err(Fail::from(error).into())
        }
    }
}

fn many(host: &Host, samples: &[Sample], ledger: Option<&Ledger>) -> ScriptResult<Run> {
    let total = samples.len() as u64;
    let run = Run::equilibrate(samples, ledger, &settings(host), &|done| {
        host.progress("equilibrate", done as u64, total)
    });
    host.stop().check()?;
    Ok(run.map_err(Fail::from)?)
}

fn samples(array: &Array) -> Result<Vec<Sample>, Fail> {
    let read = array.iter().enumerate().map(|(index, item)| {
        item.clone().try_cast::<Sample>().ok_or_else(|| {
            fail(format!("item {index} is {}, not a sample", super::words::a_type(item.type_name())))
        })
    });
    read.collect()
}

/// The ledger in an options map, `#{ ledger: book }`.
fn ledger_option(options: &Map) -> Result<Option<Ledger>, Fail> {
    if let Some(key) = options.keys().find(|key| key.as_str() != "ledger") {
        return Err(fail(format!("unknown key `{key}`"))
            .help("the only option is `ledger`")
            .key(key.to_string()));
    }
    let ledger = options.get("ledger").map(|ledger| {
        ledger.clone().try_cast::<Ledger>().ok_or_else(|| fail("`ledger` takes a ledger").key("ledger"))
    });
    ledger.transpose()
}

fn axis(title: &str, values: &Dynamic) -> Result<Axis, Fail> {
    let list = values.read_lock::<Array>();
    let list = list.ok_or_else(|| {
        fail(format!("the axis `{title}` takes a list of numbers, such as `linspace(6, 9, 31)`")).key(title)
    })?;
    Axis::new(title, numbers("an axis", &list)?).map_err(|error| Fail::from(error).key(title))
}

fn axes_of_map(axes: &Map) -> Result<Vec<Axis>, Fail> {
    axes.iter().map(|(title, values)| axis(title, values)).collect()
}

/// `[["pH", [...]], ["temperature", [...]]]`.
fn axes_of_list(axes: &Array) -> Result<Vec<Axis>, Fail> {
    let pair = |item: &Dynamic| {
        let list = item.read_lock::<Array>()?;
        let title = list.first()?.read_lock::<rhai::ImmutableString>()?.to_string();
        (list.len() == 2).then(|| axis(&title, &list[1]))
    };
    let wrong = || {
        fail("an ordered sweep takes a list of pairs: `[[\"pH\", [...]], [\"temperature\", [...]]]`")
            .argument(1)
    };
    axes.iter().map(|item| pair(item).unwrap_or_else(|| Err(wrong()))).collect()
}

fn over_axes(
    context: &NativeCallContext,
    sample: &Sample,
    axes: &[Axis],
    ledger: Option<&Ledger>,
) -> ScriptResult<Run> {
    let host = Host::of(context);
    let points: u64 = axes.iter().map(|axis| axis.len() as u64).product();
    let run =
        sweep(sample, axes, ledger, &settings(&host), &|done| host.progress("sweep", done as u64, points));
    host.stop().check()?;
    Ok(run.map_err(Fail::from)?)
}

/// Calls a closure for each value, in parallel, and equilibrates the water it returns.
fn over_closure(
    context: &NativeCallContext,
    title: &str,
    values: &Array,
    water: &FnPtr,
    ledger: Option<&Ledger>,
) -> ScriptResult<Run> {
    let host = Host::of(context);
    let given = numbers("a sweep", values)?;
    let (closure, total) = (Closure::new(context, water), given.len() as u64);
    let outcome = |value: &Dynamic| -> ScriptResult<Result<State, String>> {
        // A worker a point: what a closure writes to the variables it captured reaches no other point.
        let made = closure.worker().call((value.clone(),))?;
        host.stop().check()?;
        if let Some(state) = made.read_lock::<State>() {
            return Ok(Ok(state.clone()));
        }
        let type_name = made.type_name();
        let Some(sample) = made.clone().try_cast::<Sample>() else {
            let made = super::words::a_type(type_name);
            return fail(format!("the closure of a sweep returns a sample or a state, not {made}"))
                .argument(2)
                .raise();
        };
        match equilibrate(&sample, ledger, &settings(&host)) {
            Err(EquilibriumError::Stopped) => host.stop().check().map(|()| Err("interrupted".into())),
            other => Ok(other.map_err(|error| error.to_string())),
        }
    };
    let outcomes = run::each(values, &|done| host.progress("sweep", done as u64, total), outcome)?;
    Ok(Run::new(vec![Column::numbers(title, given)], outcomes))
}

fn texts(items: &Array, what: &str) -> Result<Vec<String>, Fail> {
    let text = |item: &Dynamic| {
        let text = item.read_lock::<rhai::ImmutableString>().map(|text| text.to_string());
        text.ok_or_else(|| {
            fail(format!("{what} are texts, not {}", super::words::a_type(item.type_name()))).argument(0)
        })
    };
    items.iter().map(text).collect()
}

pub(super) fn certificate_table(certificate: &Certificate) -> Result<Table, Fail> {
    let bound = certificate.ln_c_error.map(|error| error / std::f64::consts::LN_10);
    let smallest =
        if certificate.smallest_amount.is_finite() { Some(certificate.smallest_amount) } else { None };
    let saturation = if certificate.saturation.is_finite() {
        Some(certificate.saturation / std::f64::consts::LN_10)
    } else {
        None
    };
    let rows: [(&str, Option<f64>, &str); 8] = [
        ("mass balance", Some(certificate.balance), "largest error relative to the sum of its terms"),
        (
            "mass action and balance",
            Some(certificate.residual),
            "largest logarithmic residual in the dominant basis",
        ),
        ("error of log concentrations", bound, "proven bound, at the given activity coefficients"),
        ("ionic strength", Some(certificate.ionic_strength), "relative error"),
        (
            "roots of ionic strength",
            Some(certificate.ionic_strength_roots as f64),
            "seen; the lowest is taken",
        ),
        ("absent solids", saturation, "largest saturation index above target: below zero"),
        ("present solids", smallest, "smallest amount, mol/kg(water)"),
        (
            "condition",
            Some(certificate.condition),
            "relative change of a concentration per relative change of the totals",
        ),
    ];
    checks(rows.map(|(check, value, meaning)| (check, value, meaning.to_owned())))
}

/// Rows of a certificate: what is checked, the number, what it means.
fn checks<const N: usize>(rows: [(&str, Option<f64>, String); N]) -> Result<Table, Fail> {
    Table::new([
        Column::texts("check", rows.iter().map(|(check, ..)| *check)),
        Column::new("value", rows.iter().map(|(_, value, _)| value.map_or_else(Cell::missing, Cell::number))),
        Column::texts("meaning", rows.iter().map(|(.., meaning)| meaning.as_str())),
    ])
    .map_err(|error| fail(error.to_string()))
}

fn about(state: &State, observable: Observable) -> ScriptResult<Quantity> {
    Ok(state.answer(&Asked { observable, unit: None }).map_err(Fail::from)?)
}

/// What is there at equilibrium.
#[export_module]
mod state_functions {
    use super::*;

    /// The equilibrium of a water, with the ledger that travels with it, else `freshwater`. Results depend on the constants
    /// chosen; decisions on drinking water, discharge or dosing belong to local codes and licensed practice.
    ///
    /// ```rhai
    /// let lake = sample(#{ pH: 8.15, alkalinity: "2.35 meq/L", Ca: "41.2 mg/L" });
    /// fmt(lake.equilibrate().DIC.to("mmol/kg(water)").value, ".2f")   // "2.35"
    /// ```
    #[rhai_fn(name = "equilibrate", return_raw)]
    pub fn equilibrate_sample(context: NativeCallContext, sample: Sample) -> ScriptResult<State> {
        one(&Host::of(&context), &sample, None)
    }
    /// The equilibrium of a water with a given ledger.
    #[rhai_fn(name = "equilibrate", return_raw)]
    pub fn equilibrate_with(
        context: NativeCallContext,
        sample: Sample,
        ledger: Ledger,
    ) -> ScriptResult<State> {
        one(&Host::of(&context), &sample, Some(&ledger))
    }
    /// The equilibria of a list of waters, as a run; one that fails is a row with its reason.
    #[rhai_fn(name = "equilibrate", return_raw)]
    pub fn equilibrate_list(context: NativeCallContext, waters: Array) -> ScriptResult<Run> {
        many(&Host::of(&context), &samples(&waters)?, None)
    }
    #[rhai_fn(name = "equilibrate", return_raw)]
    pub fn equilibrate_list_with(
        context: NativeCallContext,
        waters: Array,
        ledger: Ledger,
    ) -> ScriptResult<Run> {
        many(&Host::of(&context), &samples(&waters)?, Some(&ledger))
    }

    /// An observable in its own unit or the one named: `pH`, `m(Ca^2+) [mmol/kg]`, `SI(calcite)`, `f(CO2(g)) [uatm]`.
    /// `.observables()` lists what can be asked.
    ///
    /// ```rhai
    /// fmt(sample(#{ pH: 7, Na: "23 mg/L", Cl: "35 mg/L" }).equilibrate().get("total(Na) [mg/L]").value, ".1f")   // "23.0"
    /// ```
    #[rhai_fn(pure, return_raw)]
    pub fn get(state: &mut State, observable: &str) -> ScriptResult<Quantity> {
        Ok(state.get(observable).map_err(Fail::from)?)
    }

    /// pH: -log10 of the activity of H^+.
    #[rhai_fn(name = "pH", get = "pH", pure, return_raw)]
    pub fn ph(state: &mut State) -> ScriptResult<Quantity> {
        about(state, Observable::Ph)
    }
    /// pe: -log10 of the activity of the electron, from the couples in equilibrium.
    ///
    /// ```rhai
    /// let water = sample(#{ pH: 7, "Fe(II)": "1 mg/L", "Fe(III)": "1 ug/L", couples: ["Fe(III)/Fe(II)"] }).equilibrate();
    /// abs(water.pe.value - water.Eh.value / 0.05915934) < 1e-6   // true
    /// ```
    #[rhai_fn(name = "pe", get = "pe", pure, return_raw)]
    pub fn pe(state: &mut State) -> ScriptResult<Quantity> {
        about(state, Observable::Pe)
    }
    /// Eh: potential against the standard hydrogen electrode, V.
    #[rhai_fn(name = "Eh", get = "Eh", pure, return_raw)]
    pub fn eh(state: &mut State) -> ScriptResult<Quantity> {
        about(state, Observable::Eh)
    }
    /// Ionic strength, mol/kg(water).
    #[rhai_fn(name = "ionic_strength", get = "ionic_strength", pure, return_raw)]
    pub fn ionic_strength(state: &mut State) -> ScriptResult<Quantity> {
        about(state, Observable::IonicStrength)
    }
    /// Alkalinity, eq/kg(water).
    #[rhai_fn(name = "alkalinity", get = "alkalinity", pure, return_raw)]
    pub fn alkalinity(state: &mut State) -> ScriptResult<Quantity> {
        about(state, Observable::Alkalinity)
    }
    /// Dissolved inorganic carbon, mol/kg(water).
    #[rhai_fn(name = "DIC", get = "DIC", pure, return_raw)]
    pub fn dic(state: &mut State) -> ScriptResult<Quantity> {
        about(state, Observable::Dic)
    }
    /// Temperature, degC.
    #[rhai_fn(name = "temperature", get = "temperature", pure, return_raw)]
    pub fn state_temperature(state: &mut State) -> ScriptResult<Quantity> {
        about(state, Observable::Temperature)
    }
    /// Charge error, %: 100 (C - A)/(C + A).
    #[rhai_fn(name = "charge_error", get = "charge_error", pure, return_raw)]
    pub fn charge_error(state: &mut State) -> ScriptResult<Quantity> {
        about(state, Observable::ChargeError)
    }

    /// Saturation index of a mineral: log10 of its activity product over its constant.
    #[rhai_fn(name = "SI", pure, return_raw)]
    pub fn saturation_index(state: &mut State, mineral: &str) -> ScriptResult<Quantity> {
        about(state, Observable::SaturationIndex(mineral.into()))
    }
    /// Saturation ratio of a mineral.
    #[rhai_fn(name = "Omega", pure, return_raw)]
    pub fn omega(state: &mut State, mineral: &str) -> ScriptResult<Quantity> {
        about(state, Observable::Omega(mineral.into()))
    }
    /// Molality of a species, mol/kg(water).
    #[rhai_fn(pure, return_raw)]
    pub fn molality(state: &mut State, species: &str) -> ScriptResult<Quantity> {
        about(state, Observable::Molality(species.into()))
    }
    /// Activity of a species, molal scale.
    #[rhai_fn(pure, return_raw)]
    pub fn activity(state: &mut State, species: &str) -> ScriptResult<Quantity> {
        about(state, Observable::Activity(species.into()))
    }
    /// Activity coefficient of a species, molal scale.
    #[rhai_fn(pure, return_raw)]
    pub fn gamma(state: &mut State, species: &str) -> ScriptResult<Quantity> {
        about(state, Observable::Gamma(species.into()))
    }
    /// Dissolved total of an element, oxidation state or species, mol/kg(water).
    #[rhai_fn(pure, return_raw)]
    pub fn total(state: &mut State, analyte: &str) -> ScriptResult<Quantity> {
        about(state, Observable::Total(analyte.into()))
    }
    /// Fugacity of a gas, bar.
    #[rhai_fn(name = "fugacity", pure, return_raw)]
    pub fn gas_fugacity(state: &mut State, gas: &str) -> ScriptResult<Quantity> {
        about(state, Observable::Fugacity(gas.into()))
    }
    /// Amount of a solid that is there, mol; of an unlimited one, what was deposited (negative: dissolved).
    #[rhai_fn(pure, return_raw)]
    pub fn amount(state: &mut State, solid: &str) -> ScriptResult<Quantity> {
        about(state, Observable::Amount(solid.into()))
    }

    /// Where the uncertainty of an observable comes from: inputs with their sensitivity, sigma and share of the variance.
    ///
    /// ```rhai
    /// let lake = sample(#{ pH: "8.15 +/- 0.02", alkalinity: "2.35 meq/L", Ca: "41.2 +/- 0.8 mg/L" });
    /// lake.equilibrate().budget("pH").column("input").values[0]   // "pH"
    /// ```
    #[rhai_fn(name = "budget", pure, return_raw)]
    pub fn state_budget(state: &mut State, observable: &str) -> ScriptResult<Table> {
        let budget = state.get(observable).map_err(Fail::from)?.budget();
        Ok(super::super::quantity::budget_table(&budget).map_err(|error| fail(error.to_string()))?)
    }
    /// Every constant and measured value behind an observable: as stated, sensitivity, sigma, share of the variance,
    /// provenance and source.
    ///
    /// ```rhai
    /// let lake = sample(#{ pH: "8.15 +/- 0.02", alkalinity: "2.35 meq/L", Ca: "41.2 +/- 0.8 mg/L" });
    /// lake.equilibrate().trail("SI(calcite)").len   // 10
    /// ```
    #[rhai_fn(name = "trail", pure, return_raw)]
    pub fn state_trail(state: &mut State, observable: &str) -> ScriptResult<Table> {
        let asked = Asked::parse(observable).map_err(Fail::from)?;
        Ok(crate::equilibrium::trail(state, &asked).map_err(Fail::from)?)
    }

    /// The solutes from the most to the least abundant: molality (mol/kg(water)), activity, gamma.
    #[rhai_fn(name = "species", get = "species", pure)]
    pub fn state_species(state: &mut State) -> Table {
        state.species()
    }
    /// Minerals with their saturation index, gases with their fugacity (bar).
    #[rhai_fn(name = "phases", get = "phases", pure)]
    pub fn state_phases(state: &mut State) -> Table {
        state.phases()
    }
    /// What can be asked of a state.
    #[rhai_fn(name = "observables", get = "observables", pure)]
    pub fn observables(_state: &mut State) -> Table {
        State::observables()
    }
    /// What was checked of the answer: mass balance, mass action, solids, ionic strength, charge; and the phase rule.
    #[rhai_fn(name = "certificate", get = "certificate", pure, return_raw)]
    pub fn certificate(state: &mut State) -> ScriptResult<Table> {
        let rule = state.phase_rule();
        let meaning = format!(
            "{} components + 2 - {} phases: {}",
            rule.components,
            rule.phases.len(),
            rule.phases.join(", ")
        );
        let own = [
            (
                "charge",
                Some(state.charge_error()),
                "error relative to the sum of charges; the misfit of the analysis is kept".to_owned(),
            ),
            ("phase rule", Some(rule.freedom() as f64), meaning),
        ];
        let table = certificate_table(state.certificate())?;
        Ok(table.append(&checks(own)?).map_err(|error| fail(error.to_string()))?)
    }
    /// What a reader of the numbers should know, as texts.
    #[rhai_fn(name = "warnings", get = "warnings", pure)]
    pub fn state_warnings(state: &mut State) -> Array {
        state.warnings().into_iter().map(Dynamic::from).collect()
    }
    /// The dissolved totals at this temperature as a sample, without surroundings and solids.
    ///
    /// ```rhai
    /// let open = sample(#{ pH: "electroneutral" }).open_to("CO2(g)", "1 mbar").equilibrate();
    /// let closed = open.sample().saturate("calcite").equilibrate();
    /// closed.pH.value > open.pH.value   // true
    /// ```
    #[rhai_fn(name = "sample", pure, return_raw)]
    pub fn state_sample(state: &mut State) -> ScriptResult<Sample> {
        Ok(state.sample(&[]).map_err(Fail::from)?)
    }
    /// The same with the amounts of some solids: `#{ keep: ["calcite"] }`.
    #[rhai_fn(name = "sample", pure, return_raw)]
    pub fn state_sample_keeping(state: &mut State, options: Map) -> ScriptResult<Sample> {
        let mut options = named(&options)?;
        let keep = options.texts("keep").map_err(Fail::from)?.unwrap_or_default();
        options.finish().map_err(Fail::from)?;
        let keep: Vec<&str> = keep.iter().map(String::as_str).collect();
        Ok(state.sample(&keep).map_err(Fail::from)?)
    }
}

/// Many states.
#[export_module]
mod run_functions {
    use super::*;

    /// Every combination of the values of some axes, as a run: an axis is `temperature`, `pressure`, `pH`, `f(CO2(g))`,
    /// `SI(calcite)` or `added(HCl)`, with a unit, or a key of the analysis as `as measured: Ca`. Axes in alphabetical order, last fastest.
    ///
    /// ```rhai
    /// let rain = sample(#{ pH: "electroneutral" });
    /// sweep(rain, #{ "f(CO2(g)) [uatm]": [280, 420, 1000] }).table(["pH"]).len   // 3
    /// ```
    #[rhai_fn(name = "sweep", return_raw)]
    pub fn sweep_map(context: NativeCallContext, sample: Sample, axes: Map) -> ScriptResult<Run> {
        over_axes(&context, &sample, &axes_of_map(&axes)?, None)
    }
    /// The same with options: `#{ ledger: book }`.
    #[rhai_fn(name = "sweep", return_raw)]
    pub fn sweep_map_with(
        context: NativeCallContext,
        sample: Sample,
        axes: Map,
        options: Map,
    ) -> ScriptResult<Run> {
        over_axes(&context, &sample, &axes_of_map(&axes)?, ledger_option(&options)?.as_ref())
    }
    /// The same with axes in a given order: `[["pH", [...]], ["temperature", [...]]]`.
    #[rhai_fn(name = "sweep", return_raw)]
    pub fn sweep_list(context: NativeCallContext, sample: Sample, axes: Array) -> ScriptResult<Run> {
        over_axes(&context, &sample, &axes_of_list(&axes)?, None)
    }
    #[rhai_fn(name = "sweep", return_raw)]
    pub fn sweep_list_with(
        context: NativeCallContext,
        sample: Sample,
        axes: Array,
        options: Map,
    ) -> ScriptResult<Run> {
        over_axes(&context, &sample, &axes_of_list(&axes)?, ledger_option(&options)?.as_ref())
    }
    /// Any water a script can build from one number: the closure returns a sample or a state. It is called in parallel and
    /// cannot change outer variables.
    ///
    /// ```rhai
    /// let lake = sample(#{ pH: 8, alkalinity: "2 meq/L", Ca: "40 mg/L" });
    /// let run = sweep("CO2 [matm]", [0.4, 0.8], |x| lake.open_to("CO2(g)", quantity(x, "matm")));
    /// run.table(["pH"]).len   // 2
    /// ```
    #[rhai_fn(name = "sweep", return_raw)]
    pub fn sweep_closure(
        context: NativeCallContext,
        title: &str,
        values: Array,
        water: FnPtr,
    ) -> ScriptResult<Run> {
        over_closure(&context, title, &values, &water, None)
    }
    #[rhai_fn(name = "sweep", return_raw)]
    pub fn sweep_closure_with(
        context: NativeCallContext,
        title: &str,
        values: Array,
        water: FnPtr,
        options: Map,
    ) -> ScriptResult<Run> {
        over_closure(&context, title, &values, &water, ledger_option(&options)?.as_ref())
    }

    /// Observables of all rows as a table, with the axes in front; a failed row carries its reason.
    #[rhai_fn(name = "table", pure, return_raw)]
    pub fn run_table(run: &mut Run, observables: Array) -> ScriptResult<Table> {
        Ok(run.table(&texts(&observables, "observables")?).map_err(Fail::from)?)
    }
    /// The same with options: `#{ sigma: true }` gives every number its standard uncertainty, where one is known.
    ///
    /// ```rhai
    /// let waters = [sample(#{ pH: "8.15 +/- 0.02", DIC: "2 mmol/kg", Ca: "41 mg/L" })];
    /// waters.equilibrate().table(["pH"], #{ sigma: true }).len   // 1
    /// ```
    #[rhai_fn(name = "table", pure, return_raw)]
    pub fn run_table_with(run: &mut Run, observables: Array, options: Map) -> ScriptResult<Table> {
        let observables = texts(&observables, "observables")?;
        let mut options = named(&options)?;
        let sigma = match options.take("sigma") {
            None => false,
            Some(Value::Flag(sigma)) => sigma,
            Some(other) => {
                return fail(format!("`sigma` is true or false, not {}", other.kind())).key("sigma").raise();
            }
        };
        options.finish().map_err(Fail::from)?;
        let table = if sigma { run.table_with_sigma(&observables) } else { run.table(&observables) };
        Ok(table.map_err(Fail::from)?)
    }
    /// Where the uncertainty of an observable comes from: shares of the variance by input, averaged over all rows.
    ///
    /// ```rhai
    /// let waters = [sample(#{ pH: "8.15 +/- 0.02", DIC: "2 mmol/kg", Ca: "41 mg/L" })];
    /// waters.equilibrate().budget("pH").len   // 1
    /// ```
    #[rhai_fn(name = "budget", pure, return_raw)]
    pub fn run_budget(run: &mut Run, observable: &str) -> ScriptResult<Table> {
        Ok(run.budget(observable).map_err(Fail::from)?)
    }
    /// One observable of all rows.
    #[rhai_fn(name = "column", pure, return_raw)]
    pub fn run_column(run: &mut Run, observable: &str) -> ScriptResult<Column> {
        Ok(run.column(observable).map_err(Fail::from)?)
    }
    /// The states that were found, in order.
    #[rhai_fn(name = "states", get = "states", pure)]
    pub fn run_states(run: &mut Run) -> Array {
        run.states().cloned().map(Dynamic::from).collect()
    }
    /// Rows that failed, with their reasons.
    #[rhai_fn(name = "failures", get = "failures", pure)]
    pub fn run_failures(run: &mut Run) -> Table {
        run.failures()
    }
    /// What a reader of the numbers should know, with the rows concerned, as texts.
    #[rhai_fn(name = "warnings", get = "warnings", pure)]
    pub fn run_warnings(run: &mut Run) -> Array {
        run.warnings().into_iter().map(Dynamic::from).collect()
    }
    /// Number of rows.
    #[rhai_fn(name = "len", get = "len", pure)]
    pub fn run_len(run: &mut Run) -> INT {
        run.len() as INT
    }
    /// The publications behind the constants that were used.
    #[rhai_fn(name = "sources", get = "sources", pure, return_raw)]
    pub fn run_sources(run: &mut Run) -> ScriptResult<Table> {
        let Some(state) = run.states().next() else {
            return fail("no state was found, so no constant was used").raise();
        };
        Ok(super::super::ledger::sources_table(state.system().ledger())?)
    }
}
