//! `lysocline verify a.rhai`: does a sealed script still give what it gave, and if not, why?
//!
//! It is run with the sealed constants, which tells whether the program, the script or its files have changed, and with
//! today's, which tells what has become of the constants.

use std::collections::BTreeMap;
use std::path::Path;

use lysocline_engine::chem::Reaction;
use lysocline_engine::ledger::{Constituent, Ledger, in_force, shipped};
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
    let arguments = script.sealed_arguments();
    let job = &Job { arguments: &arguments, ..*job };
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
    notes.extend(changed.iter().map(|(_, words)| words.clone()));
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

fn plural(n: usize, word: &str) -> String {
    if n == 1 { word.to_owned() } else { format!("{word}s") }
}

/// Files that are gone or different: name, and what became of it in words.
fn changed_files(job: &Job, seal: &Seal) -> Vec<(String, String)> {
    let folder = job.file.parent().unwrap_or(Path::new(""));
    let fault = |(name, digest): &(String, String)| match std::fs::read(folder.join(name)) {
        Err(_) => Some((name.clone(), format!("the file `{name}` that it read is gone"))),
        Ok(content) if digest_of(&content) != *digest => {
            Some((name.clone(), format!("the file `{name}` that it reads has changed")))
        }
        Ok(_) => None,
    };
    seal.files.iter().filter_map(fault).collect()
}

/// What else than a constant can have moved a value.
fn why_elsewhere(edited: bool, changed: &[(String, String)], seal: &Seal) -> String {
    let mut causes = Vec::new();
    if edited {
        causes.push("the edited script".to_owned());
    }
    if !changed.is_empty() {
        let names: Vec<String> = changed.iter().map(|(name, _)| format!("`{name}`")).collect();
        causes.push(format!("the changed {} {}", plural(names.len(), "file"), names.join(", ")));
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
        let changes = changes(old, &now);
        if changes.is_empty() {
            continue;
        }
        differ += changes.len();
        notes.push(ledger_note(old, &now, &changes));
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

/// What became of a ledger, in one line that names its differences where they are few.
fn ledger_note(old: &Ledger, now: &Ledger, changes: &[(String, Ledger)]) -> String {
    const NAMED: usize = 4;
    let names: Vec<&str> = changes.iter().take(NAMED).map(|(what, _)| what.as_str()).collect();
    let more = changes.len() - names.len();
    let more = if more > 0 { format!("; and {more} more") } else { String::new() };
    format!(
        "the ledger `{}` has changed: edition {} then, {} now; different are {}{more}",
        old.name(),
        old.edition().unwrap_or("unknown"),
        now.edition().unwrap_or("unknown"),
        names.join("; "),
    )
}

/// Every difference between two ledgers, each with the old ledger as this one difference would make it.
fn changes(old: &Ledger, now: &Ledger) -> Vec<(String, Ledger)> {
    let then: BTreeMap<&str, &Reaction> = old.reactions().collect();
    let today: BTreeMap<&str, &Reaction> = now.reactions().collect();
    let mut changes = Vec::new();
    for (name, reaction) in &today {
        let changed = match then.get(name) {
            None => old.with_reaction(name, reaction).ok().map(|ledger| (format!("{name} (new)"), ledger)),
            Some(before) => difference(before, reaction).and_then(|what| {
                old.replace(name, reaction).ok().map(|ledger| (format!("{name} ({what})"), ledger))
            }),
        };
        changes.extend(changed);
    }
    for name in then.keys().filter(|name| !today.contains_key(*name)) {
        changes.extend(old.without(name).ok().map(|ledger| (format!("{name} (gone)"), ledger)));
    }
    for constituent in now.composition() {
        let before = old.composition().find(|own| own.name == constituent.name);
        if let Some(what) = constituent_difference(before, constituent) {
            let name = format!("{} ({what})", constituent.name);
            changes.push((name, old.with_constituent(constituent.clone())));
        }
    }
    changes.extend(activity_difference(old, now));
    changes
}

/// What two constants of one name differ in, the first of what matters most: `log K -8.4800, was -8.4700`.
fn difference(before: &Reaction, after: &Reaction) -> Option<String> {
    let log_k = |reaction: &Reaction| reaction.log_k().ok().map(|log_k| log_k.value());
    let function = |reaction: &Reaction| {
        reaction.constant().ok().map(|constant| {
            let volume = constant.conditions.medium.salinity().map(|_| format!("{:?}", constant.volume));
            (format!("{:?}", constant.log_k), volume)
        })
    };
    let sources = |reaction: &Reaction| {
        let uses = reaction.constant().ok().map(|constant| constant.history.uses().to_vec());
        let mut sources: Vec<Option<String>> =
            uses.unwrap_or_default().iter().map(|(origin, _)| origin.source.clone()).collect();
        sources.sort();
        sources
    };
    if before.equation().to_string() != after.equation().to_string() {
        return Some("its equation".to_owned());
    }
    match (log_k(before), log_k(after)) {
        (Some(before), Some(after)) if before != after => {
            return Some(format!("log K {after:.4}, was {before:.4}"));
        }
        _ if function(before) != function(after) => {
            return Some("its function of temperature and pressure".to_owned());
        }
        _ => {}
    }
    let (was, is) = (sigma(before), sigma(after));
    if !same_sigma(was, is) {
        let shown = |sigma: Option<f64>| sigma.map_or("unknown".to_owned(), number::shown);
        return Some(format!("its uncertainty is {}, was {}", shown(is), shown(was)));
    }
    (sources(before) != sources(after)).then(|| "its source".to_owned())
}

fn sigma(reaction: &Reaction) -> Option<f64> {
    reaction.log_k().ok().and_then(|log_k| log_k.sigma())
}

/// An uncertainty is written in a seal as the constant's own, so it may come back with another last digit.
fn same_sigma(a: Option<f64>, b: Option<f64>) -> bool {
    match (a, b) {
        (Some(a), Some(b)) => (a - b).abs() <= 1e-9 * a.abs().max(b.abs()),
        (a, b) => a.is_none() == b.is_none(),
    }
}

fn constituent_difference(before: Option<&Constituent>, after: &Constituent) -> Option<String> {
    let Some(before) = before else { return Some("new in the composition of seawater".to_owned()) };
    if before.per_salinity != after.per_salinity || before.of != after.of {
        let shown = |constituent: &Constituent| number::shown(constituent.per_salinity);
        return Some(format!("{} mol/kg per unit of salinity, was {}", shown(after), shown(before)));
    }
    if !same_sigma(before.relative_sigma(), after.relative_sigma()) {
        return Some("its uncertainty".to_owned());
    }
    (before.source != after.source).then(|| "its source".to_owned())
}

/// The parameters that differ for the species of the old ledger, and the old ledger with those of today.
fn activity_difference(old: &Ledger, now: &Ledger) -> Option<(String, Ledger)> {
    let written = |ledger: &Ledger| ledger.activity().written(|ion| old.find_species(ion.key()).is_ok());
    let (was, is) = (written(old), written(now));
    let what = match old.activity().name() == now.activity().name() {
        false => format!("is {}, was {}", now.activity().name(), old.activity().name()),
        true if was == is => return None,
        true => {
            let different =
                is.iter().filter(|option| !was.contains(option)).map(|(key, _)| format!("`{key}`"));
            format!("parameters {}", different.collect::<Vec<_>>().join(", "))
        }
    };
    Some((format!("the activity model ({what})"), old.with_activity(now.activity().clone())))
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
