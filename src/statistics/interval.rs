//! Intervals and how sure they are meant to be.

use std::fmt;

use super::laws::normal_quantile;

/// What the statistics refuse.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum StatisticsError {
    /// A confidence that is not strictly between 0 and 1.
    Confidence(f64),
    /// Counts whose sum leaves the whole numbers.
    TooManyStarts,
    /// A sample without values.
    Empty,
    /// A value that is not a number, or a cost that is negative or infinite.
    Unusable(f64),
    /// Rows or samples of different lengths where they must match.
    Ragged,
    /// A share or chance outside 0 to 1.
    Share(f64),
    /// More hits than trials.
    MoreHitsThanTrials,
}

impl fmt::Display for StatisticsError {
    fn fmt(&self, out: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            StatisticsError::Confidence(value) => {
                write!(out, "a confidence lies between 0 and 1, both excluded, and {value} does not")
            }
            StatisticsError::TooManyStarts => out.write_str("more starts than can be counted"),
            StatisticsError::Empty => out.write_str("a sample without values"),
            StatisticsError::Unusable(value) => write!(out, "{value} cannot be used as a value of a sample"),
            StatisticsError::Ragged => out.write_str("rows of different lengths"),
            StatisticsError::Share(value) => write!(out, "a share lies between 0 and 1, and {value} does not"),
            StatisticsError::MoreHitsThanTrials => out.write_str("more hits than trials"),
        }
    }
}

impl std::error::Error for StatisticsError {}

/// The share of cases in which an interval is meant to hold the truth, strictly between 0 and 1.
#[derive(Clone, Copy, Debug, PartialEq, PartialOrd)]
pub struct Confidence(f64);

impl Confidence {
    /// 95 %: common practice.
    pub const NINETY_FIVE: Confidence = Confidence(0.95);

    /// This confidence.
    ///
    /// # Errors
    ///
    /// When it is not strictly between 0 and 1.
    pub fn new(share: f64) -> Result<Self, StatisticsError> {
        if 0.0 < share && share < 1.0 { Ok(Confidence(share)) } else { Err(StatisticsError::Confidence(share)) }
    }

    /// As a share.
    pub fn share(self) -> f64 {
        self.0
    }

    /// What is left for each of the two sides.
    pub fn side(self) -> f64 {
        0.5 * (1.0 - self.0)
    }

    /// How many standard deviations of the normal law it takes, both sides alike.
    pub fn deviations(self) -> f64 {
        -normal_quantile(self.side())
    }
}

/// From `low` to `high`, both included.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Interval {
    /// The lower end.
    pub low: f64,
    /// The upper end.
    pub high: f64,
}

impl Interval {
    /// Whether a number lies in it.
    pub fn contains(&self, number: f64) -> bool {
        self.low <= number && number <= self.high
    }

    /// How wide it is.
    pub fn width(&self) -> f64 {
        self.high - self.low
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn confidences() {
        assert!((Confidence::NINETY_FIVE.deviations() - 1.959963984540054).abs() < 1e-13);
        for wrong in [0.0, 1.0, -1.0, f64::NAN] {
            let error = Confidence::new(wrong).unwrap_err();
            assert!(error.to_string().contains("between 0 and 1"));
        }
        assert_eq!(Confidence::new(0.9).unwrap().share(), 0.9);
    }
}
