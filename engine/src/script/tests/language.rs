//! The language as a whole, with a toy native type where one is needed.

use std::sync::{Arc, Mutex};
use std::time::{Duration, Instant};

use proptest::prelude::*;
use rayon::prelude::*;
use rhai::plugin::*;
use rhai::{Dynamic, Map};

use super::Captured;
use super::closure::{Closure, Worker};
use super::{Halt, Host, Options, ScriptEngine, ScriptResult, Session, Vocabulary, docs, fail};
use crate::script::diagnostic::{Diagnostic, Kind};
use crate::script::sandbox::Sandbox;

/// A native type such as the chemistry has: a value, with methods that return new values.
#[derive(Debug, Clone, PartialEq)]
struct Jar {
    volume: f64,
}

#[export_module]
mod jars {
    /// A jar.
    ///
    /// ```rhai
    /// jar(#{ volume: 1.5 }).volume   // 1.5
    /// ```
    #[rhai_fn(return_raw)]
    pub fn jar(options: Map) -> ScriptResult<Jar> {
        if let Some(key) = options.keys().find(|key| *key != "volume" && *key != "inner") {
            return fail(format!("unknown key `{key}`"))
                .help("did you mean `volume`?")
                .key(key.as_str())
                .raise();
        }
        let volume = options.get("volume").and_then(|volume| volume.as_float().ok()).unwrap_or(1.0);
        Ok(Jar { volume })
    }

    /// The jar with more in it.
    ///
    /// ```rhai
    /// jar(#{ volume: 1.0 }).filled(2.0).volume   // 3
    /// ```
    #[rhai_fn(pure)]
    pub fn filled(jar: &mut Jar, more: f64) -> Jar {
        Jar { volume: jar.volume + more }
    }

    /// Volume, L.
    #[rhai_fn(get = "volume", pure)]
    pub fn volume(jar: &mut Jar) -> f64 {
        jar.volume
    }

    /// Reads a text.
    #[rhai_fn(return_raw)]
    pub fn parse(text: &str) -> ScriptResult<()> {
        match text.chars().position(|c| c == '?') {
            Some(start) => fail("`?` is no element").text(0, start, 1).raise(),
            None => Ok(()),
        }
    }

    /// The sum of `f(i)` for i below n, on several threads.
    #[rhai_fn(return_raw)]
    pub fn summed(context: NativeCallContext, n: i64, f: rhai::FnPtr) -> ScriptResult<i64> {
        let closure = Closure::new(&context, &f);
        let host = Host::of(&context);
        let value = |worker: &mut Worker, i: i64| {
            host.progress("sum", i.unsigned_abs(), n.unsigned_abs());
            worker.call((i,))?.as_int().map_err(|other| fail(format!("not {other}")).into())
        };
        (0..n).into_par_iter().map_init(|| closure.worker(), value).sum()
    }

    pub fn break_down() {
        panic!("the toy broke");
    }

    /// Works for ever, but listens.
    #[rhai_fn(return_raw)]
    pub fn toil(context: NativeCallContext) -> ScriptResult<()> {
        let host = Host::of(&context);
        loop {
            host.stop().check()?;
            std::thread::sleep(Duration::from_millis(1));
        }
    }

    #[rhai_fn(name = "±")]
    pub fn uncertain(value: f64, sigma: f64) -> String {
        format!("{value} with {sigma}")
    }
}

fn toys(vocabulary: &mut Vocabulary) {
    vocabulary
        .module(rhai::exported_module!(jars))
        .native::<Jar>("Jar", |jar, style| {
            format!("jar of {}{}", jar.volume, if style.ascii { " L" } else { " ℓ" })
        })
        .pure(&["jar", "filled"])
        .operator::<Jar, Jar>("/", |a, b| Ok(Jar { volume: litres(a)? / litres(b)? }))
        .operator::<Jar, Jar>("+", |a, b| Ok(Jar { volume: litres(a)? + litres(b)? }))
        .equality::<Jar>(|a, b| Ok(litres(a)? == litres(b)?))
        .ordered::<Jar>(|a, b| Ok(litres(a)?.partial_cmp(&litres(b)?)));
}

fn litres(value: &Dynamic) -> ScriptResult<f64> {
    if let Some(jar) = value.read_lock::<Jar>() {
        return Ok(jar.volume);
    }
    Ok(crate::script::numbers::real("a jar", value)?)
}

fn engine() -> ScriptEngine {
    ScriptEngine::with_vocabulary(Options::default(), toys)
}

#[track_caller]
fn shows(script: &str, expected: &str) {
    let engine = engine();
    match engine.run("a.rhai", script) {
        Ok(value) => {
            assert_eq!(value.map_or_else(String::new, |value| engine.show(&value)), expected, "{script}")
        }
        Err(diagnostic) => panic!("{script}: {diagnostic} {:?}", diagnostic.help),
    }
}

#[track_caller]
fn fails(script: &str) -> Diagnostic {
    *engine().run("a.rhai", script).expect_err(script)
}

/// The message and the underlined characters.
#[track_caller]
fn case(script: &str, message: &str, underlined: &str) {
    let diagnostic = fails(script);
    let place = diagnostic.place.as_ref().unwrap_or_else(|| panic!("no place: {diagnostic}"));
    let under: String = place.text.chars().skip(place.column - 1).take(place.width).collect();
    assert_eq!((diagnostic.message.as_str(), under.as_str()), (message, underlined), "{script}");
}

#[test]
fn division_is_real_with_the_precedence_of_a_product() {
    shows("1/2", "0.5");
    shows("7/2*2", "7");
    shows("1 + 6/3/2", "2");
    shows("-1/4", "-0.25");
    shows("2*3/4 - 1/2", "1");
    shows("idiv(-7, 2)", "-3");
    shows("[6/4, 1.0/4][0]", "1.5");
    shows("let f = |x| x/4; f.call(2)", "0.5");
    shows("`${1/4}`", "\"0.25\"");
    shows("jar(#{ volume: 3.0 })/2", "jar of 1.5 ℓ");
}

#[test]
fn plus_minus_binds_tighter_than_a_product() {
    shows("1.5 ± 0.1", "\"1.5 with 0.1\"");
    shows("1.5±0.1", "\"1.5 with 0.1\"");
    shows("-1.5 ± 0.1", "\"-1.5 with 0.1\"");
    shows("\"±\"", "\"±\"");
    case("2.0 * 1.5 ± 0.1", "cannot multiply a number and text", "*");
}

#[test]
fn whole_numbers_and_decimals_mix() {
    for (call, expected) in [
        ("pow(2, 10)", "1024"),
        ("pow(10, -6.35)", "4.46683592151e-7"),
        ("pow(10.0, 2)", "100"),
        ("sqrt(4)", "2"),
        ("exp(0)", "1"),
        ("ln(1)", "0"),
        ("log10(1000)", "3"),
        ("exp10(-3)", "0.001"),
        ("abs(-3)", "3"),
        ("abs(-3.5)", "3.5"),
        ("min(1, 0.5)", "0.5"),
        ("max(1, 0.5)", "1"),
        ("min(2, 3)", "2"),
        ("1 < 1.5", "true"),
        ("2 >= 2.0", "true"),
        ("1.5 > 2", "false"),
    ] {
        shows(call, expected);
    }
}

#[test]
fn spaced_values_reach_their_ends() {
    shows("linspace(0, 1, 3)", "[0, 0.5, 1]");
    shows("logspace(100, 10000, 3)", "[100, 1000, 10000]");
    shows("steps(0, 0.3, 0.1)[-1] == 0.3", "true");
    shows("steps(0, 1, 0.4)", "[0, 0.4, 0.8]");
    shows("steps(1, 0, -0.5)", "[1, 0.5, 0]");
    shows("steps(2, 2, 1)", "[2]");
    shows("linspace(0.1, 0.7, 7)[-1] == 0.7", "true");
    case("linspace(0, 1, 1)", "`linspace` makes 2 to 10000000 values, not 1", "1");
    case("linspace(0, 1, 9000000000)", "`linspace` makes 2 to 10000000 values, not 9000000000", "9000000000");
    case("steps(0, 1, 0)", "steps of 0 do not lead from 0 to 1", "0");
    case("steps(0, 1, 1e-300)", "`steps` makes 1 to 10000000 values, not 9223372036854775807", "1e");
}

#[test]
fn what_has_no_order_is_not_compared() {
    case("\"8.1\" < 9", "cannot compare text with a whole number", "<");
    case("let m = #{ pH: 8 }; m.ph < 9", "cannot compare nothing `()` with a whole number", "<");
    case("[1] >= 2", "cannot compare an array with a whole number", ">=");
    shows("\"a\" < \"b\"", "true");
    case("true > false", "cannot compare a truth value with a truth value", ">");
}

#[test]
fn a_native_type_brings_its_operators_for_both_sides() {
    shows("jar(#{ volume: 1.0 }) < 2", "true");
    shows("2.5 <= jar(#{ volume: 1.0 })", "false");
    shows("jar(#{}) >= jar(#{})", "true");
    shows("jar(#{}) == 1", "true");
    shows("1 != jar(#{})", "false");
    shows("jar(#{}) == jar(#{ volume: 2.0 })", "false");
    shows("jar(#{}) in [jar(#{})]", "true");
    shows("1 + jar(#{}) + 0.5", "jar of 2.5 ℓ");
    shows("let j = jar(#{}); j += 2; j", "jar of 3 ℓ");
    case("jar(#{}) < \"x\"", "`a jar` takes numbers, not text", "<");
    case("jar(#{}) == ()", "`a jar` takes numbers, not nothing `()`", "==");
    case("jar(#{}) + \"x\"", "`a jar` takes numbers, not text", "+");
    case("jar(#{}) * 2", "cannot multiply a Jar and a whole number", "*");
}

#[test]
fn a_key_an_argument_or_a_character_is_underlined() {
    case("let a = jar(#{ volume: 1.0,\n  volum: 2.0 });", "unknown key `volum`", "volum");
    case("let o = #{ volum: 2.0 };\nlet a = jar(o);", "unknown key `volum`", "volum");
    case("parse(\"Ca?\")", "`?` is no element", "?");
    case("let t = \"Ca?\"; parse(t)", "`?` is no element", "t");
    case("parse(\"\\tCa?\")", "`?` is no element", "\"\\tCa?\"");
    case("fn f() { jar(#{ volum: 1 }) }\nf()", "unknown key `volum`", "volum");
    case("[1].map(|x| jar(#{ volum: x }))", "unknown key `volum`", "volum");
}

#[test]
fn an_unused_result_is_refused_before_anything_runs() {
    case("let a = jar(#{});\na.filled(2.0);\na", "the result of `filled` is not used", "filled");
    case(
        "let a = jar(#{});\nif true {\n a.filled(2.0);\n print(1);\n}",
        "the result of `filled` is not used",
        "filled",
    );
    case("jar(#{}).filled(1.0).volume;", "the result of `.volume` is not used", "volume");
    case(
        "let a = jar(#{});\nif true { a.filled(2.0) } else { a }\na",
        "the result of `filled` is not used",
        "filled",
    );
    case(
        "fn g(a) { if true { a.filled(1.0) } a }\ng(jar(#{}))",
        "the result of `filled` is not used",
        "filled",
    );
    shows("fn g(a) { if true { a.filled(1.0) } else { a } }\ng(jar(#{}))", "jar of 2 ℓ");
    shows("let a = jar(#{});\na.filled(2.0)", "jar of 3 ℓ");
    shows("let a = jar(#{});\nlet b = if true { a.filled(2.0) } else { a };\nb", "jar of 3 ℓ");
    shows("fn g(a) { a.filled(1.0) }\ng(jar(#{}))", "jar of 2 ℓ");
    shows("fn filled(x) { x }\nfilled(1);\n2", "2");
    shows("let a = [1]; a.push(2); a", "[1, 2]");
}

#[test]
fn a_caught_failure_can_be_read() {
    shows(
        "let s = \"\"; try { jar(#{ vol: 1 }); } catch (e) { s = e.message + \"; \" + e.help; } s",
        "\"unknown key `vol`; did you mean `volume`?\"",
    );
    shows("let s = \"\"; try { let a = 1/0; } catch (e) { s = `${e}`; } s", "\"division by zero\"");
}

#[test]
fn a_native_panic_is_a_fault_of_ours_and_the_engine_goes_on() {
    let engine = engine();
    let diagnostic = engine.run("a.rhai", "break_down();").expect_err("a panic");
    assert_eq!(diagnostic.kind, Kind::Bug);
    assert_eq!(diagnostic.message, "a fault of lysocline, not of the script: the toy broke");
    assert!(engine.run("a.rhai", "1 + 1").is_ok());
}

#[test]
fn the_time_limit_stops_loops_and_native_work() {
    let limited = Options { time_limit: Some(Duration::from_millis(50)), ..Options::default() };
    let engine = ScriptEngine::with_vocabulary(limited, toys);
    for script in ["loop {}", "toil();", "try { loop {} } catch { print(1); }", "[1].map(|x| { loop {} })"] {
        let start = Instant::now();
        let diagnostic = engine.run("a.rhai", script).expect_err(script);
        assert_eq!(diagnostic.kind, Kind::Halted(Halt::TimeUp), "{script}");
        assert!(start.elapsed() < Duration::from_secs(5), "{script}");
    }
    assert!(engine.run("a.rhai", "1 + 1").is_ok());
}

#[test]
fn deep_nesting_is_an_error_and_not_the_end() {
    let sum = vec!["1"; 240].join("+");
    shows(&sum, "240");
    assert_eq!(fails(&"(".repeat(5000)).kind, Kind::Syntax);
    assert_eq!(fails(&vec!["1"; 3000].join("+")).message, "this expression is nested too deeply");
    shows("fn f(n) { if n == 0 { 0 } else { 1 + f(n - 1) } }\nf(50)", "50");
    assert_eq!(fails("fn f(n) { [n].map(|x| f(x + 1)) }\nf(0)").kind, Kind::Failure);
    case("fn f(n) { f(n + 1) }\nf(0)", "functions call each other too deeply (more than 64 calls)", "f");
}

#[test]
fn marks_at_the_start_of_a_file_are_no_code() {
    shows("\u{feff}#!/usr/bin/env lysocline\n1 + 1", "2");
    shows("let a = 1;\r\na + 1\r\n", "2");
    case("#!x\nlet a = ;", "`;` does not fit here", ";");
}

#[test]
fn calls_on_the_way_to_a_failure_are_named_once() {
    let diagnostic = fails("fn inner(x) {\n  sqrt(x)\n}\nfn outer(x) {\n  inner(x - 1)\n}\nouter(-3)");
    let frames: Vec<String> =
        diagnostic.trace.iter().map(|frame| format!("{} {}", frame.what, frame.place.line)).collect();
    assert_eq!(frames, ["`inner` 5", "`outer` 7"]);
    assert_eq!(diagnostic.place.map(|place| place.line), Some(2));
}

#[test]
fn a_closure_runs_on_several_threads() {
    shows("let k = 2; summed(1000, |i| i * k)", "999000");
    shows("let k = 0; let s = summed(10, |i| { k += 1; i }); [s, k]", "[45, 0]");
    case("summed(100, |i| if i < 50 { i } else { missing })", "there is no variable `missing`", "missing");
    let limited = Options { time_limit: Some(Duration::from_millis(50)), ..Options::default() };
    let stopped = ScriptEngine::with_vocabulary(limited, toys).run("a.rhai", "summed(4, |i| { loop {} })");
    assert_eq!(stopped.expect_err("a stop").kind, Kind::Halted(Halt::TimeUp));
}

#[test]
fn progress_reaches_the_program() {
    let seen = Arc::new(Mutex::new(Vec::new()));
    let record = Arc::clone(&seen);
    let progress = move |progress: super::Progress<'_>| {
        record.lock().expect("no panic").push((progress.done, progress.total))
    };
    let options = Options { progress: Some(Arc::new(progress)), ..Options::default() };
    ScriptEngine::with_vocabulary(options, toys).run("a.rhai", "let s = summed(3, |i| i);").expect("it runs");
    let mut seen = seen.lock().expect("no panic").clone();
    assert_eq!(seen.pop(), Some((0, 0)), "the end is reported in any case");
    seen.sort_unstable();
    assert_eq!(seen, [(0, 3), (1, 3), (2, 3)]);
}

proptest! {
    #![proptest_config(ProptestConfig::with_cases(300))]

    /// Whatever is typed gives a value or a message that can be drawn: never a panic, never a place outside its line.
    #[test]
    fn no_text_brings_the_engine_down(pieces in prop::collection::vec(prop::sample::select(PIECES), 0..12)) {
        let text = pieces.concat();
        let limited = Options { time_limit: Some(Duration::from_millis(200)), output: Box::new(std::io::sink()), messages: Box::new(std::io::sink()), ..Options::default() };
        let engine = Arc::new(ScriptEngine::with_vocabulary(limited, |_| {}));
        let mut session = Session::new(Arc::clone(&engine));
        for result in [engine.run("a.rhai", &text), session.enter(&text), session.enter("1")] {
            if let Err(diagnostic) = result {
                prop_assert!(diagnostic.kind != Kind::Bug, "{}: {}", text, diagnostic);
                if let Some(place) = diagnostic.place {
                    prop_assert!(place.column <= place.text.chars().count() + 2, "{}: {:?}", text, place);
                }
            }
        }
    }
}

const PIECES: &[&str] = &[
    "let a = ",
    "1",
    "1.5e3",
    "a",
    "f",
    "(",
    ")",
    "[",
    "]",
    "#{",
    "}",
    "{",
    ";",
    "\n",
    " + ",
    " / ",
    "^",
    "±",
    "\"x\"",
    "\"",
    "`",
    "${",
    "|x| ",
    "fn f(x) { x }",
    ".map(",
    ".b",
    "if ",
    "else ",
    "for i in ",
    "0..3",
    "=",
    " == ",
    " < ",
    "sqrt(",
    "é",
    "水",
    "\t",
    "//",
    "/*",
    "*/",
    "import \"m\" as m;",
    "throw ",
    "try {",
    "catch (e) {",
    ",",
    ":",
    "pH: ",
    "help(",
    "print(",
    "fmt(1, \".2e\")",
    "-",
    "::",
    "a.call(",
    "\\",
    "'",
    "$",
    "\u{feff}",
    "#!",
];

#[test]
fn every_documented_example_runs_and_gives_what_it_says() {
    let engine = engine();
    let entries = engine.entries();
    let examples = docs::examples(&entries);
    assert!(examples.len() > 15, "{}", examples.len());
    for (name, example) in examples {
        let options = Options { output: Box::new(std::io::sink()), ..Options::default() };
        let value = ScriptEngine::with_vocabulary(options, toys).run(&name, &example);
        let value = value.unwrap_or_else(|diagnostic| panic!("{name}: {diagnostic}"));
        if let Some((_, expected)) = example.trim_end().rsplit_once("   // ") {
            assert_eq!(value.map(|value| engine.show(&value)).as_deref(), Some(expected), "{name}");
        }
    }
}

#[test]
fn every_function_of_the_base_is_documented() {
    let engine = ScriptEngine::with_vocabulary(Options::default(), |_| {});
    let entries = engine.entries();
    for entry in
        entries.iter().filter(|entry| !entry.is_standard && entry.name.starts_with(char::is_alphabetic))
    {
        let overloads = || entries.iter().filter(|other| other.name == entry.name && !other.is_standard);
        let hidden = ["to_string", "to_debug"].contains(&entry.name.as_str());
        assert!(
            hidden || overloads().any(|other| !other.text.is_empty()),
            "`{}` has no doc comment",
            entry.name
        );
    }
}

#[test]
fn output_goes_where_the_engine_was_told() {
    let captured = Captured::default();
    let arguments = vec!["x".to_owned()];
    let engine = ScriptEngine::with_vocabulary(
        Options { output: Box::new(captured.clone()), arguments, ..Options::default() },
        toys,
    );
    engine
        .run("a.rhai", "print(\"pH\"); print([1/2, \"a\"]); print(jar(#{})); print(args());")
        .expect("it runs");
    let text = captured.text();
    assert_eq!(text, "pH\n[0.5, \"a\"]\njar of 1 ℓ\n[\"x\"]\n");
}

#[test]
fn help_shows_the_signature_and_the_comment() {
    let entries = engine().entries();
    let text = docs::help(&entries, "filled", 100).expect("it is documented");
    assert_eq!(
        text,
        "filled(jar: Jar, more: number) -> Jar\n    The jar with more in it.\n\n    jar(#{ volume: 1.0 }).filled(2.0).volume   // 3"
    );
    assert_eq!(docs::help(&entries, "zzz", 100).expect_err("a misspelling").help, Vec::<String>::new());
    assert_eq!(
        docs::help(&entries, "filed", 100).expect_err("a misspelling").help,
        ["did you mean `filled`?"]
    );
}

mod sessions {
    use super::*;

    fn session() -> Session {
        Session::new(Arc::new(engine()))
    }

    #[track_caller]
    fn echo(session: &mut Session, entry: &str) -> String {
        let value = session.enter(entry).unwrap_or_else(|diagnostic| panic!("{entry}: {diagnostic}"));
        value.map_or_else(String::new, |value| session.engine().show(&value))
    }

    #[test]
    fn names_live_on_and_values_are_echoed() {
        let mut s = session();
        assert_eq!(echo(&mut s, "let a = 2;"), "");
        assert_eq!(echo(&mut s, "let b = 3"), "");
        assert_eq!(echo(&mut s, "a/b"), "0.666666666667");
        assert_eq!(echo(&mut s, "a;"), "");
        assert_eq!(echo(&mut s, "fn twice(x) { 2 * x }"), "");
        assert_eq!(echo(&mut s, "twice(a)"), "4");
        assert_eq!(echo(&mut s, "let f = |x| twice(x + 0.5);\nf.call(1)"), "3");
        assert_eq!(echo(&mut s, "f.call(a) // again"), "5");
        assert_eq!(
            s.script(),
            "let a = 2;\nlet b = 3;\nprint(a/b);\na;\nfn twice(x) { 2 * x }\nprint(twice(a));\nlet f = |x| twice(x + 0.5);\nprint(f.call(1));\nprint(f.call(a)); // again\n"
        );
    }

    #[test]
    fn what_is_saved_runs_and_prints_what_was_shown() {
        let mut s = session();
        let entries = [
            "let a = [3, 1]",
            "a",
            "if a[0] > 2 { \"high\" } else { \"low\" }",
            "for x in a { a.push(x/2) }",
            "a",
            "fn g(x) {\n  x\n}",
            "g(\"pH\"); g(7)",
        ];
        let shown: String = entries
            .iter()
            .map(|entry| echo(&mut s, entry))
            .filter(|text| !text.is_empty())
            .map(|text| text.replace('"', "") + "\n")
            .collect();
        let captured = Captured::default();
        let options = Options { output: Box::new(captured.clone()), ..Options::default() };
        let value =
            ScriptEngine::with_vocabulary(options, toys).run("saved.rhai", &s.script()).expect("it runs");
        assert!(value.is_none());
        assert_eq!(captured.text(), shown);
        assert_eq!(s.script().lines().count(), 9);
    }

    #[test]
    fn a_function_may_be_written_anew() {
        let mut s = session();
        echo(&mut s, "fn twice(x) { 2 * x }");
        echo(&mut s, "let f = |x| twice(x);");
        echo(&mut s, "fn twice(x) { x + x + 0.5 }");
        assert_eq!(echo(&mut s, "f.call(1)"), "2.5");
    }

    #[test]
    fn a_failed_entry_leaves_no_trace() {
        let mut s = session();
        echo(&mut s, "let a = [1]; let t = 1; let f = |x| x * t;");
        s.enter("a.push(2); t = 5; let c = 3; fn g() { 1 } missing").expect_err("a misspelling");
        assert_eq!(echo(&mut s, "a"), "[1]");
        assert_eq!(echo(&mut s, "f.call(1)"), "1", "the captured variable is as before");
        s.enter("c").expect_err("it was defined in the failed entry");
        s.enter("g()").expect_err("it was defined in the failed entry");
        assert_eq!(s.len(), 3);
        assert_eq!(s.variables().len(), 3);
    }

    #[test]
    fn undo_takes_one_entry_back() {
        let mut s = session();
        assert_eq!(s.undo(), None);
        echo(&mut s, "let a = 1;");
        echo(&mut s, "a = 2;");
        assert_eq!(s.undo().as_deref(), Some("a = 2;"));
        assert_eq!(echo(&mut s, "a"), "1");
        s.undo();
        s.undo();
        s.enter("a").expect_err("nothing is left");
    }

    #[test]
    fn places_are_lines_of_the_saved_script() {
        let mut s = session();
        echo(&mut s, "let a = 1;\nlet b = 2;");
        echo(&mut s, "fn f(x) {\n  sqrt(x)\n}");
        let place = s.enter("1 +\n missing").expect_err("no such variable").place.expect("a place");
        assert_eq!((place.line, place.column, place.text.as_str()), (7, 2, " missing"));
        let diagnostic = s.enter("f(-1)").expect_err("a negative number");
        let place = diagnostic.place.expect("a place");
        assert_eq!((place.line, place.text.as_str()), (4, "  sqrt(x)"));
        assert_eq!(diagnostic.trace[0].place.line, 6);
    }
}

mod modules {
    use super::*;

    fn run(files: &[(&str, &str)], main: &str) -> Result<String, Box<Diagnostic>> {
        let folder = tempfile::tempdir().expect("a temporary folder");
        for (name, text) in files {
            let path = folder.path().join(name);
            std::fs::create_dir_all(path.parent().expect("a folder")).expect("it can be made");
            std::fs::write(path, text).expect("it can be written");
        }
        let script = folder.path().join("main.rhai");
        let files = Sandbox::for_script(&script, &folder.path().join("out"), false);
        let engine = ScriptEngine::with_vocabulary(Options { files, ..Options::default() }, toys);
        Ok(engine.run("main.rhai", main)?.map_or_else(String::new, |value| engine.show(&value)))
    }

    #[test]
    fn a_module_beside_the_script_is_found() {
        let value = run(
            &[
                ("lab/h.rhai", "import \"k\" as k;\nfn g(x) { k::h(x)/2 }"),
                ("lab/k.rhai", "fn h(x) { x + 1 }"),
            ],
            "import \"lab/h\" as m;\nm::g(3)",
        );
        assert_eq!(value.expect("it runs"), "2");
    }

    #[test]
    fn a_failure_inside_a_module_is_shown_there() {
        let diagnostic = run(&[("h.rhai", "fn g(x) {\n  sqrt(x)\n}")], "import \"h\" as m;\nm::g(-3)")
            .expect_err("a negative number");
        let place = diagnostic.place.expect("a place");
        assert_eq!((place.source.as_str(), place.line), ("h.rhai", 2));
        assert_eq!(diagnostic.trace[0].place.source, "main.rhai");
        let diagnostic = run(&[("h.rhai", "\nlet a = ;")], "import \"h\" as m;").expect_err("a fault");
        let place = diagnostic.place.expect("a place");
        assert_eq!((place.source.as_str(), place.line), ("h.rhai", 2));
    }

    #[test]
    fn an_import_outlives_its_entry() {
        let folder = tempfile::tempdir().expect("a temporary folder");
        std::fs::write(folder.path().join("h.rhai"), "fn half(x) { x/2 }").expect("it can be written");
        let files = Sandbox::for_script(&folder.path().join("main.rhai"), folder.path(), false);
        let engine = ScriptEngine::with_vocabulary(Options { files, ..Options::default() }, toys);
        let mut session = Session::new(Arc::new(engine));
        session.enter("import \"h\" as h;").expect("it is there");
        session.enter("let a = 1;").expect("it runs");
        let value = session.enter("h::half(a)").expect("it runs").expect("a value");
        assert_eq!(session.engine().show(&value), "0.5");
        session.enter("fn half(x) { x }").expect_err("two of a name");
        session.enter("fn third(x) { x/3 }").expect("another name");
    }

    #[test]
    fn two_scripts_may_define_the_same_name() {
        let engine = engine();
        engine.run("a.rhai", "fn g() { 1 }\ng()").expect("it runs");
        engine.run("b.rhai", "fn g() { 2 }\ng()").expect("it runs");
    }

    #[test]
    fn circles_and_collisions_are_refused() {
        let circle =
            run(&[("a.rhai", "import \"b\" as b;"), ("b.rhai", "import \"a\" as a;")], "import \"a\" as a;")
                .expect_err("a circle");
        assert_eq!(circle.message, "modules import each other: a.rhai -> b.rhai -> a.rhai");
        let collision = run(&[("h.rhai", "fn g(x) { x }")], "import \"h\" as h;\nfn g(x) { -x }\nh::g(1)")
            .expect_err("two of a name");
        assert_eq!(collision.message, "the function `g` is defined in `h.rhai` and in `main.rhai`");
    }

    #[cfg(unix)]
    #[test]
    fn no_import_leaves_the_folder() {
        let outside = tempfile::tempdir().expect("a temporary folder");
        std::fs::write(outside.path().join("o.rhai"), "fn g() { 1 }").expect("it can be written");
        let folder = tempfile::tempdir().expect("a temporary folder");
        std::os::unix::fs::symlink(outside.path().join("o.rhai"), folder.path().join("link.rhai"))
            .expect("a link");
        let files = Sandbox::for_script(&folder.path().join("main.rhai"), folder.path(), false);
        let engine = ScriptEngine::with_vocabulary(Options { files, ..Options::default() }, toys);
        let absolute = outside.path().join("o").display().to_string();
        for name in ["link", absolute.as_str()] {
            let diagnostic =
                engine.run("main.rhai", &format!("import \"{name}\" as o;")).expect_err("outside");
            assert_eq!(diagnostic.message, format!("`{name}` is outside the script's folder"));
        }
    }
}

mod files {
    use super::*;
    use crate::script::sandbox::SandboxError;

    #[test]
    fn a_script_replaces_only_what_it_wrote() {
        let folder = tempfile::tempdir().expect("a temporary folder");
        let out = folder.path().join("out");
        let sandbox =
            |script: &str, overwrite| Sandbox::for_script(&folder.path().join(script), &out, overwrite);
        let mut first = sandbox("a.rhai", false);
        first.write("t.csv", b"1").expect("a new file");
        first.write("t.csv", b"2").expect("written in this run");
        sandbox("a.rhai", false).write("t.csv", b"3").expect("written by this script before");
        assert!(matches!(sandbox("b.rhai", false).write("t.csv", b"4"), Err(SandboxError::NotOurs { .. })));
        sandbox("b.rhai", true).write("t.csv", b"5").expect("it is allowed");
        std::fs::write(out.join("t.csv"), "edited").expect("a person edits it");
        assert!(matches!(sandbox("b.rhai", false).write("t.csv", b"6"), Err(SandboxError::NotOurs { .. })));
        assert_eq!(std::fs::read_to_string(out.join("t.csv")).expect("it is there"), "edited");
    }

    #[test]
    fn names_do_not_lead_outside() {
        let folder = tempfile::tempdir().expect("a temporary folder");
        let mut sandbox =
            Sandbox::for_script(&folder.path().join("a.rhai"), &folder.path().join("out"), true);
        for name in ["../x", "/tmp/x", "a/../../x"] {
            assert!(matches!(sandbox.write(name, b""), Err(SandboxError::Outside { .. })), "{name}");
            assert!(matches!(sandbox.read_text(name), Err(SandboxError::Outside { .. })), "{name}");
        }
        assert!(matches!(sandbox.write("", b""), Err(SandboxError::Refused { .. })));
        sandbox.write("deep/er/x.csv", b"1").expect("folders are made");
    }

    #[test]
    fn a_missing_file_offers_the_nearest() {
        let folder = tempfile::tempdir().expect("a temporary folder");
        std::fs::write(folder.path().join("survey.csv"), "\u{feff}a,b").expect("it can be written");
        let mut sandbox = Sandbox::for_script(&folder.path().join("a.rhai"), folder.path(), false);
        let error = sandbox.read_text("surwey.csv").expect_err("no such file");
        assert_eq!(crate::script::Fail::from(error).help, ["did you mean `survey.csv`?"]);
        assert_eq!(sandbox.read_text("survey.csv").expect("it is there"), "a,b");
        assert_eq!(sandbox.files_read().count(), 1);
    }
}
