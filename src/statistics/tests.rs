//! The survey's figures together: reference tables, degenerate surveys, properties; calibration stands apart.

mod calibration;
mod comparisons;

use std::path::{Path, PathBuf};

use proptest::prelude::*;

use super::*;

/// The path of a file in tests/data/statistics.
pub(super) fn data_path(name: &str) -> PathBuf {
    Path::new(env!("CARGO_MANIFEST_DIR")).join("tests/data/statistics").join(name)
}

/// A file of reference values.
pub(super) fn reference(name: &str) -> serde_json::Value {
    serde_json::from_str(&std::fs::read_to_string(data_path(name)).unwrap()).unwrap()
}

/// Demands that a table is the one on file (`BLESS=1` rewrites that) and that the developers' guide has it word for word.
#[track_caller]
pub(super) fn tabulated(name: &str, table: &str) {
    let path = data_path(name);
    if std::env::var_os("BLESS").is_some() {
        std::fs::write(&path, table).unwrap();
    }
    assert_eq!(table, std::fs::read_to_string(path).unwrap_or_default(), "BLESS=1 rewrites");
    let guide = std::fs::read_to_string(concat!(env!("CARGO_MANIFEST_DIR"), "/DEVELOPERS.md")).unwrap();
    assert!(guide.contains(table), "the guide has another table than\n{table}");
}

/// The rows of numbers of a text file of reference values.
pub(super) fn table(name: &str) -> Vec<Vec<f64>> {
    let text = std::fs::read_to_string(data_path(name)).unwrap();
    let rows: Vec<Vec<f64>> = text
        .lines()
        .filter(|line| !line.starts_with('#'))
        .map(|line| line.split_whitespace().map(|word| word.parse().unwrap()).collect())
        .collect();
    assert!(rows.len() >= 5, "{name} has rows");
    rows
}

/// An array of numbers.
pub(super) fn numbers(value: &serde_json::Value) -> Vec<f64> {
    value.as_array().unwrap().iter().map(|number| number.as_f64().unwrap()).collect()
}

/// The tables of counts: name, frequencies, expected values.
pub(super) fn tables() -> Vec<(String, Frequencies, serde_json::Value)> {
    let file = reference("frequency_tables.json");
    let tables = file["tables"].as_object().unwrap();
    assert_eq!(tables.len(), 13);
    let read = |(name, table): (&String, &serde_json::Value)| {
        let counts: Vec<u64> =
            table["counts"].as_array().unwrap().iter().map(|count| count.as_u64().unwrap()).collect();
        (name.clone(), set(&counts), table.clone())
    };
    tables.iter().map(read).collect()
}

/// Demands a value within a relative error (absolute below 1).
#[track_caller]
pub(super) fn close(value: f64, expected: &serde_json::Value, bound: f64, name: &str) {
    let expected = expected.as_f64().unwrap_or_else(|| panic!("{name}: no expected value, but {value}"));
    assert!((value - expected).abs() <= bound * expected.abs().max(1.0), "{name}: {value}, not {expected}");
}

fn set(counts: &[u64]) -> Frequencies {
    Frequencies::from_counts(counts, 0, Unconverged::SetAside).unwrap()
}

fn figures(counts: &[u64]) -> SurveyFigures {
    SurveyFigures::new(set(counts), Confidence::NINETY_FIVE)
}

#[test]
fn coverage_matches_the_reference() {
    for (name, met, table) in tables() {
        let coverage = coverage(&met, Confidence::NINETY_FIVE).unwrap();
        assert_eq!(met.starts(), table["n"].as_u64().unwrap());
        assert_eq!(met.basins(), table["S_obs"].as_u64().unwrap());
        close(coverage.turing, &table["good_turing_coverage_1_minus_f1_over_n"], 1e-15, &name);
        close(coverage.improved, &table["chao_jost_2012_coverage_f0_form"], 1e-14, &name);
        if let Some(published) = table.get("published") {
            // Hsieh, Ma & Chao (2016): four decimals.
            assert!((coverage.improved - published["SC"].as_f64().unwrap()).abs() < 5.1e-5, "{name}");
        }
    }
}

#[test]
fn nothing_met() {
    let figures = figures(&[]);
    assert_eq!((figures.coverage, figures.richness), (None, None));
    assert_eq!(figures.posterior.expected_basins, None);
    assert_eq!((figures.curve(10), figures.prospect(10), figures.share(0)), (None, None, None));
}

#[test]
fn one_start() {
    let figures = figures(&[1]);
    let coverage = figures.coverage.unwrap();
    assert_eq!((coverage.turing, coverage.improved), (0.0, 0.0));
    assert_eq!(coverage.interval, Interval { low: 0.0, high: 1.0 }, "one start says nothing");
    assert_eq!(figures.prospect(1).unwrap().chance, 1.0);
    assert_eq!(figures.richness.unwrap().basins, 1.0);
}

#[test]
fn one_basin() {
    let figures = figures(&[200]);
    let coverage = figures.coverage.unwrap();
    assert_eq!((coverage.turing, coverage.improved, coverage.interval.high), (1.0, 1.0, 1.0));
    // The exact bound for a basin that no start met: 1 - 0.025^(1/200).
    assert!((coverage.interval.low - 0.98172466).abs() < 1e-8, "{}", coverage.interval.low);
    let prospect = figures.prospect(100).unwrap();
    assert_eq!((prospect.chance, prospect.interval.low, prospect.expected), (0.0, 0.0, 0.0));
    assert!(prospect.interval.high > 0.8, "half as many starts again may well find what 200 missed");
    assert!(figures.richness.unwrap().interval.high < 1.001);
    assert!((figures.share(200).unwrap().interval.low - 0.98172466).abs() < 1e-8);
}

#[test]
fn all_singletons() {
    let figures = figures(&[1; 20]);
    let coverage = figures.coverage.unwrap();
    assert_eq!(coverage.turing, 0.0);
    assert!((coverage.improved - 2.0 / (19.0 * 19.0 + 2.0)).abs() < 1e-15);
    assert_eq!(coverage.interval.low, 0.0);
    assert!(0.2 < coverage.interval.high && coverage.interval.high < 0.5);
    assert_eq!(figures.posterior.expected_basins, None);
    let richness = figures.richness.unwrap();
    assert!((richness.basins - (20.0 + 0.95 * 190.0)).abs() < 1e-9 && richness.interval.low > 20.0);
}

#[test]
fn no_singletons() {
    let figures = figures(&[6, 5, 4, 2, 2]);
    let coverage = figures.coverage.unwrap();
    assert_eq!((coverage.turing, coverage.improved, coverage.interval.high), (1.0, 1.0, 1.0));
    assert!(coverage.interval.low < 1.0 - 3.69 / 19.0, "doubletons widen the interval");
    assert_eq!(figures.richness.unwrap().unseen, 0.0);
}

#[test]
fn prospects_agree_with_the_curve_and_the_coverage() {
    for (name, met, _) in tables() {
        let figures = SurveyFigures::new(met, Confidence::NINETY_FIVE);
        let coverage = figures.coverage.unwrap();
        let next = figures.prospect(1).unwrap();
        assert!((next.chance - (1.0 - coverage.improved)).abs() < 1e-14, "{name}");
        if figures.richness.unwrap().unseen > 0.0 {
            assert!((next.expected - next.chance).abs() < 1e-12, "{name}: one start finds one basin or none");
        }
        let mut last = figures.prospect(0).unwrap();
        assert_eq!((last.chance, last.expected, last.standard_error), (0.0, 0.0, 0.0));
        for further in [1, 2, 10, 100, 10_000, u64::MAX] {
            let prospect = figures.prospect(further).unwrap();
            assert!(prospect.interval.contains(prospect.chance), "{name}");
            assert!(prospect.chance >= last.chance && prospect.expected >= last.expected, "{name}");
            if further < u64::MAX {
                let curve = figures.curve(figures.met.starts() + further).unwrap();
                let gain = curve.basins - figures.met.basins() as f64;
                assert!((gain - prospect.expected).abs() < 1e-9, "{name}");
            }
            last = prospect;
        }
        let richness = figures.richness.unwrap();
        assert!((last.expected - richness.unseen).abs() < 1e-9, "{name}");
    }
}

#[test]
fn starts_for_a_coverage() {
    for (name, met, _) in tables() {
        let figures = SurveyFigures::new(met, Confidence::NINETY_FIVE);
        let covered = figures.coverage.unwrap().improved;
        assert_eq!(figures.starts_for(covered), Some(figures.met.starts()), "{name}");
        let share = 1.0 - 0.1 * (1.0 - covered);
        let needed = figures.starts_for(share).unwrap();
        assert!(figures.curve(needed).unwrap().coverage >= share - 1e-12, "{name}");
        assert!(needed == figures.met.starts() || figures.curve(needed - 1).unwrap().coverage < share, "{name}");
        assert_eq!(figures.starts_for(1.0).is_some(), covered == 1.0, "{name}");
    }
    assert_eq!(figures(&[5, 1]).starts_for(0.9), None, "one singleton and no doubleton: the curve is flat");
    assert_eq!(figures(&[]).starts_for(0.5), None);
    assert_eq!(figures(&[2, 1]).starts_for(f64::NAN), None);
}

#[test]
fn shares_sum_to_one() {
    let counts = [61, 30, 5, 2, 1, 1];
    let figures = figures(&counts);
    let shares: Vec<Share> = counts.iter().map(|&met| figures.share(met).unwrap()).collect();
    assert!((shares.iter().map(|share| share.share).sum::<f64>() - 1.0).abs() < 1e-15);
    assert!(shares.iter().all(|share| share.interval.contains(share.share)));
    assert_eq!(figures.share(101), None);
    assert_eq!(figures.share(0).unwrap().interval.low, 0.0);
}

proptest! {
    #[test]
    fn any_survey_gives_sound_figures(
        mut counts in prop::collection::vec(prop_oneof![3 => 0_u64..4, 2 => 0_u64..60, 1 => 0_u64..5000], 0..60),
        failed in 0_u64..5,
        level in prop_oneof![Just(0.01), Just(0.5), Just(0.8), Just(0.95), Just(0.999999)],
    ) {
        let confidence = Confidence::new(level).unwrap();
        for unconverged in [Unconverged::SetAside, Unconverged::OneBasin] {
            let met = Frequencies::from_counts(&counts, failed, unconverged).unwrap();
            let figures = SurveyFigures::new(met.clone(), confidence);
            counts.reverse();
            let again = Frequencies::from_counts(&counts, failed, unconverged).unwrap();
            prop_assert_eq!(&figures, &SurveyFigures::new(again, confidence));
            if met.starts() == 0 {
                prop_assert!(figures.coverage.is_none());
                continue;
            }
            let coverage = figures.coverage.unwrap();
            let Interval { low, high } = coverage.interval;
            prop_assert!(0.0 <= low && low <= coverage.turing && coverage.turing <= coverage.improved);
            prop_assert!(coverage.improved <= high && high <= 1.0);
            let richness = figures.richness.unwrap();
            prop_assert!(richness.variance >= -1e-9 && richness.unseen >= 0.0);
            prop_assert!(met.basins() as f64 <= richness.interval.low);
            prop_assert!(richness.interval.low <= richness.interval.high);
            prop_assert!(richness.unseen == 0.0 || richness.interval.contains(richness.basins));
            let here = figures.curve(met.starts()).unwrap();
            prop_assert!((here.basins - met.basins() as f64).abs() < 1e-9);
            for starts in [1, met.starts() / 2, met.starts() + 1, 3 * met.starts()] {
                let point = figures.curve(starts).unwrap();
                prop_assert!(point.interval.low <= point.basins + 1e-9 && point.basins <= point.interval.high + 1e-9);
                prop_assert!(-1e-12 <= point.coverage && point.coverage <= 1.0 + 1e-12);
                prop_assert!(point.standard_error.is_finite());
            }
            let posterior = figures.posterior;
            for share in [posterior.expected_coverage, posterior.all_met].into_iter().flatten() {
                prop_assert!(0.0 <= share && share <= 1.0);
            }
            if let Some(expected) = posterior.expected_basins {
                prop_assert!(expected >= met.basins() as f64);
            }
        }
    }
}
