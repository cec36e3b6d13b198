//! `anneal`: chains that accept rises by temperature and cool (Kirkpatrick, Gelatt and Vecchi 1983), each closed by a
//! descent.
//!
//! A chain is one task: it starts, cools and re-heats by its own random stream, so that many chains go in lanes. Lengths
//! follow the sequence of Luby, Sinclair and Zuckerman (1993), which is within a constant factor of the best fixed
//! length whatever that is.

mod chain;

use rand::RngExt;
use rand_chacha::ChaCha8Rng;

use super::proposer::{Arrival, Proposed, Proposer, Scene};
use super::structure::Structure;
use super::task::Proposal;

pub use chain::Annealing;

/// The share of chains that start from a low minimum that anyone met.
const FROM_LEDGER: f64 = 0.4;
/// The low minima that they choose among.
const LOW: usize = 30;

/// The heuristic.
pub struct Anneal {
    drawn: u64,
    unit: u64,
}

impl Anneal {
    /// Evaluations of a first chain with its descent, roughly.
    pub fn expected_cost(structure: &Structure) -> f64 {
        1.2 * Anneal::new(structure).unit as f64
    }

    /// No chain has started.
    pub fn new(structure: &Structure) -> Self {
        Anneal { drawn: 0, unit: 200 + 30 * structure.n_unknowns() as u64 }
    }
}

impl Proposer for Anneal {
    fn propose(&mut self, scene: &Scene<'_>, _turn: u64, rng: &mut ChaCha8Rng) -> Proposed {
        self.drawn += 1;
        let evaluations = self.unit * luby(self.drawn);
        let from = if rng.random::<f64>() < FROM_LEDGER && !scene.ledger.is_empty() {
            let chosen = rng.random_range(0..scene.ledger.len().min(LOW));
            scene.ledger.entries().nth(chosen).and_then(|entry| scene.ledger.point(entry.id()))
        } else {
            None
        };
        Proposed { proposal: Proposal::Annealed { from, evaluations }, mark: 0, fill: false, ceiling: f64::INFINITY }
    }

    fn arrive(&mut self, _scene: &Scene<'_>, _arrival: Arrival, _rng: &mut ChaCha8Rng) {}
}

/// Term `number` (from 1) of 1, 1, 2, 1, 1, 2, 4, 1, ...
fn luby(number: u64) -> u64 {
    let mut number = number;
    loop {
        let length = u64::BITS - number.leading_zeros();
        let whole = (1_u64 << length) - 1;
        if number == whole {
            return 1 << (length - 1);
        }
        number -= whole >> 1;
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    /// The beginning of the sequence as published.
    #[test]
    fn lengths_are_lubys() {
        let terms: Vec<u64> = (1..=15).map(luby).collect();
        assert_eq!(terms, [1, 1, 2, 1, 1, 2, 4, 1, 1, 2, 1, 1, 2, 4, 8]);
    }
}
