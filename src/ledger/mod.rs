//! Same or distinct: the minima met so far.
//!
//! Enters: ends of descents, with who met them and when. Leaves: entries, near twins. Promised: the order of insertion
//! never changes the contents. Deliberately absent: how minima are found.
//!
//! Two points are the same when a declared symmetry maps one onto the other within the tolerances. `identity` reads the
//! group off the promises and compares invariants first; `alignment` lays clouds of points on top of each other; `invariant`
//! is the key by which entries of one value are told apart in little time;
//! `book` keeps the entries, and `entry` says what one holds.

mod alignment;
mod book;
mod entry;
mod identity;
mod invariant;

pub use book::{Ledger, Met, NearTwins};
pub use entry::{Candidate, Confirmed, Entry, EntryId, Kind, MAX_HEURISTICS, Meeting};
pub use identity::{Fingerprint, Identity, Match, Tolerances};
