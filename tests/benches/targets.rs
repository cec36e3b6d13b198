//! Evaluations until the lowest published value is met: for each heuristic alone and for the default mix, over seeds.
//!
//! `cargo bench --bench targets` prints the whole table (hours); `-- --only cluster38,rastrigin10 --seeds 5 --mixes default`
//! a part of it; `-- --counts` the table of minima found, estimated and counted. What a seed cannot reach within the most evaluations counts with all that it spent (total spent over
//! hits), as `shared` budgets do in any comparison of this kind.

#![allow(clippy::print_stdout, reason = "a benchmark reports on standard output")]

use std::time::Instant;

use rayon::prelude::*;
use thalweg::Problem;
use thalweg::search::{Heuristic, Mix, Observer, RoundReport, Settings, Verdict};

#[path = "../suite/landscapes.rs"]
mod landscapes;

struct Patient;

impl Observer for Patient {
    fn round(&mut self, _: &RoundReport<'_>) -> Verdict {
        Verdict::Continue
    }
}

/// What one seed came to.
struct Trial {
    evaluations: u64,
    hit: bool,
    by: Option<Heuristic>,
}

fn main() {
    let arguments: Vec<String> = std::env::args().skip(1).filter(|argument| argument != "--bench").collect();
    let option = |name: &str| {
        let place = arguments.iter().position(|argument| argument == name)?;
        arguments.get(place + 1).cloned()
    };
    let only: Option<Vec<String>> = option("--only").map(|list| list.split(',').map(str::to_string).collect());
    let seeds: u64 = option("--seeds").map_or(20, |text| text.parse().expect("a number of seeds"));
    if arguments.iter().any(|argument| argument == "--counts") {
        return print_counts();
    }
    let mixes = option("--mixes").unwrap_or_else(|| "default multistart anneal evolve hop".to_string());
    let scale: f64 = option("--scale").map_or(1.0, |text| text.parse().expect("a factor"));
    println!(
        "{:<18} {:<12} {:>7} {:>10} {:>10} {:>10} {:>9}  hit by",
        "problem", "mix", "hits", "mean", "median", "goal", "seconds"
    );
    for case in landscapes::all() {
        if only.as_ref().is_some_and(|names| !names.iter().any(|name| case.name.starts_with(name.as_str()))) {
            continue;
        }
        let problem = thalweg::read(&case.name, &case.text, &[]).unwrap_or_else(|failure| panic!("{failure}"));
        for name in mixes.split_whitespace() {
            let mix = match name {
                "default" => Mix::default(),
                name => Mix::read(name).expect("known heuristics"),
            };
            let began = Instant::now();
            let trials: Vec<Trial> =
                (1..=seeds).into_par_iter().map(|seed| run(&problem, &case, &mix, seed, scale)).collect();
            let hits = trials.iter().filter(|trial| trial.hit).count();
            let total: u64 = trials.iter().map(|trial| trial.evaluations).sum();
            let mut sorted: Vec<u64> = trials.iter().map(|trial| trial.evaluations).collect();
            sorted.sort_unstable();
            let mean = if hits > 0 { (total as f64 / hits as f64).round().to_string() } else { "-".to_string() };
            let by: Vec<String> = Heuristic::ALL
                .iter()
                .filter_map(|&heuristic| {
                    let count = trials.iter().filter(|trial| trial.by == Some(heuristic)).count();
                    (count > 0).then(|| format!("{} {count}", heuristic.name()))
                })
                .collect();
            println!(
                "{:<18} {:<12} {:>4}/{:<2} {:>10} {:>10} {:>10} {:>9.1}  {}",
                case.name,
                name,
                hits,
                seeds,
                mean,
                sorted[sorted.len() / 2],
                case.goal.map_or("-".to_string(), |goal| goal.to_string()),
                began.elapsed().as_secs_f64(),
                by.join(", ")
            );
        }
    }
}

/// Landscapes whose minima are counted: Doye and Wales 2002 (clusters; 1,510 for 13 atoms is itself a finding of searches),
/// Himmelblau 1972, Shubert 1972 by its factors (with those on the bounds). Default mix and survey.
fn print_counts() {
    println!(
        "{:<12} {:>6} {:>12} {:>6} {:>10} {:>26} {:>20}",
        "landscape", "true", "evaluations", "found", "by survey", "covered (95 %)", "at least (95 %)"
    );
    let cluster = |n: usize| landscapes::cluster(n, 0.0, 0).text;
    let himmelblau = "unknown x in [-6, 6]\nunknown y in [-6, 6]\nminimise (x^2 + y - 11)^2 + (x + y^2 - 7)^2\n";
    let shubert = landscapes::all().into_iter().find(|case| case.name == "shubert2").expect("it is there").text;
    for (name, text, count, evaluations) in [
        ("himmelblau", himmelblau.to_string(), 4, 5_000),
        ("shubert2", shubert, 761, 300_000),
        ("9 atoms", cluster(9), 21, 1_000_000),
        ("10 atoms", cluster(10), 64, 2_000_000),
        ("11 atoms", cluster(11), 170, 4_000_000),
        ("12 atoms", cluster(12), 515, 8_000_000),
        ("13 atoms", cluster(13), 1510, 10_000_000),
    ] {
        let problem = thalweg::read(name, &text, &[]).unwrap_or_else(|failure| panic!("{failure}"));
        let settings = Settings { max_evaluations: Some(evaluations), ..Settings::default() };
        let outcome = problem.hunt(&settings, 2, &mut Patient).expect("threads");
        let told = thalweg::report::coverage(&outcome.ledger, outcome.descents[Heuristic::Survey.number()]);
        let (covered, basins) = (told.covered.expect("a survey"), told.basins.expect("a survey"));
        println!(
            "{name:<12} {count:>6} {:>12} {:>6} {:>10} {:>26} {:>20}",
            outcome.evaluations,
            outcome.ledger.len(),
            told.survey.distinct,
            format!("{:.4} ({:.4} to {:.4})", covered.share, covered.interval.low, covered.interval.high),
            format!("{:.0} ({:.0} to {:.0})", basins.at_least, basins.interval.low, basins.interval.high)
        );
    }
}

fn run(problem: &Problem, case: &landscapes::Case, mix: &Mix, seed: u64, scale: f64) -> Trial {
    let target = case.lowest + case.tolerance;
    let most = (case.most as f64 * scale) as u64;
    let settings =
        Settings { seed, mix: mix.clone(), target: Some(target), max_evaluations: Some(most), ..Settings::default() };
    let outcome = problem.hunt(&settings, 1, &mut Patient).expect("a thread");
    let lowest = outcome.ledger.entries().next();
    match lowest.filter(|entry| entry.value() <= target) {
        Some(entry) => {
            let first = entry.first();
            Trial { evaluations: first.evaluation, hit: true, by: Heuristic::ALL.get(first.heuristic).copied() }
        }
        None => Trial { evaluations: outcome.evaluations, hit: false, by: None },
    }
}
