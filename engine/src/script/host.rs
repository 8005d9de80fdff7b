//! What a running script can reach outside itself: the output, the files, the signal to stop, the progress display.
//!
//! A native function gets it by `Host::of(&ctx)`.

use std::io::{ErrorKind, Write};
use std::sync::{Arc, Mutex, MutexGuard, PoisonError, RwLock};

use rhai::{Dynamic, NativeCallContext};

use super::record::Records;
use super::sandbox::Sandbox;
use super::show::{Shows, Style};
use super::stop::Stop;

/// A stream to write to.
pub type Out = Box<dyn Write + Send>;

/// How far a long calculation has come.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct Progress<'a> {
    /// What is being done: "sweep".
    pub what: &'a str,
    /// Steps done.
    pub done: u64,
    /// Steps in all.
    pub total: u64,
}

/// Called with each [`Progress`], from any thread.
pub type OnProgress = Arc<dyn Fn(Progress<'_>) + Send + Sync>;

/// Something a script showed, as the value it is: what a report is made of.
#[derive(Debug, Clone, PartialEq)]
pub enum Shown {
    /// The statement that begins on this line runs next.
    Statement(usize),
    /// Text, as printed.
    Text(String),
    /// A table.
    Table(crate::present::Table),
    /// A drawing.
    Plot(crate::present::plot::Plot),
    /// A warning or note beside the results.
    Message(String),
    /// A recorded or checked value.
    Record(super::Record),
}

/// Called with each [`Shown`], in order.
pub type OnShown = Arc<dyn Fn(Shown) + Send + Sync>;

/// The outside of a script; a clone is the same outside.
#[derive(Clone)]
pub struct Host(Arc<Parts>);

struct Parts {
    stop: Stop,
    style: Style,
    arguments: Vec<String>,
    shows: RwLock<Shows>,
    files: Mutex<Sandbox>,
    output: Mutex<Out>,
    messages: Mutex<Out>,
    progress: Option<OnProgress>,
    shown: Option<OnShown>,
    records: Mutex<Records>,
    sources: Mutex<super::Sources>,
}

impl Host {
    pub(super) fn new(options: super::Options) -> Self {
        Self(Arc::new(Parts {
            stop: options.stop,
            style: options.style,
            arguments: options.arguments,
            shows: RwLock::default(),
            files: Mutex::new(options.files),
            output: Mutex::new(options.output),
            messages: Mutex::new(options.messages),
            progress: options.progress,
            shown: options.shown,
            records: Mutex::default(),
            sources: Mutex::default(),
        }))
    }

    /// The outside of the script that is calling.
    ///
    /// # Panics
    ///
    /// Panics in an engine that was not made by [`super::ScriptEngine`], which sets it.
    #[must_use]
    pub fn of(context: &NativeCallContext) -> Self {
        let host = context.tag().and_then(|tag| tag.clone().try_cast::<Self>());
        host.expect("every script engine carries its host")
    }

    /// The signal that long native loops must poll.
    #[must_use]
    pub fn stop(&self) -> &Stop {
        &self.0.stop
    }

    /// What the output can show.
    #[must_use]
    pub fn style(&self) -> &Style {
        &self.0.style
    }

    /// The words after the script's name on the command line.
    #[must_use]
    pub fn arguments(&self) -> &[String] {
        &self.0.arguments
    }

    /// The files a script may read and write.
    pub fn files(&self) -> MutexGuard<'_, Sandbox> {
        self.0.files.lock().unwrap_or_else(PoisonError::into_inner)
    }

    /// The value as it is echoed.
    #[must_use]
    pub fn show(&self, value: &Dynamic) -> String {
        self.0.shows.read().unwrap_or_else(PoisonError::into_inner).show(value, self.style())
    }

    /// The value as `print` writes it.
    #[must_use]
    pub fn printed(&self, value: &Dynamic) -> String {
        self.0.shows.read().unwrap_or_else(PoisonError::into_inner).print(value, self.style())
    }

    pub(super) fn shows(&self, change: impl FnOnce(&mut Shows)) {
        change(&mut self.0.shows.write().unwrap_or_else(PoisonError::into_inner));
    }

    /// Shows a value as a result: its text goes to the output, itself to whoever gathers a report.
    pub fn display(&self, value: &Dynamic) {
        self.gather(value);
        self.print(&self.printed(value));
    }

    /// Whether a report is being gathered.
    pub(super) fn is_gathering(&self) -> bool {
        self.0.shown.is_some()
    }

    /// Hands a value that is being printed to whoever gathers a report.
    pub(super) fn gather(&self, value: &Dynamic) {
        if self.0.shown.is_none() {
            return;
        }
        self.sources().gather(value);
        let table = || value.read_lock::<crate::chem::Trail>().map(|trail| trail.table());
        self.report(if let Some(plot) = value.read_lock::<crate::present::plot::Plot>() {
            Shown::Plot(plot.clone())
        } else if let Some(table) = value.read_lock::<crate::present::Table>() {
            Shown::Table(table.clone())
        } else if let Some(table) = table() {
            Shown::Table(table)
        } else {
            Shown::Text(self.printed(value))
        });
    }

    /// Tells whoever gathers a report.
    pub(super) fn report(&self, shown: Shown) {
        if let Some(gather) = &self.0.shown {
            gather(shown);
        }
    }

    /// Notes what a value rests on, while a report is being gathered.
    pub(super) fn rests_on(&self, value: &Dynamic) {
        if self.is_gathering() {
            self.sources().gather(value);
        }
    }

    /// What the values shown rest on, while a report is being gathered.
    pub fn sources(&self) -> MutexGuard<'_, super::Sources> {
        self.0.sources.lock().unwrap_or_else(PoisonError::into_inner)
    }

    /// What the script recorded and checked so far.
    pub fn records(&self) -> MutexGuard<'_, Records> {
        self.0.records.lock().unwrap_or_else(PoisonError::into_inner)
    }

    /// Writes one line of results. If nobody reads them any more, the calculation is told to stop.
    pub fn print(&self, text: &str) {
        let mut output = self.0.output.lock().unwrap_or_else(PoisonError::into_inner);
        let written = writeln!(output, "{text}").and_then(|()| output.flush());
        if written.is_err_and(|error| error.kind() == ErrorKind::BrokenPipe) {
            self.0.stop.close_output();
        }
    }

    /// Writes one line beside the results. A message that cannot be written is lost, not fatal.
    pub fn message(&self, text: &str) {
        self.report(Shown::Message(text.to_owned()));
        let mut messages = self.0.messages.lock().unwrap_or_else(PoisonError::into_inner);
        let _ = writeln!(messages, "{text}").and_then(|()| messages.flush());
    }

    /// Reports how far a native loop has come.
    pub fn progress(&self, what: &str, done: u64, total: u64) {
        if let Some(report) = &self.0.progress {
            report(Progress { what, done, total });
        }
    }
}
