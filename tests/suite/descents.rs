//! Descents and confirmations on compiled landscapes.

use std::sync::Arc;

use super::support::kernel;
use rand::RngExt;
use thalweg::base::random::{Purpose, stream};
use thalweg::descent::{Ask, Confirmation, Descents, End, EndKind, Judgement, Region};
use thalweg::evaluate::Evaluator;
use thalweg::landscape::Landscape;

fn start(landscape: &Landscape, number: u64) -> Vec<f64> {
    let mut rng = stream(3, 0, number, Purpose::Check);
    let mut draw = |lower: f64, upper: f64| lower + (upper - lower) * rng.random::<f64>();
    landscape.slots.iter().map(|slot| draw(slot.start_lower, slot.start_upper)).collect()
}

/// The end of a descent and its evaluations.
fn descend(evaluator: &mut Evaluator, region: &Arc<Region>, start: &[f64]) -> (End, u64) {
    let mut descents = Descents::new(region, 8, 20_000);
    descents.start(0, start);
    evaluator.prepare(8);
    while !descents.has_ended(0) {
        descents.ask(evaluator.points_mut());
        evaluator.run();
        descents.tell(evaluator.points(), evaluator.values(), evaluator.gradients());
    }
    (descents.end(0), descents.evaluations(0))
}

fn confirm(evaluator: &mut Evaluator, region: &Arc<Region>, at: &[f64]) -> Judgement {
    let mut confirmation = Confirmation::new(region, at);
    loop {
        if let Some(judgement) = confirmation.judgement() {
            return judgement.clone();
        }
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

fn tools(text: &str) -> (Landscape, Arc<Region>, Evaluator) {
    let (landscape, kernel) = kernel(text);
    let region = Arc::new(Region::new(&landscape.slots, &landscape.symmetries));
    (landscape, region, Evaluator::new(&kernel))
}

/// Clusters from atoms thrown at random, some on top of each other: every descent arrives, and every end is a clean
/// minimum with six zero modes.
#[test]
fn clusters_from_random_starts() {
    for (n, most) in [(13, 290), (38, 400)] {
        let text = format!(
            "given n = {n}\nunknown p[n, 3] in [-2.5, 2.5]\nalike shift p, rotate p, mirror p, exchange p\n\
             let s(i, j) = sum(k in 1..3: (p[i,k] - p[j,k])^2)\n\
             minimise sum(i in 1..n, j in i+1..n: 4*(s(i,j)^-6 - s(i,j)^-3))"
        );
        let (landscape, region, mut evaluator) = tools(&text);
        let n_starts = if n == 13 { 200 } else { 20 };
        let (mut total, mut interior) = (0, 0);
        for number in 0..n_starts {
            let (end, evaluations) = descend(&mut evaluator, &region, &start(&landscape, number));
            assert_eq!(end.kind, EndKind::Converged, "n = {n}, start {number}");
            total += evaluations;
            let judgement = confirm(&mut evaluator, &region, &end.at);
            let Judgement::Minimum { stiffness, residual, active, flat, value, .. } = judgement else {
                panic!("n = {n}, start {number}: {judgement:?}")
            };
            assert!((value - end.value).abs() < 1e-10 * value.abs());
            if active.is_empty() {
                interior += 1;
                assert!(!flat && residual < 1e-13, "n = {n}, start {number}: residual {residual}");
                assert_eq!(stiffness.iter().filter(|&&x| x == 0.0).count(), 6);
                assert!(stiffness[6] > 1e-3, "n = {n}, start {number}: {:?}", &stiffness[..8]);
            }
        }
        let mean = total / n_starts;
        assert!(mean < most, "n = {n}: {mean} evaluations a descent");
        assert!(interior * 2 > n_starts, "n = {n}: only {interior} inside the box");
    }
}

/// A saddle is told as one, and the descent from its escape goes down.
#[test]
fn saddles_are_left() {
    let (_, region, mut evaluator) = tools("unknown x in [-3, 3]\nunknown y in [-3, 3]\nminimise x^2 - y^2 + y^4");
    let (end, _) = descend(&mut evaluator, &region, &[1.0, 0.0]);
    assert_eq!(end.kind, EndKind::Converged);
    let Judgement::Saddle { escape } = confirm(&mut evaluator, &region, &end.at) else { panic!("{end:?}") };
    let (end, _) = descend(&mut evaluator, &region, &escape);
    assert!((end.value + 0.25).abs() < 1e-12, "{end:?}");
}

#[test]
fn minima_on_bounds_name_them() {
    let (_, region, mut evaluator) =
        tools("unknown x in [1, 3]\nunknown y in [-3, 3]\nminimise x^2 + (y - x)^2 - 0.1*y");
    let (end, _) = descend(&mut evaluator, &region, &[2.5, -2.0]);
    let Judgement::Minimum { at, active, flat, stiffness, .. } = confirm(&mut evaluator, &region, &end.at) else {
        panic!("{end:?}")
    };
    assert_eq!((at[0], active, flat), (1.0, vec![0], false));
    assert!((at[1] - 1.05).abs() < 1e-12);
    assert_eq!(stiffness, [2.0]);
}

#[test]
fn valleys_are_told_as_flat() {
    let (_, region, mut evaluator) = tools("unknown x in [-3, 3]\nunknown y in [-3, 3]\nminimise (x + y)^2");
    let (end, _) = descend(&mut evaluator, &region, &[2.0, 1.0]);
    let judgement = confirm(&mut evaluator, &region, &end.at);
    assert!(matches!(judgement, Judgement::Minimum { flat: true, .. }), "{judgement:?}");
}

#[test]
fn cyclic_unknowns_wrap() {
    let (_, region, mut evaluator) = tools("unknown a in [-pi, pi] cyclic\nminimise cos(a)");
    for start in [3.0, -3.0, 0.1, -0.1] {
        let (end, _) = descend(&mut evaluator, &region, &[start]);
        let Judgement::Minimum { at, .. } = confirm(&mut evaluator, &region, &end.at) else { panic!("{end:?}") };
        assert!((at[0].abs() - std::f64::consts::PI).abs() < 1e-9, "{at:?}");
    }
}

/// A narrow curved valley (Rosenbrock 1960), ten unknowns of units a million apart, a value near 0.
#[test]
fn hard_descents() {
    let (_, region, mut evaluator) =
        tools("unknown x in [-2, 2]\nunknown y in [-2, 2]\nminimise 100*(y - x^2)^2 + (1 - x)^2");
    let (end, evaluations) = descend(&mut evaluator, &region, &[-1.2, 1.0]);
    let Judgement::Minimum { at, .. } = confirm(&mut evaluator, &region, &end.at) else { panic!("{end:?}") };
    assert!(at.iter().all(|x| (x - 1.0).abs() < 1e-12), "{at:?} after {evaluations}");

    let scaled = "given n = 10\ngiven unit[i in 1..n] = 10^(i - 5)\n\
        unknown x[i in 1..n] in [-2*unit[i], 3*unit[i]]\n\
        minimise sum(i in 1..n: i*(x[i]/unit[i] - 1)^2) + sum(i in 2..n: (x[i]/unit[i] - x[i-1]/unit[i-1])^2)";
    let (landscape, region, mut evaluator) = tools(scaled);
    let (end, evaluations) = descend(&mut evaluator, &region, &start(&landscape, 0));
    assert!(end.kind == EndKind::Converged && end.value < 1e-13, "{end:?}");
    assert!(evaluations < 100, "{evaluations}");
}

/// A change of the objective's unit by a power of two changes no point of the way.
#[test]
fn the_unit_of_the_objective_does_not_matter() {
    let text = |unit: &str| {
        format!(
            "unknown x[6] in [-2, 2]\nminimise {unit}*sum(i in 1..6: 1 + x[i]^4 - x[i]^2 + 0.3*x[i] + 0.1*i*x[i]*x[1])"
        )
    };
    let ends: Vec<End> = ["1", "2^-40", "2^40"]
        .iter()
        .map(|unit| {
            let (landscape, region, mut evaluator) = tools(&text(unit));
            descend(&mut evaluator, &region, &start(&landscape, 1)).0
        })
        .collect();
    assert_eq!(ends[0].kind, EndKind::Converged);
    assert_eq!((&ends[0].at, &ends[0].at), (&ends[1].at, &ends[2].at));
}

#[test]
fn starts_outside_the_landscape_say_so() {
    let (_, region, mut evaluator) = tools("unknown x in [-2, 2]\nminimise log(x) + x");
    assert_eq!(descend(&mut evaluator, &region, &[-1.0]).0.kind, EndKind::Outside);
}

/// A descent from a minimum ends there at once, whatever its value.
#[test]
fn minima_are_where_descents_from_them_end() {
    for text in [
        "unknown x[2] in [-2, 2]\nminimise (x[1]^2 - 1)^2 + (x[2]^2 - 1)^2 + 0.1*x[1]",
        "unknown x[2] in [-2, 2]\nminimise (x[1] - 0.3)^2 + 7*(x[2] + 0.7)^2",
    ] {
        let (_, region, mut evaluator) = tools(text);
        let (end, _) = descend(&mut evaluator, &region, &[-1.3, 0.4]);
        let Judgement::Minimum { at, .. } = confirm(&mut evaluator, &region, &end.at) else { panic!("{end:?}") };
        let (again, evaluations) = descend(&mut evaluator, &region, &at);
        assert_eq!(again.kind, EndKind::Converged);
        assert!(
            evaluations <= 3 && again.at.iter().zip(&at).all(|(a, b)| (a - b).abs() < 1e-9),
            "{evaluations}: {again:?}"
        );
    }
}
