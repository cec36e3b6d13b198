//! The integration tests, in reading order.

/// A fresh folder and the real program.
mod folder;

/// Every module imports its own folder and lower floors only.
mod floors;

/// The commands: whole outputs, wrong input of every kind, exit statuses.
mod commands;
