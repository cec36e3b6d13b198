//! All that a survey tells, from the frequencies alone.

use super::accumulation::{CurvePoint, accumulation, new_basins};
use super::coverage::{Coverage, coverage, singleton_step};
use super::frequencies::Frequencies;
use super::interval::{Confidence, Interval};
use super::laws::{exponential_less_one, logarithm_of_one_plus};
use super::posterior::{Posterior, posterior};
use super::proportion::exact_interval;
use super::richness::{Richness, richness};
use crate::numbers::functions::logarithm;

/// What further starts are expected to find.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Prospect {
    /// Further starts.
    pub starts: u64,
    /// The chance that at least one of them finds a new basin: `1 - C^N` with the estimated coverage C.
    ///
    /// Assumes what the coverage assumes, nothing of the sizes of the basins left. With the coverage uncertain it errs
    /// upwards (the power is convex); [`Prospect::interval`] says by how much it may.
    pub chance: f64,
    /// The chance at the two ends of the coverage's interval.
    pub interval: Interval,
    /// How many new basins they find in expectation: the extrapolated accumulation curve (Shen, Chao and Lin 2003; Colwell
    /// et al. 2012), which assumes the basins left equally likely to be found, and so errs downwards beyond about as many
    /// starts as the survey had. With one singleton and no doubleton it is 0, as is Chao's estimate, though the
    /// chance is not.
    pub expected: f64,
    /// The standard error of [`Prospect::expected`] as an estimate, propagated from the numbers of singletons and
    /// doubletons; what a single run of further starts finds scatters about it besides.
    pub standard_error: f64,
}

/// A basin's share of the start region.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Share {
    /// How often it was met.
    pub met: u64,
    /// The estimate: meetings over starts.
    pub share: f64,
    /// The exact interval of Clopper and Pearson (1934), for a basin named in advance.
    pub interval: Interval,
}

/// The figures of a survey, each with its method and assumption; see the types of the fields.
///
/// All assume that the starts are independent draws from one law over the start region (uniform, in a hunt) and that a
/// descent's end depends on its start alone.
///
/// ```
/// use thalweg::statistics::{Confidence, Frequencies, SurveyFigures, Unconverged};
/// let met = Frequencies::from_counts(&[61, 30, 5, 2, 1, 1], 0, Unconverged::SetAside)?;
/// let figures = SurveyFigures::new(met, Confidence::NINETY_FIVE);
/// let coverage = figures.coverage.unwrap();
/// assert_eq!(coverage.turing, 0.98);
/// let next = figures.prospect(1).unwrap();
/// assert!((next.chance - (1.0 - coverage.improved)).abs() < 1e-15);
/// # Ok::<(), thalweg::statistics::StatisticsError>(())
/// ```
#[derive(Clone, Debug, PartialEq)]
pub struct SurveyFigures {
    /// What the survey met.
    pub met: Frequencies,
    /// The confidence of every interval.
    pub confidence: Confidence,
    /// The covered share; none without starts.
    pub coverage: Option<Coverage>,
    /// Chao's estimate of the number of basins; none without starts.
    pub richness: Option<Richness>,
    /// The Bayesian expectations.
    pub posterior: Posterior,
}

impl SurveyFigures {
    /// The figures.
    pub fn new(met: Frequencies, confidence: Confidence) -> Self {
        SurveyFigures {
            coverage: coverage(&met, confidence),
            richness: richness(&met, confidence),
            posterior: posterior(&met),
            met,
            confidence,
        }
    }

    /// The accumulation curve at so many starts, below or beyond the survey's own; none without starts.
    pub fn curve(&self, starts: u64) -> Option<CurvePoint> {
        accumulation(&self.met, starts, self.confidence)
    }

    /// What so many further starts are expected to find; none without starts.
    pub fn prospect(&self, further: u64) -> Option<Prospect> {
        let coverage = self.coverage?;
        let chance = |covered: f64| {
            if further == 0 {
                0.0
            } else if covered <= 0.0 {
                1.0
            } else {
                // A sum with 0, since no chance is -0.
                0.0 - exponential_less_one(further as f64 * logarithm_of_one_plus(covered - 1.0))
            }
        };
        let interval = Interval { low: chance(coverage.interval.high), high: chance(coverage.interval.low) };
        let (expected, standard_error) = new_basins(&self.met, further);
        Some(Prospect { starts: further, chance: chance(coverage.improved), interval, expected, standard_error })
    }

    /// How many starts in all it would take for the expected coverage to reach this share, by the extrapolated curve (Chao and
    /// Jost 2012): the survey's own where it has that coverage already; none without starts, and where the curve never
    /// gets there (a share of 1 with any singleton; any higher share with one singleton and no doubleton).
    ///
    /// Assumes the basins left equally likely to be found; far beyond the survey's size it errs downwards.
    ///
    /// ```
    /// use thalweg::statistics::{Confidence, Frequencies, SurveyFigures, Unconverged};
    /// let met = Frequencies::from_counts(&[61, 30, 5, 2, 1, 1], 0, Unconverged::SetAside)?;
    /// let figures = SurveyFigures::new(met, Confidence::NINETY_FIVE);
    /// let needed = figures.starts_for(0.99).unwrap();
    /// assert!(figures.curve(needed).unwrap().coverage >= 0.99 && figures.curve(needed - 1).unwrap().coverage < 0.99);
    /// # Ok::<(), thalweg::statistics::StatisticsError>(())
    /// ```
    pub fn starts_for(&self, share: f64) -> Option<u64> {
        let covered = self.coverage?.improved;
        let starts = self.met.starts();
        if share <= covered {
            return Some(starts);
        }
        let step = singleton_step(&self.met);
        if !(share < 1.0) || step == 0.0 {
            return None;
        }
        let further =
            if step < 1.0 { logarithm((1.0 - share) / (1.0 - covered)) / logarithm_of_one_plus(-step) } else { 1.0 };
        starts.checked_add(further.ceil() as u64)
    }

    /// The share of a basin that so many of the starts met; none where the survey has fewer starts, or none.
    pub fn share(&self, met: u64) -> Option<Share> {
        let starts = self.met.starts();
        if starts == 0 {
            return None;
        }
        let interval = exact_interval(met, starts, self.confidence).ok()?;
        Some(Share { met, share: met as f64 / starts as f64, interval })
    }
}
