//! Where the time of a multistart hunt on one thread goes, for 13 and 38 atoms: evaluations (as many batches as would hold
//! them, with every lane in use), confirmations (curvature, polish, spectrum), and all the rest (quasi-Newton algebra,
//! lanes that are idle, bookkeeping, results handed over).
//!
//! The parts are timed after the hunt, by doing them again alone. Times are processor time of the whole process where
//! Linux tells it (the merging thread's part is in the rest), so that a busy machine says nearly the same as a quiet one.

use std::hint::black_box;
use std::sync::Arc;
use std::time::Instant;

use thalweg::descent::{Ask, Confirmation, Region};
use thalweg::evaluate::Evaluator;
use thalweg::search::{Mix, Observer, RoundReport, Settings, Verdict};

struct Patient;

impl Observer for Patient {
    fn round(&mut self, _: &RoundReport<'_>) -> Verdict {
        Verdict::Continue
    }
}

/// Seconds since some moment: processor time, in hundredths, or else the clock's.
fn seconds(began: Instant) -> f64 {
    let ticks = |text: String| -> Option<f64> {
        // The command's name is in brackets and may hold anything.
        let mut fields = text.rsplit(')').next()?.split_whitespace().skip(11);
        Some(fields.next()?.parse::<f64>().ok()? + fields.next()?.parse::<f64>().ok()?)
    };
    let ticks = std::fs::read_to_string("/proc/self/stat").ok().and_then(ticks);
    ticks.map_or_else(|| began.elapsed().as_secs_f64(), |ticks| ticks / 100.0)
}

/// Points in a full batch of a worker.
const BATCH: usize = 32;

fn main() {
    let start = Instant::now();
    for (n, evaluations) in [(13, 1_000_000), (38, 400_000)] {
        let text = format!(
            "unknown p[{n}, 3] in [-2.5, 2.5]\nalike shift p, rotate p, mirror p, exchange p\n\
             let s(i, j) = sum(k in 1..3: (p[i,k] - p[j,k])^2)\n\
             minimise sum(i in 1..{n}, j in i+1..{n}: 4*(s(i,j)^-6 - s(i,j)^-3))"
        );
        let problem = thalweg::read("atoms", &text, &[]).expect("a sound problem");
        let mix = Mix::read("multistart").expect("a known heuristic");
        let settings = Settings { mix, survey: 0.0, max_evaluations: Some(evaluations), ..Settings::default() };
        let began = seconds(start);
        let outcome = problem.hunt(&settings, 1, &mut Patient).expect("a thread");
        let whole = seconds(start) - began;

        let places: Vec<&[f64]> = outcome.ledger.entries().take(BATCH).map(|entry| entry.at()).collect();
        let mut evaluator = Evaluator::new(problem.kernel());
        evaluator.prepare(BATCH);
        (0..BATCH).for_each(|lane| evaluator.put(lane, places[lane % places.len()]));
        let began = seconds(start);
        let descending = outcome.by_heuristic.iter().sum::<u64>();
        for _ in 0..descending / BATCH as u64 {
            evaluator.run();
            black_box(evaluator.values());
        }
        let evaluating = seconds(start) - began;

        let landscape = problem.landscape();
        let region = Arc::new(Region::new(&landscape.slots, &landscape.symmetries));
        let n_confirmed = outcome.ledger.n_confirmed();
        let sample = n_confirmed.min(200);
        let began = seconds(start);
        for entry in outcome.ledger.entries().take(sample) {
            let mut confirmation = Confirmation::new(&region, entry.at());
            while confirmation.judgement().is_none() {
                match confirmation.ask() {
                    Ask::Gradient(at) => {
                        let (value, gradient) = evaluator.value_and_gradient(at);
                        confirmation.tell_gradient(value, &gradient);
                    }
                    Ask::Curvature(at) => {
                        let matrix = evaluator.curvature(at);
                        confirmation.tell_curvature(&matrix);
                    }
                }
            }
        }
        let confirming = (seconds(start) - began) * n_confirmed as f64 / sample as f64;
        let share = |part: f64| 100.0 * part / whole;
        #[allow(clippy::print_stdout, reason = "a benchmark reports on standard output")]
        {
            println!(
                "{n} atoms, {} evaluations, {:.1} a descent, {n_confirmed} minima confirmed, {whole:.2} s: evaluations \
                 {:.0} %, confirmations {:.0} %, all the rest {:.0} % of the time (without confirmations {:.0} %)",
                outcome.evaluations,
                descending as f64 / outcome.descents.iter().sum::<u64>() as f64,
                share(evaluating),
                share(confirming),
                share(whole - evaluating - confirming),
                100.0 * (whole - evaluating - confirming) / (whole - confirming)
            );
        }
    }
}
