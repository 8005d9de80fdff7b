//! The smallest script of a variable: what is kept, and that it gives the same value to the last bit.

use std::sync::Arc;

use proptest::prelude::*;

use crate::script::{Options, ScriptEngine, Session, same};

fn session(entries: &[&str]) -> Session {
    let sink = || Box::new(std::io::sink());
    let engine =
        Arc::new(ScriptEngine::new(Options { output: sink(), messages: sink(), ..Options::default() }));
    let mut session = Session::new(engine);
    for entry in entries {
        session.enter(entry).unwrap_or_else(|error| panic!("{entry}: {error}"));
    }
    session
}

#[track_caller]
fn case(entries: &[&str], name: &str, expected: &[&str]) {
    let slice = session(entries).slice(name).expect("a slice");
    assert_eq!(slice.text.lines().collect::<Vec<_>>(), expected);
}

#[test]
fn a_session_goes_on_after_its_script_was_checked() {
    let mut session = session(&["fn f(x) { x }"]);
    session.engine().check("saved.rhai", &session.script()).expect("it is sound");
    session.enter("f(1)").expect("the function is the session's");
}

#[test]
fn of_a_function_defined_again_the_newest_is_written_where_that_is_sound() {
    let again =
        session(&["fn f(x) { x + 1 }", "let b = 2;", "fn f(x) { x + b0() } fn b0() { 2 }", "let a = f(b)"]);
    assert_eq!(again.script(), "let b = 2;\nfn f(x) { x + b0() }\nfn b0() { 2 }\nlet a = f(b);\n");
    // Used before it was replaced, also through another function or a closure, it has to stay.
    for used in
        ["let a = f(1);", "let a = [1].map(f);", "let a = [1].map(|x| f(x));", "fn g() { f(1) } let a = g();"]
    {
        let script = session(&["fn f(x) { x }", used, "fn f(x) { x + 1 }"]).script();
        assert_eq!(script.matches("fn f(x)").count(), 2, "{script}");
    }
}

#[test]
fn only_what_a_variable_needs() {
    case(
        &["let a = 1;", "let b = 2;", "let c = a + 1;", "b", "print(c);"],
        "c",
        &["let a = 1;", "let c = a + 1;"],
    );
    // Statements of one entry are told apart.
    case(&["let a = 1; let b = 2; let c = b * 2;"], "c", &["let b = 2;", "let c = b * 2;"].map(|line| line));
    // A new `let` is another variable; a change is not.
    case(&["let a = 1;", "let b = a;", "let a = 5;"], "a", &["let a = 5;"]);
    case(
        &["let a = [1];", "a.push(2);", "let n = a.len();", "a.push(3);"],
        "n",
        &["let a = [1];", "a.push(2);", "let n = a.len();"],
    );
    case(&["let a = [1];", "push(a, 2);"], "a", &["let a = [1];", "push(a, 2);"]);
    case(&["let m = #{ x: 1 };", "m.y = 2;", "let z = 3;"], "m", &["let m = #{ x: 1 };", "m.y = 2;"]);
}

#[test]
fn functions_and_closures() {
    case(
        &["fn g(x) { x + 1 }", "fn f(x) { g(x) * 2 }", "fn h(x) { x }", "let a = f(3);"],
        "a",
        &["fn g(x) { x + 1 }", "fn f(x) { g(x) * 2 }", "let a = f(3);"],
    );
    // A closure sees what is written to its captured variable until it is called.
    case(
        &["let t = 1;", "let f = |x| x * t;", "t = 30;", "let y = f.call(2);", "t = 40;"],
        "y",
        &["let t = 1;", "let f = |x| x * t;", "t = 30;", "let y = f.call(2);"],
    );
    // Not what is written to another variable of the same name.
    case(
        &["let v = 1;", "let f = |x| x * v;", "v = 5;", "let v = 2;", "let y = f.call(1);"],
        "y",
        &["let v = 1;", "let f = |x| x * v;", "v = 5;", "let y = f.call(1);"],
    );
    // A closure that counts.
    case(
        &["let n = 0;", "let f = || { n += 1; };", "f.call();", "let z = 1;", "f.call();"],
        "n",
        &["let n = 0;", "let f = || { n += 1; };", "f.call();", "f.call();"],
    );
    case(
        &["fn add(x) { this += x; }", "let a = 1;", "a.add(2);"],
        "a",
        &["fn add(x) { this += x; }", "let a = 1;", "a.add(2);"],
    );
    case(
        &["let a = [3, 1];", "a.sort();", "for x in a { print(x); }"],
        "a",
        &["let a = [3, 1];", "a.sort();"],
    );
}

#[test]
fn two_versions_of_a_function_are_no_script() {
    let entries = ["fn f(x) { x + 1 }", "let a = f(1);", "fn f(x) { x + 2 }", "let b = a + f(1);"];
    let fault = session(&entries).slice("b").expect_err("no slice");
    assert!(fault.message.contains("two versions of the function `f`"), "{}", fault.message);
    let only_new = session(&entries[..3]);
    assert_eq!(only_new.slice("a").expect("a slice").text, "fn f(x) { x + 1 }\nlet a = f(1);\n");
    let fault = only_new.slice("aa").expect_err("no variable");
    assert_eq!(fault.message, "there is no variable `aa`");
}

#[test]
fn waters_and_runs_come_back() {
    let entries = [
        "let lake = sample(#{ pH: \"8.1 +/- 0.02\", alkalinity: \"2.3 meq/L\", Ca: \"41 mg/L\" });",
        "let book = ledger(\"freshwater\");",
        "let other = sample(#{ pH: 7, DIC: \"1 mmol/kg\" });",
        "let run = sweep(lake, #{ pH: [7, 8] });",
        "let t = run.table([\"pH\", \"SI(calcite)\"]);",
        "let s = lake.equilibrate();",
        "let q = s.pH + 1;",
    ];
    let session = session(&entries);
    for (name, kept) in [("lake", 1), ("run", 2), ("t", 3), ("q", 3), ("book", 1)] {
        let slice = session.slice(name).unwrap_or_else(|fault| panic!("{name}: {}", fault.message));
        assert_eq!(slice.kept, kept, "{name}: {}", slice.text);
    }
}

/// An entry on the variables a to d, the functions f and g and the closure k; whether it is accepted depends on what came
/// before.
fn entry() -> impl Strategy<Value = String> {
    let name = prop_oneof![Just("a"), Just("b"), Just("c"), Just("d")];
    (0..22u8, name.clone(), name.clone(), name, -3..4i32).prop_map(|(kind, x, y, z, n)| match kind {
        0 | 1 => format!("let {x} = {n};"),
        2 => format!("let {x} = {y} + {z};"),
        3 => format!("{x} = {y} * 0.37 + {n};"),
        4 => format!("{x} += {n};"),
        5 => format!("let {x} = [{y}, {n}];"),
        6 => format!("{x}.push({y});"),
        7 => format!("push({x}, {n});"),
        8 => format!("let {x} = {y}.len();"),
        9 => format!("fn f(x) {{ x + {n} }}"),
        10 => "fn g(x) { f(x) * 3 }".to_owned(),
        11 => format!("let {x} = f({y});"),
        12 => format!("let {x} = g({n});"),
        13 => format!("let k = |x| x + {y} * {n};"),
        14 => format!("let k = || {{ {x} += {n}; }};"),
        15 => format!("let {x} = k.call({n});"),
        16 => "k.call();".to_owned(),
        17 => format!("if {x} > {n} {{ {y} = {n}; }} else {{ let {z} = 1; {y} += 2; }}"),
        18 => format!("for {x} in 0..3 {{ {y} += {x}; }}"),
        19 => format!("let {x} = #{{ p: {y}, q: {n} }};"),
        20 => format!("{x}.p = {y};"),
        _ => format!("let {x} = {y}.map(|v| v * {n}); {z} = 0;"),
    })
}

proptest! {
    #![proptest_config(ProptestConfig { cases: 64, ..ProptestConfig::default() })]

    #[test]
    fn a_slice_gives_the_same_value(entries in prop::collection::vec(entry(), 8..28)) {
        let mut session = session(&["let a = 1;", "let b = 2.5;", "let c = [1, 2];", "let d = 4;", "let k = |x| x;"]);
        for entry in &entries {
            let _ = session.enter(entry);
        }
        for (name, value) in session.variables() {
            let slice = match session.slice(&name) {
                Ok(slice) => slice,
                Err(fault) => {
                    prop_assert!(fault.message.contains("two versions of the function"), "{}\n{}", fault.message, session.script());
                    continue;
                }
            };
            prop_assert!(!slice.is_whole, "dependencies of {name} were missed in\n{}", session.script());
            let mut again = super::slices::session(&[]);
            again.enter(&slice.text).map_err(|error| TestCaseError::fail(format!("{error}\n{}", slice.text)))?;
            let found = again.variables().into_iter().rev().find(|(own, _)| *own == name);
            let (_, found) = found.expect("the variable");
            prop_assert!(same(again.engine(), &found, &value), "{name}\n{}\n{}", slice.text, session.script());
        }
    }
}
