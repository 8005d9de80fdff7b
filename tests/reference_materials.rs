//! Reference materials from the file to the answer: 204 certified seawaters, see `seawater-reference/README.md`.

use std::path::Path;
use std::sync::Arc;

use approx::assert_relative_eq;
use lysocline_engine::equilibrium::State;
use lysocline_engine::process::Run;
use lysocline_engine::script::sandbox::Sandbox;
use lysocline_engine::script::{Options, ScriptEngine, Session};

use crate::seawater::bisected_ph;
use crate::waters::get;

/// Name, salinity, DIC, alkalinity, and phosphate and silicate where stated; umol/kg.
type Certified = (String, f64, f64, f64, [f64; 2]);

fn certified() -> Vec<Certified> {
    let text = include_str!("seawater-reference/certified.csv");
    let number = |cell: &str| if cell.is_empty() { 0.0 } else { cell.parse().expect("a number") };
    let row = |line: &str| {
        let cells: Vec<&str> = line.split(',').collect();
        let [s, dic, alkalinity, phosphate, silicate] = std::array::from_fn(|k| number(cells[k + 1]));
        (cells[0].to_string(), s, dic, alkalinity, [phosphate, silicate])
    };
    text.lines().skip(1).map(row).collect()
}

/// The file as a script reads it.
fn computed() -> Vec<State> {
    let beside = Path::new(env!("CARGO_MANIFEST_DIR")).join("seawater-reference/script.rhai");
    let options = Options {
        files: Sandbox::for_script(&beside, &std::env::temp_dir(), false),
        output: Box::new(std::io::sink()),
        messages: Box::new(std::io::sink()),
        ..Options::default()
    };
    let mut session = Session::new(Arc::new(ScriptEngine::new(options)));
    let entered = session.enter(r#"let batches = read_samples("certified.csv").equilibrate();"#);
    entered.unwrap_or_else(|error| panic!("{error:?}"));
    let run = session.variables().into_iter().find_map(|(name, value)| {
        (name == "batches").then(|| value.clone().try_cast::<Run>().expect("a run"))
    });
    let outcomes = run.expect("the variable").outcomes().to_vec();
    outcomes.into_iter().map(|outcome| outcome.unwrap_or_else(|error| panic!("{error}"))).collect()
}

#[test]
fn the_list_is_whole() {
    let rows = certified();
    assert_eq!(rows.len(), 204);
    let extremes = |of: fn(&Certified) -> f64| {
        let values = rows.iter().map(of);
        (values.clone().fold(f64::INFINITY, f64::min), values.fold(f64::NEG_INFINITY, f64::max))
    };
    // As the list itself states, rounded.
    let (salinity, dic, alkalinity) = (extremes(|row| row.1), extremes(|row| row.2), extremes(|row| row.3));
    assert!(salinity.0 >= 31.55 && salinity.1 <= 38.5, "{salinity:?}");
    assert!((dic.0 - 1876.6).abs() < 0.05 && (dic.1 - 2304.6).abs() < 0.05, "{dic:?}");
    assert!((alkalinity.0 - 2114.4).abs() < 0.05 && (alkalinity.1 - 2427.6).abs() < 0.05, "{alkalinity:?}");
}

#[test]
fn every_certified_water_is_read_and_computed_as_a_second_solver_does() {
    let (rows, states) = (certified(), computed());
    assert_eq!(rows.len(), states.len());
    for ((name, salinity, dic, alkalinity, [phosphate, silicate]), state) in rows.iter().zip(&states) {
        assert_relative_eq!(get(state, "salinity"), *salinity, max_relative = 1e-14);
        assert_relative_eq!(get(state, "DIC [umol/kg(solution)]"), *dic, max_relative = 1e-12);
        assert_relative_eq!(get(state, "alkalinity [umol/kg(solution)]"), *alkalinity, max_relative = 1e-10);
        let ledger = state.system().ledger();
        let sea = ledger.sea().expect("a seawater");
        assert_relative_eq!(sea.salinity, *salinity);
        let nutrients = [("phosphate", phosphate * 1e-6), ("silicate", silicate * 1e-6)];
        let ph = bisected_ph(ledger, sea, state.temperature(), dic * 1e-6, alkalinity * 1e-6, &nutrients);
        let found = get(state, "pH(free)");
        assert!((found - ph).abs() < 1e-9, "{name}: pH(free) {found}, by bisection {ph}");
    }
}
