//! `lysocline check a.rhai`: what can be found wrong without running it.

use lysocline_engine::script::Options;
use lysocline_engine::script::ScriptEngine;
use lysocline_engine::script::sandbox::Sandbox;

use crate::cli::{Check, Look};
use crate::job;
use crate::render::diagnostic::Report;

/// Returns whether nothing was found in any of the files.
pub fn run(asked: &Check, look: &Look) -> bool {
    let report = Report { color: look.messages_colored() };
    let mut found = 0;
    for file in &asked.files {
        let findings = match job::read(file) {
            Ok(script) => {
                let files = Sandbox::for_script(file, std::path::Path::new("out"), false).rehearsal();
                let engine = ScriptEngine::new(Options {
                    files,
                    output: Box::new(std::io::sink()),
                    messages: Box::new(std::io::sink()),
                    ..Options::default()
                });
                engine.findings(&script.name, &script.text)
            }
            Err(diagnostic) => vec![*diagnostic],
        };
        findings.iter().for_each(|finding| report.print(finding));
        found += findings.len();
    }
    found == 0
}
