//! A growing script: entries share variables and functions, and a failed one leaves no trace.
//!
//! Every entry is read as the next lines of one text, so that a place in a message is a line of what `:save` writes.

use std::sync::Arc;

use rhai::{AST, Dynamic, Scope};

use super::diagnostic::Diagnostic;
use super::engine::{clean, on_deep_stack};
use super::input::last_statement;
use super::modules::Source;
use super::{ScriptEngine, docs::Entry};

/// The name under which messages speak of the session's text.
pub const SESSION: &str = "session";

/// Entries that can be taken back.
const UNDO_DEPTH: usize = 50;

/// The state after all accepted entries.
pub struct Session {
    engine: Arc<ScriptEngine>,
    scope: Scope<'static>,
    functions: AST,
    entries: Vec<Accepted>,
    earlier: Vec<Snapshot>,
}

struct Accepted {
    typed: String,
    /// As a script needs it: ended with a semicolon, an echoed value printed. It has as many lines as were typed.
    written: String,
}

struct Snapshot {
    scope: Scope<'static>,
    functions: AST,
    /// A variable that a closure captured is a shared cell: the cell, and what it held.
    cells: Vec<(Dynamic, Dynamic)>,
}

impl Session {
    /// An empty session.
    #[must_use]
    pub fn new(engine: Arc<ScriptEngine>) -> Self {
        Self {
            engine,
            scope: Scope::new(),
            functions: AST::empty(),
            entries: Vec::new(),
            earlier: Vec::new(),
        }
    }

    /// The engine the session runs on.
    #[must_use]
    pub fn engine(&self) -> &ScriptEngine {
        &self.engine
    }

    /// Runs one entry. The value is returned where it should be echoed: not after a semicolon, not for a definition.
    ///
    /// # Errors
    ///
    /// Returns what went wrong; variables and functions are then as they were before.
    pub fn enter(&mut self, entry: &str) -> Result<Option<Dynamic>, Box<Diagnostic>> {
        let entry = clean(entry);
        let entry = entry.trim_end();
        let before = self.snapshot();
        match self.evaluate(entry) {
            Ok((functions, value)) => {
                self.functions = functions;
                self.scope = self.scope.clone_visible();
                self.accept(entry, value.is_some(), before);
                Ok(value)
            }
            Err(diagnostic) => {
                self.restore(before);
                Err(diagnostic)
            }
        }
    }

    /// Takes the last accepted entry back and returns it; `None` when there is none to take back.
    pub fn undo(&mut self) -> Option<String> {
        let before = self.earlier.pop()?;
        self.restore(before);
        self.entries.pop().map(|entry| entry.typed)
    }

    /// How many entries were accepted.
    #[must_use]
    pub fn len(&self) -> usize {
        self.entries.len()
    }

    /// Whether nothing was accepted yet.
    #[must_use]
    pub fn is_empty(&self) -> bool {
        self.entries.is_empty()
    }

    /// The last accepted entry as a script needs it.
    #[must_use]
    pub fn last_written(&self) -> Option<&str> {
        self.entries.last().map(|entry| entry.written.as_str())
    }

    /// The accepted entries as a script needs them.
    pub fn entries_written(&self) -> impl Iterator<Item = &str> {
        self.entries.iter().map(|entry| entry.written.as_str())
    }

    /// Signatures of the functions, as [`Session::functions`] gives them.
    pub(super) fn function_names(&self) -> Vec<String> {
        self.functions()
    }

    /// Variables in scope, in the order they were defined.
    #[must_use]
    pub fn variables(&self) -> Vec<(String, Dynamic)> {
        self.scope.iter_raw().map(|(name, _, value)| (name.to_owned(), value.flatten_clone())).collect()
    }

    /// Functions defined in the session, as signatures.
    #[must_use]
    pub fn functions(&self) -> Vec<String> {
        let named = self.functions.iter_functions().filter(|function| !function.name.starts_with("anon$"));
        let mut signatures: Vec<String> =
            named.map(|function| format!("{}({})", function.name, function.params.join(", "))).collect();
        signatures.sort();
        signatures
    }

    /// Everything callable, for help.
    #[must_use]
    pub fn documentation(&self) -> Vec<Entry> {
        self.engine.entries()
    }

    /// One line for each line so far. Imports are kept: they do not outlive the entry they stand in.
    fn padding(&self) -> String {
        let lines = self.entries.iter().flat_map(|entry| entry.typed.split('\n'));
        lines.map(|line| if is_import(line) { format!("{line}\n") } else { "\n".to_owned() }).collect()
    }

    /// Reads and runs the entry; returns all functions of the session, old and new, beside the value.
    fn evaluate(&mut self, entry: &str) -> Result<(AST, Option<Dynamic>), Box<Diagnostic>> {
        let text = self.padding() + entry;
        let typed: String = self.entries.iter().map(|entry| format!("{}\n", entry.typed)).collect();
        let (engine, scope, functions) = (&self.engine, &mut self.scope, &self.functions);
        on_deep_stack(|| {
            let read = engine.compile(SESSION, &text, scope, Some(functions))?;
            // Messages may point into earlier entries, which the padded text does not show.
            let whole = Arc::new(Source { text: typed + entry, ast: read.ast.clone() });
            let value = engine.evaluate(SESSION, &whole, scope)?;
            Ok((read.ast.clone_functions_only(), value))
        })
    }

    fn accept(&mut self, entry: &str, shown: bool, before: Snapshot) {
        let written = self.written(entry, shown);
        self.entries.push(Accepted { typed: entry.to_owned(), written });
        self.earlier.push(before);
        if self.earlier.len() > UNDO_DEPTH {
            self.earlier.remove(0);
        }
    }

    /// The entry as part of a script. Whatever is added must be readable, or it is left out.
    fn written(&self, entry: &str, shown: bool) -> String {
        let (start, end) = last_statement(entry);
        let (before, last, after) = (&entry[..start], &entry[start..end], &entry[end..]);
        let lead = last.len() - last.trim_start().len();
        let printed = format!("{before}{}print({});{after}", &last[..lead], &last[lead..]);
        // A read that gave `()` showed nothing, but as a statement it would be refused for its unused result.
        let statement = format!("{before}{last};{after}");
        let is_read = || {
            self.engine.parse_error(&statement).is_none() && self.engine.check(SESSION, &statement).is_err()
        };
        if (shown || is_read()) && self.engine.parse_error(&printed).is_none() {
            return printed;
        }
        // What needs no semicolon before a next statement, such as a `fn`, gets none.
        if last.trim().is_empty() || self.engine.parse_error(&format!("{entry}\n1")).is_none() {
            return entry.to_owned();
        }
        format!("{before}{last};{after}")
    }

    fn snapshot(&self) -> Snapshot {
        let shared = self.scope.iter_raw().filter(|(.., value)| value.is_shared());
        let cells = shared.map(|(.., cell)| (cell.clone(), cell.flatten_clone())).collect();
        Snapshot { scope: self.scope.clone(), functions: self.functions.clone(), cells }
    }

    fn restore(&mut self, snapshot: Snapshot) {
        for (mut cell, held) in snapshot.cells {
            if let Some(mut inside) = cell.write_lock::<Dynamic>() {
                *inside = held;
            }
        }
        self.scope = snapshot.scope;
        self.functions = snapshot.functions;
    }
}

fn is_import(line: &str) -> bool {
    line.trim_start().starts_with("import ") && line.trim_end().ends_with(';')
}
