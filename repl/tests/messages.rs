//! One faulty script for each message, with the expected message beside it.
//!
//! After a change of wording, `UPDATE_EXPECTED=1 cargo test -p lysocline --test messages` writes the new texts: read
//! them before committing.

use std::path::{Path, PathBuf};

use assert_cmd::Command;

fn message_of(script: &Path) -> String {
    let name = script.file_name().expect("a file");
    let mut command = Command::cargo_bin("lysocline").expect("it is built");
    let output = command
        .current_dir(script.parent().expect("a folder"))
        .arg("run")
        .arg(name)
        .output()
        .expect("it starts");
    assert_eq!(output.status.code(), Some(1), "{}", script.display());
    assert!(output.stdout.is_empty(), "{} printed something", script.display());
    String::from_utf8(output.stderr).expect("text")
}

fn scripts() -> Vec<PathBuf> {
    let folder = Path::new(env!("CARGO_MANIFEST_DIR")).join("tests/faulty");
    let entries = std::fs::read_dir(folder)
        .expect("the folder of faulty scripts")
        .map(|entry| entry.expect("an entry").path());
    let mut scripts: Vec<PathBuf> =
        entries.filter(|path| path.extension().is_some_and(|extension| extension == "rhai")).collect();
    scripts.sort();
    scripts
}

#[test]
fn every_faulty_script_gets_its_message() {
    let mut wrong = Vec::new();
    for script in scripts() {
        let (message, expected_file) = (message_of(&script), script.with_extension("txt"));
        if std::env::var_os("UPDATE_EXPECTED").is_some() {
            std::fs::write(&expected_file, &message).expect("it can be written");
        }
        let expected = std::fs::read_to_string(&expected_file).unwrap_or_default();
        if message != expected {
            wrong.push(format!("{}\nexpected:\n{expected}\nfound:\n{message}", script.display()));
        }
    }
    assert!(wrong.is_empty(), "{}", wrong.join("\n"));
}

#[test]
fn messages_follow_the_house_rules() {
    for script in scripts() {
        let message = message_of(&script);
        let first = message.lines().next().expect("a message").trim_start_matches("error: ");
        assert!(
            !first.ends_with('.') && !first.starts_with(char::is_uppercase),
            "{}: {first}",
            script.display()
        );
        assert!(
            !message.contains("::") && !message.contains("i64") && !message.contains("ImmutableString"),
            "{message}"
        );
        assert!(message.contains('^'), "{} has no place", script.display());
    }
}
