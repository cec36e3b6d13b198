//! The unit of work: one descent from a proposal, or one confirmation.

use std::sync::Arc;

use crate::ledger::{Candidate, Confirmed, EntryId};

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
        /// Whether empty places of a cloud are to be filled after the descent.
        fill: bool,
        /// The descent is abandoned once no value below this is in sight.
        ceiling: f64,
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
    /// The points of clouds by a random point group.
    Symmetric {
        /// A low minimum that tells usual sizes.
        model: Option<Arc<[f64]>>,
    },
    /// Two clouds, cut and spliced.
    Spliced {
        /// One parent.
        mother: Arc<[f64]>,
        /// The other.
        father: Arc<[f64]>,
    },
    /// The end of an annealing chain.
    Annealed {
        /// Where it starts; a uniform start where there is none.
        from: Option<Arc<[f64]>>,
        /// Evaluations of the chain.
        evaluations: u64,
    },
}

/// What became of a task.
#[derive(Clone, Debug)]
pub struct TaskResult {
    /// The task's round.
    pub round: u64,
    /// The task's place in the round.
    pub number: u64,
    /// Evaluations spent; a matrix of second derivatives counts as many as there are unknowns.
    pub evaluations: u64,
    /// Those of them that were outside the landscape.
    pub outside: u64,
    /// The first point outside.
    pub first_outside: Option<Vec<f64>>,
    /// Fillings of empty places that were tried, and those that moved a point.
    pub fillings: (u32, u32),
    /// What came of it.
    pub finding: Finding,
}

/// What a task found.
#[derive(Clone, Debug)]
pub enum Finding {
    /// A descent converged.
    Met {
        /// On whose account.
        heuristic: Heuristic,
        /// The heuristic's own mark.
        mark: u64,
        /// Where it ended.
        candidate: Candidate,
    },
    /// A descent did not converge.
    Lost {
        /// On whose account.
        heuristic: Heuristic,
        /// The heuristic's own mark.
        mark: u64,
        /// Why.
        reason: Lost,
    },
    /// A converged point passed the polish and the stiffness test, or the point that it led to did.
    Confirmed {
        /// The entry it was for.
        entry: EntryId,
        /// The polished minimum.
        confirmed: Confirmed,
        /// How many saddles were left on the way.
        saddles: u64,
    },
    /// The point is no minimum, and led to none.
    Dismissed {
        /// The entry it was for.
        entry: EntryId,
    },
}

/// Why a descent found nothing.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Lost {
    /// Its start lay outside the landscape.
    Outside,
    /// It ran out of its evaluations.
    OutOfBudget,
    /// No step went down, though the gradient had not vanished.
    Stalled,
    /// No value was in sight that its heuristic could use.
    Abandoned,
}
