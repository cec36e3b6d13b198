//! From asked points to values: packs the points of many searches into lanes.
//!
//! Enters: a compiled landscape and points. Leaves: values, gradients, curvatures, shown quantities; verdicts on the
//! promises and gradients of a problem. Promised: a point's bits do not depend on its lane, its company or the machine.
//! Deliberately absent: any choice of points to search at, counting (the asker knows what it asked), and threads (each
//! thread owns an [`Evaluator`]).

mod evaluator;
mod gradients;
mod promises;

pub use evaluator::{Evaluator, MAX_LANES};
pub use gradients::{GradientCheck, check_gradient};
pub use promises::{BrokenPromise, Suggestion, suggest_symmetries, test_promises};
