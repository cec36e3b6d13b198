//! Two independent samples: do values of one tend to be lower?

use super::interval::{Confidence, Interval, StatisticsError};
use super::laws::normal_tail;
use super::ranks::{midranks, tie_sum};
use super::trials::{Trial, check};

/// Up to this product of the size of both samples and of the smaller the null distribution is worked out exactly (up to
/// 31 against 31); the time grows with its square, to a few milliseconds at the limit.
const EXACT_LIMIT: usize = 2000;

/// How a chance was worked out.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum NullLaw {
    /// Over all ways to deal the values (with their ties) to the two samples.
    Exact,
    /// Normal, with corrections for ties and continuity.
    Normal,
}

/// The rank-sum test and its effect size.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct RankSum {
    /// Pairs in which the first sample's value is higher, ties counting half (Mann and Whitney 1947).
    pub u: f64,
    /// The same over all pairs: the chance that the first sample's value is higher, ties counting half (Vargha and
    /// Delaney 2000); 1/2 means no tendency. Where lower is better, below 1/2 speaks for the first sample. They
    /// call 0.56, 0.64 and 0.71 (and their mirror images) small, medium and large.
    pub effect: f64,
    /// The chance of a difference at least as large, in either direction, were both samples of one law.
    pub chance: f64,
    /// How the chance was worked out.
    pub law: NullLaw,
}

/// The rank-sum test of Wilcoxon (1945) and Mann and Whitney (1947), both sides.
///
/// Assumes independent values within and between the samples. Small samples are dealt exactly, ties included (the
/// permutation test of midranks; Lehmann 1975): the chance is that of a `u` at least as far from its mean. Larger ones
/// use the normal law with the variance corrected for ties and half a step of continuity. It tests that neither tends
/// to be lower; with equal tendencies and unequal spreads it is not exact.
///
/// # Errors
///
/// An empty sample, or a value that is not a number. Infinite values tie with each other at the worst end.
///
/// ```
/// use thalweg::statistics::rank_sum;
/// let apart = rank_sum(&[1.0, 2.0, 3.0, 4.0, 5.0], &[6.0, 7.0, 8.0, 9.0, 10.0])?;
/// assert_eq!((apart.u, apart.effect), (0.0, 0.0));
/// assert!((apart.chance - 2.0 / 252.0).abs() < 1e-15);
/// # Ok::<(), thalweg::statistics::StatisticsError>(())
/// ```
pub fn rank_sum(first: &[f64], second: &[f64]) -> Result<RankSum, StatisticsError> {
    let (ranks, u) = rank(first, second)?;
    let (m, n) = (first.len(), second.len());
    let effect = u / (m * n) as f64;
    if (m + n) * m.min(n) <= EXACT_LIMIT {
        let (sample, of) = if m <= n { (&ranks[..m], m) } else { (&ranks[m..], n) };
        let chance = exact_chance(&ranks, of, sample.iter().sum());
        return Ok(RankSum { u, effect, chance, law: NullLaw::Exact });
    }
    Ok(RankSum { u, effect, chance: normal_chance(u, m, n, tie_sum(&ranks), 0.5), law: NullLaw::Normal })
}

/// The test on costs of trials: hits by their cost, and all censored trials tied at the worst end.
///
/// For trials of one budget, where a censored trial would have cost more than any hit; whether a heuristic hits and how
/// soon both count. The log-rank test ([`super::log_rank`]) is its peer for unequal budgets.
///
/// # Errors
///
/// No trials, or an unusable cost.
pub fn rank_sum_of_trials(first: &[Trial], second: &[Trial]) -> Result<RankSum, StatisticsError> {
    check(first)?;
    check(second)?;
    let costs = |trials: &[Trial]| -> Vec<f64> {
        trials.iter().map(|trial| if trial.hit { trial.cost } else { f64::INFINITY }).collect()
    };
    rank_sum(&costs(first), &costs(second))
}

/// An interval for the effect, the chance that a value of the first sample is higher than one of the second, ties counting
/// half: Newcombe (2006, method 5).
///
/// All effects t that the observed one does not refute: within z standard errors at t itself, by the variance that Hanley
/// and McNeil (1982) give for exponential laws with the mean sample size in place of both. Assumes independent values; for
/// continuous laws of like shape it holds the truth about as often as stated, and more often with ties.
///
/// # Errors
///
/// As [`rank_sum`].
///
/// ```
/// use thalweg::statistics::{Confidence, effect_interval};
/// let apart = effect_interval(&[1.0, 2.0, 3.0, 4.0], &[5.0, 6.0, 7.0, 8.0], Confidence::NINETY_FIVE)?;
/// assert!(apart.low == 0.0 && 0.3 < apart.high && apart.high < 0.5);
/// # Ok::<(), thalweg::statistics::StatisticsError>(())
/// ```
pub fn effect_interval(first: &[f64], second: &[f64], confidence: Confidence) -> Result<Interval, StatisticsError> {
    let (m, n) = (first.len() as f64, second.len() as f64);
    let effect = rank(first, second)?.1 / (m * n);
    let others = 0.5 * (m + n) - 1.0;
    let square = confidence.deviations() * confidence.deviations();
    let refuted = |t: f64| {
        let spread = 1.0 + others * ((1.0 - t) / (2.0 - t) + t / (1.0 + t));
        (effect - t) * (effect - t) > square * t * (1.0 - t) * spread / (m * n)
    };
    // Halving between the effect, never refuted, and an end, where the variance vanishes.
    let end = |mut out: f64| {
        if effect == out {
            return out;
        }
        let mut kept = effect;
        for _ in 0..60 {
            let middle = 0.5 * (kept + out);
            if refuted(middle) { out = middle } else { kept = middle }
        }
        kept
    };
    Ok(Interval { low: end(0.0), high: end(1.0) })
}

/// The ranks of both samples together, and the pairs in which the first sample's value is higher.
pub(super) fn rank(first: &[f64], second: &[f64]) -> Result<(Vec<f64>, f64), StatisticsError> {
    if first.is_empty() || second.is_empty() {
        return Err(StatisticsError::Empty);
    }
    let ranks = midranks(&[first, second].concat())?;
    let m = first.len();
    let u = ranks[..m].iter().sum::<f64>() - 0.5 * (m * (m + 1)) as f64;
    Ok((ranks, u))
}

/// The chance that the ranks of `size` items dealt from all have a sum at least as far from its mean as the observed one.
fn exact_chance(ranks: &[f64], size: usize, observed: f64) -> f64 {
    // Midranks are halves: doubled they are whole; without ties the ranks themselves are.
    let scale = if ranks.iter().all(|rank| rank.fract() == 0.0) { 1.0 } else { 2.0 };
    let mut whole: Vec<usize> = ranks.iter().map(|rank| (scale * rank) as usize).collect();
    // Ascending, so that the largest sum of so many of the ranks so far is that of the last ones.
    whole.sort_unstable();
    let highest: usize = whole.iter().rev().take(size).sum();
    // ways[c][s] deals c items of sum s, of which reach[c] is the largest.
    let mut ways = vec![vec![0.0_f64; highest + 1]; size + 1];
    let mut reach = vec![0; size + 1];
    ways[0][0] = 1.0;
    for (dealt, &rank) in whole.iter().enumerate() {
        for count in (1..=size.min(dealt + 1)).rev() {
            let (fewer, more) = ways.split_at_mut(count);
            let from = &fewer[count - 1][..=reach[count - 1]];
            for (way, from) in more[0][rank..].iter_mut().zip(from) {
                *way += from;
            }
            reach[count] = reach[count - 1] + rank;
        }
    }
    // Distances from the mean, doubled, since the mean may be a half.
    let mean = scale * (size * (ranks.len() + 1)) as f64;
    let away = (2.0 * scale * observed - mean).abs();
    let (mut far, mut all) = (0.0, 0.0);
    for (sum, way) in ways[size].iter().enumerate() {
        all += way;
        if (2.0 * sum as f64 - mean).abs() >= away {
            far += way;
        }
    }
    far / all
}

/// Both tails of the normal law; 1 where all values are tied.
fn normal_chance(u: f64, m: usize, n: usize, ties: f64, continuity: f64) -> f64 {
    let (m, n) = (m as f64, n as f64);
    let all = m + n;
    let variance = m * n / 12.0 * ((all + 1.0) - ties / (all * (all - 1.0)));
    if !(variance > 0.0) {
        return 1.0;
    }
    let away = ((u - 0.5 * m * n).abs() - continuity).max(0.0);
    (2.0 * normal_tail(away / variance.sqrt())).min(1.0)
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::statistics::tests::{close, numbers, reference};

    #[test]
    fn chances_match_the_reference() {
        let cases = reference("statistics.json")["mann_whitney"].as_array().unwrap().clone();
        assert_eq!(cases.len(), 11);
        let (mut exact, mut permuted) = (0, 0);
        for (place, case) in cases.iter().enumerate() {
            let name = format!("case {place}");
            let (x, y) = (numbers(&case["x"]), numbers(&case["y"]));
            let test = rank_sum(&x, &y).unwrap();
            close(test.u, &case["U1"], 1e-15, &name);
            close(test.effect, &case["A12_effect"], 1e-15, &name);
            let ties = tie_sum(&midranks(&[&x[..], &y[..]].concat()).unwrap());
            close(ties, &case["tie_term_sum_t3_minus_t"], 1e-15, &name);
            for (key, continuity) in [("asymptotic_two-sided_cc", 0.5), ("asymptotic_two-sided_nocc", 0.0)] {
                let normal = normal_chance(test.u, x.len(), y.len(), ties, continuity);
                // With all values tied the library has no number; ours is 1.
                match case[key].as_f64() {
                    Some(_) => close(normal, &case[key], 1e-12, &name),
                    None => assert_eq!(normal, 1.0),
                }
            }
            if test.law == NullLaw::Exact {
                if let Some(value) = case.get("exact_two-sided").filter(|value| value.is_number()) {
                    close(test.chance, value, 1e-12, &name);
                    exact += 1;
                }
                if let Some(permutation) = case.get("permutation_exact_midrank").filter(|value| value.is_object()) {
                    close(test.chance, &permutation["two_sided"], 1e-12, &name);
                    permuted += 1;
                }
            }
            let swapped = rank_sum(&y, &x).unwrap();
            assert!((swapped.chance - test.chance).abs() < 1e-14 && (swapped.effect + test.effect - 1.0).abs() < 1e-15);
        }
        assert!(exact >= 2 && permuted >= 3, "{exact} exact cases, {permuted} permutations");
    }

    #[test]
    fn exact_and_normal_agree_where_they_meet() {
        let first: Vec<f64> = (0..31).map(|i| f64::from(i * i % 37)).collect();
        let second: Vec<f64> = (0..32).map(|i| f64::from(i * i % 31) + 5.0).collect();
        let exact = rank_sum(&first, &second).unwrap();
        let ties = tie_sum(&midranks(&[&first[..], &second[..]].concat()).unwrap());
        let normal = normal_chance(exact.u, 31, 32, ties, 0.5);
        assert_eq!(exact.law, NullLaw::Exact);
        assert!((exact.chance - normal).abs() < 0.003, "{} and {normal}", exact.chance);
        assert_eq!(rank_sum(&first, &[second.clone(), second].concat()).unwrap().law, NullLaw::Normal);
    }

    #[test]
    fn trials_with_nothing_or_everything_hit() {
        let none = [Trial { cost: 100.0, hit: false }; 6];
        let test = rank_sum_of_trials(&none, &none).unwrap();
        assert_eq!((test.effect, test.chance), (0.5, 1.0));
        let all: Vec<Trial> = (1..7).map(|i| Trial { cost: f64::from(i), hit: true }).collect();
        let test = rank_sum_of_trials(&all, &none).unwrap();
        assert_eq!(test.effect, 0.0);
        assert!((test.chance - 2.0 / 924.0).abs() < 1e-15);
        let large = rank_sum_of_trials(&none.repeat(20), &none.repeat(20)).unwrap();
        assert_eq!((large.chance, large.law), (1.0, NullLaw::Normal));
    }

    #[test]
    fn effect_intervals_by_hand() {
        // One against one at the effect 0: t^2 = z^2 t (1 - t), so t = z^2/(1 + z^2).
        let interval = effect_interval(&[1.0], &[2.0], Confidence::NINETY_FIVE).unwrap();
        let square = 1.959963984540054_f64 * 1.959963984540054;
        assert!(interval.low == 0.0 && (interval.high - square / (1.0 + square)).abs() < 1e-12);
        let (first, second) = ([1.0, 4.0, 6.0, 9.0], [2.0, 3.0, 7.0]);
        let interval = effect_interval(&first, &second, Confidence::NINETY_FIVE).unwrap();
        let mirror = effect_interval(&second, &first, Confidence::NINETY_FIVE).unwrap();
        assert!(interval.contains(rank_sum(&first, &second).unwrap().effect));
        assert!((interval.low + mirror.high - 1.0).abs() < 1e-12 && (interval.high + mirror.low - 1.0).abs() < 1e-12);
        assert!(effect_interval(&[], &[1.0], Confidence::NINETY_FIVE).is_err());
    }

    #[test]
    fn unusable_samples_are_refused() {
        assert_eq!(rank_sum(&[], &[1.0]), Err(StatisticsError::Empty));
        assert!(matches!(rank_sum(&[f64::NAN], &[1.0]), Err(StatisticsError::Unusable(_))));
        let negative = [Trial { cost: -1.0, hit: true }];
        assert_eq!(rank_sum_of_trials(&negative, &negative), Err(StatisticsError::Unusable(-1.0)));
        let single = rank_sum(&[1.0], &[2.0]).unwrap();
        assert_eq!(single.chance, 1.0, "one against one says nothing");
    }
}
