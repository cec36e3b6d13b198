//! A proportion from hits among independent trials: exact and score intervals.

use super::interval::{Confidence, Interval, StatisticsError};
use super::laws::{Tail, beta_quantile};

/// The exact interval of Clopper and Pearson (1934).
///
/// Assumes independent trials of one chance, nothing else; it holds the true chance in at least the stated share of
/// cases, whatever the chance and the number of trials, and is for that wider than it need be. Without trials it is all
/// of 0 to 1.
///
/// # Errors
///
/// More hits than trials.
///
/// ```
/// use thalweg::statistics::{Confidence, exact_interval};
/// let interval = exact_interval(0, 10, Confidence::NINETY_FIVE)?;
/// assert!(interval.low == 0.0 && (interval.high - 0.3085).abs() < 1e-4);
/// # Ok::<(), thalweg::statistics::StatisticsError>(())
/// ```
pub fn exact_interval(hits: u64, trials: u64, confidence: Confidence) -> Result<Interval, StatisticsError> {
    let misses = trials.checked_sub(hits).ok_or(StatisticsError::MoreHitsThanTrials)?;
    let (k, m) = (hits as f64, misses as f64);
    let low = if hits == 0 { 0.0 } else { beta_quantile(k, m + 1.0, Tail::Lower, confidence.side()) };
    let high = if misses == 0 { 1.0 } else { beta_quantile(k + 1.0, m, Tail::Upper, confidence.side()) };
    Ok(Interval { low, high })
}

/// The score interval of Wilson (1927).
///
/// Assumes independent trials of one chance. It holds the true chance in about the stated share of cases on average over
/// chances, sometimes a little less (Brown, Cai and DasGupta 2001), and is narrower than [`exact_interval`]. Without trials it
/// is all of 0 to 1.
///
/// # Errors
///
/// More hits than trials.
///
/// ```
/// use thalweg::statistics::{Confidence, score_interval};
/// let interval = score_interval(0, 10, Confidence::NINETY_FIVE)?;
/// assert!(interval.low == 0.0 && (interval.high - 0.2775).abs() < 1e-4);
/// # Ok::<(), thalweg::statistics::StatisticsError>(())
/// ```
pub fn score_interval(hits: u64, trials: u64, confidence: Confidence) -> Result<Interval, StatisticsError> {
    let misses = trials.checked_sub(hits).ok_or(StatisticsError::MoreHitsThanTrials)?;
    if trials == 0 {
        return Ok(Interval { low: 0.0, high: 1.0 });
    }
    let (k, m, n) = (hits as f64, misses as f64, trials as f64);
    let z = confidence.deviations();
    let root = z * (k * (m / n) + 0.25 * z * z).sqrt();
    let middle = k + 0.5 * z * z;
    // At the ends the difference would leave rounding where 0 and 1 are exact.
    let low = if hits == 0 { 0.0 } else { (middle - root) / (n + z * z) };
    let high = if misses == 0 { 1.0 } else { (middle + root) / (n + z * z) };
    Ok(Interval { low, high })
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::statistics::tests::reference;

    #[test]
    fn intervals_match_the_reference() {
        let cases = reference("statistics.json")["binomial_intervals"].as_array().unwrap().clone();
        assert_eq!(cases.len(), 39);
        for case in cases {
            let (k, n) = (case["k"].as_u64().unwrap(), case["n"].as_u64().unwrap());
            let confidence = Confidence::new(case["conf"].as_f64().unwrap()).unwrap();
            let exact = exact_interval(k, n, confidence).unwrap();
            let score = score_interval(k, n, confidence).unwrap();
            for (interval, expected) in [(exact, &case["clopper_pearson"]), (score, &case["wilson"])] {
                assert!((interval.low - expected[0].as_f64().unwrap()).abs() < 1e-11, "{k} of {n}");
                assert!((interval.high - expected[1].as_f64().unwrap()).abs() < 1e-11, "{k} of {n}");
                assert!(interval.contains(k as f64 / n as f64), "{k} of {n}");
            }
        }
    }

    #[test]
    fn small_shares_of_many_trials_keep_their_digits() {
        // Without hits the upper end is 1 - (a/2)^(1/n): at n = 1e9, -ln(0.025)/n to nine digits.
        let interval = exact_interval(0, 1_000_000_000, Confidence::NINETY_FIVE).unwrap();
        assert!((interval.high / 3.688879447e-9 - 1.0).abs() < 1e-8, "{:e}", interval.high);
        let mirrored = exact_interval(3, 7, Confidence::NINETY_FIVE).unwrap();
        let mirror = exact_interval(4, 7, Confidence::NINETY_FIVE).unwrap();
        assert!((mirrored.low + mirror.high - 1.0).abs() < 1e-14);
    }

    #[test]
    fn degenerate_trials() {
        let all = |hits, trials| exact_interval(hits, trials, Confidence::NINETY_FIVE);
        assert_eq!(all(0, 0), Ok(Interval { low: 0.0, high: 1.0 }));
        assert_eq!(all(5, 5).unwrap().high, 1.0);
        assert_eq!(all(6, 5), Err(StatisticsError::MoreHitsThanTrials));
        let score = |hits, trials| score_interval(hits, trials, Confidence::NINETY_FIVE);
        assert_eq!(score(0, 0), Ok(Interval { low: 0.0, high: 1.0 }));
        assert_eq!((score(0, 5).unwrap().low, score(5, 5).unwrap().high), (0.0, 1.0));
        assert_eq!(score(6, 5), Err(StatisticsError::MoreHitsThanTrials));
    }
}
