//! What the survey tells, in words.

use super::coverage::{BasinShare, Between, Coverage};
use super::table::{counted, grouped};

/// A paragraph, each figure with what it assumes. `word` is `lowest`, or `highest` for a maximum.
pub(super) fn coverage_text(coverage: &Coverage, word: &str) -> String {
    let survey = &coverage.survey;
    if survey.descents == 0 {
        return "Survey: none, so nothing can be said about what was not met.\n".to_string();
    }
    let mut out = format!(
        "Survey: {} from independent uniform starts met {}, {} of them once.\n",
        counted(survey.descents, "descent", "descents"),
        counted(survey.distinct, "distinct minimum", "distinct minima"),
        grouped(survey.met_once)
    );
    if survey.failed > 0 {
        out.push_str(&format!(
            "  {} more led to no minimum; the figures speak of the rest of the start region.\n",
            grouped(survey.failed)
        ));
    }
    if let Some(covered) = &coverage.covered {
        out.push_str(&format!(
            "  Covered: {} of the start region drains to minima that the survey met ({}; assumes nothing of the basins' sizes).\n",
            percent(covered.share),
            between_percent(&covered.interval)
        ));
    }
    if let Some(next) = coverage.next.first() {
        out.push_str(&format!(
            "  A further start meets a new one with chance {} ({} to {})",
            chance(next.chance),
            chance(next.interval.low),
            chance(next.interval.high)
        ));
        if let Some(more) = coverage.next.last().filter(|more| more.starts > 1 && more.expected >= next.chance) {
            // The curve knows less than the chance where hardly anything was met twice: then it is not told.
            out.push_str(&format!(
                "; {} further starts would add about {}",
                grouped(more.starts),
                number(more.expected)
            ));
        }
        out.push_str(".\n");
    }
    if let Some(basins) = &coverage.basins {
        out.push_str(&format!(
            "  Basins: at least about {} ({} to {}; a lower bound, far too low where very many are tiny).\n",
            number(basins.at_least),
            number(basins.interval.low),
            number(basins.interval.high)
        ));
    }
    if let Some(expected) = &coverage.expected
        && let (Some(basins), Some(covered)) = (expected.basins, expected.covered)
    {
        out.push_str(&format!(
            "  If all basin sizes were equally likely beforehand (Boender and Rinnooy Kan): {} basins, {} covered.\n",
            number(basins),
            percent(covered)
        ));
    }
    if let Some(lowest) = &coverage.lowest {
        out.push_str(&lowest_text(lowest, word));
    }
    out.push_str("  Basins too small for the survey are what it cannot see: no figure here proves a value the ");
    out.push_str(&format!("{word} there is.\n"));
    out
}

fn lowest_text(lowest: &BasinShare, word: &str) -> String {
    if lowest.descents == 0 {
        return format!(
            "  The basin of the {word}: not met by the survey, so below {} of the start region.\n",
            percent(lowest.interval.high)
        );
    }
    format!(
        "  The basin of the {word}: {} of the start region ({}; exact for a basin named in advance).\n",
        percent(lowest.share),
        between_percent(&lowest.interval)
    )
}

fn between_percent(interval: &Between) -> String {
    format!("{} to {}", percent(interval.low), percent(interval.high))
}

/// Four digits near the ends, where they tell something.
fn percent(share: f64) -> String {
    let percent = 100.0 * share;
    let digits = if percent < 1.0 || percent > 99.0 { 3 } else { 1 };
    // Never rounded to a certainty that is none.
    if share > 0.0 && share < 1.0 {
        let text = format!("{percent:.digits$}");
        if text.parse::<f64>() == Ok(100.0) {
            return "above 99.999 %".to_string();
        }
        if text.parse::<f64>() == Ok(0.0) {
            return "below 0.001 %".to_string();
        }
        return format!("{text} %");
    }
    format!("{percent:.0} %")
}

fn chance(chance: f64) -> String {
    match chance {
        chance if chance <= 0.0 => "0".to_string(),
        chance if chance < 1e-3 => format!("{chance:.1e}"),
        chance => format!("{chance:.3}"),
    }
}

fn number(x: f64) -> String {
    // No negative zero.
    if x < 99.5 { format!("{:.1}", x.max(0.0)) } else { grouped(x.round() as u64) }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn shares_are_never_rounded_to_certainty() {
        assert_eq!(percent(0.999_999_9), "above 99.999 %");
        assert_eq!(percent(1e-9), "below 0.001 %");
        assert_eq!([percent(1.0), percent(0.0), percent(0.5), percent(0.9934)], ["100 %", "0 %", "50.0 %", "99.340 %"]);
    }

    #[test]
    fn no_survey_says_so() {
        assert!(coverage_text(&Coverage::default(), "lowest").contains("nothing can be said"));
    }
}
