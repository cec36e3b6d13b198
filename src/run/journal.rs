//! The journal: one line a round, appended, each with its checksum.
//!
//! A line is `{"check":"0123456789abcdef","entry":{…}}`, the check being the first 8 bytes of the SHA-256 of the entry's
//! text, in hexadecimal.

use std::fs::File;
use std::io::Write;
use std::path::{Path, PathBuf};

use sha2::{Digest, Sha256};

use super::error::RunError;

const BEFORE_CHECK: &str = "{\"check\":\"";
const BEFORE_ENTRY: &str = "\",\"entry\":";
const CHECK_LENGTH: usize = 16;

/// A journal under way.
#[derive(Debug)]
pub struct Journal {
    file: File,
    path: PathBuf,
}

/// What a journal holds.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct JournalEntries<'a> {
    /// The JSON texts of the entries up to the first bad line.
    pub entries: Vec<&'a str>,
    /// The number, from 1, of the first line that is torn or does not match its checksum; what follows is not read.
    pub bad_line: Option<usize>,
}

impl Journal {
    /// Begins a journal; there must be none yet.
    pub(super) fn begin(path: &Path) -> Result<Journal, RunError> {
        let file = File::create_new(path)
            .map_err(|error| RunError::Write { path: path.to_path_buf(), cause: error.to_string() })?;
        Ok(Journal { file, path: path.to_path_buf() })
    }

    /// Appends an entry, which is the JSON text of one object on one line.
    ///
    /// The whole line goes to the system in one call; it is not synced, since losing the last rounds to a power cut is
    /// the price stated for a journal that does not slow the hunt.
    ///
    /// # Errors
    /// [`RunError::Write`] where the system refuses.
    pub fn append(&mut self, entry: &str) -> Result<(), RunError> {
        debug_assert!(!entry.contains('\n'), "an entry is one line");
        let line = format!("{BEFORE_CHECK}{}{BEFORE_ENTRY}{entry}}}\n", checksum(entry));
        self.file
            .write_all(line.as_bytes())
            .map_err(|error| RunError::Write { path: self.path.clone(), cause: error.to_string() })
    }
}

/// Reads a journal's text as far as it is sound.
pub fn read_journal(text: &str) -> JournalEntries<'_> {
    let mut entries = Vec::new();
    for (number, line) in text.split_inclusive('\n').enumerate() {
        match entry_of(line) {
            Some(entry) => entries.push(entry),
            None => return JournalEntries { entries, bad_line: Some(number + 1) },
        }
    }
    JournalEntries { entries, bad_line: None }
}

fn entry_of(line: &str) -> Option<&str> {
    let rest = line.strip_suffix("}\n")?.strip_prefix(BEFORE_CHECK)?;
    let (check, rest) = (rest.get(..CHECK_LENGTH)?, rest.get(CHECK_LENGTH..)?);
    let entry = rest.strip_prefix(BEFORE_ENTRY)?;
    (check == checksum(entry)).then_some(entry)
}

fn checksum(entry: &str) -> String {
    Sha256::digest(entry.as_bytes()).iter().take(CHECK_LENGTH / 2).map(|byte| format!("{byte:02x}")).collect()
}

#[cfg(test)]
mod tests {
    use super::*;

    fn journal() -> String {
        let folder = tempfile::tempdir().unwrap();
        let path = folder.path().join("journal.jsonl");
        let mut journal = Journal::begin(&path).unwrap();
        for round in 0..3 {
            journal.append(&format!("{{\"round\":{round}}}")).unwrap();
        }
        std::fs::read_to_string(path).unwrap()
    }

    #[test]
    fn entries_come_back_as_they_were() {
        let text = journal();
        let read = read_journal(&text);
        assert_eq!(read.entries, ["{\"round\":0}", "{\"round\":1}", "{\"round\":2}"]);
        assert_eq!(read.bad_line, None);
        assert!(text.lines().all(|line| serde_json::from_str::<serde_json::Value>(line).is_ok()), "JSON lines");
    }

    #[test]
    fn a_line_torn_at_any_byte_is_dropped_and_told() {
        let text = journal();
        let whole = text.len() - text.lines().last().unwrap().len() - 1;
        for end in whole + 1..text.len() {
            let read = read_journal(&text[..end]);
            assert_eq!((read.entries.len(), read.bad_line), (2, Some(3)), "torn at byte {end}");
        }
    }

    #[test]
    fn an_altered_digit_is_noticed() {
        let text = journal().replace("\"round\":1", "\"round\":7");
        assert_eq!(read_journal(&text).bad_line, Some(2));
    }
}
