//! One way to start the program in a folder of its own.

#![allow(dead_code, reason = "each test program is compiled with all of it and uses a part")]

use std::path::Path;

use assert_cmd::Command;
use tempfile::TempDir;

/// A folder with files in it, and the program to run there.
pub struct Test {
    folder: TempDir,
}

impl Test {
    pub fn new() -> Self {
        Self { folder: TempDir::new().expect("a temporary folder") }
    }

    pub fn file(self, name: &str, text: &str) -> Self {
        let path = self.path().join(name);
        std::fs::create_dir_all(path.parent().expect("a folder")).expect("it can be made");
        std::fs::write(path, text).expect("it can be written");
        self
    }

    pub fn path(&self) -> &Path {
        self.folder.path()
    }

    /// The program, without colours from the outside and with its data folder inside.
    pub fn lysocline(&self, arguments: &[&str]) -> Command {
        let mut command = Command::cargo_bin("lysocline").expect("it is built");
        command
            .current_dir(self.path())
            .env("HOME", self.path())
            .env_remove("XDG_DATA_HOME")
            .env_remove("NO_COLOR");
        command.args(arguments);
        command
    }
}

/// Standard output and standard error as text.
pub fn streams(output: &std::process::Output) -> (String, String) {
    let text = |bytes: &[u8]| String::from_utf8(bytes.to_vec()).expect("text");
    (text(&output.stdout), text(&output.stderr))
}
