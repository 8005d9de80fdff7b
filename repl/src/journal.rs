//! What a crash must not lose: every accepted entry is written down at once.
//!
//! A journal lives in the program's data folder, locked while its session lives and removed when the session ends
//! properly. One that nobody holds is what a broken session left behind. It is a script: each entry is followed by a
//! comment line that says it is whole, so that what a power cut tore is told from what was accepted.

use std::fs::{File, OpenOptions};
use std::io::Write;
use std::path::{Path, PathBuf};
use std::time::{SystemTime, UNIX_EPOCH};

/// Left journals that are kept, newest first.
const KEPT: usize = 20;

/// The line below each accepted entry.
const WHOLE: &str = "// ==== accepted ====";

/// The data folder of the program, created if need be; `None` where the system names none.
pub fn data_folder() -> Option<PathBuf> {
    let folder = directories::ProjectDirs::from("", "", "lysocline")?.data_dir().to_owned();
    std::fs::create_dir_all(&folder).ok()?;
    Some(folder)
}

/// The journal of one session.
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

    /// Writes one more entry down; it is on the disk when this returns.
    ///
    /// # Errors
    ///
    /// Returns why the entry is not kept; the session goes on.
    pub fn append(&mut self, entry: &str) -> std::io::Result<()> {
        if self.file.is_none()
            && let Some(folder) = &self.folder
        {
            self.file = Some(create(folder)?);
        }
        let Some((_, file)) = &mut self.file else { return Ok(()) };
        file.write_all(marked(entry).as_bytes())?;
        file.sync_data()
    }

    /// Writes all entries anew, after one was taken back. The old journal stands until the new one is whole.
    ///
    /// # Errors
    ///
    /// Returns why they could not be written; the journal then has the entry that was taken back.
    pub fn rewrite<'a>(&mut self, entries: impl Iterator<Item = &'a str>) -> std::io::Result<()> {
        let Some((path, file)) = &mut self.file else { return Ok(()) };
        let next = path.with_extension("next");
        let _ = std::fs::remove_file(&next);
        let mut new = OpenOptions::new().create_new(true).append(true).open(&next)?;
        new.try_lock().map_err(std::io::Error::from)?;
        new.write_all(entries.map(marked).collect::<String>().as_bytes())?;
        new.sync_all()?;
        std::fs::rename(&next, &*path)?;
        sync_folder_of(path);
        *file = new;
        Ok(())
    }

    /// The session ended as it should.
    pub fn close(self) {
        if let Some((path, _)) = self.file {
            let _ = std::fs::remove_file(path);
        }
    }
}

/// The entries of a journal that are whole, in order, and whether something torn follows them.
///
/// # Errors
///
/// Returns why it cannot be read.
pub fn entries(path: &Path) -> std::io::Result<(Vec<String>, bool)> {
    let bytes = std::fs::read(path)?;
    let text = String::from_utf8_lossy(&bytes);
    let mut entries = Vec::new();
    let mut entry: Vec<&str> = Vec::new();
    for line in text.split_inclusive('\n') {
        if line.strip_suffix('\n') == Some(WHOLE) {
            entries.push(std::mem::take(&mut entry).concat().trim_end_matches('\n').to_owned());
        } else {
            entry.push(line);
        }
    }
    Ok((entries, !entry.is_empty()))
}

fn marked(entry: &str) -> String {
    format!("{entry}\n{WHOLE}\n")
}

fn create(folder: &Path) -> std::io::Result<(PathBuf, File)> {
    std::fs::create_dir_all(folder)?;
    let milliseconds = SystemTime::now().duration_since(UNIX_EPOCH).map_or(0, |since| since.as_millis());
    let path = folder.join(format!("{milliseconds:015}-{}.rhai", std::process::id()));
    let file = OpenOptions::new().create_new(true).append(true).open(&path)?;
    file.try_lock().map_err(std::io::Error::from)?;
    sync_folder_of(&path);
    Ok((path, file))
}

/// A new name is on the disk only when its folder is. Some systems cannot do this to folders, and need not.
fn sync_folder_of(path: &Path) {
    if let Some(folder) = path.parent() {
        let _ = File::open(folder).and_then(|folder| folder.sync_all());
    }
}

/// Whether it holds entries and no running session holds it.
fn is_left(path: &Path) -> bool {
    let has_entries = std::fs::metadata(path).is_ok_and(|metadata| metadata.len() > 0);
    has_entries
        && path.extension().is_some_and(|extension| extension == "rhai")
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
        journal.append("let a = 1;").unwrap();
        journal.append("let b = 2;\nb").unwrap();
        assert!(journal.abandoned().is_empty(), "it is still held");
        journal.rewrite(["let a = 1;\n"].into_iter()).unwrap();
        journal.append("fn f(x) {\n  x\n}").unwrap();
        assert!(journal.abandoned().is_empty(), "it is still held");
        drop(journal);

        let next = Journal::new(Some(folder.path()));
        let left = next.abandoned();
        assert_eq!(left.len(), 1);
        let expected = vec!["let a = 1;".to_owned(), "fn f(x) {\n  x\n}".to_owned()];
        assert_eq!(entries(&left[0]).unwrap(), (expected.clone(), false));
        // A power cut tears the last entry.
        let mut torn = std::fs::read_to_string(&left[0]).unwrap();
        torn.push_str("let c = [1,\n// ==== acc");
        std::fs::write(&left[0], torn).unwrap();
        assert_eq!(entries(&left[0]).unwrap(), (expected, true));

        let mut proper = Journal::new(Some(folder.path()));
        proper.append("1 + 1").unwrap();
        proper.close();
        assert_eq!(next.abandoned().len(), 1);
    }
}
