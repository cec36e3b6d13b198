//! `look`: where a hunt stands, from another terminal.

use std::path::PathBuf;

use clap::Args;
use thalweg::report::{Status, plain};
use thalweg::run::RunFolder;
use thalweg::{Blame, Failure};

use super::command::End;
use super::display::{clock, rounded};
use super::resume::why_ended;
use super::source::{read_file, run_folder};

/// The largest `status.json`.
const LARGEST: u64 = 1 << 20;

#[derive(Args)]
pub(crate) struct Look {
    /// The run folder, or the name of a run in results/
    run: PathBuf,
    /// Prints status.json
    #[arg(long)]
    json: bool,
}

impl Look {
    pub(crate) fn run(&self) -> Result<End, Failure> {
        let folder = RunFolder::of(&run_folder(&self.run)?);
        let path = folder.path().join("status.json");
        let refused = |cause: String| Failure::new(Blame::Input, format!("{}: {cause}", path.display()));
        let text = String::from_utf8(read_file(&path, LARGEST)?).map_err(|_| refused("it is not text".to_string()))?;
        let status: Status = serde_json::from_str(&text).map_err(|error| {
            refused(format!("this is not the status of a hunt ({error}); wait a second, and look again"))
        })?;
        let text = if self.json { text } else { lines(&status, &folder) };
        Ok(End { text, status: 0 })
    }
}

fn lines(status: &Status, folder: &RunFolder) -> String {
    let shown = folder.path().display();
    let state = match (&status.reason, folder.is_locked()) {
        (Some(reason), _) => format!("ended: {}", why_ended(reason)),
        (None, true) => "hunting".to_string(),
        (None, false) => format!("not at work: it was killed; go on with `thalweg resume {shown}`"),
    };
    let seconds = |seconds: f64| clock(std::time::Duration::try_from_secs_f64(seconds).unwrap_or_default());
    let of_time = status.allowed_seconds.map_or_else(String::new, |most| format!(" of {}", seconds(most as f64)));
    let of = status.allowed_evaluations.map_or_else(String::new, |most| format!(" of {}", rounded(most as f64)));
    let mut text = format!(
        "{shown}  {state}\n{}{of_time}  {}{of} evaluations, {} a second\n",
        seconds(status.seconds),
        rounded(status.evaluations as f64),
        rounded(status.evaluations_a_second)
    );
    if let Some(lowest) = &status.lowest {
        let word = if status.maximise { "highest" } else { "lowest" };
        let (who, when) = (plain(&lowest.heuristic), rounded(lowest.evaluation as f64));
        text.push_str(&format!("{word} {:.9} by {who} at {when}\n", lowest.value));
    }
    text.push_str(&format!("{} distinct minima, {} confirmed\n", status.distinct, status.confirmed));
    let total = status.evaluations.max(1) as f64;
    let share = |(name, spent): (&String, &u64)| format!("{} {:.0} %", plain(name), 100.0 * *spent as f64 / total);
    text.push_str(&status.by_heuristic.iter().map(share).collect::<Vec<_>>().join(", "));
    text.push('\n');
    if let Some(fault) = &status.fault {
        text.push_str(&format!("{}\n", plain(fault)));
    }
    text
}
