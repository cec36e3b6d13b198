//! What a heuristic is to the hunt: it proposes starts, and is told what became of them.

use std::sync::Arc;

use rand_chacha::ChaCha8Rng;

use crate::ledger::{EntryId, Ledger};

use super::structure::Structure;
use super::task::Proposal;

/// What a heuristic may look at.
pub struct Scene<'a> {
    /// The landscape's structure.
    pub structure: &'a Structure,
    /// Everything met so far, by all heuristics.
    pub ledger: &'a Ledger,
    /// The entries in the order in which they were met; some may have been dismissed since.
    pub met: &'a [EntryId],
    /// The round that is drawn up or merged.
    pub round: u64,
}

impl Scene<'_> {
    /// An entry as a place.
    pub fn place(&self, entry: EntryId) -> Option<Place> {
        let known = self.ledger.entry(entry)?;
        Some(Place { entry: known.id(), value: known.value(), at: self.ledger.point(entry)? })
    }
}

/// A minimum that a heuristic stands at.
#[derive(Clone, Debug)]
pub struct Place {
    /// Its entry.
    pub entry: EntryId,
    /// Its value.
    pub value: f64,
    /// Where it is.
    pub at: Arc<[f64]>,
}

impl Place {
    /// Whether a value is lower than this place's by more than rounding.
    pub fn is_above(&self, value: f64) -> bool {
        value < self.value - 1e-9 * self.value.abs().max(1e-6)
    }
}

/// A start that was proposed.
pub struct Proposed {
    /// The start.
    pub proposal: Proposal,
    /// Given back with the result.
    pub mark: u64,
    /// Whether empty places of a cloud are to be filled after the descent.
    pub fill: bool,
    /// Ends above this value are of no use to the heuristic: the descent may be abandoned.
    pub ceiling: f64,
}

/// The end of a proposed descent.
pub struct Arrival {
    /// The mark of the proposal.
    pub mark: u64,
    /// Where it ended; `None` where the descent found nothing.
    pub place: Option<Place>,
    /// Evaluations that it took.
    pub evaluations: u64,
    /// What it was worth: 0 for a minimum known before, more for a lower one.
    pub worth: f64,
}

/// A heuristic.
pub trait Proposer {
    /// The next start. `turn` counts its starts of this round.
    fn propose(&mut self, scene: &Scene<'_>, turn: u64, rng: &mut ChaCha8Rng) -> Proposed;

    /// What became of a start that it proposed.
    fn arrive(&mut self, scene: &Scene<'_>, arrival: Arrival, rng: &mut ChaCha8Rng);

    /// A round is drawn up: a good memory of earnings is so many evaluations now, a descent costs so many, and so many
    /// descents have ended.
    fn begin_round(&mut self, _memory: f64, _cost: f64, _descents: u64) {}

    /// Shares between its own ways, with their names, for whoever watches.
    fn ways(&self) -> Vec<(&'static str, f64)> {
        Vec::new()
    }
}
