//! `multistart`: starts that nothing leads, every other one spread evenly.

use rand_chacha::ChaCha8Rng;

use super::proposer::{Arrival, Proposed, Proposer, Scene};
use super::task::Proposal;

/// The heuristic.
#[derive(Default)]
pub struct Multistart {
    drawn: u64,
}

impl Proposer for Multistart {
    fn propose(&mut self, _scene: &Scene<'_>, _turn: u64, _rng: &mut ChaCha8Rng) -> Proposed {
        self.drawn += 1;
        let number = self.drawn;
        // Those between are independent of each other.
        let proposal = if number.is_multiple_of(2) { Proposal::Spread(number / 2) } else { Proposal::Uniform };
        Proposed { proposal, mark: 0, fill: false, ceiling: f64::INFINITY }
    }

    fn arrive(&mut self, _scene: &Scene<'_>, _arrival: Arrival, _rng: &mut ChaCha8Rng) {}
}
