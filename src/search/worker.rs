//! One thread at work: many tasks in lanes at once.

use std::sync::Arc;
use std::sync::mpsc::Sender;

use crate::descent::{Ask, Confirmation, Descent, End, EndKind, Judgement, Progress, Region};
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
    benches: Vec<Bench>,
    gradient: Vec<f64>,
}

/// A place for one task.
struct Bench {
    descent: Descent,
    job: Option<Job>,
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
        let benches = (0..LANES)
            .map(|_| Bench { descent: Descent::new(&shop.region, shop.most_evaluations()), job: None })
            .collect();
        let gradient = vec![0.0; shop.structure.n_unknowns()];
        Worker { shop, evaluator: Evaluator::new(&shop.kernel), benches, gradient }
    }

    /// Works until the queue is closed and empty, or nobody listens.
    pub fn work(&mut self, queue: &Queue, results: &Sender<TaskResult>) {
        let mut taken = Vec::new();
        loop {
            let n_idle = self.benches.iter().filter(|bench| bench.job.is_none()).count();
            if n_idle > 0 {
                let clearings = queue.take(n_idle, n_idle == LANES, &mut taken);
                for task in taken.drain(..) {
                    self.begin(task, clearings);
                }
            }
            let clearings = queue.clearings();
            for bench in &mut self.benches {
                bench.job.take_if(|job| job.clearings < clearings);
            }
            if self.benches.iter().all(|bench| bench.job.is_none()) {
                if queue.is_done() {
                    return;
                }
                continue;
            }
            self.advance();
            for place in 0..self.benches.len() {
                if let Some(result) = self.harvest(place)
                    && results.send(result).is_err()
                {
                    return;
                }
            }
        }
    }

    fn begin(&mut self, task: Task, clearings: u64) {
        let Some(bench) = self.benches.iter_mut().find(|bench| bench.job.is_none()) else { return };
        let shop = self.shop;
        let mut stage = Stage::None;
        let confirmation = match &task.work {
            Work::Confirm { at, .. } => Some(Confirmation::new(&shop.region, at)),
            Work::Descend { heuristic, proposal, .. } => {
                match start::begin(&shop.structure, shop.seed, &task, *heuristic, proposal) {
                    Beginning::Descent(start) => bench.descent.start(&start),
                    Beginning::Chain(chain) => stage = Stage::Chain(chain),
                }
                None
            }
        };
        bench.job = Some(Job {
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

    /// One evaluation, or one matrix, for every task in hand.
    fn advance(&mut self) {
        let shop = self.shop;
        let mut asked: Vec<usize> = Vec::with_capacity(LANES);
        for (place, bench) in self.benches.iter_mut().enumerate() {
            let Some(job) = &mut bench.job else { continue };
            let Some(confirmation) = &mut job.confirmation else {
                asked.push(place);
                continue;
            };
            if confirmation.judgement().is_some() {
                continue;
            }
            match confirmation.ask() {
                Ask::Gradient(_) => asked.push(place),
                Ask::Curvature(at) => {
                    let matrix = self.evaluator.curvature(at);
                    // A matrix takes one pass for each unknown.
                    job.evaluations += at.len() as u64;
                    confirmation.tell_curvature(&matrix);
                }
            }
        }
        if asked.is_empty() {
            return;
        }
        let benches = &self.benches;
        let point = |k: usize| {
            let bench: &Bench = &benches[asked[k]];
            match bench.job.as_ref().map(|job| &job.stage) {
                Some(Stage::Chain(chain)) => return chain.ask(),
                Some(Stage::Filling(filling)) => return filling.ask(),
                _ => {}
            }
            match bench.job.as_ref().and_then(|job| job.confirmation.as_ref()).map(Confirmation::ask) {
                Some(Ask::Gradient(at)) => at,
                _ => bench.descent.ask(),
            }
        };
        self.evaluator.evaluate(asked.len(), point);
        for (k, &place) in asked.iter().enumerate() {
            let value = self.evaluator.value(k);
            self.evaluator.read_gradient(k, &mut self.gradient);
            let bench = &mut self.benches[place];
            let Some(job) = &mut bench.job else { continue };
            job.evaluations += 1;
            if !value.is_finite() {
                job.outside += 1;
                if job.first_outside.is_none() {
                    let at = match &job.stage {
                        Stage::Chain(chain) => chain.ask(),
                        Stage::Filling(filling) => filling.ask(),
                        Stage::None => bench.descent.ask(),
                    };
                    job.first_outside = Some(at.to_vec());
                }
            }
            if job.tell_stage(value, &mut bench.descent, shop) {
                continue;
            }
            match &mut job.confirmation {
                Some(confirmation) => confirmation.tell_gradient(value, &self.gradient),
                None => {
                    if bench.descent.tell(value, &self.gradient) == Progress::Ended {
                        job.descent_ended(&mut bench.descent, shop);
                    } else if let Work::Descend { ceiling, .. } = job.task.work {
                        job.abandoned = bench.descent.outlook() > ceiling;
                    }
                }
            }
        }
    }

    /// The result of a bench whose task has ended.
    fn harvest(&mut self, place: usize) -> Option<TaskResult> {
        let shop = self.shop;
        let bench = &mut self.benches[place];
        let job = bench.job.as_mut()?;
        let finding = match (&job.task.work, &job.confirmation) {
            (Work::Descend { heuristic, mark, .. }, _) => {
                let (heuristic, mark) = (*heuristic, *mark);
                if !matches!(job.stage, Stage::None) || !(job.abandoned || bench.descent.has_ended()) {
                    return None;
                }
                let end = job.best.take().unwrap_or_else(|| bench.descent.end());
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
                if !bench.descent.has_ended() {
                    return None;
                }
                let end = bench.descent.end();
                if end.kind == EndKind::Converged && job.saddles <= MOST_SADDLES {
                    job.confirmation = Some(Confirmation::new(&shop.region, &end.at));
                    return None;
                }
                Finding::Dismissed { entry: job.entry()? }
            }
            (Work::Confirm { entry, .. }, Some(confirmation)) => match confirmation.judgement()? {
                Judgement::Failed => Finding::Dismissed { entry: *entry },
                Judgement::Saddle { escape } => {
                    job.saddles += 1;
                    bench.descent.start(escape);
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
        let job = bench.job.take()?;
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

impl Job {
    fn entry(&self) -> Option<crate::ledger::EntryId> {
        match self.task.work {
            Work::Confirm { entry, .. } => Some(entry),
            Work::Descend { .. } => None,
        }
    }

    /// A value for a chain or a filling, if there is one; their ends start a descent.
    fn tell_stage(&mut self, value: f64, descent: &mut Descent, shop: &Workshop) -> bool {
        match &mut self.stage {
            Stage::None => return false,
            Stage::Chain(chain) => {
                chain.tell(&shop.structure, value);
                if chain.has_ended() {
                    descent.start(chain.result());
                    self.stage = Stage::None;
                }
            }
            Stage::Filling(filling) => {
                filling.tell(value);
                if filling.has_ended() {
                    if let Some(at) = filling.result() {
                        self.fillings.1 += 1;
                        descent.start(at);
                    }
                    self.stage = Stage::None;
                }
            }
        }
        true
    }

    /// A cloud that drifted against its box is put back into the middle, and goes on; then its empty places are filled.
    fn descent_ended(&mut self, descent: &mut Descent, shop: &Workshop) {
        let end = descent.end();
        if end.kind == EndKind::Converged
            && self.recentrings < MOST_RECENTRINGS
            && let Some(moved) = shop.region.recentre(&end.at)
        {
            self.recentrings += 1;
            descent.start(&moved);
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
