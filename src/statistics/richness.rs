//! The number of basins, estimated from below.

use super::frequencies::Frequencies;
use super::interval::{Confidence, Interval};
use crate::numbers::functions::{exponential, logarithm};

/// Chao's estimate of the number of basins.
///
/// Assumes independent starts from one law. Whatever the sizes of the basins, its expectation is about a *lower bound*
/// of their number, close to it where the basins missed are about as small as those met once, and far below it where
/// there are very many tiny ones. So the interval is one for this bound too.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Richness {
    /// The estimated number of basins, at least those met.
    pub basins: f64,
    /// The estimated number of basins not met.
    pub unseen: f64,
    /// The estimated variance (Chao 1987, with the factor (n - 1)/n of Chao et al. 2014).
    pub variance: f64,
    /// The log-normal interval (Chao 1987): never below the number met.
    pub interval: Interval,
}

/// The estimate of the number of basins not met: `(n-1)/n f1^2/(2 f2)` (Chao 1984), and `(n-1)/n f1 (f1 - 1)/2` where
/// none was met twice (the bias-corrected form).
pub(super) fn unseen_basins(met: &Frequencies) -> f64 {
    if met.starts() == 0 {
        return 0.0;
    }
    let n = met.starts() as f64;
    let (f1, f2) = (met.met_exactly(1) as f64, met.met_exactly(2) as f64);
    let pairs = if f2 > 0.0 { f1 * f1 / (2.0 * f2) } else { f1 * (f1 - 1.0) / 2.0 };
    (n - 1.0) / n * pairs
}

/// Chao's estimate with its interval; none without starts.
///
/// ```
/// use thalweg::statistics::{Confidence, Frequencies, Unconverged, richness};
/// let met = Frequencies::from_pairs(&[(1, 12), (2, 4), (15, 10)], 0, Unconverged::SetAside)?;
/// let richness = richness(&met, Confidence::NINETY_FIVE).unwrap();
/// assert!(richness.basins > 26.0 && richness.interval.contains(richness.basins));
/// # Ok::<(), thalweg::statistics::StatisticsError>(())
/// ```
pub fn richness(met: &Frequencies, confidence: Confidence) -> Option<Richness> {
    if met.starts() == 0 {
        return None;
    }
    let n = met.starts() as f64;
    let (f1, f2) = (met.met_exactly(1) as f64, met.met_exactly(2) as f64);
    let observed = met.basins() as f64;
    let unseen = unseen_basins(met);
    let basins = observed + unseen;
    let share = (n - 1.0) / n;
    let variance = if f2 > 0.0 {
        let r = f1 / f2;
        f2 * (share / 2.0 * r * r + share * share * (r * r * r + r * r * r * r / 4.0))
    } else {
        let odd = 2.0 * f1 - 1.0;
        let square = f1 * f1;
        share * f1 * (f1 - 1.0) / 2.0 + share * share * (f1 * odd * odd - square * square / basins) / 4.0
    };
    let interval = if unseen > 0.0 {
        let spread = confidence.deviations() * logarithm(1.0 + variance / (unseen * unseen)).sqrt();
        let factor = exponential(spread);
        Interval { low: observed + unseen / factor, high: observed + unseen * factor }
    } else {
        saturated_interval(met, confidence)
    };
    Some(Richness { basins, unseen, variance, interval })
}

/// The interval where the estimate is the number met: by the chance of missing basins as common as those met.
///
/// With the mean count as the mean of a Poisson law for each basin, a share P of them is missed: the form for surveys
/// without singletons in Colwell's notes to programs for richness (2005; from memory, confirmed against a
/// general-purpose library).
fn saturated_interval(met: &Frequencies, confidence: Confidence) -> Interval {
    let observed = met.basins() as f64;
    let missed = exponential(-(met.starts() as f64) / observed);
    let middle = observed / (1.0 - missed);
    let half = confidence.deviations() * (observed * missed / (1.0 - missed)).sqrt();
    Interval { low: observed.max(middle - half), high: middle + half }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::statistics::tests::{close, reference, tables};

    #[test]
    fn estimates_match_published_and_recomputed_values() {
        for (name, met, table) in tables() {
            let richness = richness(&met, Confidence::NINETY_FIVE).unwrap();
            let form = if met.met_exactly(2) > 0 { "chao1_classic_with_n1n" } else { "chao1_bias_corrected_with_n1n" };
            let expected = &table[form];
            close(richness.basins, &expected["estimate"], 1e-12, &name);
            close(richness.variance, &expected["variance"], 1e-11, &name);
            if richness.unseen > 0.0 {
                close(richness.interval.low, &expected["ci95_lognormal"][0], 1e-11, &name);
                close(richness.interval.high, &expected["ci95_lognormal"][1], 1e-11, &name);
            } else {
                // The library takes 1.96 for the quantile.
                close(
                    richness.interval.low,
                    &table["scikit_bio_0.7.4"]["chao1_ci_bias_corrected_True"][0],
                    2e-5,
                    &name,
                );
                close(
                    richness.interval.high,
                    &table["scikit_bio_0.7.4"]["chao1_ci_bias_corrected_True"][1],
                    2e-5,
                    &name,
                );
            }
        }
        // Hsieh, Ma & Chao (2016): three decimals.
        for name in ["spider_girdled", "spider_logged"] {
            let (_, met, _) = tables().into_iter().find(|table| table.0 == name).unwrap();
            let richness = richness(&met, Confidence::NINETY_FIVE).unwrap();
            let published = &reference("frequency_tables.json")["tables"][name]["published"];
            let decimals = |value: f64, key: &serde_json::Value| (value - key.as_f64().unwrap()).abs() <= 5.1e-4;
            assert!(decimals(richness.basins, &published["chao1"]), "{name}");
            assert!(decimals(richness.variance.sqrt(), &published["se"]), "{name}");
            assert!(decimals(richness.interval.low, &published["ci95"][0]), "{name}");
            assert!(decimals(richness.interval.high, &published["ci95"][1]), "{name}");
        }
    }
}
