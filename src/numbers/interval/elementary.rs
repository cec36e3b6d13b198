//! What each operation makes of intervals that are not empty.

use std::f64::consts::{FRAC_PI_2, PI};

use super::Interval;
use super::outward;
use crate::numbers::functions;
use crate::numbers::operation::{Binary, Unary};

/// Floats by which an end is moved for a function within 2 ulp: twice the error, and twice that again, since below a
/// power of two the floats lie half as far apart; one more for the rounding of the rule itself.
const NARROW: u32 = 9;
/// The same for functions within 4 ulp.
const WIDE: u32 = 17;

/// Beyond this an angle's half turns are not counted: sine and cosine are taken to have every value there.
const LARGE_ANGLE: f64 = 1e9;

const NOT_NEGATIVE: Interval = Interval { lower: 0.0, upper: f64::INFINITY, total: true };
const UNIT: Interval = Interval { lower: -1.0, upper: 1.0, total: true };

pub(super) fn unary(operation: Unary, x: Interval) -> Interval {
    let Interval { lower, upper, total } = x;
    match operation {
        Unary::Negate => Interval { lower: -upper, upper: -lower, total },
        Unary::Absolute => absolute(x),
        Unary::Sign | Unary::Floor => {
            Interval { lower: functions::unary(operation, lower), upper: functions::unary(operation, upper), total }
        }
        Unary::Reciprocal => divide(Interval::point(1.0), x),
        Unary::SquareRoot => inside(x, NOT_NEGATIVE, |x| Interval {
            lower: outward::roots(x.lower).0,
            upper: outward::roots(x.upper).1,
            total: x.total,
        }),
        Unary::Exponential => rising(x, operation, NARROW).intersection(&NOT_NEGATIVE),
        // At 0 there is no value, only values without a bound nearby.
        Unary::Logarithm | Unary::Logarithm10 => {
            inside(x, NOT_NEGATIVE, |x| rising(x, operation, NARROW)).with_total(total && lower > 0.0)
        }
        Unary::Sine => wave(x, operation, 0.5),
        Unary::Cosine => wave(x, operation, 0.0),
        Unary::Tangent => {
            if half_turns(x, 0.5).is_none_or(|(first, last)| first <= last) {
                Interval::ENTIRE.with_total(false)
            } else {
                rising(x, operation, WIDE)
            }
        }
        Unary::ArcSine => inside(x, UNIT, |x| rising_odd(x, operation, NARROW)),
        Unary::ArcCosine => inside(x, UNIT, |x| falling(x, operation, NARROW).intersection(&NOT_NEGATIVE)),
        Unary::ArcTangent => rising_odd(x, operation, NARROW),
        Unary::HyperbolicSine => rising_odd(x, operation, WIDE),
        Unary::HyperbolicTangent | Unary::ErrorFunction => rising_odd(x, operation, WIDE).intersection(&UNIT),
        Unary::HyperbolicCosine => {
            let one_up = Interval { lower: 1.0, upper: f64::INFINITY, total: true };
            rising(absolute(x), operation, WIDE).intersection(&one_up)
        }
    }
}

pub(super) fn binary(operation: Binary, x: Interval, y: Interval) -> Interval {
    let total = x.total && y.total;
    match operation {
        Binary::Add => add(x, y),
        Binary::Subtract => add(x, unary(Unary::Negate, y)),
        Binary::Multiply => multiply(x, y),
        Binary::Divide => divide(x, y),
        Binary::Minimum => {
            Interval { lower: functions::minimum(x.lower, y.lower), upper: functions::minimum(x.upper, y.upper), total }
        }
        Binary::Maximum => {
            Interval { lower: functions::maximum(x.lower, y.lower), upper: functions::maximum(x.upper, y.upper), total }
        }
        Binary::Power => real_power(x, y),
        Binary::ArcTangent2 => arc_tangent_2(x, y),
        Binary::Hypotenuse => {
            let (a, b) = (absolute(x), absolute(y));
            let lower = outward::below(functions::hypotenuse(a.lower, b.lower), NARROW);
            let upper = functions::hypotenuse(a.upper, b.upper);
            // It is no shorter than either leg.
            let lower = functions::maximum(lower, functions::maximum(a.lower, b.lower));
            Interval { lower: finite_from_above(lower), upper: outward::above(upper, NARROW), total }
        }
        Binary::Gate => {
            // What stands behind a closed gate is not asked, so it may well be undefined.
            let product = if y.is_empty() { Interval::EMPTY } else { multiply(x, y) };
            if !x.contains(0.0) {
                return product;
            }
            let closed = Interval::point(0.0).with_total(x.total);
            if x.lower == 0.0 && x.upper == 0.0 { closed } else { closed.hull(&product) }
        }
    }
}

/// A whole power: the products of [`functions::power_steps`] at each end, since those are what the executors compute,
/// after the reciprocal where the exponent is negative.
pub(super) fn power(x: Interval, exponent: i32) -> Interval {
    if exponent == 0 {
        return Interval::point(1.0).with_total(x.total);
    }
    let size = absolute(x);
    let size = if exponent < 0 { divide(Interval::point(1.0), size) } else { size };
    if size.lower < 0.0 {
        // The reciprocal of 0 alone.
        return size;
    }
    // From 0 up the products rise with the base, rounded or not.
    let end = |size: f64| products(Interval::point(size), exponent.unsigned_abs());
    let positive = Interval { lower: end(size.lower).lower, upper: end(size.upper).upper, total: size.total };
    if exponent % 2 == 0 || x.lower >= 0.0 {
        positive
    } else if x.upper <= 0.0 {
        unary(Unary::Negate, positive)
    } else if exponent < 0 {
        Interval::ENTIRE.with_total(false)
    } else {
        Interval { lower: -end(-x.lower).upper, upper: end(x.upper).upper, total: x.total }
    }
}

fn products(base: Interval, exponent: u32) -> Interval {
    let mut numbers = vec![base];
    for step in functions::power_steps(exponent) {
        numbers.push(multiply(numbers[step.left], numbers[step.right]));
    }
    numbers[numbers.len() - 1]
}

/// A function on the part of the interval inside its domain.
fn inside(x: Interval, domain: Interval, of: impl Fn(Interval) -> Interval) -> Interval {
    let part = x.intersection(&domain);
    if part.is_empty() { Interval::EMPTY } else { of(part).with_total(x.total && domain.encloses(&x)) }
}

/// A lower end that came out as plus infinity: the values lie beyond the greatest float, not at infinity.
fn finite_from_above(lower: f64) -> f64 {
    if lower == f64::INFINITY { f64::MAX } else { lower }
}

/// The values of a rising function from its values at the ends.
fn rising(x: Interval, operation: Unary, slack: u32) -> Interval {
    ends(functions::unary(operation, x.lower), functions::unary(operation, x.upper), slack, x.total)
}

fn ends(lower: f64, upper: f64, slack: u32, total: bool) -> Interval {
    Interval { lower: outward::below(lower, slack), upper: outward::above(upper, slack), total }
}

/// The same where the function has the sign of its argument, which the slack must not take away.
fn rising_odd(x: Interval, operation: Unary, slack: u32) -> Interval {
    let Interval { lower, upper, total } = rising(x, operation, slack);
    let lower = if x.lower >= 0.0 && lower < 0.0 { 0.0 } else { lower };
    let upper = if x.upper <= 0.0 && upper > 0.0 { 0.0 } else { upper };
    Interval { lower, upper, total }
}

/// The values of a falling function from its values at the ends.
fn falling(x: Interval, operation: Unary, slack: u32) -> Interval {
    ends(functions::unary(operation, x.upper), functions::unary(operation, x.lower), slack, x.total)
}

fn absolute(x: Interval) -> Interval {
    let Interval { lower, upper, total } = x;
    if lower >= 0.0 {
        x
    } else if upper <= 0.0 {
        Interval { lower: -upper, upper: -lower, total }
    } else {
        Interval { lower: 0.0, upper: functions::maximum(-lower, upper), total }
    }
}

/// The first and last whole `m` such that `(m + shift) pi` may lie in the interval; none for angles too large to say.
fn half_turns(x: Interval, shift: f64) -> Option<(f64, f64)> {
    if !(x.lower >= -LARGE_ANGLE && x.upper <= LARGE_ANGLE) {
        return None;
    }
    // A generous bound of what the division and the subtraction lose: at worst an extremum is counted that lies a hair
    // outside.
    let turns = |x: f64| (x / PI - shift, 1e-15 * (1.0 + (x / PI).abs()));
    let (first, first_error) = turns(x.lower);
    let (last, last_error) = turns(x.upper);
    Some((-(first_error - first).floor(), (last + last_error).floor()))
}

/// Sine or cosine, whose extremes are at `(m + shift) pi`, the maxima at even `m`.
fn wave(x: Interval, operation: Unary, shift: f64) -> Interval {
    let total = x.total && x.is_bounded();
    let (mut lowest, mut highest) = (false, false);
    match half_turns(x, shift) {
        // One huge angle has one value.
        None if x.lower == x.upper && x.is_bounded() => (),
        None => (lowest, highest) = (true, true),
        Some((first, last)) => {
            if first <= last {
                let odd = 0.5 * first != (0.5 * first).floor();
                lowest = odd || first < last;
                highest = !odd || first < last;
            }
        }
    }
    if lowest && highest {
        return UNIT.with_total(total);
    }
    let (a, b) = (functions::unary(operation, x.lower), functions::unary(operation, x.upper));
    let between = ends(functions::minimum(a, b), functions::maximum(a, b), NARROW, total);
    let lower = if lowest { -1.0 } else { between.lower };
    let upper = if highest { 1.0 } else { between.upper };
    Interval { lower, upper, total }.intersection(&UNIT)
}

fn add(x: Interval, y: Interval) -> Interval {
    let total = x.total && y.total;
    // Only infinities of unlike signs make a NaN.
    let cancel = x.upper == f64::INFINITY && y.lower == f64::NEG_INFINITY
        || x.lower == f64::NEG_INFINITY && y.upper == f64::INFINITY;
    Interval { lower: lower_sum(x.lower, y.lower), upper: -lower_sum(-x.upper, -y.upper), total: total && !cancel }
}

fn lower_sum(x: f64, y: f64) -> f64 {
    if x == f64::NEG_INFINITY || y == f64::NEG_INFINITY {
        f64::NEG_INFINITY
    } else if x == f64::INFINITY || y == f64::INFINITY {
        f64::INFINITY
    } else {
        outward::sum_below(x, y)
    }
}

fn multiply(x: Interval, y: Interval) -> Interval {
    let pairs = [(x.lower, y.lower), (x.lower, y.upper), (x.upper, y.lower), (x.upper, y.upper)];
    let lower = pairs.map(|(a, b)| outward::product_below(a, b)).into_iter().fold(f64::INFINITY, functions::minimum);
    let upper =
        pairs.map(|(a, b)| outward::product_above(a, b)).into_iter().fold(f64::NEG_INFINITY, functions::maximum);
    let undecided = x.contains(0.0) && !y.is_bounded() || y.contains(0.0) && !x.is_bounded();
    Interval { lower, upper, total: x.total && y.total && !undecided }
}

/// A divisor that touches 0 from one side keeps its sign: the value beyond is unbounded on that side only.
fn divide(x: Interval, y: Interval) -> Interval {
    let total = x.total && y.total;
    if x.lower == 0.0 && x.upper == 0.0 {
        // 0 over anything is 0 where it is anything.
        return Interval::point(0.0).with_total(total && !y.contains(0.0));
    }
    if y.lower < 0.0 && 0.0 < y.upper || y.lower == 0.0 && y.upper == 0.0 {
        return Interval::ENTIRE.with_total(false);
    }
    if y.upper <= 0.0 {
        return divide(unary(Unary::Negate, x), unary(Unary::Negate, y));
    }
    let undecided = y.lower == 0.0 || !x.is_bounded() && y.upper == f64::INFINITY;
    // From here 0 <= y.lower < y.upper or 0 < y.lower.
    let lower = if x.lower >= 0.0 {
        outward::quotient_below(x.lower, y.upper)
    } else if y.lower == 0.0 {
        f64::NEG_INFINITY
    } else {
        outward::quotient_below(x.lower, y.lower)
    };
    let upper = if x.upper <= 0.0 {
        outward::quotient_above(x.upper, y.upper)
    } else if y.lower == 0.0 {
        f64::INFINITY
    } else {
        outward::quotient_above(x.upper, y.lower)
    };
    Interval { lower, upper, total: total && !undecided }
}

/// `x^y` for a real `y`. On positive `x` it is `exp(y log x)`, whose exponent is extreme at the corners.
fn real_power(x: Interval, y: Interval) -> Interval {
    let whole = y.lower == y.upper && y.lower.floor() == y.lower;
    let total = x.total && y.total;
    let right = x.intersection(&NOT_NEGATIVE);
    let mut value = Interval::EMPTY;
    if !right.is_empty() {
        value = corners_of_power(right, y);
    }
    if x.lower < 0.0 {
        let left = Interval { lower: functions::maximum(-x.upper, 0.0), upper: -x.lower, total };
        let size = corners_of_power(left, y);
        let (holds_even, holds_odd) = if whole {
            let odd = 0.5 * y.lower != (0.5 * y.lower).floor();
            (!odd, odd)
        } else {
            // Which whole numbers the exponent can be; with a second one both signs are there.
            let (first, last) = (-(-y.lower).floor(), y.upper.floor());
            let odd = 0.5 * first != (0.5 * first).floor();
            (first <= last && (!odd || first < last), first <= last && (odd || first < last))
        };
        if holds_even {
            value = value.hull(&size);
        }
        if holds_odd {
            value = value.hull(&unary(Unary::Negate, size));
        }
    }
    let at_pole = x.contains(0.0) && y.lower < 0.0;
    value.with_total(total && !at_pole && (x.lower >= 0.0 || whole))
}

fn corners_of_power(x: Interval, y: Interval) -> Interval {
    let pairs = [(x.lower, y.lower), (x.lower, y.upper), (x.upper, y.lower), (x.upper, y.upper)];
    let values = pairs.map(|(x, y)| functions::real_power(x, y));
    let mut lower = values.into_iter().fold(f64::INFINITY, functions::minimum);
    let mut upper = values.into_iter().fold(f64::NEG_INFINITY, functions::maximum);
    // The exponent is 0 times a logarithm without a bound at a corner such as 0^0, and 1 is within reach there.
    if y.contains(0.0) {
        (lower, upper) = (functions::minimum(lower, 1.0), functions::maximum(upper, 1.0));
    }
    ends(finite_from_above(lower), upper, WIDE, x.total && y.total).intersection(&NOT_NEGATIVE)
}

/// The angle of the points (x, y), first operand `y`. Off the cut it is extreme at the corners of the box.
fn arc_tangent_2(y: Interval, x: Interval) -> Interval {
    let total = x.total && y.total;
    // The sign of a zero decides between pi and -pi, and an interval does not know it.
    if x.lower <= 0.0 && y.contains(0.0) {
        return ends(-PI, PI, 1, total);
    }
    let pairs = [(y.lower, x.lower), (y.lower, x.upper), (y.upper, x.lower), (y.upper, x.upper)];
    let values = pairs.map(|(y, x)| functions::arc_tangent_2(y, x));
    let lower = values.into_iter().fold(f64::INFINITY, functions::minimum);
    let upper = values.into_iter().fold(f64::NEG_INFINITY, functions::maximum);
    let value = ends(lower, upper, NARROW, total);
    // Above the x axis the angle is positive, and right of the y axis it is acute, however small.
    let lower = if y.lower >= 0.0 { functions::maximum(value.lower, 0.0) } else { value.lower };
    let upper = if y.upper <= 0.0 { functions::minimum(value.upper, 0.0) } else { value.upper };
    let acute = outward::above(FRAC_PI_2, 1);
    if x.lower >= 0.0 {
        Interval { lower: functions::maximum(lower, -acute), upper: functions::minimum(upper, acute), total }
    } else {
        Interval { lower, upper, total }
    }
}
