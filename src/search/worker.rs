//! One thread at work: many tasks in lanes at once.

use std::sync::Arc;
use std::sync::mpsc::Sender;

use crate::descent::{Ask, Confirmation, Descents, End, EndKind, Judgement, Region};
use crate::evaluate::Evaluator;
use crate::kernel::Kernel;
use crate::ledger::{Candidate, Confirmed, Identity, Kind};

use super::anneal::Annealing;
use super::crew::Queue;
use super::moves::Filling;
use super::start::{self, Beginning};
use super::structure::Structure;
use super::task::{Finding, Lost, Task, TaskResult, Work};

/// Tasks that a worker has in hand at once.
const LANES: usize = 32;

/// Lanes of the narrowest machine that descents can read.
const LEAST_LANES: usize = 8;

/// Results held back at most while there is work.
const MOST_HELD: usize = 8;

/// Times that a cloud at its bounds is brought back to the middle within one descent.
const MOST_RECENTRINGS: u32 = 3;

/// Times that empty places are filled within one task.
const MOST_FILLINGS: u32 = 6;

/// Saddles that one confirmation may leave.
const MOST_SADDLES: u64 = 8;

/// What all workers of a hunt share.
pub struct Workshop {
    /// The compiled landscape.
    pub kernel: Arc<Kernel>,
    /// What moves know.
    pub structure: Arc<Structure>,
    /// What descents know.
    pub region: Arc<Region>,
    /// What makes two points the same.
    pub identity: Arc<Identity>,
    /// The seed of the hunt.
    pub seed: u64,
    /// Whether the landscape has kinks, where a descent may end without a vanishing gradient.
    pub kinked: bool,
}

impl Workshop {
    /// Evaluations of one descent at most.
    fn most_evaluations(&self) -> u64 {
        3000 + 100 * self.structure.n_unknowns() as u64
    }
}

/// A worker.
pub struct Worker<'a> {
    shop: &'a Workshop,
    evaluator: Evaluator,
    /// The descent of each place.
    descents: Descents,
    /// The task of each place.
    jobs: Vec<Option<Job>>,
    /// How often the queue had been cleared when last looked at.
    clearings: u64,
    gradient: Vec<f64>,
}

/// A task in hand.
struct Job {
    task: Task,
    /// How often the queue had been cleared when the task was taken.
    clearings: u64,
    evaluations: u64,
    outside: u64,
    first_outside: Option<Vec<f64>>,
    recentrings: u32,
    saddles: u64,
    /// What asks for values instead of the descent.
    stage: Stage,
    /// Fillings tried, and those that moved a point.
    fillings: (u32, u32),
    /// Nothing below the ceiling is in sight.
    abandoned: bool,
    /// The lower end of the descents so far, where a filling led to another.
    best: Option<End>,
    /// The confirmation under way; `None` while the descent is.
    confirmation: Option<Confirmation>,
}

/// What a task does besides descending: it asks for values only.
enum Stage {
    /// Nothing.
    None,
    /// It anneals before the descent.
    Chain(Box<Annealing>),
    /// It fills empty places after a descent.
    Filling(Box<Filling>),
}

impl<'a> Worker<'a> {
    /// A worker in a workshop.
    pub fn new(shop: &'a Workshop) -> Self {
        Worker {
            shop,
            evaluator: Evaluator::new(&shop.kernel),
            descents: Descents::new(&shop.region, LANES, shop.most_evaluations()),
            jobs: (0..LANES).map(|_| None).collect(),
            clearings: 0,
            gradient: vec![0.0; shop.structure.n_unknowns()],
        }
    }

    /// Works until the queue is closed and empty, or nobody listens.
    pub fn work(&mut self, queue: &Queue, results: &Sender<TaskResult>) {
        let mut taken = Vec::new();
        let mut finished = Vec::new();
        let mut n_busy = 0;
        loop {
            if n_busy < LANES {
                if n_busy == 0 && !send(&mut finished, results) {
                    return;
                }
                let clearings = queue.take(LANES - n_busy, n_busy == 0, &mut taken);
                n_busy += taken.len();
                for task in taken.drain(..) {
                    self.begin(task, clearings);
                }
                // A result wakes the thread that merges, which costs more than a hundred evaluations of a small
                // landscape; but nothing is held back while that thread may have to draw up more.
                if (n_busy < LANES || finished.len() >= MOST_HELD) && !send(&mut finished, results) {
                    return;
                }
            }
            let clearings = queue.clearings();
            if clearings != self.clearings {
                self.clearings = clearings;
                n_busy -= self.drop_cleared();
            }
            if n_busy == 0 {
                if queue.is_done() {
                    return;
                }
                continue;
            }
            self.draw_together(n_busy);
            let n_over = self.advance();
            if n_over > 0 {
                let before = finished.len();
                finished.extend((0..LANES).filter_map(|place| self.harvest(place)));
                n_busy -= finished.len() - before;
            }
        }
    }

    /// Moves what is left of a batch to the front, so that a narrow machine serves it.
    fn draw_together(&mut self, n_busy: usize) {
        let width = if n_busy <= LEAST_LANES { LEAST_LANES } else { LANES / 2 };
        if n_busy > width {
            return;
        }
        for place in width..LANES {
            if self.jobs[place].is_some()
                && let Some(free) = self.jobs[..width].iter().position(Option::is_none)
            {
                self.jobs.swap(place, free);
                self.descents.shift(place, free);
            }
        }
    }

    /// Drops the tasks that were taken before the queue was last cleared; says how many.
    fn drop_cleared(&mut self) -> usize {
        let mut n_dropped = 0;
        for (place, job) in self.jobs.iter_mut().enumerate() {
            if job.take_if(|job| job.clearings < self.clearings).is_some() {
                self.descents.leave(place);
                n_dropped += 1;
            }
        }
        n_dropped
    }

    fn begin(&mut self, task: Task, clearings: u64) {
        let Some(place) = self.jobs.iter().position(Option::is_none) else { return };
        let shop = self.shop;
        let mut stage = Stage::None;
        let confirmation = match &task.work {
            Work::Confirm { at, .. } => Some(Confirmation::new(&shop.region, at)),
            Work::Descend { heuristic, proposal, .. } => {
                match start::begin(&shop.structure, shop.seed, &task, *heuristic, proposal) {
                    Beginning::Descent(start) => self.descents.start(place, &start),
                    Beginning::Chain(chain) => stage = Stage::Chain(chain),
                }
                None
            }
        };
        self.jobs[place] = Some(Job {
            task,
            clearings,
            evaluations: 0,
            outside: 0,
            first_outside: None,
            recentrings: 0,
            saddles: 0,
            stage,
            fillings: (0, 0),
            abandoned: false,
            best: None,
            confirmation,
        });
    }

    /// One evaluation, or one matrix, for every task in hand; says how many wait to be harvested.
    fn advance(&mut self) -> usize {
        // Tasks that ask by themselves.
        let mut n_asking = 0;
        let mut n_lanes = LEAST_LANES;
        for (place, job) in self.jobs.iter_mut().enumerate() {
            let Some(job) = job else { continue };
            // Free places are taken from the front, so a narrow machine serves while there is little to do.
            n_lanes = n_lanes.max(place + 1);
            n_asking += usize::from(!matches!(job.stage, Stage::None));
            let Some(confirmation) = &mut job.confirmation else { continue };
            n_asking += 1;
            if let Ask::Curvature(at) = confirmation.ask() {
                let matrix = self.evaluator.curvature(at);
                // A matrix takes one pass for each unknown.
                job.evaluations += at.len() as u64;
                confirmation.tell_curvature(&matrix);
            }
        }
        self.evaluator.prepare(n_lanes);
        self.descents.ask(self.evaluator.points_mut());
        if n_asking > 0 {
            for (place, job) in self.jobs.iter().enumerate() {
                if let Some(at) = job.as_ref().and_then(Job::asks) {
                    self.evaluator.put(place, at);
                }
            }
        }
        self.evaluator.run();
        let evaluator = &self.evaluator;
        self.descents.tell(evaluator.points(), evaluator.values(), evaluator.gradients());
        let mut n_over = 0;
        for (place, (job, &value)) in self.jobs.iter_mut().zip(evaluator.values()).enumerate() {
            let Some(job) = job else { continue };
            // Not where it is judged, or its turn for a matrix comes.
            if job.confirmation.is_none() || job.asks().is_some() {
                job.evaluations += 1;
                if !value.is_finite() {
                    job.outside += 1;
                    job.first_outside.get_or_insert_with(|| evaluator.point(place));
                }
                if !job.tell_stage(value, &mut self.descents, place, self.shop) {
                    match &mut job.confirmation {
                        Some(confirmation) => {
                            evaluator.read_gradient(place, &mut self.gradient);
                            confirmation.tell_gradient(value, &self.gradient);
                        }
                        None if self.descents.has_ended(place) => {
                            job.descent_ended(&mut self.descents, place, self.shop);
                        }
                        None => {
                            if let Work::Descend { ceiling, .. } = job.task.work {
                                job.abandoned = self.descents.outlook(place) > ceiling;
                            }
                        }
                    }
                }
            }
            n_over += usize::from(job.is_over(&self.descents, place));
        }
        n_over
    }

    /// The result of a place whose task has ended.
    fn harvest(&mut self, place: usize) -> Option<TaskResult> {
        let shop = self.shop;
        let job = self.jobs[place].as_mut()?;
        let finding = match (&job.task.work, &job.confirmation) {
            (Work::Descend { heuristic, mark, .. }, _) => {
                let (heuristic, mark) = (*heuristic, *mark);
                if !matches!(job.stage, Stage::None) || !(job.abandoned || self.descents.has_ended(place)) {
                    return None;
                }
                let end = job.best.take().unwrap_or_else(|| self.descents.end(place));
                let met = |kinked| {
                    let candidate = Candidate::new(&shop.identity, end.value, end.at.clone().into(), kinked);
                    Finding::Met { heuristic, mark, candidate }
                };
                match end.kind {
                    EndKind::OutOfBudget if job.abandoned => Finding::Lost { heuristic, mark, reason: Lost::Abandoned },
                    EndKind::Converged => met(false),
                    EndKind::Stalled if shop.kinked => met(true),
                    EndKind::Stalled => Finding::Lost { heuristic, mark, reason: Lost::Stalled },
                    EndKind::Outside => Finding::Lost { heuristic, mark, reason: Lost::Outside },
                    EndKind::OutOfBudget => Finding::Lost { heuristic, mark, reason: Lost::OutOfBudget },
                }
            }
            (Work::Confirm { .. }, None) => {
                // The descent away from a saddle is under way.
                if !self.descents.has_ended(place) {
                    return None;
                }
                let end = self.descents.end(place);
                if end.kind == EndKind::Converged && job.saddles <= MOST_SADDLES {
                    job.confirmation = Some(Confirmation::new(&shop.region, &end.at));
                    self.descents.leave(place);
                    return None;
                }
                Finding::Dismissed { entry: job.entry()? }
            }
            (Work::Confirm { entry, .. }, Some(confirmation)) => match confirmation.judgement()? {
                Judgement::Failed => Finding::Dismissed { entry: *entry },
                Judgement::Saddle { escape } => {
                    job.saddles += 1;
                    self.descents.start(place, escape);
                    job.confirmation = None;
                    return None;
                }
                Judgement::Minimum { value, at, stiffness, residual, active, flat } => {
                    let kind = match (flat, active.is_empty()) {
                        (true, _) => Kind::Flat,
                        (false, true) => Kind::Interior,
                        (false, false) => Kind::Bound,
                    };
                    let confirmed = Confirmed {
                        kind,
                        value: *value,
                        at: at.clone().into(),
                        stiffness: stiffness.clone(),
                        residual: *residual,
                        active: active.clone(),
                    };
                    Finding::Confirmed { entry: *entry, confirmed, saddles: job.saddles }
                }
            },
        };
        let job = self.jobs[place].take()?;
        self.descents.leave(place);
        Some(TaskResult {
            round: job.task.round,
            number: job.task.number,
            evaluations: job.evaluations,
            outside: job.outside,
            first_outside: job.first_outside,
            fillings: job.fillings,
            finding,
        })
    }
}

/// Sends all results; `false` when nobody listens.
fn send(finished: &mut Vec<TaskResult>, results: &Sender<TaskResult>) -> bool {
    finished.drain(..).all(|result| results.send(result).is_ok())
}

impl Job {
    /// The point that it asks for by itself; none while a descent is under way, or a matrix is wanted.
    fn asks(&self) -> Option<&[f64]> {
        match &self.stage {
            Stage::Chain(chain) => return Some(chain.ask()),
            Stage::Filling(filling) => return Some(filling.ask()),
            Stage::None => {}
        }
        match self.confirmation.as_ref().filter(|confirmation| confirmation.judgement().is_none())?.ask() {
            Ask::Gradient(at) => Some(at),
            Ask::Curvature(_) => None,
        }
    }

    /// Whether there is something to harvest.
    fn is_over(&self, descents: &Descents, place: usize) -> bool {
        match &self.confirmation {
            Some(confirmation) => confirmation.judgement().is_some(),
            None => matches!(self.stage, Stage::None) && (self.abandoned || descents.has_ended(place)),
        }
    }

    fn entry(&self) -> Option<crate::ledger::EntryId> {
        match self.task.work {
            Work::Confirm { entry, .. } => Some(entry),
            Work::Descend { .. } => None,
        }
    }

    /// A value for a chain or a filling, if there is one; their ends start a descent.
    fn tell_stage(&mut self, value: f64, descents: &mut Descents, place: usize, shop: &Workshop) -> bool {
        match &mut self.stage {
            Stage::None => return false,
            Stage::Chain(chain) => {
                chain.tell(&shop.structure, value);
                if chain.has_ended() {
                    descents.start(place, chain.result());
                    self.stage = Stage::None;
                }
            }
            Stage::Filling(filling) => {
                filling.tell(value);
                if filling.has_ended() {
                    if let Some(at) = filling.result() {
                        self.fillings.1 += 1;
                        descents.start(place, at);
                    }
                    self.stage = Stage::None;
                }
            }
        }
        true
    }

    /// A cloud that drifted against its box is put back into the middle, and goes on; then its empty places are filled.
    fn descent_ended(&mut self, descents: &mut Descents, place: usize, shop: &Workshop) {
        let end = descents.end(place);
        if end.kind == EndKind::Converged
            && self.recentrings < MOST_RECENTRINGS
            && let Some(moved) = shop.region.recentre(&end.at)
        {
            self.recentrings += 1;
            descents.start(place, &moved);
            return;
        }
        let Work::Descend { fill: true, .. } = self.task.work else { return };
        let lower = end.kind == EndKind::Converged && self.best.as_ref().is_none_or(|best| end.value < best.value);
        if lower
            && self.fillings.0 < MOST_FILLINGS
            && let Some(filling) = Filling::new(&shop.structure, &end.at, end.value)
        {
            self.fillings.0 += 1;
            self.stage = Stage::Filling(Box::new(filling));
        }
        if lower || self.best.is_none() {
            self.best = Some(end);
        }
    }
}
