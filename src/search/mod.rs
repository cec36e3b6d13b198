//! The hunt: heuristics propose points, rounds make the work replayable, the ledger keeps what was met.
//!
//! Enters: a landscape, its compiled kernel, settings. Leaves: an [`Outcome`]. Promised: the same landscape, settings
//! and seed give the same ledger, bit for bit, on any number of threads; round r is drawn up from the state after round
//! r - 2 and merged in task order. A hunt goes on from the records of its rounds as if it had never stopped.
//! Deliberately absent: clocks, files and signals (an [`Observer`] says when to stop), and any move that knows a
//! particular problem.
//!
//! The way of a task: [`state::Hunt`] draws a round of [`task::Task`]s; a [`worker::Worker`] turns each proposal into a
//! start, lets `descent` ask and `evaluate` answer, many tasks in lanes at once; the hunt merges the results into the
//! ledger and tells the heuristic that proposed.

pub mod anneal;
pub mod crew;
pub mod earnings;
pub mod evolve;
pub mod geometry;
pub mod hop;
mod hunt;
pub mod moves;
pub mod multistart;
pub mod outcome;
pub mod portfolio;
pub mod proposer;
mod record;
pub mod schedule;
pub mod settings;
pub mod start;
pub mod state;
pub mod structure;
pub mod task;
pub mod worker;

pub use hunt::{hunt, resume};
pub use outcome::{Ending, HuntError, NoPast, Observer, Outcome, Past, PastRound, RoundReport, Troubles, Verdict};
pub use record::{BadRecord, Found, RoundRecord, TaskRecord};
pub use settings::{Heuristic, Mix, Settings};
