//! Number algebras: what the reference interpreter computes with.
//!
//! Reals give the value; duals give the derivative along a direction beside it. An interval algebra (for certificates)
//! fits the same trait.

use super::functions;
use super::operation::{Binary, Relation, Unary};

/// An algebra over which a program can be interpreted.
pub trait Number: Clone {
    /// A constant.
    fn constant(value: f64) -> Self;
    /// An operation of one operand.
    fn unary(operation: Unary, x: &Self) -> Self;
    /// An operation of two operands.
    fn binary(operation: Binary, x: &Self, y: &Self) -> Self;
    /// One of two, by a comparison.
    fn select(relation: Relation, left: &Self, right: &Self, then: &Self, otherwise: &Self) -> Self;
}

impl Number for f64 {
    fn constant(value: f64) -> Self {
        value
    }

    fn unary(operation: Unary, x: &Self) -> Self {
        functions::unary(operation, *x)
    }

    fn binary(operation: Binary, x: &Self, y: &Self) -> Self {
        functions::binary(operation, *x, *y)
    }

    fn select(relation: Relation, left: &Self, right: &Self, then: &Self, otherwise: &Self) -> Self {
        if relation.holds(*left, *right) { *then } else { *otherwise }
    }
}

/// A value with its derivative along one direction (Clifford 1873; forward differentiation, Wengert 1964).
///
/// ```
/// use thalweg::numbers::algebra::{Dual, Number};
/// use thalweg::numbers::operation::Unary;
/// let x = Dual { value: 2.0, slope: 1.0 };
/// assert_eq!(Dual::unary(Unary::Reciprocal, &x), Dual { value: 0.5, slope: -0.25 });
/// ```
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Dual {
    /// The value.
    pub value: f64,
    /// The derivative.
    pub slope: f64,
}

impl Number for Dual {
    fn constant(value: f64) -> Self {
        Dual { value, slope: 0.0 }
    }

    fn unary(operation: Unary, x: &Self) -> Self {
        let value = functions::unary(operation, x.value);
        Dual { value, slope: functions::gate(x.slope, unary_slope(operation, x.value, value)) }
    }

    fn binary(operation: Binary, x: &Self, y: &Self) -> Self {
        let value = functions::binary(operation, x.value, y.value);
        if operation == Binary::Gate {
            // What the gate hides it hides in the derivative too.
            return Dual { value, slope: functions::gate(x.slope, y.value) + functions::gate(x.value, y.slope) };
        }
        let (by_x, by_y) = binary_slopes(operation, x.value, y.value, value);
        Dual { value, slope: functions::gate(x.slope, by_x) + functions::gate(y.slope, by_y) }
    }

    fn select(relation: Relation, left: &Self, right: &Self, then: &Self, otherwise: &Self) -> Self {
        if relation.holds(left.value, right.value) { *then } else { *otherwise }
    }
}

/// The derivative of an operation of one operand at `x`, where its value is `value`. At kinks: 0 for `abs` at 0, 0 for
/// `sign` and `floor` everywhere.
pub fn unary_slope(operation: Unary, x: f64, value: f64) -> f64 {
    use functions::{cosine, hyperbolic_cosine, hyperbolic_sine, sine};
    match operation {
        Unary::Negate => -1.0,
        Unary::Absolute => functions::sign(x),
        Unary::Sign | Unary::Floor => 0.0,
        Unary::Reciprocal => -(value * value),
        Unary::SquareRoot => 0.5 / value,
        Unary::Exponential => value,
        Unary::Logarithm => 1.0 / x,
        Unary::Logarithm10 => std::f64::consts::LOG10_E / x,
        Unary::Sine => cosine(x),
        Unary::Cosine => -sine(x),
        Unary::Tangent => 1.0 + value * value,
        Unary::ArcSine => 1.0 / (1.0 - x * x).sqrt(),
        Unary::ArcCosine => -1.0 / (1.0 - x * x).sqrt(),
        Unary::ArcTangent => 1.0 / (1.0 + x * x),
        Unary::HyperbolicSine => hyperbolic_cosine(x),
        Unary::HyperbolicCosine => hyperbolic_sine(x),
        Unary::HyperbolicTangent => 1.0 - value * value,
        Unary::ErrorFunction => std::f64::consts::FRAC_2_SQRT_PI * functions::exponential(-(x * x)),
    }
}

/// The derivatives of an operation of two operands by each. Where `min` and `max` tie, the second operand counts.
pub fn binary_slopes(operation: Binary, x: f64, y: f64, value: f64) -> (f64, f64) {
    match operation {
        Binary::Add => (1.0, 1.0),
        Binary::Subtract => (1.0, -1.0),
        Binary::Multiply => (y, x),
        Binary::Divide => (1.0 / y, -(value / y)),
        Binary::Minimum => {
            if x < y {
                (1.0, 0.0)
            } else {
                (0.0, 1.0)
            }
        }
        Binary::Maximum => {
            if x > y {
                (1.0, 0.0)
            } else {
                (0.0, 1.0)
            }
        }
        Binary::Power => (y * functions::real_power(x, y - 1.0), value * functions::logarithm(x)),
        Binary::ArcTangent2 => {
            let square = x * x + y * y;
            (y / square, -(x / square))
        }
        Binary::Hypotenuse => (x / value, y / value),
        Binary::Gate => (y, x),
    }
}
