//! The exponential function.

use super::polynomial;

pub(super) const LN_2_HIGH: f64 = 0.6931471803691238;
pub(super) const LN_2_LOW: f64 = 1.9082149292705877e-10;
/// Adding it rounds a number below 2^51 to a whole one, which then stands in the low bits.
pub(super) const ROUNDER: f64 = 6_755_399_441_055_744.0;

/// `1/k!` from k = 2.
const TAYLOR: [f64; 12] = [
    0.5,
    0.16666666666666666,
    0.041666666666666664,
    0.008333333333333333,
    0.001388888888888889,
    0.0001984126984126984,
    2.48015873015873e-05,
    2.7557319223985893e-06,
    2.755731922398589e-07,
    2.505210838544172e-08,
    2.08767569878681e-09,
    1.6059043836821613e-10,
];

/// `e^x`, within 1 ulp. Beyond 709.78 infinity, below -745.13 zero.
#[inline(always)]
pub fn exponential(x: f64) -> f64 {
    exponential_of_pair(x, 0.0)
}

/// `e^(x + low)` for a small `low`.
#[inline(always)]
pub(super) fn exponential_of_pair(x: f64, low: f64) -> f64 {
    // Clamped so that the powers of two below stay in range; a NaN passes through both selections.
    let x = if x > 720.0 { 720.0 } else { x };
    let x = if x < -760.0 { -760.0 } else { x };
    let shifted = x * std::f64::consts::LOG2_E + ROUNDER;
    let turns = shifted - ROUNDER;
    let reduced = (x - turns * LN_2_HIGH) - (turns * LN_2_LOW - low);
    let value = 1.0 + (reduced + reduced * reduced * polynomial(TAYLOR, reduced));
    // Two factors, since one would leave the range of normal numbers before the product does.
    let half = (0.5 * turns + ROUNDER) - ROUNDER;
    value * power_of_two(half) * power_of_two(turns - half)
}

/// `2^k` for a whole number in the range of normal numbers.
#[inline(always)]
pub(super) fn power_of_two(whole: f64) -> f64 {
    let bits = (whole + 1023.0 + ROUNDER).to_bits();
    f64::from_bits(bits << 52)
}
