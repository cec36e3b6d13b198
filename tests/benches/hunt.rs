//! Where the time of a multistart hunt on one thread goes, for 13 and 38 atoms: evaluations (as many batches as would hold
//! them, with every lane in use), confirmations (curvature, polish, spectrum), and all the rest (quasi-Newton algebra,
//! lanes that are idle, bookkeeping, results handed over).
//!
//! The parts are timed after the hunt, by doing them again alone; on a busy machine only shares of one run mean anything.

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

/// Points in a full batch of a worker.
const BATCH: usize = 32;

fn main() {
    for (n, evaluations) in [(13, 1_000_000), (38, 400_000)] {
        let text = format!(
            "unknown p[{n}, 3] in [-2.5, 2.5]\nalike shift p, rotate p, mirror p, exchange p\n\
             let s(i, j) = sum(k in 1..3: (p[i,k] - p[j,k])^2)\n\
             minimise sum(i in 1..{n}, j in i+1..{n}: 4*(s(i,j)^-6 - s(i,j)^-3))"
        );
        let problem = thalweg::read("atoms", &text, &[]).expect("a sound problem");
        let mix = Mix::read("multistart").expect("a known heuristic");
        let settings = Settings { mix, survey: 0.0, max_evaluations: Some(evaluations), ..Settings::default() };
        let began = Instant::now();
        let outcome = problem.hunt(&settings, 1, &mut Patient).expect("a thread");
        let whole = began.elapsed().as_secs_f64();

        let places: Vec<&[f64]> = outcome.ledger.entries().take(BATCH).map(|entry| entry.at()).collect();
        let mut evaluator = Evaluator::new(problem.kernel());
        evaluator.prepare(BATCH);
        (0..BATCH).for_each(|lane| evaluator.put(lane, places[lane % places.len()]));
        let began = Instant::now();
        let descending = outcome.by_heuristic.iter().sum::<u64>();
        for _ in 0..descending / BATCH as u64 {
            evaluator.run();
            black_box(evaluator.values());
        }
        let evaluating = began.elapsed().as_secs_f64();

        let landscape = problem.landscape();
        let region = Arc::new(Region::new(&landscape.slots, &landscape.symmetries));
        let n_confirmed = outcome.ledger.n_confirmed();
        let sample = n_confirmed.min(200);
        let began = Instant::now();
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
        let confirming = began.elapsed().as_secs_f64() * n_confirmed as f64 / sample as f64;
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
