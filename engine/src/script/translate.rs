//! Every error of the interpreter in our own words, with its place in the text.

use std::sync::Arc;

use rhai::{EvalAltResult, LexError, ParseErrorType, Position};

use super::check::{Spot, locate};
use super::diagnostic::{At, Diagnostic, Fail, Frame, Kind, Place};
use super::docs::Entry;
use super::modules::{Modules, Source};
use super::stop::Halt;
use super::words;

/// The texts a message may point into, and the names it may offer.
pub(super) struct Translator<'a> {
    /// Name of the text that was run.
    pub main: &'a str,
    pub source: Arc<Source>,
    pub modules: &'a Modules,
    /// Everything callable.
    pub entries: Vec<Entry>,
    /// Variables in scope.
    pub variables: Vec<String>,
}

impl Translator<'_> {
    /// The error as a diagnostic.
    pub(super) fn diagnose(&self, error: Box<EvalAltResult>) -> Box<Diagnostic> {
        let mut trace = Vec::new();
        let mut source = self.main.to_owned();
        let mut error = error;
        loop {
            match *error {
                EvalAltResult::ErrorInFunctionCall(name, within, inner, position) => {
                    self.add_frame(&mut trace, called(&name), &source, position);
                    if !within.is_empty() {
                        source = within;
                    }
                    error = inner;
                }
                EvalAltResult::ErrorInModule(name, inner, position) => {
                    self.add_frame(&mut trace, format!("the module `{name}`"), &source, position);
                    source = name;
                    error = inner;
                }
                _ => break,
            }
        }
        trace.reverse();
        let mut diagnostic = self.innermost(*error, &source);
        diagnostic.trace = trace;
        Box::new(diagnostic)
    }

    /// A fault found before running.
    pub(super) fn refused(&self, fail: Fail, position: Position) -> Box<Diagnostic> {
        Box::new(Diagnostic { kind: Kind::Syntax, ..self.failure(fail, position, self.main) })
    }

    /// Closures called by native functions appear twice, at the same position: the second adds nothing.
    fn add_frame(&self, trace: &mut Vec<Frame>, what: String, source: &str, position: Position) {
        let Some(place) = self.place(source, position) else { return };
        if trace.last().is_none_or(|frame| frame.place != place) {
            trace.push(Frame { what, place });
        }
    }

    fn text_of(&self, source: &str) -> Option<Arc<Source>> {
        if source == self.main { Some(Arc::clone(&self.source)) } else { self.modules.source(source) }
    }

    fn place(&self, source: &str, position: Position) -> Option<Place> {
        let (line, column) = (position.line()?, position.position().unwrap_or(1));
        Some(Place::of_token(source, &self.text_of(source)?.text, line, column))
    }

    fn innermost(&self, error: EvalAltResult, source: &str) -> Diagnostic {
        let position = error.position();
        match error {
            EvalAltResult::ErrorRuntime(token, _) => match token.clone().try_cast::<Fail>() {
                Some(fail) => self.failure(fail, position, source),
                None => self.at(source, position, Kind::Failure, thrown(&token)),
            },
            EvalAltResult::ErrorTerminated(token, _) => {
                self.halted(token.try_cast::<Halt>(), position, source)
            }
            EvalAltResult::ErrorParsing(error, _) => self.syntax(&error, position, source),
            EvalAltResult::ErrorDataRace(ref what, _) => {
                let (message, help) = self.message(&error);
                Diagnostic { help, ..self.at(source, self.racing_call(what, source), Kind::Failure, message) }
            }
            other => {
                let (message, help) = self.message(&other);
                Diagnostic { help, ..self.at(source, position, Kind::Failure, message) }
            }
        }
    }

    fn at(&self, source: &str, position: Position, kind: Kind, message: impl Into<String>) -> Diagnostic {
        Diagnostic { place: self.place(source, position), ..Diagnostic::new(kind, message) }
    }

    fn failure(&self, fail: Fail, position: Position, source: &str) -> Diagnostic {
        let place = self.part(&fail.at, position, source).or_else(|| self.place(source, position));
        Diagnostic {
            help: fail.help,
            label: fail.label,
            place,
            ..Diagnostic::new(Kind::Failure, fail.message)
        }
    }

    /// The place of a key, an argument, or a part of a text argument.
    fn part(&self, at: &At, position: Position, source: &str) -> Option<Place> {
        let text = self.text_of(source)?;
        match locate(&text.ast, position, at)? {
            Spot::Token(position) => self.place(source, position),
            Spot::Within { literal, content, start, length } => {
                let mut place = self.place(source, literal)?;
                let written: String =
                    place.text.chars().skip(place.column).take(content.chars().count()).collect();
                // An escape or a line end inside the literal shifts the characters: then the whole literal is shown.
                if written == content {
                    place.column += 1 + start;
                    place.width = length.max(1);
                }
                Some(place)
            }
        }
    }

    /// The interpreter gives no place, only `argument #1 of function 'map'`: found if there is one such call.
    fn racing_call(&self, what: &str, source: &str) -> Position {
        let method = what.split('\'').nth(1).unwrap_or("");
        self.text_of(source).map_or(Position::NONE, |text| super::check::only_call(&text.ast, method))
    }

    fn halted(&self, halt: Option<Halt>, position: Position, source: &str) -> Diagnostic {
        let halt = halt.unwrap_or(Halt::Interrupted);
        let message = match halt {
            Halt::Interrupted => "stopped by Ctrl-C",
            Halt::TimeUp => "stopped: the time limit has passed",
            Halt::MemoryFull => "stopped: the memory limit was reached",
            Halt::OutputClosed => "stopped: the output was closed",
        };
        self.at(source, position, Kind::Halted(halt), message)
    }

    fn message(&self, error: &EvalAltResult) -> (String, Vec<String>) {
        let plain = |message: String| (message, Vec::new());
        let advised = |message: String, help: &str| (message, vec![help.to_owned()]);
        match error {
            EvalAltResult::ErrorVariableNotFound(name, _) => self.unknown_variable(name),
            EvalAltResult::ErrorFunctionNotFound(call, _) => self.unknown_function(call),
            EvalAltResult::ErrorPropertyNotFound(name, _) => self.unknown_property(name, None),
            EvalAltResult::ErrorDotExpr(text, _) => self.bad_dot(text),
            EvalAltResult::ErrorModuleNotFound(name, _) => plain(format!("there is no module `{name}`")),
            EvalAltResult::ErrorIndexNotFound(index, _) => plain(format!("there is nothing at `{index}`")),
            EvalAltResult::ErrorIndexingType(text, _) => {
                let rust = text.split(" [").next().unwrap_or(text);
                plain(format!("{} has no members to index with `[…]`", words::a_type(rust)))
            }
            EvalAltResult::ErrorArrayBounds(length, index, _) => {
                out_of_bounds("array", "members", *length, *index)
            }
            EvalAltResult::ErrorStringBounds(length, index, _) => {
                out_of_bounds("text", "characters", *length, *index)
            }
            EvalAltResult::ErrorMismatchDataType(wanted, found, _)
            | EvalAltResult::ErrorMismatchOutputType(wanted, found, _) => plain(mismatch(wanted, found)),
            EvalAltResult::ErrorFor(_) => advised(
                "this value cannot be stepped through".to_owned(),
                "`for` takes an array, a range such as `0..10`, or a column",
            ),
            EvalAltResult::ErrorDataRace(_, _) => advised(
                "this value is being read and changed at the same time".to_owned(),
                "a closure may not use the array it is called on: copy it first, `let copy = a;`, or compute what you need before",
            ),
            EvalAltResult::ErrorAssignmentToConstant(name, _) => {
                advised(constant(name), "define it with `let` if it must change")
            }
            EvalAltResult::ErrorNonPureMethodCallOnConstant(name, _) => {
                plain(format!("`{name}` would change a constant"))
            }
            EvalAltResult::ErrorArithmetic(text, _) => arithmetic(text),
            EvalAltResult::ErrorStackOverflow(_) => advised(
                "functions call each other too deeply (more than 64 calls)".to_owned(),
                "does a function call itself without an end? otherwise use a loop",
            ),
            EvalAltResult::ErrorUnboundThis(_) => {
                plain("`this` has a meaning only in a function called as a method".to_owned())
            }
            EvalAltResult::ErrorDataTooLarge(what, _) => plain(format!("{what} is too large")),
            other => plain(lowercase_start(&bare(other))),
        }
    }

    fn unknown_variable(&self, name: &str) -> (String, Vec<String>) {
        let is_function = self.entries.iter().any(|entry| entry.name == name);
        let mut help = Vec::new();
        if self.variables.iter().any(|variable| variable == name) {
            help.push(format!(
                "a `fn` sees only its parameters: pass `{name}` as one, or write a closure `|x| …`"
            ));
        } else if is_function {
            help.push(format!("`{name}` is a function: call it, or write a closure such as `|x| {name}(x)`"));
        } else {
            let callable =
                self.entries.iter().filter(|entry| !entry.is_standard).map(|entry| entry.name.as_str());
            let names = self.variables.iter().map(String::as_str).chain(callable);
            help.extend(words::did_you_mean(name, names));
        }
        (format!("there is no variable `{name}`"), help)
    }

    /// `call` is the name and the types of the arguments, `pow (i64, map)`.
    fn unknown_function(&self, call: &str) -> (String, Vec<String>) {
        let (name, types) = call.split_once(" (").unwrap_or((call, ""));
        let types: Vec<&str> =
            types.strip_suffix(')').unwrap_or(types).split(", ").filter(|name| !name.is_empty()).collect();
        if let Some(property) = name.strip_prefix("get$") {
            return self.unknown_property(property, types.first().copied());
        }
        if name.starts_with("index$") {
            let owner = types.first().copied().unwrap_or("value");
            return (format!("{} has no members to index with `[…]`", words::a_type(owner)), Vec::new());
        }
        if let Some(deed) = words::deed(name) {
            let help = types.contains(&"()").then(|| words::MISSING_KEY.to_owned());
            return (cannot(name, deed, &types), help.into_iter().collect());
        }
        let given = types.iter().map(|rust| words::a_type(rust)).collect::<Vec<_>>().join(", ");
        let same: Vec<&Entry> = self.entries.iter().filter(|entry| entry.name == name).collect();
        if !same.is_empty() {
            return (misfit(name, &given, types.len(), &same), forms(&same));
        }
        if self.variables.iter().any(|variable| variable == name) {
            return (
                format!("there is no function `{name}`"),
                vec![format!("`{name}` is a variable; if it holds a closure, write `{name}.call(x)`")],
            );
        }
        let names = self.entries.iter().map(|entry| entry.name.as_str());
        (format!("there is no function `{name}`"), words::did_you_mean(name, names).into_iter().collect())
    }

    fn unknown_property(&self, name: &str, owner: Option<&str>) -> (String, Vec<String>) {
        if owner == Some("()") {
            return (format!("there is nothing `()` before `.{name}`"), vec![words::MISSING_KEY.to_owned()]);
        }
        let names = self.entries.iter().filter(|entry| !entry.is_standard || entry.is_property);
        let message = match owner {
            Some(owner) => format!("{} has no `.{name}`", words::a_type(owner)),
            None => format!("there is no `.{name}` here"),
        };
        (message, words::did_you_mean(name, names.map(|entry| entry.name.as_str())).into_iter().collect())
    }

    /// `Unknown property 'c' - a getter is not registered for type '()'`.
    fn bad_dot(&self, text: &str) -> (String, Vec<String>) {
        let quoted: Vec<&str> = text.split('\'').skip(1).step_by(2).collect();
        match quoted.as_slice() {
            [name, owner] => self.unknown_property(name, Some(owner)),
            [name] => self.unknown_property(name, None),
            _ => (lowercase_start(text), Vec::new()),
        }
    }

    fn syntax(&self, error: &ParseErrorType, position: Position, source: &str) -> Diagnostic {
        let text = self.text_of(source).map(|source| source.text.clone()).unwrap_or_default();
        let begins_line = begins_line(&text, position);
        let (message, help) = syntax_message(error, begins_line);
        let looks_back = (begins_line && is_missing_semicolon(error)) || is_beyond(&text, position);
        let place = match looks_back.then(|| last_code_before(&text, position)).flatten() {
            Some((line, column)) => Some(Place::of_token(source, &text, line, column)),
            None => self.place(source, position),
        };
        Diagnostic { place, help: help.into_iter().collect(), ..Diagnostic::new(Kind::Syntax, message) }
    }
}

fn constant(name: &str) -> String {
    if name.is_empty() {
        "a fixed value cannot be set".to_owned()
    } else {
        format!("`{name}` is a constant and cannot be changed")
    }
}

fn counted(count: usize, noun: &str) -> String {
    format!("{count} {noun}{}", if count == 1 { "" } else { "s" })
}

fn called(name: &str) -> String {
    if name.starts_with("anon$") { "a closure".to_owned() } else { format!("`{name}`") }
}

fn thrown(token: &rhai::Dynamic) -> String {
    match token.read_lock::<rhai::ImmutableString>() {
        Some(text) => text.to_string(),
        None => format!("the script threw {token}"),
    }
}

fn out_of_bounds(what: &str, members: &str, length: usize, index: i64) -> (String, Vec<String>) {
    let message = format!("there is no member {index}: this {what} has {length} {members}");
    let help = match length {
        0 => "it is empty".to_owned(),
        _ => format!("they are counted from 0 to {}, or from the end: -1 is the last", length - 1),
    };
    (message, vec![help])
}

fn mismatch(wanted: &str, found: &str) -> String {
    match (wanted, found) {
        ("", found) => format!("{} does not fit here", words::a_type(found)),
        (wanted, "") => format!("{} is needed here", words::a_type(wanted)),
        (wanted, found) if words::type_name(wanted) == "truth value" => {
            format!("`true` or `false` is needed here, not {}", words::a_type(found))
        }
        (wanted, found) => format!("{} is needed here, not {}", words::a_type(wanted), words::a_type(found)),
    }
}

fn arithmetic(text: &str) -> (String, Vec<String>) {
    if text.to_lowercase().contains("by zero") {
        return ("division by zero".to_owned(), Vec::new());
    }
    (
        "this whole number became too large".to_owned(),
        vec!["a decimal has no such limit: write `1.0 * …` or `1e3` instead of `1000`".to_owned()],
    )
}

fn cannot(operator: &str, deed: &str, types: &[&str]) -> String {
    let sign = words::sign(operator);
    match types {
        [one] => format!("`{sign}` does not take {}", words::a_type(one)),
        [left, right] => {
            let between = match deed {
                "subtract" => {
                    return format!("cannot subtract {} from {}", words::a_type(right), words::a_type(left));
                }
                "divide" => "by",
                "compare" => "with",
                _ => "and",
            };
            if sign == super::numbers::PLUS_MINUS {
                return "`±` stands between a number and its standard uncertainty".to_owned();
            }
            format!("cannot {deed} {} {between} {}", words::a_type(left), words::a_type(right))
        }
        _ => format!("cannot {deed} these"),
    }
}

fn misfit(name: &str, given: &str, count: usize, same: &[&Entry]) -> String {
    if same.iter().any(|entry| entry.parameters == count) {
        return format!("`{name}` does not take ({given})");
    }
    let mut counts: Vec<usize> = same.iter().map(|entry| entry.parameters).collect();
    counts.sort_unstable();
    counts.dedup();
    let wanted = counts.iter().map(ToString::to_string).collect::<Vec<_>>().join(" or ");
    let noun = if counts == [1] { "argument" } else { "arguments" };
    format!("`{name}` takes {wanted} {noun}, not {count}")
}

fn forms(same: &[&Entry]) -> Vec<String> {
    const SHOWN: usize = 4;
    let documented: Vec<&&Entry> = same.iter().filter(|entry| !entry.text.is_empty()).collect();
    let shown: Vec<&Entry> =
        if documented.is_empty() { same.to_vec() } else { documented.into_iter().copied().collect() };
    shown.iter().take(SHOWN).map(|entry| format!("it is `{}`", entry.signature)).collect()
}

fn bare(error: &EvalAltResult) -> String {
    let text = error.to_string();
    text.split(" (line ").next().unwrap_or(&text).to_owned()
}

fn lowercase_start(text: &str) -> String {
    let mut characters = text.chars();
    characters.next().map_or_else(String::new, |first| first.to_lowercase().chain(characters).collect())
}

fn is_missing_semicolon(error: &ParseErrorType) -> bool {
    matches!(error, ParseErrorType::MissingToken(token, _) if token == ";")
}

fn syntax_message(error: &ParseErrorType, begins_line: bool) -> (String, Option<String>) {
    let plain = |message: String| (message, None);
    let advised = |message: &str, help: &str| (message.to_owned(), Some(help.to_owned()));
    match error {
        ParseErrorType::UnexpectedEOF => {
            advised("the text ends too early", "is a bracket, a string or an expression still open?")
        }
        ParseErrorType::BadInput(error) => lexical(error),
        ParseErrorType::MissingToken(token, _) if token == ";" && begins_line => {
            advised("`;` is missing at the end of this line", "every statement but the last ends with `;`")
        }
        ParseErrorType::MissingToken(token, _) if token == ";" => {
            advised("`;` or an operator is missing here", "every statement but the last ends with `;`")
        }
        ParseErrorType::MissingToken(token, purpose) => missing_token(token, purpose),
        ParseErrorType::MissingSymbol(text) => plain(lowercase_start(text)),
        ParseErrorType::UnknownOperator(operator) => plain(format!("there is no operator `{operator}`")),
        ParseErrorType::DuplicatedProperty(key) => plain(format!("the key `{key}` appears twice")),
        ParseErrorType::DuplicatedVariable(name) | ParseErrorType::VariableExists(name) => {
            plain(format!("the variable `{name}` is defined twice"))
        }
        ParseErrorType::VariableUndefined(name) => plain(format!("there is no variable `{name}`")),
        ParseErrorType::ModuleUndefined(name) => plain(format!("there is no module `{name}`")),
        ParseErrorType::FnDuplicatedDefinition(name, count) => {
            plain(format!("the function `{name}` is defined twice for {}", counted(*count, "parameter")))
        }
        ParseErrorType::FnDuplicatedParam(function, name) => {
            plain(format!("the parameter `{name}` of `{function}` appears twice"))
        }
        ParseErrorType::Reserved(word) => (
            format!("`{word}` is a word of the language and cannot be a name"),
            Some(format!("as a key, quote it: `\"{word}\"`")),
        ),
        ParseErrorType::ExprTooDeep => {
            advised("this expression is nested too deeply", "split it up with `let`")
        }
        ParseErrorType::AssignmentToConstant(name) => (constant(name), None),
        ParseErrorType::AssignmentToInvalidLHS(_) => {
            advised("only a variable or a member of one can be set", "to compare, write `==`")
        }
        ParseErrorType::PropertyExpected => advised(
            "a key or a property name is missing here",
            "a key with other characters than letters and digits is quoted: `\"Ca^2+\": …`",
        ),
        ParseErrorType::VariableExpected => plain("a variable name is missing here".to_owned()),
        ParseErrorType::ExprExpected(_) => plain("an expression is missing here".to_owned()),
        ParseErrorType::WrongFnDefinition => {
            plain("functions are defined at the top level, outside of blocks".to_owned())
        }
        ParseErrorType::WrongDocComment => {
            plain("`///` may only stand before a function: write `//`".to_owned())
        }
        ParseErrorType::LoopBreak => plain("`break` and `continue` belong inside a loop".to_owned()),
        ParseErrorType::MismatchedType(wanted, found) => plain(mismatch(wanted, found)),
        other => plain(lowercase_start(&other.to_string())),
    }
}

fn missing_token(token: &str, purpose: &str) -> (String, Option<String>) {
    let list = |close: &str, what: &str| {
        (format!("`,` or `{close}` is missing here"), Some(format!("{what} is still open")))
    };
    match token {
        "," if purpose.contains("array") => list("]", "an array `[…`"),
        "," if purpose.contains("map") => list("}", "a map `#{ …`"),
        "," if purpose.contains("argument") => list(")", "a call `f(…`"),
        "}" => (
            "`}` is missing at the end".to_owned(),
            Some("a block `{ …` or a map `#{ …` is still open".to_owned()),
        ),
        _ => (format!("`{token}` is missing {}", lowercase_start(purpose).trim()), None),
    }
}

fn lexical(error: &LexError) -> (String, Option<String>) {
    match error {
        LexError::UnterminatedString => (
            "this text has no closing quote".to_owned(),
            Some("text over several lines stands in back-ticks".to_owned()),
        ),
        LexError::UnexpectedInput(text) if matches!(text.as_str(), ";" | "," | ")" | "]" | "}") => {
            (format!("`{text}` does not fit here"), Some("is an expression missing before it?".to_owned()))
        }
        LexError::UnexpectedInput(text) => (
            format!("`{text}` has no meaning here"),
            (!text.is_ascii())
                .then(|| "outside of quotes only plain letters, digits and signs are read".to_owned()),
        ),
        LexError::ImproperSymbol(sign, _) if sign == "=" => {
            ("`=` sets a variable".to_owned(), Some("to compare, write `==`".to_owned()))
        }
        LexError::MalformedNumber(text) => (format!("`{text}` is not a number"), None),
        LexError::MalformedEscapeSequence(text) => {
            (format!("`{text}` is not an escape"), Some("a backslash itself is written `\\\\`".to_owned()))
        }
        LexError::MalformedIdentifier(text) => (format!("`{text}` is not a name"), None),
        // Our own refusals (`syntax.rs`) are complete sentences with advice.
        LexError::Runtime(text) => match text.split_once(": ") {
            Some((message, help)) => (message.to_owned(), Some(help.to_owned())),
            None => (text.clone(), None),
        },
        other => (lowercase_start(&other.to_string()), None),
    }
}

/// Whether nothing but space stands before the position in its line.
fn begins_line(text: &str, position: Position) -> bool {
    let Some(line) = position.line().filter(|line| *line > 1) else { return false };
    let before = position.position().unwrap_or(1).saturating_sub(1);
    text.lines().nth(line - 1).unwrap_or("").chars().take(before).all(char::is_whitespace)
}

/// Whether the text ends before the position: then its last code is shown instead.
fn is_beyond(text: &str, position: Position) -> bool {
    let Some(line) = position.line() else { return false };
    text.lines().nth(line - 1).is_none_or(|text| text.trim().is_empty())
}

/// Line and column of the last character of code before the line of `position`.
fn last_code_before(text: &str, position: Position) -> Option<(usize, usize)> {
    let lines: Vec<&str> = text.lines().take(position.line()? - 1).collect();
    let (index, line) = lines.iter().enumerate().rev().find(|(_, line)| {
        let code = line.trim();
        !code.is_empty() && !code.starts_with("//")
    })?;
    let code = line.split("//").next().unwrap_or(line).trim_end();
    Some((index + 1, code.chars().count().max(1)))
}
