//! `lysocline verify a.rhai`: does a sealed script still give what it gave, and if not, why?
//!
//! It is run with the sealed constants, which tells whether the program, the script or its files have changed, and with
//! today's, which tells what has become of the constants.

use std::collections::BTreeMap;
use std::path::Path;

use lysocline_engine::chem::Reaction;
use lysocline_engine::ledger::{Ledger, in_force, shipped};
use lysocline_engine::present::{Cell, Column, Style, Table, number};
use lysocline_engine::script::record::Recorded;
use lysocline_engine::script::sandbox::digest_of;
use lysocline_engine::script::{Diagnostic, Record};

use crate::cli::{Limits, Look, Verify};
use crate::job::{self, Files, Job, Script};
use crate::render::table;
use crate::seal::{Seal, agrees};

/// Constants that are tried one by one; of more, only how many differ is said.
const TRIED: usize = 24;

/// Returns whether every value still comes out and nothing was edited.
pub fn run(asked: &Verify, look: &Look, limits: &Limits) -> bool {
    let job = Job { file: &asked.file, arguments: &[], write: Path::new("out"), look, limits };
    match verify(&job) {
        Ok(verdict) => {
            verdict.print(look);
            verdict.holds()
        }
        Err(diagnostic) => {
            job.messages().print(&diagnostic);
            false
        }
    }
}

/// What was found.
struct Verdict {
    name: String,
    /// Facts in the order they were found out.
    notes: Vec<String>,
    /// Whether something beside the values is not as it was.
    edited: bool,
    values: Vec<Compared>,
}

/// One sealed value and what became of it.
struct Compared {
    sealed: Record,
    /// With the sealed constants, and with today's; `None` where it is no longer recorded.
    then: Option<Recorded>,
    today: Option<Recorded>,
    /// What moved it, as far as is known.
    cause: String,
}

impl Compared {
    fn moved_then(&self) -> bool {
        !self.then.as_ref().is_some_and(|value| agrees(&self.sealed.value, value))
    }

    fn moved_today(&self) -> bool {
        !self.today.as_ref().is_some_and(|value| agrees(&self.sealed.value, value))
    }
}

fn verify(job: &Job) -> Result<Verdict, Box<Diagnostic>> {
    let script = job::read(job.file)?;
    let seal = match &script.seal {
        Ok(Some(seal)) => seal.clone(),
        Ok(None) => {
            let message = format!("`{}` is not sealed", script.name);
            return Err(Box::new(
                job::complaint(message).help(format!("write `lysocline seal {}` first", script.name)),
            ));
        }
        Err(fault) => {
            return Err(Box::new(job::complaint(format!("`{}` cannot be verified: {fault}", script.name))));
        }
    };
    let mut notes = Vec::new();
    let program = env!("CARGO_PKG_VERSION");
    if seal.program != program {
        notes.push(format!("sealed by lysocline {}, run by {program}", seal.program));
    }
    let script_edited = digest_of(script.text.as_bytes()) != seal.script;
    if script_edited {
        notes.push("the script was edited after it was sealed".to_owned());
    }
    let changed = changed_files(job, &seal);
    notes.extend(changed.iter().cloned());
    let elsewhere = why_elsewhere(script_edited, &changed, &seal);
    let then = records(job, &script, &seal.ledgers)?;
    let (today, changes) = with_todays(job, &script, &seal, &then, &mut notes)?;
    let values = seal
        .values
        .iter()
        .map(|sealed| {
            let mut compared = Compared {
                sealed: sealed.clone(),
                then: then.get(&sealed.label).cloned(),
                today: today.get(&sealed.label).cloned(),
                cause: String::new(),
            };
            compared.cause = cause(&compared, &elsewhere, &changes);
            compared
        })
        .collect();
    let extra: Vec<&String> =
        today.keys().filter(|label| seal.values.iter().all(|sealed| sealed.label != **label)).collect();
    if !extra.is_empty() {
        notes.push(format!(
            "recorded now and not sealed: {}",
            extra.iter().map(|label| format!("`{label}`")).collect::<Vec<_>>().join(", ")
        ));
    }
    let edited = script_edited || !changed.is_empty();
    Ok(Verdict { name: script.name.clone(), notes, edited, values })
}

/// Files that are gone or different, in words.
fn changed_files(job: &Job, seal: &Seal) -> Vec<String> {
    let folder = job.file.parent().unwrap_or(Path::new(""));
    let fault = |(name, digest): &(String, String)| match std::fs::read(folder.join(name)) {
        Err(_) => Some(format!("the file `{name}` that it read is gone")),
        Ok(content) if digest_of(&content) != *digest => {
            Some(format!("the file `{name}` that it reads has changed"))
        }
        Ok(_) => None,
    };
    seal.files.iter().filter_map(fault).collect()
}

/// What else than a constant can have moved a value.
fn why_elsewhere(edited: bool, changed: &[String], seal: &Seal) -> String {
    let mut causes = Vec::new();
    if edited {
        causes.push("the edited script".to_owned());
    }
    if !changed.is_empty() {
        causes.push("a changed file".to_owned());
    }
    if seal.program != env!("CARGO_PKG_VERSION") {
        causes.push(format!("lysocline {} instead of {}", env!("CARGO_PKG_VERSION"), seal.program));
    }
    if causes.is_empty() { "the program or the machine".to_owned() } else { causes.join(", or ") }
}

type Values = BTreeMap<String, Recorded>;

/// What the script records with these ledgers in the place of the shipped ones.
fn records(job: &Job, script: &Script, ledgers: &[Ledger]) -> Result<Values, Box<Diagnostic>> {
    let _in_use = in_force::stand_in(ledgers.iter().cloned());
    let outcome = job.gather(script, Files::Untouched);
    match outcome.failure {
        Some(failure) => Err(failure),
        None => Ok(outcome.records.into_iter().map(|record| (record.label, record.value)).collect()),
    }
}

/// A constant that is not what it was, and the values it moves.
struct Change {
    what: String,
    moves: Vec<String>,
}

fn with_todays(
    job: &Job,
    script: &Script,
    seal: &Seal,
    then: &Values,
    notes: &mut Vec<String>,
) -> Result<(Values, Vec<Change>), Box<Diagnostic>> {
    let mut variants: Vec<(String, Vec<Ledger>)> = Vec::new();
    let mut differ = 0;
    for (i, old) in seal.ledgers.iter().enumerate() {
        let Ok(now) = shipped::as_shipped(old.name()) else {
            notes.push(format!("the ledger `{}` is no longer shipped", old.name()));
            continue;
        };
        if now.digest() == old.digest() {
            continue;
        }
        let changes = changes(old, &now);
        differ += changes.len();
        notes.push(format!(
            "the ledger `{}` has changed: edition {} then, {} now; {}",
            old.name(),
            old.edition().unwrap_or("unknown"),
            now.edition().unwrap_or("unknown"),
            if changes.len() == 1 {
                "1 constant differs".to_owned()
            } else {
                format!("{} constants differ", changes.len())
            }
        ));
        for (what, ledger) in changes {
            let mut ledgers = seal.ledgers.clone();
            ledgers[i] = ledger;
            variants.push((what, ledgers));
        }
    }
    if variants.is_empty() {
        return Ok((records(job, script, &[])?, Vec::new()));
    }
    let today = records(job, script, &[])?;
    if differ > TRIED {
        notes.push(format!("{differ} constants differ; up to {TRIED} are tried one by one"));
    }
    let mut changes = Vec::new();
    for (what, ledgers) in variants.into_iter().take(TRIED) {
        // A constant without which the script fails moves everything.
        let values = records(job, script, &ledgers).unwrap_or_default();
        let moved =
            then.iter().filter(|(label, value)| !values.get(*label).is_some_and(|now| agrees(value, now)));
        changes.push(Change { what, moves: moved.map(|(label, _)| label.clone()).collect() });
    }
    Ok((today, changes))
}

/// Every difference between two ledgers, each with the old ledger as this one difference would make it.
fn changes(old: &Ledger, now: &Ledger) -> Vec<(String, Ledger)> {
    let then: BTreeMap<&str, &Reaction> = old.reactions().collect();
    let today: BTreeMap<&str, &Reaction> = now.reactions().collect();
    let mut changes = Vec::new();
    for (name, reaction) in &today {
        let changed = match then.get(name) {
            None => old.with_reaction(name, reaction).ok().map(|ledger| (format!("{name} (new)"), ledger)),
            Some(before) if differs(before, reaction) => {
                old.replace(name, reaction).ok().map(|ledger| (words(name, before, reaction), ledger))
            }
            Some(_) => None,
        };
        changes.extend(changed);
    }
    for name in then.keys().filter(|name| !today.contains_key(*name)) {
        changes.extend(old.without(name).ok().map(|ledger| (format!("{name} (gone)"), ledger)));
    }
    let written = |ledger: &Ledger| ledger.activity().written(|_| true);
    if written(old) != written(now) {
        changes.push(("the activity model".to_owned(), old.with_activity(now.activity().clone())));
    }
    changes
}

fn differs(a: &Reaction, b: &Reaction) -> bool {
    let text = |reaction: &Reaction| {
        let log_k = reaction.constant().ok().map(|constant| format!("{:?}", constant.log_k));
        (reaction.equation().to_string(), log_k)
    };
    text(a) != text(b)
}

/// `calcite (log K -8.480, was -8.470)`.
fn words(name: &str, before: &Reaction, after: &Reaction) -> String {
    let log_k = |reaction: &Reaction| reaction.log_k().ok().map(|log_k| log_k.value());
    match (log_k(before), log_k(after)) {
        (Some(before), Some(after)) if before != after => {
            format!("{name} (log K {after:.4}, was {before:.4})")
        }
        _ => format!("{name} (its function of temperature, or its equation)"),
    }
}

fn cause(value: &Compared, elsewhere: &str, changes: &[Change]) -> String {
    let mut causes = Vec::new();
    if value.then.is_none() && value.today.is_none() {
        return "no longer recorded".to_owned();
    }
    if value.moved_then() {
        causes.push(elsewhere.to_owned());
    }
    if value.moved_today() {
        let moving = changes.iter().filter(|change| change.moves.contains(&value.sealed.label));
        causes.extend(moving.map(|change| change.what.clone()));
        if causes.is_empty() {
            causes.push("several constants together".to_owned());
        }
    }
    causes.join("; ")
}

impl Verdict {
    fn holds(&self) -> bool {
        !self.edited && !self.values.iter().any(|value| value.moved_then() || value.moved_today())
    }

    fn print(&self, look: &Look) {
        let moved: Vec<&Compared> =
            self.values.iter().filter(|value| value.moved_then() || value.moved_today()).collect();
        for note in &self.notes {
            println!("{note}");
        }
        if !moved.is_empty() {
            print!("{}", drawn(&moved, look));
        }
        let (all, n) = (self.values.len(), moved.len());
        let values = |n: usize| if n == 1 { "1 value".to_owned() } else { format!("{n} values") };
        match (n, self.edited) {
            (0, false) => println!("{}: {} as sealed", self.name, values(all)),
            (0, true) => {
                println!("{}: {} as sealed, but not everything else (see above)", self.name, values(all))
            }
            _ => println!("{}: {} of {} moved", self.name, n, values(all)),
        }
    }
}

fn drawn(moved: &[&Compared], look: &Look) -> String {
    let style = look.style();
    let text = |value: &Option<Recorded>| value.as_ref().map_or_else(|| "not recorded".to_owned(), shown);
    let texts = |title: &str, text: &dyn Fn(&Compared) -> String| {
        let texts: Vec<String> = moved.iter().map(|value| text(value)).collect();
        Column::texts(title, texts.iter().map(String::as_str))
    };
    let difference = |value: &&Compared| match (&value.sealed.value, &value.today) {
        (Recorded::Number { value: then, .. }, Some(Recorded::Number { value: now, .. })) => {
            Cell::number(now - then)
        }
        _ => Cell::missing(),
    };
    let columns = [
        texts("value", &|value| value.sealed.label.clone()),
        texts("sealed", &|value| shown(&value.sealed.value)),
        texts("sealed constants", &|value| {
            if value.moved_then() { text(&value.then) } else { "same".to_owned() }
        }),
        texts("today", &|value| if value.moved_today() { text(&value.today) } else { "same".to_owned() }),
        Column::new("today - sealed", moved.iter().map(difference).collect::<Vec<_>>()),
        texts("moved by", &|value| value.cause.clone()),
    ];
    let Ok(table) = Table::new(columns) else { return String::new() };
    let drawn = lysocline_engine::present::Style { plain: style.ascii, width: Some(style.width.max(100)) };
    table::draw(&table, &table::Look { style: drawn, color: style.color, rows: usize::MAX })
}

/// A value with enough digits to see that it moved.
fn shown(value: &Recorded) -> String {
    match value {
        Recorded::Text(text) => text.clone(),
        Recorded::Number { value, sigma, unit } => {
            let number = match sigma {
                Some(sigma) if *sigma > 0.0 => number::shown_with_sigma(*value, *sigma, Style::default()),
                _ => number::shown(*value),
            };
            format!("{number} {unit}").trim_end().to_owned()
        }
    }
}
