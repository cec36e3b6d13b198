//! Walks: from one minimum to a lower one, at every scale, never uphill.
//!
//! Several steps are tried from the same place at once. Those that lead down by different ways are joined: their
//! displacements are added up, which on landscapes whose unknowns act separately is worth as many steps one after the
//! other. Which kind of step is tried follows what the kinds earned on this landscape.

use std::collections::{BTreeMap, BTreeSet, VecDeque};
use std::sync::Arc;

use rand::{Rng, RngExt};
use rand_chacha::ChaCha8Rng;

use crate::search::earnings::Earnings;
use crate::search::moves::{Move, general};
use crate::search::proposer::{Arrival, Place, Proposed, Scene};
use crate::search::structure::Structure;
use crate::search::task::Proposal;

/// Starts of a round that share a walker.
const STEPS_A_WALKER: u64 = 6;
/// Draws for a step that was not asked for before.
const DRAWS: u32 = 12;
/// The most walkers.
const MOST_WALKERS: u64 = 32;

/// Displacements that are remembered.
const LINKS: usize = 60;
/// Other minima that a mean is taken with at most, and how many of the lowest they are drawn from.
const MOST_PARENTS: usize = 8;
const LOW: usize = 50;
/// The share of steps whose descents are seen through even if they lead higher, so that there are displacements.
const SEEN_THROUGH: f64 = 0.15;

/// Descents after which what steps earned counts half.
const MEMORY: f64 = 300.0;
/// Descents that each kind is trusted with: fewer would make the choice a lottery.
const TRUST: f64 = 10.0;

/// Kinds of step, each with its share at the beginning.
const STEPS: [(Step, f64); 10] = [
    (Step::Moved(Move::One), 0.08),
    (Step::Moved(Move::Pair), 0.04),
    (Step::Moved(Move::Afresh), 0.2),
    (Step::Moved(Move::Some), 0.08),
    (Step::Moved(Move::All), 0.06),
    (Step::Transplant, 0.27),
    (Step::Difference, 0.1),
    (Step::Mean, 0.08),
    (Step::Link, 0.12),
    (Step::Carry, 0.1),
];

#[derive(Clone, Copy, Debug, PartialEq)]
enum Step {
    /// A move from the place alone.
    Moved(Move),
    /// Some unknowns take their values from another minimum.
    Transplant,
    /// The difference of two other minima is added.
    Difference,
    /// The mean with some of the lowest minima (multi-parent intermediate recombination, Beyer 1995): where wells lie on a
    /// bowl, it lies deeper in the bowl.
    Mean,
    /// A displacement between neighbouring minima, met lately on any walk, is made again from here, once or twice, forth or
    /// back: wells often repeat along the same few directions, whatever the axes.
    Link,
    /// The last displacement of one unknown that led down is made in another unknown: wells of one family are often
    /// equally far apart.
    Carry,
}

/// All walks.
#[derive(Clone, Debug)]
pub struct Walks {
    walkers: Vec<Walker>,
    flights: BTreeMap<u64, Flight>,
    next_mark: u64,
    steps: Earnings,
    patience: u32,
    /// Displacements from one minimum to the next, the latest last.
    links: VecDeque<Vec<f64>>,
}

#[derive(Clone, Debug, Default)]
struct Walker {
    place: Option<Place>,
    /// Counts its new beginnings: what was proposed before one says nothing after it.
    life: u32,
    idle: u32,
    /// Displacements that led down from places that it has left meanwhile.
    gains: Vec<Vec<f64>>,
    last_gain: Option<Vec<f64>>,
    /// Single values that were taken from other minima, by slot and rounded value.
    asked: BTreeSet<(usize, i64)>,
}

#[derive(Clone, Debug)]
struct Flight {
    walker: usize,
    life: u32,
    base: Option<Place>,
    /// The kind of step; `None` for a joined one, or a beginning.
    step: Option<usize>,
}

impl Walks {
    /// No walk has begun.
    pub fn new(structure: &Structure) -> Self {
        let n = structure.n_unknowns();
        let steps = Earnings::new(&STEPS.map(|step| (step.1, 0.5 * step.1)));
        Walks {
            walkers: Vec::new(),
            flights: BTreeMap::new(),
            next_mark: 0,
            steps,
            links: VecDeque::new(),
            patience: (100 + 20 * n as u32).min(1000),
        }
    }

    /// A round is drawn up; a descent costs so many evaluations now.
    pub fn begin_round(&mut self, cost: f64) {
        self.steps.remember(MEMORY * cost, TRUST * cost);
    }

    /// The next step of a round.
    pub fn propose(&mut self, scene: &Scene<'_>, turn: u64, rng: &mut ChaCha8Rng) -> Proposed {
        let number = (turn / STEPS_A_WALKER % MOST_WALKERS) as usize;
        if self.walkers.len() <= number {
            self.walkers.resize_with(number + 1, Walker::default);
        }
        let walker = &mut self.walkers[number];
        let structure = scene.structure;
        let base = walker.place.clone();
        let (proposal, step) = match &base {
            None => (Proposal::Uniform, None),
            Some(place) if !walker.gains.is_empty() => {
                (point(structure, join(structure, &place.at, &std::mem::take(&mut walker.gains))), None)
            }
            Some(place) => {
                let kind = self.steps.choose(rng.random::<f64>());
                (point(structure, make_step(STEPS[kind].0, &self.links, scene, walker, place, rng)), Some(kind))
            }
        };
        let mark = self.next_mark;
        self.next_mark += 1;
        // Only what lies below the place is of use.
        let ceiling = match &base {
            Some(base) if rng.random::<f64>() >= SEEN_THROUGH => base.value,
            _ => f64::INFINITY,
        };
        self.flights.insert(mark, Flight { walker: number, life: walker.life, base, step });
        Proposed { proposal, mark, fill: false, ceiling }
    }

    /// The result of a step.
    pub fn arrive(&mut self, scene: &Scene<'_>, arrival: Arrival) {
        let Some(flight) = self.flights.remove(&arrival.mark) else { return };
        if let (Some(place), Some(base), Some(_)) = (&arrival.place, &flight.base, flight.step)
            && place.entry != base.entry
        {
            if self.links.len() >= LINKS {
                self.links.pop_front();
            }
            self.links.push_back(displacement(scene.structure, place, base));
        }
        let walker = &mut self.walkers[flight.walker];
        let improved = match (&arrival.place, &flight.base) {
            (Some(place), Some(base)) => place.entry != base.entry && base.is_above(place.value),
            _ => false,
        };
        if let Some(step) = flight.step {
            self.steps.earn(step, arrival.evaluations, f64::from(u8::from(improved)));
        }
        if flight.life != walker.life {
            return;
        }
        let Some(place) = arrival.place else {
            walker.grow_idle(self.patience);
            return;
        };
        let Some(current) = walker.place.clone() else {
            walker.place = Some(place);
            return;
        };
        let shift = |to: &Place, from: &Place| displacement(scene.structure, to, from);
        if place.entry != current.entry && current.is_above(place.value) {
            if let Some(base) = flight.base {
                walker.last_gain = Some(shift(&place, &base));
                if base.entry != current.entry {
                    walker.gains.push(shift(&current, &base));
                }
            }
            walker.place = Some(place);
            walker.idle = 0;
        } else if improved && let Some(base) = flight.base {
            // Lower than where it began, but not than where the walker is by now.
            if base.entry != current.entry && place.entry != current.entry {
                walker.gains.push(shift(&place, &base));
            }
            walker.grow_idle(self.patience);
        } else {
            walker.grow_idle(self.patience);
        }
    }
}

impl Walker {
    /// Whether a point differs from where the walker stands by more than one unknown, or by a value of one unknown that it
    /// has not asked for; which is then noted.
    fn is_worth_asking(&mut self, structure: &Structure, from: &[f64], at: &[f64]) -> bool {
        let bin = |slot: usize| (1e4 * at[slot] / structure.scale[slot]).floor() as i64;
        let apart =
            |&slot: &usize| structure.difference(slot, at[slot], from[slot]).abs() > 1e-5 * structure.scale[slot];
        let mut moved = (0..at.len()).filter(apart);
        match (moved.next(), moved.next()) {
            (None, _) => false,
            (Some(slot), None) => self.asked.insert((slot, bin(slot))),
            _ => true,
        }
    }

    fn grow_idle(&mut self, patience: u32) {
        self.idle += 1;
        if self.idle == patience / 2 {
            self.asked.clear();
        }
        if self.idle > patience {
            *self = Walker { life: self.life + 1, ..Walker::default() };
        }
    }
}

fn displacement(structure: &Structure, to: &Place, from: &Place) -> Vec<f64> {
    (0..to.at.len()).map(|slot| structure.difference(slot, to.at[slot], from.at[slot])).collect()
}

fn point(structure: &Structure, mut at: Vec<f64>) -> Proposal {
    structure.bring_inside(&mut at);
    Proposal::Point(Arc::from(at))
}

/// The place displaced by all gains. Where several move one unknown, the largest displacement counts: two ways to the
/// same improvement are not made twice.
fn join(structure: &Structure, at: &[f64], gains: &[Vec<f64>]) -> Vec<f64> {
    let mut joined = at.to_vec();
    for (slot, x) in joined.iter_mut().enumerate() {
        let largest = gains
            .iter()
            .map(|gain| gain[slot])
            .fold(0.0, |most: f64, shift| if shift.abs() > most.abs() { shift } else { most });
        if largest.abs() > 1e-6 * structure.scale[slot] {
            *x += largest;
        }
    }
    joined
}

fn make_step(
    step: Step,
    links: &VecDeque<Vec<f64>>,
    scene: &Scene<'_>,
    walker: &mut Walker,
    place: &Place,
    rng: &mut ChaCha8Rng,
) -> Vec<f64> {
    let structure = scene.structure;
    let mut at = place.at.to_vec();
    let other = |rng: &mut ChaCha8Rng| {
        let chosen = (!scene.met.is_empty()).then(|| scene.met[rng.random_range(0..scene.met.len())])?;
        scene.ledger.point(chosen)
    };
    match step {
        Step::Moved(kind) => return kind.apply(structure, &at, 0.1, rng),
        Step::Transplant => {
            for _ in 0..DRAWS {
                let Some(other) = other(rng) else { break };
                at.copy_from_slice(&place.at);
                general::transplant(&mut at, &other, rng);
                // What a single value led to is known; it is not asked again from here.
                if walker.is_worth_asking(structure, &place.at, &at) {
                    break;
                }
            }
        }
        Step::Difference => {
            if let (Some(first), Some(second)) = (other(rng), other(rng)) {
                general::difference(&mut at, &first, &second, rng);
            }
        }
        Step::Mean => {
            let n_parents = rng.random_range(1..=MOST_PARENTS);
            for parent in 0..n_parents {
                let chosen = rng.random_range(0..scene.ledger.len().clamp(1, LOW));
                let Some(entry) = scene.ledger.entries().nth(chosen) else { continue };
                // The running mean, taken the short way round for cyclic unknowns.
                let weight = 1.0 / (parent + 2) as f64;
                for (slot, (x, other)) in at.iter_mut().zip(entry.at()).enumerate() {
                    *x += weight * structure.difference(slot, *other, *x);
                }
            }
        }
        Step::Link => match links.get(rng.random_range(0..LINKS)) {
            Some(link) => {
                let factor = [1.0, 1.0, -1.0, -1.0, 2.0, -2.0][rng.random_range(0..6)];
                at.iter_mut().zip(link).for_each(|(x, shift)| *x += factor * shift);
            }
            None => general::all(structure, &mut at, rng),
        },
        Step::Carry => match &walker.last_gain {
            Some(gain) => carry(structure, &mut at, gain, rng),
            None => general::one(structure, &mut at, rng),
        },
    }
    if at[..] == place.at[..] {
        // Nothing to take over: any step is better than none.
        general::one(structure, &mut at, rng);
    }
    at
}

/// The largest displacement of one unknown, made in another, either way.
fn carry(structure: &Structure, at: &mut [f64], gain: &[f64], rng: &mut impl Rng) {
    let relative = |slot: usize| gain[slot] / structure.scale[slot];
    let largest =
        (0..gain.len()).fold(0, |best, slot| if relative(slot).abs() > relative(best).abs() { slot } else { best });
    let slot = rng.random_range(0..at.len());
    let sign = if rng.random::<bool>() { 1.0 } else { -1.0 };
    at[slot] += sign * relative(largest) * structure.scale[slot];
}
