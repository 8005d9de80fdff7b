//! Messages: what is wrong, where, and what to write instead.
//!
//! ```text
//! error: unknown key `ph`
//!   in lake.rhai, line 3, column 28
//!   3 | let lake = sample(#{ Ca: 1, ph: 8 });
//!     |                             ^^
//!   help: did you mean `pH`?
//! ```

use std::io::Write;

use lysocline_engine::script::Diagnostic;
use lysocline_engine::script::diagnostic::{Frame, Kind, Place};
use unicode_width::UnicodeWidthStr;

/// Columns a tab moves on by, at most.
const TAB: usize = 4;

/// Prints messages on standard error.
pub struct Report {
    /// Whether colours may be used.
    pub color: bool,
}

impl Report {
    /// Prints one message; standard error that cannot be written is no reason to fail.
    pub fn print(&self, diagnostic: &Diagnostic) {
        let _ = writeln!(std::io::stderr().lock(), "{}", self.text(diagnostic));
    }

    /// The message as text, without the last line end.
    pub fn text(&self, diagnostic: &Diagnostic) -> String {
        let mut lines = vec![self.headline(diagnostic)];
        if let Some(place) = &diagnostic.place {
            lines.extend(self.excerpt(place, diagnostic.label.as_deref()));
        }
        lines.extend(diagnostic.help.iter().flat_map(|help| self.help(help)));
        lines.extend(calls(&diagnostic.trace));
        lines.join("\n")
    }

    fn headline(&self, diagnostic: &Diagnostic) -> String {
        match diagnostic.kind {
            Kind::Halted(_) => self.painted(YELLOW, &diagnostic.message),
            _ => format!("{}: {}", self.painted(RED, "error"), diagnostic.message),
        }
    }

    fn excerpt(&self, place: &Place, label: Option<&str>) -> Vec<String> {
        let number = place.line.to_string();
        let margin = " ".repeat(number.len());
        let (before, marked) = columns(place);
        let carets = self.painted(RED, &"^".repeat(marked));
        let label = label.map(|label| format!(" {label}")).unwrap_or_default();
        vec![
            self.painted(DIM, &format!("  {}:{}:{}", place.source, place.line, place.column)),
            format!("{} {}", self.painted(DIM, &format!("  {number} |")), expanded(&place.text)),
            format!("{} {}{carets}{label}", self.painted(DIM, &format!("  {margin} |")), " ".repeat(before)),
        ]
    }

    fn help(&self, help: &str) -> Vec<String> {
        let start = self.painted(GREEN, "help");
        help.lines()
            .enumerate()
            .map(|(i, line)| if i == 0 { format!("  {start}: {line}") } else { format!("        {line}") })
            .collect()
    }

    fn painted(&self, style: &str, text: &str) -> String {
        if self.color { format!("\u{1b}[{style}m{text}\u{1b}[0m") } else { text.to_owned() }
    }
}

const RED: &str = "1;31";
const YELLOW: &str = "33";
const GREEN: &str = "32";
const DIM: &str = "2";

fn calls(trace: &[Frame]) -> Vec<String> {
    const SHOWN: usize = 5;
    let line = |frame: &Frame| {
        format!(
            "  {} was called at {}:{}:{}",
            frame.what, frame.place.source, frame.place.line, frame.place.column
        )
    };
    let mut lines: Vec<String> = trace.iter().take(SHOWN).map(line).collect();
    if trace.len() > SHOWN {
        lines.push(format!("  and {} calls more", trace.len() - SHOWN));
    }
    lines
}

/// The line with its tabs as spaces.
fn expanded(line: &str) -> String {
    let mut text = String::new();
    for c in line.chars() {
        match c {
            '\t' => text.push_str(&" ".repeat(TAB - text.width() % TAB)),
            c if c.is_control() => text.push('\u{fffd}'),
            c => text.push(c),
        }
    }
    text
}

/// Columns on the screen before the place, and of the place itself: a wide character takes two, a tab several.
fn columns(place: &Place) -> (usize, usize) {
    let upto = |count: usize| expanded(&place.text.chars().take(count).collect::<String>()).width();
    let beyond = (place.column - 1).saturating_sub(place.text.chars().count());
    let before = upto(place.column - 1) + beyond;
    let after = upto(place.column - 1 + place.width) + beyond;
    (before, after.saturating_sub(before).max(1))
}

#[cfg(test)]
mod tests {
    use super::*;

    #[track_caller]
    fn drawn(text: &str, column: usize, width: usize, expected: &str) {
        let place = Place { source: "a.rhai".to_owned(), line: 1, column, width, text: text.to_owned() };
        let lines = Report { color: false }.excerpt(&place, None);
        assert_eq!(lines[1..].join("\n"), expected);
    }

    #[test]
    fn the_carets_stand_under_the_token() {
        drawn("let ph = 1;", 5, 2, "  1 | let ph = 1;\n    |     ^^");
        drawn("\tx + y", 2, 1, "  1 |     x + y\n    |     ^");
        drawn("\"水\" + y", 7, 1, "  1 | \"水\" + y\n    |        ^");
        drawn("f(", 3, 1, "  1 | f(\n    |   ^");
    }
}
