//! What a crash must not lose: every accepted entry is written down at once.
//!
//! A journal lives in the program's data folder, locked while its session lives and removed when the session ends
//! properly. One that nobody holds is what a broken session left behind.

use std::fs::{File, OpenOptions};
use std::io::{Seek, SeekFrom, Write};
use std::path::{Path, PathBuf};
use std::time::{SystemTime, UNIX_EPOCH};

/// Left journals that are kept, newest first.
const KEPT: usize = 5;

/// The data folder of the program, created if need be; `None` where the system names none.
pub fn data_folder() -> Option<PathBuf> {
    let folder = directories::ProjectDirs::from("", "", "lysocline")?.data_dir().to_owned();
    std::fs::create_dir_all(&folder).ok()?;
    Some(folder)
}

/// The journal of one session. What cannot be written is lost silently: a full disk must not end a session.
pub struct Journal {
    folder: Option<PathBuf>,
    file: Option<(PathBuf, File)>,
}

impl Journal {
    /// A journal that begins with the first entry.
    pub fn new(data_folder: Option<&Path>) -> Self {
        Self { folder: data_folder.map(|folder| folder.join("sessions")), file: None }
    }

    /// Journals of sessions that did not end properly, newest first; the oldest are removed.
    pub fn abandoned(&self) -> Vec<PathBuf> {
        let Some(folder) = &self.folder else { return Vec::new() };
        let entries = std::fs::read_dir(folder).into_iter().flatten().flatten().map(|entry| entry.path());
        let mut paths: Vec<PathBuf> = entries.filter(|path| is_left(path)).collect();
        paths.sort();
        paths.reverse();
        for old in paths.split_off(KEPT.min(paths.len())) {
            let _ = std::fs::remove_file(old);
        }
        paths
    }

    /// Writes one more entry down.
    pub fn append(&mut self, entry: &str) {
        if self.file.is_none() {
            self.file = self.folder.as_deref().and_then(create);
        }
        if let Some((_, file)) = &mut self.file {
            let _ = writeln!(file, "{entry}").and_then(|()| file.sync_data());
        }
    }

    /// Writes all entries anew, after one was taken back.
    pub fn rewrite(&mut self, script: &str) {
        if let Some((_, file)) = &mut self.file {
            let emptied = file.set_len(0).and_then(|()| file.seek(SeekFrom::Start(0)));
            let _ = emptied.and_then(|_| file.write_all(script.as_bytes())).and_then(|()| file.sync_data());
        }
    }

    /// The session ended as it should.
    pub fn close(self) {
        if let Some((path, _)) = self.file {
            let _ = std::fs::remove_file(path);
        }
    }
}

fn create(folder: &Path) -> Option<(PathBuf, File)> {
    std::fs::create_dir_all(folder).ok()?;
    let milliseconds = SystemTime::now().duration_since(UNIX_EPOCH).map_or(0, |since| since.as_millis());
    let path = folder.join(format!("{milliseconds:015}-{}.rhai", std::process::id()));
    let file = OpenOptions::new().create_new(true).append(true).open(&path).ok()?;
    file.try_lock().ok()?;
    Some((path, file))
}

/// Whether no running session holds the journal.
fn is_left(path: &Path) -> bool {
    path.extension().is_some_and(|extension| extension == "rhai")
        && File::open(path).is_ok_and(|file| file.try_lock().is_ok())
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_journal_outlives_only_a_broken_session() {
        let folder = tempfile::tempdir().expect("a temporary folder");
        let mut journal = Journal::new(Some(folder.path()));
        assert!(journal.abandoned().is_empty());
        journal.append("let a = 1;");
        journal.append("let b = 2;");
        assert!(journal.abandoned().is_empty(), "it is still held");
        journal.rewrite("let a = 1;\n");
        drop(journal);

        let next = Journal::new(Some(folder.path()));
        let left = next.abandoned();
        assert_eq!(left.len(), 1);
        assert_eq!(std::fs::read_to_string(&left[0]).expect("the journal"), "let a = 1;\n");

        let mut proper = Journal::new(Some(folder.path()));
        proper.append("1 + 1");
        proper.close();
        assert_eq!(next.abandoned().len(), 1);
    }
}
