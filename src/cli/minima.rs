//! `minima`: the distinct minima of a run.

use std::path::PathBuf;

use clap::Args;
use thalweg::report::{minima_csv, minima_text, read_minima_file, write_minima_file};
use thalweg::{Blame, Failure};

use super::command::End;
use super::screen::width;
use super::source::{read_file, run_folder};

/// The largest `minima.json` that is read.
const LARGEST: u64 = 2 << 30;

#[derive(Args)]
pub(crate) struct Minima {
    /// The run folder, or the name of a run in results/
    run: PathBuf,
    /// Prints all of them as JSON, in the form of minima.json
    #[arg(long, conflicts_with = "csv")]
    json: bool,
    /// Prints all of them as CSV
    #[arg(long)]
    csv: bool,
    /// How many the table shows at most
    #[arg(long, value_name = "N", default_value_t = 20)]
    most: usize,
}

impl Minima {
    pub(crate) fn run(&self) -> Result<End, Failure> {
        let folder = run_folder(&self.run)?;
        let path = folder.join("minima.json");
        let bytes = read_file(&path, LARGEST)?;
        let refused = |cause: String| Failure::new(Blame::Input, format!("{}: {cause}", path.display()));
        let text = String::from_utf8(bytes).map_err(|_| refused("it is not text".to_string()))?;
        let file = read_minima_file(&text).map_err(|error| refused(error.to_string()))?;
        let text = if self.json {
            write_minima_file(&file).map_err(|error| refused(error.to_string()))?
        } else if self.csv {
            minima_csv(&file).map_err(|error| refused(error.to_string()))?
        } else {
            minima_text(&file, self.most, width())
        };
        Ok(End { text, status: 0 })
    }
}
