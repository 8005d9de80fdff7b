//! `lysocline run file.rhai`: runs a script from the start.

use std::path::Path;
use std::time::Duration;

use lysocline_engine::script::diagnostic::Kind;
use lysocline_engine::script::sandbox::Sandbox;
use lysocline_engine::script::{Diagnostic, Halt, Options, ScriptEngine};

use crate::cli::{Limits, Look, Run};
use crate::progress;
use crate::render::diagnostic::Report;

/// How long after the time limit a native loop that does not listen is waited for.
const GRACE: Duration = Duration::from_secs(2);

/// Returns whether the script ran to its end.
pub fn run(run: &Run, look: &Look, limits: &Limits) -> bool {
    let report = Report { color: look.messages_colored() };
    let name = run.file.display().to_string();
    let text = match read(&run.file) {
        Ok(text) => text,
        Err(diagnostic) => {
            report.print(&diagnostic);
            return false;
        }
    };
    let engine = ScriptEngine::new(Options {
        style: look.style(),
        arguments: run.arguments.iter().map(|word| word.to_string_lossy().into_owned()).collect(),
        files: Sandbox::for_script(&run.file, &run.write, limits.overwrite),
        progress: Some(progress::on_standard_error()),
        time_limit: limits.time_limit,
        ..Options::default()
    });
    crate::render::draw_with(&engine);
    // First the check for a flag already set, then the setting.
    super::end_on_second_interrupt(engine.stop());
    super::stop_on_interrupt(engine.stop());
    if let Some(limit) = limits.time_limit {
        end_process_after(limit + GRACE);
    }
    match engine.run(&name, &text) {
        Ok(Some(value)) => engine.host().print(&engine.show(&value)),
        Ok(None) => {}
        // The reader of our output left: nobody is there to be told.
        Err(diagnostic) if diagnostic.kind == Kind::Halted(Halt::OutputClosed) => {}
        Err(diagnostic) => {
            report.print(&diagnostic);
            return false;
        }
    }
    true
}

/// The text of a script file.
pub fn read(file: &Path) -> Result<String, Box<Diagnostic>> {
    read_text("the script", file)
}

/// The text of a file; `what` it is stands in the message.
pub fn read_text(what: &str, file: &Path) -> Result<String, Box<Diagnostic>> {
    let failed = |reason: &str| {
        let message = format!("cannot read {what} `{}`: {reason}", file.display());
        Box::new(Diagnostic::new(Kind::Failure, message))
    };
    if file.is_dir() {
        return Err(failed("it is a folder"));
    }
    let bytes = std::fs::read(file).map_err(|error| match error.kind() {
        std::io::ErrorKind::NotFound => failed("there is no such file"),
        _ => failed(&error.to_string().to_lowercase()),
    })?;
    String::from_utf8(bytes).map_err(|_| failed("it is not UTF-8 text"))
}

/// The last resort when a native loop does not listen to the time limit.
fn end_process_after(limit: Duration) {
    std::thread::spawn(move || {
        std::thread::sleep(limit);
        eprintln!("error: ended: the time limit has passed and the calculation did not stop");
        std::process::exit(1);
    });
}
