//! thalweg hunts the lowest point of a rugged landscape and keeps every distinct minimum that it meets.
//!
//! A problem is a short text that reads like its statement in a paper. [`read`] turns it into a [`Problem`]:
//!
//! ```
//! let problem = thalweg::read(
//!     "well.land",
//!     "given n = 2\nunknown x[n] in [-2, 2]\nalike exchange x\nminimise sum(i in 1..n: (x[i]^2 - 1)^2)",
//!     &[("n".to_string(), 3.0)],
//! )?;
//! let facts = problem.check();
//! assert_eq!(facts.unknowns[0].counts, [3]);
//! assert!(facts.broken.is_empty() && facts.gradient.worst < 1e-6);
//! # Ok::<(), thalweg::Failure>(())
//! ```
//!
//! The floors below are public for those who want a part alone: [`language`] and [`landscape`] read problems,
//! [`kernel`] compiles them, [`evaluate`] runs them, [`run`] keeps the files of a hunt, [`report`] shows them.

pub mod base;
pub mod descent;
pub mod evaluate;
pub mod kernel;
pub mod landscape;
pub mod language;
pub mod ledger;
pub mod numbers;
pub mod report;
pub mod run;
pub mod search;
pub mod statistics;

use std::fmt;
use std::sync::Arc;

use evaluate::{Evaluator, MAX_LANES, check_gradient, suggest_symmetries, test_promises};
use kernel::Kernel;
use landscape::symmetry::Symmetry;
use landscape::{AxisRange, Landscape};
use report::{BrokenFacts, CheckFacts, FamilyFacts, GradientFacts, Nested, nest};

/// The seed of the points at which promises and gradients are tried; fixed, so that `check` says the same twice.
const CHECK_SEED: u64 = 20;
/// Random points at which the gradient is compared.
const GRADIENT_POINTS: usize = 20;

/// Who is to blame for a failure.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Blame {
    /// The user's input: refused.
    Input,
    /// Something outside the program: a disk, a permission.
    Outside,
    /// The program itself.
    Program,
}

/// Why something could not be done: the place, the cause and the remedy in one text for people.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Failure {
    blame: Blame,
    text: String,
}

impl Failure {
    /// A failure with its text, which ends without a line break.
    pub fn new(blame: Blame, text: impl Into<String>) -> Self {
        Failure { blame, text: text.into() }
    }

    /// Who is to blame.
    pub fn blame(&self) -> Blame {
        self.blame
    }
}

impl fmt::Display for Failure {
    fn fmt(&self, out: &mut fmt::Formatter<'_>) -> fmt::Result {
        out.write_str(&self.text)
    }
}

impl std::error::Error for Failure {}

impl From<run::RunError> for Failure {
    fn from(error: run::RunError) -> Self {
        Failure::new(if error.is_usage() { Blame::Input } else { Blame::Outside }, error.to_string())
    }
}

/// A problem that was read, checked and compiled.
#[derive(Clone, Debug)]
pub struct Problem {
    name: String,
    landscape: Landscape,
    kernel: Arc<Kernel>,
    warnings: Vec<String>,
    rendered_warnings: String,
}

/// Reads a problem's text. `name` is what messages call it; `givens` replace those of the text.
///
/// # Errors
/// A [`Failure`] with all mistakes of the text at once, drawn with their places.
pub fn read(name: &str, text: &str, givens: &[(String, f64)]) -> Result<Problem, Failure> {
    let parsed = language::parse(text);
    // A file that was not understood whole is checked all the same: its other mistakes belong to the same answer. But
    // a name whose definition was lost would then be called unknown, so mistakes of grammar stand alone.
    if !parsed.diagnostics.is_empty() {
        return Err(refused(&language::render(name, text, &parsed.diagnostics)));
    }
    let checked =
        landscape::check(&parsed.file, givens).map_err(|error| Failure::new(Blame::Input, error.to_string()))?;
    let rendered = language::render(name, text, &checked.diagnostics);
    let Some(landscape) = checked.landscape else { return Err(refused(&rendered)) };
    let kernel = kernel::compile(&landscape).map_err(|error| Failure::new(Blame::Program, error.to_string()))?;
    Ok(Problem {
        name: name.to_string(),
        landscape,
        kernel: Arc::new(kernel),
        warnings: checked.diagnostics.iter().map(|diagnostic| diagnostic.message.clone()).collect(),
        rendered_warnings: rendered,
    })
}

/// Reads a problem's bytes, which may prove not to be text.
///
/// # Errors
/// As [`read`].
pub fn read_bytes(name: &str, bytes: &[u8], givens: &[(String, f64)]) -> Result<Problem, Failure> {
    match language::decode(bytes) {
        Ok(text) => read(name, &text, givens),
        Err((text, diagnostic)) => Err(refused(&language::render(name, &text, &[diagnostic]))),
    }
}

fn refused(rendered: &str) -> Failure {
    Failure::new(Blame::Input, rendered.trim_end())
}

impl Problem {
    /// The landscape.
    pub fn landscape(&self) -> &Landscape {
        &self.landscape
    }

    /// The compiled programs.
    pub fn kernel(&self) -> &Arc<Kernel> {
        &self.kernel
    }

    /// Its warnings, drawn with their places; empty if there are none.
    pub fn rendered_warnings(&self) -> &str {
        &self.rendered_warnings
    }

    /// Tests its promises and gradients at random points and gathers what is to be known before a hunt.
    ///
    /// The evaluations a second are left out, since only the edge of the program reads a clock; see
    /// [`Problem::exercise`].
    pub fn check(&self) -> CheckFacts {
        let landscape = &self.landscape;
        let mut evaluator = Evaluator::new(&self.kernel);
        let gradient = check_gradient(landscape, &mut evaluator, CHECK_SEED, GRADIENT_POINTS);
        let broken = self.broken_promises();
        let suggestions = suggest_symmetries(landscape, &mut evaluator, CHECK_SEED);
        CheckFacts {
            name: self.name.clone(),
            title: landscape.title.clone(),
            sense: if landscape.maximise { "maximise" } else { "minimise" }.to_string(),
            unknowns: landscape
                .unknowns
                .iter()
                .map(|family| FamilyFacts { name: family.name.clone(), counts: counts(&family.axes) })
                .collect(),
            instructions: self.kernel.gradient.program().n_instructions(),
            work: landscape.work,
            evaluations_a_second: None,
            kinked: landscape.kinked,
            gradient: GradientFacts {
                points: gradient.n_points,
                worst: gradient.worst,
                unknown: (gradient.n_points > 0).then(|| landscape.slot_name(gradient.slot)),
            },
            promises: landscape.symmetries.len(),
            broken,
            suggestions: suggestions.into_iter().map(|suggestion| suggestion.statement).collect(),
            warnings: self.warnings.clone(),
        }
    }

    /// The promises that do not hold, each with two points that it calls the same and their values.
    pub fn broken_promises(&self) -> Vec<BrokenFacts> {
        let broken = test_promises(&self.landscape, &mut Evaluator::new(&self.kernel), CHECK_SEED);
        let facts = broken.into_iter().map(|broken| BrokenFacts {
            promise: self.promise_words(broken.symmetry),
            at: self.nested(&broken.at),
            value: Some(broken.value).filter(|value| value.is_finite()),
            image: self.nested(&broken.image),
            image_value: Some(broken.image_value).filter(|value| value.is_finite()),
        });
        facts.collect()
    }

    /// Hunts. `threads` changes how long it takes and nothing else; the observer sees every round and may end the hunt.
    ///
    /// ```
    /// use thalweg::search::{Observer, RoundReport, Settings, Verdict};
    ///
    /// struct Patient;
    /// impl Observer for Patient {
    ///     fn round(&mut self, _: &RoundReport<'_>) -> Verdict {
    ///         Verdict::Continue
    ///     }
    /// }
    ///
    /// let problem = thalweg::read("wells.land", "unknown x[2] in [-2, 2]\nminimise (x[1]^2 - 1)^2 + (x[2]^2 - 1)^2", &[])?;
    /// let settings = Settings { max_evaluations: Some(4000), ..Settings::default() };
    /// let outcome = problem.hunt(&settings, 2, &mut Patient)?;
    /// assert_eq!(outcome.ledger.len(), 4);
    /// # Ok::<(), thalweg::Failure>(())
    /// ```
    ///
    /// # Errors
    /// A [`Failure`] where threads cannot be had, or a worker failed.
    pub fn hunt(
        &self,
        settings: &search::Settings,
        threads: usize,
        observer: &mut dyn search::Observer,
    ) -> Result<search::Outcome, Failure> {
        self.resume(settings, threads, observer, &mut search::NoPast)
    }

    /// Goes on with a hunt whose first rounds were recorded; the result is that of a hunt that was never interrupted.
    ///
    /// # Errors
    /// As [`Problem::hunt`]; also where the records do not follow from the settings.
    pub fn resume(
        &self,
        settings: &search::Settings,
        threads: usize,
        observer: &mut dyn search::Observer,
        past: &mut dyn search::Past,
    ) -> Result<search::Outcome, Failure> {
        search::resume(&self.landscape, &self.kernel, settings, threads, observer, past).map_err(|error| {
            let blame = match error {
                search::HuntError::Threads(_) | search::HuntError::GivenUp => Blame::Outside,
                search::HuntError::Worker => Blame::Program,
                search::HuntError::Past(_) => Blame::Input,
            };
            Failure::new(blame, error.to_string())
        })
    }

    /// The file of minima for a state of a hunt.
    pub fn minima_file(&self, facts: &report::HuntFacts, view: &report::LedgerView<'_>) -> report::MinimaFile {
        let mut evaluator = Evaluator::new(&self.kernel);
        report::ledger_file(&self.landscape, facts, view, |at| evaluator.shown(at))
    }

    /// How files name the problem. `givens` are those set on the command line, `text` is that of the file.
    pub fn described(&self, givens: &[(String, f64)], text: &[u8]) -> report::Problem {
        use sha2::Digest;
        let digest = sha2::Sha256::digest(text);
        let name = self.name.rsplit(['/', '\\']).next().unwrap_or(&self.name);
        let begins = |axes: &[AxisRange]| axes.iter().map(|axis| axis.first).collect::<Vec<i64>>();
        let unknowns = self.landscape.unknowns.iter().map(|family| (family.name.clone(), begins(&family.axes)));
        let shows = self.landscape.shows.iter().map(|show| (format!("show {}", show.name), begins(&show.axes)));
        let firsts = unknowns.chain(shows).filter(|(_, firsts)| firsts.iter().any(|&first| first != 1));
        report::Problem {
            first_indices: firsts.collect(),
            name: name.to_string(),
            title: self.landscape.title.clone(),
            sense: if self.landscape.maximise { "maximise" } else { "minimise" }.to_string(),
            givens: givens.iter().cloned().collect(),
            digest: digest.iter().map(|byte| format!("{byte:02x}")).collect(),
        }
    }

    /// Evaluates `batches` batches of ordinary points, and says how many evaluations that were: for a caller with a
    /// clock.
    pub fn exercise(&self, batches: usize) -> usize {
        let mut evaluator = Evaluator::new(&self.kernel);
        // Distinct unknowns get distinct places within their regions, so that no two points of a cloud coincide.
        let at: Vec<f64> = (0..self.landscape.slots.len())
            .map(|slot| {
                let share = ((slot + 1) as f64 * 0.618_033_988_749_894_9) % 1.0;
                let slot = &self.landscape.slots[slot];
                slot.start_lower + share * (slot.start_upper - slot.start_lower)
            })
            .collect();
        for _ in 0..batches {
            evaluator.evaluate(MAX_LANES, |_| &at);
        }
        batches * MAX_LANES
    }

    /// Points from a CSV table (see [`run::read_points`]); `name` is what messages call it.
    ///
    /// # Errors
    /// A [`Failure`] that names the row and column of the first thing wrong.
    pub fn points_from_csv(&self, name: &str, table: &str) -> Result<Vec<Vec<f64>>, Failure> {
        let refused = |error: run::PointsError| Failure::new(Blame::Input, format!("{name}: {error}"));
        run::read_points(&self.landscape, table).map_err(refused)
    }

    /// The places of the minima of an earlier run, which must have the same families of unknowns.
    ///
    /// # Errors
    /// A [`Failure`] that names the first family that is missing or of another size.
    pub fn points_from_run(&self, name: &str, earlier: &report::MinimaFile) -> Result<Vec<Vec<f64>>, Failure> {
        let refused = |cause: String| Failure::new(Blame::Input, format!("{name}: {cause}"));
        let mut points = Vec::new();
        for minimum in &earlier.minima {
            let mut point = Vec::new();
            for family in &self.landscape.unknowns {
                let value = minimum.at.get(&family.name);
                let value = value.ok_or_else(|| refused(format!("its minima have no unknown `{}`", family.name)))?;
                // The whole shape is compared: six numbers of p[3, 2] are not those of p[2, 3].
                let numbers = value.flat();
                if numbers.len() != family.count || *value != nest(&numbers, &counts(&family.axes)) {
                    return Err(refused(format!("`{}` has another shape in its minima", family.name)));
                }
                point.extend(numbers);
            }
            if minimum.at.len() != self.landscape.unknowns.len() {
                return Err(refused("its minima have unknowns that the problem has not".to_string()));
            }
            for (slot, &value) in point.iter().enumerate() {
                let bounds = &self.landscape.slots[slot];
                if !(bounds.lower <= value && value <= bounds.upper) {
                    let unknown = self.landscape.slot_name(slot);
                    return Err(refused(format!("`{unknown}` = {value} lies outside its bounds")));
                }
            }
            points.push(point);
        }
        Ok(points)
    }

    fn nested(&self, at: &[f64]) -> Vec<(String, Nested)> {
        let families = self.landscape.unknowns.iter();
        families
            .map(|family| {
                let values = &at[family.first_slot..family.first_slot + family.count];
                (family.name.clone(), nest(values, &counts(&family.axes)))
            })
            .collect()
    }

    fn promise_words(&self, number: usize) -> String {
        let (kind, slots) = match &self.landscape.symmetries[number] {
            Symmetry::Exchange { rows } => ("exchange", rows.concat()),
            Symmetry::Shift { rows, .. } => ("shift", rows.concat()),
            Symmetry::Rotate { rows } => ("rotate", rows.concat()),
            Symmetry::Mirror { rows } => ("mirror", rows.concat()),
            Symmetry::Flip { slots } => ("flip", slots.clone()),
            Symmetry::Reverse { rows } => ("reverse", rows.concat()),
            Symmetry::Cycle { rows } => ("cycle", rows.concat()),
        };
        let touched = self.landscape.unknowns.iter().filter(|family| {
            slots.iter().any(|slot| (family.first_slot..family.first_slot + family.count).contains(slot))
        });
        let names: Vec<&str> = touched.map(|family| family.name.as_str()).collect();
        if names.len() == 1 {
            format!("alike {kind} {}", names[0])
        } else {
            format!("alike {kind} ({})", names.join(", "))
        }
    }
}

fn counts(axes: &[AxisRange]) -> Vec<usize> {
    axes.iter().map(|axis| axis.count).collect()
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_false_promise_is_shown_with_its_two_points_and_values() {
        let text = "unknown x[2] in [-1, 1]\nalike exchange x\nminimise x[1]^2 + 2*x[2]^2";
        let facts = read("false.land", text, &[]).unwrap().check();
        let [broken] = facts.broken.as_slice() else { panic!("one promise is broken: {facts:?}") };
        assert_eq!(broken.promise, "alike exchange x");
        let value = |at: &[(String, Nested)]| {
            let x = at[0].1.flat();
            x[0] * x[0] + 2.0 * x[1] * x[1]
        };
        assert!((broken.value.unwrap() - value(&broken.at)).abs() < 1e-14);
        assert!((broken.image_value.unwrap() - value(&broken.image)).abs() < 1e-14);
        assert!((value(&broken.at) - value(&broken.image)).abs() > 1e-6);
    }

    #[test]
    fn an_undeclared_exchange_is_suggested() {
        let text = "unknown x[3] in [-1, 2]\nminimise sum(i in 1..3: (x[i]^2 - 1)^2 + 0.1*x[i])";
        let facts = read("like.land", text, &[]).unwrap().check();
        assert!(facts.suggestions.contains(&"alike exchange x".to_string()), "{:?}", facts.suggestions);
    }

    #[test]
    fn minima_of_an_earlier_run_become_points_if_they_fit() {
        let earlier = report::read_minima_file(include_str!("../tests/data/edge/minima.json")).unwrap();
        let points = |unknown: &str| {
            let problem = read("p.land", &format!("unknown {unknown}\nminimise sum(x)^2"), &[]).unwrap();
            problem.points_from_run("wells", &earlier).map_err(|failure| failure.to_string())
        };
        assert_eq!(points("x[2] in [-2, 2]"), Ok(vec![vec![-1.0, -1.0]]));
        assert!(points("x[3] in [-2, 2]").unwrap_err().contains("another shape"));
        assert!(points("x[1, 2] in [-2, 2]").unwrap_err().contains("another shape"));
        assert!(points("x[2] in [0, 2]").unwrap_err().contains("`x[1]` = -1 lies outside"));
    }

    #[test]
    fn mistakes_are_the_users() {
        let failure = read("bad.land", "unknown x in [-1, 1]\nminimise y", &[]).unwrap_err();
        assert_eq!(failure.blame(), Blame::Input);
        assert!(failure.to_string().contains("bad.land, line 2"), "{failure}");
        let failure = read("bad.land", "unknown x in [-1, 1]\nminimise x", &[("n".into(), 1.0)]).unwrap_err();
        assert!(failure.to_string().contains('n'), "{failure}");
    }
}
