//! Ledgers and constants written as TOML.
//!
//! A file of constants has a `[publication]` and any number of `[[constant]]`: a `name`, a `reaction`, and the options
//! of [`Reaction::read`]. A ledger file lists constants of such files by name. Every fault of a file is reported, each
//! with its line.

use std::collections::BTreeMap;

use toml::Spanned;
use toml::de::{DeTable, DeValue};

use super::ledger::ActivityChoice;
use crate::chem::{Reaction, Species};
use crate::named::{KeyFault, Named, Value};

/// A file of constants from one publication.
#[derive(Debug, Clone)]
pub struct ConstantFile {
    /// How the publication is cited.
    pub citation: String,
    /// Names with their reactions, in file order.
    pub constants: Vec<(String, Reaction)>,
}

/// A ledger file: which constants it takes from which files.
#[derive(Debug, Clone)]
pub struct LedgerFile {
    /// What the ledger is called.
    pub name: String,
    /// Its dated edition.
    pub edition: String,
    /// Its activity model.
    pub activity: ActivityChoice,
    /// Ions that take part in no reaction.
    pub solutes: Vec<Species>,
    /// File keys with the constants taken from each; `None` takes all.
    pub from: Vec<(String, Option<Vec<String>>)>,
}

/// One fault of a file.
#[derive(Debug, Clone, PartialEq, thiserror::Error)]
#[error("line {line}: {message}")]
pub struct FileFault {
    /// Counted from 1.
    pub line: usize,
    /// What is wrong and what would have been right.
    pub message: String,
}

/// Reads a file of constants. `file_key` is the file's name, part of each constant's identity.
///
/// # Errors
///
/// Every fault of the file.
pub fn read_constants(file_key: &str, text: &str) -> Result<ConstantFile, Vec<FileFault>> {
    let table = Lines::parse(text)?;
    let mut faults = Vec::new();
    let citation = match table.read("publication").map(|(_, publication)| publication) {
        Some(Value::Map(mut publication)) => match publication.remove("citation") {
            Some(Value::Text(citation)) => citation,
            _ => String::new(),
        },
        _ => String::new(),
    };
    if citation.is_empty() {
        let message = "a file of constants opens with `[publication]` and its `citation`";
        faults.push(FileFault { line: 1, message: message.into() });
    }
    let mut constants: Vec<(String, Reaction)> = Vec::new();
    for (line, entry) in table.list("constant") {
        let fault = |message: String| FileFault { line, message };
        match read_constant(file_key, &citation, entry) {
            Err(message) => faults.push(fault(message)),
            Ok((name, _)) if constants.iter().any(|(taken, _)| *taken == name) => {
                faults
                    .push(fault(format!("there is a constant `{name}` already: names are unique in a file")));
            }
            Ok(constant) => constants.push(constant),
        }
    }
    if faults.is_empty() { Ok(ConstantFile { citation, constants }) } else { Err(faults) }
}

fn read_constant(file_key: &str, citation: &str, entry: Value) -> Result<(String, Reaction), String> {
    let Value::Map(mut entry) = entry else { return Err("`constant` is a table".into()) };
    let mut text = |key: &str| match entry.remove(key) {
        Some(Value::Text(text)) => Ok(text),
        _ => Err(format!("a constant needs a text `{key}`")),
    };
    let name = text("name")?;
    let equation = text("reaction").map_err(|message| format!("`{name}`: {message}"))?;
    let missing = |key: &str| format!("`{name}`: a constant needs `{key}`");
    if !entry.contains_key("provenance") {
        return Err(missing("provenance") + ", one of `read`, `computed` and `memory`");
    }
    entry.entry("source".into()).or_insert_with(|| Value::Text(citation.into()));
    let identity = format!("{file_key}/{name}");
    let reaction = Reaction::read(&equation, Some(&name), Named::new(entry), Some(&identity));
    let reaction = reaction.map_err(|error| format!("`{name}`: {error}"))?;
    reaction.constant().map_err(|_| missing("log_k") + " or `log_k_terms`")?;
    Ok((name, reaction))
}

/// Reads a ledger file.
///
/// # Errors
///
/// Every fault of the file.
pub fn read_ledger(text: &str) -> Result<LedgerFile, Vec<FileFault>> {
    let table = Lines::parse(text)?;
    let mut from = Vec::new();
    for (line, entry) in table.list("from") {
        from.push(read_from(entry).map_err(|fault| vec![FileFault { line, message: fault.message }])?);
    }
    let mut named = table.named(&["from"]);
    let mut read = || -> Result<LedgerFile, KeyFault> {
        let name = named.text("name")?.ok_or_else(|| KeyFault::new("name", "a ledger needs a `name`"))?;
        let edition = named.text("edition")?.unwrap_or_default();
        let activity = named.text("activity_model")?.unwrap_or_else(|| "davies".into());
        let activity = ActivityChoice::read(&activity, Named::default())?;
        let solutes = named.texts("solutes")?.unwrap_or_default();
        let solutes = solutes.iter().map(|text| Species::parse(text)).collect::<Result<_, _>>();
        let solutes = solutes.map_err(|error| KeyFault::new("solutes", error.to_string()))?;
        std::mem::take(&mut named).finish()?;
        Ok(LedgerFile { name, edition, activity, solutes, from: from.clone() })
    };
    read().map_err(|fault| vec![FileFault { line: table.line_of(&fault.key), message: fault.message }])
}

fn read_from(entry: Value) -> Result<(String, Option<Vec<String>>), KeyFault> {
    let Value::Map(entry) = entry else { return Err(KeyFault::new("from", "`from` is a table")) };
    let mut named = Named::new(entry);
    let file = named.text("file")?.ok_or_else(|| KeyFault::new("file", "`[[from]]` needs a `file`"))?;
    let names = named.texts("constants")?.unwrap_or_else(|| vec!["all".into()]);
    named.finish()?;
    Ok((file, (names != ["all"]).then_some(names)))
}

/// A parsed file that knows the line of each of its keys.
struct Lines<'a> {
    text: &'a str,
    table: Spanned<DeTable<'a>>,
}

impl<'a> Lines<'a> {
    fn parse(text: &'a str) -> Result<Self, Vec<FileFault>> {
        match DeTable::parse(text) {
            Ok(table) => Ok(Self { text, table }),
            Err(error) => {
                let line = error.span().map_or(1, |span| line_at(text, span.start));
                Err(vec![FileFault { line, message: error.message().to_string() }])
            }
        }
    }

    fn read(&self, key: &str) -> Option<(usize, Value)> {
        let value = self.table.get_ref().get(key)?;
        Some((line_at(self.text, value.span().start), to_value(value.get_ref())))
    }

    /// The tables of an array, each with its line.
    fn list(&self, key: &str) -> Vec<(usize, Value)> {
        match self.table.get_ref().get(key).map(Spanned::get_ref) {
            Some(DeValue::Array(array)) => array
                .iter()
                .map(|item| (line_at(self.text, item.span().start), to_value(item.get_ref())))
                .collect(),
            _ => vec![],
        }
    }

    fn named(&self, without: &[&str]) -> Named {
        let entries = self.table.get_ref().iter();
        let kept = entries.filter(|(key, _)| !without.contains(&key.get_ref().as_ref()));
        Named::new(kept.map(|(key, value)| (key.get_ref().to_string(), to_value(value.get_ref()))).collect())
    }

    fn line_of(&self, key: &str) -> usize {
        self.read(key).map_or(1, |(line, _)| line)
    }
}

fn line_at(text: &str, offset: usize) -> usize {
    text[..offset.min(text.len())].bytes().filter(|byte| *byte == b'\n').count() + 1
}

fn to_value(value: &DeValue<'_>) -> Value {
    match value {
        DeValue::String(text) => Value::Text(text.to_string()),
        DeValue::Integer(number) => parse_number(&number.to_string()),
        DeValue::Float(number) => parse_number(&number.to_string()),
        DeValue::Boolean(flag) => Value::Flag(*flag),
        DeValue::Datetime(date) => Value::Text(date.to_string()),
        DeValue::Array(array) => Value::List(array.iter().map(|item| to_value(item.get_ref())).collect()),
        DeValue::Table(table) => Value::Map(
            table
                .iter()
                .map(|(key, value)| (key.get_ref().to_string(), to_value(value.get_ref())))
                .collect::<BTreeMap<_, _>>(),
        ),
    }
}

/// The parser leaves numbers as text; a form Rust does not read (hexadecimal) stays a text and is refused by its reader.
fn parse_number(text: &str) -> Value {
    text.replace('_', "").parse().map_or_else(|_| Value::Text(text.into()), Value::Number)
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn every_fault_of_a_file_is_reported_with_its_line() {
        let text = "[publication]\ncitation = \"Invented (2026)\"\n\n[[constant]]\nname = \"a\"\nreaction = \"H2O <=> H^+\"\n\
                    log_k = -14\nprovenance = \"read\"\n\n[[constant]]\nname = \"b\"\nreaction = \"H2O <=> H^+ + OH^-\"\nlog_q = 1\n\
                    provenance = \"read\"\n\n[[constant]]\nname = \"c\"\nreaction = \"H2O <=> H^+ + OH^-\"\nlog_k = -14\n";
        let faults = read_constants("invented", text).unwrap_err();
        let lines: Vec<(usize, &str)> = faults.iter().map(|f| (f.line, f.message.as_str())).collect();
        assert_eq!(lines[0].0, 4);
        assert!(lines[0].1.contains("not balanced"), "{}", lines[0].1);
        assert_eq!(lines[1], (10, "`b`: unknown key `log_q`; did you mean `log_k`?"));
        assert_eq!(
            lines[2],
            (16, "`c`: a constant needs `provenance`, one of `read`, `computed` and `memory`")
        );
    }

    #[test]
    fn a_function_that_misses_its_stated_value_is_refused() {
        let text = "[publication]\ncitation = \"Invented (2026)\"\n[[constant]]\nname = \"a\"\nreaction = \"H2O <=> H^+ + OH^-\"\n\
                    log_k_terms = { \"1\" = -14.0 }\nvalue_at = [\"25 degC\", -13.0]\nprovenance = \"read\"\n";
        let faults = read_constants("invented", text).unwrap_err();
        assert!(faults[0].message.contains("check the coefficients"), "{}", faults[0]);
    }
}
