//! What a hunt tells while it goes on, and what it leaves.

use crate::ledger::Ledger;

use super::record::RoundRecord;
use super::settings::Heuristic;
use super::task::Lost;

/// Watches a hunt, and may end it after any round.
pub trait Observer {
    /// Called after each merged round, in order.
    fn round(&mut self, report: &RoundReport<'_>) -> Verdict;

    /// Called often from the waiting thread while a round is under way; [`Verdict::Stop`] ends the hunt with the last
    /// whole round, and drops what is in flight.
    fn idle(&mut self) -> Verdict {
        Verdict::Continue
    }

    /// Called after each recorded round of a hunt that is resumed; [`Verdict::Stop`] gives the hunt up with
    /// [`HuntError::GivenUp`].
    fn replayed(&mut self, _report: &RoundReport<'_>) -> Verdict {
        Verdict::Continue
    }
}

/// Whether a hunt goes on.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Verdict {
    /// Go on.
    Continue,
    /// End with this round.
    Stop,
}

/// The state of a hunt after a round.
pub struct RoundReport<'a> {
    /// The round's number, from 0.
    pub round: u64,
    /// What its tasks came to.
    pub record: &'a RoundRecord,
    /// Evaluations so far.
    pub evaluations: u64,
    /// Evaluations so far by heuristic, in the order of [`Heuristic::ALL`].
    pub by_heuristic: [u64; Heuristic::ALL.len()],
    /// Evaluations so far spent on confirming minima.
    pub confirming: u64,
    /// Descents that have ended, by heuristic.
    pub descents: [u64; Heuristic::ALL.len()],
    /// The shares of the next evaluations, in the order of [`Heuristic::ALL`].
    pub shares: [f64; Heuristic::ALL.len()],
    /// The ways inside heuristics, with their shares of the heuristic's turns.
    pub ways: Vec<(Heuristic, &'static str, f64)>,
    /// What was met so far.
    pub ledger: &'a Ledger,
    /// What went wrong so far.
    pub troubles: &'a Troubles,
}

/// Things that went wrong, counted.
#[derive(Clone, Debug, Default, PartialEq)]
pub struct Troubles {
    /// Evaluations at points outside the landscape (the value was not finite).
    pub outside: u64,
    /// The first such point.
    pub first_outside: Option<Vec<f64>>,
    /// Starts that lay outside the landscape.
    pub starts_outside: u64,
    /// Descents that ran out of their evaluations.
    pub out_of_budget: u64,
    /// Descents that stalled before the gradient vanished.
    pub stalled: u64,
    /// Descents that their heuristic gave up because no useful value was in sight; no trouble, but no minimum either.
    pub abandoned: u64,
    /// Converged points whose polish failed.
    pub not_confirmed: u64,
    /// Converged points that proved to be saddles, from which the descent went on.
    pub saddles: u64,
    /// Converged points in flat valleys (a zero stiffness beyond the declared motions).
    pub flat: u64,
}

impl Troubles {
    /// Counts a descent that found nothing.
    pub fn count(&mut self, lost: Lost) {
        match lost {
            Lost::Outside => self.starts_outside += 1,
            Lost::OutOfBudget => self.out_of_budget += 1,
            Lost::Stalled => self.stalled += 1,
            Lost::Abandoned => self.abandoned += 1,
        }
    }
}

/// Why a hunt ended.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Ending {
    /// The evaluations were spent.
    Evaluations,
    /// The target was met.
    Target,
    /// The survey's coverage was reached.
    Coverage,
    /// No lower value was met for long.
    Quiet,
    /// The observer said so.
    Observer,
}

/// The rounds that a hunt had before it was interrupted.
pub trait Past {
    /// How many there are.
    fn rounds(&self) -> u64;

    /// The next one, in order; `None` where it cannot be had, which ends the hunt with [`HuntError::Past`].
    fn next(&mut self) -> Option<PastRound>;
}

/// A round of a hunt that was interrupted.
#[derive(Clone, Debug, PartialEq)]
pub struct PastRound {
    /// What its tasks came to.
    pub record: RoundRecord,
    /// The evaluations after it, to be compared.
    pub evaluations: u64,
    /// The distinct entries after it, to be compared.
    pub distinct: u64,
}

/// No past: a hunt from its beginning.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq)]
pub struct NoPast;

impl Past for NoPast {
    fn rounds(&self) -> u64 {
        0
    }

    fn next(&mut self) -> Option<PastRound> {
        None
    }
}

/// What a hunt leaves.
pub struct Outcome {
    /// Every distinct minimum, confirmed where the closing allowed it.
    pub ledger: Ledger,
    /// Rounds merged.
    pub rounds: u64,
    /// Evaluations, the closing confirmations included.
    pub evaluations: u64,
    /// Evaluations by heuristic, in the order of [`Heuristic::ALL`].
    pub by_heuristic: [u64; Heuristic::ALL.len()],
    /// Evaluations spent on confirming minima.
    pub confirming: u64,
    /// Descents by heuristic.
    pub descents: [u64; Heuristic::ALL.len()],
    /// What went wrong.
    pub troubles: Troubles,
    /// Why it ended.
    pub ending: Ending,
}

/// Why a hunt could not go on; none is the fault of a problem.
#[derive(Clone, Debug, PartialEq, Eq)]
pub enum HuntError {
    /// The system gave no threads.
    Threads(String),
    /// A worker failed: a fault of the program.
    Worker,
    /// This recorded round, from 0, is not what the settings lead to.
    Past(u64),
    /// The observer gave up before all recorded rounds were taken in.
    GivenUp,
}

impl std::fmt::Display for HuntError {
    fn fmt(&self, out: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        match self {
            HuntError::Threads(cause) => write!(out, "no threads could be started ({cause}); try fewer"),
            HuntError::Worker => write!(out, "a worker thread failed; this is a fault of the program"),
            HuntError::Past(round) => write!(
                out,
                "round {round} as it was recorded does not follow from the settings and the rounds before; the record was made \
                 by another version of the program or for other settings"
            ),
            HuntError::GivenUp => {
                write!(out, "interrupted while the recorded rounds were taken in; nothing was changed")
            }
        }
    }
}

impl std::error::Error for HuntError {}
