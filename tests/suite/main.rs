//! The integration tests, in reading order.

/// What the others share: problems from text, hunts, published tables.
mod support;

/// The main job against published values.
mod published;
