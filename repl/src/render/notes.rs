//! What a drawn table does not show, in words below it.

use std::collections::HashMap;

use lysocline_engine::present::{Style, Table, table::FAILURE};

use super::table::one_line;

/// Notes on a table drawn without `hidden_rows` of its rows and without the columns `left_out`, by their titles:
/// what these are, how to see them, and why rows failed. Nothing where there is nothing to say.
pub fn below(table: &Table, hidden_rows: usize, left_out: &[&str], style: Style) -> String {
    let dots = if style.plain { "..." } else { "…" };
    let empty = match (table.columns().len(), table.n_rows()) {
        (0, _) => Some("a table without columns".to_owned()),
        (_, 0) => Some("no rows".to_owned()),
        _ => None,
    };
    let notes = empty
        .into_iter()
        .chain(hidden_rows_note(table.n_rows(), hidden_rows, dots))
        .chain(left_out_note(left_out, dots))
        .chain(failure_notes(table, dots));
    notes.map(|note| wrapped(&note, style.width)).collect()
}

fn hidden_rows_note(all: usize, hidden: usize, dots: &str) -> Option<String> {
    (hidden > 0)
        .then(|| format!("{dots} {} not shown: `.show({all})` shows all {all}", counted(hidden, "row")))
}

fn left_out_note(titles: &[&str], dots: &str) -> Option<String> {
    const NAMED: usize = 6;
    let example = titles.first()?;
    let names: Vec<String> = titles.iter().take(NAMED).map(|title| format!("`{title}`")).collect();
    let more = if titles.len() > NAMED { format!(" {dots}") } else { String::new() };
    Some(format!(
        "{dots} {} to the right: {}{more}; widen the terminal, or choose with `.select([\"{example}\"])`",
        counted(titles.len(), "more column"),
        names.join(", "),
    ))
}

/// Each reason once, with the rows that failed for it.
fn failure_notes(table: &Table, dots: &str) -> Vec<String> {
    const NAMED: usize = 5;
    let mut reasons: Vec<(&str, Vec<usize>)> = Vec::new();
    let mut places: HashMap<&str, usize> = HashMap::new();
    for (row, reason) in (0..table.n_rows()).filter_map(|row| Some((row, table.failure(row)?))) {
        let place = *places.entry(reason).or_insert(reasons.len());
        if place == reasons.len() {
            reasons.push((reason, Vec::new()));
        }
        reasons[place].1.push(row);
    }
    let failed: usize = reasons.iter().map(|(_, rows)| rows.len()).sum();
    let heading = (failed > 0).then(|| format!("{} failed:", counted(failed, "row")));
    let named = reasons.iter().take(NAMED);
    let named = named.map(|(reason, rows)| format!("  {}: {}", numbered(rows, dots), one_line(reason)));
    let unnamed = reasons.len().saturating_sub(NAMED);
    let more = (unnamed > 0).then(|| {
        format!("  {dots} {}: `.column(\"{FAILURE}\")` has them all", counted(unnamed, "more reason"))
    });
    heading.into_iter().chain(named).chain(more).collect()
}

/// `row 3`, `rows 3, 5 to 8`: neighbours drawn together.
fn numbered(rows: &[usize], dots: &str) -> String {
    const NAMED: usize = 8;
    let mut runs: Vec<String> = rows
        .chunk_by(|row, next| row + 1 == *next)
        .take(NAMED + 1)
        .map(|run| match run {
            [first, .., last] => format!("{first} to {last}"),
            _ => run.iter().map(ToString::to_string).collect(),
        })
        .collect();
    if runs.len() > NAMED {
        runs[NAMED] = dots.to_owned();
    }
    format!("{} {}", if rows.len() == 1 { "row" } else { "rows" }, runs.join(", "))
}

fn counted(n: usize, noun: &str) -> String {
    if n == 1 { format!("1 {noun}") } else { format!("{n} {noun}s") }
}

/// A note of one blank in front, broken between words where the terminal ends.
fn wrapped(note: &str, width: Option<usize>) -> String {
    let indent = " ".repeat(1 + note.len() - note.trim_start().len());
    let mut lines = vec![indent.clone()];
    for word in note.split_whitespace() {
        let line = lines.last().map_or(0, |line| line.chars().count());
        let is_first = line == indent.len();
        if !is_first && width.is_some_and(|width| line + 1 + word.chars().count() > width) {
            lines.push(format!("{indent}  {word}"));
        } else if let Some(line) = lines.last_mut() {
            line.push_str(if is_first { "" } else { " " });
            line.push_str(word);
        }
    }
    lines.iter().map(|line| format!("{line}\n")).collect()
}

#[cfg(test)]
mod tests {
    use super::{Style, below};
    use lysocline_engine::present::{Column, Table};

    #[track_caller]
    fn case(failed: impl Fn(usize) -> Option<String>, expected: &str) {
        let table = Table::new([Column::numbers("x", (0..40).map(f64::from))]).unwrap();
        let table = table.with_failures((0..40).map(failed)).unwrap();
        assert_eq!(below(&table, 0, &[], Style::default()), expected);
    }

    #[test]
    fn reasons_of_failure() {
        case(|_| None, "");
        case(|row| (row == 7).then(|| "dry".to_owned()), " 1 row failed:\n   row 7: dry\n");
        case(
            |row| (row % 2 == 0).then(|| "dry".to_owned()),
            " 20 rows failed:\n   rows 0, 2, 4, 6, 8, 10, 12, 14, …: dry\n",
        );
        case(
            |row| (row < 14).then(|| format!("reason {}", row / 2)),
            " 14 rows failed:
   rows 0 to 1: reason 0
   rows 2 to 3: reason 1
   rows 4 to 5: reason 2
   rows 6 to 7: reason 3
   rows 8 to 9: reason 4
   … 2 more reasons: `.column(\"failure\")` has them all
",
        );
    }

    #[test]
    fn columns_left_out() {
        let table = Table::new([Column::numbers("x", [1.0])]).unwrap();
        let titles = ["a", "b [mg/L]", "c", "d", "e", "f", "g", "h"];
        let expected = " … 8 more columns to the right: `a`, `b [mg/L]`, `c`, `d`, `e`, `f` …; widen the terminal, or choose with `.select([\"a\"])`\n";
        assert_eq!(below(&table, 0, &titles, Style::default()), expected);
    }
}
