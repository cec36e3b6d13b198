//! Powers: whole ones by products, real ones by logarithm and exponential; and the hypotenuse.

use super::exponential::{LN_2_HIGH, LN_2_LOW, exponential_of_pair};
use super::logarithm::take_apart;
use super::pair::{fast_two_sum, two_product, two_sum};
use super::polynomial;

/// One step of a whole power: a product of two numbers already made. Number 0 is the base.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct Step {
    /// The first factor.
    pub left: usize,
    /// The second factor.
    pub right: usize,
}

/// The products that make `base^exponent` for a positive exponent: squares of the base, then the product of those that
/// the binary digits ask for, largest first. The last step is the power; no step for exponent 1.
///
/// A negative power is that of the reciprocal: `x^-6` and `x^-3` then share all but one product, and a steep wall costs
/// one division. The price is half an ulp for each unit of the exponent.
pub fn power_steps(exponent: u32) -> Vec<Step> {
    let mut steps: Vec<Step> = Vec::new();
    let mut squares = vec![0];
    for _ in 1..u32::BITS - exponent.max(1).leading_zeros() {
        let last = squares[squares.len() - 1];
        steps.push(Step { left: last, right: last });
        squares.push(steps.len());
    }
    let mut product: Option<usize> = None;
    for (digit, &square) in squares.iter().enumerate().rev() {
        if exponent >> digit & 1 == 1 {
            product = Some(match product {
                None => square,
                Some(product) => {
                    steps.push(Step { left: product, right: square });
                    steps.len()
                }
            });
        }
    }
    steps
}

/// `x^exponent` by the products of [`power_steps`]; 1 for exponent 0.
pub fn power(x: f64, exponent: i32) -> f64 {
    let base = if exponent < 0 { 1.0 / x } else { x };
    match exponent.unsigned_abs() {
        0 => 1.0,
        1 => base,
        exponent => {
            let mut numbers = vec![base];
            for step in power_steps(exponent) {
                numbers.push(numbers[step.left] * numbers[step.right]);
            }
            numbers[numbers.len() - 1]
        }
    }
}

/// `2/(2k + 1)` from k = 2.
const SERIES: [f64; 10] = [
    2.0 / 5.0,
    2.0 / 7.0,
    2.0 / 9.0,
    2.0 / 11.0,
    2.0 / 13.0,
    2.0 / 15.0,
    2.0 / 17.0,
    2.0 / 19.0,
    2.0 / 21.0,
    2.0 / 23.0,
];

/// The logarithm of a positive finite number as a sum of two floats, to about 2^-65 of itself.
#[inline(always)]
fn logarithm_pair(x: f64) -> (f64, f64) {
    const TWO_THIRDS: f64 = 0.6666666666666666;
    const TWO_THIRDS_LOW: f64 = 3.700743415417188e-17;
    let (k, f) = take_apart(x);
    // s = f/(2 + f) as a pair.
    let (bottom, bottom_low) = two_sum(2.0, f);
    let s = f / bottom;
    let (back, back_low) = two_product(s, bottom);
    let s_low = (((f - back) - back_low) - s * bottom_low) / bottom;
    // log(1 + f) = 2s + 2/3 s^3 + ...; the cubic term is carried as a pair too.
    let (z, z_low) = two_product(s, s);
    let z_low = z_low + 2.0 * s * s_low;
    let (cube, cube_low) = two_product(z, s);
    let cube_low = cube_low + (z_low * s + z * s_low);
    let (third, third_low) = two_product(cube, TWO_THIRDS);
    let third_low = third_low + (cube_low * TWO_THIRDS + cube * TWO_THIRDS_LOW);
    let rest = cube * (z * polynomial(SERIES, z));
    let (sum, e) = two_sum(2.0 * s, third);
    let low = e + (2.0 * s_low + (third_low + rest));
    let (high, e) = two_sum(k * LN_2_HIGH, sum);
    let (tail, f) = two_sum(k * LN_2_LOW, low);
    let (high, g) = fast_two_sum(high, e + tail);
    // The third part of log 2: its product with k matters at the 65th digit only.
    (high, g + (f + k * 1.1612227229362532e-26))
}

/// `x^y`, within 2 ulp. Negative `x` with a whole `y` is allowed; with another it is NaN. `x^0` and `1^y` are 1.
#[inline(always)]
pub fn real_power(x: f64, y: f64) -> f64 {
    let size = x.abs();
    // Beyond this any x but 1 gives zero or infinity, and the products below would overflow on the way.
    let exponent = if y > 1e20 { 1e20 } else { y };
    let exponent = if exponent < -1e20 { -1e20 } else { exponent };
    let (high, low) = logarithm_pair(size);
    let (product, error) = two_product(exponent, high);
    let value = exponential_of_pair(product, if product.abs() < 800.0 { error + exponent * low } else { 0.0 });
    let whole = y.floor() == y;
    let odd = whole && 0.5 * y != (0.5 * y).floor();
    let limit = if (size > 1.0) == (y > 0.0) { f64::INFINITY } else { 0.0 };
    let value = if size == f64::INFINITY || y.abs() == f64::INFINITY && size != 1.0 { limit } else { value };
    let value = if size == 0.0 { if y > 0.0 { 0.0 } else { f64::INFINITY } } else { value };
    let value = if odd { value.copysign(x) } else { value };
    let value = if x < 0.0 && !whole { f64::NAN } else { value };
    let value = if x.is_nan() || y.is_nan() { f64::NAN } else { value };
    if y == 0.0 || x == 1.0 { 1.0 } else { value }
}

/// `sqrt(x^2 + y^2)`, within 2 ulp (1.13 seen), without needless overflow or underflow; infinity where either is infinite.
#[inline(always)]
pub fn hypotenuse(x: f64, y: f64) -> f64 {
    const UP: f64 = 4.149515568880993e180; // 2^600
    const DOWN: f64 = 2.409919865102884e-181; // 2^-600
    let (a, b) = (x.abs(), y.abs());
    let large = if a > b { a } else { b };
    let factor = if large > 1e150 { DOWN } else { 1.0 };
    let factor = if large < 1e-150 { UP } else { factor };
    let back = if large > 1e150 { UP } else { 1.0 };
    let back = if large < 1e-150 { DOWN } else { back };
    let (a, b) = (a * factor, b * factor);
    let value = (a * a + b * b).sqrt() * back;
    if x.abs() == f64::INFINITY || y.abs() == f64::INFINITY { f64::INFINITY } else { value }
}
