//! Sessions that are killed: no accepted entry is lost, none is torn, and two sessions do not mix.
//!
//! `LYSOCLINE_KILLS` sets how often a session is killed; 500 takes a few minutes.

mod common;

use std::io::{BufRead, BufReader, Write};
use std::path::PathBuf;
use std::process::{Child, Command, Stdio};
use std::time::{Duration, Instant};

use common::Test;

fn kills() -> u64 {
    std::env::var("LYSOCLINE_KILLS").ok().and_then(|n| n.parse().ok()).unwrap_or(12)
}

/// A session driven through pipes, as an editor would.
fn session(test: &Test) -> Child {
    let mut command = Command::new(test.lysocline(&[]).get_program());
    command
        .arg("--interactive")
        .current_dir(test.path())
        .env("HOME", test.path())
        .env_remove("XDG_DATA_HOME")
        .env("TERM", "dumb")
        .stdin(Stdio::piped())
        .stdout(Stdio::piped())
        .stderr(Stdio::null());
    command.spawn().expect("it starts")
}

/// Entries of several kinds; each shows its number when it was accepted.
fn entry(i: usize) -> String {
    match i % 4 {
        0 => format!("let x{i} = {i}; `accepted ${{x{i}}}`"),
        1 => format!("let y{i} = [{i}, \"two words\", 1e-3]; `accepted ${{y{i}[0]}}`"),
        2 => format!("let f{i} = |a| a + {i}; `accepted ${{f{i}.call(0)}}`"),
        _ => format!("let t{i} = `a\nb ${{1 + 1}}\nc`; `accepted {i}`"),
    }
}

fn accepted(line: &str) -> Option<usize> {
    let (_, number) = line.split_once("accepted ")?;
    number.trim().trim_end_matches('"').parse().ok()
}

/// Journals left in the data folder, oldest first.
fn journals(test: &Test) -> Vec<PathBuf> {
    let mut found = Vec::new();
    let mut folders = vec![test.path().to_owned()];
    while let Some(folder) = folders.pop() {
        for path in std::fs::read_dir(folder).expect("a folder").map(|entry| entry.expect("an entry").path())
        {
            if path.is_dir() {
                folders.push(path);
            } else if path.parent().is_some_and(|parent| parent.ends_with("sessions")) {
                found.push(path);
            }
        }
    }
    found.sort();
    found
}

/// Entries of a journal, by the line that says each is whole.
fn entries(text: &str) -> Vec<&str> {
    let mut entries: Vec<&str> = text.split("// ==== accepted ====\n").collect();
    entries.pop();
    entries
}

/// Runs a session and kills it after a while; returns how many entries it said it had accepted.
fn killed_after(test: &Test, wait: Duration) -> usize {
    let mut child = session(test);
    let mut input = child.stdin.take().expect("a pipe");
    let output = BufReader::new(child.stdout.take().expect("a pipe"));
    let writer = std::thread::spawn(move || {
        for i in 0..400 {
            if writeln!(input, "{}", entry(i)).is_err() {
                break;
            }
        }
        // Open until the session is killed.
        std::thread::sleep(Duration::from_secs(1));
        drop(input);
    });
    let reader = std::thread::spawn(move || {
        output
            .lines()
            .map_while(Result::ok)
            .filter_map(|line| accepted(&line))
            .last()
            .map_or(0, |last| last + 1)
    });
    std::thread::sleep(wait);
    child.kill().expect("it can be killed");
    child.wait().expect("it ended");
    let count = reader.join().expect("it read");
    drop(writer);
    count
}

#[test]
fn a_killed_session_loses_no_accepted_entry() {
    // How long a session takes to its first entries differs by machine and build.
    let test = Test::new();
    let started = Instant::now();
    let mut child = session(&test);
    writeln!(child.stdin.as_mut().expect("a pipe"), "{}", entry(0)).expect("it is read");
    let mut line = String::new();
    let mut output = BufReader::new(child.stdout.take().expect("a pipe"));
    while accepted(&line).is_none() {
        line.clear();
        assert!(output.read_line(&mut line).expect("a line") > 0, "the session ended");
    }
    let start = started.elapsed();
    child.kill().expect("it can be killed");
    child.wait().expect("it ended");

    let (mut all, mut most) = (0, 0);
    for i in 0..kills() {
        let test = Test::new();
        // Spread over the life of the session by a low-discrepancy sequence.
        let share = (i as f64 * 0.618_033_988_75).fract();
        let count = killed_after(&test, start.mul_f64(0.8 + 1.5 * share));
        let left = journals(&test);
        assert!(left.len() <= 1, "{left:?}");
        let text = left.first().map_or_else(String::new, |path| std::fs::read_to_string(path).expect("text"));
        let kept = entries(&text);
        assert!(kept.len() >= count, "accepted {count}, kept {}", kept.len());
        for (i, kept) in kept.iter().enumerate() {
            let written = entry(i);
            let (before, shown) =
                written.split_at(written.rfind('`').map_or(0, |end| written[..end].rfind('`').unwrap_or(0)));
            assert_eq!(kept.trim_end(), format!("{before}print({shown});"), "entry {i}");
        }
        (all, most) = (all + count, most.max(count));
    }
    assert!(all > 0 && most > 1, "no session lived long enough to accept an entry");
}

#[test]
fn the_next_session_brings_it_back() {
    let test = Test::new();
    let mut child = session(&test);
    let mut input = child.stdin.take().expect("a pipe");
    let mut output = BufReader::new(child.stdout.take().expect("a pipe"));
    writeln!(input, "let a = [1,\n 2];\nfn double(x) {{ 2 * x }}\nlet b = double(a[1]); `accepted 9`")
        .expect("it is read");
    let mut line = String::new();
    while accepted(&line).is_none() {
        line.clear();
        assert!(output.read_line(&mut line).expect("a line") > 0, "the session ended");
    }
    // Another session at the same time has a journal of its own and offers nothing.
    let said =
        test.lysocline(&["--interactive"]).write_stdin("let other = 1;\n").output().expect("it starts");
    let said = String::from_utf8_lossy(&said.stdout).into_owned();
    assert!(!said.contains("broke off"), "{said}");
    child.kill().expect("it can be killed");
    child.wait().expect("it ended");
    assert_eq!(journals(&test).len(), 1);

    let said = test
        .lysocline(&["--interactive"])
        .write_stdin(":load\n`b is ${b}`\n:save back.rhai b\n")
        .output()
        .expect("it starts");
    let said = String::from_utf8_lossy(&said.stdout).into_owned();
    assert!(said.contains("an earlier session broke off: `:load` alone brings its 3 entries back"), "{said}");
    assert!(said.contains("brought back 3 entries") && said.contains("b is 4"), "{said}");
    assert!(journals(&test).is_empty());
    let saved = std::fs::read_to_string(test.path().join("back.rhai")).expect("it was saved");
    assert_eq!(saved, "let a = [1,\n 2];\nfn double(x) { 2 * x }\nlet b = double(a[1]);\n");
}
