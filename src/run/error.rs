//! What can fail about a run folder.

use std::fmt;
use std::path::PathBuf;

use super::name::NameError;

/// A failure of a run folder: where, why, and what helps.
#[derive(Clone, Debug, PartialEq, Eq)]
pub enum RunError {
    /// The name cannot be that of a folder.
    Name {
        /// The name.
        name: String,
        /// Why.
        cause: NameError,
    },
    /// A run of this name is there already.
    Exists(PathBuf),
    /// The folder could not be made.
    Make {
        /// The folder.
        path: PathBuf,
        /// What the system says.
        cause: String,
    },
    /// A file could not be written.
    Write {
        /// The file.
        path: PathBuf,
        /// What the system says.
        cause: String,
    },
    /// A file could not be read.
    Read {
        /// The file.
        path: PathBuf,
        /// What the system says.
        cause: String,
    },
    /// Another process works on the run.
    Locked(PathBuf),
    /// A line of the journal was altered: sound ones follow it.
    Altered {
        /// The journal.
        path: PathBuf,
        /// The line, from 1.
        line: u64,
    },
}

impl RunError {
    /// Whether the user typed something wrong, rather than that something outside failed.
    pub fn is_usage(&self) -> bool {
        matches!(self, RunError::Name { .. } | RunError::Exists(_) | RunError::Locked(_) | RunError::Altered { .. })
    }
}

impl fmt::Display for RunError {
    fn fmt(&self, out: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            RunError::Name { name, cause } => write!(out, "a run cannot be called `{name}`: {cause}"),
            RunError::Exists(path) => {
                write!(out, "{} is there already and is never overwritten; choose another --name", path.display())
            }
            RunError::Make { path, cause } => write!(
                out,
                "the folder {} could not be made ({cause}); choose a place that can be written to with --into",
                path.display()
            ),
            RunError::Write { path, cause } => {
                write!(out, "{} could not be written ({cause}); make room or mend the permissions", path.display())
            }
            RunError::Read { path, cause } => {
                write!(out, "{} could not be read ({cause}); mend the permissions or the disk", path.display())
            }
            RunError::Locked(path) => write!(
                out,
                "another process is at work on {}; end it first, or watch it with `thalweg look`",
                path.display()
            ),
            RunError::Altered { path, line } => write!(
                out,
                "{}, line {line}: the line does not match its checksum, though sound lines follow it: the file was altered; \
                 put back a sound copy, or keep what stands before the line with --salvage",
                path.display()
            ),
        }
    }
}

impl std::error::Error for RunError {}
