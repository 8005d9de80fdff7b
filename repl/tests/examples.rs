//! The example scripts and the README do what they say.

use std::path::{Path, PathBuf};

use assert_cmd::Command;

fn root() -> PathBuf {
    Path::new(env!("CARGO_MANIFEST_DIR")).parent().expect("the workspace").to_path_buf()
}

/// Runs a script from `folder` and returns its standard output.
fn output_of(folder: &Path, script: &Path) -> String {
    let write = tempfile::tempdir().expect("a temporary folder");
    let output = Command::cargo_bin("lysocline")
        .expect("it is built")
        .current_dir(folder)
        .args(["run".as_ref(), script.as_os_str(), "--write".as_ref(), write.path().as_os_str()])
        .output()
        .expect("it starts");
    let messages = String::from_utf8_lossy(&output.stderr);
    assert!(output.status.success(), "{}: {messages}", script.display());
    String::from_utf8(output.stdout).expect("text")
}

#[test]
fn every_example_script_meets_its_own_expectations() {
    let folder = root().join("example-scripts");
    let entries =
        std::fs::read_dir(&folder).expect("the examples").map(|entry| entry.expect("an entry").path());
    let scripts: Vec<PathBuf> =
        entries.filter(|path| path.extension().is_some_and(|e| e == "rhai")).collect();
    assert!(scripts.len() >= 3, "{scripts:?}");
    for script in scripts {
        assert!(!output_of(&root(), &script).is_empty(), "{} printed nothing", script.display());
    }
}

/// The text of each fenced block of a kind.
fn blocks<'a>(text: &'a str, kind: &str) -> Vec<&'a str> {
    let opening = format!("```{kind}\n");
    text.split(opening.as_str()).skip(1).map(|rest| rest.split("```").next().unwrap_or("")).collect()
}

#[test]
fn the_readme_shows_the_true_output_of_its_example() {
    let readme = std::fs::read_to_string(root().join("README.md")).expect("the README");
    let (scripts, outputs) = (blocks(&readme, "rhai"), blocks(&readme, "text"));
    assert!(!scripts.is_empty() && scripts.len() == outputs.len());
    let folder = tempfile::tempdir().expect("a temporary folder");
    for (script, expected) in scripts.iter().zip(outputs) {
        let file = folder.path().join("readme.rhai");
        std::fs::write(&file, script).expect("it can be written");
        assert_eq!(output_of(folder.path(), &file), expected);
    }
}
