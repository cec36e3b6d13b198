//! Terms under construction: simplified as they are made, constants folded, loops known.
//!
//! Simplifications never change where a value is infinite or not a number: `0*x` stays, `x*1` does not.

use crate::language::diagnostic::{Diagnostic, Span};
use crate::language::tree::Reduction;
use crate::numbers::functions;
use crate::numbers::operation::{Binary, Relation, Unary};

use super::evaluate::TermEvaluator;
use super::mistake::Mistake;
use super::term::{Affine, Index, IndexCondition, Level, Term, TermId, Terms};
use super::value::Condition;
use super::{StoredFamily, value::Store};

/// A mistake that has been told already.
#[derive(Clone, Copy, Debug)]
pub struct Told;

/// A result whose failure has been told.
pub type Outcome<T> = Result<T, Told>;

/// One value of a landscape may take this many operations.
pub const MAX_WORK: f64 = 2e9;

/// Work that the checker itself does for one constant.
const MAX_CONSTANT_WORK: f64 = 1e8;

/// The largest table made of an expression in loop indices.
const MAX_TABLE: i64 = 4_000_000;

/// Steps that one proof of an index range may take.
const MAX_PROOF: u64 = 4_000_000;

/// Terms may stand this high one above the other.
const MAX_HEIGHT: u32 = 20_000;

/// A loop around the place under construction.
#[derive(Clone, Debug)]
pub struct LoopScope {
    /// The index's name.
    pub name: String,
    /// The first value.
    pub first: Index,
    /// The last value.
    pub last: Index,
    /// The least value that it can have.
    pub low: i64,
    /// The greatest value that it can have.
    pub high: i64,
}

/// What is being built.
#[derive(Default)]
pub struct Builder {
    /// All terms.
    pub terms: Terms,
    /// Operations that a term costs in one evaluation, by its number: repeats counted, parts not.
    pub work: Vec<f64>,
    /// Constant tables.
    pub tables: Vec<Vec<f64>>,
    /// Index tables.
    pub lookups: Vec<Vec<i64>>,
    /// Let families.
    pub families: Vec<StoredFamily>,
    /// The loops around this place; number k binds level k.
    pub loops: Vec<LoopScope>,
    /// Index conditions that hold at this place.
    pub conditions: Vec<IndexCondition>,
    /// What was found.
    pub diagnostics: Vec<Diagnostic>,
}

impl Builder {
    /// Tells a mistake.
    pub fn refuse<T>(&mut self, mistake: Mistake, span: Span) -> Outcome<T> {
        self.diagnostics.push(mistake.at(span));
        Err(Told)
    }

    /// Stores a term, and folds it when it is constant.
    pub fn make(&mut self, term: Term, span: Span) -> Outcome<TermId> {
        let id = self.terms.add(term);
        let info = self.terms.info(id);
        self.work.resize(self.terms.len(), 0.0);
        if info.height > MAX_HEIGHT {
            return self.refuse(Mistake::TooIntricate, span);
        }
        let own = match self.terms.get(id) {
            Term::Constant(_) => 0.0,
            Term::Unary(Unary::Negate | Unary::Absolute | Unary::Sign | Unary::Floor, _) => 1.0,
            Term::Unary(Unary::SquareRoot | Unary::Reciprocal, _) => 4.0,
            Term::Unary(..) => 20.0,
            Term::Binary(Binary::Power | Binary::ArcTangent2 | Binary::Hypotenuse, ..) => 40.0,
            Term::Power(..) => 3.0,
            _ => 1.0,
        };
        let inside = match self.terms.get(id) {
            Term::Reduce { first, last, .. } => (self.bound(last).1 - self.bound(first).0 + 1).max(0) as f64,
            _ => 1.0,
        };
        let repeats = self.repeats(info.levels) * inside;
        let place = id.0 as usize;
        self.work[place] = self.work[place].max(own * repeats);
        if info.unknowns || info.levels != 0 || matches!(self.terms.get(id), Term::Constant(_)) {
            return Ok(id);
        }
        let work = self.total_work([id]);
        if work > MAX_CONSTANT_WORK {
            return self.refuse(Mistake::TooMuchWork { work, limit: MAX_CONSTANT_WORK }, span);
        }
        let mut evaluator = TermEvaluator::new(&self.terms, &self.tables, &self.lookups, &[]);
        let value = evaluator.value(id).unwrap_or(f64::NAN);
        // Infinity may be written, not computed: as a bound, or where an `if` shuts a region out. Where a condition
        // that is known not to hold stands around this, the value does not matter.
        let parts = self.terms.get(id).parts().all(|part| self.number(part).is_none_or(f64::is_finite));
        let idle = |condition: &IndexCondition| condition.levels() == 0 && !condition.holds(&[], &self.lookups);
        if (value.is_nan() || value.is_infinite() && parts) && !self.conditions.iter().any(idle) {
            return self.refuse(Mistake::NotFinite { value }, span);
        }
        self.constant(value)
    }

    /// How often something that depends on these levels is computed, at most.
    fn repeats(&self, levels: u64) -> f64 {
        let trips = |scope: &LoopScope| (scope.high as f64 - scope.low as f64 + 1.0).max(0.0);
        self.loops
            .iter()
            .enumerate()
            .filter(|(level, _)| levels >> level & 1 == 1)
            .map(|(_, scope)| trips(scope))
            .product()
    }

    /// The work of some terms and all that they are made of, each counted once.
    pub fn total_work(&self, roots: impl IntoIterator<Item = TermId>) -> f64 {
        let mut seen = vec![false; self.terms.len()];
        let mut stack: Vec<TermId> = roots.into_iter().collect();
        let mut total = 0.0;
        while let Some(id) = stack.pop() {
            if !std::mem::replace(&mut seen[id.0 as usize], true) {
                total += self.work[id.0 as usize];
                stack.extend(self.terms.get(id).parts());
            }
        }
        total
    }

    /// A constant.
    pub fn constant(&mut self, value: f64) -> Outcome<TermId> {
        let id = self.terms.constant(value);
        self.work.resize(self.terms.len(), 0.0);
        Ok(id)
    }

    /// The number that a term is, if it is constant.
    pub fn number(&self, id: TermId) -> Option<f64> {
        match self.terms.get(id) {
            Term::Constant(bits) => Some(f64::from_bits(*bits)),
            Term::Counter(index) => index.constant().map(|whole| whole as f64),
            _ => None,
        }
    }

    /// An operation of one operand.
    pub fn unary(&mut self, operation: Unary, of: TermId, span: Span) -> Outcome<TermId> {
        if operation == Unary::Negate {
            match self.terms.get(of).clone() {
                Term::Unary(Unary::Negate, inner) => return Ok(inner),
                Term::Binary(Binary::Subtract, left, right) => return self.binary(Binary::Subtract, right, left, span),
                Term::Counter(Index::Affine(affine)) => {
                    if let Some(negative) = Affine::default().plus(&affine, -1) {
                        return self.make(Term::Counter(Index::Affine(negative)), span);
                    }
                }
                _ => {}
            }
        }
        let of = self.settle(of, span)?;
        self.make(Term::Unary(operation, of), span)
    }

    /// An operation of two operands.
    pub fn binary(&mut self, operation: Binary, left: TermId, right: TermId, span: Span) -> Outcome<TermId> {
        if let Some(id) = self.index_arithmetic(operation, left, right, span)? {
            return Ok(id);
        }
        let (a, b) = (self.number(left), self.number(right));
        match (operation, a, b) {
            (Binary::Add, Some(0.0), _)
            | (Binary::Multiply, Some(1.0), _)
            | (Binary::Minimum, Some(f64::INFINITY), _)
            | (Binary::Maximum, Some(f64::NEG_INFINITY), _) => return Ok(right),
            (Binary::Add | Binary::Subtract, _, Some(0.0)) | (Binary::Multiply | Binary::Divide, _, Some(1.0)) => {
                return Ok(left);
            }
            (Binary::Subtract, Some(0.0), _) | (Binary::Multiply, Some(-1.0), _) => {
                return self.unary(Unary::Negate, right, span);
            }
            (Binary::Multiply, _, Some(-1.0)) => return self.unary(Unary::Negate, left, span),
            // Constants to the left: one form for one product.
            (Binary::Multiply | Binary::Add, None, Some(_)) => return self.binary(operation, right, left, span),
            (Binary::Divide, Some(1.0), _) => return self.unary(Unary::Reciprocal, right, span),
            (Binary::Divide, _, Some(divisor)) if functions::is_power_of_two(divisor) => {
                let factor = self.constant(1.0 / divisor)?;
                return self.binary(Binary::Multiply, factor, left, span);
            }
            (Binary::Power, _, Some(exponent)) if exponent.floor() == exponent && exponent.abs() <= 1024.0 => {
                return self.power(left, exponent as i32, span);
            }
            (Binary::Power, _, Some(0.5)) => return self.unary(Unary::SquareRoot, left, span),
            (Binary::Power, _, Some(-0.5)) => {
                let root = self.unary(Unary::SquareRoot, left, span)?;
                return self.unary(Unary::Reciprocal, root, span);
            }
            _ => {}
        }
        if let (Binary::Add, Term::Unary(Unary::Negate, inner)) = (operation, self.terms.get(right).clone()) {
            return self.binary(Binary::Subtract, left, inner, span);
        }
        if let (Binary::Subtract, Term::Unary(Unary::Negate, inner)) = (operation, self.terms.get(right).clone()) {
            return self.binary(Binary::Add, left, inner, span);
        }
        let (left, right) = (self.settle(left, span)?, self.settle(right, span)?);
        self.make(Term::Binary(operation, left, right), span)
    }

    /// A whole power. `x^0` is 1 everywhere, as the language reference says.
    pub fn power(&mut self, base: TermId, exponent: i32, span: Span) -> Outcome<TermId> {
        match exponent {
            0 => self.constant(1.0),
            1 => Ok(base),
            -1 => self.unary(Unary::Reciprocal, base, span),
            _ => {
                let base = self.settle(base, span)?;
                self.make(Term::Power(base, exponent), span)
            }
        }
    }

    /// Sums, differences and products of whole numbers stay indices.
    fn index_arithmetic(
        &mut self,
        operation: Binary,
        left: TermId,
        right: TermId,
        span: Span,
    ) -> Outcome<Option<TermId>> {
        let whole = |builder: &Self, id: TermId| match builder.terms.get(id) {
            Term::Counter(Index::Affine(affine)) => Some(affine.clone()),
            Term::Constant(bits) => whole_number(f64::from_bits(*bits)).map(Affine::constant),
            _ => None,
        };
        let counters = |id: TermId| matches!(self.terms.get(id), Term::Counter(_));
        if !counters(left) && !counters(right) {
            return Ok(None);
        }
        let (Some(a), Some(b)) = (whole(self, left), whole(self, right)) else { return Ok(None) };
        let result = match operation {
            Binary::Add => a.plus(&b, 1),
            Binary::Subtract => a.plus(&b, -1),
            Binary::Multiply if a.factors.is_empty() => Affine::default().plus(&b, a.constant),
            Binary::Multiply if b.factors.is_empty() => Affine::default().plus(&a, b.constant),
            _ => None,
        };
        result.map(|affine| self.make(Term::Counter(Index::Affine(affine)), span)).transpose()
    }

    /// Replaces something made of loop indices alone by a table of its values, when it is more than an index and the
    /// table is small: it is then computed once and not at every point.
    fn settle(&mut self, id: TermId, span: Span) -> Outcome<TermId> {
        let info = self.terms.info(id);
        let plain = matches!(self.terms.get(id), Term::Constant(_) | Term::Counter(_) | Term::Table(..));
        if info.unknowns || info.levels == 0 || plain || self.table_size(info.levels).is_none_or(|size| size > 100_000)
        {
            return Ok(id);
        }
        let (values, at) = self.tabulate(id, span)?;
        let values: Vec<f64> = values.into_iter().map(|value| value.unwrap_or(0.0)).collect();
        let table = match self.tables.iter().position(|table| same_bits(table, &values)) {
            Some(known) => known,
            None => {
                self.tables.push(values);
                self.tables.len() - 1
            }
        };
        self.make(Term::Table(table as u32, Index::Affine(at)), span)
    }

    fn table_size(&self, levels: u64) -> Option<i64> {
        let used = self.loops.iter().enumerate().filter(|(level, _)| levels >> level & 1 == 1);
        used.map(|(_, scope)| (scope.high - scope.low).checked_add(1).map(|size| size.max(1)))
            .try_fold(1_i64, |size, trips| size.checked_mul(trips?))
            .filter(|&size| size <= MAX_TABLE)
    }

    /// The values of something made of loop indices, over the box of their ranges, and the place of the value for the
    /// indices at hand. Places that no loop reaches may have no value.
    fn tabulate(&mut self, id: TermId, span: Span) -> Outcome<(Vec<Option<f64>>, Affine)> {
        let levels = self.terms.info(id).levels;
        let Some(size) = self.table_size(levels) else {
            return self.refuse(Mistake::RangeUnproven, span);
        };
        let used: Vec<(Level, i64, i64)> = (0..self.loops.len())
            .filter(|level| levels >> level & 1 == 1)
            .map(|level| (level as Level, self.loops[level].low, self.loops[level].high))
            .collect();
        let mut at = Affine::default();
        let mut stride = 1;
        for &(level, low, high) in used.iter().rev() {
            let next = at.plus(&Affine::level(level), stride).and_then(|at| at.plus(&Affine::constant(low), -stride));
            let Some(next) = next else { return self.refuse(Mistake::RangeUnproven, span) };
            at = next;
            stride *= (high - low + 1).max(1);
        }
        let mut values = Vec::with_capacity(size as usize);
        let mut evaluator = TermEvaluator::new(&self.terms, &self.tables, &self.lookups, &[]);
        for place in 0..size {
            let mut rest = place;
            for &(level, low, high) in used.iter().rev() {
                let trips = (high - low + 1).max(1);
                evaluator.levels[level as usize] = low + rest % trips;
                rest /= trips;
            }
            values.push(evaluator.value(id));
        }
        Ok((values, at))
    }

    /// A term as an index.
    pub fn index(&mut self, id: TermId, span: Span) -> Outcome<Index> {
        match self.terms.get(id).clone() {
            Term::Counter(index) => return Ok(index),
            Term::Constant(bits) => {
                let value = f64::from_bits(bits);
                return match whole_number(value) {
                    Some(whole) => Ok(Index::Affine(Affine::constant(whole))),
                    None => self.refuse(Mistake::NotWhole(value), span),
                };
            }
            _ => {}
        }
        if self.terms.info(id).unknowns {
            return self.refuse(Mistake::UnknownInIndex, span);
        }
        let (values, at) = self.tabulate(id, span)?;
        let mut wholes = Vec::with_capacity(values.len());
        for value in values {
            match value.map(|value| (value, whole_number(value))) {
                None => wholes.push(0),
                Some((_, Some(whole))) => wholes.push(whole),
                Some((value, None)) => return self.refuse(Mistake::NotWhole(value), span),
            }
        }
        Ok(Index::Lookup { table: self.lookup(wholes), at })
    }

    fn lookup(&mut self, wholes: Vec<i64>) -> u32 {
        let known = self.lookups.iter().position(|table| *table == wholes);
        known.unwrap_or_else(|| {
            self.lookups.push(wholes);
            self.lookups.len() - 1
        }) as u32
    }

    /// A comparison: of indices where both sides are made of loop indices and constants only.
    pub fn compare(&mut self, relation: Relation, left: TermId, right: TermId, span: Span) -> Outcome<Condition> {
        if self.terms.info(left).unknowns || self.terms.info(right).unknowns {
            let (left, right) = (self.settle(left, span)?, self.settle(right, span)?);
            return Ok(Condition::Compare(relation, left, right));
        }
        let whole = |builder: &Self, id: TermId| match builder.terms.get(id) {
            Term::Counter(index) => Some(index.clone()),
            Term::Constant(bits) => {
                whole_number(f64::from_bits(*bits)).map(|whole| Index::Affine(Affine::constant(whole)))
            }
            _ => None,
        };
        if let (Some(left), Some(right)) = (whole(self, left), whole(self, right)) {
            return Ok(Condition::Index(IndexCondition::Compare(relation, left, right)));
        }
        // Anything else of constants and indices is decided now, place by place.
        let one = self.constant(1.0)?;
        let zero = self.constant(0.0)?;
        let chosen = self.make(Term::Select { relation, left, right, then: one, otherwise: zero }, span)?;
        let index = self.index(chosen, span)?;
        let zero = Index::Affine(Affine::constant(0));
        Ok(Condition::Index(IndexCondition::Compare(Relation::NotEqual, index, zero)))
    }

    /// One of two numbers.
    pub fn choose(&mut self, condition: &Condition, then: TermId, otherwise: TermId, span: Span) -> Outcome<TermId> {
        if then == otherwise {
            return Ok(then);
        }
        match condition {
            Condition::Index(condition) if condition.levels() == 0 => {
                Ok(if condition.holds(&[], &self.lookups) { then } else { otherwise })
            }
            Condition::Index(condition) => {
                self.make(Term::Choose { condition: condition.clone(), then, otherwise }, span)
            }
            Condition::Compare(relation, left, right) => {
                let (relation, left, right) = (*relation, *left, *right);
                let (then, otherwise) = (self.settle(then, span)?, self.settle(otherwise, span)?);
                self.make(Term::Select { relation, left, right, then, otherwise }, span)
            }
            Condition::And(a, b) => {
                let inner = self.choose(b, then, otherwise, span)?;
                self.choose(a, inner, otherwise, span)
            }
            Condition::Or(a, b) => {
                let inner = self.choose(b, then, otherwise, span)?;
                self.choose(a, then, inner, span)
            }
            Condition::Not(inner) => self.choose(inner, otherwise, then, span),
        }
    }

    /// A reduction over the innermost loop, which the caller has pushed and now pops.
    pub fn reduce(
        &mut self,
        operator: Reduction,
        scope: &LoopScope,
        condition: Option<IndexCondition>,
        body: TermId,
        span: Span,
    ) -> Outcome<TermId> {
        let level = self.loops.len() as Level;
        if operator == Reduction::Sum {
            // A constant factor is multiplied once and not in every turn.
            match self.terms.get(body).clone() {
                Term::Binary(Binary::Multiply, factor, rest) if self.number(factor).is_some() => {
                    let sum = self.reduce(operator, scope, condition, rest, span)?;
                    return self.binary(Binary::Multiply, factor, sum, span);
                }
                Term::Unary(Unary::Negate, rest) => {
                    let sum = self.reduce(operator, scope, condition, rest, span)?;
                    return self.unary(Unary::Negate, sum, span);
                }
                _ => {}
            }
        }
        let (first, last) = (scope.first.clone(), scope.last.clone());
        self.make(Term::Reduce { operator, level, first, last, condition, body }, span)
    }

    /// The least and greatest value of an index over the loops around this place.
    pub fn bound(&self, index: &Index) -> (i64, i64) {
        let affine = |affine: &Affine| {
            affine.factors.iter().fold((affine.constant, affine.constant), |(low, high), &(level, factor)| {
                let (a, b) = self.loops.get(level as usize).map_or((0, 0), |scope| (scope.low, scope.high));
                let (a, b) = (a.saturating_mul(factor), b.saturating_mul(factor));
                (low.saturating_add(a.min(b)), high.saturating_add(a.max(b)))
            })
        };
        match index {
            Index::Affine(form) => affine(form),
            Index::Lookup { table, .. } => {
                let values = &self.lookups[*table as usize];
                (values.iter().copied().min().unwrap_or(0), values.iter().copied().max().unwrap_or(0))
            }
        }
    }

    /// Demands that an index stays within `first..first + count - 1`, whatever the loops around it do.
    pub fn demand_range(&mut self, index: &Index, first: i64, count: usize, span: Span) -> Outcome<()> {
        let last = first + count as i64 - 1;
        let (low, high) = self.bound(index);
        if first <= low && high <= last {
            return Ok(());
        }
        let depth = self.loops.len();
        // Whether anything inside a loop depends on its index.
        let mut inside = index.levels() | self.conditions.iter().fold(0, |levels, part| levels | part.levels());
        let mut matters = vec![false; depth];
        for level in (0..depth).rev() {
            matters[level] = inside >> level & 1 == 1;
            inside |= self.loops[level].first.levels() | self.loops[level].last.levels();
        }
        let mut proof = Proof { builder: self, index, first, last, matters, levels: vec![0; 64], steps: 0 };
        match proof.search(0, depth) {
            Ok(None) => Ok(()),
            Ok(Some((value, levels))) => {
                let loops = self.loops.iter().zip(levels).map(|(scope, value)| (scope.name.clone(), value)).collect();
                self.refuse(Mistake::OutOfRange { value, first, last, loops }, span)
            }
            Err(Told) => self.refuse(Mistake::RangeUnproven, span),
        }
    }

    /// The place of an element in a store, row by row.
    pub fn flatten(
        &mut self,
        indices: &[Index],
        axes: &[super::AxisRange],
        offset: &Index,
        span: Span,
    ) -> Outcome<Index> {
        let mut flat = self.index_term(offset, span)?;
        for (k, (index, axis)) in indices.iter().zip(axes).enumerate() {
            let stride: usize = axes[k + 1..].iter().map(|axis| axis.count).product();
            let place = self.index_term(index, span)?;
            let first = self.constant(axis.first as f64)?;
            let place = self.binary(Binary::Subtract, place, first, span)?;
            let stride = self.constant(stride as f64)?;
            let place = self.binary(Binary::Multiply, stride, place, span)?;
            flat = self.binary(Binary::Add, flat, place, span)?;
        }
        self.index(flat, span)
    }

    /// An index as a number.
    pub fn index_term(&mut self, index: &Index, span: Span) -> Outcome<TermId> {
        match index.constant() {
            Some(whole) => self.constant(whole as f64),
            None => self.make(Term::Counter(index.clone()), span),
        }
    }

    /// An element of a store.
    pub fn load(&mut self, store: Store, place: Index, span: Span) -> Outcome<TermId> {
        let term = match store {
            Store::Table(table) => Term::Table(table, place),
            Store::Unknowns => Term::Unknown(place),
            Store::Family(family) => Term::Family(family, place),
        };
        self.make(term, span)
    }
}

/// A whole number in the range where floats count exactly.
pub fn whole_number(value: f64) -> Option<i64> {
    (value.floor() == value && value.abs() <= 9e15).then_some(value as i64)
}

fn same_bits(left: &[f64], right: &[f64]) -> bool {
    left.len() == right.len() && left.iter().zip(right).all(|(a, b)| a.to_bits() == b.to_bits())
}

/// A search for loop values at which an index leaves its range, smallest values first.
struct Proof<'a> {
    builder: &'a Builder,
    index: &'a Index,
    first: i64,
    last: i64,
    /// For each loop, whether its index matters: where it does not, its first turn stands for all.
    matters: Vec<bool>,
    levels: Vec<i64>,
    steps: u64,
}

impl Proof<'_> {
    fn search(&mut self, level: usize, depth: usize) -> Outcome<Option<(i64, Vec<i64>)>> {
        let lookups = &self.builder.lookups;
        if level == depth {
            let holds = |condition: &IndexCondition| condition.holds(&self.levels, lookups);
            if !self.builder.conditions.iter().all(holds) {
                return Ok(None);
            }
            let value = self.index.at(&self.levels, lookups);
            let inside = self.first <= value && value <= self.last;
            return Ok((!inside).then(|| (value, self.levels[..depth].to_vec())));
        }
        let scope = &self.builder.loops[level];
        let (first, last) = (scope.first.at(&self.levels, lookups), scope.last.at(&self.levels, lookups));
        for value in first..=last {
            self.steps += 1;
            if self.steps > MAX_PROOF {
                return Err(Told);
            }
            self.levels[level] = value;
            if let Some(found) = self.search(level + 1, depth)? {
                return Ok(Some(found));
            }
            if !self.matters[level] {
                break;
            }
        }
        Ok(None)
    }
}
