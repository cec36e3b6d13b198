//! Threads at work: two rounds in flight, results gathered by round.
//!
//! Round r + 1 is drawn up before round r has come back, so no thread waits for the stragglers of a round; the workers
//! never learn where a round ends. The order in which tasks are taken and finished decides nothing.

use std::collections::{BTreeMap, VecDeque};
use std::sync::atomic::{AtomicU64, Ordering};
use std::sync::mpsc::{Receiver, RecvTimeoutError, Sender};
use std::sync::{Condvar, Mutex, MutexGuard, PoisonError};
use std::time::Duration;

use super::task::{Task, TaskResult};

/// The tasks that wait for a worker.
#[derive(Default)]
pub struct Queue {
    waiting: Mutex<Waiting>,
    changed: Condvar,
    clearings: AtomicU64,
}

#[derive(Default)]
struct Waiting {
    tasks: VecDeque<Task>,
    closed: bool,
    n_workers: usize,
}

impl Queue {
    /// An empty queue for so many workers.
    pub fn new(n_workers: usize) -> Self {
        let queue = Queue::default();
        queue.lock().n_workers = n_workers.max(1);
        queue
    }

    /// Adds tasks.
    pub fn add(&self, tasks: impl IntoIterator<Item = Task>) {
        self.lock().tasks.extend(tasks);
        self.changed.notify_all();
    }

    /// No tasks will come; what is in hand is finished.
    pub fn close(&self) {
        self.lock().closed = true;
        self.changed.notify_all();
    }

    /// Forgets all tasks so far: those that wait are gone, and workers drop those of them that they have in hand.
    pub fn clear(&self) {
        let mut waiting = self.lock();
        waiting.tasks.clear();
        self.clearings.fetch_add(1, Ordering::Relaxed);
    }

    /// How often the queue was cleared; a worker drops what it took before the last time.
    pub fn clearings(&self) -> u64 {
        self.clearings.load(Ordering::Relaxed)
    }

    /// Takes up to `most` tasks, but leaves the other workers their part. With `wait`, waits for at least one unless
    /// the queue is closed. Says how often the queue had been cleared by then.
    pub fn take(&self, most: usize, wait: bool, taken: &mut Vec<Task>) -> u64 {
        let mut waiting = self.lock();
        while wait && waiting.tasks.is_empty() && !waiting.closed {
            waiting = self.changed.wait(waiting).unwrap_or_else(PoisonError::into_inner);
        }
        let fair = waiting.tasks.len().div_ceil(waiting.n_workers);
        taken.extend((0..most.min(fair)).map_while(|_| waiting.tasks.pop_front()));
        self.clearings.load(Ordering::Relaxed)
    }

    /// Whether no task waits and none will come.
    pub fn is_done(&self) -> bool {
        let waiting = self.lock();
        waiting.closed && waiting.tasks.is_empty()
    }

    fn lock(&self) -> MutexGuard<'_, Waiting> {
        // A worker that panicked holds no half-made state: the queue is changed in single steps.
        self.waiting.lock().unwrap_or_else(PoisonError::into_inner)
    }
}

/// Results of the rounds in flight.
pub struct Gathering {
    results: Receiver<TaskResult>,
    rounds: BTreeMap<u64, Vec<Option<TaskResult>>>,
    missing: BTreeMap<u64, usize>,
}

/// What came of waiting for a round.
pub enum Gathered {
    /// The round is whole; its results in task order.
    Whole(Vec<TaskResult>),
    /// Nothing yet.
    Waiting,
    /// The workers are gone; only a panic in one of them does that.
    Lost,
}

/// How long one wait for results lasts before the caller may look around.
const PATIENCE: Duration = Duration::from_millis(50);

impl Gathering {
    /// Gathers what comes over a channel.
    pub fn new() -> (Sender<TaskResult>, Self) {
        let (sender, results) = std::sync::mpsc::channel();
        (sender, Gathering { results, rounds: BTreeMap::new(), missing: BTreeMap::new() })
    }

    /// Expects a round of so many tasks.
    pub fn expect(&mut self, round: u64, n_tasks: usize) {
        self.rounds.insert(round, vec![None; n_tasks]);
        self.missing.insert(round, n_tasks);
    }

    /// Waits a little for a round to become whole.
    pub fn wait(&mut self, round: u64) -> Gathered {
        loop {
            if self.missing.get(&round) == Some(&0) {
                self.missing.remove(&round);
                let results = self.rounds.remove(&round).unwrap_or_default();
                return Gathered::Whole(results.into_iter().flatten().collect());
            }
            match self.results.recv_timeout(PATIENCE) {
                Ok(result) => {
                    let (round, number) = (result.round, result.number as usize);
                    if let Some(place) = self.rounds.get_mut(&round).and_then(|places| places.get_mut(number)) {
                        *place = Some(result);
                        if let Some(missing) = self.missing.get_mut(&round) {
                            *missing -= 1;
                        }
                    }
                }
                Err(RecvTimeoutError::Timeout) => return Gathered::Waiting,
                Err(RecvTimeoutError::Disconnected) => return Gathered::Lost,
            }
        }
    }
}
