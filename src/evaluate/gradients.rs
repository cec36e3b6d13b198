//! The compiled gradient against differences of the value.

use rand::RngExt;

use crate::base::random::{Purpose, stream};
use crate::landscape::Landscape;

use super::evaluator::Evaluator;

/// How well gradient and differences agreed.
#[derive(Clone, Debug, PartialEq)]
pub struct GradientCheck {
    /// The points at which both were finite.
    pub n_points: usize,
    /// The largest disagreement, relative to the size of the slopes at the point.
    pub worst: f64,
    /// The slot of the largest disagreement.
    pub slot: usize,
    /// The point of the largest disagreement.
    pub at: Vec<f64>,
}

/// Steps of the differences relative to the start region: the smallest error over these counts, since a step that is
/// right for a smooth well is wrong on a steep wall.
const STEPS: [f64; 3] = [1e-4, 1e-5, 1e-6];

/// Compares the gradient with central differences (Richardson 1911 extrapolation of two of them) at `n_points` random
/// points of the start region, in one random slot direction each; the seed chooses the points.
pub fn check_gradient(landscape: &Landscape, evaluator: &mut Evaluator, seed: u64, n_points: usize) -> GradientCheck {
    let slots = &landscape.slots;
    let mut check = GradientCheck { n_points: 0, worst: 0.0, slot: 0, at: Vec::new() };
    for number in 0..n_points {
        let mut rng = stream(seed, 0, number as u64, Purpose::Check);
        let at: Vec<f64> = slots
            .iter()
            .map(|slot| slot.start_lower + (slot.start_upper - slot.start_lower) * rng.random::<f64>())
            .collect();
        let slot = rng.random_range(0..slots.len());
        let width = slots[slot].start_upper - slots[slot].start_lower;
        let (value, gradient) = evaluator.value_and_gradient(&at);
        let size = gradient.iter().zip(slots).map(|(g, s)| (g * (s.start_upper - s.start_lower)).abs());
        let size = size.fold(0.0, f64::max);
        if !value.is_finite() || !size.is_finite() {
            continue;
        }
        let mut error = f64::INFINITY;
        for step in STEPS {
            let mut value_at = |offset: f64| {
                let mut moved = at.clone();
                moved[slot] += offset;
                evaluator.value_and_gradient(&moved).0
            };
            let h = step * width;
            let near = (value_at(h) - value_at(-h)) / (2.0 * h);
            let far = (value_at(2.0 * h) - value_at(-2.0 * h)) / (4.0 * h);
            let slope = near + (near - far) / 3.0;
            // Differences lose what the value's own rounding hides: a disagreement counts relative to the slopes, or to ten
            // thousand times that blur, so that rounding alone stays below 1e-4.
            let blur = 1e-15 * value.abs() / step;
            let difference = ((slope - gradient[slot]) * width).abs();
            error = error.min(difference / (size + 1e4 * blur + f64::MIN_POSITIVE));
        }
        if !error.is_finite() {
            continue;
        }
        check.n_points += 1;
        if check.at.is_empty() || error > check.worst {
            check.worst = error;
            check.slot = slot;
            check.at = at;
        }
    }
    check
}
