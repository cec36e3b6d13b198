//! The integration tests, in reading order.

#![allow(clippy::unwrap_used, reason = "a test's helpers may fail like a test")]

/// A fresh folder and the real program.
mod folder;

/// Every module imports its own folder and lower floors only.
mod floors;

/// The commands: whole outputs, wrong input of every kind, exit statuses.
mod commands;
