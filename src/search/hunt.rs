//! One whole search: rounds drawn, worked on by a crew, merged, until something says stop.

use std::sync::Arc;

use rayon::ThreadPoolBuilder;

use crate::base::random::{Purpose, stream};
use crate::descent::Region;
use crate::evaluate::Evaluator;
use crate::kernel::Kernel;
use crate::landscape::Landscape;
use crate::ledger::Identity;

use super::crew::{Gathered, Gathering, Queue};
use super::outcome::{Ending, HuntError, NoPast, Observer, Outcome, Past, RoundReport, Verdict};
use super::record::RoundRecord;
use super::settings::Settings;
use super::start;
use super::state::Hunt;
use super::structure::Structure;
use super::task::{Task, TaskResult};
use super::worker::{Worker, Workshop};

/// The most entries that the closing of a hunt confirms, the lowest first.
const MOST_CLOSED: usize = 2000;

/// Rounds in flight at once.
const IN_FLIGHT: u64 = 2;

/// Hunts on a landscape until the settings or the observer say stop.
///
/// `threads` changes how long it takes and nothing else. The hunt ends after a whole round; then the lowest entries
/// that were not confirmed yet are.
///
/// # Errors
/// [`HuntError`] where threads cannot be started or a worker failed.
pub fn hunt(
    landscape: &Landscape,
    kernel: &Arc<Kernel>,
    settings: &Settings,
    threads: usize,
    observer: &mut dyn Observer,
) -> Result<Outcome, HuntError> {
    resume(landscape, kernel, settings, threads, observer, &mut NoPast)
}

/// Goes on with a hunt whose first rounds were recorded: the result is that of a hunt that was never interrupted.
///
/// The recorded rounds are drawn as they were and not worked on. What was asked for ends the hunt after the last of them
/// or later, so that nothing found is dropped by a smaller budget.
///
/// # Errors
/// As [`hunt`]; [`HuntError::Past`] where the records are not those of this hunt.
pub fn resume(
    landscape: &Landscape,
    kernel: &Arc<Kernel>,
    settings: &Settings,
    threads: usize,
    observer: &mut dyn Observer,
    past: &mut dyn Past,
) -> Result<Outcome, HuntError> {
    let shop = Workshop {
        kernel: kernel.clone(),
        structure: Arc::new(Structure::new(landscape)),
        region: Arc::new(Region::new(&landscape.slots, &landscape.symmetries)),
        identity: Arc::new(Identity::new(&landscape.slots, &landscape.symmetries)),
        seed: settings.seed,
        kinked: landscape.kinked,
    };
    let threads = threads.max(1);
    let pool = ThreadPoolBuilder::new()
        .num_threads(threads)
        .thread_name(|number| format!("hunt-{number}"))
        .build()
        .map_err(|error| HuntError::Threads(error.to_string()))?;
    let queue = Queue::new(threads);
    let (sender, mut gathering) = Gathering::new();
    let mut state = Hunt::new(settings.clone(), shop.structure.clone(), shop.identity.clone(), value_scale(&shop));
    let mut ended = Err(HuntError::Worker);
    pool.in_place_scope(|scope| {
        for _ in 0..threads {
            let sender = sender.clone();
            let (queue, shop) = (&queue, &shop);
            scope.spawn(move |_| Worker::new(shop).work(queue, &sender));
        }
        drop(sender);
        let mut crew = Crew { queue: &queue, gathering: &mut gathering };
        ended = crew.run(&mut state, observer, past);
        queue.close();
    });
    let ending = ended?;
    Ok(Outcome {
        rounds: state.rounds_merged(),
        evaluations: state.evaluations(),
        by_heuristic: state.schedule().spent(),
        confirming: state.confirming(),
        descents: state.schedule().descents(),
        troubles: state.troubles().clone(),
        ending,
        ledger: state.into_ledger(),
    })
}

/// Points at which the size of ordinary values is read.
const SCALE_POINTS: u64 = 32;

/// The size of ordinary values: the least of a few random points, since walls make others huge.
fn value_scale(shop: &Workshop) -> f64 {
    let mut evaluator = Evaluator::new(&shop.kernel);
    let sizes = (0..SCALE_POINTS).filter_map(|number| {
        let at = start::uniform(&shop.structure, &mut stream(shop.seed, 0, number, Purpose::Check));
        let value = evaluator.value_and_gradient(&at).0;
        (value.is_finite() && value != 0.0).then_some(value.abs())
    });
    sizes.fold(f64::INFINITY, f64::min)
}

struct Crew<'a> {
    queue: &'a Queue,
    gathering: &'a mut Gathering,
}

impl Crew<'_> {
    fn run(&mut self, state: &mut Hunt, observer: &mut dyn Observer, past: &mut dyn Past) -> Result<Ending, HuntError> {
        let n_past = past.rounds();
        for round in 0..IN_FLIGHT {
            self.draw(round, state, n_past);
        }
        let mut ended = None;
        for round in 0..n_past {
            let recorded = past.next().ok_or(HuntError::Past(round))?;
            if !state.replay(round, &recorded.record)
                || (state.evaluations(), state.ledger().len() as u64) != (recorded.evaluations, recorded.distinct)
            {
                return Err(HuntError::Past(round));
            }
            ended = state.ending();
            if observer.replayed(&report(round, &recorded.record, state)) == Verdict::Stop {
                return Err(HuntError::GivenUp);
            }
            self.draw(round + IN_FLIGHT, state, n_past);
        }
        let mut round = n_past;
        let ending = loop {
            if let Some(ending) = ended {
                break ending;
            }
            let Some(results) = self.wait(round, observer)? else { break Ending::Observer };
            let record = state.merge(round, results);
            ended = state.ending();
            if observer.round(&report(round, &record, state)) == Verdict::Stop && ended.is_none() {
                break Ending::Observer;
            }
            if ended.is_none() {
                self.draw(round + IN_FLIGHT, state, n_past);
            }
            round += 1;
        };
        // What is in flight is dropped, not merged: a hunt that goes on later draws the same rounds again.
        self.queue.clear();
        self.close(state)?;
        Ok(ending)
    }

    /// Confirms the lowest entries that still wait.
    fn close(&mut self, state: &mut Hunt) -> Result<(), HuntError> {
        // A round number that no round in flight has.
        let round = state.rounds_merged() + 2 * IN_FLIGHT;
        let tasks = state.draw_closing(round, MOST_CLOSED);
        self.send(round, tasks);
        let results = loop {
            match self.gathering.wait(round) {
                Gathered::Whole(results) => break results,
                // Being asked to stop again changes nothing: the closing is short.
                Gathered::Waiting => {}
                Gathered::Lost => return Err(HuntError::Worker),
            }
        };
        state.merge_closing(round, results);
        Ok(())
    }

    /// Draws a round, and sends it to be worked on unless its outcome is recorded.
    fn draw(&mut self, round: u64, state: &mut Hunt, n_past: u64) {
        let tasks = state.draw(round);
        if round >= n_past {
            self.send(round, tasks);
        }
    }

    fn send(&mut self, round: u64, tasks: Vec<Task>) {
        self.gathering.expect(round, tasks.len());
        self.queue.add(tasks);
    }

    /// The results of a round; `None` when the observer will not wait for them.
    fn wait(&mut self, round: u64, observer: &mut dyn Observer) -> Result<Option<Vec<TaskResult>>, HuntError> {
        loop {
            match self.gathering.wait(round) {
                Gathered::Whole(results) => return Ok(Some(results)),
                Gathered::Waiting if observer.idle() == Verdict::Stop => return Ok(None),
                Gathered::Waiting => {}
                Gathered::Lost => return Err(HuntError::Worker),
            }
        }
    }
}

fn report<'a>(round: u64, record: &'a RoundRecord, state: &'a Hunt) -> RoundReport<'a> {
    RoundReport {
        round,
        record,
        evaluations: state.evaluations(),
        by_heuristic: state.schedule().spent(),
        confirming: state.confirming(),
        descents: state.schedule().descents(),
        shares: state.schedule().shares(),
        ways: state.ways(),
        ledger: state.ledger(),
        troubles: state.troubles(),
    }
}
