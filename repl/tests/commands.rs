//! The program from outside: exit codes, streams, input from a pipe, limits, files.

mod common;

use std::io::{BufRead, BufReader, Read};
use std::process::Stdio;
use std::time::{Duration, Instant};

use common::{Test, streams};

#[test]
fn results_go_to_standard_output_and_messages_to_standard_error() {
    let test = Test::new()
        .file("a.rhai", "print(1/2);\nprint(\"pH\");\nsqrt(4)\n")
        .file("b.rhai", "print(1);\nmissing\n");
    let output = test.lysocline(&["run", "a.rhai"]).output().expect("it starts");
    assert_eq!(
        (output.status.code(), streams(&output)),
        (Some(0), ("0.5\npH\n2\n".to_owned(), String::new()))
    );
    let output = test.lysocline(&["run", "b.rhai"]).output().expect("it starts");
    let (results, messages) = streams(&output);
    assert_eq!((output.status.code(), results.as_str()), (Some(1), "1\n"));
    assert_eq!(
        messages,
        "error: there is no variable `missing`\n  b.rhai:2:1\n  2 | missing\n    | ^^^^^^^\n"
    );
}

#[test]
fn exit_codes() {
    let test = Test::new().file("a.rhai", "1;").file("latin.rhai", "1").file("d/x", "");
    std::fs::write(test.path().join("latin.rhai"), b"print(\"\xe9\");").expect("it can be written");
    let code = |arguments: &[&str]| test.lysocline(arguments).output().expect("it starts").status.code();
    assert_eq!(code(&["run", "a.rhai"]), Some(0));
    assert_eq!(code(&["--version"]), Some(0));
    assert_eq!(code(&["--help"]), Some(0));
    assert_eq!(code(&["run"]), Some(2));
    assert_eq!(code(&["rum", "a.rhai"]), Some(2));
    assert_eq!(code(&["run", "a.rhai", "--time-limit", "-1"]), Some(2));
    assert_eq!(
        code(&["run", "a.rhai", "--", "--time-limit", "-1"]),
        Some(0),
        "after `--` all words are the script's"
    );
    assert_eq!(code(&["run", "--time-limit", "0", "a.rhai"]), Some(2));
    assert_eq!(code(&["--color", "maybe"]), Some(2));
    for (file, reason) in [
        ("none.rhai", "there is no such file"),
        ("d", "it is a folder"),
        ("latin.rhai", "it is not UTF-8 text"),
    ] {
        let output = test.lysocline(&["run", file]).output().expect("it starts");
        let message = format!("error: cannot read the script `{file}`: {reason}\n");
        assert_eq!((output.status.code(), streams(&output)), (Some(1), (String::new(), message)));
    }
}

#[test]
fn a_script_reads_its_arguments() {
    let test = Test::new().file("a.rhai", "for word in args() { print(word); }");
    let output =
        test.lysocline(&["run", "a.rhai", "north basin", "--depth", "5"]).output().expect("it starts");
    assert_eq!(streams(&output).0, "north basin\n--depth\n5\n");
}

#[test]
fn colours_come_when_asked_for() {
    let test = Test::new().file("a.rhai", "missing");
    let coloured = |arguments: &[&str], no_color: bool| {
        let mut command = test.lysocline(arguments);
        if no_color {
            command.env("NO_COLOR", "1");
        }
        streams(&command.output().expect("it starts")).1.contains('\u{1b}')
    };
    assert!(!coloured(&["run", "a.rhai"], false));
    assert!(coloured(&["run", "--color", "always", "a.rhai"], false));
    assert!(!coloured(&["run", "--color", "never", "a.rhai"], false));
    assert!(!coloured(&["run", "a.rhai"], true));
}

#[test]
fn an_endless_loop_ends_at_the_time_limit() {
    let test = Test::new().file("a.rhai", "print(1);\nloop {}\n");
    let start = Instant::now();
    let output = test.lysocline(&["run", "--time-limit", "0.3", "a.rhai"]).output().expect("it starts");
    assert!(start.elapsed() < Duration::from_secs(10));
    let (results, messages) = streams(&output);
    assert_eq!((output.status.code(), results.as_str()), (Some(1), "1\n"));
    assert!(messages.starts_with("stopped: the time limit has passed\n  a.rhai:2:"), "{messages}");
}

#[cfg(unix)]
#[test]
fn an_interrupt_stops_a_script() {
    let test = Test::new().file("a.rhai", "print(\"go\");\nloop {}\n");
    let mut command = std::process::Command::new(test.lysocline(&[]).get_program());
    let command = command
        .args(["run", "a.rhai"])
        .current_dir(test.path())
        .stdout(Stdio::piped())
        .stderr(Stdio::piped());
    let mut child = command.spawn().expect("it starts");
    let mut line = String::new();
    let mut results = BufReader::new(child.stdout.take().expect("a pipe"));
    results.read_line(&mut line).expect("a line");
    let killed = std::process::Command::new("kill")
        .args(["-INT", &child.id().to_string()])
        .status()
        .expect("kill exists");
    assert!(killed.success());
    assert_eq!(child.wait().expect("it ends").code(), Some(1));
    let mut messages = String::new();
    child.stderr.take().expect("a pipe").read_to_string(&mut messages).expect("text");
    assert!(messages.starts_with("stopped by Ctrl-C"), "{messages}");
}

#[test]
fn a_closed_pipe_is_quiet() {
    let test = Test::new().file("a.rhai", "for i in 0..100000 { print(i); }");
    let mut command = std::process::Command::new(test.lysocline(&[]).get_program());
    let command = command
        .args(["run", "a.rhai"])
        .current_dir(test.path())
        .stdout(Stdio::piped())
        .stderr(Stdio::piped());
    let mut child = command.spawn().expect("it starts");
    let mut line = String::new();
    BufReader::new(child.stdout.take().expect("a pipe")).read_line(&mut line).expect("a line");
    let output = child.wait_with_output().expect("it ends");
    assert_eq!((line.as_str(), output.status.code(), streams(&output).1.as_str()), ("0\n", Some(0), ""));
}

#[track_caller]
fn piped(input: &str, code: i32, results: &str, messages: &str) {
    let output = Test::new().lysocline(&[]).write_stdin(input).output().expect("it starts");
    let (found_results, found_messages) = streams(&output);
    assert_eq!((found_results.as_str(), output.status.code()), (results, Some(code)), "{found_messages}");
    assert!(
        found_messages.starts_with(messages) && found_messages.is_empty() == messages.is_empty(),
        "{found_messages}"
    );
}

#[test]
fn entries_from_a_pipe() {
    piped("", 0, "", "");
    piped("let x = 3;\nx/2\n[1, 2]\nx;\n\"a\"", 0, "1.5\n[1, 2]\n\"a\"\n", "");
    piped("fn f(a) {\n  a + 1\n}\nf(2)\n", 0, "3\n", "");
    piped("let a = [3,\n 1];\na\n  .len()\nif false {\n}\nelse {\n  print(\"no\");\n}\n", 0, "2\nno\n", "");
    piped("1\n2 +\n", 1, "1\n", "error: the text ends too early");
    piped("1\nmissing\n2\n", 1, "1\n", "error: there is no variable `missing`\n  session:2:1");
    piped("let a = 1\nlet b = 2\na + b\n", 0, "3\n", "");
}

#[test]
fn a_script_imports_from_its_own_folder() {
    let test = Test::new()
        .file("lab/a.rhai", "import \"h\" as h;\nprint(h::half(3));")
        .file("lab/h.rhai", "fn half(x) { x/2 }");
    let output = test.lysocline(&["run", "lab/a.rhai"]).output().expect("it starts");
    assert_eq!(streams(&output), ("1.5\n".to_owned(), String::new()));
}
