//! Points to start from: uniform, or spread evenly.

use rand::{Rng, RngExt};

use crate::base::random::{Purpose, stream};

use super::anneal::Annealing;
use super::moves;
use super::settings::Heuristic;
use super::structure::Structure;
use super::task::{Proposal, Task};

/// Where a task begins.
pub enum Beginning {
    /// A descent from here.
    Descent(Vec<f64>),
    /// An annealing chain, then a descent from where it ends.
    Chain(Box<Annealing>),
}

/// The beginning of a task, from its own random stream.
pub fn begin(structure: &Structure, seed: u64, task: &Task, heuristic: Heuristic, proposal: &Proposal) -> Beginning {
    let purpose = if heuristic == Heuristic::Survey { Purpose::Survey } else { Purpose::Task };
    let mut rng = stream(seed, task.round, task.number, purpose);
    Beginning::Descent(match proposal {
        Proposal::Point(at) => at.to_vec(),
        Proposal::Uniform => uniform(structure, &mut rng),
        Proposal::Spread(number) => {
            // The same offsets for all points of the sequence.
            let mut offsets = stream(seed, u64::MAX, 0, Purpose::Task);
            spread(structure, *number, &mut offsets, &mut rng)
        }
        Proposal::Moved { from, kind, step } => kind.apply(structure, from, *step, &mut rng),
        Proposal::Symmetric { model } => moves::symmetric_start(structure, model.as_deref(), &mut rng),
        Proposal::Spliced { mother, father } => moves::splice(structure, mother, father, &mut rng),
        Proposal::Annealed { from, evaluations } => {
            let at = from.as_ref().map_or_else(|| uniform(structure, &mut rng), |from| from.to_vec());
            return Beginning::Chain(Box::new(Annealing::new(structure, at, *evaluations, rng)));
        }
    })
}

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

#[cfg(test)]
mod tests {
    use super::*;

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
