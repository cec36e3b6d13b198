//! Statistics: what a survey of basins tells, and what trials of heuristics tell apart.
//!
//! Enters: counts, costs and values; random streams where a method draws. Leaves: estimates, intervals, chances.
//! Promised: pure functions, the same bits everywhere; every published method by author and year, with what it assumes;
//! no panic on degenerate input (nothing met, all met once, one basin, ties, nothing hit). Deliberately absent: words
//! for people (the reports have them), and everything that knows a landscape.
//!
//! [`SurveyFigures`] gathers what a survey tells; its parts stand alone too. Comparisons of trials: [`expected_cost`],
//! [`hit_distribution`], [`rank_sum`], [`log_rank`], [`friedman`], the profiles; [`adjust_chances`] where several tests are
//! made at once.

mod interval;
pub mod laws;

mod proportion;
mod quantiles;
mod ranks;
mod resampling;

mod accumulation;
mod coverage;
mod frequencies;
mod posterior;
mod richness;
mod survey;

mod friedman;
mod multiplicity;
mod profiles;
mod rank_sum;
mod survival;
mod trials;
mod trials_needed;

pub use accumulation::{CurvePoint, accumulation};
pub use coverage::{Coverage, coverage, coverage_interval};
pub use frequencies::{Frequencies, Unconverged};
pub use friedman::{ColumnPair, Friedman, friedman};
pub use interval::{Confidence, Interval, StatisticsError};
pub use multiplicity::adjust_chances;
pub use posterior::{Posterior, posterior};
pub use profiles::{Profile, data_profiles, performance_profiles};
pub use proportion::{exact_interval, score_interval};
pub use quantiles::quantiles;
pub use rank_sum::{NullLaw, RankSum, effect_interval, rank_sum, rank_sum_of_trials};
pub use ranks::midranks;
pub use richness::{Richness, richness};
pub use survey::{Prospect, Share, SurveyFigures};
pub use survival::{HitStep, LogRank, hit_distribution, log_rank};
pub use trials::{ExpectedCost, Grounds, Trial, expected_cost};
pub use trials_needed::trials_needed;

#[cfg(test)]
mod tests;
