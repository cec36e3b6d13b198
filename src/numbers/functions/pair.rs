//! Numbers as unevaluated sums of two floats, where one float is not enough on the way.

/// `x + y` and its rounding error (Knuth 1969).
#[inline(always)]
pub fn two_sum(x: f64, y: f64) -> (f64, f64) {
    let sum = x + y;
    let part = sum - x;
    (sum, (x - (sum - part)) + (y - part))
}

/// The same where `|x| >= |y|` (Dekker 1971).
#[inline(always)]
pub fn fast_two_sum(x: f64, y: f64) -> (f64, f64) {
    let sum = x + y;
    (sum, y - (sum - x))
}

/// `x * y` and its rounding error (Dekker 1971, with Veltkamp's splitting); no operand beyond 1e290.
#[inline(always)]
pub fn two_product(x: f64, y: f64) -> (f64, f64) {
    let (a, b) = (split(x), split(y));
    let product = x * y;
    (product, ((a.0 * b.0 - product) + a.0 * b.1 + a.1 * b.0) + a.1 * b.1)
}

#[inline(always)]
fn split(x: f64) -> (f64, f64) {
    let wide = 134_217_729.0 * x;
    let high = wide - (wide - x);
    (high, x - high)
}
