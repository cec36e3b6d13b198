//! Warnings about domains: where the interval of an argument over the bounds reaches out of a function's domain.

use std::collections::HashMap;

use crate::language::tree::Reduction;
use crate::numbers::functions;
use crate::numbers::operation::{Binary, Relation, Unary};

use super::check::{Checker, Domain, Known};
use super::mistake::Mistake;
use super::term::{Term, TermId};

/// A range of values; `[-inf, inf]` where nothing better is known. Ends are not rounded outward: this serves a warning,
/// never a proof.
type Range = (f64, f64);

const ALL: Range = (f64::NEG_INFINITY, f64::INFINITY);

impl Checker<'_> {
    pub(super) fn warn_domains(&mut self) {
        let mut ranges = HashMap::new();
        for (domain, of, span, known) in std::mem::take(&mut self.domains) {
            let mut narrowed = HashMap::new();
            let ranges = if known.is_empty() { &mut ranges } else { &mut narrowed };
            let (low, high) = self.range(of, &known, ranges, 0);
            let is_zero = |id: TermId| self.build.number(id) == Some(0.0);
            let told_apart = known.iter().any(|&(relation, left, right)| {
                relation == Relation::NotEqual && (left == of && is_zero(right) || right == of && is_zero(left))
            });
            if told_apart && matches!(domain, Domain::NotZero | Domain::Base) {
                continue;
            }
            let what = match domain {
                Domain::NotZero if low <= 0.0 && 0.0 <= high => "this divisor can be 0",
                Domain::Positive if low <= 0.0 => "this logarithm can be of 0 or less",
                Domain::NotNegative if low < 0.0 => "this square root can be of less than 0",
                Domain::Base if low <= 0.0 && 0.0 <= high => "the base of this negative power can be 0",
                Domain::RealBase if low < 0.0 => "the base of this power, which is not whole, can be less than 0",
                Domain::Unit if low < -1.0 || 1.0 < high => "this can leave -1..1, where the function is defined,",
                _ => continue,
            };
            self.build.diagnostics.push(Mistake::LeavesDomain(what).at(span));
        }
    }

    /// The range of a term where some comparisons are known to hold.
    fn range(&self, id: TermId, facts: &[Known], known: &mut HashMap<TermId, Range>, depth: usize) -> Range {
        if let Some(&range) = known.get(&id) {
            return range;
        }
        if depth > 500 {
            return ALL;
        }
        let mut of = |id: TermId| self.range(id, facts, known, depth + 1);
        let range = match self.build.terms.get(id).clone() {
            Term::Constant(bits) => (f64::from_bits(bits), f64::from_bits(bits)),
            Term::Counter(_) | Term::Family(..) | Term::Choose { .. } => ALL,
            Term::Table(table, _) => hull(self.build.tables[table as usize].iter().map(|&value| (value, value))),
            Term::Unknown(index) => match index.constant() {
                Some(slot) => (self.slots[slot as usize].lower, self.slots[slot as usize].upper),
                None => hull(self.slots.iter().map(|slot| (slot.lower, slot.upper))),
            },
            Term::Unary(operation, inner) => unary(operation, of(inner)),
            // A difference of two unlike unknowns is not independent of itself: x - x and x*x are looked at by shape.
            Term::Binary(Binary::Multiply, left, right) if left == right => power(of(left), 2),
            Term::Binary(operation, left, right) => binary(operation, of(left), of(right)),
            Term::Power(base, exponent) => power(of(base), exponent),
            Term::Reduce { operator, body, .. } => {
                let (low, high) = of(body);
                match operator {
                    Reduction::Sum if low >= 0.0 => (0.0, f64::INFINITY),
                    Reduction::Minimum | Reduction::Maximum => (low, high),
                    Reduction::Product if low >= 0.0 => (0.0, f64::INFINITY),
                    _ => ALL,
                }
            }
            Term::Select { then, otherwise, .. } => hull([of(then), of(otherwise)].into_iter()),
        };
        let mut range = if range.0.is_nan() || range.1.is_nan() { ALL } else { range };
        for &fact in facts {
            let (relation, left, right) = fact;
            if let Term::Binary(Binary::Subtract, a, b) = *self.build.terms.get(id)
                && (a, b) == (right, left)
                && let Some(least) = match relation {
                    Relation::Less => Some(0.0_f64.next_up()),
                    Relation::LessOrEqual => Some(0.0),
                    _ => None,
                }
            {
                range.0 = range.0.max(least);
            }
            if left == id || right == id {
                let other = self.range(if left == id { right } else { left }, &[], &mut HashMap::new(), depth + 1);
                range = narrow(range, relation, left == id, other);
            }
        }
        known.insert(id, range);
        range
    }
}

/// What is left of a range by a comparison with something in another; all of it where nothing would be left.
fn narrow((low, high): Range, relation: Relation, is_left: bool, other: Range) -> Range {
    let narrowed = match (relation, is_left) {
        (Relation::Less, true) => (low, high.min(other.1.next_down())),
        (Relation::LessOrEqual, true) => (low, high.min(other.1)),
        (Relation::Less, false) => (low.max(other.0.next_up()), high),
        (Relation::LessOrEqual, false) => (low.max(other.0), high),
        (Relation::Equal, _) => (low.max(other.0), high.min(other.1)),
        (Relation::NotEqual, _) => (low, high),
    };
    if narrowed.0 <= narrowed.1 { narrowed } else { (low, high) }
}

fn hull(ranges: impl Iterator<Item = Range>) -> Range {
    ranges.fold((f64::INFINITY, f64::NEG_INFINITY), |(low, high), range| (low.min(range.0), high.max(range.1)))
}

fn unary(operation: Unary, (low, high): Range) -> Range {
    let monotone = |operation: Unary| (functions::unary(operation, low), functions::unary(operation, high));
    match operation {
        Unary::Negate => (-high, -low),
        Unary::Absolute if low >= 0.0 => (low, high),
        Unary::Absolute if high <= 0.0 => (-high, -low),
        Unary::Absolute => (0.0, high.max(-low)),
        Unary::Sign | Unary::Sine | Unary::Cosine | Unary::ErrorFunction => (-1.0, 1.0),
        Unary::Floor | Unary::Exponential | Unary::ArcTangent | Unary::HyperbolicTangent => monotone(operation),
        Unary::SquareRoot => (low.max(0.0).sqrt(), high.max(0.0).sqrt()),
        Unary::Reciprocal => binary(Binary::Divide, (1.0, 1.0), (low, high)),
        Unary::HyperbolicCosine => (1.0, f64::INFINITY),
        Unary::ArcCosine => (0.0, std::f64::consts::PI),
        _ => ALL,
    }
}

fn binary(operation: Binary, left: Range, right: Range) -> Range {
    let corners = |operation: Binary| {
        let all = [(left.0, right.0), (left.0, right.1), (left.1, right.0), (left.1, right.1)];
        hull(all.into_iter().map(|(a, b)| {
            let value = functions::binary(operation, a, b);
            if value.is_nan() { (0.0, 0.0) } else { (value, value) }
        }))
    };
    match operation {
        Binary::Add => (left.0 + right.0, left.1 + right.1),
        Binary::Subtract => (left.0 - right.1, left.1 - right.0),
        Binary::Multiply | Binary::Minimum | Binary::Maximum => corners(operation),
        Binary::Divide if right.0 > 0.0 || right.1 < 0.0 => corners(operation),
        Binary::Hypotenuse => (0.0, f64::INFINITY),
        Binary::ArcTangent2 => (-std::f64::consts::PI, std::f64::consts::PI),
        Binary::Power if left.0 >= 0.0 => (0.0, f64::INFINITY),
        _ => ALL,
    }
}

fn power((low, high): Range, exponent: i32) -> Range {
    let ends = [low, high].map(|x| functions::power(x, exponent.abs()));
    let positive = if exponent % 2 == 0 && low < 0.0 && high > 0.0 {
        (0.0, ends[0].max(ends[1]))
    } else {
        (ends[0].min(ends[1]), ends[0].max(ends[1]))
    };
    if exponent > 0 { positive } else { binary(Binary::Divide, (1.0, 1.0), positive) }
}
