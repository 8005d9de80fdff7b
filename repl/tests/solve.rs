//! `lysocline solve`: a tableau in, its equilibrium as JSON out.

mod common;

use common::{Test, streams};

const CASE: &str = r#"{ "components": ["A", "B"], "totals": ["1e-3", TOTAL], "species": [ { "name": "AB", "nu": [1, 1], "log_k": 5 } ] }"#;

fn test(total: &str) -> Test {
    Test::new().file("case.json", &CASE.replace("TOTAL", total))
}

/// [AB] of a 1:1 complex from equal totals T: K (T - c)^2 = c.
#[test]
fn a_solution_is_printed_as_json() {
    let output =
        test("1e-3").lysocline(&["solve", "case.json", "--repeat", "3"]).output().expect("it starts");
    let (json, messages) = streams(&output);
    assert_eq!((output.status.code(), messages.as_str()), (Some(0), ""));
    assert!(json.contains("\"status\": \"solved\"") && json.contains("\"seconds_per_solve\": "), "{json}");
    let (t, k) = (1e-3_f64, 1e5_f64);
    let c = t + 0.5 / k - ((0.5 / k).powi(2) + t / k).sqrt();
    let log_c = json.split("\"log_c\": [").nth(1).and_then(|rest| rest.split(']').next()).expect("log_c");
    let last: f64 = log_c.split(',').next_back().expect("three").trim().parse().expect("a number");
    assert!((last - c.log10()).abs() < 1e-11, "{last} {}", c.log10());
}

#[test]
fn exact_zeros_are_null() {
    let output = test("0").lysocline(&["solve", "case.json"]).output().expect("it starts");
    let (json, _) = streams(&output);
    assert_eq!(output.status.code(), Some(0));
    assert!(json.contains("\"status\": \"solved with zeros\"") && json.contains("null"), "{json}");
}

#[test]
fn what_has_no_solution_says_why_and_fails() {
    let output = test("-1").lysocline(&["solve", "case.json"]).output().expect("it starts");
    let (json, messages) = streams(&output);
    assert_eq!((output.status.code(), messages.as_str()), (Some(1), ""));
    assert!(json.contains("\"status\": \"infeasible\"") && json.contains("`T(B)` is -1"), "{json}");
}

#[test]
fn every_fault_of_a_case_is_told() {
    let test = Test::new().file("case.json", r#"{ "components": ["A"], "totals": ["x"], "phase": [] }"#);
    let output = test.lysocline(&["solve", "case.json"]).output().expect("it starts");
    let (json, messages) = streams(&output);
    assert_eq!((output.status.code(), json.as_str()), (Some(1), ""));
    assert!(messages.contains("cannot use the case `case.json`"), "{messages}");
    assert!(messages.contains("unknown key `phase`; did you mean `phases`?"), "{messages}");
    assert!(messages.contains("`totals[0]`: takes a finite number or a decimal text, not `x`"), "{messages}");
}
