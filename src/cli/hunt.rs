//! `hunt`: search until the budget is spent, and leave a run folder.

use std::collections::BTreeMap;
use std::path::{Path, PathBuf};
use std::sync::Arc;
use std::sync::atomic::{AtomicU32, Ordering};
use std::time::{Duration, Instant};

use clap::Args;
use thalweg::report::{
    HuntFacts, JournalEntry, LedgerView, MinimaFile, RunEnd, RunFile, RunMachine, RunSettings, minima_csv, minima_text,
    read_minima_file, run_format, write_minima_file,
};
use thalweg::run::{Journal, RunFolder, Wanted, demand_valid_name, stem};
use thalweg::search::{Ending, Heuristic, Mix, Observer, Outcome, RoundReport, Settings, Verdict};
use thalweg::{Blame, Failure, Problem, read_bytes};

use super::command::End;
use super::display::Display;
use super::screen::{warn, width};
use super::source::{LARGEST_PROBLEM, read_file};
use super::values::{Until, evaluations, given, share, time, until};

/// The budget of a hunt that was given none.
const DEFAULT_TIME: Duration = Duration::from_secs(60);
/// How often the minima are written while the hunt goes on.
const WRITTEN: Duration = Duration::from_secs(30);
/// The largest file of given points.
const LARGEST_POINTS: u64 = 2 << 30;
/// Minima that the summary lists.
const LISTED: usize = 10;

#[derive(Args)]
pub(crate) struct Hunt {
    /// The problem file
    file: PathBuf,
    /// Ends after so many evaluations (value and gradient at one point): 1e6
    #[arg(long, value_name = "COUNT", value_parser = evaluations)]
    evals: Option<u64>,
    /// Ends after so much time: 90s, 15m, 8h, 1h30m
    #[arg(long = "for", value_name = "TIME", value_parser = time)]
    time: Option<Duration>,
    /// Ends when met: target=-44.3268, coverage=0.99 (of the survey, with 95 % confidence), or quiet=1e7 (no lower value for
    /// so many evaluations); may be repeated, and the first met ends the hunt
    #[arg(long, value_name = "CONDITION", value_parser = until, allow_hyphen_values = true)]
    until: Vec<Until>,
    /// The seed of all random numbers
    #[arg(long, default_value_t = 1)]
    seed: u64,
    /// Threads; the results do not depend on it [default: all processors]
    #[arg(long, value_name = "N", value_parser = clap::value_parser!(u16).range(1..=1024))]
    threads: Option<u16>,
    /// Heuristics: hop,evolve share by what they earn; hop:0.7,evolve:0.3 keep their shares [default: all four]
    #[arg(long, value_name = "NAMES", value_parser = |text: &str| Mix::read(text).map_err(|error| error.to_string()))]
    mix: Option<Mix>,
    /// The share of evaluations for the survey, independent uniform starts
    #[arg(long, value_name = "SHARE", default_value = "0.2", value_parser = share)]
    survey: f64,
    /// Replaces a given of the file: n=38 (may be repeated)
    #[arg(long = "given", value_name = "NAME=NUMBER", value_parser = given)]
    givens: Vec<(String, f64)>,
    /// Starts from known points first: a CSV file with the unknowns' names as header, or an earlier run folder
    #[arg(long, value_name = "POINTS.csv|RUN")]
    from: Option<PathBuf>,
    /// The name of the run folder [default: from the file and the givens]
    #[arg(long)]
    name: Option<String>,
    /// The folder that run folders are made in
    #[arg(long, value_name = "FOLDER", default_value = "results")]
    into: PathBuf,
    /// Shows nothing while it goes on
    #[arg(long)]
    quiet: bool,
    /// Prints the minima as JSON at the end, and nothing else
    #[arg(long)]
    json: bool,
}

impl Hunt {
    pub(crate) fn run(&self) -> Result<End, Failure> {
        if let Some(name) = &self.name {
            demand_valid_name(name).map_err(|error| Failure::new(Blame::Input, format!("--name {name}: {error}")))?;
        }
        let bytes = read_file(&self.file, LARGEST_PROBLEM)?;
        let problem = read_bytes(&self.file.display().to_string(), &bytes, &self.givens)?;
        if !problem.rendered_warnings().is_empty() && !self.quiet {
            warn(problem.rendered_warnings().trim_end());
        }
        demand_promises(&problem)?;
        let given_points = self.given_points(&problem)?;
        let sign = if problem.landscape().maximise { -1.0 } else { 1.0 };
        // Of several conditions of a kind the easiest ends the hunt.
        let of_kind = |pick: fn(&Until) -> Option<f64>| self.until.iter().filter_map(pick);
        let target = of_kind(|until| if let Until::Target(value) = until { Some(*value) } else { None })
            .map(|value| sign * value)
            .reduce(f64::max);
        let coverage =
            of_kind(|until| if let Until::Coverage(share) = until { Some(*share) } else { None }).reduce(f64::min);
        let quiet =
            self.until.iter().filter_map(|until| if let Until::Quiet(count) = until { Some(*count) } else { None });
        let quiet = quiet.min();
        if coverage.is_some() && self.survey == 0.0 {
            return Err(Failure::new(
                Blame::Input,
                "--until coverage=… needs a survey, and --survey 0 makes none; leave --survey out, or give it a share"
                    .to_string(),
            ));
        }
        let allowed = match (self.time, self.evals, self.until.is_empty()) {
            (None, None, true) => {
                if !self.quiet {
                    warn("No budget given: hunting for 60 seconds (--for, --evals and --until set others).");
                }
                Some(DEFAULT_TIME)
            }
            (time, ..) => time,
        };
        let settings = Settings {
            seed: self.seed,
            mix: self.mix.clone().unwrap_or_default(),
            survey: self.survey,
            max_evaluations: self.evals,
            target,
            coverage,
            quiet,
            given: given_points,
        };
        let threads = self.threads.map_or_else(processors, usize::from);
        let folder = self.folder()?;
        let described = problem.described(&self.givens, &bytes);
        let run_file = self.run_file(&described, &bytes, &settings, allowed, sign, threads);
        write_json(&folder, "run.json", &run_file)?;
        folder.write("problem.land", &bytes)?;
        let mut watch = Watch {
            problem: &problem,
            facts: HuntFacts { problem: described, seed: self.seed },
            journal: folder.journal()?,
            folder: &folder,
            display: Display::new(self.quiet || self.json, allowed, self.evals, sign),
            began: Instant::now(),
            written: Instant::now(),
            allowed,
            sign,
            interrupts: catch_interrupts(),
            failure: None,
        };
        let outcome = problem.hunt(&settings, threads, &mut watch);
        watch.display.finish();
        let outcome = outcome?;
        watch.end(run_file, &outcome, self.json)
    }

    /// The points of `--from`.
    fn given_points(&self, problem: &Problem) -> Result<Vec<Vec<f64>>, Failure> {
        let Some(path) = &self.from else { return Ok(Vec::new()) };
        let name = path.display().to_string();
        let refused = |cause: String| Failure::new(Blame::Input, format!("{name}: {cause}"));
        let text = |path: &Path| -> Result<String, Failure> {
            let bytes = read_file(path, LARGEST_POINTS)?;
            String::from_utf8(bytes).map_err(|_| refused("it is not text".to_string()))
        };
        if path.is_dir() {
            let earlier =
                read_minima_file(&text(&path.join("minima.json"))?).map_err(|error| refused(error.to_string()))?;
            return problem.points_from_run(&name, &earlier);
        }
        problem.points_from_csv(&name, &text(path)?)
    }

    fn folder(&self) -> Result<RunFolder, Failure> {
        let file = self.file.file_name().map_or_else(String::new, |name| name.to_string_lossy().into_owned());
        let stem = stem(&file, &self.givens);
        let wanted = self.name.as_deref().map_or(Wanted::Stem(&stem), Wanted::Exactly);
        Ok(RunFolder::create(&self.into, wanted)?)
    }

    fn run_file(
        &self,
        described: &thalweg::report::Problem,
        bytes: &[u8],
        settings: &Settings,
        allowed: Option<Duration>,
        sign: f64,
        threads: usize,
    ) -> RunFile {
        let mix = settings.mix.members().iter().map(|(heuristic, share)| (heuristic.name().to_string(), *share));
        RunFile {
            format: run_format(),
            program: env!("CARGO_PKG_VERSION").to_string(),
            problem: described.clone(),
            text: String::from_utf8_lossy(bytes).into_owned(),
            settings: RunSettings {
                seed: settings.seed,
                mix: mix.collect(),
                survey: settings.survey,
                evaluations: settings.max_evaluations,
                seconds: allowed.map(|time| time.as_secs()),
                target: settings.target.map(|target| sign * target),
                coverage: settings.coverage,
                quiet: settings.quiet,
                fixed_shares: settings.mix.is_fixed(),
                given_points: settings.given.len(),
            },
            machine: RunMachine { threads, build: format!("{:?}", thalweg::kernel::Build::best()).to_lowercase() },
            end: None,
        }
    }
}

/// Refuses a problem whose promises do not hold: the ledger would merge different answers.
fn demand_promises(problem: &Problem) -> Result<(), Failure> {
    let broken = problem.broken_promises();
    if broken.is_empty() {
        return Ok(());
    }
    let mut text = String::new();
    for broken in &broken {
        text.push_str(&format!("refused: `{}` does not hold\n", broken.promise));
        for (at, value) in [(&broken.at, broken.value), (&broken.image, broken.image_value)] {
            let value = value.map_or("no finite value".to_string(), |value| format!("value {value}"));
            let parts: Vec<String> = at
                .iter()
                .map(|(name, nested)| format!("{name} = {}", serde_json::to_string(nested).unwrap_or_default()))
                .collect();
            text.push_str(&format!("  {value} at {}\n", parts.join(", ")));
        }
    }
    text.push_str(
        "Points that a symmetry relates must have the same value; remove the promise, or mend the objective.",
    );
    Err(Failure::new(Blame::Input, text))
}

fn processors() -> usize {
    std::thread::available_parallelism().map_or(1, usize::from)
}

/// Counts interrupts: the first ends the hunt with its results written, the second ends the program at once.
fn catch_interrupts() -> Arc<AtomicU32> {
    let count = Arc::new(AtomicU32::new(0));
    let counter = count.clone();
    let set = ctrlc::set_handler(move || {
        if counter.fetch_add(1, Ordering::SeqCst) > 0 {
            std::process::exit(130);
        }
    });
    if set.is_err() {
        warn("Interrupts cannot be caught here: Ctrl-C will end the program without its last results.");
    }
    count
}

fn write_json(folder: &RunFolder, name: &str, value: &impl serde::Serialize) -> Result<(), Failure> {
    let mut text =
        serde_json::to_string_pretty(value).map_err(|error| Failure::new(Blame::Program, error.to_string()))?;
    text.push('\n');
    Ok(folder.write(name, text.as_bytes())?)
}

/// Watches a hunt: the clock, the journal, the files, the display.
struct Watch<'a> {
    problem: &'a Problem,
    facts: HuntFacts,
    folder: &'a RunFolder,
    journal: Journal,
    display: Display,
    began: Instant,
    written: Instant,
    allowed: Option<Duration>,
    sign: f64,
    interrupts: Arc<AtomicU32>,
    failure: Option<Failure>,
}

impl Observer for Watch<'_> {
    fn round(&mut self, report: &RoundReport<'_>) -> Verdict {
        if let Err(failure) = self.record(report) {
            // What was found is not lost: it is shown at the end, and written again if the disk lets it.
            self.failure = Some(failure);
            return Verdict::Stop;
        }
        self.display.show(report);
        self.idle()
    }

    fn idle(&mut self) -> Verdict {
        let late = self.allowed.is_some_and(|allowed| self.began.elapsed() >= allowed);
        if late || self.is_interrupted() { Verdict::Stop } else { Verdict::Continue }
    }
}

impl Watch<'_> {
    fn is_interrupted(&self) -> bool {
        self.interrupts.load(Ordering::SeqCst) > 0
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
        };
        let line = serde_json::to_string(&entry).map_err(|error| Failure::new(Blame::Program, error.to_string()))?;
        self.journal.append(&line)?;
        if self.written.elapsed() >= WRITTEN {
            let view = LedgerView {
                ledger: report.ledger,
                evaluations: report.evaluations,
                survey_descents: report.descents[Heuristic::Survey.number()],
                troubles: report.troubles,
            };
            let file = self.problem.minima_file(&self.facts, &view);
            self.write_minima(&file)?;
            self.written = Instant::now();
        }
        Ok(())
    }

    fn write_minima(&self, file: &MinimaFile) -> Result<(), Failure> {
        let refused = |error: String| Failure::new(Blame::Program, error);
        let json = write_minima_file(file).map_err(|error| refused(error.to_string()))?;
        let csv = minima_csv(file).map_err(|error| refused(error.to_string()))?;
        self.folder.write("minima.json", json.as_bytes())?;
        Ok(self.folder.write("minima.csv", csv.as_bytes())?)
    }

    fn end(mut self, mut run_file: RunFile, outcome: &Outcome, json: bool) -> Result<End, Failure> {
        let view = LedgerView {
            ledger: &outcome.ledger,
            evaluations: outcome.evaluations,
            survey_descents: outcome.descents[Heuristic::Survey.number()],
            troubles: &outcome.troubles,
        };
        let file = self.problem.minima_file(&self.facts, &view);
        let reason = match outcome.ending {
            _ if self.failure.is_some() => "failed",
            Ending::Evaluations => "evaluations",
            Ending::Target => "target",
            Ending::Coverage => "coverage",
            Ending::Quiet => "quiet",
            Ending::Observer if self.is_interrupted() => "interrupted",
            Ending::Observer => "time",
        };
        run_file.end = Some(RunEnd {
            reason: reason.to_string(),
            rounds: outcome.rounds,
            evaluations: outcome.evaluations,
            by_heuristic: by_name(&outcome.by_heuristic),
            confirming: outcome.confirming,
            seconds: self.began.elapsed().as_secs_f64(),
        });
        let written = self.write_minima(&file).and_then(|()| write_json(self.folder, "run.json", &run_file));
        let mut text = if json {
            write_minima_file(&file).map_err(|error| Failure::new(Blame::Program, error.to_string()))?
        } else {
            minima_text(&file, LISTED, width())
        };
        if !json {
            let why = match reason {
                "interrupted" => "Interrupted; ",
                "target" => "Target met; ",
                "coverage" => "Coverage reached; ",
                "quiet" => "No lower value for long; ",
                _ => "",
            };
            text.push_str(&format!("{why}the results are in {}\n", self.folder.path().display()));
        }
        match self.failure.take().or(written.err()) {
            None => Ok(End { text, status: 0 }),
            Some(failure) => {
                // The results are shown all the same: they may exist nowhere else.
                super::screen::say(&text)?;
                Err(failure)
            }
        }
    }
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
