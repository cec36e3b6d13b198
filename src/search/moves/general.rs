//! Moves for any landscape.

use rand::{Rng, RngExt};

use crate::numbers::functions;
use crate::search::structure::Structure;

/// Every unknown moves by a uniform amount of at most `step` times its scale.
pub fn shake(structure: &Structure, at: &mut [f64], step: f64, rng: &mut impl Rng) {
    for (x, scale) in at.iter_mut().zip(&structure.scale) {
        *x += step * scale * (2.0 * rng.random::<f64>() - 1.0);
    }
}

/// The smallest and the largest step of [`multi_scale`], relative to the scale of the unknowns.
const SMALLEST: f64 = 0.001;
const LARGEST: f64 = 0.7;

/// A step size drawn log-uniformly; half the time one unknown, a quarter a random subset, a quarter all. One unknown
/// alone is now and then drawn afresh.
///
/// A fixed size fails on landscapes whose wells have several sizes; a drawn one has each size at its disposal.
pub fn multi_scale(structure: &Structure, at: &mut [f64], rng: &mut impl Rng) {
    let n = at.len();
    let exponent = rng.random::<f64>() * functions::logarithm(LARGEST / SMALLEST);
    let step = SMALLEST * functions::exponential(exponent);
    let kind = rng.random_range(0..4);
    let mut displace = |slot: usize, rng: &mut dyn FnMut() -> f64| {
        at[slot] += step * structure.scale[slot] * (2.0 * rng() - 1.0);
    };
    let mut draw = || rng.random::<f64>();
    match kind {
        0 | 1 => {
            let slot = ((draw() * n as f64) as usize).min(n - 1);
            if draw() < 0.2 {
                let (lower, upper) = (structure.start_lower[slot], structure.start_upper[slot]);
                at[slot] = lower + (upper - lower) * draw();
            } else {
                displace(slot, &mut draw);
            }
        }
        2 => {
            let chosen = ((draw() * n as f64) as usize).min(n - 1);
            let share = draw();
            for slot in 0..n {
                if slot == chosen || draw() < share {
                    displace(slot, &mut draw);
                }
            }
        }
        _ => (0..n).for_each(|slot| displace(slot, &mut draw)),
    }
}

/// One exchangeable row, or one unknown where nothing is exchangeable, is drawn afresh from the start region.
pub fn redraw(structure: &Structure, at: &mut [f64], rng: &mut impl Rng) {
    let n_rows: usize = structure.exchanges.iter().map(Vec::len).sum();
    let single;
    let row: &[usize] = if n_rows > 0 {
        let chosen = rng.random_range(0..n_rows);
        structure.exchanges.iter().flatten().nth(chosen).map_or(&[], Vec::as_slice)
    } else {
        single = [rng.random_range(0..at.len())];
        &single
    };
    for &slot in row {
        let (lower, upper) = (structure.start_lower[slot], structure.start_upper[slot]);
        at[slot] = lower + (upper - lower) * rng.random::<f64>();
    }
}
