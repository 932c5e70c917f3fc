//! A folder to work in, and the real program.

use std::fs;
use std::path::{Path, PathBuf};

use assert_cmd::Command;
use tempfile::TempDir;

pub struct Answer {
    pub code: i32,
    pub out: String,
    pub err: String,
}

/// Runs the program with the shipped configuration.
pub fn nightwright(args: &[&str]) -> Answer {
    answer(program().args(args))
}

/// The program with the shipped configuration, still without arguments.
pub fn program() -> Command {
    let mut command = Command::cargo_bin("nightwright").unwrap();
    let config = Path::new(env!("CARGO_MANIFEST_DIR")).join("config");
    command.env("NIGHTWRIGHT_CONFIG", config);
    command
}

pub fn answer(command: &mut Command) -> Answer {
    let output = command.output().unwrap();
    Answer {
        code: output.status.code().expect("an exit code, no signal"),
        out: String::from_utf8_lossy(&output.stdout).into_owned(),
        err: String::from_utf8_lossy(&output.stderr).into_owned(),
    }
}

/// A folder that is removed when the test ends.
pub struct Scratch {
    folder: TempDir,
    ledger: String,
}

impl Scratch {
    pub fn new() -> Self {
        let folder = TempDir::new().unwrap();
        let ledger = folder.path().join("ledger.sqlite");
        let ledger = ledger.to_str().unwrap().to_owned();
        Scratch { folder, ledger }
    }

    /// The ledger's file, which is not made.
    pub fn ledger(&self) -> &str {
        &self.ledger
    }

    pub fn path(&self, name: &str) -> PathBuf {
        self.folder.path().join(name)
    }

    /// Writes a file.
    pub fn file(&self, name: &str, text: &str) -> PathBuf {
        let path = self.path(name);
        fs::write(&path, text).unwrap();
        path
    }
}
