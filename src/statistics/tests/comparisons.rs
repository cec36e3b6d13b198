//! Comparisons of trials: expected costs against the reference, false alarms and power by simulation.

use proptest::prelude::*;
use rand::RngExt;
use rand_chacha::ChaCha8Rng;

use super::{close, numbers, reference, tabulated};
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
    assert_eq!((one.cost, one.grounds), (910.0, Grounds::FewHits));
    // Clopper and Pearson: one of ten, 0.00253 to 0.44502.
    assert!((one.interval.low - (10.0 + 100.0 * 0.55498 / 0.44502)).abs() < 0.01, "{}", one.interval.low);
    assert!((one.interval.high / (10.0 + 100.0 * 0.99747 / 0.0025286) - 1.0).abs() < 1e-3, "{}", one.interval.high);
    assert_eq!(of(1, 0).unwrap().grounds, Grounds::Percentile, "a single trial has no jackknife");
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
    // With a hit rate that stays the same, all spent over hits has the mean cost as its truth, whatever the budget.
    let mut table = String::from("trials  chance to hit   holds  finite\n");
    for (size, trials) in [10, 25, 100].into_iter().enumerate() {
        for (place, chance) in [0.99, 0.8, 0.6, 0.4, 0.2, 0.1, 0.04].into_iter().enumerate() {
            let (mut holds, mut finite) = (0, 0);
            for comparison in 0..COMPARISONS {
                let mut random = random(100 + 10 * size as u64 + place as u64, comparison);
                let trials = hunt(trials, 1.0, -logarithm(1.0 - chance), &mut random);
                let Interval { low, high } =
                    expected_cost(&trials, Confidence::NINETY_FIVE, 400, &mut random).unwrap().interval;
                holds += u32::from(low <= 1.0 && 1.0 <= high);
                finite += u32::from(high.is_finite());
            }
            let percent = |count: u32| 100.0 * f64::from(count) / COMPARISONS as f64;
            table += &format!("{trials:>6} {chance:>14} {:>5.1} % {:>5.1} %\n", percent(holds), percent(finite));
            assert!(percent(holds) >= if trials == 10 { 80.0 } else { 91.0 }, "{table}");
        }
    }
    tabulated("expected_cost_calibration.txt", &table);
}

#[test]
fn false_alarms_stay_at_the_level() {
    let (least, most) = bounds(LEVEL);
    let mut table = String::from("trials  chance to hit  rank-sum  log-rank  any of three\n");
    for (case, (trials, chance)) in
        [(10, 0.99), (25, 0.99), (25, 0.6), (25, 0.2), (60, 0.6), (60, 0.2)].into_iter().enumerate()
    {
        let (mut rank, mut log, mut family) = (0, 0, 0);
        for comparison in 0..COMPARISONS {
            let mut random = random(10 + case as u64, comparison);
            let samples = [(); 3].map(|()| hunt(trials, 1.0, -logarithm(1.0 - chance), &mut random));
            let test = |a: usize, b: usize| rank_sum_of_trials(&samples[a], &samples[b]).unwrap().chance;
            let chances = [test(0, 1), test(0, 2), test(1, 2)];
            rank += u64::from(chances[0] <= LEVEL);
            log += u64::from(log_rank(&samples[0], &samples[1]).unwrap().chance <= LEVEL);
            family += u64::from(adjust_chances(&chances).unwrap().iter().any(|&chance| chance <= LEVEL));
            assert_eq!(test(0, 0), 1.0, "the same trials are no different");
        }
        let percent = |count: u64| 100.0 * count as f64 / COMPARISONS as f64;
        let figures = [rank, log, family].map(percent);
        table +=
            &format!("{trials:>6} {chance:>14} {:>7.2} % {:>7.2} % {:>11.2} %\n", figures[0], figures[1], figures[2]);
        // Few trials, and many ties, leave the exact test chances well below the level only.
        assert!(rank <= most && (least <= rank || trials == 10 || chance == 0.2), "{rank} of {COMPARISONS}\n{table}");
        assert!(log <= most && (least <= log || chance == 0.2), "{log} of {COMPARISONS}\n{table}");
        assert!(family <= most, "{family} of {COMPARISONS}\n{table}");
    }
    let (mut chi, mut closer, mut nemenyi, mut holm) = (0, 0, 0, 0);
    for comparison in 0..COMPARISONS {
        let mut random = random(20, comparison);
        let rows: Vec<Vec<f64>> = (0..10).map(|_| (0..4).map(|_| random.random()).collect()).collect();
        let test = friedman(&rows).unwrap();
        chi += u64::from(test.chance <= LEVEL);
        closer += u64::from(test.closer_chance <= LEVEL);
        nemenyi += u64::from(test.pairs.iter().any(|pair| pair.nemenyi <= LEVEL));
        holm += u64::from(test.pairs.iter().any(|pair| pair.holm <= LEVEL));
    }
    assert!(least <= closer && closer <= most, "{closer} of {COMPARISONS} by the F law");
    assert!(chi <= most && nemenyi <= most && holm <= most, "{chi}, {nemenyi}, {holm} of {COMPARISONS}");
    let figures = [chi, closer, nemenyi, holm].map(|count| 100.0 * count as f64 / COMPARISONS as f64);
    table += &format!(
        "ten problems, four heuristics: Friedman {:.2} %, by the F law {:.2} %, any pair by Nemenyi {:.2} %, by Holm {:.2} %\n",
        figures[0], figures[1], figures[2], figures[3]
    );
    tabulated("false_alarms.txt", &table);
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
    let holds = |comparison| {
        let mut random = random(31, comparison);
        let mut costs = |mean| hunt(25, mean, f64::MAX, &mut random).iter().map(|trial| trial.cost).collect::<Vec<_>>();
        let (first, second) = (costs(1.0), costs(2.0));
        effect_interval(&first, &second, Confidence::NINETY_FIVE).unwrap().contains(1.0 / 3.0)
    };
    let held = (0..COMPARISONS).filter(|&comparison| holds(comparison)).count() as f64 / COMPARISONS as f64;
    assert!((held - 0.95).abs() < 0.03, "intervals of the effect hold it in {held}");
    let (few, needed) = (power(25), power(48));
    assert!(0.45 < few && few < 0.6, "25 trials each find a factor of two in {few}");
    assert!((needed - 0.8).abs() < 0.06, "48 trials each: {needed}");
    // Two samples whose effect is just that, from the quantiles of their laws.
    let sample =
        |mean: f64| -> Vec<f64> { (0..300).map(|i| -mean * logarithm(1.0 - (f64::from(i) + 0.5) / 300.0)).collect() };
    let needed = trials_needed(&sample(1.0), &sample(2.0), Confidence::NINETY_FIVE, 0.8).unwrap().unwrap();
    assert!((46..=50).contains(&needed), "{needed}");
}

fn any_trials() -> impl Strategy<Value = Vec<Trial>> {
    let cost = prop_oneof![(0_u32..6).prop_map(f64::from), 0.0..1e9, Just(1e300)];
    prop::collection::vec((cost, any::<bool>()).prop_map(|(cost, hit)| Trial { cost, hit }), 1..40)
}

proptest! {
    #[test]
    fn any_trials_give_sound_figures(first in any_trials(), second in any_trials()) {
        let mut backwards = first.clone();
        backwards.reverse();
        let test = rank_sum_of_trials(&first, &second).unwrap();
        prop_assert_eq!(test, rank_sum_of_trials(&backwards, &second).unwrap());
        let swapped = rank_sum_of_trials(&second, &first).unwrap();
        prop_assert!((test.chance - swapped.chance).abs() < 1e-10 && 0.0 < test.chance && test.chance <= 1.0);
        prop_assert!((test.effect + swapped.effect - 1.0).abs() < 1e-14);

        let log = log_rank(&first, &second).unwrap();
        prop_assert!(0.0 <= log.chance && log.chance <= 1.0 && log.variance >= 0.0);
        prop_assert!((log.chance - log_rank(&second, &first).unwrap().chance).abs() < 1e-8);
        prop_assert_eq!(log_rank(&first, &first).unwrap().chance, 1.0);

        let steps = hit_distribution(&first, Confidence::NINETY_FIVE).unwrap();
        prop_assert!(steps.is_sorted_by(|a, b| a.cost < b.cost && a.share < b.share));
        for step in &steps {
            prop_assert!(0.0 < step.share && step.share <= 1.0);
            prop_assert!(0.0 <= step.interval.low && step.interval.contains(step.share) && step.interval.high <= 1.0);
        }
        let expected = expected_cost(&first, Confidence::NINETY_FIVE, 50, &mut random(6, 0)).unwrap();
        prop_assert!(expected.interval.low >= 0.0 && expected.interval.contains(expected.cost), "{expected:?}");
    }

    #[test]
    fn any_table_of_values_gives_sound_figures(
        rows in prop::collection::vec(prop::collection::vec(prop_oneof![(0_u32..4).prop_map(f64::from), 0.0..1.0], 4), 1..12),
    ) {
        let test = friedman(&rows).unwrap();
        prop_assert!((test.mean_ranks.iter().sum::<f64>() - 10.0).abs() < 1e-12);
        let chances = test.pairs.iter().flat_map(|pair| [pair.nemenyi, pair.holm]);
        for chance in chances.chain([test.chance, test.closer_chance]) {
            prop_assert!(0.0 <= chance && chance <= 1.0, "{test:?}");
        }
        let costs: Vec<Vec<f64>> = rows.iter().map(|row| row.iter().map(|value| 1.0 + value).collect()).collect();
        for profile in performance_profiles(&costs).unwrap() {
            prop_assert!(profile.steps.is_sorted_by(|a, b| a.0 < b.0 && a.1 < b.1));
            prop_assert_eq!(profile.steps.last().unwrap().1, 1.0);
        }
    }
}
