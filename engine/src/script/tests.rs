//! Scripts as a person writes them, and what they answer.

use std::io::Write;
use std::sync::{Arc, Mutex};

use super::*;

mod examples;
mod language;
mod neighbours;
mod quantities;
mod reactions;
mod slices;
mod tables;

/// An engine whose output is dropped and whose files lie in a fresh folder.
fn engine() -> ScriptEngine {
    use std::sync::atomic::{AtomicU32, Ordering};
    static COUNT: AtomicU32 = AtomicU32::new(0);
    let number = COUNT.fetch_add(1, Ordering::Relaxed);
    let folder = std::env::temp_dir().join(format!("lysocline-script-{}-{number}", std::process::id()));
    std::fs::create_dir_all(&folder).expect("the temporary folder can be written");
    let files = sandbox::Sandbox::for_script(&folder.join("test.rhai"), &folder, false);
    ScriptEngine::new(Options {
        files,
        output: Box::new(std::io::sink()),
        messages: Box::new(std::io::sink()),
        ..Options::default()
    })
}

/// What the prompt echoes for a script; empty for no value.
#[track_caller]
fn echo(engine: &ScriptEngine, script: &str) -> String {
    match engine.run("test", script) {
        Ok(value) => value.map_or_else(String::new, |value| engine.show(&value)),
        Err(diagnostic) => panic!("{script}\n{diagnostic}\n{}", diagnostic.help.join("\n")),
    }
}

/// What an engine wrote.
#[derive(Clone, Default)]
struct Captured(Arc<Mutex<Vec<u8>>>);

impl Captured {
    fn text(&self) -> String {
        String::from_utf8(self.0.lock().expect("one thread").clone()).expect("text")
    }
}

impl Write for Captured {
    fn write(&mut self, bytes: &[u8]) -> std::io::Result<usize> {
        self.0.lock().expect("one thread").extend(bytes);
        Ok(bytes.len())
    }
    fn flush(&mut self) -> std::io::Result<()> {
        Ok(())
    }
}

#[track_caller]
fn shows(script: &str, expected: &str) {
    assert_eq!(echo(&engine(), script), expected, "{script}");
}

/// A script that fails, with its message, its help lines, and the underlined text.
#[track_caller]
fn fails(script: &str, message: &str, help: &[&str], underlined: &str) {
    let diagnostic = engine().run("test", script).expect_err(script);
    let place = diagnostic.place.as_ref().map_or_else(String::new, |place| {
        place.text.chars().skip(place.column - 1).take(place.width).collect()
    });
    let found = (
        diagnostic.message.as_str(),
        diagnostic.help.iter().map(String::as_str).collect::<Vec<_>>(),
        place.as_str(),
    );
    assert_eq!(found, (message, help.to_vec(), underlined), "{script}");
}
