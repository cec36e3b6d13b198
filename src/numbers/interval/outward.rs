//! Arithmetic rounded down and up.
//!
//! The error of a sum or product is itself a float (Knuth 1969, Dekker 1971), so its sign tells whether the rounded
//! result lies on the wrong side. Where it cannot be seen, near overflow and underflow, the result is moved one float
//! outward regardless.

use crate::numbers::functions::{two_product, two_sum};

/// The float `n` places below; infinities included, and of them minus infinity stays.
pub(super) fn below(x: f64, n: u32) -> f64 {
    (0..n).fold(x, |x, _| x.next_down())
}

/// The float `n` places above.
pub(super) fn above(x: f64, n: u32) -> f64 {
    -below(-x, n)
}

/// `x + y` rounded down; no operand may be plus infinity.
pub(super) fn sum_below(x: f64, y: f64) -> f64 {
    let (sum, error) = two_sum(x, y);
    if !sum.is_finite() {
        // A sum of finite numbers that overflows upward still lies above the greatest float.
        return if sum == f64::INFINITY { f64::MAX } else { f64::NEG_INFINITY };
    }
    // An overflow on the way leaves a NaN for an error.
    if error >= 0.0 { sum } else { sum.next_down() }
}

/// `x + y` rounded up; no operand may be minus infinity.
pub(super) fn sum_above(x: f64, y: f64) -> f64 {
    -sum_below(-x, -y)
}

/// `x * y` rounded down, where 0 times infinity is 0: the infinity stands for numbers without a bound.
pub(super) fn product_below(x: f64, y: f64) -> f64 {
    if x == 0.0 || y == 0.0 {
        return 0.0;
    }
    let product = x * y;
    if !x.is_finite() || !y.is_finite() {
        return product;
    }
    if product == f64::INFINITY {
        return f64::MAX;
    }
    // Underflow takes the size, not the sign: squares stay above 0.
    if product == 0.0 && (x > 0.0) == (y > 0.0) {
        return 0.0;
    }
    if !(visible(product) && visible(x) && visible(y)) {
        return product.next_down();
    }
    if two_product(x, y).1 >= 0.0 { product } else { product.next_down() }
}

/// `x * y` rounded up.
pub(super) fn product_above(x: f64, y: f64) -> f64 {
    -product_below(-x, y)
}

/// `x / y` rounded down, for a `y` other than 0; a number over infinity is 0, infinity over infinity too.
pub(super) fn quotient_below(x: f64, y: f64) -> f64 {
    if x == 0.0 || y.is_infinite() {
        return 0.0;
    }
    let quotient = x / y;
    if x.is_infinite() {
        return quotient;
    }
    if quotient == f64::INFINITY {
        return f64::MAX;
    }
    if quotient == 0.0 && (x > 0.0) == (y > 0.0) {
        return 0.0;
    }
    if !(visible(quotient) && visible(x) && visible(y)) {
        return quotient.next_down();
    }
    let (product, error) = two_product(quotient, y);
    // What is left of `x`; the difference is exact, since the product is within half an ulp of the quotient of it.
    let rest = (x - product) - error;
    if rest == 0.0 || (rest > 0.0) == (y > 0.0) { quotient } else { quotient.next_down() }
}

/// `x / y` rounded up.
pub(super) fn quotient_above(x: f64, y: f64) -> f64 {
    -quotient_below(-x, y)
}

/// The square root of a number from 0 to infinity, rounded down and up.
pub(super) fn roots(x: f64) -> (f64, f64) {
    let root = x.sqrt();
    if x == 0.0 || x == f64::INFINITY {
        return (root, root);
    }
    if !visible(x) {
        return (root.next_down(), root.next_up());
    }
    let (square, error) = two_product(root, root);
    let rest = (x - square) - error;
    let lower = if rest >= 0.0 { root } else { root.next_down() };
    let upper = if rest <= 0.0 { root } else { root.next_up() };
    (lower, upper)
}

/// Whether products around this size have an error that neither overflows nor underflows.
fn visible(x: f64) -> bool {
    1e-140 < x.abs() && x.abs() < 1e140
}
