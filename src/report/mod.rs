//! What is shown: terminal tables, JSON and CSV. Owns the serialised types.
//!
//! Enters: facts. Leaves: text. Promised: numbers in files read back to the same bits; tables stand lowest first; text
//! from the problem reaches a terminal without control characters. Deliberately absent: science (it computes nothing
//! but differences to the lowest), files, clocks, and the word "global", which only a certificate could say.

mod check;
mod coverage;
mod coverage_text;
mod ledger_file;
mod minima_csv;
mod minima_file;
mod minima_text;
mod nested;
mod run_file;
mod status;
mod table;

pub use check::{BrokenFacts, CheckFacts, FamilyFacts, GradientFacts, check_json, check_text};
pub use coverage::{
    BasinShare, Basins, Between, Coverage, Covered, CurvePoint, Expected, Next, SurveyCounts, coverage,
};
pub use ledger_file::{HuntFacts, LedgerView, ledger_file};
pub use minima_csv::minima_csv;
pub use minima_file::{
    FileError, First, Format, MinimaFile, Minimum, NearTwin, Problem, Tolerances, Troubles, read_minima_file,
    write_minima_file,
};
pub use minima_text::minima_text;
pub use nested::{Nested, nest};
pub use run_file::{JournalEntry, RunEnd, RunFile, RunFileError, RunMachine, RunSettings, read_run_file, run_format};
pub use status::{Status, StatusLowest, status_format};
pub use table::{Align, Table, plain};
