//! `check`: is the problem sound, and what does it cost?

use std::path::PathBuf;
use std::time::{Duration, Instant};

use clap::Args;
use thalweg::report::{check_json, check_text};
use thalweg::{Failure, Problem, read_bytes};

use super::command::End;
use super::screen::warn;
use super::source::{LARGEST_PROBLEM, read_file};
use super::values::given;

/// How long the speed is measured: long enough to be right to a few per cent, too short to be waited for.
const MEASURED: Duration = Duration::from_millis(20);
/// A smooth gradient that disagrees more than this with differences is not to be trusted.
const TRUSTED: f64 = 1e-4;

#[derive(Args)]
pub(crate) struct Check {
    /// The problem file
    file: PathBuf,
    /// Replaces a given of the file: n=38 (may be repeated)
    #[arg(long = "given", value_name = "NAME=NUMBER", value_parser = given)]
    givens: Vec<(String, f64)>,
    /// Prints the facts as JSON
    #[arg(long)]
    json: bool,
}

impl Check {
    pub(crate) fn run(&self) -> Result<End, Failure> {
        let bytes = read_file(&self.file, LARGEST_PROBLEM)?;
        let problem = read_bytes(&self.file.display().to_string(), &bytes, &self.givens)?;
        if !problem.rendered_warnings().is_empty() {
            warn(problem.rendered_warnings().trim_end());
        }
        let mut facts = problem.check();
        facts.evaluations_a_second = Some(speed(&problem));
        let distrusted = !facts.kinked && facts.gradient.worst > TRUSTED;
        // A false promise would make the ledger merge different answers: the problem is refused.
        let status = if facts.broken.is_empty() { u8::from(distrusted) } else { 2 };
        Ok(End { text: if self.json { check_json(&facts) } else { check_text(&facts) }, status })
    }
}

fn speed(problem: &Problem) -> f64 {
    let (began, mut evaluations, mut batches) = (Instant::now(), 0, 1);
    while began.elapsed() < MEASURED {
        evaluations += problem.exercise(batches);
        batches *= 2;
    }
    evaluations as f64 / began.elapsed().as_secs_f64()
}
