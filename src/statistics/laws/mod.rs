//! The laws of probability that the statistics lean on: tails and quantiles.
//!
//! Enters: numbers. Leaves: probabilities and their inverses, of which both tails are accurate where they are small.
//! Promised: a relative error of about 1e-12 (1e-10 for parameters in the millions), checked against 50-digit values.
//! Deliberately absent: densities that nobody asks for, and any law without a user.

mod beta;
mod gamma;
mod normal;
mod range;
mod stirling;

pub use beta::{Tail, beta_quantile, beta_tails};
pub use gamma::{chi_square_tail, gamma_tails};
pub use normal::{normal_quantile, normal_tail};
pub use range::range_tail;
pub(super) use stirling::{binomial_mass, exponential_less_one, logarithm_of_one_plus};

#[cfg(test)]
mod tests {
    pub(super) use crate::statistics::tests::table as rows;
}
