//! A hunt at work in its folder: the clock, the journal, the files, the display, and what becomes of faults.

use std::collections::BTreeMap;
use std::sync::Arc;
use std::sync::Mutex;
use std::sync::atomic::{AtomicU32, Ordering};
use std::time::{Duration, Instant};

use sha2::{Digest, Sha256};
use thalweg::ledger::Ledger;
use thalweg::report::{
    HuntFacts, JournalEntry, LedgerView, MinimaFile, RunEnd, RunFile, RunMachine, Status, StatusLowest, minima_csv,
    minima_text, status_format, write_minima_file,
};
use thalweg::run::{Journal, Lock, RunFolder};
use thalweg::search::{Ending, Heuristic, Observer, Outcome, Past, RoundReport, Settings, Verdict};
use thalweg::{Blame, Failure, Problem};

use super::command::End;
use super::display::Display;
use super::screen::{say, warn, width};

/// How often the minima are written while the hunt goes on.
const WRITTEN: Duration = Duration::from_secs(30);
/// How often the journal is put onto the disk: a power cut takes no more than this. (A process that is killed loses nothing
/// that was written.)
const SYNCED: Duration = Duration::from_secs(5);
/// How often `status.json` is replaced.
const TOLD: Duration = Duration::from_secs(1);
/// How long after a failed write the next is tried.
const TRIED: Duration = Duration::from_secs(1);
/// Minima that the summary lists.
const LISTED: usize = 10;
/// A signal so soon after the first is the same wish: a terminal that closes sends two.
const SAME_WISH: Duration = Duration::from_millis(200);

/// Everything that a hunt in a folder needs.
pub(crate) struct Session<'a> {
    pub(crate) problem: &'a Problem,
    pub(crate) folder: &'a RunFolder,
    pub(crate) _lock: Lock,
    pub(crate) journal: Journal,
    /// What `run.json` is to say; it was written already, or is with the first round.
    pub(crate) run_file: RunFile,
    pub(crate) run_file_written: bool,
    pub(crate) settings: Settings,
    pub(crate) threads: usize,
    /// The time allowed from now on.
    pub(crate) allowed: Option<Duration>,
    /// The time that earlier sessions took.
    pub(crate) used: Duration,
    pub(crate) quiet: bool,
    pub(crate) json: bool,
    pub(crate) interrupts: Arc<AtomicU32>,
}

impl Session<'_> {
    /// Hunts, on from the rounds of the past, and writes what is found.
    pub(crate) fn work(self, past: &mut dyn Past) -> Result<End, Failure> {
        let sign = if self.problem.landscape().maximise { -1.0 } else { 1.0 };
        let hidden = self.quiet || self.json;
        let now = Instant::now();
        let mut watch = Watch {
            facts: HuntFacts { problem: self.run_file.problem.clone(), seed: self.settings.seed },
            display: Display::new(hidden, self.allowed, self.settings.max_evaluations, sign),
            sign,
            began: now,
            written: now,
            synced: now,
            told: None,
            before: 0,
            fault: None,
            session: self,
        };
        let (problem, settings, threads) =
            (watch.session.problem, watch.session.settings.clone(), watch.session.threads);
        let outcome = problem.resume(&settings, threads, &mut watch, past);
        watch.display.finish();
        watch.end(&outcome?)
    }
}

/// Watches a hunt.
struct Watch<'a> {
    session: Session<'a>,
    facts: HuntFacts,
    display: Display,
    sign: f64,
    began: Instant,
    written: Instant,
    synced: Instant,
    told: Option<Instant>,
    /// Evaluations of earlier sessions.
    before: u64,
    /// The last write that failed, and when; nothing is lost while the process lives.
    fault: Option<(Failure, Instant)>,
}

impl Observer for Watch<'_> {
    fn round(&mut self, report: &RoundReport<'_>) -> Verdict {
        if let Err(failure) = self.record(report) {
            if self.fault.is_none() {
                self.display.tell(&format!("{failure}\nThe hunt goes on in memory and keeps trying to write."));
            }
            self.fault = Some((failure, Instant::now()));
        }
        if self.told.is_none_or(|told| told.elapsed() >= TOLD) {
            self.tell(report.evaluations, by_name(&report.by_heuristic), report.ledger, report.troubles.outside, None);
            self.told = Some(Instant::now());
        }
        self.display.show(report);
        self.idle()
    }

    fn idle(&mut self) -> Verdict {
        let late = self.session.allowed.is_some_and(|allowed| self.began.elapsed() >= allowed);
        if late || self.is_interrupted() { Verdict::Stop } else { Verdict::Continue }
    }

    fn replayed(&mut self, report: &RoundReport<'_>) -> Verdict {
        self.began = Instant::now();
        self.before = report.evaluations;
        self.display.replayed(report);
        if self.is_interrupted() { Verdict::Stop } else { Verdict::Continue }
    }
}

impl Watch<'_> {
    fn is_interrupted(&self) -> bool {
        self.session.interrupts.load(Ordering::SeqCst) > 0
    }

    fn record(&mut self, report: &RoundReport<'_>) -> Result<(), Failure> {
        let entry = JournalEntry {
            round: report.round,
            evaluations: report.evaluations,
            by_heuristic: by_name(&report.by_heuristic),
            confirming: report.confirming,
            lowest: report.ledger.lowest_value().map(|value| self.sign * value),
            distinct: report.ledger.len() as u64,
            confirmed: report.ledger.n_confirmed() as u64,
            shares: shares_by_name(report),
            tasks: report.record.text(),
        };
        let line = serde_json::to_string(&entry).map_err(|error| Failure::new(Blame::Program, error.to_string()))?;
        self.session.journal.keep(&line);
        if self.fault.as_ref().is_some_and(|(_, tried)| tried.elapsed() < TRIED) {
            return Ok(());
        }
        if !self.session.run_file_written {
            // Not before the recorded rounds proved to be those of this hunt.
            write_json(self.session.folder, "run.json", &self.session.run_file)?;
            self.session.run_file_written = true;
        }
        self.session.journal.flush()?;
        if self.fault.is_some() || self.synced.elapsed() >= SYNCED {
            self.session.journal.sync()?;
            self.synced = Instant::now();
        }
        if self.fault.is_some() || self.written.elapsed() >= WRITTEN {
            let view = LedgerView {
                ledger: report.ledger,
                evaluations: report.evaluations,
                survey_descents: report.descents[Heuristic::Survey.number()],
                troubles: report.troubles,
            };
            let file = self.session.problem.minima_file(&self.facts, &view);
            self.write_minima(&file)?;
            self.written = Instant::now();
        }
        if self.fault.take().is_some() {
            self.display.tell("Everything is written again.");
        }
        Ok(())
    }

    /// Replaces `status.json`. Where that fails nothing is lost, and the journal's failure tells it.
    fn tell(
        &self,
        evaluations: u64,
        by_heuristic: BTreeMap<String, u64>,
        ledger: &Ledger,
        outside: u64,
        reason: Option<&str>,
    ) {
        let elapsed = self.began.elapsed();
        let lowest = ledger.lowest_entry().and_then(|entry| ledger.entry(entry)).map(|entry| StatusLowest {
            value: self.sign * entry.value(),
            heuristic: Heuristic::ALL.get(entry.first().heuristic).map_or("", |who| who.name()).to_string(),
            evaluation: entry.first().evaluation,
        });
        let status = Status {
            format: status_format(),
            state: if reason.is_some() { "ended" } else { "hunting" }.to_string(),
            reason: reason.map(String::from),
            seconds: (self.session.used + elapsed).as_secs_f64(),
            allowed_seconds: self.session.run_file.settings.seconds,
            evaluations,
            allowed_evaluations: self.session.settings.max_evaluations,
            evaluations_a_second: evaluations.saturating_sub(self.before) as f64 / elapsed.as_secs_f64().max(1e-3),
            lowest,
            maximise: self.sign < 0.0,
            distinct: ledger.len() as u64,
            confirmed: ledger.n_confirmed() as u64,
            by_heuristic,
            outside,
            fault: self.fault.as_ref().map(|(failure, _)| failure.to_string()),
        };
        if let Ok(mut text) = serde_json::to_string_pretty(&status) {
            text.push('\n');
            let _ = self.session.folder.write_unsynced("status.json", text.as_bytes());
        }
    }

    fn write_minima(&self, file: &MinimaFile) -> Result<(), Failure> {
        let refused = |error: String| Failure::new(Blame::Program, error);
        let json = write_minima_file(file).map_err(|error| refused(error.to_string()))?;
        let csv = minima_csv(file).map_err(|error| refused(error.to_string()))?;
        self.session.folder.write("minima.json", json.as_bytes())?;
        Ok(self.session.folder.write("minima.csv", csv.as_bytes())?)
    }

    fn end(mut self, outcome: &Outcome) -> Result<End, Failure> {
        let view = LedgerView {
            ledger: &outcome.ledger,
            evaluations: outcome.evaluations,
            survey_descents: outcome.descents[Heuristic::Survey.number()],
            troubles: &outcome.troubles,
        };
        let file = self.session.problem.minima_file(&self.facts, &view);
        let reason = match outcome.ending {
            Ending::Evaluations => "evaluations",
            Ending::Target => "target",
            Ending::Coverage => "coverage",
            Ending::Quiet => "quiet",
            Ending::Observer if self.is_interrupted() => "interrupted",
            Ending::Observer => "time",
        };
        self.session.run_file.end = Some(RunEnd {
            reason: reason.to_string(),
            rounds: outcome.rounds,
            evaluations: outcome.evaluations,
            by_heuristic: by_name(&outcome.by_heuristic),
            confirming: outcome.confirming,
            seconds: (self.session.used + self.began.elapsed()).as_secs_f64(),
        });
        // Each is tried, whatever became of those before.
        let attempts = [
            self.session.journal.sync().map_err(Failure::from),
            self.write_minima(&file),
            write_json(self.session.folder, "run.json", &self.session.run_file),
        ];
        let failure = attempts.into_iter().find_map(Result::err);
        let by_heuristic = by_name(&outcome.by_heuristic);
        self.tell(outcome.evaluations, by_heuristic, &outcome.ledger, outcome.troubles.outside, Some(reason));
        let mut text = if self.session.json {
            write_minima_file(&file).map_err(|error| Failure::new(Blame::Program, error.to_string()))?
        } else {
            minima_text(&file, LISTED, width())
        };
        if let Some(failure) = failure {
            // The results are shown all the same: they may exist nowhere else.
            let _ = say(&text);
            return Err(failure);
        }
        if !self.session.json {
            let why = match reason {
                "interrupted" => "Interrupted; ",
                "target" => "Target met; ",
                "coverage" => "Coverage reached; ",
                "quiet" => "No lower value for long; ",
                _ => "",
            };
            text.push_str(&format!("{why}the results are in {}\n", self.session.folder.path().display()));
        }
        Ok(End { text, status: 0 })
    }
}

/// Counts signals to end (interrupt, terminate, hang up): the first ends the hunt with its results written, the second ends
/// the program at once.
pub(crate) fn catch_interrupts() -> Arc<AtomicU32> {
    let count = Arc::new(AtomicU32::new(0));
    let counter = count.clone();
    let first = Mutex::new(None::<Instant>);
    let set = ctrlc::set_handler(move || {
        counter.fetch_add(1, Ordering::SeqCst);
        if let Ok(mut first) = first.lock()
            && first.get_or_insert_with(Instant::now).elapsed() > SAME_WISH
        {
            std::process::exit(130);
        }
    });
    if set.is_err() {
        warn("Interrupts cannot be caught here: Ctrl-C will end the program without its last results.");
    }
    count
}

/// Where a hunt runs.
pub(crate) fn machine(threads: usize) -> RunMachine {
    RunMachine { threads, build: format!("{:?}", thalweg::kernel::Build::best()).to_lowercase() }
}

/// The SHA-256 of some bytes, in hexadecimal.
pub(crate) fn digest(bytes: &[u8]) -> String {
    Sha256::digest(bytes).iter().map(|byte| format!("{byte:02x}")).collect()
}

/// Writes a file of a run as JSON.
pub(crate) fn write_json(folder: &RunFolder, name: &str, value: &impl serde::Serialize) -> Result<(), Failure> {
    let mut text =
        serde_json::to_string_pretty(value).map_err(|error| Failure::new(Blame::Program, error.to_string()))?;
    text.push('\n');
    Ok(folder.write(name, text.as_bytes())?)
}

/// Shares to four digits: they are for reading.
fn shares_by_name(report: &RoundReport<'_>) -> BTreeMap<String, f64> {
    let rounded = |share: f64| (share * 1e4).round() / 1e4;
    let heuristics = Heuristic::ALL
        .iter()
        .map(|heuristic| (heuristic.name().to_string(), rounded(report.shares[heuristic.number()])));
    let ways =
        report.ways.iter().map(|&(heuristic, way, share)| (format!("{} {way}", heuristic.name()), rounded(share)));
    heuristics.chain(ways).filter(|(_, share)| *share > 0.0).collect()
}

fn by_name(by_heuristic: &[u64]) -> BTreeMap<String, u64> {
    let named = Heuristic::ALL.iter().map(|heuristic| (heuristic.name().to_string(), by_heuristic[heuristic.number()]));
    named.filter(|(_, spent)| *spent > 0).collect()
}
