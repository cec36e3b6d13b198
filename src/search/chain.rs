//! `hop`: perturb a minimum, descend, accept by temperature (Li and Scheraga 1987; Wales and Doye 1997).
//!
//! Several chains go side by side. They differ in temperature, because no one temperature serves rugged clouds and
//! separable landscapes alike: some chains accept downhill steps only. Temperatures are multiples of the usual
//! difference in value between neighbouring minima, which is measured as the hunt goes on, so that no unit of the
//! objective matters. A chain that has found nothing lower for long starts again somewhere else.
//!
//! A share of the steps starts not from a chain but from a minimum of the ledger that few steps have started from:
//! that is what finds the many minima beside the low ones.

use std::sync::Arc;

use rand::{Rng, RngExt};

use crate::ledger::{EntryId, Ledger};
use crate::numbers::functions;

use super::moves::Move;
use super::structure::Structure;
use super::task::Proposal;

/// Temperatures of successive chains, in units of the usual difference.
const TEMPERATURES: [f64; 4] = [0.3, 0.0, 0.15, 0.6];

/// The share of steps from under-visited minima of the ledger.
const LEDGER_SHARE: f64 = 0.25;

/// How many minima of the ledger are drawn to choose the least visited among them.
const CONTENDERS: usize = 8;

/// The share of accepted steps that the step size is adapted to.
const TARGET_ACCEPTANCE: f64 = 0.45;

/// The range of the adapted step.
const STEP_RANGE: (f64, f64) = (1e-3, 0.45);

/// The mark of a step that belongs to no chain.
const NO_CHAIN: u64 = u64::MAX;

/// All chains, and the count of departures from the minima of the ledger.
#[derive(Clone, Debug)]
pub struct Chains {
    chains: Vec<Chain>,
    moves: Vec<(Move, f64)>,
    first_step: f64,
    patience: u32,
    usual_difference: Option<f64>,
    departures: Vec<Departure>,
}

#[derive(Clone, Debug)]
struct Chain {
    temperature: f64,
    step: f64,
    place: Option<Place>,
    lowest: f64,
    idle: u32,
    last_move: Option<Move>,
}

#[derive(Clone, Debug)]
struct Place {
    value: f64,
    at: Arc<[f64]>,
    entry: EntryId,
}

#[derive(Clone, Debug)]
struct Departure {
    entry: EntryId,
    count: u32,
}

impl Chains {
    /// Chains for a landscape of this structure; none has started.
    pub fn new(structure: &Structure) -> Self {
        let n_rows = structure.clouds.iter().map(|cloud| cloud.rows.len()).max();
        Chains {
            chains: Vec::new(),
            moves: Move::available(structure),
            first_step: if n_rows.is_some() { 0.07 } else { 0.1 },
            patience: match n_rows {
                Some(n_rows) => 60 + 4 * n_rows as u32,
                None => (100 + 20 * structure.n_unknowns() as u32).min(600),
            },
            usual_difference: None,
            departures: Vec::new(),
        }
    }

    /// The next step of a round: a proposal and the mark that comes back with its result. `turn` counts the hop steps
    /// of this round; even and odd rounds have chains of their own, since a round does not see the one before it.
    pub fn propose(&mut self, round: u64, turn: u64, ledger: &Ledger, rng: &mut impl Rng) -> (Proposal, u64) {
        if !self.departures.is_empty()
            && rng.random::<f64>() < LEDGER_SHARE
            && let Some(proposal) = self.depart(ledger, rng)
        {
            return (proposal, NO_CHAIN);
        }
        let number = (2 * turn + round % 2) as usize;
        while self.chains.len() <= number {
            // Even and odd chains run through the temperatures alike.
            let temperature = TEMPERATURES[self.chains.len() / 2 % TEMPERATURES.len()];
            self.chains.push(Chain {
                temperature,
                step: self.first_step,
                place: None,
                lowest: f64::INFINITY,
                idle: 0,
                last_move: None,
            });
        }
        let kind = draw_move(&self.moves, rng);
        let chain = &mut self.chains[number];
        let proposal = match &chain.place {
            None => Proposal::Uniform,
            Some(place) => Proposal::Moved { from: place.at.clone(), kind, step: chain.step },
        };
        chain.last_move = chain.place.as_ref().map(|_| kind);
        (proposal, number as u64)
    }

    /// A minimum was met, by whomever: it may be departed from.
    pub fn met_new(&mut self, entry: EntryId) {
        self.departures.push(Departure { entry, count: 0 });
    }

    /// The result of a chain's step.
    pub fn arrive(&mut self, mark: u64, value: f64, at: &Arc<[f64]>, entry: EntryId, rng: &mut impl Rng) {
        let Some(chain) = self.chains.get_mut(mark as usize) else { return };
        let Some(place) = &chain.place else {
            chain.place = Some(Place { value, at: at.clone(), entry });
            chain.lowest = value;
            chain.idle = 0;
            return;
        };
        let rise = value - place.value;
        let returned = entry == place.entry;
        if !returned {
            // The running median of the differences: a step up or down by 5 % for each that lies above or below it.
            let usual = self.usual_difference.get_or_insert(rise.abs());
            *usual *= if rise.abs() > *usual { 1.05 } else { 1.0 / 1.05 };
        }
        let temperature = chain.temperature * self.usual_difference.unwrap_or(0.0);
        let accepted = rise <= 0.0
            || returned
            || (temperature > 0.0 && rng.random::<f64>() < functions::exponential(-rise / temperature));
        if chain.last_move.is_some_and(Move::has_step) {
            // In balance when the share of accepted steps is the target.
            let (up, down) = (1.0 + 0.1 * (1.0 - TARGET_ACCEPTANCE), 1.0 - 0.1 * TARGET_ACCEPTANCE);
            chain.step = (chain.step * if accepted { up } else { down }).clamp(STEP_RANGE.0, STEP_RANGE.1);
        }
        if accepted && !returned {
            chain.place = Some(Place { value, at: at.clone(), entry });
        }
        if value < chain.lowest && !returned {
            chain.lowest = value;
            chain.idle = 0;
        } else {
            self.grow_idle(mark);
        }
    }

    /// A chain's step led nowhere.
    pub fn fail(&mut self, mark: u64) {
        self.grow_idle(mark);
    }

    fn grow_idle(&mut self, mark: u64) {
        let (patience, first_step) = (self.patience, self.first_step);
        let Some(chain) = self.chains.get_mut(mark as usize) else { return };
        chain.idle += 1;
        if chain.idle > patience {
            *chain = Chain {
                place: None,
                lowest: f64::INFINITY,
                idle: 0,
                step: first_step,
                last_move: None,
                temperature: chain.temperature,
            };
        }
    }

    /// A step from the least departed-from of a few minima of the ledger.
    fn depart(&mut self, ledger: &Ledger, rng: &mut impl Rng) -> Option<Proposal> {
        let n = self.departures.len();
        let mut chosen = rng.random_range(0..n);
        for _ in 1..CONTENDERS {
            let other = rng.random_range(0..n);
            if self.departures[other].count < self.departures[chosen].count {
                chosen = other;
            }
        }
        self.departures[chosen].count += 1;
        let from = ledger.point(self.departures[chosen].entry)?;
        let kind = draw_move(&self.moves, rng);
        // Steps of several sizes: the best size for leaving a minimum is its own.
        let step = self.first_step * (0.5 + 1.5 * rng.random::<f64>());
        Some(Proposal::Moved { from, kind, step })
    }
}

fn draw_move(moves: &[(Move, f64)], rng: &mut impl Rng) -> Move {
    let mut draw = rng.random::<f64>();
    for &(kind, share) in moves {
        if draw < share {
            return kind;
        }
        draw -= share;
    }
    moves[0].0
}
