//! `lysocline watch a.rhai`: makes the report again whenever the script or a file beside it is saved.

use std::collections::BTreeMap;
use std::path::{Path, PathBuf};
use std::time::{Duration, SystemTime};

use super::report;
use crate::cli::{self, Limits, Look};

/// How often the files are looked at.
const PERIOD: Duration = Duration::from_millis(300);

/// Runs until it is interrupted.
pub fn run(asked: &cli::Report, look: &Look, limits: &Limits) -> bool {
    let mut seen = BTreeMap::new();
    loop {
        let now = saved(&asked.file);
        if now.is_empty() && seen.is_empty() {
            // The report says why there is nothing to watch.
            return report::run(asked, look, limits);
        }
        if now != seen && !now.is_empty() {
            seen = now;
            report::run(asked, look, limits);
            eprintln!("watching {}; Ctrl-C ends", asked.file.display());
        }
        std::thread::sleep(PERIOD);
    }
}

/// When the script, and the scripts and data beside it, were last saved. An editor that replaces a file is seen with the
/// new one; while it is away nothing happens.
fn saved(script: &Path) -> BTreeMap<PathBuf, SystemTime> {
    let folder = match script.parent() {
        Some(folder) if !folder.as_os_str().is_empty() => folder,
        _ => Path::new("."),
    };
    if !script.is_file() {
        return BTreeMap::new();
    }
    let entries = std::fs::read_dir(folder).into_iter().flatten().flatten().map(|entry| entry.path());
    let matters = |path: &PathBuf| {
        let ending = path.extension().and_then(|ending| ending.to_str());
        matches!(ending, Some("rhai" | "csv" | "toml" | "json"))
    };
    let when =
        |path: PathBuf| Some((path.clone(), std::fs::metadata(&path).and_then(|m| m.modified()).ok()?));
    entries.filter(matters).chain([script.to_owned()]).filter_map(when).collect()
}
