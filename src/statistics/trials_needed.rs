//! How many trials it would take to tell two samples apart.

use super::interval::{Confidence, StatisticsError};
use super::laws::normal_quantile;
use super::rank_sum::rank;
use super::ranks::tie_sum;

/// About how many trials *each* of two samples would need in all for the rank-sum test at this confidence to find the
/// difference with this chance (`power`), were the tendency as large as it looks; none where it looks like none.
///
/// The approximation of Noether (1987) for samples of equal size, which holds for small differences, with the variance
/// corrected for the share of ties seen; at least as many as the exact test needs to reach the confidence at all. It takes
/// the effect seen for the true one, so it is an order of magnitude: where the samples hardly differ, the effect is mostly
/// chance.
///
/// # Errors
///
/// An empty sample, a value that is not a number, or a power that is not strictly between 0 and 1.
///
/// ```
/// use thalweg::statistics::{Confidence, trials_needed};
/// let needed = trials_needed(&[1.0, 3.0, 4.0], &[2.0, 5.0, 6.0], Confidence::NINETY_FIVE, 0.8)?;
/// assert_eq!(needed, Some(17));
/// # Ok::<(), thalweg::statistics::StatisticsError>(())
/// ```
pub fn trials_needed(
    first: &[f64],
    second: &[f64],
    confidence: Confidence,
    power: f64,
) -> Result<Option<u64>, StatisticsError> {
    if !(0.0 < power && power < 1.0) {
        return Err(StatisticsError::Share(power));
    }
    let (ranks, u) = rank(first, second)?;
    let away = u / (first.len() * second.len()) as f64 - 0.5;
    if away == 0.0 {
        return Ok(None);
    }
    let all = ranks.len() as f64;
    let untied = 1.0 - tie_sum(&ranks) / (all * (all * all - 1.0));
    let deviations = (confidence.deviations() + normal_quantile(power)).max(0.0);
    let approximate = (untied * deviations * deviations / (6.0 * away * away)).ceil();
    // Two samples of n that lie entirely apart have the chance 2/C(2n, n).
    let (mut least, mut chance) = (0.0, 2.0);
    while chance > 1.0 - confidence.share() {
        least += 1.0;
        chance *= least / (2.0 * (2.0 * least - 1.0));
    }
    Ok(Some(approximate.max(least) as u64))
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn noether_by_hand() {
        // (1.959964 + 0.841621)^2 / (6 * 0.1^2) = 130.8: an effect of 0.4, no ties.
        let needed =
            |first: &[f64], second: &[f64]| trials_needed(first, second, Confidence::NINETY_FIVE, 0.8).unwrap();
        assert_eq!(needed(&[1.0, 4.0, 5.0, 6.0, 9.0], &[2.0, 3.0, 7.0, 8.0, 10.0]), Some(131));
        // Entirely apart: 4 against 4 reach 2/70; 3 against 3 only 2/20. The approximation asks for more.
        assert_eq!(needed(&[1.0, 2.0], &[3.0, 4.0]), Some(6));
        assert_eq!(trials_needed(&[1.0], &[2.0], Confidence::NINETY_FIVE, 0.01).unwrap(), Some(4));
        assert_eq!(needed(&[1.0, 2.0], &[1.0, 2.0]), None);
        assert!(trials_needed(&[1.0], &[2.0], Confidence::NINETY_FIVE, 1.0).is_err());
        assert!(trials_needed(&[], &[2.0], Confidence::NINETY_FIVE, 0.8).is_err());
    }
}
