//! `lysocline seal a.rhai`: runs the script and writes what it gave, and all it takes to check that, at its end.

use std::path::Path;

use lysocline_engine::ledger::{in_force, shipped};
use lysocline_engine::script::Diagnostic;
use lysocline_engine::script::sandbox::{digest_of, write_whole};

use crate::cli::{Limits, Look, Run};
use crate::job::{self, Files, Job, Outcome, Script};
use crate::seal::Seal;

/// Returns whether the file was sealed; if not, it is as it was.
pub fn run(asked: &Run, look: &Look, limits: &Limits) -> bool {
    let job = Job { file: &asked.file, arguments: &asked.arguments, write: &asked.write, look, limits };
    match seal(&job) {
        Ok(text) => {
            eprintln!("{text}");
            true
        }
        Err(diagnostic) => {
            job.messages().print(&diagnostic);
            false
        }
    }
}

fn seal(job: &Job) -> Result<String, Box<Diagnostic>> {
    let mut script = job::read(job.file)?;
    if let Err(fault @ crate::seal::SealError::Newer { .. }) = &script.seal {
        let message = format!("`{}`: {fault}", script.name);
        return Err(Box::new(job::complaint(message).help("a newer version of lysocline can seal it again")));
    }
    // A block always begins on a line of its own.
    if !script.text.is_empty() && !script.text.ends_with('\n') {
        script.text.push('\n');
    }
    let in_use = in_force::stand_in([]);
    let outcome = job.gather(&script, Files::Untouched);
    let ledgers = in_use.asked();
    drop(in_use);
    if let Some(failure) = outcome.failure {
        return Err(failure);
    }
    if outcome.records.is_empty() {
        let message = format!("`{}` records nothing, so there is nothing to seal", script.name);
        return Err(Box::new(
            job::complaint(message).help("mark results with `record(\"pH of the lake\", lake.pH);`"),
        ));
    }
    let seal = Seal {
        program: env!("CARGO_PKG_VERSION").to_owned(),
        script: digest_of(script.text.as_bytes()),
        arguments: job.arguments.iter().map(|word| word.to_string_lossy().into_owned()).collect(),
        files: files(job, &outcome),
        seeds: job.seeds(&script),
        values: outcome.records.clone(),
        ledgers: ledgers.iter().filter_map(|name| shipped::as_shipped(name).ok()).collect(),
    };
    unchanged(job.file, &script)?;
    let text = format!("{}{}", script.text, seal.text());
    write_whole(job.file, text.as_bytes()).map_err(|error| {
        let reason = error.to_string().to_lowercase();
        Box::new(job::complaint(format!("cannot write `{}`: {reason}; the file is as it was", script.name)))
    })?;
    let plural = if seal.values.len() == 1 { "value" } else { "values" };
    Ok(format!("sealed {} {plural} in {}", seal.values.len(), script.name))
}

/// Somebody may have saved the file while the script ran.
fn unchanged(file: &Path, script: &Script) -> Result<(), Box<Diagnostic>> {
    let now = super::read_script(file)?;
    if now == script.file {
        return Ok(());
    }
    let message = format!("`{}` was changed while it ran; it was not sealed", script.name);
    Err(Box::new(job::complaint(message)))
}

/// Files read, as named from the script's folder, with their digests.
pub fn files(job: &Job, outcome: &Outcome) -> Vec<(String, String)> {
    let folder = job.file.parent().unwrap_or(Path::new(""));
    let named = |path: &std::path::PathBuf| {
        let digest = std::fs::read(path).map(|content| digest_of(&content)).ok()?;
        let plain = path.strip_prefix(".").unwrap_or(path);
        let name = plain.strip_prefix(folder).unwrap_or(plain);
        Some((name.to_string_lossy().replace('\\', "/"), digest))
    };
    outcome.files.iter().filter_map(named).collect()
}
