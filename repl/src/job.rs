//! One run of a script file from the command line, the same for every command that runs one.

use std::ffi::OsString;
use std::path::Path;
use std::sync::atomic::{AtomicBool, Ordering};
use std::sync::{Arc, Mutex, PoisonError};
use std::time::Duration;

use lysocline_engine::script::diagnostic::Kind;
use lysocline_engine::script::sandbox::Sandbox;
use lysocline_engine::script::{Diagnostic, Halt, OnShown, Options, Record, ScriptEngine, Shown, Sources};

use crate::cli::{Limits, Look};
use crate::render::diagnostic::Report;
use crate::seal::{self, Seal, SealError};

/// How long after the time limit a native loop that does not listen is waited for.
const GRACE: Duration = Duration::from_secs(2);

/// A script file as it was read.
pub struct Script {
    /// As named on the command line.
    pub name: String,
    /// What runs: the text above a sealed block.
    pub text: String,
    /// The whole file.
    pub file: String,
    /// The sealed block below it.
    pub seal: Result<Option<Seal>, SealError>,
}

impl Script {
    /// The words it was sealed with.
    pub fn sealed_arguments(&self) -> Vec<OsString> {
        let seal = self.seal.as_ref().ok().and_then(Option::as_ref);
        seal.map(|seal| seal.arguments.iter().map(OsString::from).collect()).unwrap_or_default()
    }
}

/// What surrounds a run.
pub struct Job<'a> {
    pub file: &'a Path,
    pub arguments: &'a [OsString],
    pub write: &'a Path,
    pub look: &'a Look,
    pub limits: &'a Limits,
}

/// What became of a quiet run.
pub struct Outcome {
    /// Results in order, for a report.
    pub shown: Vec<Shown>,
    /// Recorded and checked values.
    pub records: Vec<Record>,
    /// What the values rest on.
    pub sources: Sources,
    /// Every file read.
    pub files: Vec<std::path::PathBuf>,
    /// What stopped it.
    pub failure: Option<Box<Diagnostic>>,
}

/// Where the words of a quiet run go.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Files {
    /// Files are written as in a usual run.
    Written,
    /// Nothing is written.
    Untouched,
}

/// Reads a script file and parts it from a sealed block.
///
/// # Errors
///
/// Returns why the file cannot be read.
pub fn read(file: &Path) -> Result<Script, Box<Diagnostic>> {
    let whole = crate::command::read_script(file)?;
    let (text, seal) = seal::split(&whole);
    Ok(Script { name: file.display().to_string(), text: text.to_owned(), seal, file: whole })
}

impl Job<'_> {
    /// Runs the script in sight: results to standard output.
    ///
    /// # Returns
    ///
    /// Whether it came to its end.
    pub fn run(&self, script: &Script) -> bool {
        let (engine, _watch) = self.engine(self.options());
        let report = self.messages();
        match engine.run(&script.name, &script.text) {
            Ok(Some(value)) => engine.host().display(&value),
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

    /// Runs the script out of sight and gathers what it shows.
    pub fn gather(&self, script: &Script, files: Files) -> Outcome {
        let shown: Arc<Mutex<Vec<Shown>>> = Arc::default();
        let into = Arc::clone(&shown);
        let gather: OnShown =
            Arc::new(move |item| into.lock().unwrap_or_else(PoisonError::into_inner).push(item));
        let mut options = self.options();
        options.shown = Some(gather);
        options.output = Box::new(std::io::sink());
        options.messages = Box::new(std::io::sink());
        if files == Files::Untouched {
            options.files = options.files.rehearsal();
        }
        let (engine, _watch) = self.engine(options);
        let failure = match engine.run(&script.name, &script.text) {
            Ok(Some(value)) => {
                engine.host().display(&value);
                None
            }
            Ok(None) => None,
            Err(diagnostic) => Some(diagnostic),
        };
        let mut sources = engine.host().sources().clone();
        sources.complete();
        let shown = shown.lock().unwrap_or_else(PoisonError::into_inner).clone();
        let records = engine.host().records().all().to_vec();
        Outcome { shown, records, sources, files: engine.files_read(), failure }
    }

    /// The numbers random draws of the script start from.
    pub fn seeds(&self, script: &Script) -> Vec<i64> {
        ScriptEngine::new(self.options()).seeds(&script.text)
    }

    /// How messages are printed.
    pub fn messages(&self) -> Report {
        Report { color: self.look.messages_colored() }
    }

    fn options(&self) -> Options {
        Options {
            style: self.look.style(),
            arguments: self.arguments.iter().map(|word| word.to_string_lossy().into_owned()).collect(),
            files: Sandbox::for_script(self.file, self.write, self.limits.overwrite),
            progress: Some(crate::progress::on_standard_error()),
            time_limit: self.limits.time_limit,
            ..Options::default()
        }
    }

    /// The engine, and the watch over its limits, which ends with the run.
    fn engine(&self, options: Options) -> (ScriptEngine, Watch) {
        let engine = ScriptEngine::new(options);
        crate::render::draw_with(&engine);
        // First the check for a flag already set, then the setting.
        crate::command::end_on_second_interrupt(engine.stop());
        crate::command::stop_on_interrupt(engine.stop());
        let watch = Watch::default();
        crate::memory::watch(self.limits.memory_limit, engine.stop(), &watch.over);
        if let Some(limit) = self.limits.time_limit {
            end_process_after(limit + GRACE, &watch.over);
        }
        (engine, watch)
    }
}

/// Says to whoever watches a run that it is over.
#[derive(Default)]
struct Watch {
    over: Arc<AtomicBool>,
}

impl Drop for Watch {
    fn drop(&mut self) {
        self.over.store(true, Ordering::Relaxed);
    }
}

/// A failure without a place, such as a file that cannot be written.
pub fn complaint(message: impl Into<String>) -> Diagnostic {
    Diagnostic::new(Kind::Failure, message)
}

/// The last resort when a native loop does not listen to the time limit.
fn end_process_after(limit: Duration, over: &Arc<AtomicBool>) {
    let over = Arc::clone(over);
    std::thread::spawn(move || {
        std::thread::sleep(limit);
        if !over.load(Ordering::Relaxed) {
            eprintln!("error: ended: the time limit has passed and the calculation did not stop");
            std::process::exit(1);
        }
    });
}
