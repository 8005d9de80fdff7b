//! Rules about the project itself that no compiler holds: who may use what, and what every number has to carry.

use std::path::{Path, PathBuf};

use lysocline_engine::chem::Provenance;
use lysocline_engine::ledger::shipped;

fn root() -> PathBuf {
    Path::new(env!("CARGO_MANIFEST_DIR")).parent().expect("the project around this crate").to_path_buf()
}

/// Every file below a folder as (path from the root of the project, text); no hidden files, nothing that is built.
fn files(folder: &str) -> Vec<(String, String)> {
    let mut found = Vec::new();
    let mut folders = vec![root().join(folder)];
    while let Some(folder) = folders.pop() {
        for entry in std::fs::read_dir(&folder).expect("a folder of the project") {
            let path = entry.expect("a readable entry").path();
            let name = path.file_name().unwrap_or_default().to_string_lossy().into_owned();
            if name.starts_with('.') || name == "target" {
                continue;
            }
            if path.is_dir() {
                folders.push(path);
            } else if let Ok(text) = std::fs::read_to_string(&path) {
                let relative =
                    path.strip_prefix(root()).expect("below the root").to_string_lossy().replace('\\', "/");
                found.push((relative, text));
            }
        }
    }
    assert!(!found.is_empty(), "no files in {folder}");
    found.sort();
    found
}

fn sources(folder: &str) -> Vec<(String, String)> {
    files(folder).into_iter().filter(|(path, _)| path.ends_with(".rs")).collect()
}

/// Lines with something in them that is not allowed, comments left out.
fn lines_with(sources: &[(String, String)], wanted: impl Fn(&str) -> bool) -> Vec<String> {
    let code = |line: &str| !line.trim_start().starts_with("//");
    let lines = |(path, text): &(String, String)| -> Vec<String> {
        let numbered = text.lines().enumerate().filter(|(_, line)| code(line) && wanted(line));
        numbered.map(|(number, line)| format!("{path}:{}: {}", number + 1, line.trim())).collect()
    };
    sources.iter().flat_map(lines).collect()
}

#[track_caller]
fn none(found: Vec<String>) {
    assert!(found.is_empty(), "\n{}", found.join("\n"));
}

#[test]
fn only_the_script_room_imports_the_scripting_language() {
    let mut outside = sources("engine/src");
    outside.retain(|(path, _)| !path.starts_with("engine/src/script/"));
    outside.extend(sources("repl/src"));
    none(lines_with(&outside, |line| line.contains("rhai::")));
}

#[test]
fn only_the_prompt_depends_on_the_terminal() {
    let terminal =
        ["clap", "comfy-table", "directories", "indicatif", "rustyline", "signal-hook", "terminal_size"];
    for member in ["engine", "stdlib", "tests"] {
        let manifest = std::fs::read_to_string(root().join(member).join("Cargo.toml")).expect("a manifest");
        let manifest: toml::Table = manifest.parse().expect("a manifest in TOML");
        for section in ["dependencies", "dev-dependencies", "build-dependencies"] {
            let Some(dependencies) = manifest.get(section).and_then(toml::Value::as_table) else { continue };
            for name in dependencies.keys() {
                assert!(!terminal.contains(&name.as_str()), "{member} depends on {name}");
            }
        }
    }
}

#[test]
fn the_solver_knows_no_names() {
    let mut solver = sources("engine/src/solve");
    solver.retain(|(path, _)| !path.ends_with("/tests.rs"));
    none(lines_with(&solver, |line| line.contains("String") || line.contains("format!")));
}

#[test]
fn every_shipped_constant_says_where_it_comes_from() {
    let files = shipped::constant_files().expect("the shipped constants");
    let mut counted = 0;
    for (key, file) in files {
        for (name, reaction) in file.constants.iter().chain(&file.formations) {
            let uses = reaction.constant().expect("a constant").history.uses();
            assert_eq!(uses.len(), 1, "{key}/{name}");
            let origin = &uses[0].0;
            assert!(
                origin.source.as_ref().is_some_and(|source| source.len() > 10),
                "{key}/{name} has no source"
            );
            assert_ne!(origin.provenance, Provenance::Stated, "{key}/{name} has no provenance");
            counted += 1;
        }
    }
    assert!(counted > 60, "only {counted} constants were looked at");
}

#[test]
fn no_file_mentions_a_path_of_somebodys_machine() {
    let folders = ["home", "root", "work", "Users"].map(|folder| format!("/{folder}/"));
    let mentions = |line: &str| folders.iter().any(|folder| line.contains(folder.as_str()));
    let in_file = |(path, text): (String, String)| -> Vec<String> {
        let numbered = text.lines().enumerate().filter(|(_, line)| mentions(line));
        numbered.map(|(number, line)| format!("{path}:{}: {}", number + 1, line.trim())).collect()
    };
    none(files(".").into_iter().flat_map(in_file).collect());
}

#[test]
fn no_source_is_left_unfinished() {
    let marks = ["to".to_string() + "do!(", "unimple".to_string() + "mented!(", "d".to_string() + "bg!("];
    let all: Vec<(String, String)> =
        ["engine", "repl", "stdlib", "tests"].iter().flat_map(|folder| sources(folder)).collect();
    none(lines_with(&all, |line| marks.iter().any(|mark| line.contains(mark.as_str()))));
}
