//! What a script cannot do: leave its folder, take all memory, or never end.

mod common;

use std::time::{Duration, Instant};

use common::{Test, streams};

#[track_caller]
fn refused(test: &Test, script: &str, options: &[&str], message: &str) {
    std::fs::write(test.path().join("in/a.rhai"), script).expect("it can be written");
    let start = Instant::now();
    let mut arguments = vec!["run"];
    arguments.extend(options);
    arguments.push("in/a.rhai");
    let output = test.lysocline(&arguments).output().expect("it starts");
    let (_, messages) = streams(&output);
    assert_eq!(output.status.code(), Some(1), "{script}\n{messages}");
    assert!(messages.contains(message), "{script}\n{messages}");
    assert!(start.elapsed() < Duration::from_secs(60), "{script}");
}

fn test() -> Test {
    Test::new()
        .file("secret.csv", "a\n1\n")
        .file("secret.rhai", "let key = 1;")
        .file("in/own.csv", "name,pH\na,7\n")
}

#[test]
fn reading_stays_beside_the_script() {
    let test = test();
    for name in ["../secret.csv", "in/../../secret.csv", "/etc/passwd"] {
        refused(&test, &format!("read_samples(\"{name}\")"), &[], "is outside");
    }
    for name in ["../secret", "/etc/hostname"] {
        refused(&test, &format!("import \"{name}\" as s;"), &[], "outside the script's folder");
    }
    refused(&test, "load_ledger(\"../secret.toml\")", &[], "is outside");
}

#[cfg(unix)]
#[test]
fn links_lead_nowhere() {
    let test = test();
    let link = |to: &str, name: &str| std::os::unix::fs::symlink(to, test.path().join(name)).expect("a link");
    link("../secret.csv", "in/link.csv");
    link("../secret.rhai", "in/link.rhai");
    refused(&test, "read_samples(\"link.csv\")", &[], "is outside");
    refused(&test, "import \"link\" as s;", &[], "outside the script's folder");
    // A folder for output that leads elsewhere.
    std::fs::create_dir_all(test.path().join("out")).expect("a folder");
    link("../in", "out/away");
    refused(&test, "table(#{ a: [1] }).save(\"away/b.csv\")", &[], "is outside");
    assert!(!test.path().join("in/b.csv").exists());
}

#[test]
fn writing_stays_in_its_folder_and_replaces_nothing() {
    let test = test();
    std::fs::create_dir_all(test.path().join("out")).expect("a folder");
    std::fs::write(test.path().join("out/mine.csv"), "mine").expect("it can be written");
    for name in ["../secret.csv", "/tmp/x.csv"] {
        refused(&test, &format!("table(#{{ a: [1] }}).save(\"{name}\")"), &[], "is outside");
    }
    refused(&test, "table(#{ a: [1] }).save(\"mine.csv\")", &[], "exists and was not written by this script");
    assert_eq!(std::fs::read_to_string(test.path().join("out/mine.csv")).expect("it is there"), "mine");
    assert_eq!(std::fs::read_to_string(test.path().join("secret.csv")).expect("it is there"), "a\n1\n");
}

#[test]
fn recursion_and_loops_end() {
    let test = test();
    refused(&test, "fn f(x) { f(x + 1) }\nf(1)", &[], "calls");
    refused(&test, "loop {}", &["--time-limit", "0.5"], "the time limit has passed");
    refused(&test, "[1].map(|x| { while true {} })", &["--time-limit", "0.5"], "the time limit has passed");
    let deep = format!("{}1{}", "(".repeat(3000), ")".repeat(3000));
    refused(&test, &deep, &[], "");
}

#[cfg(target_os = "linux")]
#[test]
fn memory_has_a_limit() {
    let test = test();
    let limit = ["--memory-limit", "300", "--time-limit", "50"];
    refused(&test, "let a = [];\nloop { a.push([1, 2, 3, 4]); }", &limit, "memory");
    refused(&test, "let s = \"x\";\nloop { s += s; }", &limit, "");
    refused(
        &test,
        "let a = linspace(0, 1, 1000000);\nlet b = [];\nloop { b.push(a); a[0] = b.len(); }",
        &limit,
        "memory",
    );
}
