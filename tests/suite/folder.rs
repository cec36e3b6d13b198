//! A fresh folder and the real program.

use std::path::{Path, PathBuf};
use std::process::Command;

/// A folder that is removed in the end.
pub(crate) struct Folder(tempfile::TempDir);

/// What a run of the program left.
#[derive(Debug)]
pub(crate) struct Ran {
    pub(crate) status: Option<i32>,
    pub(crate) out: String,
    pub(crate) err: String,
}

impl Folder {
    pub(crate) fn new() -> Self {
        Folder(tempfile::tempdir().unwrap())
    }

    pub(crate) fn path(&self) -> &Path {
        self.0.path()
    }

    /// Writes a file.
    pub(crate) fn put(&self, name: &str, content: impl AsRef<[u8]>) -> PathBuf {
        let path = self.path().join(name);
        std::fs::create_dir_all(path.parent().unwrap()).unwrap();
        std::fs::write(&path, content).unwrap();
        path
    }

    /// Runs the program in the folder.
    pub(crate) fn run(&self, arguments: &[&str]) -> Ran {
        let program = env!("CARGO_BIN_EXE_thalweg");
        let ran = Command::new(program).args(arguments).current_dir(self.path()).output().unwrap();
        Ran {
            status: ran.status.code(),
            out: String::from_utf8(ran.stdout).unwrap(),
            err: String::from_utf8(ran.stderr).unwrap(),
        }
    }
}
