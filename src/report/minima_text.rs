//! The distinct minima of a run, for a terminal.

use std::collections::BTreeMap;

use super::coverage_text::coverage_text;
use super::minima_file::{MinimaFile, Minimum, Troubles};
use super::table::{Align, Table, counted, grouped, plain};

/// What `minima` shows: at most `most` minima, in lines of at most `width` characters.
pub fn minima_text(file: &MinimaFile, most: usize, width: usize) -> String {
    let mut out = String::new();
    if let Some(title) = &file.problem.title {
        out.push_str(&format!("{}\n", plain(title)));
    }
    let givens: Vec<String> = file.problem.givens.iter().map(|(name, value)| format!("{name} = {value}")).collect();
    let givens = if givens.is_empty() { String::new() } else { format!(" with {}", givens.join(", ")) };
    out.push_str(&format!(
        "{}{givens}: {} after {} evaluations, seed {}\n",
        plain(&file.problem.name),
        counted(file.minima.len() as u64, "distinct minimum", "distinct minima"),
        grouped(file.evaluations),
        file.seed
    ));
    let Some(lowest) = file.minima.first() else {
        out.push_str("No minimum was confirmed.\n");
        out.push_str(&troubles_text(&file.troubles, file.evaluations));
        return out;
    };
    let word = if file.problem.sense == "maximise" { "highest" } else { "lowest" };
    out.push_str(&format!("{word} value met: {}\n\n", lowest.value));
    out.push_str(&minima_table(file, lowest, word, most).draw(width));
    if file.minima.len() > most {
        out.push_str(&format!("  … and {} more\n", file.minima.len() - most));
    }
    if file.unconfirmed > 0 {
        out.push_str(&format!("  {} more were met and not confirmed\n", grouped(file.unconfirmed)));
    }
    out.push('\n');
    out.push_str(&coverage_text(&file.coverage, word));
    out.push_str(&twins_text(file));
    out.push_str(&troubles_text(&file.troubles, file.evaluations));
    out.push_str(&format!(
        "Tolerances: two minima are the same within {:e} in value (relative) and {:e} in place (of each unknown's scale).\n",
        file.tolerances.value, file.tolerances.place
    ));
    out
}

fn minima_table(file: &MinimaFile, lowest: &Minimum, word: &str, most: usize) -> Table {
    let above = format!("from {word}");
    let heads = [
        ("rank", Align::Right),
        ("value", Align::Right),
        (above.as_str(), Align::Right),
        ("kind", Align::Left),
        ("softest", Align::Right),
        ("first met", Align::Left),
        ("hits", Align::Left),
    ];
    let mut table = Table::new(&heads);
    for (number, minimum) in file.minima.iter().take(most).enumerate() {
        let softest = minimum.stiffness.iter().find(|&&stiffness| stiffness != 0.0);
        table.add(vec![
            (number + 1).to_string(),
            format!("{:.9}", minimum.value),
            format!("{:.3e}", (minimum.value - lowest.value).abs()),
            minimum.kind.clone(),
            softest.map(|stiffness| format!("{stiffness:.3e}")).unwrap_or_default(),
            format!("{} by {}", grouped(minimum.first.evaluation), minimum.first.heuristic),
            hits(&minimum.hits),
        ]);
    }
    table
}

fn hits(hits: &BTreeMap<String, u64>) -> String {
    let parts: Vec<String> = hits.iter().map(|(name, count)| format!("{name} {}", grouped(*count))).collect();
    parts.join(", ")
}

fn twins_text(file: &MinimaFile) -> String {
    if file.near_twins.is_empty() {
        return String::new();
    }
    let mut out = "Near twins, judged distinct but within ten times a tolerance:\n".to_string();
    for twin in &file.near_twins {
        out.push_str(&format!(
            "  {} and {}: values differ by {:.2e}, places by {:.2e}\n",
            twin.first, twin.second, twin.value_difference, twin.deviation
        ));
    }
    out
}

fn troubles_text(troubles: &Troubles, evaluations: u64) -> String {
    let mut out = String::new();
    if troubles.outside > 0 {
        let share = 100.0 * troubles.outside as f64 / (evaluations.max(1) as f64);
        out.push_str(&format!("Outside the landscape (no finite value): {share:.2} % of evaluations"));
        if let Some(at) = &troubles.first_outside {
            let text = serde_json::to_string(at).unwrap_or_default();
            let cut: String = text.chars().take(200).collect();
            let more = if cut.len() < text.len() { "…" } else { "" };
            out.push_str(&format!(", first at {}{more}", plain(&cut)));
        }
        out.push('\n');
    }
    for (count, what) in [
        (troubles.starts_outside, "began outside the landscape"),
        (troubles.out_of_budget, "ran out of their evaluations"),
        (troubles.stalled, "stalled before the gradient vanished"),
        (troubles.abandoned, "were abandoned, with nothing useful in sight"),
        (troubles.not_confirmed, "ended in points that could not be confirmed"),
        (troubles.flat, "ended in flat valleys"),
    ] {
        if count > 0 {
            out.push_str(&format!("Descents that {what}: {}\n", grouped(count)));
        }
    }
    out
}

#[cfg(test)]
mod tests {
    use super::super::minima_file::tests::sample;
    use super::*;

    #[test]
    fn the_whole_screen() {
        assert_eq!(
            minima_text(&sample(), 1, 100),
            "Atoms in a pore (invented)
pore.land with n = 2: 2 distinct minima after 12 000 evaluations, seed 7
lowest value met: -1

  rank          value   from lowest   kind       softest   first met      hits
     1   -1.000000000       0.000e0   interior   2.500e0   1 204 by hop   hop 5, survey 39
  … and 1 more

Survey: 40 descents from independent uniform starts met 2 distinct minima, 1 of them once.
  1 more led to no minimum; the figures speak of the rest of the start region.
  Covered: 97.5 % of the start region drains to minima that the survey met (86.0 % to 99.900 %; assumes nothing of the basins' sizes).
  A further start meets a new one with chance 0.025 (0.001 to 0.140).
  Basins: at least about 2.0 (2.0 to 4.5; a lower bound, far too low where very many are tiny).
  If all basin sizes were equally likely beforehand (Boender and Rinnooy Kan): 2.2 basins, 99.615 % covered.
  The basin of the lowest: 97.5 % of the start region (0 % to 100 %; exact for a basin named in advance).
  Basins too small for the survey are what it cannot see: no figure here proves a value the lowest there is.
Near twins, judged distinct but within ten times a tolerance:
  1 and 2: values differ by 5.00e-1, places by 2.50e-1
Outside the landscape (no finite value): 0.10 % of evaluations
Tolerances: two minima are the same within 1e-9 in value (relative) and 1e-6 in place (of each unknown's scale).
"
        );
    }

    #[test]
    fn a_lowest_value_is_never_called_global() {
        assert!(!minima_text(&sample(), 10, 100).contains("global"));
    }
}
