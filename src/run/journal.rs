//! The journal: one line a round, appended, each with its checksum.
//!
//! A line is `{"check":"0123456789abcdef","entry":{…}}`, the check being the first 8 bytes of the SHA-256 of the entry's
//! text, in hexadecimal.

use std::fmt::Write as _;
use std::fs::{self, File, OpenOptions};
use std::io::{self, BufRead, BufReader, ErrorKind, Write};
use std::path::{Path, PathBuf};

use sha2::{Digest, Sha256};

use super::atomic::write_atomically;
use super::error::RunError;

const BEFORE_CHECK: &str = "{\"check\":\"";
const BEFORE_ENTRY: &str = "\",\"entry\":";
const CHECK_LENGTH: usize = 16;

/// Where a journal's bytes go: a file, or in tests something that fails when it is told to.
trait Store: Send {
    fn write(&mut self, bytes: &[u8]) -> io::Result<usize>;
    fn sync(&mut self) -> io::Result<()>;
}

impl Store for File {
    fn write(&mut self, bytes: &[u8]) -> io::Result<usize> {
        Write::write(self, bytes)
    }

    fn sync(&mut self) -> io::Result<()> {
        self.sync_data()
    }
}

/// A journal under way.
///
/// A line that cannot be written is kept and written before the next ones, from the byte on at which the system refused:
/// a full disk tears no line for good.
pub struct Journal {
    store: Box<dyn Store>,
    path: PathBuf,
    pending: Vec<u8>,
}

/// What a journal holds.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct JournalEntries<'a> {
    /// The JSON texts of the entries up to the first bad line.
    pub entries: Vec<&'a str>,
    /// The number, from 1, of the first line that is torn or does not match its checksum; what follows is not read.
    pub bad_line: Option<usize>,
}

/// How much of a journal is sound.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq)]
pub struct Sound {
    /// Lines before the first bad one.
    pub lines: u64,
    /// Their bytes.
    pub bytes: u64,
    /// Lines from the first bad one on, the last of which may be torn.
    pub bad_lines: u64,
    /// Their bytes.
    pub bad_bytes: u64,
    /// Whether a sound line follows a bad one: then the file was altered, not torn.
    pub altered: bool,
}

impl Journal {
    /// Begins a journal; there must be none yet.
    pub(super) fn begin(path: &Path) -> Result<Journal, RunError> {
        let file = File::create_new(path).map_err(|error| refused(path, &error))?;
        Ok(Journal { store: Box::new(file), path: path.to_path_buf(), pending: Vec::new() })
    }

    /// Goes on with a journal, or begins a missing one. A bad end is cut off; where sound lines follow a bad one the journal is
    /// refused, or with `salvage` cut there too, and what is cut is kept beside it.
    pub(super) fn go_on(path: &Path, salvage: bool) -> Result<(Journal, Sound), RunError> {
        let mut open = OpenOptions::new();
        let file = open.read(true).append(true).create(true).open(path).map_err(|error| refused(path, &error))?;
        let unreadable = |error: &io::Error| RunError::Read { path: path.to_path_buf(), cause: error.to_string() };
        let sound = look_through(BufReader::new(&file)).map_err(|error| unreadable(&error))?;
        if sound.altered {
            if !salvage {
                return Err(RunError::Altered { path: path.to_path_buf(), line: sound.lines + 1 });
            }
            let bytes = fs::read(path).map_err(|error| unreadable(&error))?;
            let from = usize::try_from(sound.bytes).unwrap_or(usize::MAX).min(bytes.len());
            write_atomically(&path.with_extension("removed"), &bytes[from..])?;
        }
        if sound.bad_bytes > 0 {
            file.set_len(sound.bytes).and_then(|()| file.sync_data()).map_err(|error| refused(path, &error))?;
        }
        Ok((Journal { store: Box::new(file), path: path.to_path_buf(), pending: Vec::new() }, sound))
    }

    /// Appends an entry, which is the JSON text of one object on one line.
    ///
    /// The line goes to the system in one call; it is not synced, see [`Journal::sync`].
    ///
    /// # Errors
    /// [`RunError::Write`] where the system refuses; the entry is kept, and written by a later call.
    pub fn append(&mut self, entry: &str) -> Result<(), RunError> {
        self.keep(entry);
        self.flush()
    }

    /// Keeps an entry for a later [`Journal::flush`].
    pub fn keep(&mut self, entry: &str) {
        debug_assert!(!entry.contains('\n'), "an entry is one line");
        for part in [BEFORE_CHECK, &checksum(entry), BEFORE_ENTRY, entry, "}\n"] {
            self.pending.extend_from_slice(part.as_bytes());
        }
    }

    /// Writes what was kept.
    ///
    /// # Errors
    /// As [`Journal::append`].
    pub fn flush(&mut self) -> Result<(), RunError> {
        let mut written = 0;
        let mut outcome = Ok(());
        while written < self.pending.len() {
            match self.store.write(&self.pending[written..]) {
                Ok(0) => outcome = Err(io::Error::from(ErrorKind::WriteZero)),
                Ok(more) => written += more,
                Err(error) if error.kind() == ErrorKind::Interrupted => {}
                Err(error) => outcome = Err(error),
            }
            if outcome.is_err() {
                break;
            }
        }
        self.pending.drain(..written);
        outcome.map_err(|error| refused(&self.path, &error))
    }

    /// Writes what was kept and has the system put all of it onto the disk, where a power cut cannot take it.
    ///
    /// # Errors
    /// [`RunError::Write`] where the system refuses, or the journal has gone from its folder.
    pub fn sync(&mut self) -> Result<(), RunError> {
        self.flush()?;
        // A removed file takes bytes without complaint until it is closed.
        fs::metadata(&self.path).and_then(|_| self.store.sync()).map_err(|error| refused(&self.path, &error))
    }
}

fn refused(path: &Path, error: &io::Error) -> RunError {
    RunError::Write { path: path.to_path_buf(), cause: error.to_string() }
}

fn look_through(mut reader: impl BufRead) -> io::Result<Sound> {
    let mut sound = Sound::default();
    let mut line = Vec::new();
    loop {
        line.clear();
        let bytes = reader.read_until(b'\n', &mut line)? as u64;
        if bytes == 0 {
            return Ok(sound);
        }
        let is_sound = std::str::from_utf8(&line).is_ok_and(|line| entry_of(line).is_some());
        if sound.bad_lines > 0 {
            sound.altered |= is_sound;
            (sound.bad_lines, sound.bad_bytes) = (sound.bad_lines + 1, sound.bad_bytes + bytes);
        } else if is_sound {
            (sound.lines, sound.bytes) = (sound.lines + 1, sound.bytes + bytes);
        } else {
            (sound.bad_lines, sound.bad_bytes) = (1, bytes);
        }
    }
}

/// Reads the entries of a journal one after the other, so that a long one need not be held.
pub struct JournalReader {
    reader: BufReader<File>,
    line: String,
}

impl JournalReader {
    pub(super) fn open(path: &Path) -> Result<JournalReader, RunError> {
        let file =
            File::open(path).map_err(|error| RunError::Read { path: path.to_path_buf(), cause: error.to_string() })?;
        Ok(JournalReader { reader: BufReader::new(file), line: String::new() })
    }

    /// The JSON text of the next entry; `None` at the end, or at the first line that is torn or altered.
    pub fn next_entry(&mut self) -> Option<&str> {
        self.line.clear();
        self.reader.read_line(&mut self.line).ok()?;
        entry_of(&self.line)
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
    let mut check = String::with_capacity(CHECK_LENGTH);
    for byte in Sha256::digest(entry.as_bytes()).iter().take(CHECK_LENGTH / 2) {
        // Writing to a string cannot fail.
        let _ = write!(check, "{byte:02x}");
    }
    check
}

#[cfg(test)]
mod tests {
    use super::*;
    use std::sync::{Arc, Mutex};

    fn write_three(path: &Path) {
        let mut journal = Journal::begin(path).unwrap();
        for round in 0..3 {
            journal.append(&format!("{{\"round\":{round}}}")).unwrap();
        }
        journal.sync().unwrap();
    }

    fn journal() -> String {
        let folder = tempfile::tempdir().unwrap();
        let path = folder.path().join("journal.jsonl");
        write_three(&path);
        fs::read_to_string(path).unwrap()
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

    /// A torn or overwritten end is cut; what was cut can be written again, and the journal is as if nothing had been.
    #[test]
    fn a_bad_end_is_cut() {
        let text = journal();
        let lines: Vec<&str> = text.split_inclusive('\n').collect();
        let whole = lines[..2].concat();
        let folder = tempfile::tempdir().unwrap();
        let path = folder.path().join("journal.jsonl");
        let mut ends: Vec<Vec<u8>> = (0..lines[2].len()).map(|end| lines[2].as_bytes()[..end].to_vec()).collect();
        ends.extend([vec![0; 5000], b"\xff\xfe\n\n{}\n".to_vec()]);
        for end in ends {
            fs::write(&path, [whole.as_bytes(), &end].concat()).unwrap();
            let (mut journal, sound) = Journal::go_on(&path, false).unwrap();
            assert_eq!((sound.lines, sound.bad_bytes, sound.altered), (2, end.len() as u64, false));
            assert_eq!(fs::read_to_string(&path).unwrap(), whole);
            journal.append("{\"round\":2}").unwrap();
            assert_eq!(fs::read_to_string(&path).unwrap(), text);
        }
    }

    #[test]
    fn an_altered_middle_is_refused_or_salvaged_and_kept() {
        let text = journal().replace("\"round\":1", "\"round\":7");
        let folder = tempfile::tempdir().unwrap();
        let path = folder.path().join("journal.jsonl");
        fs::write(&path, &text).unwrap();
        let refused = Journal::go_on(&path, false).err().unwrap();
        assert_eq!(refused, RunError::Altered { path: path.clone(), line: 2 });
        assert_eq!(fs::read_to_string(&path).unwrap(), text, "a refusal changes nothing");
        let (_, sound) = Journal::go_on(&path, true).unwrap();
        assert_eq!((sound.lines, sound.bad_lines), (1, 2));
        let left = fs::read_to_string(&path).unwrap();
        assert_eq!(left + &fs::read_to_string(path.with_extension("removed")).unwrap(), text);
    }

    /// Takes a few bytes at a time, and fails at one of its calls.
    struct Failing {
        taken: Arc<Mutex<Vec<u8>>>,
        calls_left: usize,
    }

    impl Store for Failing {
        fn write(&mut self, bytes: &[u8]) -> io::Result<usize> {
            self.calls_left = self.calls_left.wrapping_sub(1);
            if self.calls_left == 0 {
                return Err(ErrorKind::StorageFull.into());
            }
            let count = bytes.len().min(7);
            self.taken.lock().unwrap().extend(&bytes[..count]);
            Ok(count)
        }

        fn sync(&mut self) -> io::Result<()> {
            Ok(())
        }
    }

    /// Whichever call fails, in the middle of a line too, the bytes are the same in the end, and the failure is told once.
    #[test]
    fn every_write_may_fail_in_turn() {
        let text = journal();
        for call in 1..=text.len().div_ceil(7) {
            let taken = Arc::new(Mutex::new(Vec::new()));
            let store = Failing { taken: taken.clone(), calls_left: call };
            let mut journal = Journal { store: Box::new(store), path: "journal.jsonl".into(), pending: Vec::new() };
            let append = |round| journal.append(&format!("{{\"round\":{round}}}")).is_err();
            let failures = (0..3).map(append).filter(|&failed| failed).count();
            assert_eq!(failures, 1, "call {call}");
            journal.flush().unwrap();
            assert_eq!(String::from_utf8(taken.lock().unwrap().clone()).unwrap(), text, "call {call}");
        }
    }

    #[test]
    fn a_removed_journal_is_noticed() {
        let folder = tempfile::tempdir().unwrap();
        let path = folder.path().join("journal.jsonl");
        let mut journal = Journal::begin(&path).unwrap();
        journal.append("{}").unwrap();
        fs::remove_file(&path).unwrap();
        assert!(journal.sync().unwrap_err().to_string().contains("journal.jsonl"));
    }
}
