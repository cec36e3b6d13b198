//! Intervals: sets of numbers between two ends, rounded outward (Moore 1966).
//!
//! What an operation makes of intervals holds every value that the operation has, in exact arithmetic, at a point of its
//! operands, and also every value that the executors compute at such a point, NaN excepted. So a program run over the
//! intervals of a box bounds what any executor can return inside that box. The infinite ends stand for values without a
//! bound and for overflow alike.
//!
//! The ends of sums, products, quotients and square roots are the nearest floats outside wherever the rounding error
//! can be seen, else one float further; those of the other functions are moved outward by twice the error that the
//! function's own docs admit: once for the end, once for the executor's value of a point near it.
//!
//! Deliberately absent: continuity. A jump (`floor`, `sign`, a selection, `atan2` across the negative x axis) lies
//! within the result, but nothing says that it is there.

mod elementary;
mod outward;
#[cfg(test)]
mod tests;

use super::algebra::Number;
use super::functions;
use super::operation::{Binary, Relation, Unary};

/// A closed interval, possibly empty or without bounds.
///
/// ```
/// use thalweg::numbers::algebra::Number;
/// use thalweg::numbers::interval::Interval;
/// use thalweg::numbers::operation::{Binary, Unary};
/// let x = Interval::new(-1.0, 2.0).unwrap();
/// assert_eq!(Interval::power(&x, 2), Interval::new(0.0, 4.0).unwrap());
/// // As a product the two factors count as independent.
/// assert_eq!(Interval::binary(Binary::Multiply, &x, &x), Interval::new(-2.0, 4.0).unwrap());
/// let logarithm = Interval::unary(Unary::Logarithm, &x);
/// assert_eq!(logarithm.lower(), f64::NEG_INFINITY);
/// assert!(!logarithm.is_total());
/// ```
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Interval {
    // Of an empty interval infinity and minus infinity, so that a hull needs no case for it.
    lower: f64,
    upper: f64,
    total: bool,
}

impl Interval {
    /// No number at all: what a function makes of operands wholly outside its domain.
    pub const EMPTY: Interval = Interval { lower: f64::INFINITY, upper: f64::NEG_INFINITY, total: false };

    /// Every number.
    pub const ENTIRE: Interval = Interval { lower: f64::NEG_INFINITY, upper: f64::INFINITY, total: true };

    /// From `lower` to `upper`, both included; none where an end is NaN or `upper < lower`.
    pub fn new(lower: f64, upper: f64) -> Option<Self> {
        (lower <= upper).then_some(Interval { lower, upper, total: true })
    }

    /// One number; empty for NaN.
    pub fn point(value: f64) -> Self {
        Interval::new(value, value).unwrap_or(Interval::EMPTY)
    }

    /// The lower end; infinity where it is empty.
    pub fn lower(&self) -> f64 {
        self.lower
    }

    /// The upper end; minus infinity where it is empty.
    pub fn upper(&self) -> f64 {
        self.upper
    }

    /// Whether it holds nothing.
    pub fn is_empty(&self) -> bool {
        self.lower > self.upper
    }

    /// Whether everything on the way to it was defined wherever the operands were: no operation met a number outside
    /// its domain, and no executor a NaN. Where it is false that may still be so.
    pub fn is_total(&self) -> bool {
        self.total
    }

    /// Whether the number lies in it; never for NaN.
    pub fn contains(&self, value: f64) -> bool {
        self.lower <= value && value <= self.upper
    }

    /// Whether the whole other interval lies in it.
    pub fn encloses(&self, other: &Interval) -> bool {
        other.is_empty() || self.lower <= other.lower && other.upper <= self.upper
    }

    /// `upper - lower`, rounded up; 0 where it is empty.
    pub fn width(&self) -> f64 {
        if self.is_empty() { 0.0 } else { outward::sum_above(self.upper, -self.lower) }
    }

    /// The smallest interval that holds both. Total only if both are.
    pub fn hull(&self, other: &Interval) -> Self {
        Interval {
            lower: functions::minimum(self.lower, other.lower),
            upper: functions::maximum(self.upper, other.upper),
            total: self.total && other.total,
        }
    }

    /// What both hold. Total only if both are and share something.
    pub fn intersection(&self, other: &Interval) -> Self {
        let lower = functions::maximum(self.lower, other.lower);
        let upper = functions::minimum(self.upper, other.upper);
        if lower <= upper { Interval { lower, upper, total: self.total && other.total } } else { Interval::EMPTY }
    }

    /// What is known of a comparison: whether some pair of points can satisfy it, and whether some pair can fail it.
    /// Operands that are not total can be NaN on an executor, and a comparison has an answer for NaN too.
    pub fn outcomes(relation: Relation, left: &Interval, right: &Interval) -> Outcomes {
        let apart = left.upper < right.lower || right.upper < left.lower;
        let (mut holds, mut fails) = match relation {
            Relation::Less => (left.lower < right.upper, left.upper >= right.lower),
            Relation::LessOrEqual => (left.lower <= right.upper, left.upper > right.lower),
            Relation::Equal => (!apart, left.lower != right.upper || left.upper != right.lower),
            Relation::NotEqual => (left.lower != right.upper || left.upper != right.lower, !apart),
        };
        if left.is_empty() || right.is_empty() {
            (holds, fails) = (false, false);
        }
        if !(left.total && right.total) {
            if relation == Relation::NotEqual {
                holds = true;
            } else {
                fails = true;
            }
        }
        Outcomes { holds, fails }
    }

    fn with_total(self, total: bool) -> Self {
        Interval { total: total && !self.is_empty(), ..self }
    }

    fn is_bounded(&self) -> bool {
        self.lower.is_finite() && self.upper.is_finite()
    }
}

/// What is known of a comparison of two intervals.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct Outcomes {
    /// Some pair of points may satisfy it.
    pub holds: bool,
    /// Some pair of points may fail it.
    pub fails: bool,
}

impl Number for Interval {
    fn constant(value: f64) -> Self {
        Interval::point(value)
    }

    fn unary(operation: Unary, x: &Self) -> Self {
        if x.is_empty() { Interval::EMPTY } else { elementary::unary(operation, *x) }
    }

    fn binary(operation: Binary, x: &Self, y: &Self) -> Self {
        // A gate answers even where its second operand is nowhere defined.
        if x.is_empty() || y.is_empty() && operation != Binary::Gate {
            return Interval::EMPTY;
        }
        elementary::binary(operation, *x, *y)
    }

    /// Tighter than the products that it stands for: `x^2` of an interval around 0 has no negative values.
    fn power(x: &Self, exponent: i32) -> Self {
        if x.is_empty() { Interval::EMPTY } else { elementary::power(*x, exponent) }
    }

    /// The hull of both where the comparison is not decided.
    fn select(relation: Relation, left: &Self, right: &Self, then: &Self, otherwise: &Self) -> Self {
        match Interval::outcomes(relation, left, right) {
            Outcomes { holds: true, fails: false } => *then,
            Outcomes { holds: false, fails: true } => *otherwise,
            _ => then.hull(otherwise),
        }
    }
}
