//! Factorials without cancellation, after Loader (2000, "Fast and accurate computation of binomial probabilities").
//!
//! A ratio of factorials as a difference of their logarithms loses as many digits as the logarithms are long: with a
//! million starts, seven. Here the long parts cancel on paper: what is left is Stirling's error and a deviance.

use std::f64::consts::TAU;

use crate::numbers::functions::{exponential, logarithm};

/// `ln(1 + x)`, with full relative accuracy near 0 (Kahan's correction of the rounding of `1 + x`).
pub(in crate::statistics) fn logarithm_of_one_plus(x: f64) -> f64 {
    let sum = 1.0 + x;
    if sum == 1.0 { x } else { logarithm(sum) * (x / (sum - 1.0)) }
}

/// `exp(x) - 1`, with full relative accuracy near 0 (Kahan's correction).
pub(in crate::statistics) fn exponential_less_one(x: f64) -> f64 {
    let power = exponential(x);
    if power == 1.0 {
        return x;
    }
    let less = power - 1.0;
    if less == -1.0 || power.is_infinite() { less } else { less * (x / logarithm(power)) }
}

/// `ln(x!) - ((x + 1/2) ln x - x + ln(2 pi)/2)` for `x > 0`: the error of Stirling's formula.
pub(super) fn stirling_error(x: f64) -> f64 {
    // Climb to where the asymptotic series (Abramowitz & Stegun 1964, 6.1.41) holds to the last digit.
    let mut climbed = 0.0;
    let mut place = x;
    while place < 16.0 {
        climbed += (place + 0.5) * logarithm_of_one_plus(1.0 / place) - 1.0;
        place += 1.0;
    }
    let z = 1.0 / (place * place);
    let series =
        (1.0 / 12.0 - z * (1.0 / 360.0 - z * (1.0 / 1260.0 - z * (1.0 / 1680.0 - z * (1.0 / 1188.0))))) / place;
    climbed + series
}

/// `x ln(x/mean) + mean - x` for positive arguments, without cancellation where they are close. The difference `x - mean`
/// is given apart, since the caller may know it better.
pub(super) fn deviance(x: f64, mean: f64, difference: f64) -> f64 {
    if difference.abs() >= 0.1 * (x + mean) {
        return x * logarithm(x / mean) - difference;
    }
    // The logarithm as twice the series of the inverse hyperbolic tangent.
    let ratio = difference / (x + mean);
    let square = ratio * ratio;
    let mut sum = difference * ratio;
    let mut term = 2.0 * x * ratio;
    let mut odd = 1.0;
    loop {
        term *= square;
        odd += 2.0;
        let next = sum + term / odd;
        // A caller's NaN ends the series too.
        if next == sum || !next.is_finite() {
            return sum;
        }
        sum = next;
    }
}

/// The probability of `hits` in `hits + misses` trials of chance `chance`, for real numbers of hits and misses;
/// `other` is `1 - chance`, given apart since it may be small.
pub(in crate::statistics) fn binomial_mass(hits: f64, misses: f64, chance: f64, other: f64) -> f64 {
    let trials = hits + misses;
    if hits == 0.0 {
        return exponential(misses * if chance < 0.5 { logarithm_of_one_plus(-chance) } else { logarithm(other) });
    }
    if misses == 0.0 {
        return exponential(hits * if other < 0.5 { logarithm_of_one_plus(-other) } else { logarithm(chance) });
    }
    // Where a chance is next to 1 its own rounding, times the trials, would be the error: the other side knows better.
    let excess = if chance < 0.5 { hits - trials * chance } else { trials * other - misses };
    let exponent = stirling_error(trials)
        - stirling_error(hits)
        - stirling_error(misses)
        - deviance(hits, trials * chance, excess)
        - deviance(misses, trials * other, -excess);
    exponential(exponent) * (trials / (TAU * hits * misses)).sqrt()
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn binomial_masses_sum_to_one_and_match_small_cases() {
        assert!((binomial_mass(2.0, 3.0, 0.3, 0.7) - 10.0 * 0.09 * 0.343).abs() < 1e-15);
        assert!((binomial_mass(0.0, 4.0, 0.25, 0.75) - 0.31640625).abs() < 1e-16);
        assert!((binomial_mass(4.0, 0.0, 0.25, 0.75) - 0.00390625).abs() < 1e-17);
        let sum: f64 = (0..=500).map(|hits| binomial_mass(f64::from(hits), f64::from(500 - hits), 0.37, 0.63)).sum();
        assert!((sum - 1.0).abs() < 1e-12, "{sum}");
    }

    #[test]
    fn small_arguments_keep_their_digits() {
        assert_eq!(logarithm_of_one_plus(1e-20), 1e-20);
        assert!((logarithm_of_one_plus(1e-5) / 9.999950000333332e-6 - 1.0).abs() < 1e-15);
        assert!((exponential_less_one(1e-5) / 1.0000050000166668e-5 - 1.0).abs() < 1e-15);
        assert_eq!(exponential_less_one(-1000.0), -1.0);
        assert_eq!(exponential_less_one(1000.0), f64::INFINITY);
    }
}
