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
            report::made(asked, look, limits, Some(clock(SystemTime::now())));
            eprintln!("watching {}; Ctrl-C ends", asked.file.display());
        }
        std::thread::sleep(PERIOD);
    }
}

/// Date and time of day, `2026-03-01 08:05:09 UTC`.
fn clock(now: SystemTime) -> String {
    let seconds = now.duration_since(SystemTime::UNIX_EPOCH).map_or(0, |since| since.as_secs());
    let (days, second) = (seconds / 86_400, seconds % 86_400);
    // Years that begin on 1 March have their leap day at the end; 400 of them have 146 097 days.
    let shifted = days + 719_468;
    let (era, day) = (shifted / 146_097, shifted % 146_097);
    let year = (day - day / 1_460 + day / 36_524 - day / 146_096) / 365;
    let day = day - (365 * year + year / 4 - year / 100);
    let month = (5 * day + 2) / 153;
    let day = day - (153 * month + 2) / 5 + 1;
    let (year, month) = match month {
        0..=9 => (400 * era + year, month + 3),
        _ => (400 * era + year + 1, month - 9),
    };
    let [hour, minute, second] = [second / 3600, second / 60 % 60, second % 60];
    format!("{year:04}-{month:02}-{day:02} {hour:02}:{minute:02}:{second:02} UTC")
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

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_clock_knows_leap_years() {
        let at = |seconds: u64| clock(SystemTime::UNIX_EPOCH + Duration::from_secs(seconds));
        assert_eq!(at(0), "1970-01-01 00:00:00 UTC");
        assert_eq!(at(951_782_400), "2000-02-29 00:00:00 UTC");
        assert_eq!(at(1_000_000_000), "2001-09-09 01:46:40 UTC");
        assert_eq!(at(4_107_542_399), "2100-02-28 23:59:59 UTC");
        assert_eq!(at(4_107_542_400), "2100-03-01 00:00:00 UTC");
    }
}
