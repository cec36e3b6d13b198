//! The elementary functions, our own, the same bits everywhere.
//!
//! Every function is a straight line of IEEE operations, selections and moves of bits: no call to a platform library, no
//! fused multiply-add, no table lookup. So a loop over lanes turns into vector instructions as it stands, and a
//! generator of machine code can expand a function into the program's own instructions. The one exception is the
//! reduction of huge angles (beyond about 1.6e6), which is a scalar detour that the argument alone decides.
//!
//! Errors in units in the last place (ulp) are at most 2, and 4 for the tangent, the error function, the hyperbolic
//! functions and real powers; `tests/data/numbers` holds the table that this is checked against. Polynomials without a
//! name are interpolated at Chebyshev points with 60 digits; the others are Taylor coefficients.

mod angle;
mod arc;
mod error_function;
mod exponential;
mod hyperbolic;
mod logarithm;
mod pair;
mod power;

use super::operation::{Binary, Unary};

pub use angle::{cosine, is_moderate_angle, moderate_cosine, moderate_sine, moderate_tangent, sine, tangent};
pub use arc::{arc_cosine, arc_sine, arc_tangent, arc_tangent_2};
pub use error_function::error_function;
pub use exponential::exponential;
pub use hyperbolic::{hyperbolic_cosine, hyperbolic_sine, hyperbolic_tangent};
pub use logarithm::{logarithm, logarithm_10};
pub(in crate::numbers) use pair::{two_product, two_sum};
pub use power::{Step, hypotenuse, power, power_steps, real_power};

/// The value of an operation of one operand.
#[inline(always)]
pub fn unary(operation: Unary, x: f64) -> f64 {
    match operation {
        Unary::Negate => -x,
        Unary::Absolute => x.abs(),
        Unary::Sign => sign(x),
        Unary::Floor => x.floor(),
        Unary::Reciprocal => 1.0 / x,
        Unary::SquareRoot => x.sqrt(),
        Unary::Exponential => exponential(x),
        Unary::Logarithm => logarithm(x),
        Unary::Logarithm10 => logarithm_10(x),
        Unary::Sine => sine(x),
        Unary::Cosine => cosine(x),
        Unary::Tangent => tangent(x),
        Unary::ArcSine => arc_sine(x),
        Unary::ArcCosine => arc_cosine(x),
        Unary::ArcTangent => arc_tangent(x),
        Unary::HyperbolicSine => hyperbolic_sine(x),
        Unary::HyperbolicCosine => hyperbolic_cosine(x),
        Unary::HyperbolicTangent => hyperbolic_tangent(x),
        Unary::ErrorFunction => error_function(x),
    }
}

/// The value of an operation of two operands.
#[inline(always)]
pub fn binary(operation: Binary, x: f64, y: f64) -> f64 {
    match operation {
        Binary::Add => x + y,
        Binary::Subtract => x - y,
        Binary::Multiply => x * y,
        Binary::Divide => x / y,
        Binary::Minimum => minimum(x, y),
        Binary::Maximum => maximum(x, y),
        Binary::Power => real_power(x, y),
        Binary::ArcTangent2 => arc_tangent_2(x, y),
        Binary::Hypotenuse => hypotenuse(x, y),
        Binary::Gate => gate(x, y),
    }
}

/// -1, 0 or 1; NaN at NaN.
#[inline(always)]
pub fn sign(x: f64) -> f64 {
    let one = 1.0_f64.copysign(x);
    if x == 0.0 || x.is_nan() { x } else { one }
}

/// The smaller; NaN where either is NaN; of 0 and -0 the second.
#[inline(always)]
pub fn minimum(x: f64, y: f64) -> f64 {
    let smaller = if x < y { x } else { y };
    if x.is_nan() { x } else { smaller }
}

/// The larger; NaN where either is NaN; of 0 and -0 the second.
#[inline(always)]
pub fn maximum(x: f64, y: f64) -> f64 {
    let larger = if x > y { x } else { y };
    if x.is_nan() { x } else { larger }
}

/// `x * y`, but 0 wherever `x` is 0.
#[inline(always)]
pub fn gate(x: f64, y: f64) -> f64 {
    let product = x * y;
    if x == 0.0 { 0.0 } else { product }
}

/// Whether a number is a power of two, positive or negative, whose reciprocal is exact too.
pub fn is_power_of_two(x: f64) -> bool {
    x.is_normal() && x.to_bits() << 12 == 0 && (1.0 / x).is_normal()
}

/// A polynomial by Horner's rule, constant first.
#[inline(always)]
fn polynomial<const N: usize>(coefficients: [f64; N], x: f64) -> f64 {
    let mut sum = coefficients[N - 1];
    let mut place = N - 1;
    while place > 0 {
        place -= 1;
        sum = sum * x + coefficients[place];
    }
    sum
}
