//! Speed of value and gradient of the 38-atom pair energy, per point: the lane interpreter at each width against scalar
//! Rust written by hand, in one run. The last lines state the ratios.

use std::hint::black_box;
use std::sync::Arc;
use std::time::{Duration, Instant};

use criterion::Criterion;
use thalweg::kernel::{LaneMachine, Role, compile};

const N: usize = 38;

const PROBLEM: &str = "given n = 38
unknown p[n, 3] in [-2.5, 2.5]
let s(i, j) = sum(k in 1..3: (p[i,k] - p[j,k])^2)
minimise sum(i in 1..n, j in i+1..n: 4*(s(i,j)^-6 - s(i,j)^-3))";

/// The peer: what a careful modeller writes.
fn by_hand(at: &[f64], gradient: &mut [f64]) -> f64 {
    gradient.fill(0.0);
    let mut energy = 0.0;
    for i in 0..N {
        let (x, y, z) = (at[3 * i], at[3 * i + 1], at[3 * i + 2]);
        let (mut gx, mut gy, mut gz) = (0.0, 0.0, 0.0);
        for j in i + 1..N {
            let (dx, dy, dz) = (x - at[3 * j], y - at[3 * j + 1], z - at[3 * j + 2]);
            let inverse = 1.0 / (dx * dx + dy * dy + dz * dz);
            let six = inverse * inverse * inverse;
            energy += six * (six - 1.0);
            let slope = -24.0 * six * (2.0 * six - 1.0) * inverse;
            gx += slope * dx;
            gy += slope * dy;
            gz += slope * dz;
            gradient[3 * j] -= slope * dx;
            gradient[3 * j + 1] -= slope * dy;
            gradient[3 * j + 2] -= slope * dz;
        }
        gradient[3 * i] += gx;
        gradient[3 * i + 1] += gy;
        gradient[3 * i + 2] += gz;
    }
    4.0 * energy
}

fn points() -> Vec<Vec<f64>> {
    // A stretched grid of atoms, shaken a little: ordinary distances, no two points alike.
    let mut state = 1_u64;
    let mut draw = || {
        state = state.wrapping_mul(6364136223846793005).wrapping_add(1442695040888963407);
        (state >> 11) as f64 / (1_u64 << 53) as f64
    };
    (0..64)
        .map(|_| {
            (0..N)
                .flat_map(|atom| [atom % 4, atom / 4 % 4, atom / 16].map(|k| k as f64 * 1.1))
                .map(|x| x + 0.2 * (draw() - 0.5))
                .collect()
        })
        .collect()
}

fn seconds_per_point(mut once: impl FnMut() -> usize) -> f64 {
    let mut best = f64::INFINITY;
    for _ in 0..7 {
        let (start, mut n_points) = (Instant::now(), 0);
        while start.elapsed() < Duration::from_millis(120) {
            n_points += once();
        }
        best = best.min(start.elapsed().as_secs_f64() / n_points as f64);
    }
    best
}

fn main() {
    let parsed = thalweg::language::parse(PROBLEM);
    let landscape =
        thalweg::landscape::check(&parsed.file, &[]).expect("no overrides").landscape.expect("a sound problem");
    let kernel = compile(&landscape).expect("a sound kernel");
    let points = points();
    let mut gradient = vec![0.0; 3 * N];
    let mut peer = || {
        for at in &points {
            black_box(by_hand(black_box(at), &mut gradient));
        }
        points.len()
    };
    let mut machines: Vec<LaneMachine> =
        [4, 8, 16, 32].map(|lanes| LaneMachine::new(&Arc::clone(&kernel.gradient), lanes)).into();
    for machine in &mut machines {
        let lanes = machine.n_lanes();
        for (place, value) in machine.rows_mut(Role::Unknowns).iter_mut().enumerate() {
            *value = points[place % lanes][place / lanes];
        }
    }
    let mut criterion = Criterion::default().sample_size(20).configure_from_args();
    criterion.bench_function("38 atoms, by hand, 64 points", |bencher| bencher.iter(&mut peer));
    let by_hand = seconds_per_point(&mut peer);
    let mut lines = vec![format!("by hand: {:.3} us a point", by_hand * 1e6)];
    for machine in &mut machines {
        let lanes = machine.n_lanes();
        criterion.bench_function(&format!("38 atoms, {lanes} lanes, {lanes} points"), |bencher| {
            bencher.iter(|| machine.run())
        });
        let own = seconds_per_point(|| {
            machine.run();
            black_box(machine.rows(Role::Value)[0]);
            lanes
        });
        lines.push(format!(
            "{lanes} lanes: {:.3} us a point, {:.2} times as fast as by hand",
            own * 1e6,
            by_hand / own
        ));
    }
    criterion.final_summary();
    for line in lines {
        #[allow(clippy::print_stdout, reason = "a benchmark reports on standard output")]
        {
            println!("{line}");
        }
    }
}
