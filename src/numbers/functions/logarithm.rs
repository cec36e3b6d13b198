//! Logarithms.

use super::exponential::{LN_2_HIGH, LN_2_LOW};
use super::polynomial;

/// `2/(2k + 1)` from k = 1: the series of `2 atanh(s)/s - 2` in `s^2`.
const SERIES: [f64; 11] = [
    2.0 / 3.0,
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

/// `x = 2^k (1 + f)` with `1 + f` from `sqrt(1/2)` to `sqrt(2)`; gives `k` and `f`. For positive finite `x`.
#[inline(always)]
pub(super) fn take_apart(x: f64) -> (f64, f64) {
    let tiny = x < f64::MIN_POSITIVE;
    let x = if tiny { x * 18_014_398_509_481_984.0 } else { x };
    let bits = x.to_bits();
    // Adding this moves the border between two exponents from 1 to sqrt(2).
    const TO_BORDER: u64 = 0x3ff0_0000_0000_0000 - 0x3fe6_a09e_667f_3bcd;
    let moved = bits.wrapping_add(TO_BORDER);
    // The exponent as a float: its bits below those of 2^52.
    let exponent = f64::from_bits((moved >> 52) | 0x4330_0000_0000_0000) - 4_503_599_627_370_496.0 - 1023.0;
    let mantissa = f64::from_bits((moved & 0x000f_ffff_ffff_ffff) + 0x3fe6_a09e_667f_3bcd);
    (exponent - if tiny { 54.0 } else { 0.0 }, mantissa - 1.0)
}

/// What a logarithm is outside the positive finite numbers.
#[inline(always)]
fn mend(x: f64, value: f64) -> f64 {
    let value = if x == f64::INFINITY { x } else { value };
    let value = if x == 0.0 { f64::NEG_INFINITY } else { value };
    if x >= 0.0 { value } else { f64::NAN }
}

/// `log(1 + f) = f - (half_square - tail)`.
#[inline(always)]
fn parts(f: f64) -> (f64, f64) {
    let s = f / (2.0 + f);
    let z = s * s;
    let half_square = 0.5 * f * f;
    (half_square, s * (half_square + z * polynomial(SERIES, z)))
}

/// The natural logarithm, within 1 ulp; minus infinity at 0, NaN below.
#[inline(always)]
pub fn logarithm(x: f64) -> f64 {
    let (k, f) = take_apart(x);
    let (half_square, tail) = parts(f);
    mend(x, k * LN_2_HIGH - ((half_square - (tail + k * LN_2_LOW)) - f))
}

/// The logarithm to base 10, within 2 ulp.
#[inline(always)]
pub fn logarithm_10(x: f64) -> f64 {
    const LOG10_2_HIGH: f64 = 0.3010299955494702;
    const LOG10_2_LOW: f64 = 1.1451100898021838e-10;
    const LOG10_E_HIGH: f64 = 0.434294480830431;
    const LOG10_E_LOW: f64 = 1.0728208431540585e-9;
    let (k, f) = take_apart(x);
    let (half_square, tail) = parts(f);
    // The leading part with its low bits cleared, so that its product with the short constant is exact.
    let whole = f - half_square;
    let high = f64::from_bits(whole.to_bits() & 0xffff_ffff_f800_0000);
    let low = (f - high) - half_square + tail;
    let small = k * LOG10_2_LOW + (low + high) * LOG10_E_LOW + low * LOG10_E_HIGH;
    let (sum, rest) = super::pair::two_sum(k * LOG10_2_HIGH, high * LOG10_E_HIGH);
    mend(x, sum + (rest + small))
}
