//! Inverse trigonometric functions.

use std::f64::consts::{FRAC_PI_2, FRAC_PI_4, PI};

use super::pair::fast_two_sum;
use super::polynomial;

const HALF_PI_LOW: f64 = 6.123233995736766e-17;
const PI_LOW: f64 = 1.2246467991473532e-16;
const QUARTER_PI_LOW: f64 = 3.061616997868383e-17;

/// `(atan(t)/t - 1)/t^2` in `t^2`, for `t` up to 1/2; error 4e-18 of the inverse tangent.
const TANGENT: [f64; 13] = [
    -0.3333333333333333,
    0.19999999999999485,
    -0.1428571428559874,
    0.11111111100881761,
    -0.09090908618865388,
    0.07692294677482635,
    -0.06666435144143137,
    0.05879573107799684,
    -0.052400641544110685,
    0.04627870086418654,
    -0.03806224794996687,
    0.024999689507521367,
    -0.009211063504627926,
];

/// `(asin(t)/t - 1)/t^2` in `t^2`, for `t` up to 1/2; error 3e-19.
const SINE: [f64; 14] = [
    0.16666666666666666,
    0.07500000000000119,
    0.04464285714255019,
    0.030381944475693704,
    0.022372157435623815,
    0.017352816768546473,
    0.013963775787848137,
    0.011566511821890942,
    0.00962140274734483,
    0.009322101501082774,
    0.0030350071727267623,
    0.019579201619744684,
    -0.019277545928584557,
    0.02963502626354855,
];

/// The angle from 0 to pi/2 whose tangent is `b/a`, both at least 0, as a sum of two floats; 0 where both are.
#[inline(always)]
fn angle(a: f64, b: f64) -> (f64, f64) {
    let (large, small) = if b > a { (b, a) } else { (a, b) };
    // From 1/2 up the angle is taken from pi/4. There the difference is exact (Sterbenz 1974) and the quotient at most
    // 1/3, so that its two roundings stay small beside an angle that is at least 0.46. A border at tan(pi/8) balances
    // the polynomial better, but its difference is rounded: it cost 2.1 ulp. Both numbers are put into the one division
    // as they are, since a quotient rounded before would bring an error of its own.
    let middle = 2.0 * small > large;
    let factor = if large > 1e300 { 0.25 } else { 1.0 };
    let (large, small) = (large * factor, small * factor);
    let (top, bottom) = if middle { (small - large, small + large) } else { (small, large) };
    let t = if small == large { 0.0 } else { top / bottom };
    // Two infinities fail the comparison for `middle` and must not; two zeros fail it and must.
    let (base, base_low) = if middle || small == f64::INFINITY { (FRAC_PI_4, QUARTER_PI_LOW) } else { (0.0, 0.0) };
    let z = t * t;
    let (high, low) = fast_two_sum(base, t + (t * (z * polynomial(TANGENT, z)) + base_low));
    let beyond = FRAC_PI_2 - high;
    let beyond_low = HALF_PI_LOW - low + ((FRAC_PI_2 - beyond) - high);
    if b > a { (beyond, beyond_low) } else { (high, low) }
}

/// The inverse tangent, within 2 ulp (0.92 seen).
#[inline(always)]
pub fn arc_tangent(x: f64) -> f64 {
    let (high, low) = angle(1.0, x.abs());
    (high + low).copysign(x)
}

/// The angle of the point (x, y), from -pi to pi, within 2 ulp (1.48 seen); 0 or pi at the origin by the sign of
/// `x`.
#[inline(always)]
pub fn arc_tangent_2(y: f64, x: f64) -> f64 {
    let (high, low) = angle(x.abs(), y.abs());
    let turned = PI - high;
    let turned = turned + ((PI - turned) - high + (PI_LOW - low));
    let value = if x.is_sign_negative() { turned } else { high + low };
    let value = if x.is_nan() { x } else { value };
    if y.is_nan() { y } else { value.copysign(y) }
}

/// For `|x| > 1/2`: half the inverse cosine of `|x|`, as a sum of two floats. It is the inverse sine of
/// `sqrt((1 - |x|)/2)`, whose rounding error is carried along.
#[inline(always)]
fn half_arc_cosine(x: f64) -> (f64, f64) {
    let z = 0.5 * (1.0 - x.abs());
    let root = z.sqrt();
    let high = f64::from_bits(root.to_bits() & 0xffff_ffff_0000_0000);
    let low = (z - high * high) / (root + high);
    let low = if root == 0.0 { 0.0 } else { low };
    (high, low + root * (z * polynomial(SINE, z)))
}

/// The inverse sine, within 2 ulp; NaN outside -1..1.
#[inline(always)]
pub fn arc_sine(x: f64) -> f64 {
    let z = x * x;
    let near = x + x * (z * polynomial(SINE, z));
    let (high, low) = half_arc_cosine(x);
    let far = (FRAC_PI_4 - (2.0 * low - HALF_PI_LOW - (FRAC_PI_4 - 2.0 * high))).copysign(x);
    if x.abs() <= 0.5 { near } else { far }
}

/// The inverse cosine, within 2 ulp; NaN outside -1..1.
#[inline(always)]
pub fn arc_cosine(x: f64) -> f64 {
    let z = x * x;
    let near = FRAC_PI_2 - (x - (HALF_PI_LOW - x * (z * polynomial(SINE, z))));
    let (high, low) = half_arc_cosine(x);
    let right = 2.0 * (high + low);
    let left = PI - 2.0 * (high + (low - 0.5 * PI_LOW));
    let far = if x > 0.0 { right } else { left };
    if x.abs() <= 0.5 { near } else { far }
}
