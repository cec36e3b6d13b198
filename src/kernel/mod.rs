//! The compiled program and its executors.
//!
//! Enters: a [`crate::landscape::Landscape`]. Leaves: programs for value, gradient, curvature and shown quantities, and
//! executors that run them at K points at once. Promised: every executor gives the same bits, at every lane position
//! and width; a verified program never reads or writes out of range. Deliberately absent: counting, threads, and any
//! choice of points (see `evaluate`).
//!
//! The way: [`lower`] writes the value as a nest of loops; [`differentiate`] adds the gradient, [`tangent`] derivatives
//! along a direction; [`simplify`] shares, folds and hoists, `dead` removes what is left over, [`mod@fuse`] joins products
//! with sums, [`registers`] plans registers; [`mod@verify`] shows that the result is sound. [`mod@reference`] interprets plainly
//! over any number algebra, [`lanes`] fast.

mod activity;
mod amount;
mod clearing;
mod compile;
pub mod dead;
pub mod differentiate;
pub mod fuse;
pub mod lanes;
mod linear;
pub mod lower;
pub mod program;
#[cfg(test)]
mod random_landscapes;
mod ranges;
pub mod reference;
pub mod registers;
pub mod simplify;
pub mod tangent;
pub mod text;
pub mod verify;

pub use compile::{Kernel, KernelError, compile, finish};
pub use lanes::{Build, LaneMachine};
pub use program::{Program, Role};
pub use verify::{Verified, verify};
