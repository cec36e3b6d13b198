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
}

impl RunError {
    /// Whether the user typed something wrong, rather than that something outside failed.
    pub fn is_usage(&self) -> bool {
        matches!(self, RunError::Name { .. } | RunError::Exists(_))
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
        }
    }
}

impl std::error::Error for RunError {}
