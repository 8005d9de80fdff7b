//! Entries as a person types them: is this one finished, and does it ask for its value?

use rhai::{LexError, ParseErrorType, Position};

use super::ScriptEngine;

/// Whether an entry can be submitted.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Status {
    /// More must follow: a bracket, a string or an expression is open.
    Incomplete,
    /// Complete, rightly or wrongly.
    Complete,
}

/// Whether `text` is a finished entry.
#[must_use]
pub fn status(engine: &ScriptEngine, text: &str) -> Status {
    let Some((error, position)) = engine.parse_error(text) else { return Status::Complete };
    if asks_for_more(&error, text) || beyond_end(position, text) {
        Status::Incomplete
    } else {
        Status::Complete
    }
}

fn asks_for_more(error: &ParseErrorType, text: &str) -> bool {
    match error {
        ParseErrorType::UnexpectedEOF => true,
        // Only back-tick and raw strings may span lines.
        ParseErrorType::BadInput(LexError::UnterminatedString) => !open_quote_is_plain(text),
        ParseErrorType::WrongDocComment => {
            text.lines().next_back().is_some_and(|line| line.trim_start().starts_with("///"))
        }
        _ => false,
    }
}

fn beyond_end(position: Position, text: &str) -> bool {
    let last = text.lines().count().max(1);
    let Some(line) = position.line() else { return false };
    let length = text.lines().next_back().map_or(0, |line| line.chars().count());
    line > last || (line == last && position.position().unwrap_or(0) > length)
}

fn open_quote_is_plain(text: &str) -> bool {
    matches!(Scan::of(text).open, Open::Quote)
}

/// Whether the last thing of `text` that is no comment is a semicolon: then its value is not shown.
#[must_use]
pub fn ends_with_semicolon(text: &str) -> bool {
    Scan::of(text).last == Some(';')
}

/// Byte range of what follows the last semicolon or finished block outside of brackets, up to the last character of code.
pub(super) fn last_statement(text: &str) -> (usize, usize) {
    let scan = Scan::of(text);
    (scan.statement_start.min(scan.code_end), scan.code_end)
}

/// The text cut into pieces that can each be read alone, where that can be seen: after a semicolon outside of brackets
/// with the rest of its line, and after a block that the next word does not continue.
pub(super) fn pieces(text: &str) -> Vec<&str> {
    let mut pieces = Vec::new();
    let mut start = 0;
    for cut in Scan::of(text).cuts {
        let rest = &text[cut..];
        let line = &rest[..rest.find('\n').map_or(rest.len(), |end| end + 1)];
        // A comment behind a statement belongs to it.
        let noted = line.trim().is_empty() || line.trim_start().starts_with("//");
        let end = if noted { cut + line.len() } else { cut };
        if end > start {
            pieces.push(&text[start..end]);
            start = end;
        }
    }
    if !text[start..].trim().is_empty() {
        pieces.push(&text[start..]);
    }
    pieces
}

/// Whether what follows a closing brace begins a statement of its own.
fn begins_anew(rest: &str) -> bool {
    let rest = rest.trim_start();
    // A text has no value that a block could be joined with.
    if rest.starts_with(['`', '"', '\'']) {
        return true;
    }
    let word: String = rest.chars().take_while(|c| c.is_ascii_alphanumeric() || *c == '_').collect();
    !word.is_empty() && !["else", "catch", "while", "until", "in", "is"].contains(&word.as_str())
}

/// The last character of code, and what is still open at the end.
struct Scan {
    last: Option<char>,
    open: Open,
    brackets: i32,
    /// Where the last statement begins.
    statement_start: usize,
    /// Where the last character of code or of a quotation ends.
    code_end: usize,
    /// Ends of statements outside of brackets.
    cuts: Vec<usize>,
}

#[derive(Clone, Copy, PartialEq, Eq)]
enum Open {
    Code,
    Quote,
    Character,
    BackTick,
    Line,
    /// Block comments nest.
    Block(u32),
}

impl Scan {
    fn of(text: &str) -> Self {
        let mut scan = Self {
            last: None,
            open: Open::Code,
            brackets: 0,
            statement_start: 0,
            code_end: 0,
            cuts: Vec::new(),
        };
        let mut characters = text.char_indices().peekable();
        while let Some((index, c)) = characters.next() {
            let next = characters.peek().map(|(_, next)| *next);
            if scan.step(c, next) {
                characters.next();
            } else if !c.is_whitespace() && !matches!(scan.open, Open::Line | Open::Block(_)) {
                scan.code_end = index + c.len_utf8();
            }
            if c == ';' && scan.open == Open::Code && scan.brackets == 0 && scan.code_end == index + 1 {
                scan.statement_start = index + 1;
                scan.cuts.push(index + 1);
            }
            let closed = c == '}' && scan.open == Open::Code && scan.brackets == 0;
            if closed && begins_anew(&text[index + 1..]) {
                scan.statement_start = index + 1;
                scan.cuts.push(index + 1);
            }
        }
        scan
    }

    /// Returns whether `next` was used up as well.
    fn step(&mut self, c: char, next: Option<char>) -> bool {
        match (self.open, c, next) {
            (Open::Code, '/', Some('/')) => self.open = Open::Line,
            (Open::Code, '/', Some('*')) => self.open = Open::Block(1),
            (Open::Block(depth), '/', Some('*')) => self.open = Open::Block(depth + 1),
            (Open::Block(depth), '*', Some('/')) => {
                self.open = if depth == 1 { Open::Code } else { Open::Block(depth - 1) }
            }
            (Open::Quote | Open::Character, '\\', Some(_)) => {}
            (Open::Line, '\n', _) => return self.now(Open::Code),
            (Open::Quote, '"', _) | (Open::Character, '\'', _) | (Open::BackTick, '`', _) => {
                return self.now(Open::Code);
            }
            (Open::Code, _, _) => return self.code(c),
            _ => return false,
        }
        true
    }

    fn now(&mut self, open: Open) -> bool {
        self.open = open;
        false
    }

    fn code(&mut self, c: char) -> bool {
        if !c.is_whitespace() {
            self.last = Some(c);
        }
        self.brackets += match c {
            '(' | '[' | '{' => 1,
            ')' | ']' | '}' => -1,
            _ => 0,
        };
        match c {
            '"' => self.now(Open::Quote),
            '\'' => self.now(Open::Character),
            '`' => self.now(Open::BackTick),
            _ => false,
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn finished_and_unfinished_entries() {
        let engine = ScriptEngine::default();
        for open in [
            "let x = [1,",
            "fn f(a) {",
            "if true {",
            "f(1,",
            "1 +",
            "let s = `two",
            "#{ a: 1,",
            "x.map(|v| {",
            "let",
        ] {
            assert_eq!(status(&engine, open), Status::Incomplete, "{open}");
        }
        for done in [
            "1 + 1",
            "let x = 2;",
            "fn f(a) { a }",
            "\"open",
            "1 + ) 2",
            "",
            "// note",
            "`a ${1} b`",
            "let x = 10^2",
        ] {
            assert_eq!(status(&engine, done), Status::Complete, "{done}");
        }
    }

    #[test]
    fn the_last_statement() {
        let of = |text: &'static str| {
            let (start, end) = last_statement(text);
            &text[start..end]
        };
        assert_eq!(of("let a = 1; a/2 // half"), " a/2");
        assert_eq!(of("a.map(|v| { let b = v; b })"), "a.map(|v| { let b = v; b })");
        assert_eq!(of("\";\" + 'x'  /* ; */"), "\";\" + 'x'");
        assert_eq!(of("fn f() { 1 } `a ${f()}`"), " `a ${f()}`");
        assert_eq!(of("if a { 1 } else { 2 }"), "if a { 1 } else { 2 }");
        assert_eq!(of("a; // x"), "");
        assert_eq!(of(""), "");
    }

    #[test]
    fn pieces_can_be_read_alone() {
        #[track_caller]
        fn case(text: &str, expected: &[&str]) {
            assert_eq!(pieces(text), expected);
        }
        case("let a = 1; let b = `;`; b", &["let a = 1;", " let b = `;`;", " b"]);
        case("let a = 1; // one\nlet b = 2", &["let a = 1; // one\n", "let b = 2"]);
        case("fn f(x) { x; x }\nlet y = f(2);", &["fn f(x) { x; x }\n", "let y = f(2);"]);
        case("if a { 1; } else { 2; }\nb", &["if a { 1; } else { 2; }\n", "b"]);
        case("let m = #{ a: 1 }.a; m", &["let m = #{ a: 1 }.a;", " m"]);
        case("fn f() { 1 } `a ${f()}`", &["fn f() { 1 }", " `a ${f()}`"]);
        case("", &[]);
    }

    #[test]
    fn a_semicolon_outside_strings_and_comments() {
        for yes in ["a;", "a; // note", "a; /* /* x */ */\n", "\"x\";", "`;`;", "a;  \n\n"] {
            assert!(ends_with_semicolon(yes), "{yes}");
        }
        for no in ["a", "\"a;\"", "a // ;", "a /* ; */", "`b;`", "a; b", "'\\'';x"] {
            assert!(!ends_with_semicolon(no), "{no}");
        }
    }
}
