//! Several tests at once.

use super::interval::StatisticsError;

/// The chances of several tests, raised so that each may be held against the level of all together (Holm 1979).
///
/// The chance that any test of a true null hypothesis falls below the level stays below it, however the tests depend on
/// each other. The order of the chances is kept.
///
/// # Errors
///
/// A chance outside 0 to 1.
///
/// ```
/// use thalweg::statistics::adjust_chances;
/// let adjusted = adjust_chances(&[0.25, 0.0625, 0.5])?;
/// assert_eq!(adjusted, [0.5, 0.1875, 0.5]);
/// # Ok::<(), thalweg::statistics::StatisticsError>(())
/// ```
pub fn adjust_chances(chances: &[f64]) -> Result<Vec<f64>, StatisticsError> {
    if let Some(&chance) = chances.iter().find(|&&chance| !(0.0 <= chance && chance <= 1.0)) {
        return Err(StatisticsError::Share(chance));
    }
    let mut order: Vec<usize> = (0..chances.len()).collect();
    order.sort_by(|&a, &b| chances[a].total_cmp(&chances[b]));
    let mut adjusted = vec![0.0; chances.len()];
    let mut highest: f64 = 0.0;
    for (before, place) in order.into_iter().enumerate() {
        highest = highest.max((chances.len() - before) as f64 * chances[place]).min(1.0);
        adjusted[place] = highest;
    }
    Ok(adjusted)
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::statistics::tests::table;

    #[test]
    fn adjusted_chances_match_the_library() {
        for row in table("holm.txt") {
            let (chances, expected) = row.split_at(row.len() / 2);
            for (adjusted, expected) in adjust_chances(chances).unwrap().iter().zip(expected) {
                assert!((adjusted - expected).abs() < 1e-14, "{row:?}");
            }
        }
        assert_eq!(adjust_chances(&[]), Ok(Vec::new()));
        assert_eq!(adjust_chances(&[0.5, -0.1]), Err(StatisticsError::Share(-0.1)));
        assert!(adjust_chances(&[f64::NAN]).is_err());
    }
}
