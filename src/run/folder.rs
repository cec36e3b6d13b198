//! The folder of one run.

use std::fs::{self, File, OpenOptions, TryLockError};
use std::io::ErrorKind;
use std::path::{Path, PathBuf};

use super::atomic::{replace, write_atomically};
use super::error::RunError;
use super::journal::{Journal, JournalReader, Sound};
use super::name::demand_valid_name;

/// How a run is to be called.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Wanted<'a> {
    /// Exactly so; refused if it is there already.
    Exactly(&'a str),
    /// So, with a counter from the second one on: `pore`, `pore-2`, `pore-3`.
    Stem(&'a str),
}

/// A run that no other process may work on while this lives. The system gives the lock up when the process ends, however
/// it ends.
#[derive(Debug)]
pub struct Lock(#[expect(dead_code, reason = "it is held, not used")] File);

/// A run folder.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct RunFolder {
    path: PathBuf,
    name: String,
}

impl RunFolder {
    /// Makes the folder of a new run within `results`, which is made too if it is missing.
    ///
    /// The system's own refusal to make a folder twice decides whether a name is free, so that two runs that start at
    /// the same instant cannot get the same folder.
    ///
    /// # Errors
    /// A [`RunError`] where the name is not valid or taken, or the folder cannot be made.
    pub fn create(results: &Path, wanted: Wanted<'_>) -> Result<RunFolder, RunError> {
        let (Wanted::Exactly(base) | Wanted::Stem(base)) = wanted;
        demand_valid_name(base).map_err(|cause| RunError::Name { name: base.to_string(), cause })?;
        let failed =
            |path: &Path, error: std::io::Error| RunError::Make { path: path.to_path_buf(), cause: error.to_string() };
        fs::create_dir_all(results).map_err(|error| failed(results, error))?;
        let mut counter: u64 = 1;
        loop {
            let name = if counter == 1 { base.to_string() } else { format!("{base}-{counter}") };
            let path = results.join(&name);
            match fs::create_dir(&path) {
                Ok(()) => return Ok(RunFolder { path, name }),
                Err(error) if error.kind() == ErrorKind::AlreadyExists => {
                    if matches!(wanted, Wanted::Exactly(_)) {
                        return Err(RunError::Exists(path));
                    }
                    counter += 1;
                }
                Err(error) => return Err(failed(&path, error)),
            }
        }
    }

    /// The folder of an earlier run.
    pub fn of(path: &Path) -> RunFolder {
        let name = path.file_name().map_or_else(String::new, |name| name.to_string_lossy().into_owned());
        RunFolder { path: path.to_path_buf(), name }
    }

    /// Keeps other processes away.
    ///
    /// # Errors
    /// [`RunError::Locked`] where one is at work already, [`RunError::Write`] where the system refuses.
    pub fn lock(&self) -> Result<Lock, RunError> {
        // A file of its own: the others are replaced, and some systems keep a locked file from being read.
        let path = self.path.join("lock");
        let refused = |error: std::io::Error| RunError::Write { path: path.clone(), cause: error.to_string() };
        let file = OpenOptions::new().create(true).append(true).open(&path).map_err(refused)?;
        match file.try_lock() {
            Ok(()) => Ok(Lock(file)),
            Err(TryLockError::WouldBlock) => Err(RunError::Locked(self.path.clone())),
            // A file system without locks is no reason not to hunt.
            Err(TryLockError::Error(error)) if error.kind() == ErrorKind::Unsupported => Ok(Lock(file)),
            Err(TryLockError::Error(error)) => Err(refused(error)),
        }
    }

    /// Whether a process is at work on it.
    pub fn is_locked(&self) -> bool {
        let file = File::open(self.path.join("lock"));
        file.is_ok_and(|file| matches!(file.try_lock_shared(), Err(TryLockError::WouldBlock)))
    }

    /// Where it is.
    pub fn path(&self) -> &Path {
        &self.path
    }

    /// The name of the run.
    pub fn name(&self) -> &str {
        &self.name
    }

    /// Writes one of its files, or replaces it, at one stroke.
    ///
    /// # Errors
    /// [`RunError::Write`] where the system refuses.
    pub fn write(&self, file: &str, bytes: &[u8]) -> Result<(), RunError> {
        write_atomically(&self.path.join(file), bytes)
    }

    /// Writes one of its files, or replaces it, at one stroke, but without waiting for the disk: for what is written often and
    /// needed by nobody after a power cut.
    ///
    /// # Errors
    /// [`RunError::Write`] where the system refuses.
    pub fn write_unsynced(&self, file: &str, bytes: &[u8]) -> Result<(), RunError> {
        replace(&self.path.join(file), bytes)
    }

    /// Goes on with its journal: a torn end is cut off; an altered middle is refused, or cut off too with `salvage`.
    ///
    /// # Errors
    /// [`RunError::Altered`], or [`RunError::Read`] and [`RunError::Write`] where the system refuses.
    pub fn go_on(&self, salvage: bool) -> Result<(Journal, Sound), RunError> {
        Journal::go_on(&self.path.join("journal.jsonl"), salvage)
    }

    /// Reads its journal from the beginning.
    ///
    /// # Errors
    /// [`RunError::Read`] where the system refuses.
    pub fn read_journal(&self) -> Result<JournalReader, RunError> {
        JournalReader::open(&self.path.join("journal.jsonl"))
    }

    /// Begins its journal.
    ///
    /// # Errors
    /// [`RunError::Write`] where the system refuses.
    pub fn journal(&self) -> Result<Journal, RunError> {
        Journal::begin(&self.path.join("journal.jsonl"))
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_run_never_takes_the_place_of_another() {
        let results = tempfile::tempdir().unwrap();
        let make = |wanted| RunFolder::create(results.path(), wanted).map(|run| run.name().to_string());
        assert_eq!(make(Wanted::Stem("pore")).unwrap(), "pore");
        assert_eq!(make(Wanted::Stem("pore")).unwrap(), "pore-2");
        assert_eq!(make(Wanted::Stem("pore")).unwrap(), "pore-3");
        let taken = make(Wanted::Exactly("pore")).unwrap_err();
        assert_eq!(taken, RunError::Exists(results.path().join("pore")));
        assert!(taken.is_usage());
        assert!(taken.to_string().contains("--name"), "the remedy: {taken}");
    }

    #[test]
    fn a_lock_keeps_others_away_until_it_is_given_up() {
        let results = tempfile::tempdir().unwrap();
        let run = RunFolder::create(results.path(), Wanted::Stem("pore")).unwrap();
        assert!(!run.is_locked());
        let lock = run.lock().unwrap();
        assert_eq!(run.lock().unwrap_err(), RunError::Locked(run.path().to_path_buf()));
        assert!(run.is_locked());
        drop(lock);
        assert!(!run.is_locked());
        run.lock().unwrap();
    }

    #[test]
    fn a_place_that_is_a_file_is_an_outside_failure() {
        let folder = tempfile::tempdir().unwrap();
        let file = folder.path().join("results");
        fs::write(&file, "not a folder").unwrap();
        let error = RunFolder::create(&file, Wanted::Stem("pore")).unwrap_err();
        assert!(matches!(error, RunError::Make { .. }) && !error.is_usage(), "{error}");
    }
}
