//! The search: published lowest values within a mean number of evaluations, nothing left to chance by threads, the survey
//! against published numbers of minima.
//!
//! These are the small forms; `cargo bench --bench targets` prints the whole table, whose last output is in DEVELOPERS.md.

use super::landscapes::{Case, all};
use super::support::{Patient, outcome};
use thalweg::ledger::Ledger;
use thalweg::report::coverage;
use thalweg::search::{Heuristic, Mix, Settings};

fn case(name: &str) -> Case {
    all().into_iter().find(|case| case.name == name).unwrap_or_else(|| panic!("no landscape `{name}`"))
}

/// The evaluations at which the target was met, by seed; panics for a seed that fails.
fn evaluations_to_target(case: &Case, mix: &Mix, seeds: u64) -> Vec<u64> {
    let problem = thalweg::read(&case.name, &case.text, &[]).unwrap();
    let target = case.lowest + case.tolerance;
    (1..=seeds)
        .map(|seed| {
            let settings = Settings {
                seed,
                mix: mix.clone(),
                target: Some(target),
                max_evaluations: Some(case.most),
                ..Settings::default()
            };
            let outcome = problem.hunt(&settings, 2, &mut Patient).unwrap();
            let lowest = outcome.ledger.entries().next().expect("something was met");
            assert!(lowest.value() <= target, "{} seed {seed}: {}", case.name, lowest.value());
            assert!(lowest.value() > case.lowest - 1e-4, "{}: below the published value", case.name);
            lowest.first().evaluation
        })
        .collect()
}

fn mean(counts: &[u64]) -> f64 {
    counts.iter().sum::<u64>() as f64 / counts.len() as f64
}

/// Lennard-Jones clusters of 13, 31 and 38 atoms from random starts; sources beside the values in
/// `tests/data/published/lennard_jones.csv`. The goals are means over 20 seeds; of few seeds twice as much is allowed.
#[test]
fn clusters_within_their_goals() {
    for (name, seeds) in [("cluster13", 10), ("cluster31", 4), ("cluster38", 4)] {
        let case = case(name);
        let goal = case.goal.expect("a goal") as f64;
        let counts = evaluations_to_target(&case, &Mix::default(), seeds);
        assert!(mean(&counts) <= 2.0 * goal, "{name}: {counts:?}");
    }
}

/// The general set as published, each within twice its goal on few seeds.
#[test]
fn the_general_set_within_its_goals() {
    for case in all().into_iter().filter(|case| case.tolerance == 1e-8 && case.goal.is_some()) {
        let goal = case.goal.expect("filtered") as f64;
        let counts = evaluations_to_target(&case, &Mix::default(), 5);
        assert!(mean(&counts) <= 2.0 * goal, "{}: {counts:?} for {goal}", case.name);
    }
}

/// Turned copies, which single unknowns at a time do not solve; the hardest is left to the whole table.
#[test]
fn turned_copies_are_solved() {
    for case in all().into_iter().filter(|case| case.name.ends_with("-turned")) {
        if case.name != "michalewicz10-turned" {
            evaluations_to_target(&case, &Mix::default(), 2);
        }
    }
}

/// Each heuristic alone solves what suits it, so that none is an ornament.
#[test]
fn every_heuristic_works_alone() {
    for (mix, name) in [
        ("multistart", "cluster13"),
        ("anneal", "shubert2"),
        ("anneal", "cluster13"),
        ("evolve", "cluster31"),
        ("evolve", "rastrigin10-turned"),
        ("hop", "cluster38"),
    ] {
        evaluations_to_target(&case(name), &Mix::read(mix).unwrap(), 2);
    }
}

/// The whole portfolio on a cloud and on a landscape without one: the same ledger for 1, 2 and 5 threads, bit for bit.
#[test]
fn threads_change_nothing() {
    for (name, evaluations) in [("cluster13", 60_000), ("michalewicz10", 60_000), ("polymer13", 30_000)] {
        let case = case(name);
        let settings = Settings { max_evaluations: Some(evaluations), ..Settings::default() };
        let ledgers: Vec<Vec<String>> =
            [1, 2, 5].iter().map(|&threads| bits(&outcome(&case.text, &settings, threads).ledger)).collect();
        assert!(ledgers[0].len() > 20, "{name}: {}", ledgers[0].len());
        assert!(ledgers[0] == ledgers[1] && ledgers[0] == ledgers[2], "{name}");
    }
}

fn bits(ledger: &Ledger) -> Vec<String> {
    let entry = |entry: thalweg::ledger::Entry<'_>| {
        let at: Vec<u64> = entry.at().iter().map(|x| x.to_bits()).collect();
        let hits: Vec<u64> = Heuristic::ALL.iter().map(|heuristic| entry.hits(heuristic.number())).collect();
        format!("{:x} {at:x?} {hits:?} {:?} {:?}", entry.value().to_bits(), entry.first(), entry.stiffness().len())
    };
    ledger.entries().map(entry).collect()
}

/// A mix with numbers keeps its shares; one without moves them.
#[test]
fn fixed_shares_stay() {
    let text = case("rastrigin10").text;
    let spent = |mix: &str| {
        let settings = Settings {
            mix: Mix::read(mix).unwrap(),
            survey: 0.2,
            max_evaluations: Some(100_000),
            ..Settings::default()
        };
        let by = outcome(&text, &settings, 2).by_heuristic;
        let total: u64 = by.iter().sum();
        Heuristic::ALL.map(|heuristic| by[heuristic.number()] as f64 / total as f64)
    };
    let fixed = spent("hop:0.25,multistart:0.75");
    assert!((fixed[Heuristic::Survey.number()] - 0.2).abs() < 0.02, "{fixed:?}");
    assert!((fixed[Heuristic::Hop.number()] - 0.2).abs() < 0.02, "{fixed:?}");
    assert!((fixed[Heuristic::Multistart.number()] - 0.6).abs() < 0.02, "{fixed:?}");
    let free = spent("hop,multistart");
    assert!(free[Heuristic::Hop.number()] > 0.5 && free[Heuristic::Multistart.number()] > 0.02, "{free:?}");
}

/// A survey alone on landscapes whose minima are counted: coverage and its interval make sense of what is not met, and
/// Chao's bound stays below the truth within its error. Counts: Doye and Wales 2002 (9 atoms: 21; 10: 64), Himmelblau
/// 1972 (4), Shubert 1972 by its factors (761 with those on the bounds).
#[test]
fn the_survey_against_counted_minima() {
    let shubert = case("shubert2").text;
    let himmelblau =
        "unknown x in [-6, 6]\nunknown y in [-6, 6]\nminimise (x^2 + y - 11)^2 + (x + y^2 - 7)^2\n".to_string();
    let cluster = |n: usize| super::landscapes::cluster(n, 0.0, 0).text;
    for (text, count, evaluations) in
        [(cluster(9), 21, 200_000), (cluster(10), 64, 200_000), (himmelblau, 4, 5_000), (shubert, 761, 30_000)]
    {
        let settings = Settings { survey: 1.0, max_evaluations: Some(evaluations), ..Settings::default() };
        let outcome = outcome(&text, &settings, 2);
        let told = coverage(&outcome.ledger, outcome.descents[Heuristic::Survey.number()]);
        let (covered, basins) = (told.covered.unwrap(), told.basins.unwrap());
        assert!(told.survey.distinct <= count && told.survey.descents > 100);
        assert!(basins.interval.low <= count as f64, "{} met of {count}: {basins:?}", told.survey.distinct);
        assert!(covered.interval.low <= covered.share && covered.share <= covered.interval.high);
        if told.survey.distinct == count && told.survey.met_once == 0 {
            assert!(covered.interval.high == 1.0 && basins.at_least == count as f64);
        }
        let curve = &told.curve;
        let own = curve.iter().find(|point| point.starts == told.survey.descents).unwrap();
        assert!((own.basins - told.survey.distinct as f64).abs() < 1e-6);
        assert!(curve.windows(2).all(|pair| pair[0].basins <= pair[1].basins + 1e-9));
        assert!((told.shares.iter().map(|share| share.descents).sum::<u64>()) <= told.survey.descents);
    }
}

/// The same landscape under conditions of ending: the coverage reached is the one asked for, with its confidence; a quiet
/// hunt ends so many evaluations after its last lower value, within a round.
#[test]
fn conditions_end_hunts() {
    let text = case("cluster13").text;
    let settings = Settings { coverage: Some(0.6), max_evaluations: Some(3_000_000), ..Settings::default() };
    let ended = outcome(&text, &settings, 2);
    assert_eq!(ended.ending, thalweg::search::Ending::Coverage);
    let told = coverage(&ended.ledger, ended.descents[Heuristic::Survey.number()]);
    assert!(told.covered.unwrap().interval.low >= 0.59);
    let settings = Settings { quiet: Some(20_000), max_evaluations: Some(3_000_000), ..Settings::default() };
    let ended = outcome(&text, &settings, 2);
    assert_eq!(ended.ending, thalweg::search::Ending::Quiet);
    let last = ended.ledger.entries().next().unwrap().first().evaluation;
    assert!(ended.evaluations >= last + 20_000 && ended.evaluations < last + 40_000, "{last} {}", ended.evaluations);
}
