//! Cases as a person writes them.

use super::*;

#[track_caller]
fn answer(json: &str) -> (Tableau, Answer) {
    let tableau = Tableau::parse(json).unwrap_or_else(|faults| panic!("{faults:?}"));
    let answer = tableau.solve(&Settings::default()).unwrap();
    (tableau, answer)
}

#[track_caller]
fn solved(json: &str) -> Solution {
    answer(json).1.solution().cloned().expect("a solution")
}

#[track_caller]
fn faults(json: &str, expected: &[&str]) {
    let faults = Tableau::parse(json).expect_err("faults");
    assert_eq!(faults.iter().map(ToString::to_string).collect::<Vec<_>>(), expected);
}

/// Hydroxide of a metal at fixed pH, by hand: the phase holds M at 1e12 [H]^2 and the rest of the total is in it.
#[test]
fn a_phase_at_fixed_ph() {
    let json = r#"{ "components": ["H", "M"], "totals": [0.0, "1e-3"], "activity": "ideal",
        "species": [ { "name": "MOH", "nu": [-1, 1], "log_k": -9.0, "charge": 1 } ],
        "fixed": [ { "component": "H", "log_a": -8.0 } ],
        "phases": [ { "name": "M(OH)2", "members": [ { "nu": [-2, 1], "log_k": "-12.0" } ] } ] }"#;
    let solution = solved(json);
    assert!((solution.log_a[1] + 4.0).abs() < 1e-12);
    assert!((solution.log_c[2] + 5.0).abs() < 1e-12);
    let precipitated = 1e-3 - 1e-4 - 1e-5;
    assert!((solution.amounts[0] / precipitated - 1.0).abs() < 1e-12);
    assert_eq!(solution.saturation, [0.0]);
    // Hydrogen left over: one set free by each MOH, two by each M(OH)2, less 1e-8 that stay.
    assert!((solution.exchange[0] / (1e-5 + 2.0 * precipitated - 1e-8) - 1.0).abs() < 1e-12);
}

#[test]
fn zeros_and_bare_components() {
    let json = r#"{ "components": ["A", "B", "S"], "totals": [1e-3, 0, 2e-3], "bare": ["S"],
        "species": [ { "name": "AS", "nu": [1, 0, 1], "log_k": 5 }, { "name": "BS", "nu": [0, 1, 1], "log_k": 5 },
                     { "name": "S2", "nu": [0, 0, 2], "log_k": 1 } ] }"#;
    let (tableau, answer) = answer(json);
    assert_eq!((answer.status(), tableau.species().len()), ("solved with zeros", 5));
    let solution = answer.solution().unwrap();
    assert_eq!(solution.zeros, ["B", "BS"]);
    let json = answer.to_json(&tableau);
    assert_eq!(json["log_c"][1], serde_json::Value::Null);
    assert_eq!(json["status"], "solved with zeros");
}

#[test]
fn totals_that_cannot_be_met_say_which() {
    let json = r#"{ "components": ["A", "B"], "totals": [1, 2], "bare": ["B"],
        "species": [ { "name": "AB", "nu": [1, 1], "log_k": 5 } ] }"#;
    let (tableau, answer) = answer(json);
    assert_eq!(
        (answer.status(), answer.reason()),
        ("infeasible", "`T(A) - T(B)` is -1, and no amounts of species and phases can make it negative")
    );
    assert_eq!(answer.to_json(&tableau)["status"], "infeasible");
}

#[test]
fn a_phase_without_end_says_what_supplies_it() {
    let json = r#"{ "components": ["H", "Ca"], "totals": [0, 0],
        "fixed": [ { "component": "H", "log_a": -13 }, { "component": "Ca", "log_a": -1 } ],
        "phases": [ { "name": "portlandite", "members": [ { "nu": [-2, 1], "log_k": -22.8 } ] } ] }"#;
    let (_, answer) = answer(json);
    assert_eq!(answer.status(), "unbounded");
    assert!(answer.reason().contains("`portlandite`") && answer.reason().contains("`H`, `Ca`"));
}

#[test]
fn davies_takes_its_coefficients_and_charges() {
    let json = |options: &str| {
        format!(
            r#"{{ "components": ["M", "X"], "charges": [1, -1], "totals": [0.1, 0.1], "activity": "davies", {options}
                "species": [ {{ "name": "MX", "nu": [1, 1], "log_k": 0.0 }} ] }}"#
        )
    };
    let mass_action = |solution: &Solution, a: f64, b: f64| {
        let i = solution.converged.ionic_strength;
        let log_gamma = -a * (i.sqrt() / (1.0 + i.sqrt()) - b * i);
        let off = solution.log_c[2] - solution.log_c[0] - solution.log_c[1] - 2.0 * log_gamma;
        assert!(off.abs() < 1e-12 && (i - 10_f64.powf(solution.log_c[0])).abs() < 1e-12, "{off:e}");
    };
    mass_action(&solved(&json("")), 0.509, 0.3);
    mass_action(&solved(&json(r#""davies": { "A": 0.5, "b": 0.2 },"#)), 0.5, 0.2);
}

#[test]
fn every_fault_is_told_with_its_place() {
    faults(
        r#"{ "components": ["H", "M"], "totals": [0.0], "specis": [], "activity": "debye",
            "species": [ { "name": "MOH", "nu": [-1, 0.12345678], "log_k": "nine" }, { "nu": [0, 0], "log_k": 1 } ],
            "fixed": [ { "component": "Natrium", "log_a": -7 } ], "bare": ["m"],
            "phases": [ { "name": "solid", "members": [] } ] }"#,
        &[
            "`the tableau`: unknown key `specis`; did you mean `species`?",
            "`totals`: has 1 number, and there are 2 components",
            "`bare[0]`: there is no component `m`; did you mean `M`?",
            "`activity`: there is no model `debye`; there are `ideal` and `davies`",
            "`species[0].log_k`: takes a finite number or a decimal text, not `nine`",
            "`species[0].nu[1]`: is neither a whole number nor a fraction with a denominator up to 10000",
            "`species[1]`: `name` is missing",
            "`species[1].nu`: has no coefficient other than zero",
            "`fixed[0].component`: there is no component `Natrium`; the components are `H` and `M`",
            "`phases[0].members`: a phase has at least one member",
        ],
    );
    faults("[]", &["`the tableau`: takes a map, not a list"]);
    faults("{", &["`the file`: is not JSON: EOF while parsing an object at line 1 column 1"]);
    faults(
        r#"{ "components": ["A", "A"], "totals": [1, 1e999] }"#,
        &["`the file`: is not JSON: number out of range at line 1 column 47"],
    );
}

/// Derivatives against difference quotients of the solver itself.
#[test]
fn sensitivities_are_difference_quotients() {
    let case = |total: f64, log_k: f64, log_a: f64| {
        format!(
            r#"{{ "components": ["H", "M", "L"], "totals": [0, {total}, 2e-3],
                "species": [ {{ "name": "ML", "nu": [0, 1, 1], "log_k": {log_k} }}, {{ "name": "HL", "nu": [1, 0, 1], "log_k": 6 }} ],
                "fixed": [ {{ "component": "H", "log_a": {log_a} }} ] }}"#
        )
    };
    let (total, log_k, log_a) = (1e-3, 4.0, -6.0);
    let (tableau, answer) = answer(&case(total, log_k, log_a));
    let table = tableau.sensitivities(answer.solution().unwrap()).unwrap();
    let names: Vec<&str> = table.iter().map(|column| column.by.as_str()).collect();
    assert_eq!(
        names,
        ["ln K(H)", "ln K(M)", "ln K(L)", "ln K(ML)", "ln K(HL)", "T(H)", "T(M)", "T(L)", "ln a(H)"]
    );
    let compare = |by: &str, up: String, down: String, width: f64| {
        let column = table.iter().find(|column| column.by == by).unwrap();
        let (up, down) = (solved(&up), solved(&down));
        for ((a, b), derivative) in up.log_c.iter().zip(&down.log_c).zip(&column.ln_c) {
            let quotient = (a - b) * LN_10 / width;
            assert!(
                (quotient - derivative).abs() <= 1e-6 * quotient.abs().max(1.0),
                "{by} {quotient} {derivative}"
            );
        }
    };
    let h = 1e-4;
    compare("ln K(ML)", case(total, log_k + h, log_a), case(total, log_k - h, log_a), 2.0 * h * LN_10);
    compare("ln a(H)", case(total, log_k, log_a + h), case(total, log_k, log_a - h), 2.0 * h * LN_10);
    compare(
        "T(M)",
        case(total * (1.0 + h), log_k, log_a),
        case(total * (1.0 - h), log_k, log_a),
        2.0 * h * total,
    );
}
