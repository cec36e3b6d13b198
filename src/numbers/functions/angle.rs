//! Sine, cosine and tangent.

use super::exponential::ROUNDER;
use super::pair::two_sum;
use super::polynomial;

/// `pi/2` in parts of 33 bits and a rest: products with whole numbers below 2^20 are exact.
const HALF_PI: [f64; 4] = [1.5707963267341256, 6.077100506303966e-11, 2.0222662487111665e-21, 8.4784276603689e-32];

/// Beyond this the products with the parts of `pi/2` are no longer exact.
const LARGE: f64 = 1_647_000.0;

/// The first 1280 binary digits of `2/pi`.
const TWO_OVER_PI: [u64; 20] = [
    0xa2f9836e4e441529,
    0xfc2757d1f534ddc0,
    0xdb6295993c439041,
    0xfe5163abdebbc561,
    0xb7246e3a424dd2e0,
    0x06492eea09d1921c,
    0xfe1deb1cb129a73e,
    0xe88235f52ebb4484,
    0xe99c7026b45f7e41,
    0x3991d639835339f4,
    0x9c845f8bbdf9283b,
    0x1ff897ffde05980f,
    0xef2f118b5a0a6d1f,
    0x6d367ecf27cb09b7,
    0x4f463f669e5fea2d,
    0x7527bac7ebe5f17b,
    0x3d0739f78a5292ea,
    0x6bfb5fb11f8d5d08,
    0x56033046fc7b6bab,
    0xf0cfbc209af4361d,
];

/// `(-1)^k/(2k + 1)!` from k = 1.
const SINE: [f64; 8] = [
    -0.16666666666666666,
    0.008333333333333333,
    -0.0001984126984126984,
    2.7557319223985893e-06,
    -2.505210838544172e-08,
    1.6059043836821613e-10,
    -7.647163731819816e-13,
    2.8114572543455206e-15,
];

/// `(-1)^k/(2k)!` from k = 2.
const COSINE: [f64; 8] = [
    0.041666666666666664,
    -0.001388888888888889,
    2.48015873015873e-05,
    -2.755731922398589e-07,
    2.08767569878681e-09,
    -1.1470745597729725e-11,
    4.779477332387385e-14,
    -1.5619206968586225e-16,
];

/// `x` less a multiple of `pi/2`, as a sum of two floats, and the multiple modulo 4 (Cody and Waite 1980).
#[inline(always)]
fn reduce_moderate(x: f64) -> (f64, f64, u64) {
    let shifted = x * std::f64::consts::FRAC_2_PI + ROUNDER;
    let turns = shifted - ROUNDER;
    let first = x - turns * HALF_PI[0];
    let (second, e) = two_sum(first, -(turns * HALF_PI[1]));
    let (third, f) = two_sum(second, -(turns * HALF_PI[2]));
    let (high, low) = two_sum(third, (e + f) - turns * HALF_PI[3]);
    (high, low, shifted.to_bits() & 3)
}

/// Whether an angle is reduced on the straight line; huge ones, infinities and NaN are not.
#[inline(always)]
pub fn is_moderate_angle(x: f64) -> bool {
    x.abs() <= LARGE
}

#[inline(always)]
fn reduce(x: f64) -> (f64, f64, u64) {
    if is_moderate_angle(x) { reduce_moderate(x) } else { reduce_large(x) }
}

/// The same for huge angles: the product with 192 digits of `2/pi`, of which the whole turns fall away (Payne and Hanek
/// 1983). Kept out of the straight line: no lane of an ordinary landscape comes here.
#[cold]
#[inline(never)]
fn reduce_large(x: f64) -> (f64, f64, u64) {
    if !x.is_finite() {
        return (f64::NAN, 0.0, 0);
    }
    let bits = x.abs().to_bits();
    let exponent = (bits >> 52) as i64 - 1075;
    let mantissa = u128::from(bits & 0x000f_ffff_ffff_ffff | 0x0010_0000_0000_0000);
    // Digits of 2/pi from place `skip`: those before it contribute multiples of 4 only.
    let skip = (exponent - 2).max(0) as usize;
    let word = |number: usize| {
        let (place, shift) = ((skip + 64 * number) / 64, (skip + 64 * number) % 64);
        let next = if shift == 0 { 0 } else { TWO_OVER_PI[place + 1] >> (64 - shift) };
        TWO_OVER_PI[place] << shift | next
    };
    // mantissa * 0.w0 w1 w2 w3, in units of 2^-256 times 2^(exponent - skip).
    let mut product = [0_u64; 5];
    let mut carry = 0_u128;
    for number in (0..4).rev() {
        let sum = mantissa * u128::from(word(number)) + carry;
        product[number + 1] = sum as u64;
        carry = sum >> 64;
    }
    product[0] = carry as u64;
    // The point stands behind product[0], moved by exponent - skip places: 2 for the hugest angles, less below.
    let point = (256 - (exponent - skip as i64)) as usize;
    let digits = |place: usize| {
        let (limb, shift) = (4 - place / 64, place % 64);
        let above = if shift == 0 || limb == 0 { 0 } else { product[limb - 1] << (64 - shift) };
        product[limb] >> shift | above
    };
    let mut quadrant = digits(point) & 3;
    let mut fraction = [digits(point - 64), digits(point - 128), digits(point - 192)];
    let negative = fraction[0] >> 63 == 1;
    if negative {
        quadrant = (quadrant + 1) & 3;
        let mut carry = true;
        for digit in fraction.iter_mut().rev() {
            let (flipped, over) = (!*digit).overflowing_add(u64::from(carry));
            *digit = flipped;
            carry = over;
        }
    }
    let zeros = if fraction[0] != 0 { fraction[0].leading_zeros() } else { 64 + fraction[1].leading_zeros() };
    let shift = (zeros % 64) as usize;
    let start = (zeros / 64) as usize;
    let take = |number: usize| {
        let high = fraction.get(number).copied().unwrap_or(0);
        let low = fraction.get(number + 1).copied().unwrap_or(0);
        if shift == 0 { high } else { high << shift | low >> (64 - shift) }
    };
    let scale = |digits: u64, place: i32| digits as f64 * super::exponential::power_of_two(f64::from(-place));
    let leading = take(start);
    let high = scale(leading & !0x7ff, 64 + zeros as i32);
    let low = scale(leading & 0x7ff, 64 + zeros as i32) + scale(take(start + 1), 128 + zeros as i32);
    let (product, error) = super::pair::two_product(high, std::f64::consts::FRAC_PI_2);
    let rest = error + (low * std::f64::consts::FRAC_PI_2 + high * 6.123233995736766e-17);
    let (high, low) = super::pair::fast_two_sum(product, rest);
    let flip = if negative != (x < 0.0) { -1.0 } else { 1.0 };
    let quadrant = if x < 0.0 { (4 - quadrant) & 3 } else { quadrant };
    (flip * high, flip * low, quadrant)
}

/// The sine of `high + low`, at most `pi/4` in size.
#[inline(always)]
fn sine_near(high: f64, low: f64) -> f64 {
    let z = high * high;
    high + (high * z * polynomial(SINE, z) + low * (1.0 - 0.5 * z))
}

/// The cosine of `high + low`, at most `pi/4` in size.
#[inline(always)]
fn cosine_near(high: f64, low: f64) -> f64 {
    let z = high * high;
    let half = 0.5 * z;
    let leading = 1.0 - half;
    leading + (((1.0 - leading) - half) + (z * z * polynomial(COSINE, z) - high * low))
}

/// Sine and cosine of a reduced angle, and its quadrant.
type Both = (f64, f64, u64);

#[inline(always)]
fn both((high, low, quadrant): (f64, f64, u64)) -> Both {
    (sine_near(high, low), cosine_near(high, low), quadrant)
}

#[inline(always)]
fn sine_of(x: f64, (s, c, quadrant): Both) -> f64 {
    let value = if quadrant & 1 == 0 { s } else { c };
    let value = f64::from_bits(value.to_bits() ^ (quadrant & 2) << 62);
    // Keeps the sign of zero.
    if x == 0.0 { x } else { value }
}

#[inline(always)]
fn cosine_of((s, c, quadrant): Both) -> f64 {
    let value = if quadrant & 1 == 0 { c } else { s };
    f64::from_bits(value.to_bits() ^ ((quadrant + 1) & 2) << 62)
}

#[inline(always)]
fn tangent_of(x: f64, (s, c, quadrant): Both) -> f64 {
    let (top, bottom) = if quadrant & 1 == 0 { (s, c) } else { (-c, s) };
    if x == 0.0 { x } else { top / bottom }
}

/// The sine, within 1 ulp at every finite angle; NaN at infinity.
#[inline(always)]
pub fn sine(x: f64) -> f64 {
    sine_of(x, both(reduce(x)))
}

/// The cosine, within 1 ulp at every finite angle; NaN at infinity.
#[inline(always)]
pub fn cosine(x: f64) -> f64 {
    cosine_of(both(reduce(x)))
}

/// The tangent, within 3 ulp.
#[inline(always)]
pub fn tangent(x: f64) -> f64 {
    tangent_of(x, both(reduce(x)))
}

/// The sine of a moderate angle, on a straight line.
#[inline(always)]
pub fn moderate_sine(x: f64) -> f64 {
    sine_of(x, both(reduce_moderate(x)))
}

/// The cosine of a moderate angle, on a straight line.
#[inline(always)]
pub fn moderate_cosine(x: f64) -> f64 {
    cosine_of(both(reduce_moderate(x)))
}

/// The tangent of a moderate angle, on a straight line.
#[inline(always)]
pub fn moderate_tangent(x: f64) -> f64 {
    tangent_of(x, both(reduce_moderate(x)))
}
