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

/// The smallest and the largest of drawn step sizes, relative to the scale of the unknowns.
const SMALLEST: f64 = 0.001;
const LARGEST: f64 = 0.7;

/// A step size drawn log-uniformly. A fixed size fails on landscapes whose wells have several sizes; a drawn one has
/// each size at its disposal.
fn drawn_step(rng: &mut impl Rng) -> f64 {
    SMALLEST * functions::exponential(rng.random::<f64>() * functions::logarithm(LARGEST / SMALLEST))
}

/// One unknown moves, at a scale drawn anew.
pub fn one(structure: &Structure, at: &mut [f64], rng: &mut impl Rng) {
    let step = drawn_step(rng);
    let slot = rng.random_range(0..at.len());
    at[slot] += step * structure.scale[slot] * (2.0 * rng.random::<f64>() - 1.0);
}

/// Two unknowns, half the time neighbours, move by opposite amounts in their scales, at a scale drawn anew: sums stay, which
/// is the direction of the rest of a chain, or the total of a mixture.
pub fn pair(structure: &Structure, at: &mut [f64], rng: &mut impl Rng) {
    let n = at.len();
    if n < 2 {
        return one(structure, at, rng);
    }
    let shift = drawn_step(rng) * (2.0 * rng.random::<f64>() - 1.0);
    let first = rng.random_range(0..n);
    let apart = if rng.random::<bool>() { 1 } else { rng.random_range(1..n) };
    let second = (first + apart) % n;
    at[first] += shift * structure.scale[first];
    at[second] -= shift * structure.scale[second];
}

/// One unknown is drawn afresh from the start region.
pub fn afresh(structure: &Structure, at: &mut [f64], rng: &mut impl Rng) {
    let slot = rng.random_range(0..at.len());
    let (lower, upper) = (structure.start_lower[slot], structure.start_upper[slot]);
    at[slot] = lower + (upper - lower) * rng.random::<f64>();
}

/// A random part of the unknowns moves, at a scale drawn anew.
pub fn some(structure: &Structure, at: &mut [f64], rng: &mut impl Rng) {
    let step = drawn_step(rng);
    let chosen = rng.random_range(0..at.len());
    let share = rng.random::<f64>();
    for (slot, x) in at.iter_mut().enumerate() {
        if slot == chosen || rng.random::<f64>() < share {
            *x += step * structure.scale[slot] * (2.0 * rng.random::<f64>() - 1.0);
        }
    }
}

/// Every unknown moves, at a scale drawn anew.
pub fn all(structure: &Structure, at: &mut [f64], rng: &mut impl Rng) {
    let step = drawn_step(rng);
    shake(structure, at, step, rng);
}

/// One exchangeable row, or one unknown where nothing is exchangeable, is drawn afresh from the start region.
pub fn redraw(structure: &Structure, at: &mut [f64], rng: &mut impl Rng) {
    let n_rows: usize = structure.exchanges.iter().map(Vec::len).sum();
    if n_rows == 0 {
        return afresh(structure, at, rng);
    }
    let chosen = rng.random_range(0..n_rows);
    for &slot in structure.exchanges.iter().flatten().nth(chosen).map_or(&[][..], Vec::as_slice) {
        let (lower, upper) = (structure.start_lower[slot], structure.start_upper[slot]);
        at[slot] = lower + (upper - lower) * rng.random::<f64>();
    }
}

/// Some unknowns take their values from another point: half the time one, else a random part.
pub fn transplant(at: &mut [f64], other: &[f64], rng: &mut impl Rng) {
    let n = at.len();
    let chosen = rng.random_range(0..n);
    let share = if rng.random::<f64>() < 0.6 { 0.0 } else { rng.random::<f64>() };
    for slot in 0..n {
        if slot == chosen || (share > 0.0 && rng.random::<f64>() < share) {
            at[slot] = other[slot];
        }
    }
}

/// The difference of two other points is added, in one unknown, in some, or in all.
pub fn difference(at: &mut [f64], first: &[f64], second: &[f64], rng: &mut impl Rng) {
    let n = at.len();
    let chosen = rng.random_range(0..n);
    let share = [0.0, 0.0, 0.5, 1.0][rng.random_range(0..4)];
    for slot in 0..n {
        if slot == chosen || (share > 0.0 && rng.random::<f64>() < share) {
            at[slot] += first[slot] - second[slot];
        }
    }
}
