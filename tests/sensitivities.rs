//! Sensitivities against difference quotients of whole solves, and first-order uncertainty against random draws.
//!
//! The derivatives under test come from one linear system at the answer; what they are compared with moves an input and
//! solves everything again, outer roots and both stages included. Nothing is shared but the solver.

use std::collections::BTreeMap;
use std::path::Path;
use std::sync::Arc;

use lysocline_engine::activity::{Davies, Model};
use lysocline_engine::chem::Reaction;
use lysocline_engine::chem::reaction::Constant;
use lysocline_engine::equilibrium::{Asked, State, equilibrate};
use lysocline_engine::ledger::{ActivityChoice, Ledger};
use lysocline_engine::named::{Named, Value};
use lysocline_engine::quantity::{Input, Quantity};
use lysocline_engine::script::sandbox::Sandbox;
use lysocline_engine::script::{Dynamic, Options, ScriptEngine, Session};
use lysocline_engine::solve::sensitivity::{Found, Given, Sensitivities, own_supplies};
use lysocline_engine::solve::{Converged, Mixed, Problem, Settings, solve};
use lysocline_engine::units::{Temperature, Unit};
use lysocline_engine::water::{Sample, Treatment};
use rayon::prelude::*;

use crate::random_systems::{self, Family, Random};
use crate::waters::freshwater;

/// Problems on which central differences in double precision can be judged.
const FAMILY: Family = Family { components: (2, 6), species: 20, log_k: 12.0 };

/// Central difference with one step of Richardson extrapolation.
fn derivative(f: impl Fn(f64) -> Vec<f64>, step: f64) -> Vec<f64> {
    let central = |h: f64| -> Vec<f64> {
        f(h).iter().zip(f(-h)).map(|(above, below)| (above - below) / (2.0 * h)).collect()
    };
    central(step / 2.0).iter().zip(central(step)).map(|(fine, coarse)| (4.0 * fine - coarse) / 3.0).collect()
}

fn flattened(found: &Found) -> Vec<f64> {
    [&found.ln_a, &found.ln_c, &found.others, &found.ln_gamma, &found.reservoir_amount, &found.mineral_amount]
        .into_iter()
        .chain(&found.mixtures)
        .flatten()
        .copied()
        .chain([found.ionic_strength, found.ln_water_activity])
        .collect()
}

fn read(converged: &Converged) -> Vec<f64> {
    let (reservoirs, minerals) = (&converged.reservoir_amount, &converged.mineral_amount);
    flattened(&Found {
        ln_a: converged.ln_a.clone(),
        ln_c: converged.ln_c.clone(),
        others: converged.ln_others.clone(),
        ln_gamma: converged.ln_gamma.clone(),
        ionic_strength: converged.ionic_strength,
        ln_water_activity: converged.ln_water_activity,
        reservoir_amount: reservoirs.clone(),
        mineral_amount: minerals.clone(),
        mixtures: converged.mixtures.iter().map(ln_amounts).collect(),
    })
}

/// ln of the amounts of the members of a mixture; zero where it is absent.
fn ln_amounts(mixture: &Mixed) -> Vec<f64> {
    let ln_amount = |ln_x: &f64| if mixture.amount > 0.0 { ln_x + mixture.amount.ln() } else { 0.0 };
    mixture.ln_x.iter().map(ln_amount).collect()
}

/// A change of everything that is given.
fn any_change(random: &mut Random, problem: &Problem) -> Given {
    let mut change = Given::zero(problem);
    for value in change.ln_k.iter_mut().chain(&mut change.reservoirs).chain(&mut change.minerals) {
        *value = random.uniform(-1.0, 1.0);
    }
    for value in change.mixtures.iter_mut().flatten() {
        *value = random.uniform(-1.0, 1.0);
    }
    for (change, total) in change.totals.iter_mut().zip(&problem.totals) {
        *change = total.to_f64() * random.uniform(-1.0, 1.0);
    }
    change
}

fn moved(problem: &Problem, change: &Given, step: f64) -> Problem {
    let mut problem = problem.clone();
    for (row, change) in problem.species.iter_mut().zip(&change.ln_k) {
        row.ln_k += step * change;
    }
    for (held, change) in problem.reservoirs.iter_mut().zip(&change.reservoirs) {
        held.ln_value += step * change;
    }
    for (mineral, change) in problem.minerals.iter_mut().zip(&change.minerals) {
        mineral.ln_target += step * change;
    }
    for (mixture, change) in problem.mixtures.iter_mut().zip(&change.mixtures) {
        for (member, change) in mixture.members.iter_mut().zip(change) {
            member.ln_k -= step * change;
        }
    }
    for (total, change) in problem.totals.iter_mut().zip(&change.totals) {
        *total = *total + lysocline_engine::solve::Total::from(step * change);
    }
    problem
}

/// A random problem with minerals in a quarter, a reservoir in another, mixtures in a third, and each of the activity models in a
/// quarter of each.
fn random_problem(seed: u64) -> Option<(Problem, Model, Converged)> {
    let random = &mut Random(seed);
    let mut problem = random_systems::tableau(random, FAMILY);
    random_systems::add_charges(random, &mut problem);
    for row in &mut problem.species {
        row.water = random.integer(-1, 1) as f64;
    }
    let model = match seed / 4 % 4 {
        0 => Model::IDEAL,
        1 => Model::davies(Davies::new(0.509)),
        2 => random_systems::ion_sizes(random, &problem),
        _ => random_systems::interactions(random, &problem),
    };
    let settings = Settings::default();
    let first = solve(&problem, &Model::IDEAL, &settings, None).ok()?;
    match seed % 4 {
        0 => random_systems::add_minerals(random, &mut problem, &first.ln_a, 2),
        1 => random_systems::hold_component(&mut problem, 0, first.ln_a[0] + 1.0),
        2 => random_systems::add_mixtures(random, &mut problem, &first.ln_a, 2),
        _ => {}
    }
    let converged = solve(&problem, &model, &settings, None).ok()?;
    let judged = converged.ionic_strength < 0.5
        && converged.certificate.condition < 1e3
        && converged.mineral_ln_saturation.iter().all(|saturation| *saturation == 0.0 || *saturation < -0.1)
        && converged.mixtures.iter().all(|mixture| mixture.amount > 0.0 || mixture.ln_saturation < -0.1)
        && converged.certificate.smallest_amount > 1e-3 * converged.ionic_strength.max(1e-9);
    judged.then_some((problem, model, converged))
}

#[test]
fn the_linear_system_is_the_difference_quotient_on_random_systems() {
    let compared: usize = (0..600_u64)
        .into_par_iter()
        .filter_map(|seed| random_problem(seed).map(|made| (seed, made)))
        .map(|(seed, (problem, model, converged))| {
            let random = &mut Random(seed ^ 0x5eed);
            let linear = Sensitivities::new(&problem, &model, &converged, &own_supplies(&problem)).unwrap();
            let change = any_change(random, &problem);
            let exact = flattened(&linear.push(&change));
            let settings = Settings::default();
            let quotient = derivative(
                |step| {
                    let moved = moved(&problem, &change, step);
                    read(&solve(&moved, &model, &settings, Some(&converged.warm)).unwrap())
                },
                2e-3,
            );
            for (k, (exact, quotient)) in exact.iter().zip(&quotient).enumerate() {
                if quotient.is_finite() {
                    let allowed = 1e-6 * quotient.abs().max(1e-3);
                    assert!((exact - quotient).abs() < allowed, "seed {seed}, {k}: {exact:e} {quotient:e}");
                }
            }
            1
        })
        .sum();
    println!("sensitivities: {compared} random systems compared");
    assert!(compared > 150, "{compared}");
}

#[test]
fn pull_is_the_transpose_of_push() {
    for (seed, (problem, model, converged)) in
        (0..200).filter_map(|seed| random_problem(seed).map(|made| (seed, made)))
    {
        let random = &mut Random(seed);
        let linear = Sensitivities::new(&problem, &model, &converged, &own_supplies(&problem)).unwrap();
        let mut change = any_change(random, &problem);
        change.ln_gamma.iter_mut().for_each(|value| *value = random.uniform(-1.0, 1.0));
        change.ln_water_activity = random.uniform(-1.0, 1.0);
        let mut weight = Found::zero(&problem);
        for value in weight.ln_a.iter_mut().chain(&mut weight.ln_c).chain(&mut weight.ln_gamma) {
            *value = random.uniform(-1.0, 1.0);
        }
        let amounts = weight.reservoir_amount.iter_mut().chain(&mut weight.mineral_amount);
        for value in amounts.chain(weight.mixtures.iter_mut().flatten()) {
            *value = random.uniform(-1.0, 1.0);
        }
        (weight.ionic_strength, weight.ln_water_activity) = (random.uniform(-1.0, 1.0), 0.3);
        let (by, found) = (linear.pull(&weight), linear.push(&change));
        let given = |given: &Given| -> Vec<f64> {
            [&given.ln_k, &given.ln_gamma, &given.totals, &given.reservoirs, &given.minerals]
                .into_iter()
                .chain(&given.mixtures)
                .flatten()
                .copied()
                .chain([given.ln_water_activity])
                .collect()
        };
        let product = |a: Vec<f64>, b: Vec<f64>| -> (f64, f64) {
            let terms = a.iter().zip(&b).map(|(a, b)| a * b);
            terms.fold((0.0, 0.0), |(sum, size), term| (sum + term, size + term.abs()))
        };
        let (pulled, size) = product(given(&by), given(&change));
        let (pushed, other) = product(flattened(&weight), flattened(&found));
        assert!((pulled - pushed).abs() < 1e-10 * (size + other), "seed {seed}: {pulled:e} {pushed:e}");
    }
}

/// A water as it is measured: key, value, unit and standard uncertainty.
type Inputs = Vec<(&'static str, f64, &'static str, f64)>;

struct Case {
    name: &'static str,
    inputs: Inputs,
    texts: Vec<(&'static str, &'static str)>,
    treatments: Vec<Treatment>,
    model: &'static str,
    /// Whether pH and DIC are to be used where alkalinity is given too.
    from: bool,
    observables: Vec<&'static str>,
}

impl Case {
    fn new(name: &'static str, inputs: Inputs, treatments: Vec<Treatment>, more: &[&'static str]) -> Self {
        let common = ["pH", "ionic_strength", "alkalinity", "DIC", "m(CO3^2-)", "c(Ca^2+)", "gamma(Ca^2+)"];
        let more_common =
            ["SI(calcite)", "f(CO2(g))", "log_a(HCO3^-)", "charge_error", "density", "total(Ca)"];
        let observables = common.iter().chain(&more_common).chain(more).copied().collect();
        Self { name, inputs, texts: vec![], treatments, model: "davies", from: false, observables }
    }

    fn sample(&self, changed: &str, by: f64) -> Sample {
        let value = |(key, value, unit, sigma): &(&str, f64, &str, f64)| {
            let value = if *key == changed { value + by } else { *value };
            let unit = Unit::parse(unit).unwrap();
            let quantity = Quantity::measured(value, unit, Some(*sigma), key).unwrap();
            ((*key).to_string(), Value::Quantity(quantity))
        };
        let texts = self.texts.iter().map(|(key, text)| ((*key).into(), Value::Text((*text).into())));
        let pair = ["pH", "DIC"].map(|key| Value::Text(key.into())).to_vec();
        let from = self.from.then(|| ("from".to_string(), Value::List(pair)));
        let entries: BTreeMap<String, Value> =
            self.inputs.iter().map(value).chain(texts).chain(from).collect();
        let sample = Sample::read(entries).unwrap_or_else(|error| panic!("{}: {error}", self.name));
        self.treatments.iter().fold(sample, |sample, treatment| sample.treated(treatment.clone()).unwrap())
    }

    fn ledger(&self) -> Ledger {
        freshwater().with_activity(ActivityChoice::read(self.model, Named::default()).unwrap())
    }

    fn state(&self, sample: &Sample, ledger: &Ledger) -> State {
        equilibrate(sample, Some(ledger), &Settings::default())
            .unwrap_or_else(|error| panic!("{}: {error}", self.name))
    }

    fn numbers(&self, sample: &Sample, ledger: &Ledger) -> Vec<f64> {
        let state = self.state(sample, ledger);
        let number = |text: &&str| {
            let asked = Asked::parse(text).unwrap();
            state.number(&asked).unwrap_or_else(|error| panic!("{}: {error}", self.name)).0
        };
        self.observables.iter().map(number).collect()
    }
}

/// The same ledger with log10 K of one reaction moved.
fn shifted(ledger: &Ledger, name: &str, by: f64) -> Ledger {
    let reaction = ledger.reaction(name).unwrap();
    let constant = reaction.constant().unwrap();
    let constant = Constant { log_k: constant.log_k.shifted(by), ..constant.clone() };
    ledger.replace(name, &Reaction::of(reaction.equation().clone(), constant)).unwrap()
}

/// Derivatives of an observable by every input, under what the input is called.
fn slopes(state: &State, observable: &str) -> BTreeMap<String, f64> {
    slopes_of(state.get(observable).unwrap())
}

fn slopes_of(answer: Quantity) -> BTreeMap<String, f64> {
    answer.parts().iter().map(|part| (identity(&part.input), part.sensitivity)).collect()
}

/// A constant and a measured value may have the same label, `NH4^+`; a constant has a name of its own as well.
fn identity(input: &Input) -> String {
    input.name().unwrap_or_else(|| input.label()).to_string()
}

/// What the one input behind a shipped constant is called.
fn input_of(ledger: &Ledger, name: &str) -> String {
    let parts = ledger.reaction(name).unwrap().constant().unwrap().history.parts();
    let [part] = parts.as_slice() else { panic!("{name} has {} inputs", parts.len()) };
    assert_eq!(part.sensitivity, 1.0, "{name}");
    identity(&part.input)
}

fn lake() -> Inputs {
    vec![
        ("temperature", 8.5, "degC", 0.2),
        ("pH", 8.15, "1", 0.02),
        ("alkalinity", 2.35, "meq/kg", 0.03),
        ("Ca", 41.2, "mg/kg", 0.8),
        ("Mg", 8.1, "mg/kg", 0.2),
        ("Na", 6.0, "mg/kg", 0.1),
        ("Cl", 9.8, "mg/kg", 0.2),
        ("SO4^2-", 14.0, "mg/kg", 0.5),
    ]
}

fn lake_with(changes: &[(&'static str, f64, &'static str, f64)], without: &[&str]) -> Inputs {
    let kept = lake().into_iter().filter(|(key, ..)| !without.contains(key));
    kept.chain(changes.iter().copied()).collect()
}

fn open(fugacity: f64) -> Treatment {
    Treatment::OpenTo { gas: "CO2(g)".into(), fugacity }
}

fn warm(celsius: f64) -> Treatment {
    Treatment::WarmTo(Temperature::from_celsius(celsius).unwrap())
}

fn cases() -> Vec<Case> {
    let dic = ("DIC", 2.4, "mmol/kg", 0.02);
    let co2 = ("fCO2", 700.0, "uatm", 10.0);
    let calcite = |index| Treatment::Saturate { solid: "calcite".into(), index };
    let hold = |ph, reagent: Option<&str>| Treatment::HoldPh { ph, reagent: reagent.map(str::to_string) };
    let mut cases = vec![
        Case::new("alkalinity and pH", lake(), vec![], &["CCPP", "Langelier"]),
        Case::new("pH and DIC", lake_with(&[dic], &["alkalinity"]), vec![], &[]),
        Case::new("alkalinity and DIC", lake_with(&[dic], &["pH"]), vec![], &[]),
        Case::new("DIC and fugacity", lake_with(&[dic, co2], &["pH", "alkalinity"]), vec![], &[]),
        Case::new("alkalinity and fugacity", lake_with(&[co2], &["pH"]), vec![], &[]),
        Case::new("pH and fugacity", lake_with(&[co2], &["alkalinity"]), vec![], &[]),
        Case::new("a gas, and warmed", lake(), vec![open(4.2e-4), warm(25.0)], &["added(CO2(g))", "CCPP"]),
        Case::new(
            "a mineral",
            lake(),
            vec![warm(40.0), Treatment::Allow { solid: "calcite".into(), above: 0.0 }],
            &["n(calcite)", "all(Ca)"],
        ),
        Case::new("an unlimited mineral and a gas", lake(), vec![calcite(0.3), open(1e-3)], &["n(calcite)"]),
        Case::new("a fixed pH", lake(), vec![hold(7.0, None)], &[]),
        Case::new("a pH by reagent", lake(), vec![hold(9.0, Some("NaOH"))], &["added(NaOH)", "total(Na)"]),
    ];
    let mut ideal = Case::new("ideal", lake_with(&[dic], &["alkalinity"]), vec![], &[]);
    ideal.model = "ideal";
    let brine = || lake_with(&[("Na", 9.0, "g/kg", 0.1), ("Cl", 14.0, "g/kg", 0.1)], &["Na", "Cl"]);
    let mut sized = Case::new("ion sizes", lake(), vec![open(4.2e-4), warm(25.0)], &[]);
    sized.model = "debye-hueckel";
    let mut fitted = Case::new("ion sizes in a brine", brine(), vec![calcite(0.3)], &[]);
    fitted.model = "truesdell-jones";
    let mut specific = Case::new(
        "specific interactions in a brine",
        brine(),
        vec![warm(30.0), calcite(0.0)],
        &["n(calcite)"],
    );
    specific.model = "sit";
    cases.extend([sized, fitted, specific]);
    let mut made_up = Case::new("charges made up", lake(), vec![open(4.2e-4)], &["total(Cl)"]);
    made_up.texts.push(("make_up", "Cl"));
    let mut neutral = Case::new("electroneutral", lake_with(&[dic], &["pH", "alkalinity"]), vec![], &[]);
    neutral.texts.push(("pH", "electroneutral"));
    let three = lake_with(&[dic], &[]);
    let mut misfit = Case::new("a misfit", three, vec![warm(20.0)], &["misfit(alkalinity)"]);
    misfit.from = true;
    cases.extend([ideal, made_up, neutral, misfit]);
    cases
}

/// Every derivative that is not negligible is the difference quotient of whole solves to 1e-6, and those that are said to
/// be zero are.
#[test]
fn sensitivities_of_states_are_difference_quotients() {
    let differing = |case: &Case| {
        let mut differences = Vec::new();
        let (ledger, sample) = (case.ledger(), case.sample("", 0.0));
        let state = case.state(&sample, &ledger);
        let slopes: Vec<_> = case.observables.iter().map(|observable| slopes(&state, observable)).collect();
        let values = case.numbers(&sample, &ledger);
        // A charge error is a difference of sums of 50 %.
        let size =
            |k: usize| if case.observables[k] == "charge_error" { 100.0 } else { 1.0 + values[k].abs() };
        let slope = |k: usize, input: &str| slopes[k].get(input).copied().unwrap_or(0.0);
        let mut check = |what: &str, input: &str, quotients: Vec<f64>, step: f64| {
            for (k, quotient) in quotients.iter().enumerate() {
                // The second part is what rounding leaves of the difference of two solves.
                let allowed = 1e-6 * quotient.abs() + 1e-13 * size(k) / step;
                let (slope, observable) = (slope(k, input), case.observables[k]);
                if (slope - quotient).abs() > allowed || !slope.is_finite() {
                    differences.push(format!(
                        "{}: d {observable} / d {what}: {slope:e}, by difference {quotient:e}",
                        case.name
                    ));
                }
            }
        };
        let names: Vec<String> = ledger.names().map(str::to_string).collect();
        for (r, name) in names.iter().enumerate() {
            let input = input_of(&ledger, name);
            // An eleventh of the constants of each case: fifteen cases meet nearly all of them.
            if (r + 5 * case.name.len()).is_multiple_of(11) {
                let quotients = derivative(|step| case.numbers(&sample, &shifted(&ledger, name, step)), 2e-3);
                check(name, &input, quotients, 2e-3);
            }
        }
        for (key, value, ..) in &case.inputs {
            let step = if *key == "temperature" || *key == "pH" { 1e-2 } else { 1e-3 * value };
            let quotients = derivative(|by| case.numbers(&case.sample(key, by), &ledger), step);
            check(key, key, quotients, step);
        }
        differences
    };
    let differences: Vec<String> = cases().par_iter().flat_map_iter(differing).collect();
    assert!(differences.is_empty(), "{}", differences.join("\n"));
}

/// The uncertain parameters of an activity model reach the budget with the slope of whole solves.
#[test]
fn parameters_of_activity_models_are_inputs() {
    let given = |model: &str, table: &str, key: &str, text: String| {
        let entries = Value::Map(BTreeMap::from([(key.to_string(), Value::Text(text))]));
        let options = Named::new(BTreeMap::from([(table.to_string(), entries)]));
        freshwater().with_activity(ActivityChoice::read(model, options).unwrap())
    };
    let cases = cases();
    for (model, table, key, value, unit, label) in [
        ("sit", "epsilon", "Na^+ Cl^-", 0.03, "kg/mol", "Na^+ Cl^-"),
        ("sit", "epsilon", "Ca^2+ Cl^-", 0.14, "kg/mol", "Ca^2+ Cl^-"),
        ("truesdell-jones", "b", "Na^+", 0.075, "kg/mol", "Na^+"),
        ("truesdell-jones", "ion_size", "Ca^2+", 5.0, "angstrom", "ion size of Ca^2+"),
    ] {
        let case = cases.iter().find(|case| case.model == model).unwrap();
        let sample = case.sample("", 0.0);
        let with = |by: f64| given(model, table, key, format!("{} +/- 0.01 {unit}", value + by));
        let state = case.state(&sample, &with(0.0));
        let quotients = derivative(|by| case.numbers(&sample, &with(by)), 1e-3);
        let mut moves = 0;
        for (observable, quotient) in case.observables.iter().zip(quotients) {
            let slope = slopes(&state, observable).get(label).copied().unwrap_or(0.0);
            let allowed = 2e-6 * quotient.abs() + 1e-8;
            assert!(
                (slope - quotient).abs() <= allowed,
                "{model} {key}, {observable}: {slope:e} {quotient:e}"
            );
            moves += usize::from(slope != 0.0);
        }
        assert!(moves > 4, "{model} {key}: {moves}");
    }
}

/// Asserts that the slopes of some observables by one input are the difference quotients of whole solves.
fn compare_one(what: &str, asked: &[&str], state: &State, input: &str, step: f64, at: impl Fn(f64) -> State) {
    let numbers = |state: &State| -> Vec<f64> {
        asked.iter().map(|text| state.number(&Asked::parse(text).unwrap()).unwrap().0).collect()
    };
    let (values, quotients) = (numbers(state), derivative(|by| numbers(&at(by)), step));
    for ((observable, quotient), value) in asked.iter().zip(quotients).zip(values) {
        let slope = slopes(state, observable).get(input).copied().unwrap_or(0.0);
        let allowed = 1e-6 * quotient.abs() + 1e-13 * (1.0 + value.abs()) / step;
        assert!(
            (slope - quotient).abs() < allowed,
            "{what}: d {observable}: {slope:e}, by difference {quotient:e}"
        );
    }
    let acts = asked
        .iter()
        .any(|observable| slopes(state, observable).get(input).is_some_and(|slope| *slope != 0.0));
    assert!(acts, "{what} does nothing");
}

/// A fugacity, a saturation index, a pH and a temperature that were written with `+/-`.
#[test]
fn values_of_treatments_are_inputs() {
    let calcite = || "calcite".to_string();
    type Chosen = (&'static str, f64, &'static str, Box<dyn Fn(f64) -> Treatment>);
    let cases: [Chosen; 6] = [
        ("a fugacity", 4.2e-4, "bar", Box::new(open)),
        (
            "an unlimited solid",
            0.3,
            "1",
            Box::new(move |index| Treatment::Saturate { solid: calcite(), index }),
        ),
        (
            "a solid that may form",
            0.2,
            "1",
            Box::new(move |above| Treatment::Allow { solid: calcite(), above }),
        ),
        ("a pH", 7.0, "1", Box::new(|ph| Treatment::HoldPh { ph, reagent: None })),
        ("a pH by reagent", 9.0, "1", Box::new(|ph| Treatment::HoldPh { ph, reagent: Some("NaOH".into()) })),
        ("a temperature", 313.15, "K", Box::new(|t| Treatment::WarmTo(Temperature::from_kelvin(t).unwrap()))),
    ];
    let (case, ledger) = (Case::new("lake", lake(), vec![], &[]), freshwater());
    let base = case.sample("", 0.0);
    for (what, value, unit, treatment) in cases {
        let stated =
            Quantity::measured(value, Unit::parse(unit).unwrap(), Some(0.01 * value), "chosen").unwrap();
        let state = case.state(&base.treated_to(treatment(value), &stated).unwrap(), &ledger);
        let asked = ["pH", "DIC", "m(CO3^2-)", "SI(calcite)", "ionic_strength", "total(Ca)"];
        let step = if unit == "bar" { 1e-3 * value } else { 1e-2 };
        compare_one(what, &asked, &state, "chosen", step, |by| {
            case.state(&base.treated(treatment(value + by)).unwrap(), &ledger)
        });
    }
    // Chosen without an uncertainty, the same value is exact.
    let chosen = Quantity::measured(4.2e-4, Unit::parse("bar").unwrap(), None, "chosen").unwrap();
    let state = case.state(&base.treated_to(open(4.2e-4), &chosen).unwrap(), &ledger);
    assert!(!slopes(&state, "pH").contains_key("chosen"));
}

/// An enthalpy acts at 8.5 degC, where the lake was analysed, and otherwise at 40 degC, to which it is warmed.
#[test]
fn the_uncertainty_of_an_enthalpy_reaches_states_at_other_temperatures() {
    let with_enthalpy = |enthalpy: f64| {
        let text = |text: String| Value::Text(text);
        let options = BTreeMap::from([
            ("log_k".to_string(), text("-10.329 +/- 0.02".into())),
            ("enthalpy".to_string(), text(format!("{enthalpy:?} +/- 0.4 kJ/mol"))),
        ]);
        let k2 = Reaction::read("HCO3^- <=> CO3^2- + H^+", None, Named::new(options), None).unwrap();
        freshwater().replace("K2", &k2).unwrap()
    };
    let case = Case::new("lake", lake(), vec![warm(40.0)], &[]);
    let sample = case.sample("", 0.0);
    let state = case.state(&sample, &with_enthalpy(14.7));
    let known = slopes(&state, "m(CO3^2-)");
    let input = known.keys().find(|label| label.starts_with("enthalpy of HCO3^-")).expect("named");
    let asked = ["pH", "DIC", "m(CO3^2-)", "SI(calcite)"];
    compare_one(input, &asked, &state, input, 0.1, |by| case.state(&sample, &with_enthalpy(14.7 + by)));
    // At 25 degC throughout it does nothing.
    let mut inputs = lake();
    inputs[0] = ("temperature", 25.0, "degC", 0.0);
    let room = Case::new("lake at 25 degC", inputs, vec![], &[]);
    let state = room.state(&room.sample("", 0.0), &with_enthalpy(14.7));
    assert!(!slopes(&state, "m(CO3^2-)").contains_key(input));
}

#[test]
fn a_temperature_without_an_uncertainty_is_not_stated() {
    let text = |(key, text): (&str, &str)| (key.to_string(), Value::Text(text.into()));
    let water = [
        ("temperature", "8.5 degC"),
        ("pH", "8.15 +/- 0.02"),
        ("alkalinity", "2.35 meq/L"),
        ("Ca", "1 mmol/L"),
    ];
    let sample = Sample::read(water.map(text).into()).unwrap();
    let state = equilibrate(&sample, Some(&freshwater()), &Settings::default()).unwrap();
    let index = state.get("SI(calcite)").unwrap();
    let part = index.parts().iter().find(|part| part.input.label() == "temperature").expect("an input");
    assert!(part.input.sigma().is_none() && part.sensitivity != 0.0, "{part:?}");
}

#[test]
fn a_fixed_ph_depends_on_itself_alone() {
    let all = cases();
    let case = |name: &str| all.iter().find(|case| case.name == name).unwrap();
    for name in ["a fixed pH", "a pH by reagent"] {
        let case = case(name);
        let state = case.state(&case.sample("", 0.0), &case.ledger());
        assert_eq!(state.get("pH").unwrap().parts(), [], "{name}");
    }
    for name in ["alkalinity and pH", "pH and DIC", "pH and fugacity", "ideal"] {
        let case = case(name);
        let ph = case.state(&case.sample("", 0.0), &case.ledger()).get("pH").unwrap();
        let [part] = ph.parts() else { panic!("{name}: {:?}", ph.parts()) };
        assert_eq!(part.input.label(), "pH", "{name}");
        assert!((part.sensitivity - 1.0).abs() <= f64::EPSILON, "{name}");
        assert!((ph.sigma().unwrap() - 0.02).abs() < 1e-17, "{name}");
    }
}

#[test]
fn shares_of_a_budget_sum_to_one() {
    for case in cases() {
        let state = case.state(&case.sample("", 0.0), &case.ledger());
        for observable in &case.observables {
            let budget = state.get(observable).unwrap().budget();
            let sum: f64 = budget.rows.iter().map(|row| row.share).sum();
            let varies = budget.rows.iter().any(|row| row.contribution > 0.0);
            assert!(!varies || (sum - 1.0).abs() < 1e-12, "{}, {observable}: {sum}", case.name);
        }
    }
}

/// Every fresh water of every shipped example script, with the name of the script; derivatives of seawaters are in
/// `seawater`.
fn example_waters() -> Vec<(String, Sample)> {
    let folder = Path::new(env!("CARGO_MANIFEST_DIR")).join("../example-scripts");
    let mut waters = Vec::new();
    for entry in std::fs::read_dir(&folder).unwrap() {
        let path = entry.unwrap().path();
        if path.extension().is_none_or(|extension| extension != "rhai") {
            continue;
        }
        let options = Options {
            files: Sandbox::for_script(&path, &std::env::temp_dir(), false),
            output: Box::new(std::io::sink()),
            messages: Box::new(std::io::sink()),
            ..Options::default()
        };
        let mut session = Session::new(Arc::new(ScriptEngine::new(options)));
        session.enter(&std::fs::read_to_string(&path).unwrap()).unwrap_or_else(|error| panic!("{error:?}"));
        let name = path.file_name().unwrap().to_string_lossy().into_owned();
        let samples =
            session.variables().into_iter().flat_map(|(_, value)| match value.clone().into_array() {
                Ok(array) => array.into_iter().filter_map(Dynamic::try_cast::<Sample>).collect(),
                Err(_) => value.try_cast::<Sample>().into_iter().collect::<Vec<_>>(),
            });
        let fresh = samples.filter(|sample| sample.measured().is_some() && sample.sea().is_none());
        waters.extend(fresh.map(|sample| (name.clone(), sample)));
    }
    waters
}

/// The sample with one measured value moved by `by` in the unit it was given in; `None` for what is no measured value.
fn with_moved(sample: &Sample, key: &str, by: f64) -> Option<Sample> {
    let moved = match &sample.entries()[key] {
        Value::Number(number) => Value::Number(number + by),
        Value::Text(text) => {
            let given = Quantity::parse_any(text, &Unit::one(), key).ok()?;
            Value::Quantity(Quantity::exact(given.value() + by, given.unit().clone()))
        }
        Value::Quantity(given) => Value::Quantity(Quantity::exact(given.value() + by, given.unit().clone())),
        _ => return None,
    };
    sample.but(BTreeMap::from([(key.to_string(), Some(moved))])).ok()
}

/// What the one input behind a measured value is called, with its value.
fn measured_input(sample: &Sample, key: &str) -> Option<(String, f64)> {
    match &sample.entries()[key] {
        Value::Number(number) => Some((key.into(), *number)),
        Value::Text(text) => Some((key.into(), Quantity::parse_any(text, &Unit::one(), key).ok()?.value())),
        Value::Quantity(given) => Some((given.parts().first()?.input.label().into(), given.value())),
        _ => None,
    }
}

const OF_EXAMPLES: [&str; 9] = [
    "pH",
    "ionic_strength",
    "alkalinity",
    "DIC",
    "m(CO3^2-)",
    "f(CO2(g))",
    "charge_error",
    "SI(calcite)",
    "total(Ca)",
];

/// The waters of the examples are in mg/L, so that every amount acts on all others through the dissolved mass.
#[test]
fn sensitivities_of_the_shipped_examples_are_difference_quotients() {
    let waters = example_waters();
    assert!(waters.len() >= 42, "{}", waters.len());
    let ledger = freshwater();
    let shifts: Vec<f64> = [1.0, -1.0, 0.5, -0.5].map(|part| part * 2e-3).to_vec();
    let names: Vec<String> = ledger.names().map(str::to_string).collect();
    let asked: Vec<Asked> = OF_EXAMPLES.iter().map(|text| Asked::parse(text).unwrap()).collect();
    let numbers = |sample: &Sample, ledger: &Ledger| -> Vec<f64> {
        let state = equilibrate(sample, Some(ledger), &Settings::default()).unwrap();
        asked.iter().map(|asked| state.number(asked).map_or(f64::NAN, |(number, _)| number)).collect()
    };
    // The slopes of every observable, by input, and the values.
    type Answer = (Vec<BTreeMap<String, f64>>, Vec<f64>);
    let answers: Vec<Answer> = waters
        .par_iter()
        .map(|(_, sample)| {
            let state = equilibrate(sample, Some(&ledger), &Settings::default()).unwrap();
            let slopes =
                OF_EXAMPLES.iter().map(|text| state.get(text).map_or_else(|_| BTreeMap::new(), slopes_of));
            (slopes.collect(), numbers(sample, &ledger))
        })
        .collect();
    let compare = |water: usize, what: &str, input: &str, step: f64, moved: [Vec<f64>; 4]| -> Vec<String> {
        let [above, below, near_above, near_below] = moved;
        let (slopes, values) = &answers[water];
        let differing = |k: usize| {
            let central = (above[k] - below[k]) / (2.0 * step);
            let quotient = (4.0 * (near_above[k] - near_below[k]) / step - central) / 3.0;
            let slope = slopes[k].get(input).copied().unwrap_or(0.0);
            let size = if OF_EXAMPLES[k] == "charge_error" { 100.0 } else { 1.0 + values[k].abs() };
            let allowed = 1e-6 * quotient.abs() + 1e-13 * size / step;
            let (script, sample) = &waters[water];
            ((slope - quotient).abs() > allowed).then(|| {
                let name = sample.name().unwrap_or("-");
                let observable = OF_EXAMPLES[k];
                format!("{script}, {name}: d {observable} / d {what}: {slope:e}, by difference {quotient:e}")
            })
        };
        (0..OF_EXAMPLES.len()).filter_map(differing).collect()
    };
    let by_inputs = (0..waters.len()).into_par_iter().flat_map_iter(|water| {
        let sample = &waters[water].1;
        let compared = sample.entries().keys().filter_map(move |key| {
            let (input, value) = measured_input(sample, key)?;
            let step = if key == "temperature" || key == "pH" { 1e-2 } else { 1e-3 * value.abs() };
            with_moved(sample, key, step)?;
            Some((key.clone(), input, step))
        });
        let differing = compared.map(|(key, input, step)| {
            let moved = [1.0, -1.0, 0.5, -0.5]
                .map(|part| numbers(&with_moved(sample, &key, part * step).unwrap(), &ledger));
            compare(water, &key, &input, step, moved)
        });
        differing.flatten().collect::<Vec<_>>()
    });
    let mut differences: Vec<String> = by_inputs.collect();
    let by_constants = names.par_iter().enumerate().flat_map_iter(|(r, name)| {
        let ledgers: Vec<Ledger> = shifts.iter().map(|by| shifted(&ledger, name, *by)).collect();
        let input = input_of(&ledger, name);
        // Each constant with an eleventh of the waters.
        let some = (0..waters.len()).filter(|water| water % 11 == r % 11);
        let differing = some.map(|water| {
            let moved = std::array::from_fn(|k| numbers(&waters[water].1, &ledgers[k]));
            compare(water, name, &input, 2e-3, moved)
        });
        differing.flatten().collect::<Vec<_>>()
    });
    differences.extend(by_constants.collect::<Vec<_>>());
    assert!(differences.is_empty(), "{} differ:\n{}", differences.len(), differences.join("\n"));
}

/// Standard deviations of whole speciations with constants and inputs drawn at random, against first order. The spread of
/// a standard deviation of N draws is 1/sqrt(2 N) of it; four of those are allowed, and 2 % for curvature.
#[test]
fn random_draws_agree_with_first_order() {
    const DRAWS: usize = 400;
    const SIGMA: f64 = 0.02;

    let mut case = Case::new(
        "alkalinity and DIC",
        lake_with(&[("DIC", 2.6, "mmol/kg", 0.02)], &["pH"]),
        vec![open(4.2e-4)],
        &[],
    );
    case.observables = vec!["pH", "SI(calcite)", "m(CO3^2-)", "ionic_strength", "added(CO2(g))"];
    let ledger = freshwater();
    let names: Vec<String> = ledger.names().map(str::to_string).collect();
    let state = case.state(&case.sample("", 0.0), &ledger);
    let first_order: Vec<f64> = case
        .observables
        .iter()
        .map(|observable| {
            let slopes = slopes(&state, observable);
            let slope = |input: &str| slopes.get(input).copied().unwrap_or(0.0);
            let by_inputs = case.inputs.iter().map(|(key, _, _, sigma)| (slope(key) * sigma).powi(2));
            let by_constants = names.iter().map(|name| (slope(&input_of(&ledger, name)) * SIGMA).powi(2));
            by_inputs.chain(by_constants).sum::<f64>().sqrt()
        })
        .collect();
    let draws: Vec<Vec<f64>> = (0..DRAWS as u64)
        .into_par_iter()
        .map(|seed| {
            let random = &mut Random(seed);
            let drawn = names.iter().filter(|name| {
                ["pH", "SI(calcite)"]
                    .iter()
                    .any(|observable| slopes(&state, observable).contains_key(&input_of(&ledger, name)))
            });
            let ledger =
                drawn.fold(ledger.clone(), |ledger, name| shifted(&ledger, name, SIGMA * normal(random)));
            let mut drawn = Case::new("drawn", case.inputs.clone(), case.treatments.clone(), &[]);
            drawn.observables.clone_from(&case.observables);
            for (_, value, _, sigma) in &mut drawn.inputs {
                *value += *sigma * normal(random);
            }
            drawn.numbers(&drawn.sample("", 0.0), &ledger)
        })
        .collect();
    for (k, expected) in first_order.iter().enumerate() {
        let mean = draws.iter().map(|draw| draw[k]).sum::<f64>() / DRAWS as f64;
        let variance = draws.iter().map(|draw| (draw[k] - mean).powi(2)).sum::<f64>() / (DRAWS - 1) as f64;
        let ratio = variance.sqrt() / expected;
        println!("{}: random draws over first order {ratio:.3}", case.observables[k]);
        let allowed = 4.0 / (2.0 * DRAWS as f64).sqrt() + 0.02;
        assert!((ratio - 1.0).abs() < allowed, "{}: {ratio}", case.observables[k]);
    }
}

/// A standard normal number as a sum of twelve uniform ones, whose tails end at six.
fn normal(random: &mut Random) -> f64 {
    (0..12).map(|_| random.uniform(-0.5, 0.5)).sum()
}
