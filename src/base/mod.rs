//! What every floor may lean on: random streams and a total order on floats.
//!
//! Enters: numbers and keys. Leaves: numbers. Promised: no state, no clock, no I/O; the same key gives the same
//! stream on every machine. Deliberately absent: errors (each part has its own), collections, anything that knows a
//! landscape.

pub mod order;
pub mod random;
