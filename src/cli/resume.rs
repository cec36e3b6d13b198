//! `resume`: go on with a hunt that was interrupted, or with a larger budget.

use std::path::PathBuf;
use std::time::Duration;

use clap::Args;
use thalweg::report::{JournalEntry, RunFile, Status, read_run_file};
use thalweg::run::{JournalReader, RunFolder, Sound};
use thalweg::search::{Heuristic, Mix, Past, PastRound, RoundRecord, Settings};
use thalweg::{Blame, Failure, Problem, read_bytes};

use super::budget::Budget;
use super::command::End;
use super::hunt::{LARGEST_POINTS, processors};
use super::screen::warn;
use super::session::{Session, catch_interrupts, digest, machine};
use super::source::{LARGEST_PROBLEM, read_file, run_folder};

/// The largest `run.json`: it holds the text of the problem.
const LARGEST_RUN_FILE: u64 = 4 * LARGEST_PROBLEM;

#[derive(Args)]
#[command(
    after_help = "The budget options replace the whole budget of the run; without any it stays. --evals counts from the \
    beginning of the run, --for from now on."
)]
pub(crate) struct Resume {
    /// The run folder, or the name of a run in results/
    run: PathBuf,
    #[command(flatten)]
    budget: Budget,
    /// Threads; the results do not depend on it [default: all processors]
    #[arg(long, value_name = "N", value_parser = clap::value_parser!(u16).range(1..=1024))]
    threads: Option<u16>,
    /// Of a journal that was altered in the middle keeps what stands before
    #[arg(long)]
    salvage: bool,
    /// Shows nothing while it goes on
    #[arg(long)]
    quiet: bool,
    /// Prints the minima as JSON at the end, and nothing else
    #[arg(long)]
    json: bool,
}

impl Resume {
    pub(crate) fn run(&self) -> Result<End, Failure> {
        let folder = RunFolder::of(&run_folder(&self.run)?);
        let shown = folder.path().join("run.json").display().to_string();
        let refused = |cause: String| Failure::new(Blame::Input, format!("{shown}: {cause}"));
        let lock = folder.lock()?;
        let text = String::from_utf8(read_file(&folder.path().join("run.json"), LARGEST_RUN_FILE)?)
            .map_err(|_| refused("it is not text".to_string()))?;
        let mut run_file = read_run_file(&text).map_err(|error| refused(error.to_string()))?;
        let problem = self.problem(&folder, &run_file)?;
        let sign = if problem.landscape().maximise { -1.0 } else { 1.0 };
        let mut settings = settings(&folder, &problem, &run_file, sign).map_err(|failure| match failure {
            Cause::Settings(cause) => refused(cause),
            Cause::Failure(failure) => failure,
        })?;
        let used = used_time(&run_file, &folder);
        let mut allowed = run_file.settings.seconds.map(|seconds| Duration::from_secs(seconds).saturating_sub(used));
        if self.budget.is_empty() {
            if let Some(text) = ended(&run_file, &folder) {
                return Ok(End { text, status: 0 });
            }
        } else {
            allowed = self.budget.time;
            settings.max_evaluations = self.budget.evals;
            settings.target = self.budget.target(sign);
            settings.coverage = self.budget.coverage();
            settings.quiet = self.budget.quiet();
            if settings.coverage.is_some() && settings.survey == 0.0 {
                return Err(refused(
                    "--until coverage=… needs a survey, and the run has none; leave it out".to_string(),
                ));
            }
            let asked = &mut run_file.settings;
            asked.evaluations = settings.max_evaluations;
            asked.target = settings.target.map(|target| sign * target);
            asked.coverage = settings.coverage;
            asked.quiet = settings.quiet;
            asked.seconds = allowed.map(|allowed| (used + allowed).as_secs());
        }
        let threads = self.threads.map_or_else(processors, usize::from);
        let (journal, sound) = folder.go_on(self.salvage)?;
        tell_what_was_lost(sound);
        run_file.end = None;
        run_file.program = env!("CARGO_PKG_VERSION").to_string();
        run_file.machine = machine(threads);
        let mut past = Recorded { reader: folder.read_journal()?, rounds: sound.lines };
        let session = Session {
            problem: &problem,
            folder: &folder,
            _lock: lock,
            journal,
            run_file,
            run_file_written: false,
            settings,
            threads,
            allowed,
            used,
            quiet: self.quiet,
            json: self.json,
            interrupts: catch_interrupts(),
        };
        session.work(&mut past)
    }

    fn problem(&self, folder: &RunFolder, run_file: &RunFile) -> Result<Problem, Failure> {
        let path = folder.path().join("problem.land");
        let bytes = read_file(&path, LARGEST_PROBLEM)?;
        if digest(&bytes) != run_file.problem.digest {
            let text = format!(
                "{}: the problem was edited since the hunt began, and its minima would be mixed with those of another; put the \
                 text back (it is in run.json), or begin a new hunt",
                path.display()
            );
            return Err(Failure::new(Blame::Input, text));
        }
        let givens: Vec<(String, f64)> =
            run_file.problem.givens.iter().map(|(name, value)| (name.clone(), *value)).collect();
        read_bytes(&path.display().to_string(), &bytes, &givens)
    }
}

enum Cause {
    Settings(String),
    Failure(Failure),
}

fn settings(folder: &RunFolder, problem: &Problem, run_file: &RunFile, sign: f64) -> Result<Settings, Cause> {
    let asked = &run_file.settings;
    let member = |name: &String| {
        let heuristic = Heuristic::member(name).ok_or_else(|| format!("there is no heuristic `{name}`"))?;
        let share = asked.mix.get(name).ok_or_else(|| format!("the share of `{name}` is missing"))?;
        Ok((heuristic, *share))
    };
    let members: Result<Vec<_>, String> = asked.order.iter().map(member).collect();
    let mix = members
        .and_then(|members| Mix::restored(members, asked.fixed_shares).map_err(|error| error.to_string()))
        .map_err(Cause::Settings)?;
    Ok(Settings {
        seed: asked.seed,
        mix,
        survey: asked.survey,
        max_evaluations: asked.evaluations,
        target: asked.target.map(|target| sign * target),
        coverage: asked.coverage,
        quiet: asked.quiet,
        given: given_points(folder, problem, asked.given_digest.as_deref()).map_err(Cause::Failure)?,
    })
}

fn given_points(folder: &RunFolder, problem: &Problem, expected: Option<&str>) -> Result<Vec<Vec<f64>>, Failure> {
    let Some(expected) = expected else { return Ok(Vec::new()) };
    let path = folder.path().join("given.csv");
    let name = path.display().to_string();
    let bytes = read_file(&path, LARGEST_POINTS)?;
    match String::from_utf8(bytes) {
        Ok(table) if digest(table.as_bytes()) == expected => problem.points_from_csv(&name, &table),
        _ => Err(Failure::new(
            Blame::Input,
            format!("{name}: the points were edited since the hunt began; put them back, or begin a new hunt"),
        )),
    }
}

/// The time that earlier sessions took, as far as they told.
fn used_time(run_file: &RunFile, folder: &RunFolder) -> Duration {
    // A session that was killed told only the status, up to a second before.
    let killed = || {
        let text = std::fs::read_to_string(folder.path().join("status.json")).ok()?;
        serde_json::from_str::<Status>(&text).ok().map(|status| status.seconds)
    };
    let seconds = run_file.end.as_ref().map(|end| end.seconds).or_else(killed).unwrap_or(0.0);
    Duration::try_from_secs_f64(seconds).unwrap_or_default()
}

/// What is said of a hunt that ended as it was asked to; `None` for one that may go on.
fn ended(run_file: &RunFile, folder: &RunFolder) -> Option<String> {
    let reason = run_file.end.as_ref()?.reason.as_str();
    if reason == "interrupted" {
        return None;
    }
    let why = why_ended(reason);
    Some(format!(
        "This hunt has ended: {why}. Nothing was changed.\n\
         To go on, give a larger budget, such as --evals or --for; to see its minima: thalweg minima {}\n",
        folder.path().display()
    ))
}

/// The words for a reason of `run.json`.
pub(crate) fn why_ended(reason: &str) -> &'static str {
    match reason {
        "evaluations" => "its evaluations were spent",
        "time" => "its time was over",
        "target" => "its target was met",
        "coverage" => "its coverage was reached",
        "quiet" => "it met no lower value for long",
        _ => "it was interrupted",
    }
}

fn tell_what_was_lost(sound: Sound) {
    if sound.bad_bytes > 0 {
        let lines = if sound.bad_lines == 1 { "1 line".to_string() } else { format!("{} lines", sound.bad_lines) };
        warn(&format!(
            "The journal's end was damaged: {lines} ({} bytes) after line {} cut off; the rounds are hunted again.",
            sound.bad_bytes, sound.lines
        ));
    }
}

/// The rounds of a journal.
struct Recorded {
    reader: JournalReader,
    rounds: u64,
}

impl Past for Recorded {
    fn rounds(&self) -> u64 {
        self.rounds
    }

    fn next(&mut self) -> Option<PastRound> {
        let entry: JournalEntry = serde_json::from_str(self.reader.next_entry()?).ok()?;
        let record = RoundRecord::read(&entry.tasks).ok()?;
        Some(PastRound { record, evaluations: entry.evaluations, distinct: entry.distinct })
    }
}
