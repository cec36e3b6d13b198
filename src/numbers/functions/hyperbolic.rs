//! Hyperbolic functions.

use super::exponential::exponential;
use super::polynomial;

/// `1/(2k + 1)!` from k = 1.
const SINE: [f64; 9] = [
    0.16666666666666666,
    0.008333333333333333,
    0.0001984126984126984,
    2.7557319223985893e-06,
    2.505210838544172e-08,
    1.6059043836821613e-10,
    7.647163731819816e-13,
    2.8114572543455206e-15,
    8.22063524662433e-18,
];

/// The hyperbolic sine of a number from -1 to 1.
#[inline(always)]
fn sine_near(x: f64) -> f64 {
    let z = x * x;
    x + x * (z * polynomial(SINE, z))
}

/// The hyperbolic sine, within 4 ulp.
#[inline(always)]
pub fn hyperbolic_sine(x: f64) -> f64 {
    // The root of the exponential, since its square leaves the range only where the result does.
    let root = exponential(0.5 * x.abs());
    let far = ((0.5 * root) * root - 0.5 / root / root).copysign(x);
    if x.abs() <= 1.0 { sine_near(x) } else { far }
}

/// The hyperbolic cosine, within 4 ulp.
#[inline(always)]
pub fn hyperbolic_cosine(x: f64) -> f64 {
    let root = exponential(0.5 * x.abs());
    (0.5 * root) * root + 0.5 / root / root
}

/// The hyperbolic tangent, within 4 ulp.
#[inline(always)]
pub fn hyperbolic_tangent(x: f64) -> f64 {
    let sine = sine_near(x);
    let near = sine / (1.0 + sine * sine).sqrt();
    let decay = exponential(-2.0 * x.abs());
    let far = ((1.0 - decay) / (1.0 + decay)).copysign(x);
    if x.abs() <= 1.0 { near } else { far }
}
