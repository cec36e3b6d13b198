//! Departures: steps from minima of the ledger that few steps have started from. They find the many minima beside the
//! low ones.

use rand::{Rng, RngExt};

use crate::search::moves::Move;
use crate::search::proposer::Scene;
use crate::search::structure::Structure;
use crate::search::task::Proposal;

/// How many minima of the ledger are drawn to choose the least visited among them.
const CONTENDERS: usize = 8;

/// The usual step, relative to the scale of the unknowns.
const STEP: f64 = 0.1;
/// The same for clouds, whose unknowns have the width of the whole cloud.
const CLOUD_STEP: f64 = 0.07;

/// The share of relocations among the departures of a cloud, beyond what is usual.
const RELOCATED: f64 = 0.7;

/// How often each minimum was departed from, by the order in which they were met.
#[derive(Clone, Debug)]
pub struct Departures {
    counts: Vec<u32>,
    moves: Vec<(Move, f64)>,
    step: f64,
}

impl Departures {
    /// Nothing was departed from.
    pub fn new(structure: &Structure) -> Self {
        let step = if structure.clouds.is_empty() { STEP } else { CLOUD_STEP };
        let mut moves = Move::available(structure);
        if let Some(place) = moves.iter().position(|&(kind, _)| kind == Move::Relocate) {
            // Of clouds, rows put elsewhere lead to new minima twice as often as shakes do (13 atoms: 1,440 minima after 5e6
            // evaluations, against 1,225).
            moves.iter_mut().for_each(|(_, share)| *share *= 1.0 - RELOCATED);
            let rest: f64 = moves.iter().map(|entry| entry.1).sum();
            moves[place].1 += 1.0 - rest;
        }
        Departures { counts: Vec::new(), moves, step }
    }

    /// A step from the least departed-from of a few minima; a uniform start while there are none.
    pub fn propose(&mut self, scene: &Scene<'_>, rng: &mut impl Rng) -> Proposal {
        let n = scene.met.len();
        self.counts.resize(n, 0);
        let mut best: Option<usize> = None;
        for _ in 0..CONTENDERS.min(n) {
            let other = rng.random_range(0..n);
            if best.is_none_or(|best| self.counts[other] < self.counts[best]) {
                best = Some(other);
            }
        }
        let Some(chosen) = best else { return Proposal::Uniform };
        self.counts[chosen] += 1;
        let Some(from) = scene.ledger.point(scene.met[chosen]) else { return Proposal::Uniform };
        let kind = Move::draw(&self.moves, rng);
        // Steps of several sizes: the best size for leaving a minimum is its own.
        let step = self.step * (0.5 + 1.5 * rng.random::<f64>());
        Proposal::Moved { from, kind, step }
    }
}
