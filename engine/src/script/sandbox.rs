//! Which files a script may read and write.
//!
//! It reads beside itself and below, writes below one folder, and replaces a file there only if it wrote it itself: in
//! this run, or in an earlier one that left its mark in the folder's list [`WRITTEN_LIST`].

use std::collections::{BTreeMap, BTreeSet};
use std::io::{ErrorKind, Write};
use std::path::{Component, Path, PathBuf};

use super::{Fail, fail};

/// The file in the output folder that says which script wrote what.
pub const WRITTEN_LIST: &str = ".written-by-lysocline";

/// Why a file was not read or written.
#[derive(Debug, Clone, PartialEq, Eq, thiserror::Error)]
#[non_exhaustive]
#[allow(missing_docs, reason = "each message says what its fields hold")]
pub enum SandboxError {
    /// The name leaves the folder a script may use.
    #[error("`{name}` is outside `{folder}`")]
    Outside { name: String, folder: PathBuf },
    /// There is no such file to read.
    #[error("there is no file `{name}` in `{folder}`")]
    Missing { name: String, folder: PathBuf, nearest: Option<String> },
    /// The file exists and was not written by this script.
    #[error("`{name}` exists and was not written by this script")]
    NotOurs { name: String },
    /// The operating system refused.
    #[error("cannot {deed} `{name}`: {reason}")]
    Refused { deed: &'static str, name: String, reason: String },
}

impl From<SandboxError> for Fail {
    fn from(error: SandboxError) -> Self {
        let message = fail(error.to_string());
        match error {
            SandboxError::Outside { .. } => {
                message.help("a script reads files beside it and writes files in one folder (`--write DIR`)")
            }
            SandboxError::Missing { nearest, .. } => {
                message.maybe_help(nearest.map(|name| format!("did you mean `{name}`?")))
            }
            SandboxError::NotOurs { .. } => {
                message.help("choose another name, move the file away, or allow it with `--overwrite`")
            }
            SandboxError::Refused { .. } => message,
        }
    }
}

/// The files of one run.
#[derive(Debug)]
pub struct Sandbox {
    read_folder: PathBuf,
    write_folder: PathBuf,
    /// The script, as named in the list of written files; `None` at the prompt, which keeps no list.
    script: Option<String>,
    overwrite: bool,
    /// Nothing is really written.
    rehearses: bool,
    written: BTreeSet<PathBuf>,
    read: BTreeSet<PathBuf>,
}

impl Default for Sandbox {
    fn default() -> Self {
        Self::for_prompt(false)
    }
}

impl Sandbox {
    /// For a script file: it reads in its own folder and writes in `write_folder`.
    #[must_use]
    pub fn for_script(script: &Path, write_folder: &Path, overwrite: bool) -> Self {
        let read_folder = match script.parent() {
            Some(folder) if !folder.as_os_str().is_empty() => folder.to_owned(),
            _ => PathBuf::from("."),
        };
        let name = script.file_name().map(|name| name.to_string_lossy().into_owned());
        Self { script: name, ..Self::new(read_folder, write_folder.to_owned(), overwrite) }
    }

    /// For the prompt: the current folder.
    #[must_use]
    pub fn for_prompt(overwrite: bool) -> Self {
        Self::new(PathBuf::from("."), PathBuf::from("."), overwrite)
    }

    /// The same folders for a run that only tries something out: it reads, and writes nothing.
    #[must_use]
    pub fn rehearsal(&self) -> Self {
        let mut rehearsal = Self::new(self.read_folder.clone(), self.write_folder.clone(), true);
        rehearsal.rehearses = true;
        rehearsal
    }

    fn new(read_folder: PathBuf, write_folder: PathBuf, overwrite: bool) -> Self {
        Self {
            read_folder,
            write_folder,
            script: None,
            overwrite,
            rehearses: false,
            written: BTreeSet::new(),
            read: BTreeSet::new(),
        }
    }

    /// The folder a script reads in.
    #[must_use]
    pub fn read_folder(&self) -> &Path {
        &self.read_folder
    }

    /// Every file read so far, in alphabetical order.
    pub fn files_read(&self) -> impl Iterator<Item = &Path> {
        self.read.iter().map(PathBuf::as_path)
    }

    /// The text of a file beside the script.
    ///
    /// # Errors
    ///
    /// Returns `Outside` when the name leads elsewhere, `Missing` when there is no such file, `Refused` when it cannot
    /// be read or is not UTF-8 text.
    pub fn read_text(&mut self, name: &str) -> Result<String, SandboxError> {
        let path = self.path_to_read(name)?;
        let bytes = std::fs::read(&path).map_err(|error| refused("read", name, &error))?;
        let text = String::from_utf8(bytes).map_err(|_| refused("read", name, &"it is not UTF-8 text"))?;
        Ok(text.strip_prefix('\u{feff}').unwrap_or(&text).to_owned())
    }

    /// The path of a file to read, checked to lie beside the script and to exist.
    ///
    /// # Errors
    ///
    /// As for [`Sandbox::read_text`].
    pub fn path_to_read(&mut self, name: &str) -> Result<PathBuf, SandboxError> {
        let path = inside(&self.read_folder, name)?;
        let real = match path.canonicalize() {
            Ok(real) => real,
            Err(error) if error.kind() == ErrorKind::NotFound => return Err(self.missing(name, &path)),
            Err(error) => return Err(refused("read", name, &error)),
        };
        let folder = self.read_folder.canonicalize().map_err(|error| refused("read", name, &error))?;
        if !real.starts_with(&folder) {
            return Err(SandboxError::Outside { name: name.to_owned(), folder: self.read_folder.clone() });
        }
        self.read.insert(path.clone());
        Ok(path)
    }

    /// Writes a file in the output folder, whole or not at all, and returns its path.
    ///
    /// # Errors
    ///
    /// Returns `Outside` when the name leads elsewhere, `NotOurs` when it would replace a file this script did not
    /// write, `Refused` when the system does.
    pub fn write(&mut self, name: &str, content: &[u8]) -> Result<PathBuf, SandboxError> {
        let path = inside(&self.write_folder, name)?;
        if self.rehearses {
            return Ok(path);
        }
        self.make_folder_of(&path, name)?;
        if path.is_dir() {
            return Err(refused("write", name, &"it is a folder"));
        }
        if !self.may_replace(&path, name) {
            return Err(SandboxError::NotOurs { name: path.display().to_string() });
        }
        write_whole(&path, content).map_err(|error| refused("write", name, &error))?;
        self.written.insert(path.clone());
        self.note(name, content);
        Ok(path)
    }

    fn missing(&self, name: &str, path: &Path) -> SandboxError {
        let folder = path.parent().unwrap_or(&self.read_folder);
        let entries = std::fs::read_dir(folder).into_iter().flatten().flatten();
        let names: Vec<String> = entries.filter_map(|entry| entry.file_name().into_string().ok()).collect();
        let wanted = path.file_name().map(|name| name.to_string_lossy().into_owned()).unwrap_or_default();
        let nearest = super::words::nearest(&wanted, names.iter().map(String::as_str)).map(str::to_owned);
        SandboxError::Missing { name: name.to_owned(), folder: folder.to_owned(), nearest }
    }

    /// Creates the folder, and checks that no link leads it outside.
    fn make_folder_of(&self, path: &Path, name: &str) -> Result<(), SandboxError> {
        let folder = path.parent().unwrap_or(&self.write_folder);
        std::fs::create_dir_all(folder).map_err(|error| refused("write", name, &error))?;
        let real = |path: &Path| path.canonicalize().map_err(|error| refused("write", name, &error));
        if real(folder)?.starts_with(real(&self.write_folder)?) {
            return Ok(());
        }
        Err(SandboxError::Outside { name: name.to_owned(), folder: self.write_folder.clone() })
    }

    fn may_replace(&self, path: &Path, name: &str) -> bool {
        let occupied = path.symlink_metadata().is_ok();
        !occupied || self.overwrite || self.written.contains(path) || self.wrote_before(path, name)
    }

    /// Whether the list says that this script wrote the file, and the file is still as it was written.
    fn wrote_before(&self, path: &Path, name: &str) -> bool {
        let Some(script) = &self.script else { return false };
        let list = self.list();
        let Some((by, digest)) = list.get(name) else { return false };
        by == script && std::fs::read(path).is_ok_and(|content| *digest == digest_of(&content))
    }

    fn list_path(&self) -> PathBuf {
        self.write_folder.join(WRITTEN_LIST)
    }

    /// File name to script and digest; an unreadable list is an empty one, which only makes us more careful.
    fn list(&self) -> BTreeMap<String, (String, String)> {
        let text = std::fs::read_to_string(self.list_path()).unwrap_or_default();
        let entry = |line: &str| {
            let mut fields = line.split('\t').map(str::to_owned);
            Some((fields.next()?, (fields.next()?, fields.next()?)))
        };
        text.lines().filter_map(entry).collect()
    }

    fn note(&self, name: &str, content: &[u8]) {
        let Some(script) = &self.script else { return };
        let mut list = self.list();
        list.insert(name.to_owned(), (script.clone(), digest_of(content)));
        let lines = list.iter().map(|(name, (script, digest))| format!("{name}\t{script}\t{digest}\n"));
        // Without the list the next run merely asks before replacing.
        let _ = write_whole(&self.list_path(), lines.collect::<String>().as_bytes());
    }
}

fn refused(deed: &'static str, name: &str, reason: &dyn ToString) -> SandboxError {
    SandboxError::Refused { deed, name: name.to_owned(), reason: reason.to_string().to_lowercase() }
}

/// `name` within `folder`, refusing absolute names, `..`, and names that hide control characters.
fn inside(folder: &Path, name: &str) -> Result<PathBuf, SandboxError> {
    let path = Path::new(name);
    let plain = |part: Component| matches!(part, Component::Normal(_) | Component::CurDir);
    if name.is_empty() || name.chars().any(char::is_control) {
        return Err(refused("use", name, &"it is not a file name"));
    }
    if path.components().all(plain) {
        let clean: PathBuf = path.components().filter(|part| matches!(part, Component::Normal(_))).collect();
        return Ok(folder.join(clean));
    }
    Err(SandboxError::Outside { name: name.to_owned(), folder: folder.to_owned() })
}

/// Writes a file whole or not at all: a broken write leaves what was there.
///
/// # Errors
///
/// What the system says.
pub fn write_whole(path: &Path, content: &[u8]) -> std::io::Result<()> {
    let mut file = atomic_write_file::AtomicWriteFile::open(path)?;
    file.write_all(content)?;
    file.commit()
}

/// A short digest of a text or file: FNV-1a, 64 bits. It notices an edit; it is no protection against forgery.
#[must_use]
pub fn digest_of(content: &[u8]) -> String {
    let step = |hash: u64, byte: &u8| (hash ^ u64::from(*byte)).wrapping_mul(0x0100_0000_01b3);
    format!("{:016x}", content.iter().fold(0xcbf2_9ce4_8422_2325, step))
}
