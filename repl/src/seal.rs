//! The sealed block: what a script gave, and everything it takes to see whether it still does.
//!
//! It stands at the end of the script as comment lines, so that the file stays a script. Its text is TOML:
//!
//! ```text
//! // ==== sealed by lysocline 0.1.0 ====
//! // format = 1
//! // script = "5f0c…"                      digest of everything above the block
//! // values = [
//! //   { label = "pH", value = 8.1, … },
//! // ]
//! // ==== ledger freshwater ====
//! // …                                     the ledger as it was, in the layout of ledger files
//! // ==== end of seal 9c31… ====           digest of the block
//! ```

use std::fmt::Write;

use lysocline_engine::ledger::{Ledger, file, save};
use lysocline_engine::script::Record;
use lysocline_engine::script::record::Recorded;
use lysocline_engine::script::sandbox::digest_of;
use toml::{Table, Value};

/// The layout written here. A file with a higher number was sealed by a later version.
const FORMAT: i64 = 1;

const BEGIN: &str = "// ==== sealed by lysocline ";
const LEDGER: &str = "// ==== ledger ";
const END: &str = "// ==== end of seal ";
const CLOSE: &str = " ====";

/// What a sealed block holds.
#[derive(Debug, Clone)]
pub struct Seal {
    /// The program that sealed it.
    pub program: String,
    /// Digest of the script above the block.
    pub script: String,
    /// The words it ran with; [`Seal`]s are verified with the same.
    pub arguments: Vec<String>,
    /// Files the script read, as named from its folder, each with its digest.
    pub files: Vec<(String, String)>,
    /// What random draws started from.
    pub seeds: Vec<i64>,
    /// Recorded and checked values, in order.
    pub values: Vec<Record>,
    /// Shipped ledgers the script used, as they were.
    pub ledgers: Vec<Ledger>,
}

/// Why a block cannot be used.
#[derive(Debug, Clone, PartialEq, Eq, thiserror::Error)]
pub enum SealError {
    /// The end is missing.
    #[error("the seal is cut off: its last line, `{}…`, is missing", END)]
    CutOff,
    /// Its digest differs.
    #[error("the seal was edited after it was written: its lines no longer match its digest")]
    Edited,
    /// A later layout.
    #[error("the file was sealed by lysocline {program} in format {format}, and this version reads formats up to {max}", max = FORMAT)]
    Newer {
        /// The program that sealed it.
        program: String,
        /// Its layout.
        format: i64,
    },
    /// A line at fault.
    #[error("the seal cannot be read: {0}")]
    Unreadable(String),
    /// Something follows the block.
    #[error("there is text below the seal; move it above, and seal again")]
    TextBelow,
}

/// The script and the block below it, if there is one.
///
/// # Errors
///
/// Why the block cannot be used; the script is returned all the same.
pub fn split(text: &str) -> (&str, Result<Option<Seal>, SealError>) {
    let Some(start) = start_of(text) else { return (text, Ok(None)) };
    let (script, block) = text.split_at(start);
    (script, read(block).map(Some))
}

/// The last line that begins a block.
fn start_of(text: &str) -> Option<usize> {
    let mut at = 0;
    let mut found = None;
    for line in text.split_inclusive('\n') {
        if line.starts_with(BEGIN) {
            found = Some(at);
        }
        at += line.len();
    }
    found
}

fn read(block: &str) -> Result<Seal, SealError> {
    let block = block.replace("\r\n", "\n");
    let end = block.find(&format!("\n{END}")).ok_or(SealError::CutOff)? + 1;
    let (inside, last) = block.split_at(end);
    let (last, below) = last.split_once('\n').unwrap_or((last, ""));
    let digest = last.strip_prefix(END).and_then(|rest| rest.strip_suffix(CLOSE)).ok_or(SealError::CutOff)?;
    if !below.trim().is_empty() {
        return Err(SealError::TextBelow);
    }
    let mut parts = inside.split_inclusive('\n').collect::<Vec<_>>();
    let opening = parts.remove(0);
    let program =
        opening.trim_end().strip_prefix(BEGIN).and_then(|rest| rest.strip_suffix(CLOSE)).unwrap_or("?");
    let mut head = String::new();
    let mut ledgers: Vec<(String, String)> = Vec::new();
    for line in parts {
        if let Some(name) = line.trim_end().strip_prefix(LEDGER).and_then(|rest| rest.strip_suffix(CLOSE)) {
            ledgers.push((name.to_owned(), String::new()));
            continue;
        }
        let into = ledgers.last_mut().map_or(&mut head, |(_, text)| text);
        let line = line.strip_prefix("//").unwrap_or(line);
        into.push_str(line.strip_prefix(' ').unwrap_or(line));
    }
    // The layout is asked first: a later one may compute its digest in another way.
    let table: Table = head.parse().map_err(|error: toml::de::Error| unreadable(error.message()))?;
    let format =
        table.get("format").and_then(Value::as_integer).ok_or_else(|| unreadable("`format` is missing"))?;
    if format > FORMAT {
        return Err(SealError::Newer { program: program.to_owned(), format });
    }
    if digest != digest_of(inside.as_bytes()) {
        return Err(SealError::Edited);
    }
    let ledgers = ledgers.iter().map(|(name, text)| ledger(name, text));
    Ok(Seal {
        program: program.to_owned(),
        script: text_of(&table, "script")?,
        files: pairs(&table)?,
        arguments: list(&table, "arguments").iter().filter_map(Value::as_str).map(str::to_owned).collect(),
        seeds: list(&table, "seeds").iter().filter_map(Value::as_integer).collect(),
        values: list(&table, "values").iter().map(record).collect::<Result<_, _>>()?,
        ledgers: ledgers.collect::<Result<_, _>>()?,
    })
}

/// A sealed ledger. What it names rather than holds, such as shipped formation data, may have changed since.
fn ledger(name: &str, text: &str) -> Result<Ledger, SealError> {
    let ledger = file::load(name, text).map_err(|faults| {
        let faults: Vec<String> = faults.iter().map(ToString::to_string).collect();
        unreadable(&format!("the ledger `{name}`: {}", faults.join("; ")))
    })?;
    let sealed = text.lines().find_map(|line| line.strip_prefix("# digest "));
    if sealed.is_some_and(|sealed| sealed != ledger.digest()) {
        let why = format!(
            "the ledger `{name}` names shipped constants that have changed since, so it cannot be put together again"
        );
        return Err(unreadable(&why));
    }
    Ok(ledger)
}

fn unreadable(why: &str) -> SealError {
    SealError::Unreadable(why.to_owned())
}

fn text_of(table: &Table, key: &str) -> Result<String, SealError> {
    let text = table.get(key).and_then(Value::as_str).map(str::to_owned);
    text.ok_or_else(|| unreadable(&format!("`{key}` is missing")))
}

fn list(table: &Table, key: &str) -> Vec<Value> {
    table.get(key).and_then(Value::as_array).cloned().unwrap_or_default()
}

fn pairs(table: &Table) -> Result<Vec<(String, String)>, SealError> {
    let pair = |value: &Value| {
        let entry = value.as_table().ok_or_else(|| unreadable("a file is no table"))?;
        Ok((text_of(entry, "path")?, text_of(entry, "digest")?))
    };
    list(table, "files").iter().map(pair).collect()
}

fn record(value: &Value) -> Result<Record, SealError> {
    let entry = value.as_table().ok_or_else(|| unreadable("a value is no table"))?;
    let label = text_of(entry, "label")?;
    let number = |key: &str| {
        entry.get(key).and_then(|value| value.as_float().or(value.as_integer().map(|n| n as f64)))
    };
    let value = match number("value") {
        Some(value) => Recorded::Number {
            value,
            sigma: number("sigma"),
            unit: entry.get("unit").and_then(Value::as_str).unwrap_or("").to_owned(),
        },
        None => Recorded::Text(text_of(entry, "text")?),
    };
    Ok(Record { label, value, expected: None })
}

impl Seal {
    /// The block, to stand below the script.
    #[must_use]
    pub fn text(&self) -> String {
        let mut text = format!("{BEGIN}{}{CLOSE}\n", self.program);
        let mut head = format!("format = {FORMAT}\nscript = {}\n", quoted(&self.script));
        if !self.arguments.is_empty() {
            let words: Vec<String> = self.arguments.iter().map(|word| quoted(word)).collect();
            let _ = writeln!(head, "arguments = [{}]", words.join(", "));
        }
        if !self.seeds.is_empty() {
            let _ = writeln!(head, "seeds = {:?}", self.seeds);
        }
        let files = self
            .files
            .iter()
            .map(|(path, digest)| format!("path = {}, digest = {}", quoted(path), quoted(digest)));
        rows(&mut head, "files", files);
        rows(&mut head, "values", self.values.iter().map(row));
        commented(&mut text, &head);
        for ledger in &self.ledgers {
            let _ = writeln!(text, "{LEDGER}{}{CLOSE}", ledger.name());
            let _ = writeln!(text, "// # digest {}", ledger.digest());
            commented(&mut text, &compact(&save::to_text(ledger)));
        }
        let digest = digest_of(text.as_bytes());
        let _ = writeln!(text, "{END}{digest}{CLOSE}");
        text
    }
}

fn commented(text: &mut String, lines: &str) {
    for line in lines.lines() {
        let _ = writeln!(text, "// {line}");
    }
}

fn rows(text: &mut String, key: &str, rows: impl Iterator<Item = String>) {
    let rows: Vec<String> = rows.map(|row| format!("  {{ {row} }},\n")).collect();
    if !rows.is_empty() {
        let _ = writeln!(text, "{key} = [\n{}]", rows.concat());
    }
}

fn row(record: &Record) -> String {
    let label = format!("label = {}", quoted(&record.label));
    match &record.value {
        Recorded::Text(text) => format!("{label}, text = {}", quoted(text)),
        Recorded::Number { value, sigma, unit } => {
            let sigma = sigma.map(|sigma| format!(", sigma = {}", float(sigma))).unwrap_or_default();
            let unit = if unit.is_empty() { String::new() } else { format!(", unit = {}", quoted(unit)) };
            format!("{label}, value = {}{sigma}{unit}", float(*value))
        }
    }
}

/// Every digit, as TOML writes it.
fn float(value: f64) -> String {
    if value.is_nan() { "nan".to_owned() } else { format!("{value:?}") }
}

/// A text on one line, whatever it holds.
fn quoted(text: &str) -> String {
    let escaped = |c: char| match c {
        '"' => "\\\"".to_owned(),
        '\\' => "\\\\".to_owned(),
        c if c.is_control() => format!("\\u{:04X}", u32::from(c)),
        c => c.to_string(),
    };
    format!("\"{}\"", text.chars().map(escaped).collect::<String>())
}

/// A ledger's text with each entry on a line of its own.
fn compact(text: &str) -> String {
    let Ok(table) = text.parse::<Table>() else { return text.to_owned() };
    let mut out = String::new();
    let is_entries = |value: &Value| value.as_array().is_some_and(|items| items.iter().all(Value::is_table));
    // Name, edition and model first, the constants below.
    let (entries, head): (Vec<_>, Vec<_>) = table.iter().partition(|(_, value)| is_entries(value));
    for (key, value) in head.into_iter().chain(entries) {
        match value {
            Value::Array(items) if is_entries(value) => rows(
                &mut out,
                key,
                items.iter().filter_map(Value::as_table).map(|entry| {
                    entry
                        .iter()
                        .map(|(key, value)| format!("{key} = {}", inline(value)))
                        .collect::<Vec<_>>()
                        .join(", ")
                }),
            ),
            value => {
                let _ = writeln!(out, "{key} = {}", inline(value));
            }
        }
    }
    out
}

fn inline(value: &Value) -> String {
    match value {
        Value::String(text) => quoted(text),
        Value::Float(number) => float(*number),
        Value::Array(items) => format!("[{}]", items.iter().map(inline).collect::<Vec<_>>().join(", ")),
        Value::Table(table) => {
            let members = table.iter().map(|(key, value)| format!("{} = {}", quoted(key), inline(value)));
            format!("{{ {} }}", members.collect::<Vec<_>>().join(", "))
        }
        other => other.to_string(),
    }
}

/// Whether a value still is what was sealed: within 1e-9 of it, or a thousandth of its standard uncertainty, whichever is
/// more, and its uncertainty within a thousandth. Texts have to be the same.
#[must_use]
pub fn agrees(sealed: &Recorded, now: &Recorded) -> bool {
    match (sealed, now) {
        (
            Recorded::Number { value: a, sigma, unit },
            Recorded::Number { value: b, sigma: now_sigma, unit: now_in },
        ) => {
            let allowed = (1e-9 * a.abs()).max(sigma.unwrap_or(0.0) / 1000.0);
            let same_value = (a - b).abs() <= allowed || a == b || (a.is_nan() && b.is_nan());
            let same_sigma = match (sigma, now_sigma) {
                (Some(then), Some(now)) => (then - now).abs() <= 1e-3 * then.abs().max(now.abs()),
                (then, now) => then == now,
            };
            unit == now_in && same_value && same_sigma
        }
        (a, b) => a == b,
    }
}

#[cfg(test)]
mod tests {
    use lysocline_engine::ledger::shipped;

    use super::*;

    fn seal() -> Seal {
        let number = |value, sigma, unit: &str| Recorded::Number { value, sigma, unit: unit.to_owned() };
        let record = |label: &str, value| Record { label: label.to_owned(), value, expected: None };
        Seal {
            program: "0.1.0".into(),
            script: "abc".into(),
            arguments: vec!["file=a \"b\".csv".into(), "-x".into()],
            files: vec![("a \"b\".csv".into(), "12".into())],
            seeds: vec![7],
            values: vec![
                record("pH", number(8.100_000_000_000_001, Some(0.02), "")),
                record("Ca", number(1.0, None, "mmol/kg")),
                record("word", Recorded::Text("two\nlines".into())),
                record("odd", number(f64::INFINITY, None, "")),
            ],
            ledgers: vec![shipped::as_shipped("freshwater").unwrap()],
        }
    }

    #[test]
    fn what_is_written_is_read_back() {
        let (seal, script) = (seal(), "let a = 1;\n");
        let whole = format!("{script}{}", seal.text());
        let (found, read) = split(&whole);
        let read = read.unwrap().unwrap();
        assert_eq!(
            (found, &read.program, &read.script, &read.files, &read.seeds),
            (script, &seal.program, &seal.script, &seal.files, &seal.seeds)
        );
        assert_eq!((&read.arguments, &read.values), (&seal.arguments, &seal.values));
        assert_eq!(read.ledgers[0].digest(), seal.ledgers[0].digest());
    }

    #[test]
    fn a_broken_block_says_what_is_wrong() {
        let text = seal().text();
        let fault = |text: &str| split(text).1.unwrap_err();
        assert_eq!(fault(&text[..text.len() / 2]), SealError::CutOff);
        assert_eq!(fault(&text.replacen("8.1", "8.2", 1)), SealError::Edited);
        assert_eq!(fault(&format!("{text}let b = 2;\n")), SealError::TextBelow);
        let newer =
            text.replacen("format = 1", "format = 2", 1).replacen("lysocline 0.1.0", "lysocline 9.0.0", 1);
        assert_eq!(fault(&newer), SealError::Newer { program: "9.0.0".into(), format: 2 });
        assert!(split("print(1);").1.unwrap().is_none());
        // Edited on a system that ends lines otherwise, it still reads.
        assert!(split(&text.replace('\n', "\r\n")).1.unwrap().is_some());
    }

    #[test]
    fn small_moves_are_no_moves() {
        let number = |value, sigma| Recorded::Number { value, sigma, unit: String::new() };
        assert!(agrees(&number(8.0, None), &number(8.0 + 4e-9, None)));
        assert!(!agrees(&number(8.0, None), &number(8.0 + 4e-8, None)));
        assert!(agrees(&number(8.0, Some(0.02)), &number(8.000_019, Some(0.020_01))));
        assert!(!agrees(&number(8.0, Some(0.02)), &number(8.0, Some(0.021))));
        assert!(!agrees(&number(8.0, Some(0.02)), &number(8.0, None)));
        assert!(!agrees(&number(0.0, None), &number(1e-12, None)));
        assert!(!agrees(&number(8.0, None), &Recorded::Text("8".into())));
    }
}
