//! thalweg hunts the lowest point of a rugged landscape and keeps every distinct minimum that it meets.

pub mod base;
pub mod descent;
pub mod evaluate;
pub mod kernel;
pub mod landscape;
pub mod language;
pub mod ledger;
pub mod numbers;
