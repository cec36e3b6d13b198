//! Several heuristics on several problems: does any rank better, and which differ?

use super::interval::StatisticsError;
use super::laws::{beta_tails, chi_square_tail, normal_tail, range_tail};
use super::multiplicity::adjust_chances;
use super::ranks::midranks;

/// The Friedman test with its pairs.
#[derive(Clone, Debug, PartialEq)]
pub struct Friedman {
    /// The mean rank of each column over the rows; 1 is best where lower values are better.
    pub mean_ranks: Vec<f64>,
    /// Friedman's statistic (1937), corrected for ties.
    pub chi_square: f64,
    /// The chance of so large a statistic were all columns alike, by the chi-square law.
    pub chance: f64,
    /// The same by the F law of Iman and Davenport (1980), which is closer for few rows; where the rows agree entirely,
    /// the exact `(1/k!)^(n-1)` (Conover 1999).
    pub closer_chance: f64,
    /// Every pair of columns, `first < second`, in order.
    pub pairs: Vec<ColumnPair>,
}

/// Two columns compared over all rows by their mean ranks, after a Friedman test that found any difference.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct ColumnPair {
    /// The lower column.
    pub first: usize,
    /// The higher column.
    pub second: usize,
    /// The mean rank of the first less that of the second; negative speaks for the first.
    pub difference: f64,
    /// The chance by the range of all columns (Nemenyi 1963): already one for all pairs together.
    pub nemenyi: f64,
    /// The chance by the normal law, corrected for all pairs after Holm (1979): for all pairs together too.
    pub holm: f64,
}

/// The Friedman test of rows (problems) of values, one a column (heuristic); lower is better and ranks first.
///
/// Assumes independent rows; within a row only the order counts, ties included. The chances are those of large numbers
/// of rows: with fewer than about six they are rough. Pairs use the variance of the ranks as observed, so ties are
/// corrected for there too.
///
/// # Errors
///
/// No rows, fewer than two columns, rows of different lengths, or a value that is not a number.
pub fn friedman(rows: &[Vec<f64>]) -> Result<Friedman, StatisticsError> {
    let columns = rows.first().map_or(0, Vec::len);
    if columns < 2 {
        return Err(StatisticsError::Empty);
    }
    if rows.iter().any(|row| row.len() != columns) {
        return Err(StatisticsError::Ragged);
    }
    let (n, k) = (rows.len() as f64, columns as f64);
    let middle = 0.5 * (k + 1.0);
    let mut sums = vec![0.0; columns];
    // The squared deviations of ranks within rows.
    let mut spread = 0.0;
    for row in rows {
        for (sum, rank) in sums.iter_mut().zip(midranks(row)?) {
            *sum += rank;
            spread += (rank - middle) * (rank - middle);
        }
    }
    let between: f64 = sums.iter().map(|sum| (sum - n * middle) * (sum - n * middle)).sum();
    let chi_square = if spread > 0.0 { (k - 1.0) * between / spread } else { 0.0 };
    let most = n * (k - 1.0);
    let closer_chance = if chi_square < most * (1.0 - 1e-12) {
        // The upper tail of F as a lower tail of the beta law.
        let f = (n - 1.0) * chi_square / (most - chi_square);
        let (over, under) = (k - 1.0, (k - 1.0) * (n - 1.0));
        if under > 0.0 { beta_tails(0.5 * under, 0.5 * over, under / (under + over * f)).0 } else { 1.0 }
    } else {
        let orders: f64 = (2..=columns).map(|i| i as f64).product();
        (1..rows.len()).fold(1.0, |chance, _| chance / orders)
    };

    let mean_ranks: Vec<f64> = sums.iter().map(|sum| sum / n).collect();
    // The standard error of a mean rank; k (k + 1)/(12 n) under the root without ties.
    let error = (spread / (n * (k - 1.0)) / n).sqrt();
    let mut pairs = Vec::new();
    let mut chances = Vec::new();
    for first in 0..columns {
        for second in first + 1..columns {
            let difference = mean_ranks[first] - mean_ranks[second];
            let range = if error > 0.0 { difference.abs() / error } else { 0.0 };
            chances.push((2.0 * normal_tail(range * std::f64::consts::FRAC_1_SQRT_2)).min(1.0));
            pairs.push(ColumnPair { first, second, difference, nemenyi: range_tail(range, columns), holm: 1.0 });
        }
    }
    for (pair, adjusted) in pairs.iter_mut().zip(adjust_chances(&chances)?) {
        pair.holm = adjusted;
    }
    let chance = chi_square_tail(chi_square, k - 1.0);
    Ok(Friedman { mean_ranks, chi_square, chance, closer_chance, pairs })
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::statistics::tests::{close, numbers, reference};

    #[test]
    fn tests_match_the_library() {
        let cases = reference("friedman.json")["cases"].as_array().unwrap().clone();
        assert!(cases.len() >= 5);
        for case in cases {
            let name = case["name"].as_str().unwrap();
            let rows: Vec<Vec<f64>> = case["rows"].as_array().unwrap().iter().map(numbers).collect();
            let test = friedman(&rows).unwrap();
            close(test.chi_square, &case["chi_square"], 1e-12, name);
            close(test.chance, &case["chance"], 1e-12, name);
            close(test.closer_chance, &case["f_chance"], 1e-12, name);
            for (mean, expected) in test.mean_ranks.iter().zip(numbers(&case["mean_ranks"])) {
                assert!((mean - expected).abs() < 1e-13, "{name}");
            }
            for (pair, expected) in test.pairs.iter().zip(numbers(&case["nemenyi"])) {
                assert!((pair.nemenyi - expected).abs() < 1e-9, "{name}: {} not {expected}", pair.nemenyi);
            }
            for (pair, expected) in test.pairs.iter().zip(numbers(&case["holm"])) {
                assert!((pair.holm - expected).abs() < 1e-12, "{name}: {} not {expected}", pair.holm);
            }
        }
    }

    #[test]
    fn ties_agreement_and_refusals() {
        let tied = friedman(&[vec![1.0; 3], vec![2.0; 3]]).unwrap();
        assert_eq!((tied.chi_square, tied.chance, tied.closer_chance), (0.0, 1.0, 1.0));
        assert!(tied.pairs.iter().all(|pair| pair.nemenyi == 1.0 && pair.holm == 1.0));
        let agreed = friedman(&vec![vec![1.0, 2.0, f64::INFINITY]; 4]).unwrap();
        assert!((agreed.closer_chance - 1.0 / 216.0).abs() < 1e-15);
        assert_eq!(agreed.mean_ranks, [1.0, 2.0, 3.0]);
        let single = friedman(&[vec![1.0, 2.0]]).unwrap();
        assert_eq!(single.closer_chance, 1.0, "one problem says nothing");
        assert_eq!(friedman(&[]), Err(StatisticsError::Empty));
        assert_eq!(friedman(&[vec![1.0]]), Err(StatisticsError::Empty));
        assert_eq!(friedman(&[vec![1.0, 2.0], vec![1.0]]), Err(StatisticsError::Ragged));
        assert!(friedman(&[vec![1.0, f64::NAN]]).is_err());
    }
}
