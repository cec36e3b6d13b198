//! What the tests share.

use std::fs;
use std::path::Path;
use std::sync::Arc;

use thalweg::kernel::{Kernel, compile};
use thalweg::landscape::{Landscape, check};
use thalweg::language::{parse, render};
use thalweg::search::{Observer, Outcome, RoundReport, Settings, Verdict};

/// The landscape of a problem text.
pub fn landscape(text: &str) -> Landscape {
    let parsed = parse(text);
    assert!(parsed.diagnostics.is_empty(), "{}", render("test.land", text, &parsed.diagnostics));
    let checked = check(&parsed.file, &[]).unwrap();
    checked.landscape.unwrap_or_else(|| panic!("{}", render("test.land", text, &checked.diagnostics)))
}

/// A landscape and its kernel.
pub fn kernel(text: &str) -> (Landscape, Arc<Kernel>) {
    let landscape = landscape(text);
    let kernel = compile(&landscape).unwrap_or_else(|error| panic!("{error}"));
    (landscape, Arc::new(kernel))
}

/// Lets a hunt run to the end of its settings.
pub struct Patient;

impl Observer for Patient {
    fn round(&mut self, _: &RoundReport<'_>) -> Verdict {
        Verdict::Continue
    }
}

/// A whole hunt.
pub fn outcome(text: &str, settings: &Settings, threads: usize) -> Outcome {
    let (landscape, kernel) = kernel(text);
    thalweg::search::hunt(&landscape, &kernel, settings, threads, &mut Patient).unwrap()
}

/// A minimum that a hunt found.
#[derive(Clone, Debug)]
#[allow(dead_code, reason = "fields are there to be printed where a test fails")]
pub struct Found {
    pub value: f64,
    pub at: Vec<f64>,
    pub confirmed: bool,
    pub stiffness: Vec<f64>,
    pub residual: f64,
    pub active: Vec<usize>,
    pub hits: u64,
}

/// The minima that a hunt on two threads finds, lowest first.
pub fn hunt(text: &str, settings: &Settings) -> Vec<Found> {
    let outcome = outcome(text, settings, 2);
    let found = outcome.ledger.entries().map(|entry| Found {
        value: entry.value(),
        at: entry.at().to_vec(),
        confirmed: entry.confirmed().is_some(),
        stiffness: entry.stiffness().to_vec(),
        residual: entry.residual(),
        active: entry.active().to_vec(),
        hits: entry.total_hits(),
    });
    let found: Vec<Found> = found.collect();
    assert!(!found.is_empty(), "nothing found: {:?}", outcome.troubles);
    found
}

/// The lowest value.
pub fn lowest(found: &[Found]) -> f64 {
    found[0].value
}

/// A published table of a number and a value.
pub fn table(name: &str) -> Vec<(usize, f64)> {
    let path = Path::new(env!("CARGO_MANIFEST_DIR")).join("tests/data/published").join(name);
    let text = fs::read_to_string(path).unwrap();
    let rows = text.lines().filter(|line| !line.starts_with('#') && !line.starts_with("n,"));
    rows.map(|row| row.split_once(',').unwrap())
        .map(|(n, value)| (n.parse().unwrap(), value.parse().unwrap()))
        .collect()
}
