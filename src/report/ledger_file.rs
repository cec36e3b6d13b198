//! From a ledger to the file of minima.

use std::collections::BTreeMap;

use crate::landscape::{AxisRange, Landscape};
use crate::ledger::{Entry, Ledger};
use crate::search::{Heuristic, Troubles};

use super::coverage::coverage;
use super::minima_file::{First, Format, MinimaFile, Minimum, NearTwin, Problem, Tolerances, Troubles as TroublesFile};
use super::nested::{Nested, nest};

/// What the file says beside the ledger.
#[derive(Clone, Debug)]
pub struct HuntFacts {
    /// The problem.
    pub problem: Problem,
    /// The seed.
    pub seed: u64,
}

/// The state of a hunt, as far as the file tells it.
pub struct LedgerView<'a> {
    /// The ledger.
    pub ledger: &'a Ledger,
    /// Evaluations spent.
    pub evaluations: u64,
    /// Descents of the survey that have ended.
    pub survey_descents: u64,
    /// What went wrong.
    pub troubles: &'a Troubles,
}

/// The file of minima of a hunt. `shown` gives the shown quantities at a point, in the order of their elements.
///
/// Entries that were met but not confirmed are counted, not listed.
pub fn ledger_file(
    landscape: &Landscape,
    facts: &HuntFacts,
    view: &LedgerView<'_>,
    mut shown: impl FnMut(&[f64]) -> Vec<f64>,
) -> MinimaFile {
    let listed: Vec<Entry<'_>> = view.ledger.entries().filter(|entry| entry.kind().is_some()).collect();
    let rank = |id| listed.iter().position(|entry| entry.id() == id).map(|place| place + 1);
    let near_twins = view.ledger.near_twins().into_iter().filter_map(|twins| {
        Some(NearTwin {
            first: rank(twins.first)?,
            second: rank(twins.second)?,
            value_difference: twins.value_difference,
            deviation: twins.deviation,
        })
    });
    let tolerances = view.ledger.tolerances();
    MinimaFile {
        format: Format::default(),
        problem: facts.problem.clone(),
        seed: facts.seed,
        evaluations: view.evaluations,
        coverage: coverage(view.ledger, view.survey_descents),
        near_twins: near_twins.collect(),
        minima: listed.iter().map(|entry| minimum(landscape, entry, &mut shown)).collect(),
        unconfirmed: (view.ledger.len() - listed.len()) as u64,
        tolerances: Tolerances { value: tolerances.value, place: tolerances.place },
        troubles: troubles(landscape, view.troubles),
    }
}

fn minimum(landscape: &Landscape, entry: &Entry<'_>, shown: &mut impl FnMut(&[f64]) -> Vec<f64>) -> Minimum {
    let sign = if landscape.maximise { -1.0 } else { 1.0 };
    let hits = Heuristic::ALL.iter().map(|heuristic| (heuristic.name().to_string(), entry.hits(heuristic.number())));
    let first = entry.first();
    let mut rest = shown(entry.at()).into_iter();
    let shows = landscape.shows.iter().map(|show| {
        let values: Vec<f64> = rest.by_ref().take(show.elements.len()).collect();
        (show.name.clone(), nest(&values, &counts(&show.axes)))
    });
    Minimum {
        value: sign * entry.value(),
        at: families(landscape, entry.at()),
        kind: entry.kind().map_or("", |kind| kind.name()).to_string(),
        stiffness: entry.stiffness().to_vec(),
        residual: entry.confirmed().map_or(0.0, |confirmed| confirmed.residual),
        hits: hits.filter(|(_, count)| *count > 0).collect(),
        first: First {
            evaluation: first.evaluation,
            round: first.round,
            heuristic: Heuristic::ALL[first.heuristic.min(Heuristic::ALL.len() - 1)].name().to_string(),
        },
        // A quantity that is not a number at a minimum is left out: JSON cannot say it.
        shows: shows.filter(|(_, value)| value.flat().iter().all(|x| x.is_finite())).collect(),
        active: entry.active().iter().map(|&slot| landscape.slot_name(slot)).collect(),
    }
}

fn families(landscape: &Landscape, at: &[f64]) -> BTreeMap<String, Nested> {
    let families = landscape.unknowns.iter();
    families
        .map(|family| {
            let values = &at[family.first_slot..family.first_slot + family.count];
            (family.name.clone(), nest(values, &counts(&family.axes)))
        })
        .collect()
}

fn counts(axes: &[AxisRange]) -> Vec<usize> {
    axes.iter().map(|axis| axis.count).collect()
}

fn troubles(landscape: &Landscape, troubles: &Troubles) -> TroublesFile {
    let first_outside = troubles.first_outside.as_ref().filter(|at| at.iter().all(|x| x.is_finite()));
    TroublesFile {
        outside: troubles.outside,
        first_outside: first_outside.map(|at| families(landscape, at)),
        starts_outside: troubles.starts_outside,
        out_of_budget: troubles.out_of_budget,
        stalled: troubles.stalled,
        abandoned: troubles.abandoned,
        not_confirmed: troubles.not_confirmed,
        saddles: troubles.saddles,
        flat: troubles.flat,
    }
}
