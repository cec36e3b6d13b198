//! The run folder: names, files that are either old or new but never half, the journal; and tables of given points.
//!
//! Enters: a place for results, a name, and the bytes of files. Leaves: a folder `results/NAME/` that never replaces an
//! earlier one. Promised: a file is whole at any instant (written beside, synced, renamed); a journal line that was torn
//! or altered is known by its checksum; one that could not be written is written later; a lock ends with its process.
//! Deliberately absent: what the files say (see `report`), and clocks.

mod atomic;
mod error;
mod folder;
mod journal;
mod name;
mod points;

pub use atomic::write_atomically;
pub use error::RunError;
pub use folder::{Lock, RunFolder, Wanted};
pub use journal::{Journal, JournalEntries, JournalReader, Sound, read_journal};
pub use name::{NameError, demand_valid_name, stem};
pub use points::{PointsError, read_points};
