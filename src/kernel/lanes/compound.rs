//! Innermost loops made faster: runs of operations in one, and two turns side by side.
//!
//! An interpreter waits for memory: each operation writes its row, and the next reads it back. *Compound* operations keep
//! what only they need in machine registers. Two turns of a loop *paired*, operation by operation, let one wait while
//! the other works. Both keep every rounding and, for each row that several operations touch, their order; so the bits
//! stay those of the plain code.

use std::collections::{BTreeMap, BTreeSet};

use crate::landscape::term::Affine;

use super::code::{Kind, Operation, Pointer};

/// Joins operations whose intermediate result nothing else needs. `temporary` are the pointers to registers that each
/// turn sets before it reads them and nothing reads behind the loop; `apart` says of two pointers that they never point
/// to one row in one turn.
pub fn join(
    operations: &[Operation],
    temporary: &BTreeSet<Pointer>,
    apart: &dyn Fn(Pointer, Pointer) -> bool,
) -> Vec<Operation> {
    let mut joined = Vec::with_capacity(operations.len());
    let mut place = 0;
    while place < operations.len() {
        let rest = &operations[place..];
        let (operation, length) = spread(rest, temporary, apart)
            .or_else(|| square(rest))
            .or_else(|| add_difference(rest, temporary))
            .or_else(|| add_less_product(rest, temporary))
            .or_else(|| powers(rest))
            .unwrap_or((rest[0], 1));
        joined.push(operation);
        place += length;
    }
    joined
}

/// `t = a * b; to = to + t; row = row - t`
fn spread(
    rest: &[Operation],
    temporary: &BTreeSet<Pointer>,
    apart: &dyn Fn(Pointer, Pointer) -> bool,
) -> Option<(Operation, usize)> {
    let [product, sum, difference, after @ ..] = rest else { return None };
    let t = product.to;
    let [a, b, ..] = product.from;
    let fits = product.kind == Kind::Multiply
        && sum.kind == Kind::Add
        && (sum.from[0], sum.from[1]) == (sum.to, t)
        && difference.kind == Kind::Subtract
        && (difference.from[0], difference.from[1]) == (difference.to, t)
        && sum.to != t
        && difference.to != t
        // Both are read before either is written.
        && apart(sum.to, difference.to)
        && ![a, b].contains(&sum.to)
        && ![a, b].contains(&difference.to)
        && is_dead(t, after, temporary);
    fits.then_some((
        Operation { kind: Kind::Spread, to: sum.to, from: [a, b, difference.to, 0], extra: 0, twin: false },
        3,
    ))
}

/// `to = a - b; s = to * to`, or `s = to * to + c`
fn square(rest: &[Operation]) -> Option<(Operation, usize)> {
    let [difference, product, ..] = rest else { return None };
    let d = difference.to;
    let [a, b, ..] = difference.from;
    let fits = difference.kind == Kind::Subtract && (product.from[0], product.from[1]) == (d, d) && product.to != d;
    let c = product.from[2];
    match product.kind {
        Kind::Multiply if fits => {
            Some((Operation { kind: Kind::Square, to: d, from: [a, b, product.to, 0], extra: 0, twin: false }, 2))
        }
        Kind::MultiplyAdd if fits && c != d => {
            Some((Operation { kind: Kind::SquareAdd, to: d, from: [a, b, product.to, c], extra: 0, twin: false }, 2))
        }
        _ => None,
    }
}

/// `t = a - b; to = c + t`
fn add_difference(rest: &[Operation], temporary: &BTreeSet<Pointer>) -> Option<(Operation, usize)> {
    let [difference, sum, after @ ..] = rest else { return None };
    let t = difference.to;
    let [a, b, ..] = difference.from;
    let c = match (sum.from[0], sum.from[1]) {
        (c, right) if right == t && c != t => c,
        (left, c) if left == t && c != t => c,
        _ => return None,
    };
    let fits =
        difference.kind == Kind::Subtract && sum.kind == Kind::Add && (sum.to == t || is_dead(t, after, temporary));
    fits.then_some((Operation { kind: Kind::AddDifference, to: sum.to, from: [a, b, c, 0], extra: 0, twin: false }, 2))
}

/// `u = a * b; t = d - u; to = c + t`
fn add_less_product(rest: &[Operation], temporary: &BTreeSet<Pointer>) -> Option<(Operation, usize)> {
    let [product, tail @ ..] = rest else { return None };
    if product.kind != Kind::Multiply {
        return None;
    }
    let (sum, length) = add_difference(tail, temporary)?;
    let [d, u, c, _] = sum.from;
    let fits = u == product.to && d != u && c != u && is_dead(u, &tail[length..], temporary);
    let [a, b, ..] = product.from;
    fits.then_some((
        Operation { kind: Kind::AddLessProduct, to: sum.to, from: [a, b, c, d], extra: 0, twin: false },
        length + 1,
    ))
}

/// `to = 1 / a; c = to * to`, or `to = a * a; c = a * to`
fn powers(rest: &[Operation]) -> Option<(Operation, usize)> {
    let [first, second, ..] = rest else { return None };
    let (a, t) = (first.from[0], first.to);
    if second.kind != Kind::Multiply || second.to == t || t == a {
        return None;
    }
    let factors = (second.from[0], second.from[1]);
    let kind = match first.kind {
        Kind::Reciprocal if factors == (t, t) => Kind::ReciprocalSquare,
        Kind::Multiply if first.from[1] == a && (factors == (a, t) || factors == (t, a)) => Kind::SquareProduct,
        _ => return None,
    };
    Some((Operation { kind, to: t, from: [a, 0, second.to, 0], extra: 0, twin: false }, 2))
}

/// Joins the three squares of a distance, and three spreads in a row, into one operation each.
///
/// To be called last: wide operations keep their pointers aside. Two lists that differ in the names of pointers alone
/// widen alike.
pub fn widen(
    operations: &[Operation],
    temporary: &BTreeSet<Pointer>,
    wides: &mut Vec<[Pointer; 12]>,
) -> Vec<Operation> {
    let mut widened = Vec::with_capacity(operations.len());
    let mut place = 0;
    while place < operations.len() {
        let ([first, second, third], after) = match &operations[place..] {
            [first, second, third, after @ ..] => ([first, second, third], after),
            rest => {
                widened.extend(rest);
                break;
            }
        };
        let chained = second.from[3] == first.from[2] && third.from[3] == second.from[2];
        // Differences and sums in rows of their own, so that nothing is read that was only just written.
        let results = [first.to, second.to, third.to, third.from[2]];
        let inputs = [first.from[0], first.from[1], second.from[0], second.from[1], third.from[0], third.from[1]];
        let apart = (0..4).all(|k| !inputs.contains(&results[k]) && !results[..k].contains(&results[k]));
        // The squares and their first sum are not written.
        let passing = || {
            [first.from[2], second.from[2]].iter().all(|square| {
                !inputs.contains(square)
                    && (results.contains(square) || is_dead(*square, after, temporary))
                    && !results[..3].contains(square)
            })
        };
        let kinds = (first.kind, second.kind, third.kind);
        let kind = match kinds {
            (Kind::Square, Kind::SquareAdd, Kind::SquareAdd) if chained && apart && passing() => Kind::Distance,
            (Kind::Spread, Kind::Spread, Kind::Spread) => Kind::SpreadThree,
            _ => {
                widened.push(*first);
                place += 1;
                continue;
            }
        };
        let mut wide = [0; 12];
        for (pointers, operation) in
            wide.chunks_exact_mut(if kind == Kind::Distance { 3 } else { 4 }).zip([first, second, third])
        {
            let [a, b, c, _] = operation.from;
            if kind == Kind::Distance {
                pointers.copy_from_slice(&[a, b, operation.to]);
            } else {
                pointers.copy_from_slice(&[a, b, operation.to, c]);
            }
        }
        if kind == Kind::Distance {
            wide[9] = third.from[2];
        }
        wides.push(wide);
        let extra = wides.len() as u32 - 1;
        widened.push(Operation { kind, to: wide[2], from: [0; 4], extra, twin: false });
        place += 3;
    }
    widened
}

/// Whether nothing reads a register before it is set again.
fn is_dead(register: Pointer, after: &[Operation], temporary: &BTreeSet<Pointer>) -> bool {
    for operation in after {
        if operation.reads().contains(&register) {
            return false;
        }
        if operation.writes().contains(&register) {
            return true;
        }
    }
    temporary.contains(&register)
}

/// The pointers that a turn sets before it reads them, of those that may count: nothing passes through them to another
/// turn.
pub fn temporaries(operations: &[Operation], may_count: impl Fn(Pointer) -> bool) -> BTreeSet<Pointer> {
    let (mut temporary, mut carried) = (BTreeSet::new(), BTreeSet::new());
    for operation in operations {
        carried.extend(operation.reads().into_iter().filter(|pointer| !temporary.contains(pointer)));
        let set = operation.writes().into_iter().filter(|pointer| may_count(*pointer) && !carried.contains(pointer));
        temporary.extend(set.collect::<Vec<_>>());
    }
    temporary
}

/// Where a pointer into a buffer stands in a turn.
#[derive(Clone, Debug)]
pub struct Standing {
    /// The first row of the buffer.
    pub first: usize,
    /// The row behind it, from the counters.
    pub row: Affine,
    /// By how much it moves with each turn.
    pub stride: i64,
}

/// Whether a turn and the next may go side by side, operation by operation: then operation p of the second comes before
/// operation q > p of the first, and what both touch must not depend on that order.
pub fn can_pair(
    operations: &[Operation],
    temporary: &BTreeSet<Pointer>,
    standing: &BTreeMap<Pointer, Standing>,
) -> bool {
    let known = [
        Kind::Copy,
        Kind::Add,
        Kind::Subtract,
        Kind::Multiply,
        Kind::MultiplyAdd,
        Kind::Reciprocal,
        Kind::Negate,
        Kind::SquareRoot,
        Kind::Unary,
        Kind::Binary,
        Kind::Select,
        Kind::Fill,
        Kind::Spread,
        Kind::Square,
        Kind::SquareAdd,
        Kind::AddDifference,
        Kind::AddLessProduct,
        Kind::ReciprocalSquare,
        Kind::SquareProduct,
    ];
    if operations.iter().any(|operation| !known.contains(&operation.kind)) {
        return false;
    }
    let touches = |operation: &Operation| -> Vec<(Pointer, bool)> {
        let reads = operation.reads().into_iter().map(|pointer| (pointer, false));
        let writes = operation.writes().into_iter().map(|pointer| (pointer, true));
        reads.chain(writes).filter(|(pointer, _)| !temporary.contains(pointer)).collect()
    };
    for (p, second) in operations.iter().enumerate() {
        for first in &operations[p + 1..] {
            for (b, b_writes) in touches(second) {
                for (a, a_writes) in touches(first) {
                    if (a_writes || b_writes) && may_meet((a, standing.get(&a)), (b, standing.get(&b))) {
                        return false;
                    }
                }
            }
        }
    }
    true
}

/// Whether a pointer of one turn and a pointer of the next may be the same row.
fn may_meet((a, in_first): (Pointer, Option<&Standing>), (b, in_second): (Pointer, Option<&Standing>)) -> bool {
    match (in_first, in_second) {
        (Some(a), Some(b)) => {
            a.first == b.first && (a.row.factors != b.row.factors || a.row.constant == b.row.constant + b.stride)
        }
        // A register, or a row that does not move.
        (None, None) => a == b,
        // A row that moves and one that does not: apart where they are of different kinds, which is not known here.
        _ => true,
    }
}
