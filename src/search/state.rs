//! The state of a hunt: draws up rounds, merges their results.
//!
//! Everything here runs on one thread and in task order, so the bits of a hunt are decided here and in the tasks, never
//! by who finished first. Results become a [`RoundRecord`] and change the state through it alone; a hunt that is
//! resumed applies the same records, so that both ways lead to the same state by construction.

use std::collections::{BTreeMap, BTreeSet};
use std::sync::Arc;

use rand::RngExt;

use crate::base::random::{Purpose, stream};
use crate::ledger::{Candidate, EntryId, Identity, Ledger, Meeting};
use crate::numbers::functions;
use crate::statistics::{Confidence, Frequencies, Unconverged, coverage};

use super::outcome::{Ending, Troubles};
use super::portfolio::Portfolio;
use super::proposer::{Arrival, Place, Scene};
use super::record::{Found, RoundRecord, TaskRecord};
use super::schedule::Schedule;
use super::settings::{Heuristic, Settings};
use super::structure::Structure;
use super::task::{Finding, Proposal, Task, TaskResult, Work};

/// Tasks of the first rounds. Small, so that walks get deep early; the rounds grow with the evaluations spent, since many
/// threads need many tasks and by then depth is cheap.
const FIRST_ROUND: f64 = 4.0;
/// Tasks that each descent so far adds to a round: a round is about a hundredth of what came before.
const GROWTH: f64 = 0.012;
/// Tasks of a round where no heuristic learns from what was met: nothing is gained by small ones, and lanes stay full.
const UNLED_ROUND: f64 = 128.0;
/// The most tasks of a round.
const LARGEST_ROUND: f64 = 2048.0;

/// What the lowest value so far is worth when it is new; a new minimum with k lower ones is worth 1/(1 + k) while lower values are
/// being met.
const WORTH_LOWEST: f64 = 5.0;
/// Descents without a lower value after which rank counts half as much, in the exponent.
const LISTING: f64 = 1000.0;
/// Uniform starts over which the share that meets something known is followed.
const FOLLOWED: f64 = 200.0;
/// Lower minima that are counted for that.
const RANKED: usize = 200;

/// The survey's coverage is worked out again when the survey has grown by one part in so many.
const COVERAGE_GROWTH: u64 = 20;

/// The share of evaluations that confirmations may take while the hunt goes on; the rest waits for the closing.
const CONFIRMING_SHARE: f64 = 0.05;

/// What a task is for, to make sense of what comes of it.
#[derive(Clone, Copy)]
enum Purport {
    Descend(Heuristic, u64),
    Confirm(EntryId),
}

/// A round under way.
#[derive(Default)]
struct Drawn {
    check: u32,
    purports: Vec<Purport>,
}

/// A hunt between two rounds.
pub struct Hunt {
    settings: Settings,
    structure: Arc<Structure>,
    ledger: Ledger,
    portfolio: Portfolio,
    /// The entries in the order in which they were met.
    met: Vec<EntryId>,
    troubles: Troubles,
    confirming: u64,
    asked_to_confirm: BTreeSet<EntryId>,
    /// What the tasks of the rounds under way are for.
    under_way: BTreeMap<u64, Drawn>,
    given_drawn: usize,
    rounds_merged: u64,
    /// The evaluations after which the lowest value so far was met.
    last_lower: u64,
    /// The share of uniform starts of late that met a minimum known before.
    known_share: f64,
    /// Descents that had ended by then.
    last_lower_descents: u64,
    /// Descents of the survey before which its coverage is not worked out again.
    next_coverage: u64,
}

impl Hunt {
    /// A hunt that has not begun.
    pub fn new(settings: Settings, structure: Arc<Structure>, identity: Arc<Identity>, value_scale: f64) -> Self {
        Hunt {
            ledger: Ledger::new(identity, value_scale),
            portfolio: Portfolio::new(&settings.mix, settings.survey, &structure),
            met: Vec::new(),
            troubles: Troubles::default(),
            confirming: 0,
            asked_to_confirm: BTreeSet::new(),
            under_way: BTreeMap::new(),
            given_drawn: 0,
            rounds_merged: 0,
            last_lower: 0,
            known_share: 0.0,
            last_lower_descents: 0,
            next_coverage: 1,
            settings,
            structure,
        }
    }

    /// The tasks of a round, from the state as it is: call it for rounds 0 and 1 at the start, and for round r + 2
    /// right after round r was merged. The budget has no say, so that a longer hunt begins like a shorter one.
    pub fn draw(&mut self, round: u64) -> Vec<Task> {
        let mut work = Vec::new();
        let size = self.round_size();
        self.draw_given(size, &mut work);
        self.draw_confirmations(&mut work);
        let mut turns = [0; Heuristic::ALL.len()];
        let mut rng = stream(self.settings.seed, round, 0, Purpose::Round);
        self.portfolio.begin_round();
        while work.len() < size {
            let scene = Scene { structure: &self.structure, ledger: &self.ledger, met: &self.met, round };
            work.push(self.portfolio.propose(&scene, &mut turns, &mut rng));
        }
        let check = rng.random::<u32>();
        self.tasks(round, check, work)
    }

    fn tasks(&mut self, round: u64, check: u32, work: Vec<Work>) -> Vec<Task> {
        let purport = |work: &Work| match *work {
            Work::Descend { heuristic, mark, .. } => Purport::Descend(heuristic, mark),
            Work::Confirm { entry, .. } => Purport::Confirm(entry),
        };
        self.under_way.insert(round, Drawn { check, purports: work.iter().map(purport).collect() });
        work.into_iter().enumerate().map(|(number, work)| Task { round, number: number as u64, work }).collect()
    }

    /// Takes in the results of a round, in task order; gives its record.
    pub fn merge(&mut self, round: u64, results: Vec<TaskResult>) -> RoundRecord {
        self.rounds_merged += 1;
        self.absorb(round, results)
    }

    /// Takes in the results of the closing, which is no round and is not recorded: a hunt that goes on later goes on from
    /// before it.
    pub fn merge_closing(&mut self, round: u64, results: Vec<TaskResult>) {
        self.absorb(round, results);
    }

    fn absorb(&mut self, round: u64, results: Vec<TaskResult>) -> RoundRecord {
        let Drawn { check, purports } = self.under_way.remove(&round).unwrap_or_default();
        let mut record = RoundRecord { check, tasks: Vec::with_capacity(results.len()) };
        for (number, (result, purport)) in results.into_iter().zip(purports).enumerate() {
            let task = self.decide(result);
            self.apply(round, number as u64, purport, &task);
            record.tasks.push(task);
        }
        record
    }

    /// Takes in a round as it was recorded, in place of its results; `false` where the record is that of another hunt.
    pub fn replay(&mut self, round: u64, record: &RoundRecord) -> bool {
        let Drawn { check, purports } = self.under_way.remove(&round).unwrap_or_default();
        self.rounds_merged += 1;
        let fits = |(purport, task): (&Purport, &TaskRecord)| match *purport {
            Purport::Descend(heuristic, _) => task.heuristic == Some(heuristic),
            Purport::Confirm(_) => task.heuristic.is_none(),
        };
        check == record.check
            && purports.len() == record.tasks.len()
            && purports.iter().zip(&record.tasks).all(fits)
            && purports
                .into_iter()
                .zip(&record.tasks)
                .enumerate()
                .all(|(number, (purport, task))| self.apply(round, number as u64, purport, task))
    }

    /// Whether the hunt has reached what it was asked for; to be asked once after each round.
    pub fn ending(&mut self) -> Option<Ending> {
        let reached = |target: f64| self.ledger.lowest_value().is_some_and(|lowest| lowest <= target);
        if self.settings.target.is_some_and(reached) {
            return Some(Ending::Target);
        }
        if self.settings.coverage.is_some_and(|share| self.survey_covers(share)) {
            return Some(Ending::Coverage);
        }
        let evaluations = self.evaluations();
        if self.settings.quiet.is_some_and(|quiet| evaluations >= self.last_lower.saturating_add(quiet)) {
            return Some(Ending::Quiet);
        }
        self.settings.max_evaluations.is_some_and(|most| evaluations >= most).then_some(Ending::Evaluations)
    }

    /// Whether the lower end of the survey's coverage has reached a share. Worked out anew only when the survey has grown by a
    /// part, since it takes a walk through the ledger.
    fn survey_covers(&mut self, share: f64) -> bool {
        let descents = self.schedule().descents()[Heuristic::Survey.number()];
        if descents < self.next_coverage {
            return false;
        }
        self.next_coverage = descents + (descents / COVERAGE_GROWTH).max(1);
        let pairs: Vec<(u64, u64)> = self.ledger.frequencies(Heuristic::Survey.number()).into_iter().collect();
        let met = Frequencies::from_pairs(&pairs, 0, Unconverged::SetAside);
        let covered = met.ok().and_then(|met| coverage(&met, Confidence::NINETY_FIVE));
        covered.is_some_and(|covered| covered.interval.low >= share)
    }

    /// What a result means to the ledger as it is now.
    fn decide(&mut self, result: TaskResult) -> TaskRecord {
        let (heuristic, found) = match result.finding {
            Finding::Met { heuristic, candidate, .. } => {
                let before = self.ledger.lowest_entry().and_then(|entry| self.scene(result.round).place(entry));
                let lower = before.is_none_or(|before| before.is_above(candidate.value));
                let same = self.ledger.recognise(&candidate);
                let kinked = candidate.kinked;
                let found = if same.is_empty() {
                    Found::New { value: candidate.value, at: candidate.at, kinked, lower }
                } else {
                    Found::Known { same, kinked, lower }
                };
                (Some(heuristic), found)
            }
            Finding::Lost { heuristic, reason, .. } => (Some(heuristic), Found::Lost(reason)),
            Finding::Confirmed { confirmed, saddles, .. } => (None, Found::Confirmed { confirmed, saddles }),
            Finding::Dismissed { .. } => (None, Found::Dismissed),
        };
        TaskRecord {
            evaluations: result.evaluations,
            outside: result.outside,
            first_outside: result.first_outside.filter(|_| self.troubles.first_outside.is_none()),
            fillings: result.fillings,
            heuristic,
            found,
        }
    }

    /// Changes the state by what came of a task; `false` where it cannot have come of it.
    fn apply(&mut self, round: u64, number: u64, purport: Purport, task: &TaskRecord) -> bool {
        self.troubles.outside += task.outside;
        if self.troubles.first_outside.is_none() {
            self.troubles.first_outside.clone_from(&task.first_outside);
        }
        self.portfolio.count_fillings(task.fillings);
        match (purport, &task.found) {
            (Purport::Descend(heuristic, mark), found) => {
                let evaluation = self.evaluations() + task.evaluations;
                let meeting = Meeting { heuristic: heuristic.number(), round, task: number, evaluation };
                let (entry, worth) = match found {
                    Found::New { value, at, kinked, lower } => {
                        self.note_arrival(heuristic, true, *lower, evaluation);
                        let candidate = Candidate::new(self.ledger.identity(), *value, at.clone(), *kinked);
                        let entry = self.ledger.admit(candidate, meeting);
                        self.met.push(entry);
                        (Some(entry), self.worth(entry))
                    }
                    Found::Known { same, kinked, lower } => {
                        self.note_arrival(heuristic, false, *lower, evaluation);
                        let Some(entry) = self.ledger.count(same, *kinked, meeting) else { return false };
                        (Some(entry), 0.0)
                    }
                    Found::Lost(reason) => {
                        self.troubles.count(*reason);
                        (None, 0.0)
                    }
                    Found::Confirmed { .. } | Found::Dismissed => return false,
                };
                self.arrive(heuristic, mark, entry, worth, &(round, number), task.evaluations);
            }
            (Purport::Confirm(entry), Found::Confirmed { confirmed, saddles }) => {
                self.confirming += task.evaluations;
                self.asked_to_confirm.remove(&entry);
                self.troubles.saddles += saddles;
                self.troubles.flat += u64::from(confirmed.is_flat());
                self.ledger.confirm(entry, confirmed.clone());
            }
            (Purport::Confirm(entry), Found::Dismissed) => {
                self.confirming += task.evaluations;
                self.asked_to_confirm.remove(&entry);
                self.troubles.not_confirmed += 1;
                self.ledger.dismiss(entry);
            }
            (Purport::Confirm(_), _) => return false,
        }
        true
    }

    /// Follows how much of what is met is new, and when a lower value last came.
    fn note_arrival(&mut self, heuristic: Heuristic, new: bool, lower: bool, evaluation: u64) {
        if lower {
            self.last_lower = evaluation;
            self.last_lower_descents = self.schedule().descents().iter().sum();
        }
        if matches!(heuristic, Heuristic::Survey | Heuristic::Multistart) {
            self.known_share += (f64::from(u8::from(!new)) - self.known_share) / FOLLOWED;
        }
    }

    fn arrive(
        &mut self,
        heuristic: Heuristic,
        mark: u64,
        entry: Option<EntryId>,
        worth: f64,
        &(round, number): &(u64, u64),
        evaluations: u64,
    ) {
        let mut rng = stream(self.settings.seed, round, number + 1, Purpose::Round);
        let scene = Scene { structure: &self.structure, ledger: &self.ledger, met: &self.met, round };
        let place: Option<Place> = entry.and_then(|entry| scene.place(entry));
        self.portfolio.arrive(heuristic, &scene, Arrival { mark, place, evaluations, worth }, &mut rng);
    }

    fn scene(&self, round: u64) -> Scene<'_> {
        Scene { structure: &self.structure, ledger: &self.ledger, met: &self.met, round }
    }

    /// What a new entry is worth to the heuristic that met it.
    fn worth(&self, entry: EntryId) -> f64 {
        let Some(value) = self.ledger.entry(entry).map(|entry| entry.value()) else { return 0.0 };
        let lower = self.ledger.entries().take(RANKED).take_while(|other| other.value() < value).count();
        let rank = match lower {
            0 => return WORTH_LOWEST,
            RANKED => self.ledger.len() as f64,
            lower => (1 + lower) as f64,
        };
        // Where uniform starts meet hardly anything new, and nothing lower has come for long, a new minimum is worth as much
        // wherever it lies: the hunt turns to listing. In a landscape without end it never does.
        let descents: u64 = self.schedule().descents().iter().sum();
        let quiet = (descents - self.last_lower_descents) as f64;
        let known = self.known_share * self.known_share;
        let flatness = known * known * quiet / (quiet + LISTING);
        functions::real_power(rank, flatness - 1.0)
    }

    /// Confirmations of the lowest entries that still wait, `most` at most: the closing of a hunt.
    pub fn draw_closing(&mut self, round: u64, most: usize) -> Vec<Task> {
        let waiting: Vec<EntryId> = self.ledger.unconfirmed(most);
        let points = waiting.into_iter().filter_map(|entry| Some((entry, self.ledger.point(entry)?)));
        let work = points.map(|(entry, at)| Work::Confirm { entry, at }).collect();
        self.tasks(round, 0, work)
    }

    /// Evaluations so far, confirmations included.
    pub fn evaluations(&self) -> u64 {
        self.schedule().spent().iter().sum::<u64>() + self.confirming
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
        self.portfolio.schedule()
    }

    /// The ways inside heuristics with their shares.
    pub fn ways(&self) -> Vec<(Heuristic, &'static str, f64)> {
        self.portfolio.ways()
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
        let descents: u64 = self.schedule().descents().iter().sum();
        let unled = |&(heuristic, _): &(Heuristic, f64)| heuristic == Heuristic::Multistart;
        let first = if self.settings.mix.members().iter().all(unled) { UNLED_ROUND } else { FIRST_ROUND };
        (first + GROWTH * descents as f64).min(LARGEST_ROUND) as usize
    }

    fn draw_given(&mut self, size: usize, work: &mut Vec<Work>) {
        while self.given_drawn < self.settings.given.len() && work.len() < size {
            let point = Proposal::Point(self.settings.given[self.given_drawn].clone().into());
            self.given_drawn += 1;
            self.portfolio.begin_given();
            work.push(Work::Descend {
                heuristic: Heuristic::Given,
                proposal: point,
                mark: 0,
                fill: false,
                ceiling: f64::INFINITY,
            });
        }
    }

    /// Confirmations of the lowest entries that wait, as far as their share of the evaluations goes.
    fn draw_confirmations(&mut self, work: &mut Vec<Work>) {
        let cost = self.structure.n_unknowns() as f64;
        let under_way = self.asked_to_confirm.len();
        let allowed = CONFIRMING_SHARE * self.evaluations() as f64 - self.confirming as f64 - under_way as f64 * cost;
        let most = (allowed / cost).max(0.0) as usize;
        for entry in self.ledger.unconfirmed(most + under_way) {
            if self.asked_to_confirm.contains(&entry) {
                continue;
            }
            let Some(at) = self.ledger.point(entry) else { continue };
            self.asked_to_confirm.insert(entry);
            work.push(Work::Confirm { entry, at });
        }
    }
}
