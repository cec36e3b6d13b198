//! The integration tests, in reading order.

#![allow(clippy::unwrap_used, reason = "a test's helpers may fail like a test")]

/// What the others share: problems from text, hunts, published tables.
mod support;

/// The language from text to landscape.
mod language;

/// The elementary functions against a table of exact values.
mod functions;

/// The compiled kernel against independent ways to the same numbers.
mod kernel;

/// Descents and confirmations on compiled landscapes.
mod descents;

/// Same or distinct, under every kind of promise.
mod identity;

/// The main job against published values.
mod published;

/// Landscapes with a published lowest value.
mod landscapes;

/// The search: goals in evaluations, threads, shares, the survey.
mod search;

/// A fresh folder and the real program.
mod folder;

/// Every module imports its own folder and lower floors only.
mod floors;

/// The commands: whole outputs, wrong input of every kind, exit statuses.
mod commands;

/// Whole hunts by the real program.
mod hunts;

/// Hunts that are killed, starved of disk, edited and gone on with.
mod nights;
