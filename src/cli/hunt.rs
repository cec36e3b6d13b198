//! `hunt`: search until the budget is spent, and leave a run folder.

use std::path::{Path, PathBuf};
use std::time::Duration;

use clap::Args;
use thalweg::report::{RunFile, RunSettings, read_minima_file, run_format};
use thalweg::run::{RunFolder, Wanted, demand_valid_name, stem};
use thalweg::search::{Mix, NoPast, Settings};
use thalweg::{Blame, Failure, Problem, read_bytes};

use super::budget::Budget;
use super::command::End;
use super::screen::warn;
use super::session::{Session, catch_interrupts, digest, machine, write_json};
use super::source::{LARGEST_PROBLEM, read_file};
use super::values::{given, share};

/// The budget of a hunt that was given none.
const DEFAULT_TIME: Duration = Duration::from_secs(60);
/// The largest file of given points.
pub(crate) const LARGEST_POINTS: u64 = 2 << 30;
#[derive(Args)]
pub(crate) struct Hunt {
    /// The problem file
    file: PathBuf,
    #[command(flatten)]
    budget: Budget,
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
        if self.budget.coverage().is_some() && self.survey == 0.0 {
            return Err(Failure::new(
                Blame::Input,
                "--until coverage=… needs a survey, and --survey 0 makes none; leave --survey out, or give it a share"
                    .to_string(),
            ));
        }
        if self.budget.is_empty() && !self.quiet {
            warn("No budget given: hunting for 60 seconds (--for, --evals and --until set others).");
        }
        let allowed = if self.budget.is_empty() { Some(DEFAULT_TIME) } else { self.budget.time };
        let settings = Settings {
            seed: self.seed,
            mix: self.mix.clone().unwrap_or_default(),
            survey: self.survey,
            max_evaluations: self.budget.evals,
            target: self.budget.target(sign),
            coverage: self.budget.coverage(),
            quiet: self.budget.quiet(),
            given: given_points,
        };
        let threads = self.threads.map_or_else(processors, usize::from);
        let folder = self.folder()?;
        let lock = folder.lock()?;
        let described = problem.described(&self.givens, &bytes);
        let given = (!settings.given.is_empty()).then(|| points_table(&problem, &settings.given));
        let run_file = self.run_file(&described, &bytes, &settings, allowed, given.as_deref(), threads);
        folder.write("problem.land", &bytes)?;
        if let Some(table) = &given {
            folder.write("given.csv", table.as_bytes())?;
        }
        // The last of them: a folder with a run.json can be gone on from.
        write_json(&folder, "run.json", &run_file)?;
        let session = Session {
            problem: &problem,
            journal: folder.journal()?,
            folder: &folder,
            _lock: lock,
            run_file,
            run_file_written: true,
            settings,
            threads,
            allowed,
            used: Duration::ZERO,
            quiet: self.quiet,
            json: self.json,
            interrupts: catch_interrupts(),
        };
        session.work(&mut NoPast)
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
        given: Option<&str>,
        threads: usize,
    ) -> RunFile {
        let sign = if described.sense == "maximise" { -1.0 } else { 1.0 };
        let order = settings.mix.members().iter().map(|member| member.0.name().to_string()).collect();
        let mix = settings.mix.members().iter().map(|(heuristic, share)| (heuristic.name().to_string(), *share));
        RunFile {
            format: run_format(),
            program: env!("CARGO_PKG_VERSION").to_string(),
            problem: described.clone(),
            text: String::from_utf8_lossy(bytes).into_owned(),
            settings: RunSettings {
                seed: settings.seed,
                mix: mix.collect(),
                order,
                survey: settings.survey,
                evaluations: settings.max_evaluations,
                seconds: allowed.map(|time| time.as_secs()),
                target: settings.target.map(|target| sign * target),
                coverage: settings.coverage,
                quiet: settings.quiet,
                fixed_shares: settings.mix.is_fixed(),
                given_points: settings.given.len(),
                given_digest: given.map(|table| digest(table.as_bytes())),
            },
            machine: machine(threads),
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

/// Given points as the table that `--from` reads.
fn points_table(problem: &Problem, points: &[Vec<f64>]) -> String {
    let landscape = problem.landscape();
    let names: Vec<String> =
        (0..landscape.slots.len()).map(|slot| format!("\"{}\"", landscape.slot_name(slot))).collect();
    let rows = points.iter().map(|point| point.iter().map(|x| format!("{x:e}")).collect::<Vec<_>>().join(","));
    let mut table = names.join(",");
    for row in rows {
        table.push('\n');
        table.push_str(&row);
    }
    table.push('\n');
    table
}

/// The threads of a hunt that was given none.
pub(crate) fn processors() -> usize {
    std::thread::available_parallelism().map_or(1, usize::from)
}
