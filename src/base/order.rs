//! A total order on floats, so that they can be keys of sorted maps.

use std::cmp::Ordering;

/// An `f64` ordered by IEEE 754 `totalOrder`: `-0.0 < 0.0`, and NaN with a clear sign stands above infinity.
///
/// ```
/// use thalweg::base::order::Total;
/// assert!(Total(1.0) < Total(f64::INFINITY));
/// assert!(Total(f64::INFINITY) < Total(f64::NAN));
/// ```
#[derive(Clone, Copy, Debug)]
pub struct Total(pub f64);

impl PartialEq for Total {
    fn eq(&self, other: &Self) -> bool {
        self.cmp(other) == Ordering::Equal
    }
}

impl Eq for Total {}

impl PartialOrd for Total {
    fn partial_cmp(&self, other: &Self) -> Option<Ordering> {
        Some(self.cmp(other))
    }
}

impl Ord for Total {
    fn cmp(&self, other: &Self) -> Ordering {
        self.0.total_cmp(&other.0)
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn orders_every_kind_of_float() {
        let mut floats = [f64::NAN, 1.0, f64::INFINITY, -0.0, 0.0, f64::NEG_INFINITY].map(Total);
        floats.sort();
        let bits: Vec<u64> = floats.iter().map(|float| float.0.to_bits()).collect();
        let expected = [f64::NEG_INFINITY, -0.0, 0.0, 1.0, f64::INFINITY, f64::NAN].map(f64::to_bits);
        assert_eq!(bits, expected);
    }
}
