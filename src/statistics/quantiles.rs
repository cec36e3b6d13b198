//! Quantiles of a sample.

use super::interval::StatisticsError;

/// The quantile of a sample at each of these shares, from 0 (the lowest value) to 1 (the highest).
///
/// Definition 7 of Hyndman and Fan (1996): linear between the order statistics, with the i-th of n at (i-1)/(n-1). Infinite
/// values are kept: between a finite and an infinite one the quantile is infinite.
///
/// # Errors
///
/// No values, a value that is not a number, or a share outside 0 to 1.
///
/// ```
/// use thalweg::statistics::quantiles;
/// assert_eq!(quantiles(&[4.0, 1.0, 3.0, 2.0], &[0.0, 0.25, 0.5, 1.0])?, [1.0, 1.75, 2.5, 4.0]);
/// # Ok::<(), thalweg::statistics::StatisticsError>(())
/// ```
pub fn quantiles(values: &[f64], shares: &[f64]) -> Result<Vec<f64>, StatisticsError> {
    if values.is_empty() {
        return Err(StatisticsError::Empty);
    }
    if let Some(&value) = values.iter().find(|value| value.is_nan()) {
        return Err(StatisticsError::Unusable(value));
    }
    let mut sorted = values.to_vec();
    sorted.sort_by(f64::total_cmp);
    let quantile = |&share: &f64| {
        if !(0.0 <= share && share <= 1.0) {
            return Err(StatisticsError::Share(share));
        }
        let place = share * (sorted.len() - 1) as f64;
        let below = place.floor();
        let part = place - below;
        let (low, high) = (sorted[below as usize], sorted[(below as usize + 1).min(sorted.len() - 1)]);
        // Equal ends first: the difference of two infinities is none.
        Ok(if part == 0.0 || low == high { low } else { low + part * (high - low) })
    };
    shares.iter().map(quantile).collect()
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::statistics::tests::table;

    #[test]
    fn quantiles_match_the_library() {
        for row in table("quantiles.txt") {
            let n = row[0] as usize;
            let [share, expected] = row[1 + n..] else { panic!("n, values, share, quantile") };
            let quantile = quantiles(&row[1..=n], &[share]).unwrap()[0];
            assert!((quantile - expected).abs() <= 1e-14 * expected.abs(), "{row:?}: {quantile}");
        }
    }

    #[test]
    fn infinities_and_refusals() {
        let infinite = f64::INFINITY;
        let values = [1.0, 2.0, infinite, infinite];
        assert_eq!(quantiles(&values, &[0.0, 0.5, 0.9, 1.0]).unwrap(), [1.0, infinite, infinite, infinite]);
        assert_eq!(quantiles(&[7.0], &[0.3]).unwrap(), [7.0]);
        assert_eq!(quantiles(&[], &[0.5]), Err(StatisticsError::Empty));
        assert_eq!(quantiles(&[1.0], &[1.5]), Err(StatisticsError::Share(1.5)));
        assert!(quantiles(&[f64::NAN], &[0.5]).is_err() && quantiles(&[1.0], &[f64::NAN]).is_err());
    }
}
