//! The standard normal law: its tail and its quantiles.

use std::f64::consts::{FRAC_1_SQRT_2, TAU};

use super::gamma::gamma_tails;
use crate::numbers::functions::{error_function, exponential, logarithm};

/// The chance that a standard normal variable is at least `z`.
///
/// By the error function near the middle, and by the incomplete gamma function beyond, where the difference of the
/// error function from 1 would lose digits.
///
/// ```
/// use thalweg::statistics::laws::normal_tail;
/// assert!((normal_tail(1.959963984540054) - 0.025).abs() < 1e-15);
/// ```
pub fn normal_tail(z: f64) -> f64 {
    if z.abs() < 1.0 || z.is_nan() {
        return 0.5 * (1.0 - error_function(z * FRAC_1_SQRT_2));
    }
    let beyond = 0.5 * gamma_tails(0.5, 0.5 * z * z).1;
    if z > 0.0 { beyond } else { 1.0 - beyond }
}

/// The `z` with this chance of being at most `z`; infinite at 0 and 1, NaN outside.
///
/// Halley's method on [`normal_tail`], from the rational start of Abramowitz and Stegun (1964, 26.2.23).
///
/// ```
/// use thalweg::statistics::laws::normal_quantile;
/// assert!((normal_quantile(0.975) - 1.959963984540054).abs() < 1e-14);
/// ```
pub fn normal_quantile(probability: f64) -> f64 {
    let tail = if probability < 0.5 { probability } else { 1.0 - probability };
    if !(tail >= 0.0) {
        return f64::NAN;
    }
    if tail == 0.0 {
        return f64::INFINITY.copysign(probability - 0.5);
    }
    let t = (-2.0 * logarithm(tail)).sqrt();
    let numerator = 2.515517 + t * (0.802853 + t * 0.010328);
    let denominator = 1.0 + t * (1.432788 + t * (0.189269 + t * 0.001308));
    let mut z = t - numerator / denominator;
    for _ in 0..3 {
        // The error in units of the density; the density falls by a share of z a step.
        let error = (normal_tail(z) - tail) * TAU.sqrt() * exponential(0.5 * z * z);
        z += error / (1.0 - 0.5 * z * error);
    }
    if probability < 0.5 { -z } else { z }
}

#[cfg(test)]
mod tests {
    use super::super::tests::rows;
    use super::*;

    #[test]
    fn tails_and_quantiles_match_the_table() {
        for row in rows("normal_tails.txt") {
            let [z, tail] = row[..] else { panic!("two numbers a row") };
            assert!((normal_tail(z) - tail).abs() <= 1e-12 * tail, "{z}: {:e}, not {tail:e}", normal_tail(z));
            assert!((normal_quantile(tail) + z).abs() <= 1e-12 * z.abs().max(1.0) || z < -2.0, "{z}");
        }
        assert!(normal_quantile(0.5).abs() < 1e-15);
        assert_eq!(normal_quantile(1.0), f64::INFINITY);
        assert_eq!(normal_quantile(0.0), f64::NEG_INFINITY);
        assert!(normal_quantile(1.5).is_nan() && normal_quantile(f64::NAN).is_nan() && normal_tail(f64::NAN).is_nan());
    }
}
