//! Every example in the documentation runs, and gives what the comment behind its last line says.

use super::*;

#[test]
fn examples_hold() {
    let engine = engine();
    let examples = docs::examples(&engine.entries());
    assert!(examples.len() > 50, "only {} examples were found", examples.len());
    for (name, example) in examples {
        let shown = echo(&engine, &example);
        if let Some((_, expected)) =
            example.trim_end().lines().last().and_then(|line| line.split_once("   // "))
        {
            assert_eq!(shown, expected, "the example of `{name}`:\n{example}");
        }
    }
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
