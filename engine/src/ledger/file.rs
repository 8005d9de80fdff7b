//! Ledgers and constants written as TOML.
//!
//! A file of constants has a `[publication]` and any number of `[[constant]]`: a `name`, a `reaction`, and the options of
//! [`Reaction::read`]; `[[formation]]` and `[[element]]` are those of [`standard_formation`]. A ledger file lists constants
//! of such files by name, and may hold entries of its own. Every fault of a file is reported, each with its line.

use std::collections::BTreeMap;

use toml::Spanned;
use toml::de::{DeTable, DeValue};

use super::activity_choice::ActivityChoice;
use super::composition::Constituent;
use super::gas_model::GasModel;
use super::influence;
use super::ledger::Ledger;
use super::shipped;
use super::standard_formation::{self, Elements};
use crate::chem::{Reaction, ReactionError, Species};
use crate::named::{KeyFault, Named, Value};
use crate::text::list;

/// A file of constants from one publication.
#[derive(Debug, Clone, Default)]
pub struct ConstantFile {
    /// How the publication is cited.
    pub citation: String,
    /// Names with their reactions, in file order.
    pub constants: Vec<(String, Reaction)>,
    /// Names with the formation of species from the elements, in file order.
    pub formations: Vec<(String, Reaction)>,
    /// What seawater holds in proportion to its salinity.
    pub composition: Vec<Constituent>,
}

/// A ledger file: which constants it takes from which files, and its own.
#[derive(Debug, Clone)]
pub struct LedgerFile {
    /// What the ledger is called.
    pub name: String,
    /// Its dated edition.
    pub edition: Option<String>,
    /// Its activity model.
    pub activity: ActivityChoice,
    /// Its gas model.
    pub gas_model: GasModel,
    /// Whether its constants are those of seawater.
    pub is_marine: bool,
    /// Ions that take part in no reaction.
    pub solutes: Vec<Species>,
    /// What it takes from files of constants.
    pub from: Vec<From>,
    /// Its own entries.
    pub own: ConstantFile,
}

/// What a ledger takes from one file of constants.
#[derive(Debug, Clone)]
pub struct From {
    /// The file's key.
    pub file: String,
    /// Names of constants; `None` takes all.
    pub constants: Option<Vec<String>>,
    /// Species whose formation is taken; `None` takes all.
    pub formations: Option<Vec<String>>,
    /// Names of constituents of seawater; `None` takes all.
    pub composition: Option<Vec<String>>,
    line: usize,
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
    let lines = Lines::parse(text)?;
    let mut faults = Vec::new();
    let citation = read_citation(&lines);
    if citation.is_none() {
        let message = "a file of constants opens with `[publication]` and its `citation`";
        faults.push(FileFault { line: 1, message: message.into() });
    }
    let file = read_entries(file_key, &citation.unwrap_or_default(), &lines, &mut faults);
    if faults.is_empty() { Ok(file) } else { Err(faults) }
}

/// Reads a file that is all tables and values.
pub(super) fn read_tables(text: &str) -> Result<BTreeMap<String, Value>, Vec<FileFault>> {
    Ok(Lines::parse(text)?.named(&[]).rest())
}

/// Reads the `[[element]]` entries of a file alone.
pub(super) fn read_elements(file_key: &str, text: &str) -> Elements {
    Lines::parse(text)
        .map_or_else(|_| Elements::default(), |lines| elements_of(file_key, &lines, &mut vec![]))
}

/// Reads a ledger with entries of its own and builds it. `file_key` is the file's name.
///
/// # Errors
///
/// Every fault of the file: nothing is half loaded.
pub fn load(file_key: &str, text: &str) -> Result<Ledger, Vec<FileFault>> {
    let file = read_ledger_as(file_key, text)?;
    build(&file)
}

/// Puts a ledger together from its file and the shipped constants it names.
///
/// # Errors
///
/// Every entry that cannot be had.
pub(super) fn build(file: &LedgerFile) -> Result<Ledger, Vec<FileFault>> {
    let mut faults = Vec::new();
    let mut ledger = Ledger::empty(&file.name, file.edition.clone())
        .with_activity(file.activity.clone())
        .with_gas_model(file.gas_model);
    if file.is_marine {
        ledger = ledger.of_seawater();
    }
    for species in &file.solutes {
        ledger = ledger.with_solute(species.clone());
    }
    for from in &file.from {
        let mut fault = |message: String| faults.push(FileFault { line: from.line, message });
        let files = match shipped::constant_files() {
            Ok(files) => files,
            Err(broken) => return Err(vec![FileFault { line: from.line, message: broken.join("; ") }]),
        };
        let Some(found) = files.get(from.file.as_str()) else {
            let known: Vec<&str> = files.keys().copied().collect();
            fault(format!("no file `{}` is shipped: there are {}", from.file, list(&known)));
            continue;
        };
        let chosen =
            |entries: &[(String, Reaction)], wanted: &Option<Vec<String>>, of: &dyn Fn(&str) -> String| {
                match wanted {
                    None => (entries.to_vec(), vec![]),
                    Some(names) => {
                        let find = |name: &String| entries.iter().find(|(own, _)| *own == of(name)).cloned();
                        let missing = names.iter().filter(|name| find(name).is_none()).cloned().collect();
                        (names.iter().filter_map(find).collect(), missing)
                    }
                }
            };
        let formation_name =
            |species: &str| format!("formation of {species}{}", standard_formation::by(&from.file));
        let (constants, missing) = chosen(&found.constants, &from.constants, &str::to_string);
        for name in missing {
            fault(format!("`{}` has no constant `{name}`", from.file));
        }
        let (formations, missing) = chosen(&found.formations, &from.formations, &formation_name);
        for name in missing {
            fault(format!("`{}` has no formation of `{name}`", from.file));
        }
        for constituent in &found.composition {
            if from.composition.as_ref().is_none_or(|names| names.contains(&constituent.name)) {
                ledger = ledger.with_constituent(constituent.clone());
            }
        }
        ledger = with_entries(ledger, &constants, &formations, &mut fault);
    }
    for constituent in &file.own.composition {
        ledger = ledger.with_constituent(constituent.clone());
    }
    let mut fault = |message: String| faults.push(FileFault { line: 1, message });
    ledger = with_entries(ledger, &file.own.constants, &file.own.formations, &mut fault);
    if let Err(unknown) = file.activity.check(&ledger) {
        fault(unknown.message);
    }
    if faults.is_empty() { Ok(ledger) } else { Err(faults) }
}

fn with_entries(
    mut ledger: Ledger,
    constants: &[(String, Reaction)],
    formations: &[(String, Reaction)],
    fault: &mut impl FnMut(String),
) -> Ledger {
    let reactions = constants.iter().map(|(name, reaction)| (name, reaction, false));
    for (name, reaction, is_formation) in reactions.chain(formations.iter().map(|(n, r)| (n, r, true))) {
        let with = if is_formation { Ledger::with_formation } else { Ledger::with_reaction };
        match with(&ledger, name, reaction) {
            Ok(changed) => ledger = changed,
            Err(error) => fault(error.to_string()),
        }
    }
    ledger
}

fn read_citation(lines: &Lines<'_>) -> Option<String> {
    let Some((_, Value::Map(mut publication))) = lines.read("publication") else { return None };
    match publication.remove("citation") {
        Some(Value::Text(citation)) if !citation.is_empty() => Some(citation),
        _ => None,
    }
}

fn elements_of(file_key: &str, lines: &Lines<'_>, faults: &mut Vec<FileFault>) -> Elements {
    let mut elements = Elements::default();
    for entry in lines.entries("element", faults) {
        if let Err(fault) = elements.read(file_key, entry.named()) {
            faults.push(entry.fault(&fault.key, fault.message));
        }
    }
    elements
}

/// Constants and formation data of a file; a source of their own may stand in for the citation.
fn read_entries(
    file_key: &str,
    citation: &str,
    lines: &Lines<'_>,
    faults: &mut Vec<FileFault>,
) -> ConstantFile {
    let mut file = ConstantFile { citation: citation.into(), ..ConstantFile::default() };
    let mut names: BTreeMap<String, usize> = BTreeMap::new();
    let mut check_name = |name: &str, entry: &Entry<'_>| match names.get(name) {
        Some(line) => {
            let message =
                format!("there is a constant `{name}` already, in line {line}: names are unique in a file");
            Err(entry.fault("name", message))
        }
        None => {
            names.insert(name.to_string(), entry.line);
            Ok(())
        }
    };
    for entry in lines.entries("constant", faults) {
        match read_constant(file_key, citation, &entry)
            .and_then(|read| check_name(&read.1, &entry).map(|()| read))
        {
            Ok((false, name, reaction)) => file.constants.push((name, reaction)),
            Ok((true, name, reaction)) => file.formations.push((name, reaction)),
            Err(fault) => faults.push(fault),
        }
    }
    for entry in lines.entries("composition", faults) {
        match Constituent::read(file_key, citation, entry.named()) {
            Ok(constituent) => file.composition.push(constituent),
            Err(fault) => faults.push(entry.fault(&fault.key, fault.message)),
        }
    }
    let elements = elements_of(file_key, lines, faults);
    let formations = lines.entries("formation", faults);
    if formations.is_empty() {
        return file;
    }
    let elements = elements.or(shipped::elements());
    for entry in formations {
        let read = read_formation(file_key, citation, &elements, &entry);
        match read.and_then(|read| check_name(&read.0, &entry).map(|()| read)) {
            Ok(read) => file.formations.push(read),
            Err(fault) => faults.push(fault),
        }
    }
    file
}

/// Whether it counts as formation data, its name, and the reaction.
fn read_constant(
    file_key: &str,
    citation: &str,
    entry: &Entry<'_>,
) -> Result<(bool, String, Reaction), FileFault> {
    let mut keys = entry.keys();
    let mut text = |key: &str| match keys.remove(key) {
        Some(Value::Text(text)) => Ok(text),
        _ => Err(entry.fault(key, format!("a constant needs a text `{key}`"))),
    };
    let name = text("name")?;
    let named = |key: &str, message: String| entry.fault(key, format!("`{name}`: {message}"));
    let equation = text("reaction").map_err(|fault| named("reaction", fault.message))?;
    if !keys.contains_key("provenance") {
        let message = "a constant needs `provenance`, one of `read`, `computed`, `memory` and `stated`";
        return Err(named("provenance", message.into()));
    }
    if !keys.contains_key("source") {
        if citation.is_empty() {
            return Err(named(
                "source",
                "a constant needs `source`: the publication, or who measured it".into(),
            ));
        }
        keys.insert("source".into(), Value::Text(citation.into()));
    }
    let history = match keys.remove("history") {
        None => vec![],
        Some(value) => {
            let mut history = Named::new([("history".to_string(), value)].into());
            history.texts("history").map_err(|fault| named("history", fault.message))?.unwrap_or_default()
        }
    };
    let is_formation = match keys.remove("formation") {
        None => false,
        Some(Value::Flag(flag)) => flag,
        Some(other) => {
            return Err(named("formation", format!("`formation` is true or false, not {}", other.kind())));
        }
    };
    let identity = match keys.remove("input") {
        None => format!("{file_key}/{name}"),
        Some(Value::Text(input)) => input,
        Some(other) => return Err(named("input", format!("`input` takes a text, not {}", other.kind()))),
    };
    let influences = match keys.remove("influences") {
        None => vec![],
        Some(value) => influence::read(value, &identity).map_err(|fault| named(&fault.key, fault.message))?,
    };
    let reaction = Reaction::read(&equation, Some(&name), Named::new(keys), Some(&identity));
    let reaction = reaction.map_err(|error| {
        let key = match &error {
            ReactionError::Option(fault) => fault.key.clone(),
            _ => "reaction".into(),
        };
        named(&key, error.to_string())
    })?;
    let Ok(constant) = reaction.constant() else {
        return Err(named("name", "a constant needs `log_k` or `log_k_terms`".into()));
    };
    let mut constant = constant.clone();
    for conversion in history {
        constant.history = constant.history.converted(conversion);
    }
    constant.history = constant.history.influenced(influences);
    Ok((is_formation, name, Reaction::of(reaction.equation().clone(), constant)))
}

fn read_formation(
    file_key: &str,
    citation: &str,
    elements: &Elements,
    entry: &Entry<'_>,
) -> Result<(String, Reaction), FileFault> {
    if citation.is_empty() && !entry.keys().contains_key("source") {
        let message = "formation data need `source`: the publication, or who measured them";
        return Err(entry.fault("source", message.into()));
    }
    let read = standard_formation::read(file_key, citation, elements, entry.named());
    read.map_err(|fault| entry.fault(&fault.key, fault.message))
}

/// Reads a ledger file.
///
/// # Errors
///
/// Every fault of the file.
pub fn read_ledger(text: &str) -> Result<LedgerFile, Vec<FileFault>> {
    read_ledger_as("ledger", text)
}

fn read_ledger_as(file_key: &str, text: &str) -> Result<LedgerFile, Vec<FileFault>> {
    let lines = Lines::parse(text)?;
    let mut faults = Vec::new();
    let mut from = Vec::new();
    for entry in lines.entries("from", &mut faults) {
        match read_from(&entry) {
            Ok(read) => from.push(read),
            Err(fault) => faults.push(entry.fault(&fault.key, fault.message)),
        }
    }
    let own = read_entries(file_key, &read_citation(&lines).unwrap_or_default(), &lines, &mut faults);
    let head = read_head(
        file_key,
        lines.named(&["from", "constant", "formation", "composition", "element", "publication"]),
    );
    match head {
        Ok(head) if faults.is_empty() => Ok(LedgerFile { from, own, ..head }),
        Ok(_) => Err(in_order(faults)),
        Err(fault) => {
            faults.push(FileFault { line: lines.line_of(&fault.key), message: fault.message });
            Err(in_order(faults))
        }
    }
}

fn in_order(mut faults: Vec<FileFault>) -> Vec<FileFault> {
    faults.sort_by_key(|fault| fault.line);
    faults
}

/// What stands before the entries.
fn read_head(file_key: &str, mut named: Named) -> Result<LedgerFile, KeyFault> {
    let name = named.text("name")?.unwrap_or_else(|| file_key.to_string());
    let edition = named.text("edition")?;
    let model = named.text("activity_model")?.unwrap_or_else(|| "davies".into());
    let options = match named.take("activity_options") {
        None => Named::default(),
        Some(Value::Map(options)) => Named::new(options),
        Some(other) => {
            let message = format!("`activity_options` takes a table, not {}", other.kind());
            return Err(KeyFault::new("activity_options", message));
        }
    };
    let activity = ActivityChoice::read(&model, options).map_err(|fault| match fault.key.as_str() {
        "activity_model" => fault,
        _ => KeyFault::new("activity_options", fault.message),
    })?;
    let gas_model = named.text("gas_model")?.map_or(Ok(GasModel::default()), |name| GasModel::read(&name))?;
    let solutes = named.texts("solutes")?.unwrap_or_default();
    let solutes = solutes.iter().map(|text| Species::parse(text)).collect::<Result<_, _>>();
    let solutes = solutes.map_err(|error| KeyFault::new("solutes", error.to_string()))?;
    let is_marine = match named.text("medium")?.as_deref() {
        None => false,
        Some("seawater") => true,
        Some(other) => {
            let message = format!(
                "the constants of a ledger hold for zero ionic strength or `seawater`, not for `{other}`"
            );
            return Err(KeyFault::new("medium", message));
        }
    };
    named.finish()?;
    Ok(LedgerFile {
        name,
        edition,
        activity,
        gas_model,
        is_marine,
        solutes,
        from: vec![],
        own: ConstantFile::default(),
    })
}

/// `constants` and `formations` are lists, `all` where neither is given.
fn read_from(entry: &Entry<'_>) -> Result<From, KeyFault> {
    let mut named = entry.named();
    let file = named.text("file")?.ok_or_else(|| KeyFault::new("file", "`[[from]]` needs a `file`"))?;
    let (constants, formations) = (named.texts("constants")?, named.texts("formations")?);
    let composition = named.texts("composition")?;
    named.finish()?;
    let all = constants.is_none() && formations.is_none() && composition.is_none();
    let chosen = |names: Option<Vec<String>>| match names {
        None if all => None,
        None => Some(vec![]),
        Some(names) => (names != ["all"]).then_some(names),
    };
    let (constants, formations) = (chosen(constants), chosen(formations));
    Ok(From { file, constants, formations, composition: chosen(composition), line: entry.line })
}

/// One table of an array of tables.
struct Entry<'a> {
    text: &'a str,
    line: usize,
    table: &'a DeTable<'a>,
}

impl Entry<'_> {
    fn keys(&self) -> BTreeMap<String, Value> {
        self.table.iter().map(|(key, value)| (key.get_ref().to_string(), to_value(value.get_ref()))).collect()
    }

    fn named(&self) -> Named {
        Named::new(self.keys())
    }

    /// A fault in the line of a key; of the whole entry where that key is missing.
    fn fault(&self, key: &str, message: String) -> FileFault {
        let line = self.table.get(key).map_or(self.line, |value| line_at(self.text, value.span().start));
        FileFault { line, message }
    }
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

    /// The tables of an array; anything else under its key is a fault.
    fn entries(&self, key: &str, faults: &mut Vec<FileFault>) -> Vec<Entry<'_>> {
        let Some(value) = self.table.get_ref().get(key) else { return vec![] };
        let line = |value: &Spanned<DeValue<'_>>| line_at(self.text, value.span().start);
        let mut fault = |line| {
            faults.push(FileFault { line, message: format!("write each `{key}` as a table `[[{key}]]`") })
        };
        let DeValue::Array(array) = value.get_ref() else {
            fault(line(value));
            return vec![];
        };
        let mut entries = Vec::new();
        for item in array.iter() {
            match item.get_ref() {
                DeValue::Table(table) => entries.push(Entry { text: self.text, line: line(item), table }),
                _ => fault(line(item)),
            }
        }
        entries
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
        assert_eq!(lines[0].0, 6);
        assert!(lines[0].1.contains("not balanced"), "{}", lines[0].1);
        assert_eq!(lines[1], (13, "`b`: unknown key `log_q`; did you mean `log_k`?"));
        assert_eq!(
            lines[2],
            (16, "`c`: a constant needs `provenance`, one of `read`, `computed`, `memory` and `stated`")
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
