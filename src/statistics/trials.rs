//! Trials of a heuristic: each spends until it hits the target or its budget ends.

use rand::Rng;

use super::interval::{Confidence, Interval, StatisticsError};
use super::proportion::exact_interval;
use super::resampling::{Resampled, bias_corrected_interval};

/// One trial: what it spent, and whether it ended with a hit. Without one it is censored: the hit would have cost more.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Trial {
    /// Evaluations or seconds until the hit, or until the trial was given up; finite and not negative.
    pub cost: f64,
    /// Whether it hit.
    pub hit: bool,
}

/// The expected cost of a first hit.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct ExpectedCost {
    /// All that was spent over the number of hits; infinite without a hit.
    pub cost: f64,
    /// Trials that hit.
    pub hits: usize,
    /// All trials.
    pub trials: usize,
    /// The interval; its upper end may be infinite.
    pub interval: Interval,
    /// Where the interval comes from.
    pub grounds: Grounds,
}

/// What an interval rests on.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Grounds {
    /// Resampling, corrected for bias and skewness (Efron 1987).
    BiasCorrected,
    /// Plain percentiles of resampling (Efron 1979): the correction could not be worked out.
    Percentile,
    /// Few hits among many trials: the exact interval of Clopper and Pearson (1934) for the chance to hit, with the mean
    /// costs of hits and of misses as they are. The upper end is finite.
    FewHits,
    /// No hit: the exact bound of Clopper and Pearson (1934) for the chance to hit, one-sided. Only the lower end says
    /// something.
    NoHit,
}

/// Below so many hits, where they are no more than the misses, resampling is not asked (by simulation).
const FEW_HITS: usize = 20;

/// Refuses trials that no statistic can use.
pub(super) fn check(trials: &[Trial]) -> Result<(), StatisticsError> {
    if trials.is_empty() {
        return Err(StatisticsError::Empty);
    }
    match trials.iter().find(|trial| !(trial.cost >= 0.0 && trial.cost.is_finite())) {
        Some(trial) => Err(StatisticsError::Unusable(trial.cost)),
        None => Ok(()),
    }
}

/// All that was spent over the number of hits: the expected cost of hitting once, were trials repeated until one hits.
///
/// The maximum-likelihood estimate for trials of one law that are started again at the end of their budget (Price 1997;
/// common practice since). With trials that all hit it is their mean. It belongs to this budget: another would change
/// it, unless costs to hit are exponential.
///
/// The interval resamples whole trials from `random`, `resamples` times (1,000 and more make sense), and takes the
/// bias-corrected and accelerated percentiles of Efron (1987). With fewer than 20 hits, no more than misses, so many
/// resamples would hold none or hardly any that the percentiles say nothing, or too little: there the number of hits is
/// what is uncertain, and with `h` and `m` the mean costs of hits and misses the interval is `h + m (1 - p)/p` for the
/// chances p of the exact interval. Without any hit the lower end divides the mean cost by the upper end of the exact
/// one-sided interval. The developers' guide tabulates how often these intervals hold the truth.
///
/// # Errors
///
/// No trials; a cost that is negative or not finite.
///
/// ```
/// use thalweg::base::random::{Purpose, stream};
/// use thalweg::statistics::{Confidence, Trial, expected_cost};
/// let trials = [(300.0, true), (1000.0, false), (500.0, true)].map(|(cost, hit)| Trial { cost, hit });
/// let mut random = stream(1, 0, 0, Purpose::Check);
/// let expected = expected_cost(&trials, Confidence::NINETY_FIVE, 2000, &mut random)?;
/// assert_eq!(expected.cost, 900.0);
/// assert!(expected.interval.contains(900.0));
/// # Ok::<(), thalweg::statistics::StatisticsError>(())
/// ```
pub fn expected_cost(
    trials: &[Trial],
    confidence: Confidence,
    resamples: usize,
    random: &mut impl Rng,
) -> Result<ExpectedCost, StatisticsError> {
    check(trials)?;
    let hits = trials.iter().filter(|trial| trial.hit).count();
    let spent: f64 = trials.iter().map(|trial| trial.cost).sum();
    let n = trials.len();
    if hits == 0 {
        // One-sided at the level of both sides together, since no upper end is claimed.
        let one_sided = Confidence::new(2.0 * confidence.share() - 1.0);
        let chance = match one_sided {
            Ok(doubled) => exact_interval(0, n as u64, doubled)?.high,
            Err(_) => 1.0,
        };
        let interval = Interval { low: spent / n as f64 / chance, high: f64::INFINITY };
        return Ok(ExpectedCost { cost: f64::INFINITY, hits, trials: n, interval, grounds: Grounds::NoHit });
    }
    let cost = spent / hits as f64;
    if hits < FEW_HITS && 2 * hits <= n {
        let of_hits: f64 = trials.iter().filter(|trial| trial.hit).map(|trial| trial.cost).sum::<f64>() / hits as f64;
        let of_misses = (spent - of_hits * hits as f64) / (n - hits) as f64;
        let chance = exact_interval(hits as u64, n as u64, confidence)?;
        let at = |chance: f64| of_hits + of_misses.max(0.0) * (1.0 - chance) / chance;
        let interval = Interval { low: at(chance.high).min(cost), high: at(chance.low).max(cost) };
        return Ok(ExpectedCost { cost, hits, trials: n, interval, grounds: Grounds::FewHits });
    }
    let ratio = |places: &mut dyn Iterator<Item = usize>| {
        let (mut spent, mut hits) = (0.0, 0.0);
        for place in places {
            spent += trials[place].cost;
            hits += f64::from(u8::from(trials[place].hit));
        }
        if hits > 0.0 { spent / hits } else { f64::INFINITY }
    };
    let Resampled { interval, corrected } = bias_corrected_interval(n, cost, ratio, confidence, resamples, random);
    let grounds = if corrected { Grounds::BiasCorrected } else { Grounds::Percentile };
    // The estimate belongs to its interval; at extreme corrections the percentiles may pass it.
    let interval = Interval { low: interval.low.min(cost), high: interval.high.max(cost) };
    Ok(ExpectedCost { cost, hits, trials: n, interval, grounds })
}
