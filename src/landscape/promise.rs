//! The meaning of `alike` statements: promises as actions on slots.

use crate::language::diagnostic::Span;
use crate::language::suggest;
use crate::language::tree::{Promise, PromiseKind, PromiseOperand};

use super::build::Outcome;
use super::check::Checker;
use super::mistake::Mistake;
use super::symmetry::Symmetry;

impl Checker<'_> {
    pub(super) fn promise(&mut self, promise: &Promise) -> Outcome<Symmetry> {
        let operands: Vec<Outcome<Vec<Vec<usize>>>> =
            promise.operands.iter().map(|operand| self.rows(operand)).collect();
        let operands: Vec<Vec<Vec<usize>>> = operands.into_iter().collect::<Outcome<_>>()?;
        let span = promise.span;
        match promise.kind {
            PromiseKind::Exchange => {
                let rows = self.join(operands, "exchange", span)?;
                self.demand_like_rows(&rows, span)?;
                Ok(Symmetry::Exchange { rows })
            }
            PromiseKind::Reverse => {
                let rows = self.join(operands, "reverse", span)?;
                self.demand_like_rows(&rows, span)?;
                Ok(Symmetry::Reverse { rows })
            }
            PromiseKind::Cycle => {
                let rows = self.join(operands, "cycle", span)?;
                self.demand_like_rows(&rows, span)?;
                Ok(Symmetry::Cycle { rows })
            }
            PromiseKind::Shift => {
                let rows = self.unite(operands, None, "shift", span)?;
                let periods = (0..rows[0].len())
                    .map(|column| {
                        let slot = &self.slots[rows[0][column]];
                        slot.cyclic.then_some(slot.upper - slot.lower)
                    })
                    .collect();
                Ok(Symmetry::Shift { rows, periods })
            }
            PromiseKind::Rotate => Ok(Symmetry::Rotate { rows: self.unite(operands, Some(2..=3), "rotate", span)? }),
            PromiseKind::Mirror => Ok(Symmetry::Mirror { rows: self.unite(operands, Some(2..=3), "mirror", span)? }),
            PromiseKind::Flip => Ok(Symmetry::Flip { slots: operands.into_iter().flatten().flatten().collect() }),
        }
    }

    /// The rows of an operand.
    fn rows(&mut self, operand: &PromiseOperand) -> Outcome<Vec<Vec<usize>>> {
        let name = &operand.name;
        let Some(family) = self.unknown_family(&name.text) else {
            if self.is_unknown(&name.text) {
                // Its declaration was refused.
                return Err(super::build::Told);
            }
            if self.is_defined(&name.text) {
                return self.build.refuse(Mistake::PromiseNeedsUnknown(name.text.clone()), name.span);
            }
            let known: Vec<String> = self.unknowns.iter().map(|family| family.name.clone()).collect();
            let meant = suggest(&name.text, known.iter().map(String::as_str));
            return self.build.refuse(Mistake::UnknownName { name: name.text.clone(), meant }, name.span);
        };
        let length: usize = family.axes.iter().skip(1).map(|axis| axis.count).product();
        let all: Vec<Vec<usize>> = (0..family.count / length)
            .map(|row| (0..length).map(|column| family.first_slot + row * length + column).collect())
            .collect();
        let Some((first, last)) = &operand.rows else { return Ok(all) };
        let (first, last) = (self.index(first)?, self.index(last)?);
        let start = family.axes.first().map_or(1, |axis| axis.first);
        match (first.constant(), last.constant()) {
            (Some(first), Some(last)) if start <= first && first <= last && last < start + all.len() as i64 => {
                Ok(all[(first - start) as usize..=(last - start) as usize].to_vec())
            }
            (Some(first), Some(last)) => self.build.refuse(Mistake::PromiseRows { first, last }, operand.span),
            _ => self.build.refuse(Mistake::LoopInConstant, operand.span),
        }
    }

    /// Row i of the whole is row i of each operand, one behind the other.
    fn join(&mut self, operands: Vec<Vec<Vec<usize>>>, kind: &'static str, span: Span) -> Outcome<Vec<Vec<usize>>> {
        let n_rows = operands[0].len();
        if operands.iter().any(|operand| operand.len() != n_rows) {
            return self.build.refuse(Mistake::PromiseShapes, span);
        }
        if n_rows < 2 {
            return self.build.refuse(Mistake::PromiseOneRow(kind), span);
        }
        Ok((0..n_rows).map(|row| operands.iter().flat_map(|operand| operand[row].clone()).collect()).collect())
    }

    /// The rows of all operands, moved together.
    fn unite(
        &mut self,
        operands: Vec<Vec<Vec<usize>>>,
        lengths: Option<std::ops::RangeInclusive<usize>>,
        kind: &'static str,
        span: Span,
    ) -> Outcome<Vec<Vec<usize>>> {
        // `rotate (x, y)` of two single unknowns: one point with these coordinates.
        let mut rows: Vec<Vec<usize>> = operands.concat();
        let scalars = operands.iter().all(|operand| operand.len() == 1 && operand[0].len() == 1);
        if lengths.is_some() && scalars && operands.len() > 1 {
            rows = vec![rows.concat()];
        }
        let length = rows[0].len();
        if rows.iter().any(|row| row.len() != length) {
            return self.build.refuse(Mistake::PromiseShapes, span);
        }
        if lengths.is_some_and(|lengths| !lengths.contains(&length)) {
            return self.build.refuse(Mistake::PromiseDimensions { kind, length }, span);
        }
        Ok(rows)
    }

    fn demand_like_rows(&mut self, rows: &[Vec<usize>], span: Span) -> Outcome<()> {
        let bounds = |slot: usize| {
            let slot = &self.slots[slot];
            (slot.lower, slot.upper, slot.cyclic)
        };
        let alike = rows.iter().all(|row| row.iter().zip(&rows[0]).all(|(&a, &b)| bounds(a) == bounds(b)));
        if alike { Ok(()) } else { self.build.refuse(Mistake::PromiseBounds, span) }
    }
}
