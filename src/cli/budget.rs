//! What ends a hunt, as it is typed.

use std::time::Duration;

use clap::Args;

use super::values::{Until, evaluations, time, until};

#[derive(Args)]
pub(crate) struct Budget {
    /// Ends after so many evaluations (value and gradient at one point): 1e6
    #[arg(long, value_name = "COUNT", value_parser = evaluations)]
    pub(crate) evals: Option<u64>,
    /// Ends after so much time: 90s, 15m, 8h, 1h30m
    #[arg(long = "for", value_name = "TIME", value_parser = time)]
    pub(crate) time: Option<Duration>,
    /// Ends when met: target=-44.3268, coverage=0.99 (of the survey, with 95 % confidence), or quiet=1e7 (no lower value for
    /// so many evaluations); may be repeated, and the first met ends the hunt
    #[arg(long, value_name = "CONDITION", value_parser = until, allow_hyphen_values = true)]
    pub(crate) until: Vec<Until>,
}

impl Budget {
    /// Whether none was given.
    pub(crate) fn is_empty(&self) -> bool {
        self.evals.is_none() && self.time.is_none() && self.until.is_empty()
    }

    // Of several conditions of a kind the easiest ends the hunt.

    /// The target, of the minimised objective; `sign` is -1 for a maximum.
    pub(crate) fn target(&self, sign: f64) -> Option<f64> {
        self.numbers(|until| if let Until::Target(value) = until { Some(sign * value) } else { None }).reduce(f64::max)
    }

    /// The survey's coverage.
    pub(crate) fn coverage(&self) -> Option<f64> {
        self.numbers(|until| if let Until::Coverage(share) = until { Some(*share) } else { None }).reduce(f64::min)
    }

    /// The evaluations without a lower value.
    pub(crate) fn quiet(&self) -> Option<u64> {
        self.until.iter().filter_map(|until| if let Until::Quiet(count) = until { Some(*count) } else { None }).min()
    }

    fn numbers(&self, pick: impl Fn(&Until) -> Option<f64>) -> impl Iterator<Item = f64> {
        self.until.iter().filter_map(pick)
    }
}
