//! Points to start from: uniform, or spread evenly.

use rand::{Rng, RngExt};

use super::structure::{Cloud, Structure};

/// A point drawn uniformly from the start region.
pub fn uniform(structure: &Structure, rng: &mut impl Rng) -> Vec<f64> {
    structure
        .start_lower
        .iter()
        .zip(&structure.start_upper)
        .map(|(lower, upper)| lower + (upper - lower) * rng.random::<f64>())
        .collect()
}

/// Beyond this many unknowns a point of the sequence is drawn uniformly: its even spread would need more starts than
/// any hunt makes, and its factors crowd towards 1.
const MAX_SPREAD: usize = 12;

/// Point `number` of the additive sequence with the generalised golden ratio of the dimension, shifted at random by
/// `offsets` (a randomised Kronecker sequence, Weyl 1916; this choice of factors is common practice in quasi-Monte Carlo work).
///
/// The random stream serves where there are more than 12 unknowns.
pub fn spread(structure: &Structure, number: u64, offsets: &mut impl Rng, rng: &mut impl Rng) -> Vec<f64> {
    let n = structure.n_unknowns();
    if n > MAX_SPREAD {
        return uniform(structure, rng);
    }
    let ratio = golden(n);
    let mut factor = 1.0;
    (0..n)
        .map(|slot| {
            factor /= ratio;
            let turn = offsets.random::<f64>() + factor * (number + 1) as f64;
            let fraction = turn - turn.floor();
            structure.start_lower[slot] + (structure.start_upper[slot] - structure.start_lower[slot]) * fraction
        })
        .collect()
}

/// The positive root of `x^(n+1) = x + 1`, by Newton steps from 2 (convex, so they fall towards it).
fn golden(n: usize) -> f64 {
    let mut x = 2.0_f64;
    for _ in 0..64 {
        let power = (0..n).fold(1.0, |power, _| power * x);
        x -= (power * x - x - 1.0) / ((n + 1) as f64 * power - 1.0);
    }
    x
}

/// Moves the rows of a cloud so that their centroid stands in the middle of the start region.
pub fn centre(structure: &Structure, cloud: &Cloud, at: &mut [f64]) {
    for k in 0..cloud.dimensions {
        let slots = || cloud.rows.iter().map(|row| row[k]);
        let n_rows = cloud.rows.len() as f64;
        let mean = slots().map(|slot| at[slot]).sum::<f64>() / n_rows;
        let middle =
            slots().map(|slot| 0.5 * (structure.start_lower[slot] + structure.start_upper[slot])).sum::<f64>() / n_rows;
        slots().for_each(|slot| at[slot] += middle - mean);
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::base::random::{Purpose, stream};

    fn square(n: usize) -> Structure {
        Structure {
            start_lower: vec![0.0; n],
            start_upper: vec![1.0; n],
            lower: vec![0.0; n],
            upper: vec![1.0; n],
            scale: vec![1.0; n],
            cyclic: vec![false; n],
            clouds: Vec::new(),
            exchanges: Vec::new(),
        }
    }

    #[test]
    fn golden_ratios() {
        assert!((golden(1) - 1.618033988749895).abs() < 1e-15);
        assert!((golden(2) - 1.324717957244746).abs() < 1e-15);
    }

    /// 64 points of the sequence hit far more of 64 equal cells than the 63.5 % that uniform points do.
    #[test]
    fn spread_points_are_spread() {
        let structure = square(2);
        let mut cells = std::collections::BTreeSet::new();
        for number in 0..64 {
            let mut offsets = stream(1, 0, 0, Purpose::Round);
            let mut rng = stream(1, 0, number, Purpose::Task);
            let point = spread(&structure, number, &mut offsets, &mut rng);
            cells.insert(((point[0] * 8.0) as usize, (point[1] * 8.0) as usize));
        }
        assert!(cells.len() >= 48, "only {} cells", cells.len());
    }

    #[test]
    fn uniform_points_stay_in_the_region() {
        let mut structure = square(3);
        structure.start_lower = vec![-2.0, 5.0, 0.0];
        structure.start_upper = vec![-1.0, 5.5, 1e9];
        let mut rng = stream(7, 0, 0, Purpose::Survey);
        for _ in 0..1000 {
            let point = uniform(&structure, &mut rng);
            for (slot, x) in point.iter().enumerate() {
                assert!(structure.start_lower[slot] <= *x && *x <= structure.start_upper[slot]);
            }
        }
    }
}
