//! `hop`: perturb a minimum, descend, go on from there.
//!
//! Four ways, since no one of them serves rugged clouds, separable landscapes and the listing of all minima alike: walks
//! never go up and try every scale; tempered chains accept by temperature; departures start from little visited minima
//! of the ledger; symmetric starts place the points of clouds by random point groups. The ways share the heuristic's
//! turns by what they earn.

mod departures;
mod tempered;
mod walk;

use rand::RngExt;
use rand_chacha::ChaCha8Rng;

use super::earnings::Earnings;
use super::proposer::{Arrival, Proposed, Proposer, Scene};
use super::structure::Structure;
use super::task::Proposal;

use departures::Departures;
use tempered::Tempered;
use walk::Walks;

/// The ways with their names.
const NAMES: [&str; WAYS as usize] = ["walk", "tempered", "departure", "symmetric"];
const WAYS: u64 = 4;
/// Their shares at the beginning and the least of a long hunt, without and with clouds.
const GENERAL: [(f64, f64); WAYS as usize] = [(0.86, 0.25), (0.08, 0.12), (0.06, 0.1), (0.0, 0.0)];
const CLOUD: [(f64, f64); WAYS as usize] = [(0.0, 0.0), (0.35, 0.1), (0.15, 0.1), (0.5, 0.12)];
/// Descents that each way is trusted with at first.
const TRUST: f64 = 30.0;
/// How many of the lowest minima are models for the size of symmetric starts.
const MODELS: usize = 8;

/// The heuristic.
pub struct Hop {
    ways: Earnings,
    walks: Walks,
    tempered: Tempered,
    departures: Departures,
    /// Turns of each way within the round, for its own count.
    turns: (u64, [u64; WAYS as usize]),
}

impl Hop {
    /// Nothing was proposed.
    pub fn new(structure: &Structure) -> Self {
        let shares = if structure.clouds.is_empty() { GENERAL } else { CLOUD };
        Hop {
            ways: Earnings::new(&shares),
            walks: Walks::new(structure),
            tempered: Tempered::new(structure),
            departures: Departures::new(structure),
            turns: (0, [0; WAYS as usize]),
        }
    }
}

impl Proposer for Hop {
    fn propose(&mut self, scene: &Scene<'_>, turn: u64, rng: &mut ChaCha8Rng) -> Proposed {
        if turn == 0 || self.turns.0 != scene.round {
            self.turns = (scene.round, [0; WAYS as usize]);
        }
        let way = self.ways.choose(rng.random::<f64>());
        let own_turn = self.turns.1[way];
        self.turns.1[way] += 1;
        let free = |proposal, fill| Proposed { proposal, mark: 0, fill, ceiling: f64::INFINITY };
        let proposed = match way {
            0 => self.walks.propose(scene, own_turn, rng),
            1 => self.tempered.propose(scene, own_turn, rng),
            2 => free(self.departures.propose(scene, rng), false),
            _ => {
                let n_models = scene.ledger.len().min(MODELS);
                let chosen = rng.random_range(0..n_models.max(1));
                let model = scene.ledger.entries().nth(chosen).and_then(|entry| scene.ledger.point(entry.id()));
                free(Proposal::Symmetric { model }, true)
            }
        };
        Proposed { mark: proposed.mark * WAYS + way as u64, ..proposed }
    }

    fn arrive(&mut self, scene: &Scene<'_>, arrival: Arrival, rng: &mut ChaCha8Rng) {
        let way = arrival.mark % WAYS;
        self.ways.earn(way as usize, arrival.evaluations, arrival.worth);
        let arrival = Arrival { mark: arrival.mark / WAYS, ..arrival };
        match way {
            0 => self.walks.arrive(scene, arrival),
            1 => self.tempered.arrive(arrival, rng),
            _ => {}
        }
    }

    fn begin_round(&mut self, memory: f64, cost: f64, descents: u64) {
        self.ways.remember(memory, TRUST * cost);
        self.ways.grow(descents);
        self.walks.begin_round(cost);
    }

    fn ways(&self) -> Vec<(&'static str, f64)> {
        NAMES.into_iter().zip(self.ways.shares()).collect()
    }
}
