//! The gamma law: its tails (the regularised incomplete gamma functions), and those of the chi-square law.

use std::f64::consts::TAU;

use super::stirling::{deviance, stirling_error};
use crate::numbers::functions::exponential;

/// The lower and the upper tail of the gamma law of this shape (positive) and scale 1, at `x` from 0 on.
///
/// By the power series below the mean and the continued fraction above it (Abramowitz & Stegun 1964, 6.5.29 and
/// 6.5.31; evaluation of Lentz 1976). NaN outside the range of the arguments.
pub fn gamma_tails(shape: f64, x: f64) -> (f64, f64) {
    if !(shape > 0.0 && shape.is_finite() && x >= 0.0) {
        return (f64::NAN, f64::NAN);
    }
    if x == 0.0 {
        return (0.0, 1.0);
    }
    if x.is_infinite() {
        return (1.0, 0.0);
    }
    // x^shape exp(-x) / Gamma(shape)
    let front = exponential(-stirling_error(shape) - deviance(shape, x, shape - x)) * (shape / TAU).sqrt();
    if x < shape + 1.0 {
        let mut term = 1.0 / shape;
        let mut sum = term;
        let mut n = 1.0;
        while term > 1e-17 * sum {
            term *= x / (shape + n);
            sum += term;
            n += 1.0;
        }
        let lower = front * sum;
        (lower, 1.0 - lower)
    } else {
        const TINY: f64 = 1e-300;
        let mut denominator = x + 1.0 - shape;
        let mut c = 1.0 / TINY;
        let mut d = 1.0 / denominator;
        let mut value = d;
        let mut n = 1.0;
        while n < 1e7 {
            let numerator = -n * (n - shape);
            denominator += 2.0;
            let below = numerator * d + denominator;
            d = 1.0 / if below.abs() < TINY { TINY } else { below };
            let above = denominator + numerator / c;
            c = if above.abs() < TINY { TINY } else { above };
            let factor = c * d;
            value *= factor;
            if (factor - 1.0).abs() < 1e-16 {
                break;
            }
            n += 1.0;
        }
        let upper = front * value;
        (1.0 - upper, upper)
    }
}

/// The chance that a chi-square variable with so many degrees of freedom is at least `x`.
///
/// ```
/// use thalweg::statistics::laws::chi_square_tail;
/// assert!((chi_square_tail(3.841458820694124, 1.0) - 0.05).abs() < 1e-13);
/// ```
pub fn chi_square_tail(x: f64, degrees: f64) -> f64 {
    gamma_tails(0.5 * degrees, 0.5 * x).1
}

#[cfg(test)]
mod tests {
    use super::super::tests::rows;
    use super::*;

    #[test]
    fn tails_match_the_table() {
        for row in rows("gamma_tails.txt") {
            let [shape, x, lower, upper] = row[..] else { panic!("four numbers a row") };
            let tails = gamma_tails(shape, x);
            for (tail, exact) in [(tails.0, lower), (tails.1, upper)] {
                assert!((tail - exact).abs() <= 1e-11 * exact.max(1e-290), "{shape} {x}: {tail:e}, not {exact:e}");
            }
        }
    }

    #[test]
    fn edges() {
        assert_eq!(gamma_tails(2.0, 0.0), (0.0, 1.0));
        assert_eq!(gamma_tails(2.0, f64::INFINITY), (1.0, 0.0));
        assert!(gamma_tails(-1.0, 1.0).0.is_nan() && gamma_tails(1.0, f64::NAN).1.is_nan());
    }
}
