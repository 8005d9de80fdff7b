//! Cost of derivatives and uncertainties in units of what they come on top of: see the README beside this file.

mod tableaux;

use std::collections::BTreeMap;
use std::hint::black_box;

use lysocline_engine::activity::Model;
use lysocline_engine::equilibrium::{Asked, State, equilibrate};
use lysocline_engine::ledger::{Ledger, shipped};
use lysocline_engine::named::Value;
use lysocline_engine::solve::sensitivity::{Found, Sensitivities, own_supplies};
use lysocline_engine::solve::{Converged, Problem, Settings};
use lysocline_engine::water::{Sample, Treatment};
use tableaux::{COMPONENTS, N_TABLEAUX, SPECIES, iteration_time, quantile, random_tableau, run, time};

const OBSERVABLES: [&str; 14] = [
    "pH",
    "ionic_strength",
    "alkalinity",
    "DIC",
    "hardness",
    "charge_error",
    "m(CO3^2-)",
    "c(Ca^2+)",
    "gamma(Ca^2+)",
    "total(Ca)",
    "SI(calcite)",
    "SI(dolomite)",
    "SI(gypsum)",
    "f(CO2(g))",
];

fn main() {
    derivatives();
    uncertainties();
}

/// Derivatives of the solver's answer against one iteration.
fn derivatives() {
    let settings = Settings::default();
    let (mut iteration, mut linearise, mut one, mut all) = (vec![], vec![], vec![], vec![]);
    for problem in (0..N_TABLEAUX).map(random_tableau) {
        let converged = run(&problem, &settings, None);
        iteration.push(iteration_time(&problem, &settings));
        linearise.push(time(|| linearised(&problem, &converged)));
        one.push(time(|| pulled(&problem, &converged, 1)));
        all.push(time(|| pulled(&problem, &converged, COMPONENTS)));
    }
    let [iteration, linearise, one, all] =
        [iteration, linearise, one, all].map(|mut times| quantile(&mut times, 0.5));
    println!("{COMPONENTS} components, {SPECIES} species, {N_TABLEAUX} random tableaux");
    println!("one iteration                      {:8.2} µs", iteration * 1e6);
    let line = |what: &str, seconds: f64, target: &str| {
        println!("{what:<34} {:8.2} µs   {:5.2} x iteration{target}", seconds * 1e6, seconds / iteration);
    };
    line("linearised", linearise, "");
    line("one output by all log K and totals", one, " (target 0.6)");
    line("all ln a by all log K and totals", all, " (target 2)");
}

fn linearised(problem: &Problem, converged: &Converged) -> Sensitivities {
    let supplies = own_supplies(problem);
    Sensitivities::new(black_box(problem), &Model::IDEAL, converged, &supplies).expect("a smooth answer")
}

/// The derivatives of the first `n_outputs` ln activities, the linear system included.
fn pulled(problem: &Problem, converged: &Converged, n_outputs: usize) {
    let linear = linearised(problem, converged);
    for k in 0..n_outputs {
        let mut weight = Found::zero(problem);
        weight.ln_a[k] = 1.0;
        black_box(linear.pull(&weight));
    }
}

/// Uncertainties of a lake's observables against its equilibrium.
fn uncertainties() {
    let ledger = shipped::ledger("freshwater", None).expect("it is shipped");
    let warm = Treatment::OpenTo { gas: "CO2(g)".into(), fugacity: 4.2e-4 };
    let treated = lake().treated(warm).expect("a fugacity above zero");
    println!("\n{} observables of a lake, constants of the freshwater ledger", OBSERVABLES.len());
    for (name, sample) in [("analysed", lake()), ("analysed and open to the air", treated)] {
        let asked: Vec<Asked> =
            OBSERVABLES.iter().map(|text| Asked::parse(text).expect("an observable")).collect();
        let solved = time(|| solved(&sample, &ledger));
        let state = self::solved(&sample, &ledger);
        let numbers = time(|| asked.iter().for_each(|asked| drop(black_box(state.number(asked)))));
        let with_uncertainty = time(|| {
            // A state works out its derivatives once: a new one each time.
            let state = self::solved(&sample, &ledger);
            asked.iter().for_each(|asked| drop(black_box(state.answer(asked))));
        });
        let more = with_uncertainty - solved - numbers;
        println!("{name}: equilibrium {:.0} µs, numbers {:.2} x that", solved * 1e6, numbers / solved);
        println!("   all uncertainties {:.0} µs, {:.2} x equilibrium (target 1)", more * 1e6, more / solved);
    }
}

fn solved(sample: &Sample, ledger: &Ledger) -> State {
    equilibrate(black_box(sample), Some(ledger), &Settings::default()).expect("a lake has an equilibrium")
}

fn lake() -> Sample {
    let text = |(key, value): (&str, &str)| (key.to_string(), Value::Text(value.into()));
    let entries: BTreeMap<String, Value> = [
        ("temperature", "8.5 +/- 0.2 degC"),
        ("pH", "8.15 +/- 0.02"),
        ("alkalinity", "2.35 +/- 0.03 meq/L"),
        ("Ca", "41.2 +/- 0.8 mg/L"),
        ("Mg", "8.1 +/- 0.2 mg/L"),
        ("Na", "6.0 +/- 0.1 mg/L"),
        ("K", "1.4 +/- 0.1 mg/L"),
        ("Cl", "9.8 +/- 0.2 mg/L"),
        ("SO4^2-", "14.0 +/- 0.5 mg/L"),
    ]
    .into_iter()
    .map(text)
    .collect();
    Sample::read(entries).expect("a lake")
}
