//! The integration tests, in reading order.

/// What the others share: problems from text, hunts, published tables.
mod support;

/// The elementary functions against a table of exact values.
mod functions;

/// The compiled kernel against independent ways to the same numbers.
mod kernel;

/// Descents and confirmations on compiled landscapes.
mod descents;
