//! Coverage: the share of the start region that drains to basins already met.

use super::frequencies::Frequencies;
use super::interval::{Confidence, Interval};
use super::laws::exponential_less_one;
use crate::numbers::functions::logarithm;

/// The covered share, estimated from the basins met once and twice.
///
/// Assumes independent starts from one law over the start region, and nothing about the sizes of the basins. It speaks
/// of *these* basins: a random quantity that a second survey would find different.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Coverage {
    /// The estimate of Turing, `1 - f1/n` (Good 1953).
    pub turing: f64,
    /// The estimate of Chao and Jost (2012, eq. 4), which takes basins met twice into account; never below Turing's.
    ///
    /// Where their formula has no doubletons to divide by, it takes `f1 (f1 - 1)/2` for `f1^2/(2 f2)`; with a single
    /// singleton and no doubleton that would call the survey complete, and Turing's estimate stands instead.
    pub improved: f64,
    /// Holds the true coverage in about the stated share of surveys; see [`coverage_interval`].
    pub interval: Interval,
}

/// The coverage; none without starts.
///
/// ```
/// use thalweg::statistics::{Confidence, Frequencies, Unconverged, coverage};
/// let met = Frequencies::from_counts(&[40, 25, 20, 9, 3, 1, 1, 1], 0, Unconverged::SetAside)?;
/// let coverage = coverage(&met, Confidence::NINETY_FIVE).unwrap();
/// assert_eq!(coverage.turing, 0.97);
/// assert!(coverage.interval.contains(0.97));
/// # Ok::<(), thalweg::statistics::StatisticsError>(())
/// ```
pub fn coverage(met: &Frequencies, confidence: Confidence) -> Option<Coverage> {
    if met.starts() == 0 {
        return None;
    }
    let n = met.starts() as f64;
    let turing = (n - met.met_exactly(1) as f64) / n;
    let improved = 1.0 - unseen_share(met);
    let Interval { low, high } = coverage_interval(met, confidence);
    // At confidences below one half the two estimates may differ by more than the interval is wide.
    Some(Coverage { turing, improved, interval: Interval { low: low.min(turing), high: high.max(improved) } })
}

/// The estimate of the share not covered (Chao & Jost 2012), for at least one start.
pub(super) fn unseen_share(met: &Frequencies) -> f64 {
    met.met_exactly(1) as f64 / met.starts() as f64 * (1.0 - singleton_step(met))
}

/// The mean chance by which a start finds one of the basins not met yet, given that there are any: `f1/(n f0 + f1)` with
/// Chao's estimate of their number f0 (Chao et al. 2014, eq. 9). 0 where Chao's estimate is 0.
pub(super) fn singleton_step(met: &Frequencies) -> f64 {
    let n = met.starts() as f64;
    let (f1, f2) = (met.met_exactly(1) as f64, met.met_exactly(2) as f64);
    if f1 == 0.0 || n < 2.0 {
        0.0
    } else if f2 > 0.0 {
        2.0 * f2 / ((n - 1.0) * f1 + 2.0 * f2)
    } else if f1 > 1.0 {
        2.0 / ((n - 1.0) * (f1 - 1.0) + 2.0)
    } else {
        0.0
    }
}

/// An interval for the coverage, from the score of Turing's estimate; for at least one start.
///
/// The number of singletons `f1` and the unseen share `U` (times n) have the same expectation, and their difference has
/// the variance `E[n U (1 - U) + 2 f2]` (Robbins 1968; Esty 1983). Esty's interval puts the observed `f1/n` for `U` in
/// the variance, and fails where singletons are few: without any it has no width. Here `U` stays in the variance, as
/// Wilson (1927) does for a proportion, and for the doubletons stands the middle of their own score interval,
/// `f2 + z^2/2`: all `U` with `(f1 - n U)^2 <= z^2 (n U (1 - U) + 2 f2 + z^2)`. Without singletons the lower end of
/// `U` is 0; without doubletons too, the upper end is that of an exact interval for a basin that no start met,
/// `1 - (a/2)^(1/n)`, about 3.7/n at 95 %.
///
/// This form was chosen by simulation against the intervals of Esty (1983), of the logit and of scaled binomial and
/// Poisson laws; the developers' guide tabulates how often it holds the truth. To stop a survey at a coverage, wait for the
/// lower end, not for the estimate: looking again and again finds the estimate there by luck.
pub fn coverage_interval(met: &Frequencies, confidence: Confidence) -> Interval {
    let n = met.starts() as f64;
    let (f1, f2) = (met.met_exactly(1) as f64, met.met_exactly(2) as f64);
    let square = confidence.deviations() * confidence.deviations();
    if f1 == 0.0 && f2 == 0.0 {
        let unseen = -exponential_less_one(logarithm(confidence.side()) / n);
        return Interval { low: 1.0 - unseen, high: 1.0 };
    }
    // (1 + z^2/n) u^2 - (2 f1 + z^2) u + f1^2 - z^2 (2 f2 + z^2) <= 0, for u = n U.
    let leading = 1.0 + square / n;
    let middle = 2.0 * f1 + square;
    let constant = f1 * f1 - square * (2.0 * f2 + square);
    let root = (middle * middle - 4.0 * leading * constant).max(0.0).sqrt();
    let upper = (middle + root) / (2.0 * leading);
    // The smaller root as the product of both over the larger, which does not cancel.
    let lower = if f1 == 0.0 { 0.0 } else { constant / (leading * upper) };
    Interval { low: 1.0 - (upper / n).min(1.0), high: 1.0 - (lower / n).max(0.0) }
}
