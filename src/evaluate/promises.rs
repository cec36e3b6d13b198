//! The promised symmetries, tried at random points before anyone relies on them; and symmetries that hold unpromised.

use crate::base::random::{Purpose, stream};
use crate::landscape::Landscape;
use crate::landscape::symmetry::Symmetry;
use rand::RngExt;

use super::evaluator::Evaluator;

/// A promise that does not hold: two points that it calls the same answer, with different values.
#[derive(Clone, Debug, PartialEq)]
pub struct BrokenPromise {
    /// The number of the promise in `Landscape::symmetries`.
    pub symmetry: usize,
    /// A point.
    pub at: Vec<f64>,
    /// Its value (of the objective as written).
    pub value: f64,
    /// Its image.
    pub image: Vec<f64>,
    /// The image's value.
    pub image_value: f64,
}

/// A symmetry that held at every point tried and is not declared.
#[derive(Clone, Debug, PartialEq)]
pub struct Suggestion {
    /// The symmetry.
    pub symmetry: Symmetry,
    /// The statement that declares it, as it would stand in the file.
    pub statement: String,
}

/// Points at which each promise is tried.
const N_POINTS: u64 = 12;

/// Values agree when they differ by at most this, relative to the larger: rounding in sums of a million terms stays
/// below, while a wrong promise differs in the first digits nearly everywhere.
const AGREEMENT: f64 = 1e-8;

/// Tries every promise at random points of the start region; returns the first counterexample of each broken one.
///
/// Points outside the landscape (value not finite) decide nothing, except that both or neither must be outside.
pub fn test_promises(landscape: &Landscape, evaluator: &mut Evaluator, seed: u64) -> Vec<BrokenPromise> {
    let mut broken = Vec::new();
    for (number, symmetry) in landscape.symmetries.iter().enumerate() {
        if let Some(counterexample) = counterexample(landscape, evaluator, symmetry, seed, number as u64) {
            broken.push(BrokenPromise { symmetry: number, ..counterexample });
        }
    }
    broken
}

fn counterexample(
    landscape: &Landscape,
    evaluator: &mut Evaluator,
    symmetry: &Symmetry,
    seed: u64,
    number: u64,
) -> Option<BrokenPromise> {
    let sign = if landscape.maximise { -1.0 } else { 1.0 };
    for trial in 0..N_POINTS {
        let mut rng = stream(seed, number + 1, trial, Purpose::Check);
        let slots = &landscape.slots;
        let at: Vec<f64> = slots
            .iter()
            .map(|slot| slot.start_lower + (slot.start_upper - slot.start_lower) * rng.random::<f64>())
            .collect();
        let image = symmetry.transform(slots, &at, &mut rng);
        let points = [at, image];
        evaluator.evaluate(2, |k| &points[k]);
        let (value, image_value) = (evaluator.value(0), evaluator.value(1));
        let agree = match (value.is_finite(), image_value.is_finite()) {
            (true, true) => (value - image_value).abs() <= AGREEMENT * value.abs().max(image_value.abs()).max(1e-300),
            (inside, image_inside) => inside == image_inside,
        };
        if !agree {
            let [at, image] = points;
            return Some(BrokenPromise {
                symmetry: 0,
                at,
                value: sign * value,
                image,
                image_value: sign * image_value,
            });
        }
    }
    None
}

/// Tries the usual symmetries of every family that no promise speaks of in that way; returns those that hold.
///
/// Tried are: exchange, shift, rotate and mirror for families with two axes, the last of length 2 or 3; exchange,
/// reverse, cycle, flip and shift for families with one axis; flip for single unknowns. A symmetry that follows from a
/// declared one (reverse and cycle from exchange) is not suggested.
pub fn suggest_symmetries(landscape: &Landscape, evaluator: &mut Evaluator, seed: u64) -> Vec<Suggestion> {
    let mut suggestions: Vec<Suggestion> = Vec::new();
    for (number, (words, symmetry)) in candidates(landscape).into_iter().enumerate() {
        let implied = |known: &Symmetry| implies(known, &symmetry);
        if landscape.symmetries.iter().any(implied) || suggestions.iter().any(|s| implied(&s.symmetry)) {
            continue;
        }
        // Numbers apart from those of the promises, so that the two tests draw other points.
        if counterexample(landscape, evaluator, &symmetry, seed, 1_000_000 + number as u64).is_none() {
            suggestions.push(Suggestion { symmetry, statement: format!("alike {words}") });
        }
    }
    suggestions
}

fn candidates(landscape: &Landscape) -> Vec<(String, Symmetry)> {
    let mut candidates = Vec::new();
    for family in &landscape.unknowns {
        let name = &family.name;
        let slots: Vec<usize> = (family.first_slot..family.first_slot + family.count).collect();
        let bounds = |slot: usize| (landscape.slots[slot].lower, landscape.slots[slot].upper);
        let row_length: usize = family.axes.iter().skip(1).map(|axis| axis.count).product();
        let rows: Vec<Vec<usize>> = slots.chunks(row_length.max(1)).map(<[usize]>::to_vec).collect();
        let periods = (0..row_length)
            .map(|k| {
                let slot = &landscape.slots[family.first_slot + k];
                slot.cyclic.then_some(slot.upper - slot.lower)
            })
            .collect();
        let like_rows = rows.iter().all(|row| row.iter().zip(&rows[0]).all(|(&a, &b)| bounds(a) == bounds(b)));
        let symmetric_box = slots.iter().all(|&slot| bounds(slot).0 == -bounds(slot).1);
        if symmetric_box {
            candidates.push((format!("flip {name}"), Symmetry::Flip { slots: slots.clone() }));
        }
        if rows.len() < 2 {
            continue;
        }
        candidates.push((format!("shift {name}"), Symmetry::Shift { rows: rows.clone(), periods }));
        if like_rows {
            candidates.insert(0, (format!("exchange {name}"), Symmetry::Exchange { rows: rows.clone() }));
            candidates.push((format!("cycle {name}"), Symmetry::Cycle { rows: rows.clone() }));
            candidates.push((format!("reverse {name}"), Symmetry::Reverse { rows: rows.clone() }));
        }
        if (2..=3).contains(&row_length) {
            candidates.push((format!("rotate {name}"), Symmetry::Rotate { rows: rows.clone() }));
            candidates.push((format!("mirror {name}"), Symmetry::Mirror { rows }));
        }
    }
    candidates
}

/// Whether one symmetry makes another a matter of course.
fn implies(known: &Symmetry, other: &Symmetry) -> bool {
    match (known, other) {
        (Symmetry::Exchange { rows }, Symmetry::Exchange { rows: other })
        | (Symmetry::Exchange { rows }, Symmetry::Reverse { rows: other } | Symmetry::Cycle { rows: other }) => {
            other.iter().all(|row| rows.contains(row))
        }
        (Symmetry::Shift { rows, .. }, Symmetry::Shift { rows: other, .. })
        | (Symmetry::Rotate { rows }, Symmetry::Rotate { rows: other })
        | (Symmetry::Mirror { rows }, Symmetry::Mirror { rows: other })
        | (Symmetry::Reverse { rows }, Symmetry::Reverse { rows: other })
        | (Symmetry::Cycle { rows }, Symmetry::Cycle { rows: other }) => rows == other,
        (Symmetry::Flip { slots }, Symmetry::Flip { slots: other }) => slots == other,
        // In a plane or in space, a mirror image is a flip up to a rotation, or the other way round.
        (Symmetry::Mirror { rows }, Symmetry::Flip { slots }) => rows.concat() == *slots,
        _ => false,
    }
}
