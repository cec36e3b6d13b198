//! The state of a hunt: draws up rounds, merges their results.
//!
//! Everything here runs on one thread and in task order, so the bits of a hunt are decided here and in the tasks, never
//! by who finished first.

use std::collections::BTreeSet;
use std::sync::Arc;

use crate::base::random::{Purpose, stream};
use crate::ledger::{EntryId, Identity, Ledger, Meeting};

use super::chain::Chains;
use super::outcome::{Ending, Troubles};
use super::schedule::Schedule;
use super::settings::{Heuristic, Settings};
use super::structure::Structure;
use super::task::{Finding, Proposal, Task, TaskResult, Work};

/// Tasks of the first rounds. Small, so that chains get deep early; the rounds grow with the evaluations spent, since
/// many threads need many tasks and by then depth is cheap.
const FIRST_ROUND: f64 = 16.0;
/// The evaluations after which a round has doubled, quadrupled at three times more, and so on (square-root growth).
const GROWTH: f64 = 100_000.0;
/// The most tasks of a round.
const LARGEST_ROUND: f64 = 1024.0;

/// The share of evaluations that confirmations may take while the hunt goes on; the rest waits for the closing.
const CONFIRMING_SHARE: f64 = 0.25;

/// A hunt between two rounds.
pub struct Hunt {
    settings: Settings,
    structure: Arc<Structure>,
    ledger: Ledger,
    schedule: Schedule,
    chains: Chains,
    troubles: Troubles,
    confirming: u64,
    asked_to_confirm: BTreeSet<EntryId>,
    given_drawn: usize,
    spread_drawn: u64,
    rounds_merged: u64,
}

impl Hunt {
    /// A hunt that has not begun.
    pub fn new(settings: Settings, structure: Arc<Structure>, identity: Arc<Identity>, value_scale: f64) -> Self {
        Hunt {
            ledger: Ledger::new(identity, value_scale),
            schedule: Schedule::new(&settings.mix, settings.survey),
            chains: Chains::new(&structure),
            troubles: Troubles::default(),
            confirming: 0,
            asked_to_confirm: BTreeSet::new(),
            given_drawn: 0,
            spread_drawn: 0,
            rounds_merged: 0,
            settings,
            structure,
        }
    }

    /// The tasks of a round, from the state as it is: call it for rounds 0 and 1 at the start, and for round r + 2
    /// right after round r was merged.
    pub fn draw(&mut self, round: u64) -> Vec<Task> {
        let mut work = Vec::new();
        let size = self.round_size();
        self.draw_given(size, &mut work);
        self.draw_confirmations(&mut work);
        let mut hops = 0;
        let mut rng = stream(self.settings.seed, round, 0, Purpose::Round);
        while work.len() < size && (work.is_empty() || self.has_room()) {
            let heuristic = self.schedule.next();
            self.schedule.begin(heuristic);
            let (proposal, mark) = match heuristic {
                Heuristic::Multistart => {
                    // Every other start is spread evenly; the rest are independent of each other.
                    self.spread_drawn += 1;
                    let number = self.spread_drawn;
                    (if number.is_multiple_of(2) { Proposal::Spread(number / 2) } else { Proposal::Uniform }, 0)
                }
                Heuristic::Hop => {
                    hops += 1;
                    self.chains.propose(round, hops - 1, &self.ledger, &mut rng)
                }
                Heuristic::Survey | Heuristic::Given => (Proposal::Uniform, 0),
            };
            work.push(Work::Descend { heuristic, proposal, mark });
        }
        work.into_iter().enumerate().map(|(number, work)| Task { round, number: number as u64, work }).collect()
    }

    /// Takes in the results of a round, in task order; says whether the hunt has reached what it was asked for.
    pub fn merge(&mut self, results: Vec<TaskResult>) -> Option<Ending> {
        self.absorb(results);
        self.rounds_merged += 1;
        let reached = |target: f64| self.ledger.lowest_value().is_some_and(|lowest| lowest <= target);
        if self.settings.target.is_some_and(reached) {
            return Some(Ending::Target);
        }
        let spent = |most: u64| self.evaluations() >= most;
        self.settings.max_evaluations.is_some_and(spent).then_some(Ending::Evaluations)
    }

    /// Takes in the results of the closing.
    pub fn merge_closing(&mut self, results: Vec<TaskResult>) {
        self.absorb(results);
    }

    fn absorb(&mut self, results: Vec<TaskResult>) {
        for result in results {
            self.troubles.outside += result.outside;
            if self.troubles.first_outside.is_none() {
                self.troubles.first_outside = result.first_outside;
            }
            let (round, number) = (result.round, result.number);
            match result.finding {
                Finding::Met { heuristic, mark, candidate } => {
                    self.schedule.end(heuristic, result.evaluations);
                    let meeting =
                        Meeting { heuristic: heuristic.number(), round, task: number, evaluation: self.evaluations() };
                    let (value, at) = (candidate.value, candidate.at.clone());
                    let met = self.ledger.meet(candidate, meeting);
                    if met.new {
                        self.chains.met_new(met.entry);
                    }
                    if heuristic == Heuristic::Hop {
                        let mut rng = stream(self.settings.seed, round, number + 1, Purpose::Round);
                        self.chains.arrive(mark, value, &at, met.entry, &mut rng);
                    }
                }
                Finding::Lost { heuristic, mark, reason } => {
                    self.schedule.end(heuristic, result.evaluations);
                    self.troubles.count(reason);
                    if heuristic == Heuristic::Hop {
                        self.chains.fail(mark);
                    }
                }
                Finding::Confirmed { entry, confirmed, saddles } => {
                    self.confirming += result.evaluations;
                    self.asked_to_confirm.remove(&entry);
                    self.troubles.saddles += saddles;
                    self.troubles.flat += u64::from(confirmed.is_flat());
                    self.ledger.confirm(entry, confirmed);
                }
                Finding::Dismissed { entry } => {
                    self.confirming += result.evaluations;
                    self.asked_to_confirm.remove(&entry);
                    self.troubles.not_confirmed += 1;
                    self.ledger.dismiss(entry);
                }
            }
        }
    }

    /// Confirmations of the lowest entries that still wait, `most` at most: the closing of a hunt.
    pub fn draw_closing(&mut self, round: u64, most: usize) -> Vec<Task> {
        let waiting: Vec<EntryId> = self.ledger.unconfirmed(most);
        let points = waiting.into_iter().filter_map(|entry| Some((entry, self.ledger.point(entry)?)));
        points
            .enumerate()
            .map(|(number, (entry, at))| Task { round, number: number as u64, work: Work::Confirm { entry, at } })
            .collect()
    }

    /// Evaluations so far, confirmations included.
    pub fn evaluations(&self) -> u64 {
        self.schedule.spent().iter().sum::<u64>() + self.confirming
    }

    /// What was met so far.
    pub fn ledger(&self) -> &Ledger {
        &self.ledger
    }

    /// The ledger, at the end.
    pub fn into_ledger(self) -> Ledger {
        self.ledger
    }

    /// What went wrong so far.
    pub fn troubles(&self) -> &Troubles {
        &self.troubles
    }

    /// The account of evaluations by heuristic.
    pub fn schedule(&self) -> &Schedule {
        &self.schedule
    }

    /// Evaluations spent on confirming.
    pub fn confirming(&self) -> u64 {
        self.confirming
    }

    /// Rounds merged so far.
    pub fn rounds_merged(&self) -> u64 {
        self.rounds_merged
    }

    fn round_size(&self) -> usize {
        let growth = (1.0 + self.evaluations() as f64 / GROWTH).sqrt();
        (FIRST_ROUND * growth).min(LARGEST_ROUND) as usize
    }

    /// Whether another task fits into the budget, by what tasks usually cost: a small budget is not overrun by a whole
    /// round.
    fn has_room(&self) -> bool {
        let planned = self.evaluations() as f64 + self.schedule.under_way();
        self.settings.max_evaluations.is_none_or(|most| planned < most as f64)
    }

    fn draw_given(&mut self, size: usize, work: &mut Vec<Work>) {
        while self.given_drawn < self.settings.given.len() && work.len() < size {
            let point = Proposal::Point(self.settings.given[self.given_drawn].clone().into());
            self.given_drawn += 1;
            self.schedule.begin(Heuristic::Given);
            work.push(Work::Descend { heuristic: Heuristic::Given, proposal: point, mark: 0 });
        }
    }

    /// Confirmations of the lowest entries that wait, as far as their share of the evaluations goes. The lowest of all
    /// is confirmed in any case.
    fn draw_confirmations(&mut self, work: &mut Vec<Work>) {
        let cost = self.structure.n_unknowns() as f64;
        let under_way = self.asked_to_confirm.len();
        let allowed = CONFIRMING_SHARE * self.evaluations() as f64 - self.confirming as f64 - under_way as f64 * cost;
        let most = (allowed / cost).max(0.0) as usize;
        let lowest = self.ledger.lowest_entry();
        for entry in self.ledger.unconfirmed(most + under_way) {
            if self.asked_to_confirm.contains(&entry) {
                continue;
            }
            let Some(at) = self.ledger.point(entry) else { continue };
            self.asked_to_confirm.insert(entry);
            work.push(Work::Confirm { entry, at });
        }
        if let Some(lowest) = lowest.filter(|&entry| !self.ledger.is_confirmed(entry))
            && self.asked_to_confirm.insert(lowest)
            && let Some(at) = self.ledger.point(lowest)
        {
            work.push(Work::Confirm { entry: lowest, at });
        }
    }
}
