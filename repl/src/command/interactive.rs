//! `lysocline` on a terminal: the prompt.

use std::sync::Arc;

use lysocline_engine::script::diagnostic::Kind;
use lysocline_engine::script::sandbox::Sandbox;
use lysocline_engine::script::{Diagnostic, Options, ScriptEngine};

use crate::cli::{Limits, Look};
use crate::editor::Editor;
use crate::journal::{Journal, data_folder};
use crate::progress;
use crate::prompt::Prompt;
use crate::render::diagnostic::Report;

/// Returns whether the prompt could be shown; what happens at it is no failure of the program.
pub fn run(look: &Look, limits: &Limits) -> bool {
    let report = Report { color: look.messages_colored() };
    let style = look.style();
    let engine = Arc::new(ScriptEngine::new(Options {
        style,
        files: Sandbox::for_prompt(limits.overwrite),
        progress: Some(progress::on_standard_error()),
        time_limit: limits.time_limit,
        ..Options::default()
    }));
    crate::render::draw_with(&engine);
    super::stop_on_interrupt(engine.stop());
    let data = data_folder();
    let history = data.as_ref().map(|folder| folder.join("history"));
    match Editor::new(Arc::clone(&engine), history, style.color) {
        Ok(editor) => {
            Prompt::new(engine, editor, Journal::new(data.as_deref()), report).run();
            true
        }
        Err(error) => {
            report.print(&Diagnostic::new(Kind::Failure, format!("cannot use this terminal: {error}")));
            false
        }
    }
}
