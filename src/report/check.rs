//! What `check` shows.

use serde::Serialize;

use super::nested::Nested;
use super::table::plain;

/// The facts about a problem; its JSON form is the object that `check --json` prints.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct CheckFacts {
    /// The name of the file.
    pub name: String,
    /// Its title.
    pub title: Option<String>,
    /// `minimise` or `maximise`.
    pub sense: String,
    /// The families of unknowns.
    pub unknowns: Vec<FamilyFacts>,
    /// Instructions of the program for value and gradient, loops counted once.
    pub instructions: usize,
    /// An estimate of the operations of one value.
    pub work: u64,
    /// Evaluations a second on one core, measured.
    pub evaluations_a_second: Option<f64>,
    /// Whether the objective has kinks.
    pub kinked: bool,
    /// The gradient against differences.
    pub gradient: GradientFacts,
    /// How many symmetries are promised.
    pub promises: usize,
    /// The promises that do not hold.
    pub broken: Vec<BrokenFacts>,
    /// Statements for symmetries that held at every point tried.
    pub suggestions: Vec<String>,
    /// Warnings.
    pub warnings: Vec<String>,
}

/// One family of unknowns.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct FamilyFacts {
    /// Its name.
    pub name: String,
    /// Its counts along each index; empty for a single unknown.
    pub counts: Vec<usize>,
}

/// How gradient and differences agreed.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct GradientFacts {
    /// Points compared.
    pub points: usize,
    /// The largest disagreement, relative.
    pub worst: f64,
    /// The unknown with the largest disagreement.
    pub unknown: Option<String>,
}

/// A promise that does not hold.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct BrokenFacts {
    /// The promise in words: `exchange p`.
    pub promise: String,
    /// A point, family by family in the order of the file.
    pub at: Vec<(String, Nested)>,
    /// Its value; none outside the landscape.
    pub value: Option<f64>,
    /// Its image under the promise.
    pub image: Vec<(String, Nested)>,
    /// The image's value; none outside the landscape.
    pub image_value: Option<f64>,
}

/// The facts as JSON.
pub fn check_json(facts: &CheckFacts) -> String {
    // Every field is finite or optional, so the form itself cannot fail.
    serde_json::to_string_pretty(facts).unwrap_or_default() + "\n"
}

/// The facts for a terminal; warnings are drawn elsewhere, with their places.
pub fn check_text(facts: &CheckFacts) -> String {
    let mut out = String::new();
    let title = facts.title.as_ref().map(|title| format!(": {}", plain(title))).unwrap_or_default();
    out.push_str(&format!("{}{title}\n", plain(&facts.name)));
    let total: usize = facts.unknowns.iter().map(|family| family.counts.iter().product::<usize>()).sum();
    let families: Vec<String> = facts
        .unknowns
        .iter()
        .map(|family| match family.counts.as_slice() {
            [] => family.name.clone(),
            counts => {
                format!("{}[{}]", family.name, counts.iter().map(usize::to_string).collect::<Vec<_>>().join(", "))
            }
        })
        .collect();
    out.push_str(&format!("  unknowns   {total}: {}\n", families.join(", ")));
    out.push_str(&format!("  program    {} instructions for value and gradient\n", facts.instructions));
    let speed = facts.evaluations_a_second.map(|speed| format!(", {speed:.2e} evaluations a second on one core"));
    out.push_str(&format!("  cost       about {} operations a value{}\n", facts.work, speed.unwrap_or_default()));
    let gradient = &facts.gradient;
    out.push_str(&match &gradient.unknown {
        // Zero would read as if nothing had been compared: differences can show no more than their own rounding.
        Some(_) if gradient.worst == 0.0 => {
            format!("  gradient   agrees with differences to their rounding at {} random points\n", gradient.points)
        }
        Some(unknown) => format!(
            "  gradient   agrees with differences to {:.1e} at {} random points (worst in {unknown})\n",
            gradient.worst, gradient.points
        ),
        None => "  gradient   not compared: no random point had a finite value and slope\n".to_string(),
    });
    if facts.kinked {
        out.push_str("  kinks      the landscape is not smooth everywhere\n");
    }
    if facts.promises > 0 {
        let kept = facts.promises - facts.broken.len();
        out.push_str(&format!("  promises   {kept} of {} held at random points\n", facts.promises));
    }
    for broken in &facts.broken {
        out.push_str(&broken_text(broken));
    }
    for suggestion in &facts.suggestions {
        out.push_str(&format!("  held at every point tried but is not declared: {suggestion}\n"));
    }
    out
}

fn broken_text(broken: &BrokenFacts) -> String {
    let value = |value: Option<f64>| value.map_or("no finite value".to_string(), |value| value.to_string());
    let point = |at: &[(String, Nested)]| {
        let parts: Vec<String> = at
            .iter()
            .map(|(name, nested)| format!("{name} = {}", serde_json::to_string(nested).unwrap_or_default()))
            .collect();
        parts.join(", ")
    };
    format!(
        "  `{}` does not hold: it calls these two points the same answer\n    {} at {}\n    {} at {}\n",
        plain(&broken.promise),
        value(broken.value),
        point(&broken.at),
        value(broken.image_value),
        point(&broken.image)
    )
}
