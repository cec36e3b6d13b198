//! Tempered chains: perturb a minimum, descend, accept by temperature (Li and Scheraga 1987; Wales and Doye 1997), with
//! several temperatures side by side and exchanges between neighbouring ones (Swendsen and Wang 1986; Geyer 1991).
//!
//! Temperatures are multiples of the usual difference in value between neighbouring minima, which is measured as the
//! hunt goes on, so that no unit of the objective matters. A chain that has met nothing lower for half its patience
//! jumps: a few steps in a row are accepted whatever they lead to. At the end of its patience it starts elsewhere, and
//! the bottom of the funnel that it leaves is remembered: whoever falls into the same funnel again leaves it sooner.

use std::collections::BTreeSet;

use rand::RngExt;
use rand_chacha::ChaCha8Rng;

use crate::ledger::EntryId;
use crate::numbers::functions;
use crate::search::moves::Move;
use crate::search::proposer::{Arrival, Place, Proposed, Scene};
use crate::search::structure::Structure;
use crate::search::task::Proposal;

/// Temperatures of the chains of a ladder, in units of the usual difference.
const TEMPERATURES: [f64; 4] = [0.1, 0.3, 0.6, 1.0];

/// The share of accepted steps that the step size is adapted to.
const TARGET_ACCEPTANCE: f64 = 0.45;

/// The range of the adapted step.
const STEP_RANGE: (f64, f64) = (1e-3, 0.45);

/// The share of rounds after which neighbouring chains may exchange their places.
const EXCHANGE_SHARE: f64 = 0.25;

/// Steps of a jump.
const JUMP: u32 = 3;

/// A funnel that was left before is left again after this part of the patience.
const KNOWN_FUNNEL: u32 = 4;

/// All chains.
#[derive(Clone, Debug)]
pub struct Tempered {
    chains: Vec<Chain>,
    moves: Vec<(Move, f64)>,
    first_step: f64,
    patience: u32,
    usual_difference: Option<f64>,
    /// The bottoms of the funnels that were left.
    bottoms: BTreeSet<EntryId>,
    last_exchange: u64,
}

#[derive(Clone, Debug)]
struct Chain {
    temperature: f64,
    step: f64,
    place: Option<Place>,
    lowest: Option<Place>,
    idle: u32,
    /// Steps that are accepted whatever they lead to.
    jumps: u32,
    last_move: Option<Move>,
}

impl Chain {
    fn new(temperature: f64, step: f64) -> Self {
        Chain { temperature, step, place: None, lowest: None, idle: 0, jumps: 0, last_move: None }
    }
}

impl Tempered {
    /// Chains for a landscape of this structure; none has started.
    pub fn new(structure: &Structure) -> Self {
        let n_rows = structure.clouds.iter().map(|cloud| cloud.rows.len()).max();
        Tempered {
            chains: Vec::new(),
            moves: Move::available(structure),
            first_step: if n_rows.is_some() { 0.07 } else { 0.1 },
            patience: match n_rows {
                Some(n_rows) => 60 + 2 * n_rows as u32,
                None => (100 + 20 * structure.n_unknowns() as u32).min(600),
            },
            usual_difference: None,
            bottoms: BTreeSet::new(),
            last_exchange: 0,
        }
    }

    /// The next step of a round, and the mark that comes back with its result. Even and odd rounds have chains of their
    /// own, since a round does not see the one before it.
    pub fn propose(&mut self, scene: &Scene<'_>, turn: u64, rng: &mut ChaCha8Rng) -> Proposed {
        let number = (2 * turn + scene.round % 2) as usize;
        while self.chains.len() <= number {
            // Even and odd chains run through the temperatures alike.
            let temperature = TEMPERATURES[(1 + self.chains.len() / 2) % TEMPERATURES.len()];
            self.chains.push(Chain::new(temperature, self.first_step));
        }
        if turn == 0 {
            self.exchange(scene.round, rng);
        }
        let kind = Move::draw(&self.moves, rng);
        let chain = &mut self.chains[number];
        let proposal = match &chain.place {
            None if !scene.structure.clouds.is_empty() && rng.random::<bool>() => {
                Proposal::Symmetric { model: scene.ledger.lowest_entry().and_then(|entry| scene.ledger.point(entry)) }
            }
            None => Proposal::Uniform,
            Some(place) => {
                let step = if chain.jumps > 0 { 2.0 * chain.step } else { chain.step };
                Proposal::Moved { from: place.at.clone(), kind, step: step.min(STEP_RANGE.1) }
            }
        };
        chain.last_move = chain.place.as_ref().map(|_| kind);
        // What would be accepted once in a thousand times is of no use; a jump takes anything.
        let rise = 7.0 * chain.temperature * self.usual_difference.unwrap_or(f64::INFINITY);
        let ceiling = match &chain.place {
            Some(place) if chain.jumps == 0 => place.value + rise,
            _ => f64::INFINITY,
        };
        Proposed { proposal, mark: number as u64, fill: !scene.structure.clouds.is_empty(), ceiling }
    }

    /// The result of a chain's step.
    pub fn arrive(&mut self, arrival: Arrival, rng: &mut ChaCha8Rng) {
        let Some(chain) = self.chains.get_mut(arrival.mark as usize) else { return };
        let Some(place) = arrival.place else { return self.grow_idle(arrival.mark) };
        let Some(current) = &chain.place else {
            chain.lowest = Some(place.clone());
            chain.place = Some(place);
            chain.idle = 0;
            return;
        };
        let rise = place.value - current.value;
        let returned = place.entry == current.entry;
        if !returned {
            // The running median of the differences: a step up or down by 5 % for each that lies above or below it.
            let usual = self.usual_difference.get_or_insert(rise.abs());
            *usual *= if rise.abs() > *usual { 1.05 } else { 1.0 / 1.05 };
        }
        let temperature = chain.temperature * self.usual_difference.unwrap_or(0.0);
        let accepted = rise <= 0.0
            || returned
            || chain.jumps > 0
            || (temperature > 0.0 && rng.random::<f64>() < functions::exponential(-rise / temperature));
        if chain.jumps > 0 {
            chain.jumps -= 1;
        } else if chain.last_move.is_some_and(Move::has_step) {
            // In balance when the share of accepted steps is the target; a return is no step at all.
            let (up, down) = (1.0 + 0.1 * (1.0 - TARGET_ACCEPTANCE), 1.0 - 0.1 * TARGET_ACCEPTANCE);
            chain.step = (chain.step * if accepted { up } else { down }).clamp(STEP_RANGE.0, STEP_RANGE.1);
        }
        let lower = !returned && chain.lowest.as_ref().is_some_and(|lowest| lowest.is_above(place.value));
        if lower {
            chain.lowest = Some(place.clone());
            chain.idle = 0;
        }
        if accepted && !returned {
            chain.place = Some(place);
        }
        if !lower {
            self.grow_idle(arrival.mark);
        }
    }

    fn grow_idle(&mut self, mark: u64) {
        let Some(chain) = self.chains.get_mut(mark as usize) else { return };
        chain.idle += 1;
        let Some(bottom) = chain.lowest.as_ref().map(|lowest| lowest.entry) else { return };
        let known = self.bottoms.contains(&bottom);
        let patience = if known { self.patience / KNOWN_FUNNEL } else { self.patience };
        if chain.idle > patience {
            self.bottoms.insert(bottom);
            *chain = Chain::new(chain.temperature, self.first_step);
        } else if chain.idle == patience / 2 {
            chain.jumps = JUMP;
        }
    }

    /// Neighbouring chains of the round's own set change places, with the chance that keeps both temperatures in balance.
    fn exchange(&mut self, round: u64, rng: &mut ChaCha8Rng) {
        if round == self.last_exchange || rng.random::<f64>() >= EXCHANGE_SHARE {
            return;
        }
        self.last_exchange = round;
        let unit = self.usual_difference.unwrap_or(0.0);
        let own: Vec<usize> = (0..self.chains.len()).filter(|number| *number as u64 % 2 == round % 2).collect();
        for pair in own.windows(2) {
            let (cold, warm) = (&self.chains[pair[0]], &self.chains[pair[1]]);
            let (Some(low), Some(high)) = (&cold.place, &warm.place) else { continue };
            let (beta, gamma) = (1.0 / (cold.temperature * unit), 1.0 / (warm.temperature * unit));
            if !(beta > gamma) || !beta.is_finite() {
                continue;
            }
            let exponent = (beta - gamma) * (low.value - high.value);
            if exponent >= 0.0 || rng.random::<f64>() < functions::exponential(exponent) {
                let (low, high) = (cold.place.clone(), warm.place.clone());
                let (lowest, idle) = ((cold.lowest.clone(), warm.lowest.clone()), (cold.idle, warm.idle));
                let [left, right] = [pair[0], pair[1]];
                (self.chains[left].place, self.chains[right].place) = (high, low);
                (self.chains[left].lowest, self.chains[right].lowest) = (lowest.1, lowest.0);
                (self.chains[left].idle, self.chains[right].idle) = (idle.1, idle.0);
            }
        }
    }
}
