//! Same or distinct: every kind of promise, alone and together, against random members of its group.

use std::fs;
use std::path::Path;
use std::sync::Arc;

use rand::seq::SliceRandom;
use rand::{Rng, RngExt};
use thalweg::base::random::{Purpose, stream};
use thalweg::landscape::Landscape;
use thalweg::ledger::{Candidate, Confirmed, Identity, Kind, Ledger, Match, Meeting};

use super::support::landscape;

const CLOUD: &str = "unknown p[7, 3] in [-2, 2]\nminimise sum(i in 1..7: dot(p[i], p[i]))\n";
const PLANE: &str = "unknown p[6, 2] in [-2, 2]\nminimise sum(i in 1..6: dot(p[i], p[i]))\n";
const LINE: &str = "unknown x[6] in [-2, 2]\nminimise sum(i in 1..6: x[i]^2)\n";
const RING: &str = "unknown x[6] in [-pi, pi] cyclic\nminimise sum(i in 1..6: cos(x[i]))\n";
const PEAKS: &str =
    "unknown a[4] in [0, 6]\nunknown b[4] in [0, 2]\nunknown c[4] in [0.1, 2]\nminimise sum(a) + sum(b) + sum(c)\n";
const PAIR: &str = "unknown p[4, 3] in [-2, 2]\nunknown q[3, 3] in [-2, 2]\nminimise sum(i in 1..4: dot(p[i], p[i])) + dot(q[1], q[1]) + dot(q[2], q[2]) + dot(q[3], q[3])\n";

const CASES: &[(&str, &str)] = &[
    (CLOUD, "shift p"),
    (CLOUD, "rotate p"),
    (CLOUD, "mirror p"),
    (CLOUD, "exchange p"),
    (CLOUD, "rotate p, exchange p"),
    (CLOUD, "shift p, rotate p"),
    (CLOUD, "shift p, rotate p, mirror p"),
    (CLOUD, "shift p, rotate p, exchange p"),
    (CLOUD, "shift p, rotate p, mirror p, exchange p"),
    (CLOUD, "rotate p, mirror p, exchange p"),
    (CLOUD, "shift p, exchange p"),
    (CLOUD, "shift p, mirror p, exchange p"),
    (CLOUD, "shift p, rotate p, mirror p, exchange p[1..3], exchange p[4..7]"),
    (CLOUD, "flip p, shift p"),
    (PLANE, "shift p, rotate p, mirror p, exchange p"),
    (PLANE, "shift p, rotate p, exchange p"),
    (PLANE, "rotate p, mirror p"),
    (PLANE, "shift p, rotate p, reverse p"),
    (PLANE, "shift p, rotate p, cycle p, mirror p"),
    (LINE, "exchange x"),
    (LINE, "flip x"),
    (LINE, "reverse x"),
    (LINE, "cycle x"),
    (LINE, "shift x"),
    (LINE, "flip x[1..3], flip x[4..6], reverse x"),
    (LINE, "shift x, exchange x, flip x"),
    (LINE, "cycle x, reverse x, flip x"),
    (RING, "shift x"),
    (RING, "shift x, exchange x"),
    (RING, "shift x, cycle x, reverse x, flip x"),
    (RING, "exchange x, flip x"),
    (PEAKS, "exchange (a, b, c)"),
    (PEAKS, "exchange (a, b)"),
    (PAIR, "rotate (p, q), shift (p, q), mirror (p, q), exchange p, exchange q"),
    (PAIR, "rotate (p, q), exchange p"),
    (PAIR, "rotate p, shift p, mirror p, exchange p, rotate q, shift q, exchange q"),
    (PAIR, "shift (p, q), mirror (p, q), exchange p, flip (p, q)"),
    (PAIR, "rotate (p, q), flip q"),
    (LINE, "shift x[1..3], exchange x[4..6]"),
    (RING, "flip x[1..2], cycle x[3..6]"),
    (RING, "shift x[1..3], exchange x[1..3], flip x"),
    (PEAKS, "exchange (a, b), flip c"),
];

/// Promises whose group the match does not go through as a whole (see `ledger/identity.rs`); the second key must not break
/// on them.
const TANGLED: &[(&str, &str)] = &[
    (LINE, "exchange x, flip x[1..3]"),
    (LINE, "shift x, flip x[1..3]"),
    (CLOUD, "rotate p[1..4], exchange p"),
    (CLOUD, "shift p, rotate p, flip p[1..2]"),
    (PAIR, "rotate p, rotate (p, q)"),
    (PAIR, "rotate (p, q), shift p, shift q"),
    (RING, "shift x, flip x[1..3]"),
];

fn cases() -> Vec<(String, Landscape)> {
    landscapes(CASES)
}

fn landscapes(cases: &[(&str, &str)]) -> Vec<(String, Landscape)> {
    let of =
        |(problem, promises): &(&str, &str)| (promises.to_string(), landscape(&format!("{problem}alike {promises}\n")));
    cases.iter().map(of).collect()
}

fn random_point(landscape: &Landscape, rng: &mut impl Rng) -> Vec<f64> {
    let mut draw = |lower: f64, upper: f64| lower + (upper - lower) * rng.random::<f64>();
    landscape.slots.iter().map(|slot| draw(slot.start_lower, slot.start_upper)).collect()
}

/// A random member of the whole group, with noise, and cyclic unknowns anywhere.
fn image(landscape: &Landscape, at: &[f64], noise: f64, rng: &mut impl Rng) -> Vec<f64> {
    let mut image = at.to_vec();
    for _ in 0..3 {
        for symmetry in &landscape.symmetries {
            if rng.random::<f64>() < 0.8 {
                image = symmetry.transform(&landscape.slots, &image, rng);
            }
        }
    }
    for (x, slot) in image.iter_mut().zip(&landscape.slots) {
        *x += noise * (slot.start_upper - slot.start_lower) * (2.0 * rng.random::<f64>() - 1.0);
        if slot.cyclic {
            *x += (slot.upper - slot.lower) * f64::from(rng.random_range(-2..=2));
        }
    }
    image
}

fn compare(identity: &Identity, left: &[f64], right: &[f64]) -> Match {
    let alike = identity.alike(&identity.fingerprint(left), &identity.fingerprint(right), 1e-5);
    let matched = identity.compare(left, right, 1e-5, 1e-4);
    assert!(alike || !matches!(matched, Match::Same(_)), "the invariants exclude what the match finds");
    matched
}

#[test]
fn images_are_the_same_and_others_are_not() {
    for (promises, landscape) in cases() {
        let identity = Identity::new(&landscape.slots, &landscape.symmetries);
        for trial in 0..60 {
            let mut rng = stream(9, 0, trial, Purpose::Check);
            let at = random_point(&landscape, &mut rng);
            let image = image(&landscape, &at, 1e-8, &mut rng);
            let matched = compare(&identity, &at, &image);
            assert!(
                matches!(matched, Match::Same(deviation) if deviation < 1e-6),
                "{promises}, trial {trial}: {matched:?}"
            );
            let other = random_point(&landscape, &mut rng);
            assert_eq!(compare(&identity, &at, &other), Match::Distinct, "{promises}, trial {trial}");
            let mut moved = image.clone();
            let slot = rng.random_range(0..moved.len());
            moved[slot] += 3e-3 * (landscape.slots[slot].start_upper - landscape.slots[slot].start_lower);
            // A lone shifted coordinate can be a shift of everything only where there is one row.
            assert_eq!(compare(&identity, &at, &moved), Match::Distinct, "{promises}, trial {trial}, slot {slot}");
        }
    }
}

/// The left and the right hand are one answer only where a mirror image is declared.
#[test]
fn hands() {
    for (promises, same) in
        [("shift p, rotate p, exchange p", false), ("shift p, rotate p, mirror p, exchange p", true)]
    {
        let landscape = landscape(&format!("{CLOUD}alike {promises}\n"));
        let identity = Identity::new(&landscape.slots, &landscape.symmetries);
        let mut rng = stream(4, 0, 0, Purpose::Check);
        let at = random_point(&landscape, &mut rng);
        let mirrored: Vec<f64> = at.iter().enumerate().map(|(slot, x)| if slot % 3 == 0 { -x } else { *x }).collect();
        let image = image(&landscape, &mirrored, 0.0, &mut rng);
        assert_eq!(matches!(compare(&identity, &at, &image), Match::Same(_)), same, "{promises}");
    }
}

fn geometry(name: &str) -> Vec<f64> {
    let path = Path::new(env!("CARGO_MANIFEST_DIR")).join("tests/data/ledger").join(name);
    let text = fs::read_to_string(path).unwrap();
    let rows = text.lines().filter(|line| !line.starts_with('#'));
    let numbers: Vec<f64> = rows.flat_map(str::split_whitespace).map(|x| x.parse().unwrap()).collect();
    assert!(numbers.len() == 39 || numbers.len() == 114, "{name}");
    numbers
}

/// Symmetric clusters (own geometries of the published lowest energies of 13 and 38 atoms): any image is the same; one atom
/// elsewhere is not. So are clouds in a plane, on a line, of two points and of one.
#[test]
fn symmetric_and_degenerate_clouds() {
    let flat = |n: usize, f: &dyn Fn(usize) -> [f64; 3]| (0..n).flat_map(f).collect::<Vec<f64>>();
    let clouds = [
        geometry("lj13.xyz"),
        geometry("lj38.xyz"),
        flat(6, &|k| [(k % 3) as f64, (k / 3) as f64, 0.0]),
        flat(4, &|k| [k as f64, 2.0 * k as f64, -(k as f64)]),
        flat(2, &|k| [k as f64, 0.0, 0.0]),
        flat(1, &|_| [0.3, 0.2, 0.1]),
    ];
    for at in clouds {
        let n = at.len() / 3;
        let exchange = if n > 1 { ", exchange p" } else { "" };
        let landscape = landscape(&format!(
            "unknown p[{n}, 3] in [-3, 3]\nminimise sum(i in 1..{n}: dot(p[i], p[i]))\nalike shift p, rotate p, mirror p{exchange}\n"
        ));
        let identity = Identity::new(&landscape.slots, &landscape.symmetries);
        for trial in 0..40 {
            let mut rng = stream(6, n as u64, trial, Purpose::Check);
            let image = image(&landscape, &at, 1e-8, &mut rng);
            let matched = compare(&identity, &at, &image);
            assert!(matches!(matched, Match::Same(_)), "n = {n}, trial {trial}: {matched:?}");
            if n > 2 {
                let mut moved = image;
                moved[3] += 0.02;
                assert_eq!(compare(&identity, &at, &moved), Match::Distinct, "n = {n}");
            }
        }
    }
}

/// Arrivals of several minima and their images, in any order, give the same entries.
#[test]
fn the_order_of_arrivals_does_not_matter() {
    let landscape = landscape(&format!("{CLOUD}alike shift p, rotate p, mirror p, exchange p\n"));
    let identity = Arc::new(Identity::new(&landscape.slots, &landscape.symmetries));
    let mut rng = stream(8, 0, 0, Purpose::Check);
    let minima: Vec<Vec<f64>> = (0..12).map(|_| random_point(&landscape, &mut rng)).collect();
    // Some share their value with another, which only the places tell apart.
    let value = |number: usize| -9.0 + (number / 2) as f64;
    let arrivals: Vec<(usize, Vec<f64>, Meeting)> = (0..150)
        .map(|task| {
            let number = rng.random_range(0..minima.len());
            let meeting = Meeting {
                heuristic: rng.random_range(0..4),
                round: task / 10,
                task: task % 10,
                evaluation: 100 * task,
            };
            (number, image(&landscape, &minima[number], 1e-8, &mut rng), meeting)
        })
        .collect();
    let contents = |order: &[usize]| {
        let mut ledger = Ledger::new(identity.clone(), 1.0);
        for (count, &place) in order.iter().enumerate() {
            let (number, at, meeting) = &arrivals[place];
            let noise = 1e-12 * (place % 7) as f64;
            let met =
                ledger.meet(Candidate::new(&identity, value(*number) + noise, at.clone().into(), false), *meeting);
            if count % 5 == 0 {
                let confirmed = Confirmed {
                    kind: Kind::Interior,
                    value: value(*number),
                    at: minima[*number].clone().into(),
                    stiffness: vec![0.0, *number as f64 + 1.0],
                    residual: 0.0,
                    active: Vec::new(),
                };
                ledger.confirm(met.entry, confirmed);
            }
        }
        let mut contents: Vec<(i64, u64, u64, [u64; 4])> = ledger
            .entries()
            .map(|entry| {
                let first = entry.first();
                let hits = std::array::from_fn(|heuristic| entry.hits(heuristic));
                ((entry.value() * 1e6).round() as i64, first.round, first.task, hits)
            })
            .collect();
        contents.sort();
        contents
    };
    let mut order: Vec<usize> = (0..arrivals.len()).collect();
    let expected = contents(&order);
    assert_eq!(expected.len(), 12);
    for _ in 0..20 {
        order.shuffle(&mut rng);
        assert_eq!(contents(&order), expected);
    }
}

/// Entries that nearly agree are distinct, and listed.
#[test]
fn near_twins_are_listed() {
    let landscape = landscape("unknown x[2] in [-1, 1]\nminimise sum(x)");
    let identity = Arc::new(Identity::new(&landscape.slots, &landscape.symmetries));
    let mut ledger = Ledger::new(identity.clone(), 1.0);
    let meeting = |task| Meeting { heuristic: 0, round: 0, task, evaluation: task };
    for (task, x) in [0.5, 0.5 + 8e-5, 0.5 + 1e-6, 0.7].into_iter().enumerate() {
        ledger.meet(Candidate::new(&identity, -1.0, vec![x, 0.0].into(), false), meeting(task as u64));
    }
    assert_eq!(ledger.len(), 3);
    let twins = ledger.near_twins();
    assert_eq!(twins.len(), 1, "{twins:?}");
    assert!((twins[0].deviation - 4e-5).abs() < 1e-7, "{twins:?}");
}

/// What proves to be no minimum goes; a valley is one entry; a value of 0 is a value like any other.
#[test]
fn dismissals_valleys_and_zero() {
    let landscape = landscape("unknown x[2] in [-1, 1]\nminimise sum(x)");
    let identity = Arc::new(Identity::new(&landscape.slots, &landscape.symmetries));
    let mut ledger = Ledger::new(identity.clone(), 1.0);
    let meeting = |task| Meeting { heuristic: 1, round: 0, task, evaluation: task };
    let candidate = |value: f64, x: f64| Candidate::new(&identity, value, vec![x, -x].into(), false);
    let first = ledger.meet(candidate(0.0, 0.1), meeting(0));
    let image = ledger.meet(candidate(1e-17, 0.1), meeting(1));
    let other = ledger.meet(candidate(-1e-17, 0.6), meeting(2));
    assert_eq!((image.entry, image.new, other.new, ledger.len()), (first.entry, false, true, 2));
    ledger.dismiss(other.entry);
    assert_eq!((ledger.len(), ledger.dismissed(), ledger.point(other.entry)), (1, 1, None));
    let flat = |x: f64| Confirmed {
        kind: Kind::Flat,
        value: 0.0,
        at: vec![x, -x].into(),
        stiffness: vec![0.0, 2.0],
        residual: 0.0,
        active: Vec::new(),
    };
    ledger.confirm(first.entry, flat(0.1));
    let along = ledger.meet(candidate(0.0, -0.4), meeting(3));
    assert_eq!((along.new, ledger.len(), ledger.frequencies(1).get(&3)), (false, 1, Some(&1)));
}

/// The number that is the ledger's second key: no member of the group may change it by more than it says.
#[test]
fn the_second_key_is_an_invariant() {
    for (promises, landscape) in cases().into_iter().chain(landscapes(TANGLED)) {
        let identity = Identity::new(&landscape.slots, &landscape.symmetries);
        for trial in 0..60 {
            let mut rng = stream(12, 0, trial, Purpose::Check);
            let at = random_point(&landscape, &mut rng);
            for noise in [1e-8, 1e-3] {
                let image = image(&landscape, &at, noise, &mut rng);
                let apart = (identity.fingerprint(&at).number() - identity.fingerprint(&image).number()).abs();
                assert!(apart <= identity.slack(noise), "{promises}: {apart} for {}", identity.slack(noise));
            }
        }
    }
}

fn cloud_of(points: &[[f64; 3]], promises: &str) -> (Landscape, Vec<f64>) {
    let n = points.len();
    let text = format!(
        "unknown p[{n}, 3] in [-3, 3]\nminimise sum(i in 1..{n}: dot(p[i], p[i]))\nalike shift p, rotate p{promises}\n"
    );
    (landscape(&text), points.iter().flatten().copied().collect())
}

fn shapes() -> Vec<(&'static str, Vec<[f64; 3]>)> {
    let golden = (1.0 + 5.0_f64.sqrt()) / 2.0;
    let signs = |count: usize| {
        (0..1 << count).map(move |bits: usize| std::array::from_fn(|k| if bits >> k & 1 == 1 { 1.0 } else { -1.0 }))
    };
    let icosahedron: Vec<[f64; 3]> = signs(2)
        .flat_map(|s: [f64; 3]| {
            let (a, b) = (s[0], golden * s[1]);
            [[0.0, a, b], [a, b, 0.0], [b, 0.0, a]]
        })
        .collect();
    let with_middle = icosahedron.iter().copied().chain([[0.0; 3]]).collect();
    let ring = |n: usize, z: f64, turn: f64| {
        (0..n).map(move |k| {
            let angle = (k as f64 + turn) * std::f64::consts::TAU / n as f64;
            [angle.cos(), angle.sin(), z]
        })
    };
    vec![
        ("cube", signs(3).collect()),
        ("icosahedron", icosahedron),
        ("icosahedron with a middle", with_middle),
        ("square antiprism", ring(4, 0.6, 0.0).chain(ring(4, -0.6, 0.5)).collect()),
        ("chiral twist", ring(3, 0.6, 0.0).chain(ring(3, -0.6, 0.2)).collect()),
        ("hexagon", ring(6, 0.0, 0.0).collect()),
        ("uneven line", [0.0, 0.4, 1.5, 2.0].iter().map(|&x| [x, -x, 0.5 * x]).collect()),
        (
            "nearly a line",
            [0.0, 0.4, 1.5, 2.0].iter().map(|&x: &f64| [x, -x, 0.5 * x + 5e-5 * (9.0 * x).sin()]).collect(),
        ),
        ("two at one place", vec![[0.0; 3], [0.0; 3], [1.0, 0.0, 0.0], [0.0, 1.2, 0.3]]),
        ("nearly at the middle", vec![[1e-6, 0.0, 0.0], [1.0, 0.0, 0.0], [-0.5, 0.8, 0.0], [-0.5, -0.8, 0.0]]),
    ]
}

/// Shapes of high symmetry, degenerate shapes, and what is only nearly the same.
#[test]
fn shapes_and_their_near_copies() {
    for (name, points) in shapes() {
        for promises in ["", ", exchange p", ", mirror p", ", mirror p, exchange p"] {
            let (landscape, at) = cloud_of(&points, promises);
            let identity = Identity::new(&landscape.slots, &landscape.symmetries);
            for trial in 0..20 {
                let mut rng = stream(13, points.len() as u64, trial, Purpose::Check);
                let image = image(&landscape, &at, 1e-8, &mut rng);
                let matched = compare(&identity, &at, &image);
                assert!(matches!(matched, Match::Same(_)), "{name}{promises}, trial {trial}: {matched:?}");
                // One point moved outward by 6e-4, a ten-thousandth of the width.
                let mut moved = image;
                let middle: Vec<f64> =
                    (0..3).map(|k| moved.iter().skip(k).step_by(3).sum::<f64>() / points.len() as f64).collect();
                let row = rng.random_range(0..points.len());
                let offset: Vec<f64> = (0..3).map(|k| moved[3 * row + k] - middle[k]).collect();
                let radius = offset.iter().map(|x| x * x).sum::<f64>().sqrt();
                if radius > 0.1 {
                    (0..3).for_each(|k| moved[3 * row + k] += 6e-4 * offset[k] / radius);
                    let matched = compare(&identity, &at, &moved);
                    assert!(!matches!(matched, Match::Same(_)), "{name}{promises}, trial {trial}: {matched:?}");
                }
            }
        }
    }
}

/// Only a chiral shape has a hand, and only where mirror images are not promised to be the same.
#[test]
fn hands_of_shapes() {
    for (name, points) in shapes() {
        for (promises, mirrors) in [(", exchange p", false), (", mirror p, exchange p", true)] {
            let (landscape, at) = cloud_of(&points, promises);
            let identity = Identity::new(&landscape.slots, &landscape.symmetries);
            let mut rng = stream(14, points.len() as u64, 0, Purpose::Check);
            let hand: Vec<f64> = at.iter().enumerate().map(|(slot, x)| if slot % 3 == 2 { -x } else { *x }).collect();
            let hand = image(&landscape, &hand, 1e-8, &mut rng);
            let same = matches!(compare(&identity, &at, &hand), Match::Same(_));
            assert_eq!(same, mirrors || name != "chiral twist", "{name}{promises}");
        }
    }
}

/// Points of one distance from the middle leave the invariants nothing to tell: the match must still be quick.
#[test]
fn a_shell_of_150_points_is_compared_in_little_time() {
    let golden_angle = std::f64::consts::PI * (3.0 - 5.0_f64.sqrt());
    let shell = |n: usize, turn: f64| -> Vec<[f64; 3]> {
        let point = |k: usize| {
            let z = 1.0 - (2.0 * k as f64 + 1.0) / n as f64;
            let (radius, angle) = ((1.0 - z * z).sqrt(), golden_angle * k as f64 + turn * z);
            [2.0 * radius * angle.cos(), 2.0 * radius * angle.sin(), 2.0 * z]
        };
        (0..n).map(point).collect()
    };
    let (landscape, at) = cloud_of(&shell(150, 0.0), ", mirror p, exchange p");
    let other: Vec<f64> = shell(150, 0.3).into_iter().flatten().collect();
    let identity = Identity::new(&landscape.slots, &landscape.symmetries);
    let (same, n_same) = identity.compare_counted(&at, &at, 1e-5, 1e-5);
    assert!(matches!(same, Match::Same(_)));
    let (distinct, n_distinct) = identity.compare_counted(&at, &other, 1e-5, 1e-5);
    assert_eq!(distinct, Match::Distinct);
    // As many as rows, times the few rows at the distance of the second: not the square of the rows.
    assert!(n_same <= 2 * 150 && n_distinct <= 8 * 150, "{n_same}, {n_distinct}");
}

/// Many minima of one value, which only their places tell apart: what an arrival costs must not grow with the ledger.
#[test]
fn meeting_costs_the_same_in_a_large_ledger() {
    let landscape = landscape("unknown x[17] in [-2, 2]\nminimise sum(x)");
    let identity = Arc::new(Identity::new(&landscape.slots, &landscape.symmetries));
    let mut ledger = Ledger::new(identity.clone(), 1.0);
    let meeting = |task| Meeting { heuristic: 0, round: 0, task, evaluation: task };
    let corner = |bits: u64| -> Vec<f64> { (0..17).map(|k| if bits >> k & 1 == 1 { 1.0 } else { -1.0 }).collect() };
    let count = 1 << 17;
    let mut looks = Vec::new();
    for round in 0..2 {
        for bits in 0..count {
            let at: Vec<f64> = corner(bits).iter().map(|x| x + 1e-9 * round as f64).collect();
            let met = ledger.meet(Candidate::new(&identity, -5.0, at.into(), false), meeting(bits));
            assert_eq!(met.new, round == 0, "{bits}");
        }
        looks.push(ledger.n_looks());
    }
    assert_eq!(ledger.len(), count as usize);
    // Each is looked at again when it comes again; others only by the chance that their numbers are close.
    assert!(looks[1] < 60 * count, "{looks:?}");
}
