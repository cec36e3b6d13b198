//! The unit of work: one descent from a proposal, or one confirmation.

use std::sync::Arc;

use crate::ledger::EntryId;

use super::moves::Move;
use super::settings::Heuristic;

/// One piece of a round.
#[derive(Clone, Debug)]
pub struct Task {
    /// The round.
    pub round: u64,
    /// Its place in the round.
    pub number: u64,
    /// What to do.
    pub work: Work,
}

/// What a task does.
#[derive(Clone, Debug)]
pub enum Work {
    /// Make a start and descend from it.
    Descend {
        /// On whose account.
        heuristic: Heuristic,
        /// How the start is made.
        proposal: Proposal,
        /// The heuristic's own mark, given back with the result (a chain's number, say).
        mark: u64,
    },
    /// Polish a converged point and test its stiffness.
    Confirm {
        /// The entry that it stands for.
        entry: EntryId,
        /// The point.
        at: Arc<[f64]>,
    },
}

/// How a start is made, from the task's own random stream.
#[derive(Clone, Debug)]
pub enum Proposal {
    /// This point.
    Point(Arc<[f64]>),
    /// Uniform in the start region.
    Uniform,
    /// The n-th point of a low-discrepancy sequence in the start region.
    Spread(u64),
    /// A move away from a minimum.
    Moved {
        /// The minimum.
        from: Arc<[f64]>,
        /// The move.
        kind: Move,
        /// Its size relative to the scale of the unknowns, for moves that have one.
        step: f64,
    },
}
