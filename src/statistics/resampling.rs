//! Intervals by resampling.

use rand::{Rng, RngExt};

use super::interval::{Confidence, Interval};
use super::laws::{normal_quantile, normal_tail};

/// An interval by resampling.
pub(super) struct Resampled {
    pub(super) interval: Interval,
    /// Whether the correction for bias and skewness could be worked out.
    pub(super) corrected: bool,
}

/// The bias-corrected and accelerated percentile interval (Efron 1987) of a statistic of `n` independent items.
///
/// `statistic` takes the places of the items, with repetitions; it may be infinite. Where the statistic without one
/// item is infinite, or all resamples lie on one side, the plain percentiles (Efron 1979) stand instead.
pub(super) fn bias_corrected_interval(
    n: usize,
    estimate: f64,
    statistic: impl Fn(&mut dyn Iterator<Item = usize>) -> f64,
    confidence: Confidence,
    resamples: usize,
    random: &mut impl Rng,
) -> Resampled {
    let mut values: Vec<f64> =
        (0..resamples.max(1)).map(|_| statistic(&mut (0..n).map(|_| random.random_range(0..n)))).collect();
    values.sort_by(f64::total_cmp);
    let below = values.iter().filter(|&&value| value < estimate).count();
    let equal = values.iter().filter(|&&value| value == estimate).count();
    // Ties count half: the statistic of few items takes few values.
    let share = (below as f64 + 0.5 * equal as f64) / values.len() as f64;
    let bias = normal_quantile(share);

    let without: Vec<f64> = (0..n).map(|left_out| statistic(&mut (0..n).filter(|&place| place != left_out))).collect();
    let mean = without.iter().sum::<f64>() / n as f64;
    let (mut squares, mut cubes) = (0.0, 0.0);
    for value in &without {
        let less = mean - value;
        squares += less * less;
        cubes += less * less * less;
    }
    let acceleration = if squares == 0.0 { 0.0 } else { cubes / (6.0 * squares * squares.sqrt()) };

    let corrected = bias.is_finite() && acceleration.is_finite() && n > 1;
    let level = |z: f64| {
        if !corrected {
            return 1.0 - normal_tail(z);
        }
        let shifted = bias + z;
        let below = 1.0 - acceleration * shifted;
        // Beyond the pole the correction has run off to the end of the sample.
        if below > 0.0 { 1.0 - normal_tail(bias + shifted / below) } else { f64::from(u8::from(z > 0.0)) }
    };
    let z = confidence.deviations();
    let at = |level: f64| {
        let place = level * (values.len() - 1) as f64;
        values[(place + 0.5).floor() as usize]
    };
    Resampled { interval: Interval { low: at(level(-z)), high: at(level(z)) }, corrected }
}
