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
use super::outcome::{Ending, HuntError, Observer, Outcome, RoundReport, Verdict};
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
        ended = crew.run(&mut state, observer);
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
    fn run(&mut self, state: &mut Hunt, observer: &mut dyn Observer) -> Result<Ending, HuntError> {
        for round in 0..IN_FLIGHT {
            self.send(round, state.draw(round));
        }
        let mut round = 0;
        let ending = loop {
            let Some(results) = self.wait(round, observer)? else { break Ending::Observer };
            if let Some(ending) = state.merge(results) {
                observer.round(&report(round, state));
                break ending;
            }
            if observer.round(&report(round, state)) == Verdict::Stop {
                break Ending::Observer;
            }
            self.send(round + IN_FLIGHT, state.draw(round + IN_FLIGHT));
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
        state.merge_closing(results);
        Ok(())
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

fn report(round: u64, state: &Hunt) -> RoundReport<'_> {
    RoundReport {
        round,
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
