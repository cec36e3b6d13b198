//! `evolve`: a population of minima whose children descend.
//!
//! Children of points of any landscape come by differential variation towards the better ones, with factors adapted to
//! what succeeded (success-history adaptation, Tanabe and Fukunaga 2013; the size falls while nothing succeeds, after
//! their population-size reduction of 2014, by stagnation here, since a hunt has no fixed end). Children of clouds come
//! by cut and splice (Deaven and Ho 1995). Some are mutants. A child near a member may replace only that one, so that the
//! population does not collapse onto one funnel. A population that has gone stale is given up for a new one.
//!
//! Doubted and left out: variants that adapt a covariance. On the general set of `tests/suite/landscapes.rs` none of
//! their published figures beats descents with exact gradients, which learn the same curvature.

use rand::{Rng, RngExt};
use rand_chacha::ChaCha8Rng;

use crate::base::order::Total;

use super::geometry::{centroid_of, distance, points_of, usual_contact};
use super::moves::{Move, general};
use super::proposer::{Arrival, Place, Proposed, Proposer, Scene};
use super::structure::Structure;
use super::task::Proposal;

/// Members of a new population.
const MEMBERS: usize = 10;
/// Members of one that has shrunk before it is given up.
const FEWEST: usize = 4;
/// Pairs of factors that are remembered.
const HISTORY: usize = 6;
/// The share of mutants.
const MUTANTS: f64 = 0.15;
/// The share of beginnings that take up a low minimum met by others.
const ADOPTED: f64 = 0.25;
/// The low minima that they choose among.
const ADOPTABLE: usize = 40;
/// Members nearer than this, in units of the start region, are of one niche.
const NICHE: f64 = 0.02;
/// The same for clouds: the root mean square difference of sorted radii in usual contacts.
const CLOUD_NICHE: f64 = 0.04;

/// The heuristic.
pub struct Evolve {
    population: Vec<Member>,
    capacity: usize,
    /// Counts populations: a child of an earlier one does not enter.
    age: u32,
    idle: u32,
    patience: u32,
    history: [Factors; HISTORY],
    next_history: usize,
    flights: std::collections::BTreeMap<u64, Flight>,
    next_mark: u64,
}

#[derive(Clone)]
struct Member {
    place: Place,
    /// What niches are told by: the sorted radii of the first cloud, or the point itself.
    niche: Vec<f64>,
}

/// The factor of differences and the share of unknowns that cross over.
#[derive(Clone, Copy)]
struct Factors {
    difference: f64,
    crossover: f64,
}

struct Flight {
    age: u32,
    /// The parent's value and the factors, for a child of differential variation.
    varied: Option<(f64, Factors)>,
    beginning: bool,
}

impl Evolve {
    /// No population yet.
    pub fn new(structure: &Structure) -> Self {
        Evolve {
            population: Vec::new(),
            capacity: MEMBERS,
            age: 0,
            idle: 0,
            patience: if structure.clouds.is_empty() { 60 + 6 * structure.n_unknowns().min(40) as u32 } else { 120 },
            history: [Factors { difference: 0.5, crossover: 0.5 }; HISTORY],
            next_history: 0,
            flights: std::collections::BTreeMap::new(),
            next_mark: 0,
        }
    }

    /// One of the better members: the better of two drawn.
    fn tournament(&self, rng: &mut impl Rng) -> &Member {
        let n = self.population.len();
        // The population is kept lowest first.
        &self.population[rng.random_range(0..n).min(rng.random_range(0..n))]
    }

    fn begin(&self, scene: &Scene<'_>, rng: &mut impl Rng) -> Proposal {
        if rng.random::<f64>() < ADOPTED && !scene.ledger.is_empty() {
            let chosen = rng.random_range(0..scene.ledger.len().min(ADOPTABLE));
            if let Some(from) = scene.ledger.entries().nth(chosen).and_then(|entry| scene.ledger.point(entry.id())) {
                let kind = Move::draw(&Move::available(scene.structure), rng);
                return Proposal::Moved { from, kind, step: 0.1 };
            }
        }
        Proposal::Uniform
    }

    /// Current to one of the best, plus a difference of two (Zhang and Sanderson 2009), crossed with the parent.
    fn vary(&self, scene: &Scene<'_>, factors: Factors, parent: &Member, rng: &mut impl Rng) -> Vec<f64> {
        let structure = scene.structure;
        let best = &self.population[rng.random_range(0..(self.population.len() / 4).max(1))].place.at;
        let first = &self.population[rng.random_range(0..self.population.len())].place.at;
        // The second may be any minimum met: the ledger is the archive.
        let second = match scene.met.get(rng.random_range(0..2 * scene.met.len().max(1))) {
            Some(&entry) => scene.ledger.point(entry),
            None => None,
        };
        let second =
            second.unwrap_or_else(|| self.population[rng.random_range(0..self.population.len())].place.at.clone());
        let mut at = parent.place.at.to_vec();
        let chosen = rng.random_range(0..at.len());
        for (slot, x) in at.iter_mut().enumerate() {
            if slot == chosen || rng.random::<f64>() < factors.crossover {
                let toward = structure.difference(slot, best[slot], *x);
                let aside = structure.difference(slot, first[slot], second[slot]);
                *x += factors.difference * (toward + aside);
            }
        }
        at
    }

    fn mutate(&self, scene: &Scene<'_>, rng: &mut impl Rng) -> Proposal {
        let from = self.tournament(rng).place.at.clone();
        let kind = if scene.structure.clouds.is_empty() {
            [Move::One, Move::Afresh, Move::Some, Move::All][rng.random_range(0..4)]
        } else {
            Move::draw(&Move::available(scene.structure), rng)
        };
        Proposal::Moved { from, kind, step: 0.1 }
    }

    /// Drawn about a remembered pair, as its inventors say: the difference from a Cauchy law, the crossover from a normal
    /// one, here by sums of uniform numbers, whose tails do not matter.
    fn draw_factors(&self, rng: &mut impl Rng) -> Factors {
        let about = self.history[rng.random_range(0..HISTORY)];
        let turn = crate::numbers::functions::tangent(std::f64::consts::PI * (0.96 * rng.random::<f64>() - 0.48));
        let bell = (0..3).map(|_| rng.random::<f64>()).sum::<f64>() * 2.0 - 3.0;
        Factors {
            difference: (about.difference + 0.1 * turn).clamp(0.05, 1.0),
            crossover: (about.crossover + 0.1 * bell).clamp(0.0, 1.0),
        }
    }

    fn learn(&mut self, factors: Factors) {
        let slot = &mut self.history[self.next_history % HISTORY];
        // Each success pulls the remembered pair half way: the means of a generation have no place in a stream of children.
        slot.difference += 0.5 * (factors.difference - slot.difference);
        slot.crossover += 0.5 * (factors.crossover - slot.crossover);
        self.next_history += 1;
    }

    /// Takes a child in, or not; says whether the population is better for it.
    fn settle(&mut self, structure: &Structure, child: Member) -> bool {
        if self.population.iter().any(|member| member.place.entry == child.place.entry) {
            return false;
        }
        let nearest = (0..self.population.len())
            .map(|number| (Total(niche_distance(structure, &self.population[number].niche, &child.niche)), number))
            .min();
        let radius = if structure.clouds.is_empty() { NICHE } else { CLOUD_NICHE };
        match nearest {
            Some((Total(apart), number)) if apart < radius => {
                if !self.population[number].place.is_above(child.place.value) {
                    return false;
                }
                self.population[number] = child;
            }
            _ if self.population.len() < self.capacity => self.population.push(child),
            _ => match self.population.last_mut() {
                Some(worst) if worst.place.is_above(child.place.value) => *worst = child,
                _ => return false,
            },
        }
        self.population.sort_by_key(|member| (Total(member.place.value), member.place.entry));
        true
    }

    fn grow_idle(&mut self) {
        self.idle += 1;
        if self.idle < self.patience {
            return;
        }
        self.idle = 0;
        if self.capacity > FEWEST {
            self.capacity = (3 * self.capacity / 4).max(FEWEST);
            self.population.truncate(self.capacity);
            return;
        }
        self.population.clear();
        self.capacity = MEMBERS;
        self.age += 1;
    }
}

impl Proposer for Evolve {
    fn propose(&mut self, scene: &Scene<'_>, _turn: u64, rng: &mut ChaCha8Rng) -> Proposed {
        let mark = self.next_mark;
        self.next_mark += 1;
        let cloud = !scene.structure.clouds.is_empty();
        let mut flight = Flight { age: self.age, varied: None, beginning: false };
        let proposal =
            if self.population.len() < FEWEST || (self.population.len() < self.capacity && rng.random::<f64>() < 0.5) {
                flight.beginning = true;
                self.begin(scene, rng)
            } else if rng.random::<f64>() < MUTANTS {
                self.mutate(scene, rng)
            } else if cloud {
                let mother = self.tournament(rng).place.at.clone();
                let father = self.population[rng.random_range(0..self.population.len())].place.at.clone();
                Proposal::Spliced { mother, father }
            } else {
                let factors = self.draw_factors(rng);
                let parent = &self.population[rng.random_range(0..self.population.len())];
                flight.varied = Some((parent.place.value, factors));
                let mut at = self.vary(scene, factors, parent, rng);
                if at[..] == parent.place.at[..] {
                    general::one(scene.structure, &mut at, rng);
                }
                scene.structure.bring_inside(&mut at);
                Proposal::Point(at.into())
            };
        // A child above the worst member of a full population has no place.
        let full = self.population.len() >= self.capacity;
        let ceiling = self.population.last().filter(|_| full).map_or(f64::INFINITY, |worst| worst.place.value);
        self.flights.insert(mark, flight);
        Proposed { proposal, mark, fill: cloud, ceiling }
    }

    fn arrive(&mut self, scene: &Scene<'_>, arrival: Arrival, _rng: &mut ChaCha8Rng) {
        let Some(flight) = self.flights.remove(&arrival.mark) else { return };
        if flight.age != self.age {
            return;
        }
        let Some(place) = arrival.place else { return self.grow_idle() };
        let value = place.value;
        let niche = niche_of(scene.structure, &place.at);
        if self.settle(scene.structure, Member { place, niche }) {
            if !flight.beginning {
                self.idle = 0;
            }
            if let Some((parent, factors)) = flight.varied
                && value < parent
            {
                self.learn(factors);
            }
        } else {
            self.grow_idle();
        }
    }
}

fn niche_of(structure: &Structure, at: &[f64]) -> Vec<f64> {
    let Some(cloud) = structure.clouds.first() else { return at.to_vec() };
    let points = points_of(cloud, at);
    let (centroid, contact) = (centroid_of(&points), usual_contact(&points));
    let mut radii: Vec<Total> = points.iter().map(|point| Total(distance(point, &centroid) / contact)).collect();
    radii.sort();
    radii.into_iter().map(|radius| radius.0).collect()
}

fn niche_distance(structure: &Structure, left: &[f64], right: &[f64]) -> f64 {
    if structure.clouds.is_empty() {
        let relative = |slot: usize| structure.difference(slot, left[slot], right[slot]).abs() / structure.scale[slot];
        return (0..left.len()).map(relative).fold(0.0, f64::max);
    }
    let square: f64 = left.iter().zip(right).map(|(a, b)| (a - b) * (a - b)).sum();
    (square / left.len() as f64).sqrt()
}
