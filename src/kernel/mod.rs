//! The compiled program and its executors.
//!
//! Enters: a [`crate::landscape::Landscape`]. Leaves: programs for value, gradient, curvature and shown quantities, and
//! executors that run them at K points at once. Promised: every executor gives the same bits, at every lane position
//! and width; a verified program never reads or writes out of range. Deliberately absent: counting, threads, and any
//! choice of points (see `evaluate`).

pub mod program;
