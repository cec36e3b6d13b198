//! The accumulation curve: how many basins fewer starts would have met, and how many more starts would meet.

use super::coverage::{singleton_step, unseen_share};
use super::frequencies::Frequencies;
use super::interval::{Confidence, Interval};
use super::laws::{binomial_mass, exponential_less_one, logarithm_of_one_plus};
use super::richness::unseen_basins;
use crate::numbers::functions::exponential;

/// A point of the accumulation curve.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct CurvePoint {
    /// Starts.
    pub starts: u64,
    /// Distinct basins expected from so many starts.
    pub basins: f64,
    /// The standard error of that, for another survey of the same landscape (unconditional: it does not vanish at the
    /// survey's own size).
    pub standard_error: f64,
    /// The estimate within its normal deviations, cut to what is possible: from 0 to one basin a start. It is for the
    /// expected curve of the landscape, which may lie below what this survey met even at its own size.
    pub interval: Interval,
    /// The coverage expected from so many starts.
    pub coverage: f64,
}

/// The point of the accumulation curve at so many starts; none where the survey has none.
///
/// Below the survey's size, rarefaction: the mean over all subsets of the starts (Hurlbert 1971), and its coverage (Chao
/// and Jost 2012), both without bias. Beyond, extrapolation with Chao's estimate of the basins not met (Colwell et al.
/// 2012; Chao et al. 2014), which assumes those all equally likely to be found: trustworthy to about twice the survey's
/// size, and a lower bound beyond. The standard error is that of Colwell et al. (2012, eq. 5 and, beyond, the
/// propagation from the counts of singletons and doubletons); it vanishes where every basin was met several times,
/// and is too small where hardly any is left to be met or Chao's estimate is far too low (the developers' guide tabulates it).
///
/// ```
/// use thalweg::statistics::{Confidence, Frequencies, Unconverged, accumulation};
/// let met = Frequencies::from_counts(&[5, 4, 3, 1, 1, 1], 0, Unconverged::SetAside)?;
/// let at = |starts| accumulation(&met, starts, Confidence::NINETY_FIVE).unwrap().basins;
/// assert_eq!((at(0), at(1), at(15)), (0.0, 1.0, 6.0));
/// assert!(at(14) < 6.0 && at(16) > 6.0);
/// # Ok::<(), thalweg::statistics::StatisticsError>(())
/// ```
pub fn accumulation(met: &Frequencies, starts: u64, confidence: Confidence) -> Option<CurvePoint> {
    if met.starts() == 0 {
        return None;
    }
    let (basins, variance, coverage) =
        if starts <= met.starts() { rarefy(met, starts) } else { extrapolate(met, starts - met.starts()) };
    let standard_error = variance.max(0.0).sqrt();
    let half = confidence.deviations() * standard_error;
    let interval = Interval { low: (basins - half).max(0.0), high: (basins + half).min(starts as f64) };
    Some(CurvePoint { starts, basins, standard_error, interval, coverage })
}

/// The share of subsets of `drawn` from `total` that leave out `k` given ones.
fn left_out(k: u64, drawn: u64, total: u64) -> f64 {
    if k > total - drawn {
        return 0.0;
    }
    let (few, many) = if k < drawn { (k, drawn) } else { (drawn, k) };
    if few <= 64 {
        return (0..few).fold(1.0, |share, i| share * ((total - many - i) as f64 / (total - i) as f64));
    }
    // As a hypergeometric chance by three binomial ones (Loader 2000), which does not cancel.
    let (k, m, n) = (k as f64, drawn as f64, total as f64);
    let (chance, other) = (m / n, (total - drawn) as f64 / n);
    let rest = (n - k) - m;
    binomial_mass(0.0, k, chance, other) * binomial_mass(m, rest, chance, other)
        / binomial_mass(m, n - m, chance, other)
}

/// Basins, their variance, and coverage of a subset of the starts.
fn rarefy(met: &Frequencies, starts: u64) -> (f64, f64, f64) {
    let n = met.starts();
    let (mut basins, mut squares, mut covered) = (0.0, 0.0, 0.0);
    for &(k, number) in met.pairs() {
        let seen = 1.0 - left_out(k, starts, n);
        basins += number as f64 * seen;
        squares += number as f64 * seen * seen;
        // Another start than those drawn lies in a basin that they hit.
        covered +=
            if starts < n { k as f64 / n as f64 * number as f64 * (1.0 - left_out(k - 1, starts, n - 1)) } else { 0.0 };
    }
    // Beyond subsets, the survey itself: the estimate of its coverage.
    let coverage = if starts < n { covered } else { 1.0 - unseen_share(met) };
    (basins, squares - basins * basins / (met.basins() as f64 + unseen_basins(met)), coverage)
}

/// Basins, their variance, and coverage after so many further starts.
fn extrapolate(met: &Frequencies, further: u64) -> (f64, f64, f64) {
    let observed = met.basins() as f64;
    let Extension { basins, slopes, kept } = extend(met, further);
    let coverage = 1.0 - unseen_share(met) * kept;
    let (f1, f2) = (met.met_exactly(1) as f64, met.met_exactly(2) as f64);
    let sum = observed + slopes[0] * f1 + slopes[1] * f2;
    let squares = observed + (2.0 + slopes[0]) * slopes[0] * f1 + (2.0 + slopes[1]) * slopes[1] * f2;
    (observed + basins, squares - sum * sum / (observed + unseen_basins(met)), coverage)
}

/// The number of new basins that further starts are expected to find, and its standard error as an estimate.
pub(super) fn new_basins(met: &Frequencies, further: u64) -> (f64, f64) {
    let Extension { basins, slopes, .. } = extend(met, further);
    let (f1, f2) = (met.met_exactly(1) as f64, met.met_exactly(2) as f64);
    // The counts f_k are multinomial parts of the estimated number of basins (Colwell et al. 2012).
    let sum = slopes[0] * f1 + slopes[1] * f2;
    let squares = slopes[0] * slopes[0] * f1 + slopes[1] * slopes[1] * f2;
    let variance = squares - sum * sum / (met.basins() as f64 + unseen_basins(met));
    (basins, variance.max(0.0).sqrt())
}

/// New basins beyond the survey.
struct Extension {
    /// Their expected number.
    basins: f64,
    /// The slopes of that by the numbers of singletons and doubletons.
    slopes: [f64; 2],
    /// The share of the unseen part that stays unseen.
    kept: f64,
}

fn extend(met: &Frequencies, further: u64) -> Extension {
    let (n, m) = (met.starts() as f64, further as f64);
    let (f1, f2) = (met.met_exactly(1) as f64, met.met_exactly(2) as f64);
    let unseen = unseen_basins(met);
    let step = singleton_step(met);
    let exponent = if step < 1.0 { m * logarithm_of_one_plus(-step) } else { f64::NEG_INFINITY };
    let (kept, found) =
        if further == 0 { (1.0, 0.0) } else { (exponential(exponent), -exponential_less_one(exponent)) };

    // Slopes of `unseen` and `step`.
    let share = (n - 1.0) / n;
    let (unseen_slopes, step_slopes) = if f2 > 0.0 {
        let below = (n - 1.0) * f1 + 2.0 * f2;
        (
            [share * f1 / f2, -share * f1 * f1 / (2.0 * f2 * f2)],
            [-2.0 * f2 * (n - 1.0) / (below * below), 2.0 * (n - 1.0) * f1 / (below * below)],
        )
    } else if f1 > 1.0 {
        let below = (n - 1.0) * (f1 - 1.0) + 2.0;
        ([share * (2.0 * f1 - 1.0) / 2.0, 0.0], [-2.0 * (n - 1.0) / (below * below), 0.0])
    } else {
        ([0.0; 2], [0.0; 2])
    };
    let bend = if step < 1.0 { unseen * m * kept / (1.0 - step) } else { 0.0 };
    let slope = |which: usize| unseen_slopes[which] * found + bend * step_slopes[which];
    Extension { basins: unseen * found, slopes: [slope(0), slope(1)], kept }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::statistics::tests::{close, tables};
    use crate::statistics::{Unconverged, coverage, richness};

    #[test]
    fn curves_match_the_reference() {
        for (name, met, table) in tables() {
            let at = |starts| accumulation(&met, starts, Confidence::NINETY_FIVE).unwrap();
            let rarefied = table["rarefaction"].as_object().unwrap();
            assert!(rarefied.len() == 4, "{name}");
            for (starts, expected) in rarefied {
                let point = at(starts.parse().unwrap());
                close(point.basins, &expected["expected_species"], 1e-11, &name);
                close(point.coverage, &expected["expected_coverage"], 1e-11, &name);
            }
            let Some(extrapolated) = table.get("extrapolation_by_m_star") else { continue };
            for (further, expected) in extrapolated.as_object().unwrap() {
                let point = at(met.starts() + further.parse::<u64>().unwrap());
                close(point.basins, &expected["species"], 1e-11, &name);
                close(point.coverage, &expected["coverage"], 1e-11, &name);
            }
        }
    }

    #[test]
    fn the_curve_rises_through_the_survey_to_the_estimate() {
        for (name, met, _) in tables() {
            let n = met.starts();
            let at = |starts| accumulation(&met, starts, Confidence::NINETY_FIVE).unwrap();
            assert!((at(n).basins - met.basins() as f64).abs() < 1e-9, "{name}");
            let mut last = at(0);
            assert_eq!((last.basins, last.coverage), (0.0, 0.0));
            for starts in (1..3 * n).step_by(1 + n as usize / 20) {
                let point = at(starts);
                // At the survey's size the formula of the coverage changes: Turing's below, Chao and Jost's beyond.
                assert!(
                    point.basins + 1e-9 >= last.basins && point.coverage + 1e-9 >= last.coverage,
                    "{name} {starts}"
                );
                assert!(point.interval.low <= point.basins + 1e-9 && point.basins <= point.interval.high + 1e-9);
                assert!(0.0 <= point.coverage && point.coverage <= 1.0);
                last = point;
            }
            let end = richness(&met, Confidence::NINETY_FIVE).unwrap();
            let far = at(u64::MAX);
            assert!((far.basins - end.basins).abs() < 1e-9, "{name}");
            // At the end of the curve its error is that of Chao's estimate, but for what is estimated of the variance.
            assert!((far.standard_error / end.variance.sqrt() - 1.0).abs() < 0.12 || end.variance < 1.0, "{name}");
        }
    }

    #[test]
    fn the_variance_is_continuous_at_the_survey() {
        for (name, met, _) in tables() {
            let at = |starts| accumulation(&met, starts, Confidence::NINETY_FIVE).unwrap().standard_error;
            let (before, here, after) = (at(met.starts() - 1), at(met.starts()), at(met.starts() + 1));
            assert!((here - before).abs() < 0.2 + 0.1 * here && (after - here).abs() < 0.2 + 0.1 * here, "{name}");
        }
    }

    #[test]
    fn large_surveys_keep_their_digits() {
        // Half of 2e6 starts: a basin met k times is left out with nearly 2^-k.
        let met =
            Frequencies::from_pairs(&[(1, 1000), (2, 500), (998_000, 1), (1_000_000, 1)], 0, Unconverged::SetAside)
                .unwrap();
        let point = accumulation(&met, 1_000_000, Confidence::NINETY_FIVE).unwrap();
        assert!((point.basins - (500.0 + 500.0 * 0.75 + 2.0)).abs() < 1e-3, "{}", point.basins);
        // The long way for comparison: C(n - k, m)/C(n, m) as a product of k factors.
        let long = |k: u64, m: u64, n: u64| (0..k).fold(1.0, |share, i| share * (n - m - i) as f64 / (n - i) as f64);
        for (k, m, n) in [(65, 70, 1000), (200, 300, 5000), (5000, 90, 1_000_000), (70, 1000, 100_000)] {
            let (short, long) = (left_out(k, m, n), long(k, m, n));
            assert!((short / long - 1.0).abs() < 1e-11, "{k} {m} {n}: {short:e}, not {long:e}");
        }
        assert_eq!(left_out(5, 6, 10), 0.0);
        assert_eq!(left_out(5, 5, 10), 1.0 / 252.0);
    }

    #[test]
    fn degenerate_surveys() {
        let set = |counts: &[u64]| Frequencies::from_counts(counts, 0, Unconverged::SetAside).unwrap();
        assert_eq!(accumulation(&set(&[]), 5, Confidence::NINETY_FIVE), None);
        let one = accumulation(&set(&[1]), 5, Confidence::NINETY_FIVE).unwrap();
        assert_eq!((one.basins, one.coverage), (1.0, 0.0), "nothing is known beyond a single start");
        let sure = accumulation(&set(&[50]), 100, Confidence::NINETY_FIVE).unwrap();
        assert_eq!((sure.basins, sure.standard_error, sure.coverage), (1.0, 0.0, 1.0));
        let few = set(&[3, 1]);
        let end = accumulation(&few, 1000, Confidence::NINETY_FIVE).unwrap();
        assert_eq!(end.basins, 2.0, "one singleton and no doubleton: Chao's estimate is the number met");
        assert_eq!(end.coverage, coverage(&few, Confidence::NINETY_FIVE).unwrap().improved);
    }
}
