//! Line editing: multi-line entries, completion, history.

use std::borrow::Cow;
use std::collections::BTreeSet;
use std::path::PathBuf;
use std::sync::{Arc, PoisonError, RwLock};

use lysocline_engine::script::docs::{self, Entry};
use lysocline_engine::script::input::{Status, status};
use lysocline_engine::script::{Dynamic, ScriptEngine, Session};
use rustyline::completion::{Completer, FilenameCompleter, Pair};
use rustyline::error::ReadlineError;
use rustyline::highlight::{CmdKind, Highlighter, MatchingBracketHighlighter};
use rustyline::history::FileHistory;
use rustyline::validate::{ValidationContext, ValidationResult, Validator};
use rustyline::{CompletionType, Config, Context, Helper, Hinter};

/// What stands before an entry.
const PROMPT: &str = "lysocline> ";
const GREEN_PROMPT: &str = "\u{1b}[32mlysocline>\u{1b}[0m ";

/// Words of the language that a person may want completed.
const KEYWORDS: [&str; 15] = [
    "break", "catch", "const", "continue", "else", "false", "for", "if", "import", "let", "loop", "return",
    "true", "try", "while",
];

/// One line as it was read.
pub enum Line {
    Entry(String),
    /// Ctrl-C: the line is discarded.
    Discarded,
    /// Ctrl-D, or a terminal that went away.
    End,
}

/// The line editor with its history.
pub struct Editor {
    inner: rustyline::Editor<Assistant, FileHistory>,
    names: Arc<RwLock<Names>>,
    history: Option<PathBuf>,
    color: bool,
}

impl Editor {
    /// An editor that completes from `engine` and keeps its history in `history`.
    pub fn new(
        engine: Arc<ScriptEngine>,
        history: Option<PathBuf>,
        color: bool,
    ) -> Result<Self, ReadlineError> {
        let config = Config::builder()
            .completion_type(CompletionType::List)
            .auto_add_history(false)
            .max_history_size(5000)?
            .bracketed_paste(true)
            .build();
        let names = Arc::new(RwLock::new(Names { documented: engine.entries(), ..Names::default() }));
        let history_file = FileHistory::with_config(&config);
        let mut inner = rustyline::Editor::with_history(config, history_file)?;
        inner.set_helper(Some(Assistant::new(engine, Arc::clone(&names))));
        if let Some(path) = &history {
            // A first start has no history; an unreadable one is no reason not to start.
            let _ = inner.load_history(path);
        }
        Ok(Self { inner, names, history, color })
    }

    /// Reads one entry.
    pub fn read(&mut self) -> Line {
        let prompt = (PROMPT, if self.color { GREEN_PROMPT } else { PROMPT });
        match self.inner.readline(&prompt) {
            Ok(entry) => {
                self.remember(&entry);
                Line::Entry(entry)
            }
            Err(ReadlineError::Interrupted) => Line::Discarded,
            Err(_) => Line::End,
        }
    }

    /// Lets completion know what the session has defined.
    pub fn learn(&self, session: &Session) {
        let mut names = self.names.write().unwrap_or_else(PoisonError::into_inner);
        names.variables = session.variables();
        names.functions = session.functions();
    }

    /// History that cannot be written must not end the session.
    fn remember(&mut self, entry: &str) {
        if entry.trim().is_empty() || !self.inner.add_history_entry(entry).unwrap_or(false) {
            return;
        }
        if let Some(path) = &self.history {
            let _ = self.inner.append_history(path);
        }
    }
}

/// What can be completed.
#[derive(Default)]
struct Names {
    documented: Vec<Entry>,
    variables: Vec<(String, Dynamic)>,
    /// Signatures of the session's own functions.
    functions: Vec<String>,
}

#[derive(Helper, Hinter)]
struct Assistant {
    engine: Arc<ScriptEngine>,
    names: Arc<RwLock<Names>>,
    files: FilenameCompleter,
    brackets: MatchingBracketHighlighter,
}

impl Assistant {
    fn new(engine: Arc<ScriptEngine>, names: Arc<RwLock<Names>>) -> Self {
        Self { engine, names, files: FilenameCompleter::new(), brackets: MatchingBracketHighlighter::new() }
    }
}

impl Validator for Assistant {
    fn validate(&self, context: &mut ValidationContext) -> rustyline::Result<ValidationResult> {
        let input = context.input();
        // An empty line submits whatever is there, so that nobody is caught in an entry that waits for more.
        let forced = input.ends_with('\n') || input.starts_with(':');
        let unfinished = !forced && status(&self.engine, input) == Status::Incomplete;
        Ok(if unfinished { ValidationResult::Incomplete } else { ValidationResult::Valid(None) })
    }
}

impl Highlighter for Assistant {
    fn highlight<'l>(&self, line: &'l str, position: usize) -> Cow<'l, str> {
        self.brackets.highlight(line, position)
    }

    fn highlight_prompt<'b, 's: 'b, 'p: 'b>(&'s self, prompt: &'p str, _default: bool) -> Cow<'b, str> {
        Cow::Borrowed(prompt)
    }

    fn highlight_char(&self, line: &str, position: usize, kind: CmdKind) -> bool {
        self.brackets.highlight_char(line, position, kind)
    }
}

impl Completer for Assistant {
    type Candidate = Pair;

    fn complete(
        &self,
        line: &str,
        position: usize,
        context: &Context<'_>,
    ) -> rustyline::Result<(usize, Vec<Pair>)> {
        let before = &line[..position];
        let names = self.names.read().unwrap_or_else(PoisonError::into_inner);
        match Place::of(before) {
            Place::File => self.files.complete(line, position, context),
            Place::Command(word) => Ok((
                position - word.len(),
                plain(super::prompt::COMMANDS.iter().map(|(name, ..)| *name), word),
            )),
            Place::Topic(word) => Ok((position - word.len(), plain(names.topics(), word))),
            Place::Quoted(word) => {
                let words = self.engine.quoted_words();
                Ok((position - word.len(), plain(words.iter().map(String::as_str), word)))
            }
            Place::Member(owner, word) => Ok((position - word.len(), names.members(owner, word))),
            Place::Name(word) => Ok((position - word.len(), names.free(word))),
        }
    }
}

/// What the cursor stands behind.
#[derive(Debug, PartialEq, Eq)]
enum Place<'a> {
    /// `:sa`
    Command(&'a str),
    /// `:load su`
    File,
    /// `:help li`, `help("li`
    Topic(&'a str),
    /// `"Ca`
    Quoted(&'a str),
    /// `lake.op`: what stands before the dot, if it is a name, and the beginning of the member.
    Member(Option<&'a str>, &'a str),
    Name(&'a str),
}

impl<'a> Place<'a> {
    fn of(before: &'a str) -> Self {
        if before.starts_with(':') {
            return Self::of_command(before);
        }
        if let Some(start) = open_quote(before) {
            let inside = &before[start..];
            let is_topic = before[..start - 1].trim_end().ends_with("help(");
            let word = &inside[inside.rfind(' ').map_or(0, |space| space + 1)..];
            return if is_topic { Self::Topic(inside) } else { Self::Quoted(word) };
        }
        let word = trailing_name(before);
        let rest = &before[..before.len() - word.len()];
        match rest.strip_suffix('.') {
            Some(owner) => {
                let name = trailing_name(owner);
                Self::Member((!name.is_empty()).then_some(name), word)
            }
            None => Self::Name(word),
        }
    }

    fn of_command(before: &'a str) -> Self {
        match before.split_once(' ') {
            None => Self::Command(before),
            Some((":help", topic)) => Self::Topic(topic.trim_start()),
            Some(_) => Self::File,
        }
    }
}

/// Where the text after an open double quote begins.
fn open_quote(before: &str) -> Option<usize> {
    let mut open = None;
    let mut escaped = false;
    for (index, c) in before.char_indices() {
        match (c, open) {
            ('"', None) => open = Some(index + 1),
            ('"', Some(_)) if !escaped => open = None,
            ('\n', _) => open = None,
            _ => {}
        }
        escaped = c == '\\' && !escaped;
    }
    open
}

fn trailing_name(text: &str) -> &str {
    let name = |c: char| c.is_alphanumeric() || c == '_';
    &text[text
        .rfind(|c| !name(c))
        .map_or(0, |index| index + text[index..].chars().next().map_or(1, char::len_utf8))..]
}

impl Names {
    fn topics(&self) -> impl Iterator<Item = &str> {
        self.documented
            .iter()
            .filter(|entry| !entry.is_standard && !entry.text.is_empty())
            .map(|entry| entry.name.as_str())
    }

    /// Variables, functions, words of the language.
    fn free(&self, start: &str) -> Vec<Pair> {
        let variables = self.variables.iter().map(|(name, _)| (name.clone(), name.clone()));
        let own = self.functions.iter().map(|signature| (call(signature), signature.clone()));
        let callable = self
            .documented
            .iter()
            .filter(|entry| !entry.is_standard && !entry.is_property && !entry.text.is_empty());
        let functions = callable.map(|entry| (call(&entry.signature), entry.signature.clone()));
        let keywords = KEYWORDS.iter().map(|word| ((*word).to_owned(), (*word).to_owned()));
        pairs(variables.chain(own).chain(functions).chain(keywords), start)
    }

    /// Methods and properties of the variable `owner`, or of any native type if its type is not known.
    fn members(&self, owner: Option<&str>, start: &str) -> Vec<Pair> {
        let value = owner.and_then(|name| self.variables.iter().find(|(variable, _)| variable == name));
        let fits = |entry: &&Entry| match value {
            Some((_, value)) => entry.receiver == Some(value.type_id()),
            None => !entry.is_standard && !entry.text.is_empty() && entry.receiver.is_some(),
        };
        let keys = value.map(|(_, value)| keys_of(value)).unwrap_or_default();
        let members =
            self.documented.iter().filter(fits).filter(|entry| !HIDDEN.contains(&entry.name.as_str()));
        pairs(keys.into_iter().map(|key| (key.clone(), key)).chain(members.map(member)), start)
    }
}

/// Methods of every type that no one calls at a prompt.
const HIDDEN: [&str; 4] = ["debug", "print", "to_debug", "to_string"];

/// The keys of a map that can stand after a dot.
fn keys_of(value: &Dynamic) -> Vec<String> {
    let is_name = |key: &String| key.chars().all(|c| c.is_ascii_alphanumeric() || c == '_');
    docs::map_keys(value).into_iter().filter(is_name).collect()
}

fn member(entry: &Entry) -> (String, String) {
    if entry.is_property {
        return (entry.name.clone(), entry.signature.trim_start_matches('.').to_owned());
    }
    // The receiver stands before the dot, not between the brackets.
    let (name, rest) = entry.signature.split_once('(').unwrap_or((&entry.signature, ")"));
    let close = rest.find(')').unwrap_or(0);
    let first = rest.find(", ").map_or(close, |comma| (comma + 2).min(close));
    let signature = format!("{name}({}", &rest[first..]);
    (call(&signature), signature)
}

/// `name(`, or `name()` when there is nothing to fill in.
fn call(signature: &str) -> String {
    let (name, rest) = signature.split_once('(').unwrap_or((signature, ""));
    if rest.starts_with(')') { format!("{name}()") } else { format!("{name}(") }
}

fn plain<'a>(words: impl Iterator<Item = &'a str>, start: &str) -> Vec<Pair> {
    pairs(words.map(|word| (word.to_owned(), word.to_owned())), start)
}

/// Candidates that begin with `start`, one for each replacement, in alphabetical order.
fn pairs(candidates: impl Iterator<Item = (String, String)>, start: &str) -> Vec<Pair> {
    let mut seen = BTreeSet::new();
    let is_name = |word: &str| word.starts_with(|c: char| c.is_alphanumeric() || matches!(c, '_' | ':'));
    let fitting =
        candidates.filter(|(word, _)| word.starts_with(start) && is_name(word) && seen.insert(word.clone()));
    let mut pairs: Vec<Pair> = fitting.map(|(replacement, display)| Pair { display, replacement }).collect();
    pairs.sort_by(|a, b| a.replacement.cmp(&b.replacement));
    pairs
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_place_of_the_cursor() {
        assert_eq!(Place::of(":sa"), Place::Command(":sa"));
        assert_eq!(Place::of(":help li"), Place::Topic("li"));
        assert_eq!(Place::of(":load su"), Place::File);
        assert_eq!(Place::of("help(\"lin"), Place::Topic("lin"));
        assert_eq!(Place::of("reaction(\"CO2(aq) + H2"), Place::Quoted("H2"));
        assert_eq!(Place::of("let a = lin"), Place::Name("lin"));
        assert_eq!(Place::of("lake.op"), Place::Member(Some("lake"), "op"));
        assert_eq!(Place::of("f(1).op"), Place::Member(None, "op"));
        assert_eq!(Place::of("\"é\" + é"), Place::Name("é"));
        assert_eq!(Place::of(""), Place::Name(""));
    }

    #[test]
    fn members_leave_the_receiver_out() {
        let engine = ScriptEngine::default();
        let names = Names {
            documented: engine.entries(),
            variables: vec![("a".to_owned(), Dynamic::from_array(vec![]))],
            functions: vec![],
        };
        let members = names.members(Some("a"), "pus");
        assert_eq!(members.len(), 1);
        assert_eq!(members[0].replacement, "push(");
        assert!(names.free("linsp").iter().any(|pair| pair.replacement == "linspace("));
    }
}
