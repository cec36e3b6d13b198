//! Moves: starts for the next descent, from points that are known.
//!
//! Enters: points, the landscape's structure, a step, a random stream. Leaves: a point inside the bounds. Promised:
//! moves speak of structure only (rows, kinds, bounds, wraps). Deliberately absent: acceptance and choice (see `hop`,
//! `evolve`), and any knowledge of an energy: vacancy filling asks for values like a descent.

mod cloud;
pub mod general;
mod point_group;
mod splice;
mod symmetric;
mod vacancy;

use rand::{Rng, RngExt};

use super::structure::Structure;

pub use splice::splice;
pub use symmetric::start as symmetric_start;
pub use vacancy::{Filling, Vacancy, vacancies};

/// A way to move.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash, PartialOrd, Ord)]
pub enum Move {
    /// Every unknown by a uniform amount of at most the step.
    Shake,
    /// One unknown, at a scale drawn anew.
    One,
    /// Two unknowns by opposite amounts, at a scale drawn anew.
    Pair,
    /// One unknown, drawn afresh.
    Afresh,
    /// Some unknowns, at a scale drawn anew.
    Some,
    /// All unknowns, at a scale drawn anew.
    All,
    /// One row, or one unknown where none is exchangeable, drawn afresh.
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
            (true, _) => vec![
                (Move::Shake, 0.25),
                (Move::One, 0.2),
                (Move::Pair, 0.05),
                (Move::Afresh, 0.05),
                (Move::Some, 0.2),
                (Move::All, 0.2),
                (Move::Redraw, 0.05),
            ],
            (false, false) => vec![(Move::Shake, 0.7), (Move::Relocate, 0.3)],
            (false, true) => vec![(Move::Shake, 0.5), (Move::Relocate, 0.25), (Move::Swap, 0.25)],
        }
    }

    /// One of some moves, by their shares.
    pub fn draw(moves: &[(Move, f64)], rng: &mut impl Rng) -> Move {
        let mut draw = rng.random::<f64>();
        for &(kind, share) in moves {
            if draw < share {
                return kind;
            }
            draw -= share;
        }
        moves.first().map_or(Move::Shake, |first| first.0)
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
            Move::One => general::one(structure, &mut at, rng),
            Move::Pair => general::pair(structure, &mut at, rng),
            Move::Afresh => general::afresh(structure, &mut at, rng),
            Move::Some => general::some(structure, &mut at, rng),
            Move::All => general::all(structure, &mut at, rng),
            Move::Redraw => general::redraw(structure, &mut at, rng),
            Move::Relocate => cloud::relocate(structure, &mut at, rng),
            Move::Swap => cloud::swap(structure, &mut at, rng),
        }
        structure.bring_inside(&mut at);
        at
    }
}
