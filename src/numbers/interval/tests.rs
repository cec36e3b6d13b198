//! Intervals against the executors' functions at sampled points, against the 400-bit tables, and at the edges.

use std::fs;
use std::path::Path;

use super::outward;
use super::*;

fn interval(lower: f64, upper: f64) -> Interval {
    Interval::new(lower, upper).unwrap()
}

/// A small generator for arguments (Marsaglia 2003).
struct Draw(u64);

impl Draw {
    fn bits(&mut self) -> u64 {
        self.0 ^= self.0 << 13;
        self.0 ^= self.0 >> 7;
        self.0 ^= self.0 << 17;
        self.0
    }

    fn unit(&mut self) -> f64 {
        (self.bits() >> 11) as f64 / (1_u64 << 53) as f64
    }

    /// Ordinary numbers, whole ones, huge, tiny and infinite ones.
    fn number(&mut self) -> f64 {
        let sign = if self.bits() & 1 == 0 { 1.0 } else { -1.0 };
        match self.bits() % 12 {
            0 => f64::from_bits(self.bits() & !(1 << 62)) * sign,
            1 => sign * functions::exponential(700.0 * self.unit()),
            2 => sign * f64::INFINITY,
            3 => 0.0,
            4 | 5 => sign * (4.0 * self.unit()).floor(),
            6 => sign * 30.0 * self.unit(),
            7 => sign * 800.0 * self.unit(),
            _ => sign * 2.0 * self.unit(),
        }
    }

    fn interval(&mut self) -> Interval {
        loop {
            let a = self.number();
            let b = match self.bits() % 4 {
                0 => a,
                1 => a + a.abs() * 1e-12 * self.unit(),
                _ => self.number(),
            };
            if let Some(found) = Interval::new(functions::minimum(a, b), functions::maximum(a, b)) {
                return found;
            }
        }
    }

    /// A number of the interval: its ends, 0, or anything between.
    fn inside(&mut self, x: &Interval) -> f64 {
        let (low, high) = (x.lower().max(-f64::MAX), x.upper().min(f64::MAX));
        let value = match self.bits() % 6 {
            0 => x.lower(),
            1 => x.upper(),
            2 => 0.0,
            3 => self.number(),
            _ => low * (1.0 - self.unit()) + high * self.unit(),
        };
        value.max(x.lower()).min(x.upper())
    }
}

fn hold(what: &str, value: f64, within: &Interval, at: &[f64], of: &[Interval]) {
    if value.is_nan() {
        assert!(!within.is_total(), "{what} is NaN at {at:?} in {of:?}, and {within:?} is said to be total");
    } else {
        assert!(within.contains(value), "{what} is {value:e} at {at:?} in {of:?}, outside of {within:?}");
    }
}

#[test]
fn hold_what_the_executors_compute() {
    let mut draw = Draw(0x5eed_2026);
    for _ in 0..4_000 {
        let (x, y) = (draw.interval(), draw.interval());
        let points: Vec<(f64, f64)> = (0..6).map(|_| (draw.inside(&x), draw.inside(&y))).collect();
        for &operation in Unary::ALL {
            // Division by 0: an interval does not know the sign of a zero.
            let value = Interval::unary(operation, &x);
            for &(a, _) in &points {
                if !(operation == Unary::Reciprocal && a == 0.0) {
                    hold(operation.name(), functions::unary(operation, a), &value, &[a], &[x]);
                }
            }
        }
        for &operation in Binary::ALL {
            let value = Interval::binary(operation, &x, &y);
            for &(a, b) in &points {
                let by_zero =
                    operation == Binary::Divide && b == 0.0 || operation == Binary::Power && a == 0.0 && b < 0.0;
                if !by_zero {
                    hold(operation.name(), functions::binary(operation, a, b), &value, &[a, b], &[x, y]);
                }
            }
        }
        for exponent in [-7, -6, -3, -2, -1, 0, 1, 2, 3, 6, 12, 13] {
            let value = Interval::power(&x, exponent);
            for &(a, _) in &points {
                if !(exponent < 0 && a == 0.0) {
                    hold(&format!("power {exponent}"), functions::power(a, exponent), &value, &[a], &[x]);
                }
            }
        }
        let (then, otherwise) = (interval(1.0, 2.0), interval(5.0, 6.0));
        for &relation in Relation::ALL {
            let value = Interval::select(relation, &x, &y, &then, &otherwise);
            for &(a, b) in &points {
                let chosen = if relation.holds(a, b) { 1.5 } else { 5.5 };
                hold(relation.name(), chosen, &value, &[a, b], &[x, y]);
            }
        }
    }
}

/// How many floats apart two floats are.
fn steps(low: f64, high: f64) -> u64 {
    let rank = |x: f64| {
        let bits = x.to_bits() as i64;
        if bits < 0 { i64::MIN - bits } else { bits }
    };
    (i128::from(rank(high)) - i128::from(rank(low))) as u64
}

/// Each row of each table: the interval of the arguments holds the 400-bit value, and little else.
#[test]
fn hold_the_exact_values_of_the_tables() {
    let mut n_rows = 0;
    let names = Unary::ALL.iter().map(|operation| operation.name()).chain(Binary::ALL.iter().map(|o| o.name()));
    for name in names {
        let path = Path::new(env!("CARGO_MANIFEST_DIR")).join(format!("tests/data/numbers/{name}.txt"));
        let Ok(text) = fs::read_to_string(path) else { continue };
        for row in text.lines().filter(|line| !line.starts_with('#')) {
            let numbers: Vec<f64> =
                row.split(' ').map(|word| f64::from_bits(u64::from_str_radix(word, 16).unwrap())).collect();
            let (arguments, exact) = numbers.split_at(numbers.len() - 2);
            let points: Vec<Interval> = arguments.iter().map(|&x| Interval::point(x)).collect();
            let value = match Unary::from_name(name) {
                Some(operation) => Interval::unary(operation, &points[0]),
                None => Interval::binary(Binary::from_name(name).unwrap(), &points[0], &points[1]),
            };
            let above = value.lower() < exact[0] || value.lower() == exact[0] && exact[1] >= 0.0;
            let below = exact[0] < value.upper() || value.upper() == exact[0] && exact[1] <= 0.0;
            let overflow = exact[0].is_infinite() && value.contains(exact[0]);
            assert!(above && below || overflow, "{name} at {arguments:?}: {exact:?} outside of {value:?}");
            if value.lower() > -1.0 || value.upper() < 1.0 {
                // Of a huge angle the tangent is not followed.
                let wide = steps(value.lower(), value.upper());
                let followed = name != "tan" || arguments[0].abs() < 1e9 && exact[0].abs() < 1e9;
                assert!(!followed || wide <= 60, "{name} at {arguments:?}: {value:?} is {wide} floats wide");
            }
            n_rows += 1;
        }
    }
    assert!(n_rows > 5_000, "{n_rows}");
}

#[test]
fn arithmetic_rounds_to_the_nearest_outside() {
    let tenth = Interval::point(0.1);
    let sum = Interval::binary(Binary::Add, &tenth, &Interval::point(0.2));
    // 0.1 + 0.2 as floats is 0.3000000000000000166…, between these two neighbours.
    assert_eq!(sum, interval(0.3_f64, 0.3_f64.next_up()));
    let product = Interval::binary(Binary::Multiply, &tenth, &Interval::point(3.0));
    assert_eq!(product, interval(0.3_f64, 0.3_f64.next_up()));
    let third = Interval::binary(Binary::Divide, &Interval::point(1.0), &Interval::point(3.0));
    assert_eq!(third, interval(1.0_f64 / 3.0, (1.0_f64 / 3.0).next_up()));
    // What is exact stays exact.
    let (two, six) = (Interval::point(2.0), Interval::point(6.0));
    assert_eq!(Interval::binary(Binary::Divide, &six, &two), Interval::point(3.0));
    assert_eq!(Interval::binary(Binary::Multiply, &six, &two), Interval::point(12.0));
    assert_eq!(Interval::unary(Unary::SquareRoot, &Interval::point(49.0)), Interval::point(7.0));
    assert_eq!(Interval::unary(Unary::SquareRoot, &two).width(), 2.0_f64.sqrt().next_up() - 2.0_f64.sqrt());
    // Overflow lies between the greatest float and infinity, underflow between 0 and the least.
    let huge = Interval::point(f64::MAX);
    assert_eq!(Interval::binary(Binary::Add, &huge, &huge), interval(f64::MAX, f64::INFINITY));
    assert_eq!(Interval::binary(Binary::Multiply, &huge, &huge), interval(f64::MAX, f64::INFINITY));
    let tiny = Interval::point(f64::from_bits(1));
    assert_eq!(Interval::binary(Binary::Multiply, &tiny, &tiny), interval(0.0, f64::from_bits(1)));
    assert_eq!(outward::quotient_below(-1.0, 3.0), (-1.0_f64 / 3.0).next_down());
}

#[test]
fn division_through_zero() {
    let one = Interval::point(1.0);
    let recip = |lower, upper| Interval::binary(Binary::Divide, &one, &interval(lower, upper));
    let ends = |x: Interval| (x.lower(), x.upper(), x.is_total());
    assert_eq!(ends(recip(-1.0, 1.0)), (f64::NEG_INFINITY, f64::INFINITY, false));
    assert_eq!(ends(recip(0.0, 4.0)), (0.25, f64::INFINITY, false));
    assert_eq!(ends(recip(-4.0, 0.0)), (f64::NEG_INFINITY, -0.25, false));
    assert_eq!(ends(recip(2.0, f64::INFINITY)), (0.0, 0.5, true));
    assert_eq!(ends(recip(0.0, 0.0)), (f64::NEG_INFINITY, f64::INFINITY, false));
    let nothing = Interval::binary(Binary::Divide, &Interval::point(0.0), &interval(-1.0, 1.0));
    assert_eq!(ends(nothing), (0.0, 0.0, false));
    assert_eq!(ends(Interval::power(&interval(-2.0, 4.0), -2)), (0.0625, f64::INFINITY, false));
    assert_eq!(ends(Interval::power(&interval(-2.0, 4.0), -3)), (f64::NEG_INFINITY, f64::INFINITY, false));
    assert_eq!(ends(Interval::power(&interval(-4.0, -2.0), -1)), (-0.5, -0.25, true));
}

#[test]
fn waves_reach_their_extremes() {
    let sine = |lower, upper| Interval::unary(Unary::Sine, &interval(lower, upper));
    assert_eq!(sine(0.0, 7.0), interval(-1.0, 1.0));
    assert_eq!(sine(1.0, 2.0).upper(), 1.0);
    assert!((sine(1.0, 2.0).lower() - functions::sine(1.0)).abs() < 1e-14);
    assert_eq!(sine(4.0, 5.0).lower(), -1.0);
    assert!((sine(4.0, 5.0).upper() - functions::sine(4.0)).abs() < 1e-14);
    // Between the extremes neither end is an extreme.
    assert!(sine(-1.0, 1.0).upper() < 0.85 && sine(-1.0, 1.0).lower() > -0.85);
    assert!(sine(2.0, 4.0).upper() < 0.92);
    // pi/2 lies between 1.5707963267948966 and its neighbour: only the interval of both holds the maximum for certain,
    // and either may be given it.
    let half_pi = std::f64::consts::FRAC_PI_2;
    assert_eq!(sine(half_pi, half_pi.next_up()).upper(), 1.0);
    let cosine = |lower, upper| Interval::unary(Unary::Cosine, &interval(lower, upper));
    assert_eq!(cosine(-0.1, 0.1).upper(), 1.0);
    assert_eq!(cosine(3.0, 3.3).lower(), -1.0);
    assert!(cosine(1e8, 1e8 + 1e-3).width() < 2e-3);
    assert_eq!(cosine(1e12, 1e12 + 1.0), interval(-1.0, 1.0));
    assert!(cosine(1e12, 1e12).width() < 1e-14);
    assert!(!cosine(0.0, f64::INFINITY).is_total());
    let tangent = |lower, upper| Interval::unary(Unary::Tangent, &interval(lower, upper));
    assert!(tangent(1.0, 2.0).encloses(&Interval::ENTIRE) && !tangent(1.0, 2.0).is_total());
    assert!(tangent(-1.5, 1.5).is_total() && tangent(-1.5, 1.5).upper() < 14.2);
    assert!(tangent(1.6, 4.7).is_total());
}

#[test]
fn domains() {
    let log = Interval::unary(Unary::Logarithm, &interval(-2.0, 1.0));
    assert!(log.lower() == f64::NEG_INFINITY && log.upper() < 1e-15 && !log.is_total());
    assert!(!Interval::unary(Unary::Logarithm, &interval(0.0, 1.0)).is_total());
    assert!(Interval::unary(Unary::Logarithm, &interval(0.5, 1.0)).is_total());
    assert!(Interval::unary(Unary::Logarithm, &interval(-2.0, -1.0)).is_empty());
    let root = Interval::unary(Unary::SquareRoot, &interval(-4.0, 4.0));
    assert_eq!((root.lower(), root.upper(), root.is_total()), (0.0, 2.0, false));
    assert!(Interval::unary(Unary::ArcSine, &interval(1.5, 2.0)).is_empty());
    assert!(!Interval::unary(Unary::ArcCosine, &interval(0.5, 1.5)).is_total());
    // Once undefined, undefined ever after.
    assert!(!Interval::unary(Unary::Exponential, &root).is_total());
    assert!(Interval::binary(Binary::Add, &Interval::EMPTY, &root).is_empty());
    // A gate does not ask what stands behind it while it is closed.
    let closed = Interval::binary(Binary::Gate, &Interval::point(0.0), &Interval::EMPTY);
    assert_eq!(closed, Interval::point(0.0));
    let ajar = Interval::binary(Binary::Gate, &interval(0.0, 1.0), &interval(2.0, 3.0));
    assert_eq!((ajar.lower(), ajar.upper()), (0.0, 3.0));
    assert!(Interval::point(f64::NAN).is_empty() && Interval::new(2.0, 1.0).is_none());
}

#[test]
fn powers_and_angles() {
    let power = |x: Interval, y: Interval| Interval::binary(Binary::Power, &x, &y);
    let near = |x: Interval, lower: f64, upper: f64| {
        assert!((x.lower() - lower).abs() < 1e-13 && (x.upper() - upper).abs() < 1e-13, "{x:?}");
    };
    near(power(interval(0.5, 2.0), interval(-1.0, 3.0)), 0.125, 8.0);
    near(power(interval(0.0, 2.0), interval(0.0, 2.0)), 0.0, 4.0);
    near(power(interval(-2.0, 3.0), Interval::point(2.0)), 0.0, 9.0);
    near(power(interval(-2.0, 3.0), Interval::point(3.0)), -8.0, 27.0);
    near(power(interval(-2.0, -1.0), interval(1.5, 2.5)), 1.0, 2.0_f64.powf(2.5));
    assert!(power(interval(-2.0, -1.0), Interval::point(0.5)).is_empty());
    assert!(!power(interval(-2.0, 1.0), Interval::point(0.5)).is_total());
    assert!(power(interval(-2.0, -1.0), Interval::point(-3.0)).is_total());
    let pole = power(interval(0.0, 1.0), Interval::point(-1.0));
    assert!(pole.upper() == f64::INFINITY && !pole.is_total());
    let angle = |y: Interval, x: Interval| Interval::binary(Binary::ArcTangent2, &y, &x);
    let pi = std::f64::consts::PI;
    near(angle(interval(1.0, 2.0), interval(-1.0, 1.0)), pi / 4.0, 3.0 * pi / 4.0);
    near(angle(interval(-1.0, 1.0), interval(1.0, 2.0)), -pi / 4.0, pi / 4.0);
    // Across the cut every angle is reached, as far as an interval can tell.
    near(angle(interval(-1.0, 1.0), interval(-2.0, -1.0)), -pi, pi);
    near(angle(interval(-2.0, -1.0), interval(-1.0, 0.0)), -3.0 * pi / 4.0, -pi / 2.0);
}

#[test]
fn comparisons_of_intervals() {
    let outcomes = |relation, a: Interval, b: Interval| {
        let found = Interval::outcomes(relation, &a, &b);
        (found.holds, found.fails)
    };
    let (low, high) = (interval(0.0, 1.0), interval(1.0, 2.0));
    assert_eq!(outcomes(Relation::LessOrEqual, low, high), (true, false));
    assert_eq!(outcomes(Relation::Less, low, high), (true, true));
    assert_eq!(outcomes(Relation::Less, high, low), (false, true));
    assert_eq!(outcomes(Relation::Equal, low, interval(3.0, 4.0)), (false, true));
    assert_eq!(outcomes(Relation::Equal, Interval::point(2.0), Interval::point(2.0)), (true, false));
    assert_eq!(outcomes(Relation::NotEqual, Interval::point(2.0), Interval::point(2.0)), (false, true));
    // A NaN fails every comparison but one.
    let root = Interval::unary(Unary::SquareRoot, &interval(-1.0, 1.0));
    assert_eq!(outcomes(Relation::LessOrEqual, root, Interval::point(7.0)), (true, true));
    assert_eq!(outcomes(Relation::Less, Interval::EMPTY, low), (false, true));
    assert_eq!(outcomes(Relation::NotEqual, Interval::EMPTY, low), (true, false));
}
