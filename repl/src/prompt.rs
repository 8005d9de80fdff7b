//! The prompt: entries are run and their values echoed; lines that begin with a colon are about the session itself.

use std::path::{Path, PathBuf};
use std::sync::Arc;

use lysocline_engine::script::diagnostic::Kind;
use lysocline_engine::script::{Diagnostic, Fail, ScriptEngine, Session, docs, words};

use crate::command::read_script;
use crate::editor::{Editor, Line};
use crate::journal::{self, Journal};
use crate::render::diagnostic::Report;

/// The colon commands: name, what follows it, what it does.
pub const COMMANDS: [(&str, &str, &str); 6] = [
    (":help", "[name]", "explain a function, a method or a property"),
    (":names", "", "list the variables and functions of this session"),
    (":undo", "", "take the last entry back"),
    (":save", "file.rhai [name]", "write every accepted entry to a script, or only what `name` needs"),
    (":load", "file.rhai", "run a script in this session"),
    (":quit", "", "leave (also Ctrl-D)"),
];

/// A session with a person at it.
pub struct Prompt {
    session: Session,
    editor: Editor,
    journal: Journal,
    report: Report,
    /// Journals of sessions that broke off, newest first.
    abandoned: Vec<PathBuf>,
    /// Whether it was said that the journal cannot be written.
    warned: bool,
}

/// Whether to go on.
enum Next {
    Go,
    Leave,
}

impl Prompt {
    /// A prompt on an empty session.
    pub fn new(engine: Arc<ScriptEngine>, editor: Editor, journal: Journal, report: Report) -> Self {
        let abandoned = journal.abandoned();
        Self { session: Session::new(engine), editor, journal, report, abandoned, warned: false }
    }

    /// Runs until the person leaves.
    pub fn run(mut self) {
        self.greet();
        loop {
            self.editor.learn(&self.session);
            let next = match self.editor.read() {
                Line::Entry(line) => self.line(&line),
                Line::Discarded => Next::Go,
                Line::End => Next::Leave,
            };
            if matches!(next, Next::Leave) {
                break;
            }
        }
        self.journal.close();
    }

    fn greet(&self) {
        self.say(concat!(
            "lysocline ",
            env!("CARGO_PKG_VERSION"),
            ": `:help` explains, Tab completes, `:quit` leaves"
        ));
        if let Some(path) = self.abandoned.first() {
            let count = journal::entries(path).map_or(0, |(entries, _)| entries.len());
            let entries = counted(count, "entry", "entries");
            self.say(&format!("an earlier session broke off: `:load` alone brings its {entries} back"));
        }
    }

    fn say(&self, text: &str) {
        self.session.engine().host().print(text);
    }

    fn line(&mut self, line: &str) -> Next {
        let line = line.trim();
        match line {
            "" => {}
            "quit" | "exit" | ":quit" => return Next::Leave,
            "help" => self.help(""),
            _ if line.starts_with(':') => self.command(line),
            _ => self.enter(line),
        }
        Next::Go
    }

    fn enter(&mut self, entry: &str) {
        match self.session.enter(entry) {
            Ok(value) => {
                let kept = self.journal.append(self.session.last_written().unwrap_or(entry));
                self.note_unkept(kept);
                if let Some(value) = value {
                    self.say(&self.session.engine().show(&value));
                }
            }
            Err(diagnostic) => self.report.print(&diagnostic),
        }
    }

    /// Says once that a crash would lose what is entered from now on.
    fn note_unkept(&mut self, kept: std::io::Result<()>) {
        if let (Err(error), false) = (kept, self.warned) {
            self.warned = true;
            let reason = error.to_string().to_lowercase();
            let message = format!("this session cannot be kept against a crash: {reason}");
            self.complain(
                Diagnostic::new(Kind::Failure, message).help("`:save file.rhai` keeps it now and then"),
            );
        }
    }

    fn command(&mut self, line: &str) {
        let (name, rest) = line.split_once(char::is_whitespace).unwrap_or((line, ""));
        match (name, rest.trim()) {
            (":help", topic) => self.help(topic),
            (":names", _) => self.names(),
            (":undo", _) => self.undo(),
            (":save", "") => self.complain(
                Diagnostic::new(Kind::Failure, "`:save` needs a file name").help("write `:save lake.rhai`"),
            ),
            (":save", file) => self.save(file),
            (":load", file) => self.load(file),
            (other, _) => {
                let nearest = words::did_you_mean(other, COMMANDS.iter().map(|(name, ..)| *name));
                let message = Diagnostic::new(Kind::Failure, format!("there is no command `{other}`"));
                self.complain(
                    message.help(nearest.unwrap_or_else(|| "`:help` lists the commands".to_owned())),
                );
            }
        }
    }

    fn complain(&self, diagnostic: Diagnostic) {
        self.report.print(&diagnostic);
    }

    fn help(&self, topic: &str) {
        let entries = self.session.documentation();
        if topic.is_empty() {
            for (name, argument, deed) in COMMANDS {
                self.say(&format!("  {:<18}{deed}", format!("{name} {argument}")));
            }
            self.say("  help()            list what can be called");
            self.say("  Ctrl-C            stop a calculation, or discard the line");
            return;
        }
        match docs::help(&entries, topic, self.session.engine().host().style().width) {
            Ok(text) => self.say(&text),
            Err(fail) => self.complain(without_place(fail)),
        }
    }

    fn names(&self) {
        let (variables, functions) = (self.session.variables(), self.session.functions());
        if variables.is_empty() && functions.is_empty() {
            self.say("nothing is defined yet");
        }
        let longest = variables.iter().map(|(name, _)| name.chars().count()).max().unwrap_or(0);
        for (name, value) in &variables {
            let shown = self.session.engine().show(value);
            self.say(&format!("  {name:<longest$}  {}", first_line(&shown)));
        }
        for signature in functions {
            self.say(&format!("  fn {signature}"));
        }
    }

    fn undo(&mut self) {
        match self.session.undo() {
            Some(entry) => {
                let kept = self.journal.rewrite(self.session.entries_written());
                self.note_unkept(kept);
                self.say(&format!("taken back: {}", first_line(&entry)));
            }
            None => self.say("there is nothing to take back"),
        }
    }

    /// The whole session, or what one variable needs.
    fn save(&self, words: &str) {
        let (file, variable) = words.split_once(char::is_whitespace).unwrap_or((words, ""));
        let (text, what) = match variable.trim() {
            "" => (self.session.script(), counted(self.session.len(), "entry", "entries")),
            variable => match self.session.slice(variable) {
                Ok(slice) => {
                    let what = format!(
                        "{} of {} that give `{variable}`",
                        slice.kept,
                        counted(slice.of, "statement", "statements")
                    );
                    (slice.text, what)
                }
                Err(fail) => return self.complain(without_place(fail)),
            },
        };
        let name =
            if Path::new(file).extension().is_none() { format!("{file}.rhai") } else { file.to_owned() };
        let written = self.session.engine().host().files().write(&name, text.as_bytes());
        match written {
            Ok(_) => self.say(&format!("saved {what} in `{name}`")),
            Err(error) => return self.complain(without_place(error.into())),
        }
        // A function written anew at the prompt stands in the script twice.
        if let Err(fault) = self.session.engine().check(&name, &text) {
            let message = format!("the script will not run as it stands: {}", fault.message);
            self.complain(Diagnostic { help: fault.help, ..Diagnostic::new(Kind::Failure, message) });
        }
    }

    /// Without a name: what the newest broken session left.
    fn load(&mut self, file: &str) {
        if file.is_empty() {
            return self.recover();
        }
        match read_script(Path::new(file)) {
            Ok(text) => self.enter(text.trim_end()),
            Err(diagnostic) => self.complain(*diagnostic),
        }
    }

    /// Enters what a broken session left, entry by entry. Its journal goes only when all of it is in this session's own.
    fn recover(&mut self) {
        let Some(path) = self.abandoned.first().cloned() else {
            let message = Diagnostic::new(Kind::Failure, "`:load` needs a file name");
            return self.complain(message.help("write `:load lake.rhai`"));
        };
        let (entries, torn) = match journal::entries(&path) {
            Ok(read) => read,
            Err(error) => {
                let message = format!("cannot read what the earlier session left: {error}");
                return self.complain(Diagnostic::new(Kind::Failure, message));
            }
        };
        let before = self.session.len();
        for entry in &entries {
            let entered = self.session.len();
            self.enter(entry);
            if self.session.len() == entered {
                let message = format!(
                    "brought back {} of {} entries; the rest is in `{}`",
                    entered - before,
                    entries.len(),
                    path.display()
                );
                return self.complain(Diagnostic::new(Kind::Failure, message));
            }
        }
        let torn = if torn { "; one that was not finished is left out" } else { "" };
        self.say(&format!("brought back {}{torn}", counted(entries.len(), "entry", "entries")));
        let _ = std::fs::remove_file(self.abandoned.remove(0));
    }
}

fn without_place(fail: Fail) -> Diagnostic {
    Diagnostic { help: fail.help, ..Diagnostic::new(Kind::Failure, fail.message) }
}

fn counted(count: usize, one: &str, many: &str) -> String {
    format!("{count} {}", if count == 1 { one } else { many })
}

fn first_line(text: &str) -> String {
    match text.split_once('\n') {
        Some((first, _)) => format!("{first} …"),
        None => text.to_owned(),
    }
}
