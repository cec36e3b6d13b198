//! `run.json`: what was asked of a run, and how it ended; and the entries of its journal.

use std::collections::BTreeMap;

use serde::{Deserialize, Serialize};

use super::minima_file::{Format, Problem};

/// The whole file: one object, written at the beginning and again at the end.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct RunFile {
    /// `thalweg run`, version 2.
    pub format: Format,
    /// The version of the program.
    pub program: String,
    /// The problem.
    pub problem: Problem,
    /// The text of the problem.
    pub text: String,
    /// What decides the bits.
    pub settings: RunSettings,
    /// What only decides how long it takes.
    pub machine: RunMachine,
    /// How it ended; missing while it runs, or when it was killed.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub end: Option<RunEnd>,
}

/// The settings of a run.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct RunSettings {
    /// The seed.
    pub seed: u64,
    /// The heuristics with their shares, at the beginning, of what the survey leaves.
    pub mix: BTreeMap<String, f64>,
    /// Their order.
    pub order: Vec<String>,
    /// The share of evaluations that goes to the survey.
    pub survey: f64,
    /// The evaluations allowed.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub evaluations: Option<u64>,
    /// The seconds allowed.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub seconds: Option<u64>,
    /// The value that ends it, of the objective as written.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub target: Option<f64>,
    /// The coverage that ends it.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub coverage: Option<f64>,
    /// The evaluations without a lower value that end it.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub quiet: Option<u64>,
    /// Whether the shares of the mix stay as they are.
    #[serde(default)]
    pub fixed_shares: bool,
    /// Points that the user gave.
    pub given_points: usize,
    /// The SHA-256 of `given.csv`, which has them; missing where there are none.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub given_digest: Option<String>,
}

/// Where it ran.
#[derive(Clone, Debug, PartialEq, Eq, Serialize, Deserialize)]
pub struct RunMachine {
    /// Threads.
    pub threads: usize,
    /// The build of the interpreter.
    pub build: String,
}

/// The end of a run.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct RunEnd {
    /// `evaluations`, `target`, `coverage`, `quiet`, `time`, `interrupted` or `failed`.
    pub reason: String,
    /// Rounds merged.
    pub rounds: u64,
    /// Evaluations spent.
    pub evaluations: u64,
    /// Evaluations by heuristic.
    pub by_heuristic: BTreeMap<String, u64>,
    /// Evaluations spent on confirming minima.
    pub confirming: u64,
    /// Seconds that it took.
    pub seconds: f64,
}

/// The format of `run.json`.
pub fn run_format() -> Format {
    Format { name: "thalweg run".to_string(), version: 2 }
}

/// One line of the journal: the state after a round.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct JournalEntry {
    /// The round, from 0.
    pub round: u64,
    /// Evaluations so far.
    pub evaluations: u64,
    /// Evaluations so far by heuristic.
    pub by_heuristic: BTreeMap<String, u64>,
    /// Evaluations so far spent on confirming minima.
    pub confirming: u64,
    /// The lowest value so far, of the objective as written.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub lowest: Option<f64>,
    /// Distinct entries so far.
    pub distinct: u64,
    /// Those of them that are confirmed.
    pub confirmed: u64,
    /// The share of the next evaluations that each heuristic gets; `hop walk` and the like are the ways inside one, as parts
    /// of its turns.
    #[serde(default)]
    pub shares: BTreeMap<String, f64>,
    /// What its tasks came to, from which a hunt goes on (see `search::RoundRecord`).
    #[serde(default)]
    pub tasks: String,
}

/// Why `run.json` cannot be gone on from.
#[derive(Clone, Debug, PartialEq, Eq)]
pub enum RunFileError {
    /// It is not what this program writes.
    Unreadable(String),
    /// It is another format, or of an earlier version, which held too little.
    Earlier(u32),
    /// It is of a later version.
    Later(u32),
}

impl std::fmt::Display for RunFileError {
    fn fmt(&self, out: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        let own = run_format().version;
        match self {
            RunFileError::Unreadable(cause) => {
                write!(out, "this is not the run.json of a hunt ({cause}); put back a sound copy")
            }
            RunFileError::Earlier(version) => write!(
                out,
                "the run has format {version}, which recorded too little to go on from; this program needs {own}. Its minima can \
                 still be used: `thalweg hunt … --from RUN`"
            ),
            RunFileError::Later(version) => write!(
                out,
                "the run was written by a newer version of the program (format {version}, while this one knows {own}); \
                 go on with that version"
            ),
        }
    }
}

impl std::error::Error for RunFileError {}

/// Reads `run.json`.
///
/// # Errors
/// A [`RunFileError`] where it is damaged, or of another version.
pub fn read_run_file(text: &str) -> Result<RunFile, RunFileError> {
    #[derive(Deserialize)]
    struct Head {
        format: Format,
    }
    let unreadable = |error: serde_json::Error| RunFileError::Unreadable(error.to_string());
    // The version first: what a later one means by the rest is unknown.
    let head: Head = serde_json::from_str(text).map_err(unreadable)?;
    let own = run_format();
    if head.format.name != own.name {
        return Err(RunFileError::Unreadable(format!("its format is `{}`", head.format.name)));
    }
    match head.format.version {
        version if version > own.version => Err(RunFileError::Later(version)),
        version if version < own.version => Err(RunFileError::Earlier(version)),
        _ => serde_json::from_str(text).map_err(unreadable),
    }
}
