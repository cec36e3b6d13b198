//! The elementary functions against a table of 400-bit values.

use std::fs;
use std::path::Path;

use thalweg::numbers::functions;
use thalweg::numbers::operation::{Binary, Unary};

/// The distance of a value from the exact one, in units in the last place of the exact one.
fn error(value: f64, high: f64, low: f64) -> f64 {
    if high.is_infinite() || value.is_infinite() {
        return if value == high { 0.0 } else { f64::INFINITY };
    }
    let size = high.abs().max(f64::MIN_POSITIVE);
    let unit = f64::from_bits(size.to_bits() + 1) - size;
    ((value - high) / unit - low / unit).abs()
}

/// The largest error of a function over its table, and its arguments there.
fn worst(name: &str, evaluate: impl Fn(&[f64]) -> f64) -> (f64, Vec<f64>) {
    let path = Path::new(env!("CARGO_MANIFEST_DIR")).join(format!("tests/data/numbers/{name}.txt"));
    let text = fs::read_to_string(path).unwrap();
    let rows = text.lines().filter(|line| !line.starts_with('#'));
    let mut worst = (0.0, Vec::new());
    let mut n_rows = 0;
    for row in rows {
        let numbers: Vec<f64> =
            row.split(' ').map(|word| f64::from_bits(u64::from_str_radix(word, 16).unwrap())).collect();
        let (arguments, exact) = numbers.split_at(numbers.len() - 2);
        let error = error(evaluate(arguments), exact[0], exact[1]);
        n_rows += 1;
        // NaN counts as the worst.
        if !(error <= worst.0) {
            worst = (error, arguments.to_vec());
        }
    }
    assert!(n_rows > 250, "{name}: {n_rows} rows");
    worst
}

#[test]
fn errors_stay_within_the_bounds() {
    let narrow = ["exp", "log", "log10", "sin", "cos", "asin", "acos", "atan"];
    let wide = ["tan", "sinh", "cosh", "tanh", "erf"];
    for (names, bound) in [(&narrow[..], 2.0), (&wide[..], 4.0)] {
        for name in names {
            let operation = Unary::from_name(name).unwrap();
            let (error, at) = worst(name, |x| functions::unary(operation, x[0]));
            assert!(error <= bound, "{name}: {error} ulp at {at:?}");
        }
    }
    for (name, bound) in [("pow", 4.0), ("atan2", 2.0), ("hypot", 2.0)] {
        let operation = Binary::from_name(name).unwrap();
        let (error, at) = worst(name, |x| functions::binary(operation, x[0], x[1]));
        assert!(error <= bound, "{name}: {error} ulp at {at:?}");
    }
}

/// Values at the edges, which the table leaves out.
#[test]
fn special_values() {
    use std::f64::consts::{FRAC_PI_2, FRAC_PI_4, PI};
    let (inf, nan) = (f64::INFINITY, f64::NAN);
    let same = |a: f64, b: f64| a.to_bits() == b.to_bits() || a.is_nan() && b.is_nan();
    let unary: &[(&str, f64, f64)] = &[
        ("exp", inf, inf),
        ("exp", -inf, 0.0),
        ("exp", nan, nan),
        ("exp", 0.0, 1.0),
        ("exp", 1000.0, inf),
        ("exp", -1000.0, 0.0),
        ("log", 0.0, -inf),
        ("log", -0.0, -inf),
        ("log", -1.0, nan),
        ("log", inf, inf),
        ("log", nan, nan),
        ("log", 1.0, 0.0),
        ("log10", 0.0, -inf),
        ("log10", -1.0, nan),
        ("log10", 1000.0, 3.0),
        ("sin", 0.0, 0.0),
        ("sin", -0.0, -0.0),
        ("sin", inf, nan),
        ("cos", 0.0, 1.0),
        ("cos", -inf, nan),
        ("tan", -0.0, -0.0),
        ("asin", 1.0, FRAC_PI_2),
        ("asin", -1.0, -FRAC_PI_2),
        ("asin", 1.1, nan),
        ("asin", -0.0, -0.0),
        ("acos", 1.0, 0.0),
        ("acos", -1.0, PI),
        ("acos", -1.1, nan),
        ("acos", nan, nan),
        ("atan", inf, FRAC_PI_2),
        ("atan", -inf, -FRAC_PI_2),
        ("atan", -0.0, -0.0),
        ("atan", nan, nan),
        ("sinh", inf, inf),
        ("sinh", -inf, -inf),
        ("sinh", -0.0, -0.0),
        ("cosh", -inf, inf),
        ("cosh", 0.0, 1.0),
        ("tanh", inf, 1.0),
        ("tanh", -inf, -1.0),
        ("tanh", nan, nan),
        ("erf", inf, 1.0),
        ("erf", -inf, -1.0),
        ("erf", nan, nan),
        ("sign", -0.0, -0.0),
        ("sign", -3.0, -1.0),
        ("sign", nan, nan),
        ("floor", -0.5, -1.0),
        ("recip", 0.0, inf),
        ("abs", -2.0, 2.0),
    ];
    for &(name, x, expected) in unary {
        let value = functions::unary(Unary::from_name(name).unwrap(), x);
        assert!(same(value, expected), "{name}({x}) = {value}, not {expected}");
    }
    let binary: &[(&str, f64, f64, f64)] = &[
        ("pow", 2.0, 10.0, 1024.0),
        ("pow", -2.0, 3.0, -8.0),
        ("pow", -2.0, 2.0, 4.0),
        ("pow", -2.0, 0.5, nan),
        ("pow", 0.0, 0.0, 1.0),
        ("pow", nan, 0.0, 1.0),
        ("pow", 1.0, inf, 1.0),
        ("pow", 1.0, nan, 1.0),
        ("pow", 0.0, -1.0, inf),
        ("pow", -0.0, -1.0, -inf),
        ("pow", 0.0, 2.5, 0.0),
        ("pow", inf, -1.0, 0.0),
        ("pow", inf, 2.0, inf),
        ("pow", 0.5, inf, 0.0),
        ("pow", 2.0, inf, inf),
        ("pow", 2.0, 5000.0, inf),
        ("pow", 2.0, -5000.0, 0.0),
        ("pow", 4.0, 0.5, 2.0),
        ("pow", nan, 1.0, nan),
        ("pow", 2.0, nan, nan),
        ("atan2", 0.0, 0.0, 0.0),
        ("atan2", 0.0, -0.0, PI),
        ("atan2", -0.0, 0.0, -0.0),
        ("atan2", 1.0, 0.0, FRAC_PI_2),
        ("atan2", inf, inf, FRAC_PI_4),
        ("atan2", 1.0, inf, 0.0),
        ("atan2", 1.0, -inf, PI),
        ("atan2", nan, 1.0, nan),
        ("atan2", 1.0, nan, nan),
        ("hypot", inf, nan, inf),
        ("hypot", 3.0, 4.0, 5.0),
        ("hypot", 0.0, 0.0, 0.0),
        ("hypot", nan, 1.0, nan),
        ("min", 1.0, nan, nan),
        ("min", nan, 1.0, nan),
        ("min", 1.0, 2.0, 1.0),
        ("max", nan, 1.0, nan),
        ("max", 1.0, nan, nan),
        ("max", 1.0, 2.0, 2.0),
        ("gate", 0.0, inf, 0.0),
        ("gate", 0.0, nan, 0.0),
        ("gate", 2.0, 3.0, 6.0),
        ("gate", nan, 0.0, nan),
    ];
    for &(name, x, y, expected) in binary {
        let value = functions::binary(Binary::from_name(name).unwrap(), x, y);
        assert!(same(value, expected), "{name}({x}, {y}) = {value}, not {expected}");
    }
}

/// Whole powers are the products that they are said to be, and close to the real power.
#[test]
fn whole_powers() {
    for exponent in -30_i32..=30 {
        for x in [0.7, 1.3, -1.1, 3.0] {
            let (value, expected) = (functions::power(x, exponent), functions::real_power(x, f64::from(exponent)));
            assert!(
                (value - expected).abs() <= 40.0 * f64::EPSILON * expected.abs(),
                "{x}^{exponent}: {value} for {expected}"
            );
        }
    }
}
