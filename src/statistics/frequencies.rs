//! What a survey met: how many basins were met exactly once, twice, and so on.

use std::collections::BTreeMap;

use super::interval::StatisticsError;

/// What becomes of starts whose descent did not converge.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Unconverged {
    /// They are set aside: every figure speaks of that part of the start region from which descents converge.
    SetAside,
    /// All together are one basin more, of points from which descents do not converge: shares and coverage then speak
    /// of the whole start region, and the number of basins is higher by one where any start failed.
    OneBasin,
}

/// How often independent starts met each basin, in no order: all that the survey's figures depend on.
///
/// ```
/// use thalweg::statistics::{Frequencies, Unconverged};
/// let met = Frequencies::from_counts(&[5, 1, 0, 2, 1], 3, Unconverged::SetAside)?;
/// assert_eq!((met.starts(), met.basins(), met.met_exactly(1), met.failed()), (9, 4, 2, 3));
/// # Ok::<(), thalweg::statistics::StatisticsError>(())
/// ```
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Frequencies {
    /// (k, the number of basins met exactly k times), by rising k, without zeros.
    pairs: Vec<(u64, u64)>,
    starts: u64,
    basins: u64,
    failed: u64,
    unconverged: Unconverged,
}

impl Frequencies {
    /// From how often each basin was met; zeros do not count. `failed` starts met no basin.
    ///
    /// # Errors
    ///
    /// More starts than can be counted.
    pub fn from_counts(counts: &[u64], failed: u64, unconverged: Unconverged) -> Result<Self, StatisticsError> {
        Self::collect(counts.iter().map(|&met| (met, 1)), failed, unconverged)
    }

    /// From pairs (k, number of basins met exactly k times), in any order; `failed` starts met no basin.
    ///
    /// # Errors
    ///
    /// More starts than can be counted.
    pub fn from_pairs(pairs: &[(u64, u64)], failed: u64, unconverged: Unconverged) -> Result<Self, StatisticsError> {
        Self::collect(pairs.iter().copied(), failed, unconverged)
    }

    fn collect(
        pairs: impl Iterator<Item = (u64, u64)>,
        failed: u64,
        unconverged: Unconverged,
    ) -> Result<Self, StatisticsError> {
        let extra = (unconverged == Unconverged::OneBasin).then_some((failed, 1));
        let mut table: BTreeMap<u64, u64> = BTreeMap::new();
        let (mut starts, mut basins) = (0_u64, 0_u64);
        for (met, number) in pairs.chain(extra).filter(|&(met, number)| met > 0 && number > 0) {
            let added = met.checked_mul(number).ok_or(StatisticsError::TooManyStarts)?;
            starts = starts.checked_add(added).ok_or(StatisticsError::TooManyStarts)?;
            basins += number;
            *table.entry(met).or_default() += number;
        }
        starts.checked_add(failed).ok_or(StatisticsError::TooManyStarts)?;
        Ok(Frequencies { pairs: table.into_iter().collect(), starts, basins, failed, unconverged })
    }

    /// Independent starts that the figures rest on: failed ones count only as [`Unconverged::OneBasin`].
    pub fn starts(&self) -> u64 {
        self.starts
    }

    /// Distinct basins met.
    pub fn basins(&self) -> u64 {
        self.basins
    }

    /// Starts whose descent did not converge.
    pub fn failed(&self) -> u64 {
        self.failed
    }

    /// What became of the failed starts.
    pub fn unconverged(&self) -> Unconverged {
        self.unconverged
    }

    /// The number of basins met exactly so many times; of none for 0, since nobody knows it.
    pub fn met_exactly(&self, times: u64) -> u64 {
        self.pairs.binary_search_by_key(&times, |pair| pair.0).map_or(0, |place| self.pairs[place].1)
    }

    /// The pairs (k, number of basins met exactly k times), by rising k.
    pub fn pairs(&self) -> &[(u64, u64)] {
        &self.pairs
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn order_and_form_do_not_matter() {
        let set = |counts: &[u64]| Frequencies::from_counts(counts, 0, Unconverged::SetAside).unwrap();
        let one = set(&[3, 1, 1, 7, 3]);
        assert_eq!(one, set(&[7, 3, 1, 0, 3, 1]));
        assert_eq!(one, Frequencies::from_pairs(&[(3, 2), (7, 1), (1, 1), (1, 1)], 0, Unconverged::SetAside).unwrap());
        assert_eq!(one.pairs(), [(1, 2), (3, 2), (7, 1)]);
        assert_eq!(one.met_exactly(2), 0);
    }

    #[test]
    fn failed_starts_are_what_the_caller_says() {
        let aside = Frequencies::from_counts(&[4, 1], 2, Unconverged::SetAside).unwrap();
        assert_eq!((aside.starts(), aside.basins(), aside.failed()), (5, 2, 2));
        let basin = Frequencies::from_counts(&[4, 1], 2, Unconverged::OneBasin).unwrap();
        assert_eq!((basin.starts(), basin.basins(), basin.met_exactly(2)), (7, 3, 1));
        let none = Frequencies::from_counts(&[4, 1], 0, Unconverged::OneBasin).unwrap();
        assert_eq!((none.starts(), none.basins()), (5, 2));
    }

    #[test]
    fn too_many_starts_are_refused() {
        let huge = Frequencies::from_counts(&[u64::MAX, 1], 0, Unconverged::SetAside);
        assert_eq!(huge, Err(StatisticsError::TooManyStarts));
        let pairs = Frequencies::from_pairs(&[(u64::MAX, 2)], 0, Unconverged::SetAside);
        assert_eq!(pairs, Err(StatisticsError::TooManyStarts));
        let failed = Frequencies::from_counts(&[u64::MAX], 1, Unconverged::SetAside);
        assert_eq!(failed, Err(StatisticsError::TooManyStarts));
    }
}
