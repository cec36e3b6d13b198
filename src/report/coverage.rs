//! What the survey of a run tells, as a file says it.

use serde::{Deserialize, Serialize};

use crate::ledger::Ledger;
use crate::search::Heuristic;
use crate::statistics::{Confidence, Frequencies, Interval, SurveyFigures, Unconverged};

/// The confidence of every interval.
const CONFIDENCE: f64 = 0.95;
/// Points of the accumulation curve up to the survey's size, and as many beyond it.
const CURVE: u64 = 24;
/// Basins whose shares are listed at most.
const LISTED: usize = 50;
/// The share that [`Coverage::starts_for_99`] speaks of.
const GOAL: f64 = 0.99;

/// What is known of how much was not met. Every figure rests on the survey alone: descents from independent starts, uniform
/// in the start region, of which those that did not converge are set aside.
///
/// None of them can say that the lowest value met is the lowest there is: basins too small for the survey are exactly what
/// it cannot see.
#[derive(Clone, Debug, Default, PartialEq, Serialize, Deserialize)]
pub struct Coverage {
    /// Counts of the survey.
    pub survey: SurveyCounts,
    /// The confidence of all intervals, 0.95.
    pub confidence: f64,
    /// The share of the start region whose basins the survey has met. Missing without a survey, as are all below.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub covered: Option<Covered>,
    /// The number of basins, from below.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub basins: Option<Basins>,
    /// The Bayesian expectations.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub expected: Option<Expected>,
    /// What one further start, ten, and as many as there were would find.
    #[serde(default, skip_serializing_if = "Vec::is_empty")]
    pub next: Vec<Next>,
    /// How many starts in all it would take for an expected coverage of 0.99, by the extrapolated curve; missing where that
    /// has no answer.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub starts_for_99: Option<u64>,
    /// The share of the start region that drains to the lowest minimum.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub lowest: Option<BasinShare>,
    /// The largest basins, largest first, 50 at most.
    #[serde(default, skip_serializing_if = "Vec::is_empty")]
    pub shares: Vec<BasinShare>,
    /// The accumulation curve: rarefied up to the survey's size, extrapolated to twice as many starts.
    #[serde(default, skip_serializing_if = "Vec::is_empty")]
    pub curve: Vec<CurvePoint>,
}

/// Counts of the survey.
#[derive(Clone, Debug, Default, PartialEq, Serialize, Deserialize)]
pub struct SurveyCounts {
    /// Descents that ended in a minimum.
    pub descents: u64,
    /// Descents that did not.
    pub failed: u64,
    /// Distinct minima that they ended in.
    pub distinct: u64,
    /// Those of them that the survey met exactly once.
    pub met_once: u64,
    /// Those that it met exactly twice.
    pub met_twice: u64,
}

/// An interval of the stated confidence.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub struct Between {
    /// The lower end.
    pub low: f64,
    /// The upper end.
    pub high: f64,
}

impl From<Interval> for Between {
    fn from(interval: Interval) -> Self {
        Between { low: interval.low, high: interval.high }
    }
}

/// The covered share.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Covered {
    /// By Chao and Jost (2012).
    pub share: f64,
    /// By Turing (Good 1953): one less the share of starts that met a basin nobody else met.
    pub turing: f64,
    /// The interval.
    pub interval: Between,
}

/// The number of basins.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Basins {
    /// By Chao (1984): a lower bound, near the truth where the basins not met are about as small as those met once.
    pub at_least: f64,
    /// The log-normal interval of that bound (Chao 1987).
    pub interval: Between,
}

/// The expectations of Boender and Rinnooy Kan (1987), for whom every number of basins and every vector of shares was
/// equally likely before the survey.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Expected {
    /// The number of basins.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub basins: Option<f64>,
    /// The covered share.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub covered: Option<f64>,
    /// The chance that every basin has been met.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub all_met: Option<f64>,
}

/// What further starts would find.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Next {
    /// Further starts.
    pub starts: u64,
    /// The chance that one of them meets a basin that the survey has not met.
    pub chance: f64,
    /// The chance at the ends of the coverage's interval.
    pub interval: Between,
    /// How many new basins they would meet in expectation, by the extrapolated curve.
    pub expected: f64,
}

/// A basin's share of the start region.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct BasinShare {
    /// The rank of its minimum among the confirmed ones, from 1; missing for one that is not confirmed.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub rank: Option<usize>,
    /// How many descents of the survey ended there.
    pub descents: u64,
    /// That share.
    pub share: f64,
    /// The exact interval (Clopper and Pearson 1934), for one basin named in advance.
    pub interval: Between,
}

/// A point of the accumulation curve.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct CurvePoint {
    /// Starts.
    pub starts: u64,
    /// Distinct basins expected from them (Hurlbert 1971; Colwell et al. 2012).
    pub basins: f64,
    /// The band.
    pub interval: Between,
}

/// The figures of a survey of which `descents` descents have ended.
pub fn coverage(ledger: &Ledger, descents: u64) -> Coverage {
    let survey = Heuristic::Survey.number();
    let pairs: Vec<(u64, u64)> = ledger.frequencies(survey).into_iter().collect();
    let converged: u64 = pairs.iter().map(|(hits, entries)| hits * entries).sum();
    let (Ok(met), Ok(confidence)) = (
        Frequencies::from_pairs(&pairs, descents.saturating_sub(converged), Unconverged::SetAside),
        Confidence::new(CONFIDENCE),
    ) else {
        return Coverage::default();
    };
    let figures = SurveyFigures::new(met, confidence);
    let met = &figures.met;
    let counts = SurveyCounts {
        descents: met.starts(),
        failed: met.failed(),
        distinct: met.basins(),
        met_once: met.met_exactly(1),
        met_twice: met.met_exactly(2),
    };
    if met.starts() == 0 {
        return Coverage { survey: counts, confidence: CONFIDENCE, ..Coverage::default() };
    }
    let mut shares: Vec<(u64, Option<usize>)> = Vec::new();
    let mut rank = 0;
    let mut lowest = None;
    for entry in ledger.entries() {
        let confirmed = entry.kind().is_some();
        rank += usize::from(confirmed);
        let own_rank = confirmed.then_some(rank);
        if confirmed && lowest.is_none() {
            lowest = Some((entry.hits(survey), own_rank));
        }
        if entry.hits(survey) > 0 {
            shares.push((entry.hits(survey), own_rank));
        }
    }
    shares.sort_by_key(|&(hits, _)| std::cmp::Reverse(hits));
    let basin_share = |(hits, rank): (u64, Option<usize>)| {
        let share = figures.share(hits)?;
        Some(BasinShare { rank, descents: hits, share: share.share, interval: share.interval.into() })
    };
    let next = |starts| {
        let prospect = figures.prospect(starts)?;
        let interval = prospect.interval.into();
        Some(Next { starts, chance: prospect.chance, interval, expected: prospect.expected })
    };
    let n = met.starts();
    let mut further = vec![1, 10, n];
    further.sort_unstable();
    further.dedup();
    Coverage {
        confidence: CONFIDENCE,
        covered: figures.coverage.map(|covered| Covered {
            share: covered.improved,
            turing: covered.turing,
            interval: covered.interval.into(),
        }),
        basins: figures
            .richness
            .map(|richness| Basins { at_least: richness.basins, interval: richness.interval.into() }),
        expected: Some(Expected {
            basins: figures.posterior.expected_basins,
            covered: figures.posterior.expected_coverage,
            all_met: figures.posterior.all_met,
        }),
        next: further.into_iter().filter_map(next).collect(),
        starts_for_99: figures.starts_for(GOAL),
        lowest: lowest.and_then(basin_share),
        shares: shares.into_iter().take(LISTED).filter_map(basin_share).collect(),
        curve: curve_starts(n)
            .filter_map(|starts| figures.curve(starts))
            .map(|point| CurvePoint { starts: point.starts, basins: point.basins, interval: point.interval.into() })
            .collect(),
        survey: counts,
    }
}

/// Where the curve is told: evenly up to the survey's size, and as far again.
fn curve_starts(n: u64) -> impl Iterator<Item = u64> {
    let step = n.div_ceil(CURVE).max(1);
    let below = (1..).map(move |k| k * step).take_while(move |&starts| starts < n);
    below.chain([n]).chain((1..).map(move |k| n + k * step).take_while(move |&starts| starts < 2 * n)).chain([2 * n])
}

/// Whether every number can be written.
pub(super) fn is_finite(coverage: &Coverage) -> bool {
    let between = |interval: &Between| interval.low.is_finite() && interval.high.is_finite();
    let share = |share: &BasinShare| share.share.is_finite() && between(&share.interval);
    coverage.covered.as_ref().is_none_or(|covered| covered.share.is_finite() && between(&covered.interval))
        && coverage.basins.as_ref().is_none_or(|basins| basins.at_least.is_finite() && between(&basins.interval))
        && coverage.next.iter().all(|next| next.chance.is_finite() && next.expected.is_finite())
        && coverage.lowest.iter().chain(&coverage.shares).all(share)
        && coverage.curve.iter().all(|point| point.basins.is_finite() && between(&point.interval))
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_curve_is_told_at_rising_numbers_of_starts() {
        for n in [1, 2, 23, 24, 25, 1000, 123_457] {
            let starts: Vec<u64> = curve_starts(n).collect();
            assert!(starts.is_sorted() && starts.contains(&n) && starts.last() == Some(&(2 * n)), "{starts:?}");
            assert!(starts.windows(2).all(|pair| pair[0] < pair[1]), "{starts:?}");
            assert!(starts.len() <= 2 * CURVE as usize + 2);
        }
    }
}
