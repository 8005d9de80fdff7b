//! What went wrong, for a person: message, help, place, and the calls that led there.
//!
//! Native functions raise a [`Fail`]; it travels inside the interpreter's own error and comes out, like every error of
//! the interpreter itself (`translate.rs`), as a [`Diagnostic`]. Drawing one is the program's affair.

use rhai::{Dynamic, EvalAltResult, Position};

use super::stop::Halt;

/// What native functions return.
pub type ScriptResult<T> = Result<T, Box<EvalAltResult>>;

/// Begins a failure: `fail("unknown key `ph`").help("did you mean `pH`?").key("ph")`.
///
/// The message is lower case, names in backticks, without a full stop.
pub fn fail(message: impl Into<String>) -> Fail {
    Fail { message: message.into(), help: Vec::new(), label: None, at: At::Call }
}

/// A failure of a native function, as it travels through the interpreter. A script that catches it reads `.message`
/// and `.help`.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Fail {
    /// What is wrong.
    pub message: String,
    /// What to write instead; one entry a line.
    pub help: Vec<String>,
    pub(super) label: Option<String>,
    pub(super) at: At,
}

/// The part of the failing call that is at fault.
#[derive(Debug, Clone, PartialEq, Eq)]
pub(super) enum At {
    /// The call as a whole: its name is underlined.
    Call,
    /// A key of a map literal among the arguments, at any depth.
    Key(String),
    /// An argument, counted from 0 without the receiver of a method.
    Argument(usize),
    /// Part of a text argument, in characters.
    Text { argument: usize, start: usize, length: usize },
}

impl Fail {
    /// Adds a line that says what to write instead.
    #[must_use]
    pub fn help(mut self, help: impl Into<String>) -> Self {
        self.help.push(help.into());
        self
    }

    /// Adds a help line if there is one, as from [`super::words::did_you_mean`].
    #[must_use]
    pub fn maybe_help(mut self, help: Option<String>) -> Self {
        self.help.extend(help);
        self
    }

    /// A few words beside the underlined place.
    #[must_use]
    pub fn label(mut self, label: impl Into<String>) -> Self {
        self.label = Some(label.into());
        self
    }

    /// Underlines this key of a map literal in the call.
    #[must_use]
    pub fn key(mut self, key: impl Into<String>) -> Self {
        self.at = At::Key(key.into());
        self
    }

    /// Underlines this argument, counted from 0 without the receiver of a method.
    #[must_use]
    pub fn argument(mut self, index: usize) -> Self {
        self.at = At::Argument(index);
        self
    }

    /// Underlines part of a text argument: `length` characters from `start`.
    #[must_use]
    pub fn text(mut self, argument: usize, start: usize, length: usize) -> Self {
        self.at = At::Text { argument, start, length };
        self
    }

    /// The failure as the result of a native function.
    ///
    /// # Errors
    ///
    /// Always: that is its purpose.
    pub fn raise<T>(self) -> ScriptResult<T> {
        Err(self.into())
    }
}

impl std::fmt::Display for Fail {
    fn fmt(&self, f: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        f.write_str(&self.message)
    }
}

impl std::error::Error for Fail {}

impl From<Fail> for Box<EvalAltResult> {
    fn from(fail: Fail) -> Self {
        Self::new(EvalAltResult::ErrorRuntime(Dynamic::from(fail), Position::NONE))
    }
}

/// An error as it is shown: everything needed to draw it, without the sources at hand.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Diagnostic {
    /// Whether something is wrong, or the calculation was only stopped.
    pub kind: Kind,
    /// What is wrong: lower case, names in backticks.
    pub message: String,
    /// What to write instead; one entry a line.
    pub help: Vec<String>,
    /// A few words beside the underlined place.
    pub label: Option<String>,
    /// Where; `None` when no text is to blame.
    pub place: Option<Place>,
    /// The calls that led there, innermost first.
    pub trace: Vec<Frame>,
}

/// What sort of end a calculation came to.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Kind {
    /// The text cannot be read.
    Syntax,
    /// The text was read, and what it asks for failed.
    Failure,
    /// The calculation was told to stop.
    Halted(Halt),
    /// A fault of this program.
    Bug,
}

/// A stretch of one line.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Place {
    /// File name as shown.
    pub source: String,
    /// Line, from 1.
    pub line: usize,
    /// Column in characters, from 1.
    pub column: usize,
    /// Length in characters, at least 1.
    pub width: usize,
    /// The line itself.
    pub text: String,
}

/// One call on the way to the failure.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Frame {
    /// What was called: "`f`", "a closure".
    pub what: String,
    /// Where it was called.
    pub place: Place,
}

impl Diagnostic {
    /// A message without a place.
    pub fn new(kind: Kind, message: impl Into<String>) -> Self {
        Self { kind, message: message.into(), help: Vec::new(), label: None, place: None, trace: Vec::new() }
    }

    /// Adds a line that says what to write instead.
    #[must_use]
    pub fn help(mut self, help: impl Into<String>) -> Self {
        self.help.push(help.into());
        self
    }
}

impl std::fmt::Display for Diagnostic {
    fn fmt(&self, f: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        match &self.place {
            Some(place) => write!(f, "{}:{}:{}: {}", place.source, place.line, place.column, self.message),
            None => f.write_str(&self.message),
        }
    }
}

impl std::error::Error for Diagnostic {}

impl Place {
    /// The token that begins at `line` and `column` (both from 1) of `text`, or the end of the text if it lies beyond.
    pub(super) fn of_token(source: &str, text: &str, line: usize, column: usize) -> Self {
        let line_text = text.lines().nth(line.saturating_sub(1)).unwrap_or("").to_owned();
        let rest: Vec<char> = line_text.chars().skip(column.saturating_sub(1)).collect();
        let width = token_length(&rest).max(1);
        Self { source: source.to_owned(), line, column: column.max(1), width, text: line_text }
    }
}

/// Characters of the token at the start of `rest`.
fn token_length(rest: &[char]) -> usize {
    let run = |belongs: fn(&char) -> bool| rest.iter().take_while(|c| belongs(c)).count();
    match rest.first() {
        None => 0,
        Some('"' | '`') => quoted_length(rest),
        Some(c) if c.is_alphabetic() || *c == '_' => run(|c| c.is_alphanumeric() || *c == '_'),
        Some(c) if c.is_ascii_digit() => run(|c| c.is_ascii_alphanumeric() || matches!(c, '.' | '_')),
        Some(_) if is_double_sign(rest) => 2,
        Some(_) => 1,
    }
}

fn is_double_sign(rest: &[char]) -> bool {
    const SIGNS: [&str; 17] = [
        "==", "!=", "<=", ">=", "&&", "||", "**", "+=", "-=", "*=", "/=", "%=", "??", "..", "::", "=>", "#{",
    ];
    rest.get(..2).is_some_and(|two| SIGNS.iter().any(|sign| sign.chars().eq(two.iter().copied())))
}

fn quoted_length(rest: &[char]) -> usize {
    let mut escaped = false;
    for (i, &c) in rest.iter().enumerate().skip(1) {
        if c == rest[0] && !escaped {
            return i + 1;
        }
        escaped = c == '\\' && !escaped;
    }
    rest.len()
}

#[cfg(test)]
mod tests {
    use super::*;

    #[track_caller]
    fn width(text: &str, column: usize, expected: usize) {
        assert_eq!(Place::of_token("a.rhai", text, 1, column).width, expected, "{text}");
    }

    #[test]
    fn a_place_covers_its_token() {
        width("let sampel = 1;", 5, 6);
        width("x >= 1", 3, 2);
        width(r#"f("a \" b", 2)"#, 3, 8);
        width("1.5e3;", 1, 5);
        width("#{ a: 1 }", 1, 2);
        width("x", 2, 1);
        width("", 1, 1);
        width("\"open", 1, 5);
    }
}
