//! Inverse trigonometric functions.

use std::f64::consts::{FRAC_PI_2, FRAC_PI_4, PI};

use super::polynomial;

const HALF_PI_LOW: f64 = 6.123233995736766e-17;
const PI_LOW: f64 = 1.2246467991473532e-16;
const QUARTER_PI_LOW: f64 = 3.061616997868383e-17;

/// `(atan(t)/t - 1)/t^2` in `t^2`, for `t` up to `sqrt(2) - 1`; error 2e-19.
const TANGENT: [f64; 12] = [
    -0.3333333333333333,
    0.19999999999999804,
    -0.14285714285659779,
    0.11111111105150588,
    -0.09090908753259112,
    0.07692296368042296,
    -0.0666642476020052,
    0.05878927554473807,
    -0.05230443640686948,
    0.045515447340221615,
    -0.03456931506332609,
    0.016284375050043393,
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

/// The inverse tangent of a number from 0 to infinity, as a sum of two floats.
#[inline(always)]
fn arc_tangent_positive(x: f64) -> (f64, f64) {
    const LOW: f64 = 0.41421356237309503;
    const HIGH: f64 = 2.414213562373095;
    let (top, bottom) = if x > HIGH { (-1.0, x) } else { (x - 1.0, x + 1.0) };
    let (top, bottom) = if x > LOW { (top, bottom) } else { (x, 1.0) };
    let (base, base_low) = if x > HIGH { (FRAC_PI_2, HALF_PI_LOW) } else { (FRAC_PI_4, QUARTER_PI_LOW) };
    let (base, base_low) = if x > LOW { (base, base_low) } else { (0.0, 0.0) };
    let t = top / bottom;
    let z = t * t;
    super::pair::fast_two_sum(base, t + (t * (z * polynomial(TANGENT, z)) + base_low))
}

/// The inverse tangent, within 1 ulp.
#[inline(always)]
pub fn arc_tangent(x: f64) -> f64 {
    let (high, low) = arc_tangent_positive(x.abs());
    (high + low).copysign(x)
}

/// The angle of the point (x, y), from -pi to pi, within 2 ulp; 0 or pi at the origin by the sign of `x`.
#[inline(always)]
pub fn arc_tangent_2(y: f64, x: f64) -> f64 {
    let (a, b) = (x.abs(), y.abs());
    let (large, small) = if b > a { (b, a) } else { (a, b) };
    let ratio = small / large;
    let ratio = if large == 0.0 { 0.0 } else { ratio };
    let ratio = if small == f64::INFINITY { 1.0 } else { ratio };
    let (high, low) = arc_tangent_positive(ratio);
    let (high, low) = if b > a {
        (FRAC_PI_2 - high, HALF_PI_LOW - low + ((FRAC_PI_2 - (FRAC_PI_2 - high)) - high))
    } else {
        (high, low)
    };
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
