//! `lysocline report a.rhai -o a.html`: one page of prose, code, results, sources and cautions.

use std::path::{Path, PathBuf};

use lysocline_engine::script::sandbox::write_whole;

use crate::cli::{self, Limits, Look};
use crate::job::{self, Files, Job, Outcome, Script};
use crate::render::{diagnostic, markdown, page, report};

/// What a report is written as.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
enum Form {
    Html,
    Markdown,
}

/// Returns whether the script ran to its end and the report was written.
pub fn run(asked: &cli::Report, look: &Look, limits: &Limits) -> bool {
    made(asked, look, limits, None)
}

/// The same; a page with `when` it was made asks the browser for a newer one now and then.
pub fn made(asked: &cli::Report, look: &Look, limits: &Limits, when: Option<String>) -> bool {
    let job = Job { file: &asked.file, arguments: &asked.arguments, write: &asked.write, look, limits };
    let messages = job.messages();
    let output = asked.output.clone().unwrap_or_else(|| beside_us(&asked.file));
    let Some(form) = form(&output) else {
        let message = format!("cannot tell the kind of report from `{}`", output.display());
        messages.print(&job::complaint(message).help("end the name in `.html` or `.md`"));
        return false;
    };
    if let Some(obstacle) = obstacle(&output, limits.overwrite) {
        messages.print(&obstacle);
        return false;
    }
    let script = match job::read(&asked.file) {
        Ok(script) => script,
        Err(diagnostic) => {
            messages.print(&diagnostic);
            return false;
        }
    };
    match write(&job, &script, (form, when), &output) {
        Ok(outcome) => {
            eprintln!("wrote {}", output.display());
            outcome.failure.iter().for_each(|diagnostic| messages.print(diagnostic));
            outcome.failure.is_none()
        }
        Err(diagnostic) => {
            messages.print(&diagnostic);
            false
        }
    }
}

/// Runs the script and writes its report, also of a script that fails: up to there, with the reason.
fn write(
    job: &Job,
    script: &Script,
    (form, when): (Form, Option<String>),
    output: &Path,
) -> Result<Outcome, Box<lysocline_engine::script::Diagnostic>> {
    let outcome = job.gather(script, Files::Written);
    let plain = diagnostic::Report { color: false };
    let made = report::Report {
        title: report::title(&script.text).unwrap_or_else(|| stem(job.file)),
        blocks: report::blocks(&script.text, &outcome.shown),
        records: outcome.records.clone(),
        sources: outcome.sources.clone(),
        making: making(job, script, &outcome),
        failure: outcome.failure.as_ref().map(|failure| plain.text(failure)),
        watched: when,
    };
    let text = match form {
        Form::Html => page::draw(&made),
        Form::Markdown => markdown::draw(&made),
    };
    let folder = output.parent().map_or(Ok(()), std::fs::create_dir_all);
    folder.and_then(|()| write_whole(output, text.as_bytes())).map_err(|error| {
        let reason = error.to_string().to_lowercase();
        Box::new(job::complaint(format!("cannot write `{}`: {reason}", output.display())))
    })?;
    Ok(outcome)
}

/// How the report was made, so that somebody else can make it again.
fn making(job: &Job, script: &Script, outcome: &Outcome) -> Vec<String> {
    let words: Vec<String> = job.arguments.iter().map(|word| word.to_string_lossy().into_owned()).collect();
    let arguments = if words.is_empty() { String::new() } else { format!(" {}", words.join(" ")) };
    let mut facts = vec![format!(
        "Made by lysocline {} from {}{arguments}.",
        env!("CARGO_PKG_VERSION"),
        file_name(job.file)
    )];
    facts.extend(
        outcome.sources.ledgers.iter().map(|(name, digest)| format!("Ledger {name}, digest {digest}.")),
    );
    let files: Vec<String> = outcome.files.iter().map(|file| file_name(file)).collect();
    if !files.is_empty() {
        facts.push(format!("Files read: {}.", files.join(", ")));
    }
    if matches!(&script.seal, Ok(Some(_))) {
        facts.push(
            "The file is sealed; `lysocline verify` compares these values with the sealed ones.".to_owned(),
        );
    }
    facts
}

fn file_name(path: &Path) -> String {
    path.file_name().map(|name| name.to_string_lossy().into_owned()).unwrap_or_default()
}

fn stem(path: &Path) -> String {
    path.file_stem().map(|name| name.to_string_lossy().into_owned()).unwrap_or_default()
}

/// The report of `lake.rhai` is `lake.html` in the current folder.
fn beside_us(script: &Path) -> PathBuf {
    PathBuf::from(stem(script)).with_extension("html")
}

fn form(output: &Path) -> Option<Form> {
    match output.extension()?.to_str()?.to_ascii_lowercase().as_str() {
        "html" | "htm" => Some(Form::Html),
        "md" | "markdown" => Some(Form::Markdown),
        _ => None,
    }
}

/// A file that is no report of ours is not replaced.
fn obstacle(output: &Path, overwrite: bool) -> Option<lysocline_engine::script::Diagnostic> {
    let shown = output.display();
    if output.is_dir() {
        return Some(job::complaint(format!("cannot write `{shown}`: it is a folder")));
    }
    if overwrite || output.symlink_metadata().is_err() {
        return None;
    }
    let text = std::fs::read_to_string(output).unwrap_or_default();
    let ours = text.contains(page::MARK) || text.contains(markdown::MARK);
    (!ours).then(|| {
        job::complaint(format!("`{shown}` exists and is no report of this program"))
            .help("choose another name, move the file away, or allow it with `--overwrite`")
    })
}
