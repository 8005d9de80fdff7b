//! A report: the script's prose and code with what it showed, in order, and what it rests on. Drawn by [`super::page`] as
//! HTML and by [`super::markdown`] as Markdown.

use std::collections::BTreeSet;

use lysocline_engine::present::{Style, notation};
use lysocline_engine::script::{Record, Shown, Sources};

/// Everything a report is drawn from.
#[derive(Debug)]
pub struct Report {
    /// The script's first heading, else its name.
    pub title: String,
    /// In reading order.
    pub blocks: Vec<Block>,
    /// Recorded and checked values, in order.
    pub records: Vec<Record>,
    /// What the values rest on.
    pub sources: Sources,
    /// How the report was made, one fact a line.
    pub making: Vec<String>,
    /// Why the script did not come to its end.
    pub failure: Option<String>,
    /// When it was made, where the script is watched and the page has to look for a newer one.
    pub watched: Option<String>,
}

/// One piece of a report.
#[derive(Debug, Clone, PartialEq)]
pub enum Block {
    /// Markdown.
    Prose(String),
    /// Lines of script.
    Code(String),
    /// What the code above it showed.
    Output(Shown),
}

/// What begins a line of prose.
const PROSE: &str = "//|";

/// What a reader has to know whatever the script computes.
pub const CAUTIONS: [&str; 2] = [
    "Results depend on the constants chosen, and hold as far as the water is the one that was analysed.",
    "Decisions on drinking water, discharge, dosing or corrosion belong to local codes and licensed practice.",
];

impl Report {
    /// What to be careful about: always, and because of the constants used.
    pub fn cautions(&self) -> Vec<String> {
        let mut cautions: Vec<String> = CAUTIONS.iter().map(ToString::to_string).collect();
        let recalled = self.sources.recalled.len();
        if recalled > 0 {
            let which =
                if recalled == 1 { "One constant".to_owned() } else { format!("{recalled} constants") };
            cautions.push(
                format!(
                    "{which} used here were recalled and cross-checked rather than read in their source; \
                 confirm what a decision rests on."
                )
                .replace("One constant used here were", "One constant used here was"),
            );
        }
        cautions
    }

    /// Warnings of the states computed, and notes the script's functions made, each once.
    pub fn warnings(&self) -> Vec<&str> {
        self.sources.warnings.iter().map(String::as_str).collect()
    }
}

/// The reactions whose constants were taken from one publication; of many the first few.
pub fn taken(equations: &BTreeSet<String>) -> String {
    const SHOWN: usize = 5;
    let shown = equations.iter().take(SHOWN).map(|equation| notation::shown(equation, Style::default()));
    let more = equations.len().saturating_sub(SHOWN);
    let more = (more > 0).then(|| format!("and {more} more"));
    shown.chain(more).collect::<Vec<_>>().join("; ")
}

/// The script cut into prose and code, with each output below the statement that showed it. Records do not cut the code:
/// they stand below the stretch of code that made them.
pub fn blocks(script: &str, shown: &[Shown]) -> Vec<Block> {
    let mut layout =
        Layout { lines: script.lines().collect(), next: 0, records: Vec::new(), blocks: Vec::new() };
    let starts: Vec<usize> = shown.iter().filter_map(statement).collect();
    let mut passed = 0;
    for item in shown {
        if statement(item).is_some() {
            passed += 1;
            continue;
        }
        let end = match starts.get(passed) {
            Some(start) => end_before(&layout.lines, layout.next, start - 1),
            None => layout.lines.len(),
        };
        match item {
            Shown::Message(text) if text.starts_with("wrote ") => {}
            Shown::Record(_) => layout.records.push((end, item.clone())),
            _ => {
                layout.write_to(end);
                layout.blocks.push(Block::Output(item.clone()));
            }
        }
    }
    layout.write_to(layout.lines.len());
    layout.blocks
}

struct Layout<'a> {
    lines: Vec<&'a str>,
    /// The next line to be written, counted from 0.
    next: usize,
    /// Records not yet written, each with the line after its statement.
    records: Vec<(usize, Shown)>,
    blocks: Vec<Block>,
}

impl Layout<'_> {
    /// Writes lines up to `end`, and the records that belong to them.
    fn write_to(&mut self, end: usize) {
        let lines: Vec<&str> = self.lines.get(self.next..end).map(<[&str]>::to_vec).unwrap_or_default();
        for run in lines.chunk_by(|a, b| is_prose(a) == is_prose(b)) {
            write(&mut self.blocks, run);
            self.next += run.len();
            self.write_records();
        }
        self.write_records();
    }

    fn write_records(&mut self) {
        let next = self.next;
        let (due, later) = std::mem::take(&mut self.records).into_iter().partition(|(end, _)| *end <= next);
        self.records = later;
        let due: Vec<(usize, Shown)> = due;
        self.blocks.extend(due.into_iter().map(|(_, record)| Block::Output(record)));
    }
}

fn statement(shown: &Shown) -> Option<usize> {
    match shown {
        Shown::Statement(line) => Some(*line),
        _ => None,
    }
}

/// The line after the statement that ends before `start`: comments and prose ahead of a statement belong to it.
fn end_before(lines: &[&str], from: usize, start: usize) -> usize {
    let start = start.min(lines.len());
    let belongs_to_next = |line: &&str| line.trim().is_empty() || line.trim_start().starts_with("//");
    let trailing =
        lines[from.min(start)..start].iter().rev().take_while(|line| belongs_to_next(line)).count();
    start - trailing
}

fn write(blocks: &mut Vec<Block>, lines: &[&str]) {
    for run in lines.chunk_by(|a, b| is_prose(a) == is_prose(b)) {
        let text: Vec<&str> = match is_prose(run[0]) {
            true => run.iter().map(|line| prose(line)).collect(),
            false => run.to_vec(),
        };
        let text = text.join("\n");
        let text = text.trim_matches('\n').trim_end().to_owned();
        if !text.trim().is_empty() {
            blocks.push(if is_prose(run[0]) { Block::Prose(text) } else { Block::Code(text) });
        }
    }
}

fn is_prose(line: &str) -> bool {
    line.trim_start().starts_with(PROSE)
}

fn prose(line: &str) -> &str {
    let text = line.trim_start().trim_start_matches(PROSE);
    text.strip_prefix(' ').unwrap_or(text)
}

/// The first heading of the prose.
pub fn title(script: &str) -> Option<String> {
    let headings = script.lines().filter(|line| is_prose(line)).map(prose);
    let mut headings = headings.filter_map(|line| line.strip_prefix("# "));
    headings.next().map(|title| title.trim().to_owned())
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn outputs_stand_below_their_statements() {
        let script = "//| # Lake\n//| Two lines.\nlet a = 1;\n\n// why\nprint(a);\nprint(\n  2\n);\n//| End.\nlet b = 3;\n";
        let text = |text: &str| Shown::Text(text.to_owned());
        let shown = [3, 6].map(Shown::Statement).to_vec();
        let shown = [shown, vec![text("1"), Shown::Statement(7), text("2"), Shown::Statement(11)]].concat();
        let expected = [
            Block::Prose("# Lake\nTwo lines.".into()),
            Block::Code("let a = 1;\n\n// why\nprint(a);".into()),
            Block::Output(text("1")),
            Block::Code("print(\n  2\n);".into()),
            Block::Output(text("2")),
            Block::Prose("End.".into()),
            Block::Code("let b = 3;".into()),
        ];
        assert_eq!(blocks(script, &shown), expected);
        assert_eq!(title(script).as_deref(), Some("Lake"));
    }

    #[test]
    fn a_script_that_shows_nothing_is_all_code() {
        assert_eq!(blocks("let a = 1;", &[Shown::Statement(1)]), [Block::Code("let a = 1;".into())]);
        assert_eq!(blocks("", &[]), []);
    }
}
