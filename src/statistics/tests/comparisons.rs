//! Comparisons of trials: expected costs against the reference, false alarms and power by simulation.

use rand::RngExt;
use rand_chacha::ChaCha8Rng;

use super::{close, numbers, reference};
use crate::base::random::{Purpose, stream};
use crate::numbers::functions::logarithm;
use crate::statistics::*;

const LEVEL: f64 = 0.05;
/// Simulated comparisons.
const COMPARISONS: u64 = 400;

fn random(purpose: u64, comparison: u64) -> ChaCha8Rng {
    stream(5, purpose, comparison, Purpose::Check)
}

/// Trials of a heuristic that hits at a constant rate, with this mean cost, up to a budget.
fn hunt(count: usize, mean: f64, budget: f64, random: &mut ChaCha8Rng) -> Vec<Trial> {
    let mut trial = || {
        let cost = -mean * logarithm(1.0 - random.random::<f64>());
        if cost < budget { Trial { cost, hit: true } } else { Trial { cost: budget, hit: false } }
    };
    (0..count).map(|_| trial()).collect()
}

/// The bounds that a count of COMPARISONS at this chance keeps in 99 of 100 cases.
fn bounds(chance: f64) -> (u64, u64) {
    let half = 2.576 * (COMPARISONS as f64 * chance * (1.0 - chance)).sqrt();
    let middle = COMPARISONS as f64 * chance;
    ((middle - half).ceil() as u64, (middle + half).floor() as u64)
}

#[test]
fn expected_costs_match_the_reference() {
    let cases = reference("statistics.json")["kaplan_meier_and_ert"].as_array().unwrap().clone();
    assert_eq!(cases.len(), 10);
    for case in cases {
        let name = case["name"].as_str().unwrap();
        let (costs, hits) = (numbers(&case["time"]), numbers(&case["event"]));
        let trials: Vec<Trial> =
            costs.into_iter().zip(hits).map(|(cost, hit)| Trial { cost, hit: hit == 1.0 }).collect();
        let expected = expected_cost(&trials, Confidence::NINETY_FIVE, 500, &mut random(1, 0)).unwrap();
        close(expected.hits as f64, &case["successes"], 0.0, name);
        if expected.hits > 0 {
            close(expected.cost, &case["ert_total_over_successes"], 1e-15, name);
        } else {
            assert_eq!((expected.cost, expected.grounds), (f64::INFINITY, Grounds::NoHit), "{name}");
            assert!(expected.interval.low > 0.0 && expected.interval.high.is_infinite());
        }
        assert!(expected.interval.contains(expected.cost), "{name}");
        let again = expected_cost(&trials, Confidence::NINETY_FIVE, 500, &mut random(1, 0)).unwrap();
        assert_eq!(expected, again);
    }
}

#[test]
fn resampled_intervals_match_the_library() {
    let file = reference("resampling.json");
    let trial = |pair: &serde_json::Value| Trial { cost: pair[0].as_f64().unwrap(), hit: pair[1] == 1 };
    let trials: Vec<Trial> = file["trials"].as_array().unwrap().iter().map(trial).collect();
    for (level, interval) in file["intervals"].as_object().unwrap() {
        let confidence = Confidence::new(level.parse().unwrap()).unwrap();
        let expected = expected_cost(&trials, confidence, 100_000, &mut random(2, 0)).unwrap();
        assert_eq!(expected.grounds, Grounds::BiasCorrected);
        // Both resample: their upper ends scatter by about 1 % from stream to stream.
        for (end, reference) in [expected.interval.low, expected.interval.high].into_iter().zip(numbers(interval)) {
            assert!((end / reference - 1.0).abs() < 0.04, "{level}: {end}, not {reference}");
        }
    }
}

#[test]
fn expected_costs_at_the_edges() {
    let make = |hits: usize, misses: usize| {
        let hit = Trial { cost: 10.0, hit: true };
        [vec![hit; hits], vec![Trial { cost: 100.0, hit: false }; misses]].concat()
    };
    let of = |hits, misses| expected_cost(&make(hits, misses), Confidence::NINETY_FIVE, 2000, &mut random(3, 0));
    let all = of(6, 0).unwrap();
    assert_eq!((all.cost, all.interval), (10.0, Interval { low: 10.0, high: 10.0 }), "all alike: nothing to vary");
    let none = of(0, 10).unwrap();
    // One-sided: ten misses allow a chance of 1 - 0.05^(1/10) = 0.2589.
    assert!((none.interval.low - 100.0 / 0.2588655509).abs() < 1e-6, "{}", none.interval.low);
    let one = of(1, 9).unwrap();
    assert_eq!((one.cost, one.grounds), (910.0, Grounds::Percentile), "without the hit there is no jackknife");
    assert!(one.interval.high.is_infinite() && one.interval.low < 910.0);
    let single = of(1, 0).unwrap();
    assert_eq!((single.cost, single.trials), (10.0, 1));
    assert_eq!(expected_cost(&[], Confidence::NINETY_FIVE, 9, &mut random(3, 0)), Err(StatisticsError::Empty));
    let endless = [Trial { cost: f64::INFINITY, hit: false }];
    assert!(expected_cost(&endless, Confidence::NINETY_FIVE, 9, &mut random(3, 0)).is_err());
    let low = Confidence::new(0.3).unwrap();
    assert!(expected_cost(&make(0, 3), low, 9, &mut random(3, 0)).unwrap().interval.low >= 100.0);
}

#[test]
fn intervals_of_the_expected_cost_hold_the_truth() {
    // 25 trials; with a rate that stays the same, all spent over hits has the mean cost as its truth whatever the budget.
    for (budget, least) in [(5.0, 0.92), (1.0, 0.92), (0.3, 0.90)] {
        let holds = |comparison| {
            let mut random = random(4, comparison);
            let trials = hunt(25, 1.0, budget, &mut random);
            let expected = expected_cost(&trials, Confidence::NINETY_FIVE, 1000, &mut random).unwrap();
            expected.interval.contains(1.0)
        };
        let share = (0..COMPARISONS).filter(|&comparison| holds(comparison)).count() as f64 / COMPARISONS as f64;
        assert!(share >= least, "budget {budget}: {share}");
    }
}

#[test]
fn false_alarms_stay_at_the_level() {
    let (least, most) = bounds(LEVEL);
    // Trials, budget in mean costs: all hit nearly; a third of trials censored; three in four censored (no lower bound
    // there: ties make the exact test keep below the level).
    for (case, (trials, budget, tied)) in
        [(25, 9.0, false), (25, 1.1, false), (25, 0.3, true), (60, 1.1, false)].into_iter().enumerate()
    {
        let (mut rank, mut log, mut both) = (0, 0, 0);
        for comparison in 0..COMPARISONS {
            let mut random = random(10 + case as u64, comparison);
            let first = hunt(trials, 1.0, budget, &mut random);
            let second = hunt(trials, 1.0, budget, &mut random);
            let third = hunt(trials, 1.0, budget, &mut random);
            let test = |a: &[Trial], b: &[Trial]| rank_sum_of_trials(a, b).unwrap().chance;
            let chance = test(&first, &second);
            rank += u64::from(chance <= LEVEL);
            log += u64::from(log_rank(&first, &second).unwrap().chance <= LEVEL);
            let family = adjust_chances(&[chance, test(&first, &third), test(&second, &third)]).unwrap();
            both += u64::from(family.iter().any(|&chance| chance <= LEVEL));
            assert!(test(&first, &first) == 1.0, "the same trials are no different");
        }
        assert!(rank <= most && (tied || least <= rank), "case {case}: {rank} of {COMPARISONS} by ranks");
        assert!(log <= most && (tied || least <= log), "case {case}: {log} of {COMPARISONS} by log-rank");
        assert!(both <= most, "case {case}: {both} of {COMPARISONS} in families of three");
    }
}

#[test]
fn false_alarms_over_problems_stay_at_the_level() {
    let (least, most) = bounds(LEVEL);
    let (mut plain, mut closer, mut nemenyi, mut holm) = (0, 0, 0, 0);
    for comparison in 0..COMPARISONS {
        let mut random = random(20, comparison);
        let rows: Vec<Vec<f64>> = (0..10).map(|_| (0..4).map(|_| random.random()).collect()).collect();
        let test = friedman(&rows).unwrap();
        plain += u64::from(test.chance <= LEVEL);
        closer += u64::from(test.closer_chance <= LEVEL);
        nemenyi += u64::from(test.pairs.iter().any(|pair| pair.nemenyi <= LEVEL));
        holm += u64::from(test.pairs.iter().any(|pair| pair.holm <= LEVEL));
    }
    assert!(least <= closer && closer <= most, "{closer} by the F law");
    assert!(plain <= most && nemenyi <= most && holm <= most, "{plain}, {nemenyi}, {holm}");
}

#[test]
fn a_known_difference_is_found_with_the_stated_power() {
    // Twice the mean cost is an effect of 1/3: Noether's 48 trials each for a power of 0.8.
    let power = |trials| {
        let found = |comparison| {
            let mut random = random(30, comparison);
            let first = hunt(trials, 1.0, f64::MAX, &mut random);
            let second = hunt(trials, 2.0, f64::MAX, &mut random);
            rank_sum_of_trials(&first, &second).unwrap().chance <= LEVEL
        };
        (0..COMPARISONS).filter(|&comparison| found(comparison)).count() as f64 / COMPARISONS as f64
    };
    let (few, needed) = (power(25), power(48));
    assert!(0.45 < few && few < 0.6, "25 trials each find a factor of two in {few}");
    assert!((needed - 0.8).abs() < 0.06, "48 trials each: {needed}");
    // Two samples whose effect is just that, from the quantiles of their laws.
    let sample =
        |mean: f64| -> Vec<f64> { (0..300).map(|i| -mean * logarithm(1.0 - (f64::from(i) + 0.5) / 300.0)).collect() };
    let needed = trials_needed(&sample(1.0), &sample(2.0), Confidence::NINETY_FIVE, 0.8).unwrap().unwrap();
    assert!((46..=50).contains(&needed), "{needed}");
}
