//! The beta law: its tails (the regularised incomplete beta function) and its quantiles.

use super::stirling::binomial_mass;

/// Which tail of a law a probability counts.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Tail {
    /// At most the quantile.
    Lower,
    /// At least the quantile.
    Upper,
}

/// The lower and the upper tail of the beta law with parameters `a` and `b`, both positive, at `x` from 0 to 1.
///
/// By the continued fraction of Didonato and Morris (1992) with the evaluation of Lentz (1976), on the side of the
/// mean where it converges fast; both tails are accurate where they are small. NaN outside the range of the arguments.
///
/// ```
/// use thalweg::statistics::laws::beta_tails;
/// let (lower, upper) = beta_tails(2.0, 3.0, 0.5);
/// assert!((lower - 0.6875).abs() < 1e-14 && (upper - 0.3125).abs() < 1e-14);
/// ```
pub fn beta_tails(a: f64, b: f64, x: f64) -> (f64, f64) {
    if !(a > 0.0 && b > 0.0 && (a + b).is_finite() && 0.0 <= x && x <= 1.0) {
        return (f64::NAN, f64::NAN);
    }
    if x == 0.0 {
        return (0.0, 1.0);
    }
    if x == 1.0 {
        return (1.0, 0.0);
    }
    // x^a (1-x)^b / B(a, b)
    let front = a * b / (a + b) * binomial_mass(a, b, x, 1.0 - x);
    if x <= a / (a + b) {
        let lower = front * fraction(a, b, x, 1.0 - x);
        (lower, 1.0 - lower)
    } else {
        let upper = front * fraction(b, a, 1.0 - x, x);
        (1.0 - upper, upper)
    }
}

/// The continued fraction of `I_x(a, b) / (x^a y^b / B(a, b))` for `x` at most the mean; `y = 1 - x`.
fn fraction(a: f64, b: f64, x: f64, y: f64) -> f64 {
    let lambda = if x < 0.5 { a - (a + b) * x } else { (a + b) * y - b };
    let beta = |n: f64| {
        // Without the guard the first step at a = 1 would be 0/0.
        let even = if n == 0.0 { 0.0 } else { n * (b - n) * x / (a + 2.0 * n - 1.0) };
        let odd = (a + n) / (a + 2.0 * n + 1.0) * (lambda + 1.0 + n * (1.0 + y));
        n + even + odd
    };
    let alpha = |n: f64| {
        let d = a + 2.0 * n - 1.0;
        (a + n - 1.0) / d * ((a + b + n - 1.0) / d) * n * (b - n) * x * x
    };
    const TINY: f64 = 1e-300;
    let guard = |v: f64| if v.abs() < TINY { TINY } else { v };
    let first = guard(beta(0.0));
    let mut value = first;
    let mut c = first;
    let mut d = 0.0;
    let mut n = 1.0;
    // The number of steps grows with the root of the parameters; the cap lies beyond parameters of 1e12.
    while n < 1e7 {
        let (numerator, denominator) = (alpha(n), beta(n));
        d = 1.0 / guard(denominator + numerator * d);
        c = guard(denominator + numerator / c);
        let factor = c * d;
        value *= factor;
        if (factor - 1.0).abs() < 1e-16 || numerator == 0.0 {
            break;
        }
        n += 1.0;
    }
    1.0 / value
}

/// The `x` whose lower or upper tail under the beta law with parameters `a` and `b` is `probability`.
///
/// Newton's method within a bracket that halves by floating-point numbers, so that tiny quantiles keep all their digits.
/// NaN outside the range of the arguments.
///
/// ```
/// use thalweg::statistics::laws::{Tail, beta_quantile};
/// assert!((beta_quantile(1.0, 10.0, Tail::Upper, 0.025) - 0.30849710781876083).abs() < 1e-14);
/// ```
pub fn beta_quantile(a: f64, b: f64, tail: Tail, probability: f64) -> f64 {
    if !(a > 0.0 && b > 0.0 && (a + b).is_finite() && 0.0 <= probability && probability <= 1.0) {
        return f64::NAN;
    }
    // Positive where the quantile lies below x.
    let excess = |x: f64| {
        let (lower, upper) = beta_tails(a, b, x);
        match tail {
            Tail::Lower => lower - probability,
            Tail::Upper => probability - upper,
        }
    };
    if probability == 0.0 || probability == 1.0 {
        return if (probability == 0.0) == (tail == Tail::Lower) { 0.0 } else { 1.0 };
    }
    let (mut low, mut high) = (0.0_f64, 1.0_f64);
    let mut x = a / (a + b);
    for _ in 0..200 {
        let error = excess(x);
        if error == 0.0 {
            return x;
        }
        if error > 0.0 {
            high = x
        } else {
            low = x
        }
        let slope = a * b / (a + b) * binomial_mass(a, b, x, 1.0 - x) / (x * (1.0 - x));
        let newton = x - error / slope;
        // Positive floats are ordered like their bits: the middle of the bits halves a bracket down to any scale.
        let middle = f64::from_bits(low.to_bits() + (high.to_bits() - low.to_bits()) / 2);
        let next = if newton > low && newton < high { newton } else { middle };
        if middle == low || (next - x).abs() <= 1e-16 * x {
            return next;
        }
        x = next;
    }
    x
}

#[cfg(test)]
mod tests {
    use super::super::tests::rows;
    use super::*;

    #[test]
    fn tails_match_the_table() {
        for row in rows("beta_tails.txt") {
            let [a, b, x, lower, upper] = row[..] else { panic!("five numbers a row") };
            let tails = beta_tails(a, b, x);
            let bound = if a.max(b) > 1e4 { 1e-10 } else { 1e-12 };
            for (tail, exact) in [(tails.0, lower), (tails.1, upper)] {
                assert!((tail - exact).abs() <= bound * exact.max(1e-290), "{a} {b} {x}: {tail:e}, not {exact:e}");
            }
        }
    }

    #[test]
    fn quantiles_invert_the_tails() {
        for (a, b) in [(1.0, 1.0), (0.5, 0.5), (3.0, 8.0), (1.0, 1e9), (2e5, 3.0), (1e4, 1e4), (0.1, 20.0)] {
            for p in [1e-12, 0.005, 0.025, 0.3, 0.5, 0.9, 0.999] {
                for tail in [Tail::Lower, Tail::Upper] {
                    let x = beta_quantile(a, b, tail, p);
                    let (lower, upper) = beta_tails(a, b, x);
                    let back = if tail == Tail::Lower { lower } else { upper };
                    // Next to 1 the spacing of floats alone moves the tail.
                    let coarse = 1.0 - x < 1e-5;
                    assert!(coarse || (back - p).abs() <= 1e-10 * p, "{a} {b} {tail:?} {p}: {x:e} gives {back:e}");
                }
            }
        }
    }

    #[test]
    fn edges() {
        assert_eq!(beta_tails(2.0, 3.0, 0.0), (0.0, 1.0));
        assert_eq!(beta_tails(2.0, 3.0, 1.0), (1.0, 0.0));
        assert!(beta_tails(0.0, 3.0, 0.5).0.is_nan() && beta_tails(1.0, 3.0, f64::NAN).1.is_nan());
        assert_eq!(beta_quantile(2.0, 3.0, Tail::Lower, 0.0), 0.0);
        assert_eq!(beta_quantile(2.0, 3.0, Tail::Upper, 0.0), 1.0);
        assert_eq!(beta_quantile(2.0, 3.0, Tail::Upper, 1.0), 0.0);
        assert!(beta_quantile(2.0, -3.0, Tail::Upper, 0.5).is_nan());
        assert!(beta_tails(f64::INFINITY, 1.0, 0.5).0.is_nan());
    }
}
