//! The compiled kernel against the plain evaluator of terms, differences, and duals.

use std::fs;
use std::path::Path;

use super::support::kernel;
use rand::RngExt;
use thalweg::base::random::{Purpose, stream};
use thalweg::kernel::reference::{interpret, rows};
use thalweg::kernel::{Build, LaneMachine, Role};
use thalweg::landscape::Landscape;
use thalweg::numbers::algebra::Dual;

/// Problems that between them use every construct of the language.
const CONSTRUCTS: &[(&str, &str)] = &[
    (
        "arithmetic",
        "unknown x in [-2, 2]\nunknown y in [1, 3]\nminimise x + 2*y - x*y/(y + 1) + (-x)^2 - x^3 + y^-2 + y^2.5 + 2^x",
    ),
    (
        "pair energy",
        "given n = 6\nunknown p[n, 3] in [-2, 2]\nlet s(i, j) = sum(k in 1..3: (p[i,k] - p[j,k])^2)\nminimise sum(i in 1..n, j in i+1..n: 4*(s(i,j)^-6 - s(i,j)^-3))",
    ),
    (
        "embedded atoms",
        "given n = 7\nunknown p[n, 3] in [-2, 2]\nlet r(i, j) = norm(p[i] - p[j])\nlet rho[i in 1..n] = sum(j in 1..n if j != i: exp(-2*r(i,j)))\nminimise sum(i in 1..n, j in i+1..n: exp(-4*r(i,j))) - sum(i in 1..n: sqrt(rho[i]))",
    ),
    (
        "sum in a function",
        "given n = 9\nunknown x[n] in [-1, 1]\nminimise sqrt(1 + sum(i in 1..n: x[i]^2*i)) + exp(-sum(i in 1..n: x[i])/n)",
    ),
    (
        "families of families",
        "given n = 5\nunknown x[n] in [-1, 1]\nlet a[i in 1..n] = sin(x[i])\nlet b[i in 1..n] = sum(j in 1..i: a[j]*x[j])\nminimise sum(i in 1..n: b[i]^2) + a[2]",
    ),
    (
        "weighted inner sums",
        "given n = 6\ngiven w[i in 1..n] = 1/(i + 1)\nunknown x[n] in [-1, 1]\nminimise sum(i in 1..n: w[i]*sum(j in 1..n: cos(x[i] - x[j] + 0.1*i*j)))",
    ),
    (
        "product",
        "given n = 7\nunknown x[n] in [-1, 1]\nminimise product(i in 1..n: 1 + x[i]^2/i) + product(i in 1..n: x[i])",
    ),
    (
        "minimum and maximum",
        "given n = 8\nunknown x[n] in [-1, 1]\nminimise max(i in 1..n: x[i]^2 - 0.1*i) + min(i in 1..n: x[i]) + min(x[1], x[2], 0.3) - max(x)",
    ),
    (
        "choices by unknowns",
        "given n = 6\nunknown x[n] in [-1, 1]\nminimise sum(i in 1..n: if x[i] < 0 then sqrt(-x[i]) else if x[i] > 0.5 and x[i] < 0.75 then log(x[i]) else x[i]^2) + (if not (x[1] > x[2] or x[3] == 7) then x[1] else x[2])",
    ),
    (
        "choices by indices",
        "given n = 9\ngiven kind = [1, 2, 1, 2, 2, 1, 1, 2, 1]\nunknown x[n] in [-1, 1]\nminimise sum(i in 1..n: if i > 1 and kind[i] == 2 then (x[i] - x[i-1])^2 else x[i]^3) + sum(i in 1..n, j in 1..n if kind[i] == kind[j] and i < j: x[i]*x[j])",
    ),
    (
        "lookups",
        "given n = 6\ngiven next = [3, 1, 4, 6, 2, 5]\nunknown x[n] in [-1, 1]\nminimise sum(i in 1..n: (x[next[i]] - x[i])^2*i) + sum(i in 1..n: x[1 + floor((i - 1)/2)])",
    ),
    (
        "functions",
        "unknown x in [0.1, 0.9]\nunknown y in [0.1, 0.9]\nminimise exp(x)*log(y) + log10(x) + sin(x)*cos(y)*tan(x) + asin(x)*acos(y) + atan(x) + atan2(x, y) + sinh(x)*cosh(y) + tanh(x*y) + erf(x - y) + hypot(x, y) + x^y + abs(x - 0.5) + sqrt(x) + sign(x)*floor(3*y)",
    ),
    (
        "vectors",
        "unknown a[3] in [-1, 1]\nunknown b[3] in [-1, 1]\nunknown c[3] in [-1, 1]\nunknown d[3] in [-1, 1]\nminimise dot(a, b) + norm(a - 2*b) + dot(cross(a, b), c) + angle(a, b, c) + dihedral(a, b, c, d)",
    ),
    ("long vectors", "given n = 12\nunknown x[n] in [-1, 1]\nunknown y[0 in 0..0] in [0, 1]\nminimise norm(x)"),
    (
        "three bodies",
        "given n = 5\nunknown p[n, 2] in [-1, 1]\nminimise sum(i in 1..n, j in 1..n, k in j+1..n if i != j and i != k: (cos(angle(p[j], p[i], p[k])) + 1/3)^2*exp(-dot(p[j] - p[i], p[k] - p[i])^2))",
    ),
    (
        "empty loops",
        "given n = 5\nunknown x[n] in [0.5, 1]\nminimise sum(i in 1..n, j in i+1..n: sqrt(x[i])*log(x[j])) + sum(i in 1..n, j in i+2..n: x[i+1]/x[j]) + sum(i in 3..2: x[i])",
    ),
    (
        "least squares",
        "given t = [0, 1, 2, 3, 4, 5]\ngiven y = [2, 1.4, 1.1, 0.8, 0.7, 0.5]\nunknown a in [0, 5]\nunknown k in [0, 2]\nminimise sum(i in 1..count(t): (y[i] - a*exp(-k*t[i]))^2)",
    ),
    ("maximise", "unknown x in [-1, 1]\nmaximise cos(x) - x^2"),
    // Some are their own neighbours: what is added to a row of the gradient is also deducted from it.
    (
        "own neighbours",
        "given n = 6\ngiven next = [1, 1, 4, 4, 2, 6]\nunknown x[n] in [-1, 1]\nminimise sum(i in 1..n: sin(x[i] - x[next[i]])*x[i])",
    ),
    // What is not a number outside the loop is used in it without a derivative.
    (
        "idle logarithms",
        "given n = 3\nunknown x in [-1, -0.5]\nunknown y[n] in [-1, 1]\nminimise sum(i in 1..n: sign(if x > 0 then log(x)/x else y[i]) + y[i]^2) + x^2",
    ),
    // The square of a difference is a part of a distance, and counts once more.
    (
        "stretched distances",
        "given n = 5\nunknown p[n, 3] in [-2, 2]\nlet s(i, j) = sum(k in 1..3: (p[i,k] - p[j,k])^2)\nminimise sum(i in 1..n, j in i+1..n: exp(-s(i,j)) + (p[i,1] - p[j,1])^2/(1 + s(i,j)))",
    ),
];

fn points(landscape: &Landscape, count: usize) -> Vec<Vec<f64>> {
    let mut rng = stream(11, 0, 0, Purpose::Check);
    let mut draw = |lower: f64, upper: f64| lower + (upper - lower) * rng.random::<f64>();
    (0..count).map(|_| landscape.slots.iter().map(|slot| draw(slot.start_lower, slot.start_upper)).collect()).collect()
}

fn problems() -> Vec<(String, String)> {
    CONSTRUCTS
        .iter()
        .map(|(name, text)| (name.to_string(), text.to_string()))
        // The second family there has an index with a range of its own, which is not used: it only has to be accepted.
        .map(|(name, text)| (name, text.replace("unknown y[0 in 0..0] in [0, 1]\n", "")))
        .collect()
}

#[test]
fn values_are_those_of_the_terms() {
    for (name, text) in problems() {
        let (landscape, kernel) = kernel(&text);
        for at in points(&landscape, 20) {
            let program = kernel.gradient.program();
            let buffers = interpret(program, &[(Role::Unknowns, at.clone())]);
            let (value, expected) =
                (rows(program, &buffers, Role::Value)[0], landscape.evaluate_term(landscape.objective, &at));
            let scale = expected.abs().max(1.0);
            assert!(
                (value - expected).abs() <= 1e-12 * scale || value.is_nan() && expected.is_nan(),
                "{name}: {value} for {expected}"
            );
        }
    }
}

#[test]
fn gradients_are_slopes() {
    for (name, text) in problems() {
        let (landscape, kernel) = kernel(&text);
        let program = kernel.gradient.program();
        let value = |at: &[f64]| landscape.evaluate_term(landscape.objective, at);
        for at in points(&landscape, 12) {
            let buffers = interpret(program, &[(Role::Unknowns, at.clone())]);
            let gradient = rows(program, &buffers, Role::Gradient);
            let size = gradient.iter().fold(1.0_f64, |size, g| size.max(g.abs()));
            for slot in 0..at.len() {
                // Two steps, the better counts: a kink or a steep wall spoils one of them.
                let error = [1e-4, 1e-6].map(|h| {
                    let moved = |by: f64| {
                        let mut moved = at.clone();
                        moved[slot] += by;
                        value(&moved)
                    };
                    let near = (moved(h) - moved(-h)) / (2.0 * h);
                    let far = (moved(2.0 * h) - moved(-2.0 * h)) / (4.0 * h);
                    (near + (near - far) / 3.0 - gradient[slot]).abs()
                });
                assert!(
                    error[0].min(error[1]) < 1e-6 * size,
                    "{name}, slot {slot}: {} off by {error:?}",
                    gradient[slot]
                );
            }
        }
    }
}

#[test]
fn curvatures_are_those_of_duals() {
    for (name, text) in problems() {
        let (landscape, kernel) = kernel(&text);
        let n = landscape.n_unknowns();
        for at in points(&landscape, 4) {
            for direction in 0..n {
                let duals: Vec<Dual> = at
                    .iter()
                    .enumerate()
                    .map(|(slot, &value)| Dual { value, slope: if slot == direction { 1.0 } else { 0.0 } })
                    .collect();
                let program = kernel.gradient.program();
                let buffers = interpret(program, &[(Role::Unknowns, duals.clone())]);
                let expected: Vec<f64> =
                    rows(program, &buffers, Role::Gradient).iter().map(|dual| dual.slope).collect();
                let program = kernel.curvature.program();
                let unit = duals.iter().map(|dual| dual.slope).collect();
                let buffers = interpret(program, &[(Role::Unknowns, at.clone()), (Role::Direction, unit)]);
                let curvature = rows(program, &buffers, Role::Curvature);
                let size = expected.iter().fold(1.0_f64, |size, x| size.max(x.abs()));
                for (a, b) in curvature.iter().zip(&expected) {
                    assert!((a - b).abs() < 1e-9 * size, "{name}, direction {direction}: {a} for {b}");
                }
            }
        }
    }
}

/// The same bits from the reference interpreter and from every build, at every width and lane.
#[test]
fn executors_agree_to_the_bit() {
    for (name, text) in problems() {
        let (landscape, kernel) = kernel(&text);
        let n = landscape.n_unknowns();
        let points = points(&landscape, 37);
        let program = kernel.gradient.program();
        let bits = |x: f64| if x.is_nan() { u64::MAX } else { x.to_bits() };
        let expected: Vec<Vec<u64>> = points
            .iter()
            .map(|at| {
                let buffers = interpret(program, &[(Role::Unknowns, at.clone())]);
                let all = [rows(program, &buffers, Role::Value), rows(program, &buffers, Role::Gradient)].concat();
                all.into_iter().map(bits).collect()
            })
            .collect();
        for build in [Build::Baseline, Build::Avx2, Build::Avx512] {
            for lanes in [4, 8, 16, 32] {
                let mut machine = LaneMachine::with_build(&kernel.gradient, lanes, build);
                for first in (0..points.len()).step_by(lanes) {
                    for lane in 0..lanes {
                        for (slot, x) in points[(first + lane) % points.len()].iter().enumerate() {
                            machine.rows_mut(Role::Unknowns)[slot * lanes + lane] = *x;
                        }
                    }
                    machine.run();
                    for lane in 0..lanes {
                        let expected = &expected[(first + lane) % points.len()];
                        assert_eq!(
                            bits(machine.rows(Role::Value)[lane]),
                            expected[0],
                            "{name}, {build:?}, {lanes} lanes"
                        );
                        for slot in 0..n {
                            let got = bits(machine.rows(Role::Gradient)[slot * lanes + lane]);
                            assert_eq!(got, expected[slot + 1], "{name}, {build:?}, {lanes} lanes, slot {slot}");
                        }
                    }
                }
            }
        }
    }
}

/// Programs print as text and read back as the same program.
#[test]
fn programs_survive_their_text() {
    for (name, text) in problems() {
        let (_, kernel) = kernel(&text);
        for program in [kernel.gradient.program(), kernel.curvature.program()] {
            let printed = program.to_string();
            let read =
                thalweg::kernel::text::read(&printed).unwrap_or_else(|error| panic!("{name}: {error}\n{printed}"));
            assert_eq!(read.to_string(), printed, "{name}");
            assert_eq!(
                (&read.body, &read.buffers, &read.lookups),
                (&program.body, &program.buffers, &program.lookups),
                "{name}"
            );
        }
    }
}

/// The finished gradient programs of a few problems, as text: a change of a pass shows as a change of these.
/// `BLESS=1` rewrites them.
#[test]
fn programs_are_those_of_the_golden_files() {
    for name in ["pair energy", "families of families", "product", "choices by indices", "lookups", "least squares"] {
        let (_, text) = CONSTRUCTS.iter().find(|case| case.0 == name).unwrap();
        let (_, kernel) = kernel(text);
        let printed = kernel.gradient.program().to_string();
        let path =
            Path::new(env!("CARGO_MANIFEST_DIR")).join(format!("tests/data/kernel/{}.txt", name.replace(' ', "_")));
        if std::env::var_os("BLESS").is_some() {
            fs::write(&path, &printed).unwrap();
        }
        let expected = fs::read_to_string(&path).unwrap_or_default();
        assert_eq!(printed, expected, "{name}: BLESS=1 rewrites it");
    }
}
