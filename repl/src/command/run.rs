//! `lysocline run file.rhai`: runs a script from the start.

use std::path::Path;

use lysocline_engine::ledger::{Ledger, in_force, shipped};
use lysocline_engine::script::Diagnostic;
use lysocline_engine::script::diagnostic::Kind;

use crate::cli::{Limits, Look, Run};
use crate::job::{self, Job, Script};

/// Returns whether the script ran to its end.
pub fn run(run: &Run, look: &Look, limits: &Limits) -> bool {
    let given = Job { file: &run.file, arguments: &run.arguments, write: &run.write, look, limits };
    let script = match job::read(&run.file) {
        Ok(script) => script,
        Err(diagnostic) => {
            given.messages().print(&diagnostic);
            return false;
        }
    };
    let sealed_with = script.sealed_arguments();
    let as_sealed = run.sealed && run.arguments.is_empty();
    let job = if as_sealed { Job { arguments: &sealed_with, ..given } } else { given };
    match ledgers(&script, run.sealed) {
        Ok(Constants::Shipped(note)) => {
            note.iter().for_each(|note| eprintln!("{note}"));
            job.run(&script)
        }
        Ok(Constants::Sealed(ledgers)) => {
            let _sealed = in_force::stand_in(ledgers);
            job.run(&script)
        }
        Err(diagnostic) => {
            job.messages().print(&diagnostic);
            false
        }
    }
}

/// The constants a script runs with.
enum Constants {
    /// Today's, with a line to say when a sealed file had others.
    Shipped(Option<String>),
    Sealed(Vec<Ledger>),
}

fn ledgers(script: &Script, sealed: bool) -> Result<Constants, Box<Diagnostic>> {
    match (&script.seal, sealed) {
        (Ok(Some(seal)), true) => Ok(Constants::Sealed(seal.ledgers.clone())),
        (Ok(None), true) => Err(Box::new(
            job::complaint(format!(
                "`{}` is not sealed, so there are no sealed constants to run it with",
                script.name
            ))
            .help("leave `--sealed` out, or seal the file with `lysocline seal`"),
        )),
        (Err(fault), true) => Err(Box::new(job::complaint(format!("`{}`: {fault}", script.name)))),
        (Ok(Some(seal)), false) => Ok(Constants::Shipped(differing(&seal.ledgers))),
        (Err(fault), false) => Ok(Constants::Shipped(Some(format!("note: {fault}")))),
        (Ok(None), false) => Ok(Constants::Shipped(None)),
    }
}

/// One line when today's ledgers are not the sealed ones.
fn differing(sealed: &[Ledger]) -> Option<String> {
    let mut moved = sealed.iter().filter_map(|old| {
        let today = shipped::as_shipped(old.name()).ok();
        match today {
            Some(today) if today.digest() == old.digest() => None,
            Some(today) => {
                let edition = |ledger: &Ledger| ledger.edition().unwrap_or("no edition").to_owned();
                Some(format!(
                    "`{}` was {} ({}), is {} ({})",
                    old.name(),
                    edition(old),
                    old.digest(),
                    edition(&today),
                    today.digest()
                ))
            }
            None => Some(format!("`{}` is no longer shipped", old.name())),
        }
    });
    let first = moved.next()?;
    let others = moved.map(|other| format!(", {other}")).collect::<String>();
    Some(format!(
        "note: constants have changed since this file was sealed: {first}{others}; `run --sealed` takes the old ones, `verify` shows what moves"
    ))
}

/// The text of a script file.
///
/// # Errors
///
/// Returns why it cannot be read.
pub fn read(file: &Path) -> Result<String, Box<Diagnostic>> {
    read_text("the script", file)
}

/// The text of a file; `what` it is stands in the message.
pub fn read_text(what: &str, file: &Path) -> Result<String, Box<Diagnostic>> {
    let failed = |reason: &str| {
        let message = format!("cannot read {what} `{}`: {reason}", file.display());
        Box::new(Diagnostic::new(Kind::Failure, message))
    };
    if file.is_dir() {
        return Err(failed("it is a folder"));
    }
    let bytes = std::fs::read(file).map_err(|error| match error.kind() {
        std::io::ErrorKind::NotFound => failed("there is no such file"),
        _ => failed(&error.to_string().to_lowercase()),
    })?;
    String::from_utf8(bytes).map_err(|_| failed("it is not UTF-8 text"))
}
