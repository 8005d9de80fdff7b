//! Every example in the documentation runs, and gives what the comment behind its last line says.

use super::*;

#[test]
fn examples_hold() {
    let engine = engine();
    let examples = docs::examples(&engine.entries());
    assert!(examples.len() > 50, "only {} examples were found", examples.len());
    let mut wrong = Vec::new();
    for (name, example) in examples {
        let shown = echo(&engine, &example);
        let expected = example.trim_end().lines().last().and_then(|line| Some(line.split_once("   // ")?.1));
        if expected.is_some_and(|expected| expected != shown) {
            wrong.push(format!("`{name}`: {example}gives {shown}"));
        }
    }
    assert!(wrong.is_empty(), "{}", wrong.join("\n"));
}

#[test]
fn everything_of_our_own_is_documented() {
    let entries = engine().entries();
    let own = |name: &str| name.starts_with(|c: char| c.is_alphabetic());
    for entry in entries.iter().filter(|entry| !entry.is_standard && own(&entry.name)) {
        let is_explained = entries.iter().any(|other| other.name == entry.name && !other.text.is_empty());
        assert!(is_explained, "`{}` has no doc comment", entry.signature);
    }
}
