//! The portfolio: which heuristic proposes next, and what each has earned.
//!
//! Shares of a mix move by recent earnings: a lower value counts most, new minima by how near they are to the lowest. The
//! survey stands outside: its share is fixed, and so are the shares of a mix that the user gave with numbers.

use rand::RngExt;
use rand_chacha::ChaCha8Rng;

use super::anneal::Anneal;
use super::earnings::Earnings;
use super::evolve::Evolve;
use super::hop::Hop;
use super::multistart::Multistart;
use super::proposer::{Arrival, Proposer, Scene};
use super::schedule::Schedule;
use super::settings::{Heuristic, Mix};
use super::structure::Structure;
use super::task::{Proposal, Work};

/// Descents after which earnings count half: at least so many, and this part of all evaluations so far.
const MEMORY: (f64, f64) = (400.0, 0.2);
/// Descents that each is trusted with at first.
const TRUST: f64 = 40.0;

/// The share that a long hunt keeps for a heuristic whatever it earns.
fn hedge(heuristic: Heuristic) -> f64 {
    match heuristic {
        Heuristic::Hop => 0.35,
        Heuristic::Evolve => 0.2,
        Heuristic::Anneal | Heuristic::Multistart => 0.04,
        Heuristic::Given | Heuristic::Survey => 0.0,
    }
}

/// The heuristics of a hunt with their accounts.
pub struct Portfolio {
    mix: Mix,
    survey: f64,
    schedule: Schedule,
    earnings: Earnings,
    members: Vec<Box<dyn Proposer>>,
    /// Fillings of empty places tried and those that moved a point, of late.
    fillings: (f64, f64),
}

impl Portfolio {
    /// A portfolio in which nothing was proposed.
    pub fn new(mix: &Mix, survey: f64, structure: &Structure) -> Self {
        let members: Vec<(f64, f64)> =
            mix.members().iter().map(|&(heuristic, share)| (share, hedge(heuristic))).collect();
        let member = |&(heuristic, _): &(Heuristic, f64)| -> Box<dyn Proposer> {
            match heuristic {
                Heuristic::Anneal => Box::new(Anneal::new(structure)),
                Heuristic::Evolve => Box::new(Evolve::new(structure)),
                Heuristic::Hop => Box::new(Hop::new(structure)),
                Heuristic::Given | Heuristic::Survey | Heuristic::Multistart => Box::new(Multistart::default()),
            }
        };
        let mut schedule = Schedule::new(mix, survey);
        schedule.expect(Heuristic::Anneal, Anneal::expected_cost(structure));
        Portfolio {
            mix: mix.clone(),
            survey,
            schedule,
            earnings: Earnings::new(&members),
            members: mix.members().iter().map(member).collect(),
            fillings: (0.0, 0.0),
        }
    }

    /// Fixes the shares of the next round by the earnings so far.
    pub fn begin_round(&mut self) {
        let spent: u64 = self.schedule.spent().iter().sum();
        let descents: u64 = self.schedule.descents().iter().sum();
        let cost = spent as f64 / descents.max(1) as f64;
        let memory = (MEMORY.0 * cost).max(MEMORY.1 * spent as f64);
        self.earnings.remember(memory, TRUST * cost);
        self.earnings.grow(descents);
        self.members.iter_mut().for_each(|member| member.begin_round(memory, cost, descents));
        if self.mix.is_fixed() {
            return;
        }
        self.schedule.set_shares(&self.mix, self.survey, &self.earnings.shares());
    }

    /// The next task. `turns` counts the tasks of the round by heuristic.
    pub fn propose(
        &mut self,
        scene: &Scene<'_>,
        turns: &mut [u64; Heuristic::ALL.len()],
        rng: &mut ChaCha8Rng,
    ) -> Work {
        let heuristic = self.schedule.next();
        self.schedule.begin(heuristic);
        let Some(member) = self.member(heuristic) else {
            return Work::Descend {
                heuristic,
                proposal: Proposal::Uniform,
                mark: 0,
                fill: false,
                ceiling: f64::INFINITY,
            };
        };
        let turn = turns[heuristic.number()];
        turns[heuristic.number()] += 1;
        let proposed = self.members[member].propose(scene, turn, rng);
        // A filling that never moves a point is a waste; now and then it is tried all the same.
        let (tried, moved) = self.fillings;
        let chance = ((moved + 1.0) / (tried + 1.0) * 10.0).clamp(0.1, 1.0);
        let fill = proposed.fill && rng.random::<f64>() < chance;
        Work::Descend { heuristic, proposal: proposed.proposal, mark: proposed.mark, fill, ceiling: proposed.ceiling }
    }

    /// Books a task of points that the user gave.
    pub fn begin_given(&mut self) {
        self.schedule.begin(Heuristic::Given);
    }

    /// What became of a task.
    pub fn arrive(&mut self, heuristic: Heuristic, scene: &Scene<'_>, arrival: Arrival, rng: &mut ChaCha8Rng) {
        self.schedule.end(heuristic, arrival.evaluations);
        let Some(member) = self.member(heuristic) else { return };
        self.earnings.earn(member, arrival.evaluations, arrival.worth);
        self.members[member].arrive(scene, arrival, rng);
    }

    /// Counts fillings.
    pub fn count_fillings(&mut self, (tried, moved): (u32, u32)) {
        let fade = 0.998_f64;
        self.fillings = (fade * self.fillings.0 + f64::from(tried), fade * self.fillings.1 + f64::from(moved));
    }

    /// The account of evaluations by heuristic.
    pub fn schedule(&self) -> &Schedule {
        &self.schedule
    }

    /// The ways inside heuristics with their shares.
    pub fn ways(&self) -> Vec<(Heuristic, &'static str, f64)> {
        let mut ways = Vec::new();
        for (member, &(heuristic, _)) in self.members.iter().zip(self.mix.members()) {
            ways.extend(member.ways().into_iter().map(|(name, share)| (heuristic, name, share)));
        }
        ways
    }

    fn member(&self, heuristic: Heuristic) -> Option<usize> {
        self.mix.members().iter().position(|member| member.0 == heuristic)
    }
}
