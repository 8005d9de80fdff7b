//! Entries from a pipe: split as at the prompt, ended by the first error.

use std::io::Read;
use std::sync::Arc;

use lysocline_engine::script::diagnostic::Kind;
use lysocline_engine::script::input::{Status, status};
use lysocline_engine::script::sandbox::Sandbox;
use lysocline_engine::script::{Diagnostic, Halt, Options, ScriptEngine, Session};

use crate::cli::{Limits, Look};
use crate::progress;
use crate::render::diagnostic::Report;

/// Returns whether every entry was accepted.
pub fn run(look: &Look, limits: &Limits) -> bool {
    let report = Report { color: look.messages_colored() };
    let engine = Arc::new(ScriptEngine::new(Options {
        style: look.style(),
        files: Sandbox::for_prompt(limits.overwrite),
        progress: Some(progress::on_standard_error()),
        time_limit: limits.time_limit,
        ..Options::default()
    }));
    crate::render::draw_with(&engine);
    // First the check for a flag already set, then the setting.
    super::end_on_second_interrupt(engine.stop());
    super::stop_on_interrupt(engine.stop());
    let mut text = String::new();
    if let Err(error) = std::io::stdin().read_to_string(&mut text) {
        report.print(&Diagnostic::new(Kind::Failure, format!("cannot read the input: {error}")));
        return false;
    }
    let mut session = Session::new(Arc::clone(&engine));
    for entry in entries(&engine, &text) {
        match session.enter(&entry) {
            Ok(Some(value)) => engine.host().print(&engine.show(&value)),
            Ok(None) => {}
            Err(diagnostic) if diagnostic.kind == Kind::Halted(Halt::OutputClosed) => return true,
            Err(diagnostic) => {
                report.print(&diagnostic);
                return false;
            }
        }
    }
    true
}

/// The text cut into complete entries; what is left open at the end is the last one, and its error is reported.
fn entries(engine: &ScriptEngine, text: &str) -> Vec<String> {
    let mut entries = Vec::new();
    let mut entry = String::new();
    let mut lines = text.lines().peekable();
    while let Some(line) = lines.next() {
        if !entry.is_empty() {
            entry.push('\n');
        }
        entry.push_str(line);
        let goes_on = lines.peek().is_some_and(|next| continues(next));
        if !goes_on && status(engine, &entry) == Status::Complete {
            entries.push(std::mem::take(&mut entry));
        }
    }
    if !entry.trim().is_empty() {
        entries.push(entry);
    }
    entries
}

/// A line that can only go on with the one before: `.open_to(…)`, `else { … }`.
fn continues(line: &str) -> bool {
    let line = line.trim_start();
    line.starts_with('.') || line.starts_with("else") || line.starts_with("catch")
}
