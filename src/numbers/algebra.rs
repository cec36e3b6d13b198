//! Number algebras: what the reference interpreter computes with.
//!
//! Reals give the value; duals give the derivative along a direction beside it;
//! [intervals](super::interval::Interval) bound the values over a whole box.

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
    /// A whole power: the products of [`functions::power_steps`], of the reciprocal where the exponent is negative. An
    /// algebra may know better than its own products, but must hold what they give.
    fn power(x: &Self, exponent: i32) -> Self {
        if exponent == 0 {
            return Self::constant(1.0);
        }
        let mut numbers = vec![if exponent < 0 { Self::unary(Unary::Reciprocal, x) } else { x.clone() }];
        for step in functions::power_steps(exponent.unsigned_abs()) {
            numbers.push(Self::binary(Binary::Multiply, &numbers[step.left], &numbers[step.right]));
        }
        numbers.swap_remove(numbers.len() - 1)
    }
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

#[cfg(test)]
mod tests {
    use super::*;
    use std::fs;
    use std::path::Path;

    /// Rows of a table of functions: the arguments and the value.
    fn table(name: &str) -> Vec<Vec<f64>> {
        let path = Path::new(env!("CARGO_MANIFEST_DIR")).join(format!("tests/data/numbers/{name}.txt"));
        let text = fs::read_to_string(path).unwrap();
        let rows = text.lines().filter(|line| !line.starts_with('#'));
        rows.map(|row| row.split(' ').map(|word| f64::from_bits(u64::from_str_radix(word, 16).unwrap())).collect())
            .collect()
    }

    fn slope(operation: Unary, x: f64) -> f64 {
        Dual::unary(operation, &Dual { value: x, slope: 1.0 }).slope
    }

    /// A central difference with its leading error removed (Richardson 1911), and how far it can be trusted.
    fn difference(of: impl Fn(f64) -> f64, x: f64, step: f64) -> (f64, f64) {
        let central = |h: f64| (of(x + h) - of(x - h)) / (2.0 * h);
        let (coarse, fine) = (central(step), central(0.5 * step));
        let value = fine + (fine - coarse) / 3.0;
        (value, 1e-8 * (1.0 + value.abs()) + (fine - coarse).abs() * 1e-2)
    }

    #[test]
    fn slopes_of_one_operand_agree_with_differences() {
        let mut n_compared = 0;
        for &operation in Unary::ALL {
            for place in -40..=40 {
                let x = 0.0713 * f64::from(place) + 0.011;
                let step = 1e-3 * if x.abs() > 0.1 { 0.1 } else { 0.01 };
                let of = |x: f64| functions::unary(operation, x);
                if of(x - step).is_nan() || of(x + step).is_nan() || (x - step).floor() != (x + step).floor() {
                    continue;
                }
                let (expected, trust) = difference(of, x, step);
                let found = slope(operation, x);
                assert!((found - expected).abs() <= trust, "{operation:?} at {x}: {found}, by differences {expected}");
                n_compared += 1;
            }
        }
        assert!(n_compared > 1000, "{n_compared}");
    }

    #[test]
    fn slopes_of_two_operands_agree_with_differences() {
        let mut n_compared = 0;
        for &operation in Binary::ALL {
            for (x, y) in [(0.7, 1.9), (2.3, 0.4), (1.1, -1.3), (-0.6, 2.0), (-1.7, -0.9), (3.0, 3.5)] {
                for (along_x, along_y) in [(1.0, 0.0), (0.0, 1.0), (0.6, -0.8)] {
                    let of = |t: f64| functions::binary(operation, x + along_x * t, y + along_y * t);
                    if of(0.0).is_nan() || of(1e-4).is_nan() {
                        continue;
                    }
                    let (expected, trust) = difference(of, 0.0, 1e-4);
                    let (left, right) = (Dual { value: x, slope: along_x }, Dual { value: y, slope: along_y });
                    let found = Dual::binary(operation, &left, &right).slope;
                    assert!(
                        (found - expected).abs() <= trust,
                        "{operation:?} at ({x}, {y}) along ({along_x}, {along_y}): {found}, by differences {expected}"
                    );
                    n_compared += 1;
                }
            }
        }
        assert!(n_compared > 120, "{n_compared}");
    }

    /// Pairs of tables share their arguments: the slope of one is plus or minus the 400-bit value of the other.
    #[test]
    fn slopes_agree_with_the_tables() {
        let mut n_compared = 0;
        for (of, by, factor) in [
            (Unary::Sine, "cos", 1.0),
            (Unary::Cosine, "sin", -1.0),
            (Unary::HyperbolicSine, "cosh", 1.0),
            (Unary::HyperbolicCosine, "sinh", 1.0),
            (Unary::Exponential, "exp", 1.0),
        ] {
            for row in table(by) {
                let expected = factor * row[1];
                let found = slope(of, row[0]);
                assert!(
                    found == expected || (found - expected).abs() <= 5.0 * f64::EPSILON * expected.abs() + 1e-322,
                    "{of:?} at {}: {found}, by the table {expected}",
                    row[0]
                );
                n_compared += 1;
            }
        }
        assert!(n_compared > 1500, "{n_compared}");
    }

    /// The rule `n x^(n-1)` for the products of a whole power.
    #[test]
    fn slopes_of_whole_powers() {
        for exponent in -12_i32..=12 {
            for x in [0.6, 1.4, -2.2] {
                let found = Dual::power(&Dual { value: x, slope: 1.0 }, exponent);
                let expected = f64::from(exponent) * functions::power(x, exponent - 1);
                assert_eq!(found.value, functions::power(x, exponent));
                assert!((found.slope - expected).abs() <= 1e-14 * expected.abs(), "{x}^{exponent}: {found:?}");
            }
        }
    }

    /// What a closed gate hides stays hidden, in the value and in the slope.
    #[test]
    fn gates_hide_slopes() {
        let closed = Dual { value: 0.0, slope: 0.0 };
        let wild = Dual { value: f64::INFINITY, slope: f64::NAN };
        assert_eq!(Dual::binary(Binary::Gate, &closed, &wild), Dual { value: 0.0, slope: 0.0 });
        // A constant under a root at 0 has no slope, though the root's own is infinite.
        assert_eq!(Dual::unary(Unary::SquareRoot, &closed), closed);
    }
}
