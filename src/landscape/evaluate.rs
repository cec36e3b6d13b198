//! A plain evaluator of terms: the checker's arithmetic on constants, and an independent check on the kernel.

use std::collections::HashMap;

use crate::language::tree::Reduction;
use crate::numbers::functions;
use crate::numbers::operation::Binary;

use super::Landscape;
use super::term::{Index, Term, TermId, Terms};

/// Evaluates terms at one point by plain recursion, loops and all. Slow and simple on purpose.
pub struct TermEvaluator<'a> {
    terms: &'a Terms,
    tables: &'a [Vec<f64>],
    lookups: &'a [Vec<i64>],
    unknowns: &'a [f64],
    families: Vec<Vec<f64>>,
    /// Values of the levels in scope.
    pub levels: Vec<i64>,
    closed: HashMap<TermId, f64>,
}

impl<'a> TermEvaluator<'a> {
    /// An evaluator without let families.
    pub fn new(terms: &'a Terms, tables: &'a [Vec<f64>], lookups: &'a [Vec<i64>], unknowns: &'a [f64]) -> Self {
        TermEvaluator {
            terms,
            tables,
            lookups,
            unknowns,
            families: Vec::new(),
            levels: vec![0; 64],
            closed: HashMap::new(),
        }
    }

    /// The value of a term; `None` where an index leaves its table, which a checked landscape never does.
    pub fn value(&mut self, id: TermId) -> Option<f64> {
        // Operations by a stack of our own: chains of them can be long. Loops and choices nest by recursion.
        let mut waiting = vec![(id, false)];
        let mut values: Vec<f64> = Vec::new();
        while let Some((id, ready)) = waiting.pop() {
            let closed = self.terms.info(id).levels == 0;
            let operation = self.terms.get(id);
            let value = match operation {
                Term::Unary(..) | Term::Binary(..) | Term::Power(..) if !ready => {
                    if let Some(&known) = self.closed.get(&id).filter(|_| closed) {
                        values.push(known);
                        continue;
                    }
                    waiting.push((id, true));
                    let n_waiting = waiting.len();
                    waiting.extend(operation.parts().map(|part| (part, false)));
                    waiting[n_waiting..].reverse();
                    continue;
                }
                Term::Unary(operation, _) => functions::unary(*operation, values.pop()?),
                Term::Binary(operation, ..) => {
                    let (right, left) = (values.pop()?, values.pop()?);
                    functions::binary(*operation, left, right)
                }
                Term::Power(_, exponent) => functions::power(values.pop()?, *exponent),
                _ => match self.closed.get(&id).filter(|_| closed) {
                    Some(&known) => known,
                    None => self.compute(id)?,
                },
            };
            if closed {
                self.closed.insert(id, value);
            }
            values.push(value);
        }
        values.pop()
    }

    fn compute(&mut self, id: TermId) -> Option<f64> {
        Some(match self.terms.get(id).clone() {
            Term::Constant(bits) => f64::from_bits(bits),
            Term::Counter(index) => self.index(&index)? as f64,
            Term::Table(table, index) => pick(&self.tables[table as usize], self.index(&index)?)?,
            Term::Unknown(index) => pick(self.unknowns, self.index(&index)?)?,
            Term::Family(family, index) => pick(self.families.get(family as usize)?, self.index(&index)?)?,
            // Operations are done by `value`.
            Term::Unary(..) | Term::Binary(..) | Term::Power(..) => self.value(id)?,
            Term::Reduce { operator, level, first, last, condition, body } => {
                let (first, last) = (self.index(&first)?, self.index(&last)?);
                let (mut result, operation) = match operator {
                    Reduction::Sum => (0.0, Binary::Add),
                    Reduction::Product => (1.0, Binary::Multiply),
                    Reduction::Minimum => (f64::INFINITY, Binary::Minimum),
                    Reduction::Maximum => (f64::NEG_INFINITY, Binary::Maximum),
                };
                let outer = self.levels[level as usize];
                for value in first..=last {
                    self.levels[level as usize] = value;
                    if condition.as_ref().is_none_or(|condition| condition.holds(&self.levels, self.lookups)) {
                        result = functions::binary(operation, result, self.value(body)?);
                    }
                }
                self.levels[level as usize] = outer;
                result
            }
            Term::Choose { condition, then, otherwise } => {
                let chosen = if condition.holds(&self.levels, self.lookups) { then } else { otherwise };
                self.value(chosen)?
            }
            Term::Select { relation, left, right, then, otherwise } => {
                let holds = relation.holds(self.value(left)?, self.value(right)?);
                self.value(if holds { then } else { otherwise })?
            }
        })
    }

    fn index(&self, index: &Index) -> Option<i64> {
        match index {
            Index::Affine(affine) => Some(affine.at(&self.levels)),
            Index::Lookup { table, at } => {
                let place = usize::try_from(at.at(&self.levels)).ok()?;
                self.lookups[*table as usize].get(place).copied()
            }
        }
    }
}

fn pick(values: &[f64], place: i64) -> Option<f64> {
    values.get(usize::try_from(place).ok()?).copied()
}

impl Landscape {
    /// The value of a term at a point, by plain recursion: an independent check on the compiled kernel.
    ///
    /// The objective's value has the sign of the minimised form.
    pub fn evaluate_term(&self, term: TermId, at: &[f64]) -> f64 {
        let mut evaluator = TermEvaluator::new(&self.terms, &self.tables, &self.lookups, at);
        for family in &self.families {
            let mut stored = vec![f64::NAN; family.count];
            evaluator.fill(&family.loops, 0, &mut |evaluator| {
                let place = evaluator.index(&family.place);
                let value = evaluator.value(family.body);
                if let (Some(place), Some(value)) = (place, value) {
                    stored[place as usize] = value;
                }
            });
            evaluator.families.push(stored);
        }
        evaluator.value(term).unwrap_or(f64::NAN)
    }
}

impl TermEvaluator<'_> {
    fn fill(&mut self, loops: &[(Index, Index)], level: usize, each: &mut impl FnMut(&mut Self)) {
        let Some((first, last)) = loops.get(level) else { return each(self) };
        let (Some(first), Some(last)) = (self.index(first), self.index(last)) else { return };
        for value in first..=last {
            self.levels[level] = value;
            self.fill(loops, level + 1, each);
        }
    }
}
