//! The checked problem: names resolved, constants folded, families given their shapes, symmetries as group actions.
//!
//! Enters: a [`crate::language::tree::File`] and overrides of its givens. Leaves: a [`Landscape`] and diagnostics.
//! Promised: in a landscape every index is in range, every shape agrees, every constant is finite, and loops are still
//! rolled. Deliberately absent: derivatives and execution (see `kernel`); numerical tests of promises (see `evaluate`).

mod build;
mod calls;
mod check;
mod condition;
mod declare;
mod domain;
mod elaborate;
mod evaluate;
#[cfg(test)]
mod goldens;
pub mod mistake;
mod names;
mod promise;
pub mod symmetry;
pub mod term;
mod text;
mod uncalled;
mod value;

pub use check::{Checked, OverrideError, Overrides, check};
pub use evaluate::TermEvaluator;
pub use names::element_name;

use symmetry::Symmetry;
use term::{Index, TermId, Terms};

/// A checked problem.
///
/// Unknowns are numbered in *slots*, 0-based, in the order of declaration, row-major within a family.
#[derive(Clone, Debug)]
pub struct Landscape {
    /// The title, if the file gives one.
    pub title: Option<String>,
    /// The unknown families in the order of declaration; a single unknown is a family without axes.
    pub unknowns: Vec<UnknownFamily>,
    /// For each slot, its bounds and the region that starts are drawn from.
    pub slots: Vec<Slot>,
    /// Constant tables of numbers, row-major.
    pub tables: Vec<Vec<f64>>,
    /// Constant tables of whole numbers, for indices that are not affine in the loop indices, and for conditions.
    pub lookups: Vec<Vec<i64>>,
    /// Let families, in an order in which each uses earlier ones only.
    pub families: Vec<StoredFamily>,
    /// All terms.
    pub terms: Terms,
    /// What is minimised. For a `maximise` problem this is already the negative of what stands in the file.
    pub objective: TermId,
    /// Whether the file says `maximise`.
    pub maximise: bool,
    /// Quantities to report with every minimum.
    pub shows: Vec<Show>,
    /// The promises of the file.
    pub symmetries: Vec<Symmetry>,
    /// Whether the objective has kinks (`abs`, `min`, `max`, `floor`, `sign`, `if` on unknowns).
    pub kinked: bool,
    /// An estimate of the operations of one value.
    pub work: u64,
}

/// A family of unknowns.
#[derive(Clone, Debug, PartialEq)]
pub struct UnknownFamily {
    /// Its name.
    pub name: String,
    /// Its axes; empty for a single unknown.
    pub axes: Vec<AxisRange>,
    /// The slot of its first element.
    pub first_slot: usize,
    /// How many slots it has.
    pub count: usize,
}

/// The range of an index of a family.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct AxisRange {
    /// The first index.
    pub first: i64,
    /// How many there are.
    pub count: usize,
}

/// One unknown.
#[derive(Clone, Debug, PartialEq)]
pub struct Slot {
    /// The lower bound; may be minus infinity.
    pub lower: f64,
    /// The upper bound; may be infinity.
    pub upper: f64,
    /// The lower end of the region that starts are drawn from; finite.
    pub start_lower: f64,
    /// The upper end of the region that starts are drawn from; finite, above `start_lower`.
    pub start_upper: f64,
    /// Whether the two bounds are the same place; then both are finite.
    pub cyclic: bool,
}

/// A let family: computed once per evaluation and stored.
#[derive(Clone, Debug, PartialEq)]
pub struct StoredFamily {
    /// Its name.
    pub name: String,
    /// How many elements are stored.
    pub count: usize,
    /// The loops that fill it, outermost first: loop number k binds level k.
    pub loops: Vec<(Index, Index)>,
    /// Where an element is stored, from the loop levels; each place is filled exactly once.
    pub place: Index,
    /// The element.
    pub body: TermId,
}

/// A quantity to report with every minimum.
#[derive(Clone, Debug, PartialEq)]
pub struct Show {
    /// Its name.
    pub name: String,
    /// Its axes; empty for a scalar.
    pub axes: Vec<AxisRange>,
    /// Its elements, row-major; each a term without free levels.
    pub elements: Vec<TermId>,
}
