//! What the ledger holds of a minimum.

use std::sync::Arc;

use super::identity::{Fingerprint, Identity};

/// The most heuristics that hits are counted for.
pub const MAX_HEURISTICS: usize = 8;

/// The number of an entry. Entries that prove the same keep their numbers, which then mean the same entry.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash, PartialOrd, Ord)]
pub struct EntryId(pub u32);

/// A converged descent: the value is exact but for rounding, the place good to about 1e-7 of the units.
#[derive(Clone, Debug)]
pub struct Candidate {
    /// The value, of the minimised objective.
    pub value: f64,
    /// The place.
    pub at: Arc<[f64]>,
    /// Its invariants.
    pub fingerprint: Fingerprint,
    /// Whether it ended at a kink, where no gradient vanishes and no stiffness exists.
    pub kinked: bool,
}

impl Candidate {
    /// A candidate; works out its invariants.
    pub fn new(identity: &Identity, value: f64, at: Arc<[f64]>, kinked: bool) -> Self {
        Candidate { value, fingerprint: identity.fingerprint(&at), at, kinked }
    }
}

/// Who met a minimum, and when.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct Meeting {
    /// The heuristic, by the caller's number.
    pub heuristic: usize,
    /// The round.
    pub round: u64,
    /// The task within the round.
    pub task: u64,
    /// Evaluations of the hunt by then.
    pub evaluation: u64,
}

impl Meeting {
    pub(super) fn key(&self) -> (u64, u64) {
        (self.round, self.task)
    }
}

/// What kind of minimum it is.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Kind {
    /// Inside all bounds.
    Interior,
    /// Held by bounds.
    Bound,
    /// With a stiffness of 0 beyond the declared motions.
    Flat,
    /// At a kink.
    Kinked,
}

impl Kind {
    /// The word in files.
    pub fn name(self) -> &'static str {
        match self {
            Kind::Interior => "interior",
            Kind::Bound => "bound",
            Kind::Flat => "flat",
            Kind::Kinked => "kinked",
        }
    }
}

/// A polished minimum with its stiffness.
#[derive(Clone, Debug, PartialEq)]
pub struct Confirmed {
    /// What kind it is.
    pub kind: Kind,
    /// The value, of the minimised objective.
    pub value: f64,
    /// The place.
    pub at: Arc<[f64]>,
    /// The eigenvalues of the second derivatives, ascending; exactly 0 for declared motions.
    pub stiffness: Vec<f64>,
    /// The displacement, in units of the region, that would explain what is left of the gradient.
    pub residual: f64,
    /// The slots that a bound holds.
    pub active: Vec<usize>,
}

impl Confirmed {
    /// Whether it lies in a flat valley.
    pub fn is_flat(&self) -> bool {
        self.kind == Kind::Flat
    }
}

/// The state of an entry.
#[derive(Clone, Debug)]
pub(super) struct Record {
    pub(super) value: f64,
    pub(super) at: Arc<[f64]>,
    pub(super) fingerprint: Fingerprint,
    pub(super) kinked: bool,
    pub(super) first: Meeting,
    pub(super) hits: [u64; MAX_HEURISTICS],
    /// The polish, with the key of the meeting that it was made from.
    pub(super) confirmed: Option<Confirmed>,
}

/// An entry, to look at.
#[derive(Clone, Copy, Debug)]
pub struct Entry<'a> {
    pub(super) id: EntryId,
    pub(super) record: &'a Record,
}

impl<'a> Entry<'a> {
    /// Its number.
    pub fn id(&self) -> EntryId {
        self.id
    }

    /// The value, of the minimised objective.
    pub fn value(&self) -> f64 {
        self.record.value
    }

    /// The place.
    pub fn at(&self) -> &'a [f64] {
        &self.record.at
    }

    /// What kind it is; `None` while it is a candidate that was not confirmed.
    pub fn kind(&self) -> Option<Kind> {
        match &self.record.confirmed {
            Some(confirmed) => Some(confirmed.kind),
            None if self.record.kinked => Some(Kind::Kinked),
            None => None,
        }
    }

    /// The polish, once there is one.
    pub fn confirmed(&self) -> Option<&'a Confirmed> {
        self.record.confirmed.as_ref()
    }

    /// The stiffnesses, ascending; empty without a polish.
    pub fn stiffness(&self) -> &'a [f64] {
        self.confirmed().map_or(&[], |confirmed| &confirmed.stiffness)
    }

    /// The residual; NaN without a polish.
    pub fn residual(&self) -> f64 {
        self.confirmed().map_or(f64::NAN, |confirmed| confirmed.residual)
    }

    /// The slots that a bound holds.
    pub fn active(&self) -> &'a [usize] {
        self.confirmed().map_or(&[], |confirmed| &confirmed.active)
    }

    /// How often a heuristic met it.
    pub fn hits(&self, heuristic: usize) -> u64 {
        self.record.hits.get(heuristic).copied().unwrap_or(0)
    }

    /// How often it was met.
    pub fn total_hits(&self) -> u64 {
        self.record.hits.iter().sum()
    }

    /// The first meeting.
    pub fn first(&self) -> &'a Meeting {
        &self.record.first
    }
}
