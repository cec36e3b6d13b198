//! Statistics: what a survey of basins tells, and what trials of heuristics tell apart.
//!
//! Enters: counts, costs and values; random streams where a method draws. Leaves: estimates, intervals, chances.
//! Promised: pure functions, the same bits everywhere; every published method by author and year, with what it assumes;
//! no panic on degenerate input (nothing met, all met once, one basin, ties, nothing hit). Deliberately absent: words
//! for people (the reports have them), and everything that knows a landscape.
//!
//! [`SurveyFigures`] gathers what a survey tells; its parts stand alone too.

mod interval;
pub mod laws;

mod proportion;

mod accumulation;
mod coverage;
mod frequencies;
mod posterior;
mod richness;
mod survey;

pub use accumulation::{CurvePoint, accumulation};
pub use coverage::{Coverage, coverage, coverage_interval};
pub use frequencies::{Frequencies, Unconverged};
pub use interval::{Confidence, Interval, StatisticsError};
pub use posterior::{Posterior, posterior};
pub use proportion::exact_interval;
pub use richness::{Richness, richness};
pub use survey::{Prospect, Share, SurveyFigures};

#[cfg(test)]
mod tests;
