//! `minima.json`: the ledger of a run as a file.

use std::collections::BTreeMap;
use std::fmt;

use serde::{Deserialize, Serialize};

use super::coverage::{self, Coverage};
use super::nested::Nested;

/// The name of the format in files.
const FORMAT: &str = "thalweg minima";
/// The version that this program writes; it reads no other.
const VERSION: u32 = 1;

/// The whole file: one object.
///
/// Numbers are written with as many digits as it takes to read back the same bits; none is ever infinite or not a
/// number.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct MinimaFile {
    /// What kind of file this is.
    pub format: Format,
    /// The problem.
    pub problem: Problem,
    /// The seed of the hunt.
    pub seed: u64,
    /// Evaluations spent.
    pub evaluations: u64,
    /// What the survey tells of how much was not met.
    pub coverage: Coverage,
    /// The distinct minima, lowest first; of a `maximise` problem, highest first.
    pub minima: Vec<Minimum>,
    /// Entries that were met and not confirmed yet; they are not among the minima.
    pub unconfirmed: u64,
    /// Pairs judged distinct, but within ten times a tolerance.
    pub near_twins: Vec<NearTwin>,
    /// Within what two minima are called the same.
    pub tolerances: Tolerances,
    /// What went wrong, counted.
    pub troubles: Troubles,
}

/// Name and version of the format.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Format {
    /// `thalweg minima`.
    pub name: String,
    /// 1.
    pub version: u32,
}

impl Default for Format {
    fn default() -> Self {
        Format { name: FORMAT.to_string(), version: VERSION }
    }
}

/// Which problem was hunted on.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Problem {
    /// The name of its file.
    pub name: String,
    /// Its title, if it has one.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub title: Option<String>,
    /// `minimise` or `maximise`.
    pub sense: String,
    /// The givens set on the command line.
    pub givens: BTreeMap<String, f64>,
    /// The SHA-256 of its text, in hexadecimal.
    pub digest: String,
    /// Where the indices of a family do not all begin at 1: where each of them begins. Shown families stand under `show`
    /// and their name.
    #[serde(default, skip_serializing_if = "BTreeMap::is_empty")]
    pub first_indices: BTreeMap<String, Vec<i64>>,
}

/// One distinct minimum.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Minimum {
    /// The objective as written: a maximum is not negated.
    pub value: f64,
    /// For each unknown family its value: a number, or arrays nested by index.
    pub at: BTreeMap<String, Nested>,
    /// `interior`, `bound`, `flat` (a stiffness of 0 beyond the declared motions) or `kinked`.
    pub kind: String,
    /// The eigenvalues of the second derivatives, ascending; those of declared rigid motions are exactly 0.
    pub stiffness: Vec<f64>,
    /// The relative displacement that would explain the remaining gradient.
    pub residual: f64,
    /// For each heuristic that met it, how often.
    pub hits: BTreeMap<String, u64>,
    /// Who met it first, and when.
    pub first: First,
    /// The shown quantities.
    pub shows: BTreeMap<String, Nested>,
    /// The unknowns that stand on a bound, by name.
    #[serde(default, skip_serializing_if = "Vec::is_empty")]
    pub active: Vec<String>,
}

/// A first meeting.
#[derive(Clone, Debug, PartialEq, Eq, Serialize, Deserialize)]
pub struct First {
    /// After how many evaluations of the hunt.
    pub evaluation: u64,
    /// In which round.
    pub round: u64,
    /// By whom.
    pub heuristic: String,
}

/// Two minima that are nearly the same.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct NearTwin {
    /// The rank of the one, from 1.
    pub first: usize,
    /// The rank of the other.
    pub second: usize,
    /// The difference of their values.
    pub value_difference: f64,
    /// The largest deviation of the best match, relative to the scale of each unknown.
    pub deviation: f64,
}

/// Tolerances of identity.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Tolerances {
    /// Of values, relative.
    pub value: f64,
    /// Of places, relative to the scale of each unknown.
    pub place: f64,
}

/// Things that went wrong, counted.
#[derive(Clone, Debug, Default, PartialEq, Serialize, Deserialize)]
pub struct Troubles {
    /// Evaluations at points outside the landscape.
    pub outside: u64,
    /// The first such point.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub first_outside: Option<BTreeMap<String, Nested>>,
    /// Starts outside the landscape.
    pub starts_outside: u64,
    /// Descents that ran out of their evaluations.
    pub out_of_budget: u64,
    /// Descents that stalled before the gradient vanished.
    pub stalled: u64,
    /// Descents that their heuristic abandoned because no value that it could use was in sight; no trouble, but no minimum.
    #[serde(default)]
    pub abandoned: u64,
    /// Converged points that could not be confirmed.
    pub not_confirmed: u64,
    /// Converged points that proved to be saddles.
    pub saddles: u64,
    /// Converged points in flat valleys.
    pub flat: u64,
}

/// Why a file was refused.
#[derive(Clone, Debug, PartialEq, Eq)]
pub enum FileError {
    /// It is not JSON of the documented form.
    Form(String),
    /// It is of another format or version.
    Format {
        /// The name that it gives.
        name: String,
        /// The version that it gives.
        version: u32,
    },
    /// A number that must be finite is not: a fault of the writer.
    NotFinite(&'static str),
}

impl fmt::Display for FileError {
    fn fmt(&self, out: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            FileError::Form(cause) => write!(out, "it is not a file of minima: {cause}"),
            FileError::Format { name, version } => {
                write!(out, "it is `{name}` version {version}; this program reads `{FORMAT}` version {VERSION}")
            }
            FileError::NotFinite(field) => write!(out, "a number of `{field}` is not finite"),
        }
    }
}

impl std::error::Error for FileError {}

/// The file as text.
///
/// # Errors
/// [`FileError::NotFinite`] for a number that JSON cannot say.
pub fn write_minima_file(file: &MinimaFile) -> Result<String, FileError> {
    demand_finite(file)?;
    let mut text = serde_json::to_string_pretty(file).map_err(|error| FileError::Form(error.to_string()))?;
    text.push('\n');
    Ok(text)
}

/// Reads a file.
///
/// # Errors
/// A [`FileError`] for anything but a file of this version with finite numbers.
pub fn read_minima_file(text: &str) -> Result<MinimaFile, FileError> {
    #[derive(Deserialize)]
    struct Head {
        format: Format,
    }
    let form = |error: serde_json::Error| FileError::Form(error.to_string());
    let head: Head = serde_json::from_str(text).map_err(form)?;
    if head.format != Format::default() {
        return Err(FileError::Format { name: head.format.name, version: head.format.version });
    }
    let file = serde_json::from_str(text).map_err(form)?;
    demand_finite(&file)?;
    Ok(file)
}

fn demand_finite(file: &MinimaFile) -> Result<(), FileError> {
    let demand = |field, finite: bool| if finite { Ok(()) } else { Err(FileError::NotFinite(field)) };
    let nested = |values: &BTreeMap<String, Nested>| values.values().all(|v| v.flat().iter().all(|x| x.is_finite()));
    for minimum in &file.minima {
        demand("value", minimum.value.is_finite())?;
        demand("at", nested(&minimum.at))?;
        demand("shows", nested(&minimum.shows))?;
        demand("stiffness", minimum.stiffness.iter().all(|x| x.is_finite()))?;
        demand("residual", minimum.residual.is_finite())?;
    }
    let twins = |t: &NearTwin| t.value_difference.is_finite() && t.deviation.is_finite();
    demand("coverage", coverage::is_finite(&file.coverage))?;
    demand("near_twins", file.near_twins.iter().all(twins))?;
    demand("tolerances", file.tolerances.value.is_finite() && file.tolerances.place.is_finite())?;
    demand("givens", file.problem.givens.values().all(|x| x.is_finite()))?;
    demand("first_outside", file.troubles.first_outside.as_ref().is_none_or(nested))
}

#[cfg(test)]
pub(super) mod tests {
    use super::super::nested::nest;
    use super::*;

    /// The figures of 40 descents, 39 of which met the lower of two minima: 0.975 by Turing, (n - w - 1)(n + w)/(n (n - 1))
    /// = 37 * 42/(40 * 39) by Boender and Rinnooy Kan.
    fn sample_coverage() -> Coverage {
        let between = |low, high| coverage::Between { low, high };
        let share = |rank, descents, share| coverage::BasinShare {
            rank: Some(rank),
            descents,
            share,
            interval: between(0.0, 1.0),
        };
        Coverage {
            survey: coverage::SurveyCounts { descents: 40, failed: 1, distinct: 2, met_once: 1, met_twice: 0 },
            confidence: 0.95,
            covered: Some(coverage::Covered { share: 0.975, turing: 0.975, interval: between(0.86, 0.999) }),
            basins: Some(coverage::Basins { at_least: 2.0, interval: between(2.0, 4.5) }),
            expected: Some(coverage::Expected {
                basins: Some(78.0 / 36.0),
                covered: Some(37.0 * 42.0 / 1560.0),
                all_met: None,
            }),
            next: vec![coverage::Next { starts: 1, chance: 0.025, interval: between(0.001, 0.14), expected: 0.025 }],
            starts_for_99: None,
            lowest: Some(share(1, 39, 0.975)),
            shares: vec![share(1, 39, 0.975), share(2, 1, 0.025)],
            curve: vec![coverage::CurvePoint { starts: 40, basins: 2.0, interval: between(1.0, 3.0) }],
        }
    }

    /// An invented file with two minima.
    pub(in super::super) fn sample() -> MinimaFile {
        let minimum = |value: f64, x: f64, hits: &[(&str, u64)]| Minimum {
            value,
            at: [("p".to_string(), nest(&[x, 0.1, -1e-300, 4.0], &[2, 2]))].into(),
            kind: "interior".to_string(),
            stiffness: vec![0.0, 2.5, 7.0],
            residual: 3e-15,
            hits: hits.iter().map(|&(name, count)| (name.to_string(), count)).collect(),
            first: First { evaluation: 1204, round: 3, heuristic: "hop".to_string() },
            shows: [("width".to_string(), Nested::Number(0.25))].into(),
            active: Vec::new(),
        };
        MinimaFile {
            format: Format::default(),
            problem: Problem {
                name: "pore.land".to_string(),
                title: Some("Atoms in a pore (invented)".to_string()),
                sense: "minimise".to_string(),
                givens: [("n".to_string(), 2.0)].into(),
                digest: "00".repeat(32),
                first_indices: BTreeMap::new(),
            },
            seed: 7,
            evaluations: 12_000,
            coverage: sample_coverage(),
            minima: vec![minimum(-1.0, 1.0 / 3.0, &[("hop", 5), ("survey", 39)]), minimum(-0.5, 2.0, &[("survey", 1)])],
            unconfirmed: 0,
            near_twins: vec![NearTwin { first: 1, second: 2, value_difference: 0.5, deviation: 0.25 }],
            tolerances: Tolerances { value: 1e-9, place: 1e-6 },
            troubles: Troubles { outside: 12, ..Troubles::default() },
        }
    }

    /// The documented form, written a second time by hand: a field that is added, dropped or renamed above fails here.
    mod mirror {
        use std::collections::BTreeMap;

        use serde::Deserialize;
        use serde_json::Value;

        #[derive(Deserialize)]
        #[serde(deny_unknown_fields)]
        pub(super) struct File {
            pub(super) format: Format,
            pub(super) problem: Problem,
            pub(super) seed: u64,
            pub(super) evaluations: u64,
            pub(super) coverage: Coverage,
            pub(super) minima: Vec<Minimum>,
            pub(super) unconfirmed: u64,
            pub(super) near_twins: Vec<BTreeMap<String, f64>>,
            pub(super) tolerances: BTreeMap<String, f64>,
            pub(super) troubles: BTreeMap<String, Value>,
        }

        #[derive(Deserialize)]
        #[serde(deny_unknown_fields)]
        pub(super) struct Format {
            pub(super) name: String,
            pub(super) version: u32,
        }

        #[derive(Deserialize)]
        #[serde(deny_unknown_fields)]
        pub(super) struct Problem {
            pub(super) name: String,
            pub(super) title: String,
            pub(super) sense: String,
            pub(super) givens: BTreeMap<String, f64>,
            pub(super) digest: String,
        }

        #[derive(Deserialize)]
        #[serde(deny_unknown_fields)]
        pub(super) struct Coverage {
            pub(super) survey: BTreeMap<String, u64>,
            pub(super) confidence: f64,
            pub(super) covered: Covered,
            pub(super) basins: Basins,
            pub(super) expected: BTreeMap<String, f64>,
            pub(super) next: Vec<Next>,
            pub(super) lowest: Share,
            pub(super) shares: Vec<Share>,
            pub(super) curve: Vec<Point>,
        }

        #[derive(Deserialize)]
        #[serde(deny_unknown_fields)]
        pub(super) struct Between {
            pub(super) low: f64,
            pub(super) high: f64,
        }

        #[derive(Deserialize)]
        #[serde(deny_unknown_fields)]
        pub(super) struct Covered {
            pub(super) share: f64,
            pub(super) turing: f64,
            pub(super) interval: Between,
        }

        #[derive(Deserialize)]
        #[serde(deny_unknown_fields)]
        pub(super) struct Basins {
            pub(super) at_least: f64,
            pub(super) interval: Between,
        }

        #[derive(Deserialize)]
        #[serde(deny_unknown_fields)]
        pub(super) struct Next {
            pub(super) starts: u64,
            pub(super) chance: f64,
            pub(super) interval: Between,
            pub(super) expected: f64,
        }

        #[derive(Deserialize)]
        #[serde(deny_unknown_fields)]
        pub(super) struct Share {
            pub(super) rank: usize,
            pub(super) descents: u64,
            pub(super) share: f64,
            pub(super) interval: Between,
        }

        #[derive(Deserialize)]
        #[serde(deny_unknown_fields)]
        pub(super) struct Point {
            pub(super) starts: u64,
            pub(super) basins: f64,
            pub(super) interval: Between,
        }

        #[derive(Deserialize)]
        #[serde(deny_unknown_fields)]
        pub(super) struct Minimum {
            pub(super) value: f64,
            pub(super) at: BTreeMap<String, Value>,
            pub(super) kind: String,
            pub(super) stiffness: Vec<f64>,
            pub(super) residual: f64,
            pub(super) hits: BTreeMap<String, u64>,
            pub(super) first: First,
            pub(super) shows: BTreeMap<String, Value>,
        }

        #[derive(Deserialize)]
        #[serde(deny_unknown_fields)]
        pub(super) struct First {
            pub(super) evaluation: u64,
            pub(super) round: u64,
            pub(super) heuristic: String,
        }
    }

    #[test]
    fn the_form_is_the_documented_one() {
        let text = write_minima_file(&sample()).unwrap();
        let file: mirror::File = serde_json::from_str(&text).unwrap();
        assert_eq!((file.format.name.as_str(), file.format.version), ("thalweg minima", 1));
        assert_eq!((file.problem.name.as_str(), file.problem.sense.as_str()), ("pore.land", "minimise"));
        assert!(file.problem.title.contains("pore") && file.problem.digest.len() == 64);
        assert_eq!((file.problem.givens["n"], file.seed, file.evaluations), (2.0, 7, 12_000));
        let coverage = &file.coverage;
        let survey = |name: &str| coverage.survey[name];
        assert_eq!((survey("descents"), survey("failed"), survey("distinct"), survey("met_once")), (40, 1, 2, 1));
        assert_eq!((survey("met_twice"), coverage.survey.len(), coverage.confidence), (0, 5, 0.95));
        let covered = &coverage.covered;
        assert_eq!((covered.share, covered.turing, covered.interval.low), (0.975, 0.975, 0.86));
        assert_eq!((coverage.basins.at_least, coverage.basins.interval.high), (2.0, 4.5));
        assert!(coverage.expected.contains_key("basins") && coverage.expected.contains_key("covered"));
        let next = &coverage.next[0];
        assert_eq!((next.starts, next.chance, next.expected, next.interval.high), (1, 0.025, 0.025, 0.14));
        assert_eq!((coverage.lowest.rank, coverage.lowest.descents, coverage.lowest.share), (1, 39, 0.975));
        assert_eq!((coverage.shares[1].rank, coverage.shares[1].interval.low), (2, 0.0));
        let point = &coverage.curve[0];
        assert_eq!((point.starts, point.basins, point.interval.low), (40, 2.0, 1.0));
        let lowest = &file.minima[0];
        assert_eq!((lowest.value, lowest.kind.as_str(), lowest.residual), (-1.0, "interior", 3e-15));
        assert_eq!((lowest.stiffness.len(), lowest.hits["hop"], lowest.first.evaluation), (3, 5, 1204));
        assert_eq!((lowest.first.round, lowest.first.heuristic.as_str()), (3, "hop"));
        assert!(lowest.at["p"].is_array() && lowest.shows["width"].is_number());
        assert_eq!((file.near_twins[0]["first"], file.near_twins[0]["deviation"]), (1.0, 0.25));
        assert_eq!((file.tolerances["value"], file.tolerances["place"]), (1e-9, 1e-6));
        assert_eq!((file.troubles["outside"].as_u64(), file.unconfirmed), (Some(12), 0));
    }

    #[test]
    fn numbers_read_back_to_the_same_bits() {
        let mut file = sample();
        let hard = [0.1, -0.0, 5e-324, f64::MAX, 1.0 / 3.0, 1e22, 9_007_199_254_740_993.0, -44.326_801_4];
        file.minima[0].stiffness = hard.to_vec();
        let back = read_minima_file(&write_minima_file(&file).unwrap()).unwrap();
        let bits = |numbers: &[f64]| numbers.iter().map(|x| x.to_bits()).collect::<Vec<_>>();
        assert_eq!(bits(&back.minima[0].stiffness), bits(&hard));
        assert_eq!(back, file);
    }

    #[test]
    fn what_is_not_such_a_file_is_refused() {
        let text = write_minima_file(&sample()).unwrap();
        let other = text.replace("\"version\": 1", "\"version\": 2");
        assert!(matches!(read_minima_file(&other), Err(FileError::Format { version: 2, .. })));
        assert!(matches!(read_minima_file(&text[..text.len() / 2]), Err(FileError::Form(_))));
        let mut file = sample();
        file.minima[1].residual = f64::NAN;
        assert_eq!(write_minima_file(&file), Err(FileError::NotFinite("residual")));
    }
}
