//! A report as Markdown, for places that show it themselves. Plots are drawn in characters.

use std::fmt::Write;

use lysocline_engine::present::{Style, notation};
use lysocline_engine::script::record::Recorded;
use lysocline_engine::script::{Record, Shown};

use super::plot;
use super::report::{Block, Report};

/// What marks a file as ours, so that a later run may replace it.
pub const MARK: &str = "<!-- generator: lysocline -->";

/// The text.
pub fn draw(report: &Report) -> String {
    let mut text = String::new();
    if !matches!(report.blocks.first(), Some(Block::Prose(first)) if first.starts_with("# ")) {
        let _ = writeln!(text, "# {}\n", report.title);
    }
    report.blocks.iter().for_each(|block| text.push_str(&self::block(block)));
    if let Some(failure) = &report.failure {
        let _ = writeln!(text, "**The script did not come to its end.**\n\n{}", fenced("text", failure));
    }
    let recorded: Vec<&Record> = report.records.iter().filter(|record| record.expected.is_none()).collect();
    if !recorded.is_empty() {
        text.push_str("## Recorded values\n\n| | |\n|---|---:|\n");
        for record in recorded {
            let _ = writeln!(text, "| {} | {} |", in_cell(&record.label), in_cell(&value(record)));
        }
        text.push('\n');
    }
    section(&mut text, "Warnings", report.warnings().iter().map(ToString::to_string));
    section(
        &mut text,
        "Sources of the constants used",
        report
            .sources
            .publications
            .iter()
            .map(|(source, equations)| format!("{source} ({})", super::report::taken(equations))),
    );
    section(&mut text, "Cautions", report.cautions().into_iter());
    let _ = writeln!(text, "---\n\n{}\n\n{MARK}", report.making.join("  \n"));
    text
}

fn block(block: &Block) -> String {
    match block {
        Block::Prose(prose) => format!("{prose}\n\n"),
        Block::Code(code) => fenced("rhai", code) + "\n",
        Block::Output(Shown::Text(shown)) => fenced("text", shown) + "\n",
        Block::Output(Shown::Table(table)) => table.to_markdown(Style::default()) + "\n",
        Block::Output(Shown::Plot(drawn)) => {
            let look = plot::Look { plain: false, color: false, width: 80 };
            fenced("text", &plot::draw(drawn, &look)) + "\n"
        }
        Block::Output(Shown::Message(note)) => format!("> {note}\n\n"),
        Block::Output(Shown::Record(record)) => format!("- {}: **{}**\n\n", record.label, value(record)),
        Block::Output(Shown::Statement(_)) => String::new(),
    }
}

fn value(record: &Record) -> String {
    match &record.value {
        Recorded::Text(text) => text.clone(),
        Recorded::Number { value, sigma, unit } => {
            use lysocline_engine::present::number;
            let number = match sigma {
                Some(sigma) if *sigma > 0.0 => number::shown_with_sigma(*value, *sigma, Style::default()),
                _ => number::shown(*value),
            };
            format!("{number} {}", notation::shown_unit(unit, Style::default())).trim_end().to_owned()
        }
    }
}

fn section(text: &mut String, title: &str, items: impl Iterator<Item = String>) {
    let items: Vec<String> = items.map(|item| format!("- {item}\n")).collect();
    if !items.is_empty() {
        let _ = writeln!(text, "## {title}\n\n{}", items.concat());
    }
}

fn in_cell(text: &str) -> String {
    text.replace('|', "\\|")
}

/// A fence longer than any in the text.
fn fenced(kind: &str, text: &str) -> String {
    let mut fence = "```".to_owned();
    while text.contains(&fence) {
        fence.push('`');
    }
    format!("{fence}{kind}\n{}\n{fence}\n", text.trim_end())
}
