//! Moves away from a minimum: a start for the next descent.
//!
//! Enters: a point, the landscape's structure, a step, a random stream. Leaves: a point inside the bounds. Promised:
//! moves speak of structure only (rows, kinds, bounds, wraps). Deliberately absent: acceptance (see `chain`).

mod cloud;
mod general;

use rand::Rng;

use super::structure::Structure;

/// A way to move.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash, PartialOrd, Ord)]
pub enum Move {
    /// Every unknown by a uniform amount of at most the step.
    Shake,
    /// One unknown, some, or all, at a scale drawn anew each time.
    MultiScale,
    /// One row, or one whole unknown family element, drawn afresh.
    Redraw,
    /// The outermost rows of a cloud are put elsewhere on its surface.
    Relocate,
    /// Two rows of different kinds change places.
    Swap,
}

impl Move {
    /// The moves that a structure allows, with the share of each.
    pub fn available(structure: &Structure) -> Vec<(Move, f64)> {
        let with_kinds = structure.clouds.iter().any(|cloud| cloud.n_kinds > 1);
        match (structure.clouds.is_empty(), with_kinds) {
            (true, _) => vec![(Move::Shake, 0.2), (Move::MultiScale, 0.7), (Move::Redraw, 0.1)],
            (false, false) => vec![(Move::Shake, 0.65), (Move::Relocate, 0.35)],
            (false, true) => vec![(Move::Shake, 0.5), (Move::Relocate, 0.25), (Move::Swap, 0.25)],
        }
    }

    /// Whether the move has a step to adapt.
    pub fn has_step(self) -> bool {
        self == Move::Shake
    }

    /// A start, away from `from`. `step` is relative to the scale of the unknowns.
    pub fn apply(self, structure: &Structure, from: &[f64], step: f64, rng: &mut impl Rng) -> Vec<f64> {
        let mut at = from.to_vec();
        match self {
            Move::Shake => general::shake(structure, &mut at, step, rng),
            Move::MultiScale => general::multi_scale(structure, &mut at, rng),
            Move::Redraw => general::redraw(structure, &mut at, rng),
            Move::Relocate => cloud::relocate(structure, &mut at, rng),
            Move::Swap => cloud::swap(structure, &mut at, rng),
        }
        structure.bring_inside(&mut at);
        at
    }
}
