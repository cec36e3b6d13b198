//! Costs to hit with censored trials: their empirical distribution, and a test for two.

use super::interval::{Confidence, Interval, StatisticsError};
use super::laws::chi_square_tail;
use super::trials::{Trial, check};
use crate::base::order::Total;
use crate::numbers::functions::{exponential, logarithm};

/// A step of the empirical distribution of the cost to hit.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct HitStep {
    /// The cost.
    pub cost: f64,
    /// Trials that had neither hit nor been given up below this cost.
    pub at_risk: usize,
    /// Trials that hit at this cost.
    pub hits: usize,
    /// The estimated share of trials that hit at this cost or below, were none given up.
    pub share: f64,
    /// The variance of that (Greenwood 1926); 0 where the share is 1, which says nothing.
    pub variance: f64,
    /// The pointwise interval of the log-log form (Kalbfleisch and Prentice 1980); where the share is 1 its lower end is
    /// the one before.
    pub interval: Interval,
}

/// The empirical distribution of the cost to hit (Kaplan and Meier 1958): one step a cost at which trials hit.
///
/// Assumes that trials are given up for reasons that do not tell of their next hit, as with a budget. A trial given up at
/// the cost of another's hit counts as at risk there. Between steps the share stays; below the first it is 0; beyond the
/// costliest trial given up nothing is known. Without hits there are no steps.
///
/// # Errors
///
/// No trials, or an unusable cost.
///
/// ```
/// use thalweg::statistics::{Confidence, Trial, hit_distribution};
/// let trials = [(2.0, true), (3.0, false), (5.0, true)].map(|(cost, hit)| Trial { cost, hit });
/// let steps = hit_distribution(&trials, Confidence::NINETY_FIVE)?;
/// assert!((steps[0].share - 1.0 / 3.0).abs() < 1e-15 && steps[1].share == 1.0);
/// # Ok::<(), thalweg::statistics::StatisticsError>(())
/// ```
pub fn hit_distribution(trials: &[Trial], confidence: Confidence) -> Result<Vec<HitStep>, StatisticsError> {
    check(trials)?;
    let mut sorted = trials.to_vec();
    sorted.sort_by_key(|trial| Total(trial.cost));
    let z = confidence.deviations();
    let mut steps: Vec<HitStep> = Vec::new();
    let (mut at_risk, mut left, mut sum) = (sorted.len(), 1.0, 0.0);
    let mut low = 0.0;
    for tied in sorted.chunk_by(|a, b| a.cost == b.cost) {
        let hits = tied.iter().filter(|trial| trial.hit).count();
        if hits > 0 {
            let (r, d) = (at_risk as f64, hits as f64);
            left *= (r - d) / r;
            sum += d / (r * (r - d));
            let variance = if left > 0.0 { left * left * sum } else { 0.0 };
            let mut high = 1.0;
            if left > 0.0 {
                let exponent = z * sum.sqrt() / -logarithm(left);
                let power = |exponent: f64| exponential(logarithm(left) * exponential(exponent));
                low = 1.0 - power(-exponent);
                high = 1.0 - power(exponent);
            }
            let interval = Interval { low, high };
            steps.push(HitStep { cost: tied[0].cost, at_risk, hits, share: 1.0 - left, variance, interval });
        }
        at_risk -= tied.len();
    }
    Ok(steps)
}

/// The log-rank test.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct LogRank {
    /// Hits of the first sample.
    pub observed: f64,
    /// Hits of the first sample expected were both of one law.
    pub expected: f64,
    /// The variance of their difference (hypergeometric).
    pub variance: f64,
    /// The squared difference over the variance.
    pub chi_square: f64,
    /// The chance of so large a difference were both of one law; 1 where nothing could be compared.
    pub chance: f64,
}

/// The log-rank test (Mantel 1966; Peto and Peto 1972) of two samples of trials, both sides, for any budgets.
///
/// Assumes that trials are given up for reasons that do not tell of their next hit. The chance is that of the chi-square
/// law with one degree, good from about ten hits on. It sees best a hit rate that is a constant multiple of the other.
///
/// # Errors
///
/// No trials, or an unusable cost.
pub fn log_rank(first: &[Trial], second: &[Trial]) -> Result<LogRank, StatisticsError> {
    check(first)?;
    check(second)?;
    let mut sorted: Vec<(Trial, bool)> =
        first.iter().map(|&trial| (trial, true)).chain(second.iter().map(|&trial| (trial, false))).collect();
    sorted.sort_by_key(|(trial, _)| Total(trial.cost));
    let (mut own, mut all) = (first.len() as f64, sorted.len() as f64);
    let (mut observed, mut expected, mut variance) = (0.0, 0.0, 0.0);
    for tied in sorted.chunk_by(|a, b| a.0.cost == b.0.cost) {
        let hits = tied.iter().filter(|(trial, _)| trial.hit).count() as f64;
        if hits > 0.0 {
            observed += tied.iter().filter(|(trial, own)| trial.hit && *own).count() as f64;
            expected += hits * own / all;
            if all > 1.0 {
                variance += hits * (own / all) * ((all - own) / all) * ((all - hits) / (all - 1.0));
            }
        }
        own -= tied.iter().filter(|(_, own)| *own).count() as f64;
        all -= tied.len() as f64;
    }
    let difference = observed - expected;
    let chi_square = if variance > 0.0 { difference * difference / variance } else { 0.0 };
    Ok(LogRank { observed, expected, variance, chi_square, chance: chi_square_tail(chi_square, 1.0) })
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::statistics::tests::{close, numbers, reference, table};

    fn read(case: &serde_json::Value) -> Vec<Trial> {
        let (costs, hits) = (numbers(&case["time"]), numbers(&case["event"]));
        costs.into_iter().zip(hits).map(|(cost, hit)| Trial { cost, hit: hit == 1.0 }).collect()
    }

    fn cases() -> Vec<(String, Vec<Trial>, serde_json::Value)> {
        let file = reference("statistics.json");
        let cases = file["kaplan_meier_and_ert"].as_array().unwrap();
        assert_eq!(cases.len(), 10);
        cases.iter().map(|case| (case["name"].as_str().unwrap().to_string(), read(case), case.clone())).collect()
    }

    #[test]
    fn distributions_match_the_reference() {
        for (name, trials, case) in cases() {
            let steps = hit_distribution(&trials, Confidence::NINETY_FIVE).unwrap();
            let rows = case["km_rows_time_atrisk_events_S_greenwoodvar"].as_array().unwrap();
            assert_eq!(steps.len(), rows.len(), "{name}");
            for (step, row) in steps.iter().zip(rows) {
                close(step.cost, &row[0], 1e-15, &name);
                close(step.at_risk as f64, &row[1], 1e-15, &name);
                close(step.hits as f64, &row[2], 1e-15, &name);
                close(1.0 - step.share, &row[3], 1e-14, &name);
                // The library has no variance where nothing is left.
                if row[4].is_number() {
                    close(step.variance, &row[4], 1e-14, &name);
                }
                assert!(step.interval.contains(step.share), "{name} {step:?}");
            }
        }
    }

    #[test]
    fn log_log_intervals_match_the_library() {
        let trials = &cases()[0].1;
        let steps = hit_distribution(trials, Confidence::NINETY_FIVE).unwrap();
        let rows = table("log_log_intervals.txt");
        assert_eq!(rows.len(), steps.len());
        for (step, row) in steps.iter().zip(rows) {
            assert_eq!(step.cost, row[0]);
            assert!(
                (1.0 - step.interval.high - row[1]).abs() < 1e-12 && (1.0 - step.interval.low - row[2]).abs() < 1e-12
            );
        }
    }

    #[test]
    fn log_rank_matches_the_published_value() {
        let file = reference("statistics.json");
        let expected = &file["logrank_freireich"];
        let cases = cases();
        let test = log_rank(&cases[0].1, &cases[1].1).unwrap();
        close(test.chi_square, &expected["chi2"], 1e-12, "library");
        close(test.chance, &expected["p"], 1e-15, "library");
        assert!((test.chi_square - expected["published_chi2"].as_f64().unwrap()).abs() < 5e-3, "published: 16.79");
        let swapped = log_rank(&cases[1].1, &cases[0].1).unwrap();
        assert!((swapped.chi_square - test.chi_square).abs() < 1e-12);
    }

    #[test]
    fn nothing_and_everything_hit() {
        let none = [Trial { cost: 10.0, hit: false }; 4];
        assert!(hit_distribution(&none, Confidence::NINETY_FIVE).unwrap().is_empty());
        assert_eq!(log_rank(&none, &none).unwrap().chance, 1.0);
        let all: Vec<Trial> = (1..5).map(|i| Trial { cost: f64::from(i), hit: true }).collect();
        let steps = hit_distribution(&all, Confidence::NINETY_FIVE).unwrap();
        assert_eq!(steps.iter().map(|step| step.share).collect::<Vec<_>>(), [0.25, 0.5, 0.75, 1.0]);
        assert_eq!(steps[3].interval.high, 1.0);
        assert!(log_rank(&all, &none).unwrap().chance < 0.02);
        assert_eq!(log_rank(&all, &all).unwrap().chi_square, 0.0);
        assert_eq!(log_rank(&[], &all), Err(StatisticsError::Empty));
    }
}
