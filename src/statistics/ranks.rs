//! Ranks, with the mean rank for ties.

use super::interval::StatisticsError;

/// The ranks of values, from 1 for the lowest; tied values share the mean of their ranks.
///
/// # Errors
///
/// No values, or a value that is not a number. Infinite values are ranked like others.
///
/// ```
/// use thalweg::statistics::midranks;
/// assert_eq!(midranks(&[3.0, 1.0, 3.0, f64::INFINITY])?, [2.5, 1.0, 2.5, 4.0]);
/// # Ok::<(), thalweg::statistics::StatisticsError>(())
/// ```
pub fn midranks(values: &[f64]) -> Result<Vec<f64>, StatisticsError> {
    if values.is_empty() {
        return Err(StatisticsError::Empty);
    }
    if let Some(&value) = values.iter().find(|value| value.is_nan()) {
        return Err(StatisticsError::Unusable(value));
    }
    let mut order: Vec<usize> = (0..values.len()).collect();
    order.sort_by(|&a, &b| values[a].total_cmp(&values[b]));
    let mut ranks = vec![0.0; values.len()];
    for tied in order.chunk_by(|&a, &b| values[a] == values[b]) {
        // The first of the group in the order tells how many stand before it.
        let before = order.partition_point(|&place| values[place] < values[tied[0]]);
        let rank = before as f64 + 0.5 * (tied.len() + 1) as f64;
        for &place in tied {
            ranks[place] = rank;
        }
    }
    Ok(ranks)
}

/// The sum of `t^3 - t` over the sizes t of groups of equal ranks.
pub(super) fn tie_sum(ranks: &[f64]) -> f64 {
    let mut sorted = ranks.to_vec();
    sorted.sort_by(f64::total_cmp);
    let cube = |tied: &[f64]| {
        let t = tied.len() as f64;
        t * (t - 1.0) * (t + 1.0)
    };
    sorted.chunk_by(|a, b| a == b).map(cube).sum()
}
