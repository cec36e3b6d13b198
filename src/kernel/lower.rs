//! From terms to a program: every term once, in the outermost block where it may stand.
//!
//! That is sharing and hoisting in one: a term is looked up in the blocks around it, and a new one goes to the outermost
//! block that binds its levels. Exceptions:
//!
//! - nothing leaves a block that an index condition guards: what it reads may be out of range elsewhere;
//! - a load leaves a loop only when its index is in range for all values of the loops outside, since the loop may be
//!   empty where the index is not;
//! - an operation that can give infinity or NaN leaves no loop that can be empty: its adjoint would then be computed
//!   where its value is not used, and 0 times infinity would leak out.
//!
//! Registers are assigned once, with two exceptions that later passes know: the accumulator of a reduction is set before
//! its loop and updated as `acc = acc op x` inside, and the result of a [`Step::When`] is set by a `Copy` at the end of
//! both of its blocks.

use std::collections::HashMap;

use crate::landscape::term::{Affine, Index, IndexCondition, Level, Term, TermId};
use crate::landscape::{Landscape, StoredFamily};
use crate::language::tree::Reduction;
use crate::numbers::operation::{Binary, Unary};

use super::program::{BufferId, Instruction, Program, Register, Role, Step};

/// A program that computes the value at a point.
pub fn lower_value(landscape: &Landscape) -> Program {
    let mut lowering = Lowering::new(landscape);
    let value = lowering.program.add_buffer(Role::Value, 1);
    let register = lowering.term(landscape.objective);
    lowering.store(value, 0, register);
    lowering.finish()
}

/// A program that computes all shown quantities, in order; none where the problem shows none.
pub fn lower_shown(landscape: &Landscape) -> Option<Program> {
    let elements: Vec<TermId> = landscape.shows.iter().flat_map(|show| show.elements.iter().copied()).collect();
    if elements.is_empty() {
        return None;
    }
    let mut lowering = Lowering::new(landscape);
    let shown = lowering.program.add_buffer(Role::Shown, elements.len());
    for (place, element) in elements.into_iter().enumerate() {
        let register = lowering.term(element);
        lowering.store(shown, place, register);
    }
    Some(lowering.finish())
}

/// A block under construction.
struct Scope {
    steps: Vec<Step>,
    known: HashMap<TermId, Register>,
    kind: ScopeKind,
}

enum ScopeKind {
    /// The program's own block.
    Whole,
    /// The body of a loop that binds a level of the terms.
    Loop { level: Level, low: i64, high: i64, can_be_empty: bool },
    /// A block under an index condition.
    Branch,
}

struct Lowering<'a> {
    landscape: &'a Landscape,
    program: Program,
    scopes: Vec<Scope>,
    unknowns: BufferId,
    families: HashMap<u32, BufferId>,
}

impl<'a> Lowering<'a> {
    fn new(landscape: &'a Landscape) -> Self {
        let mut program =
            Program { tables: landscape.tables.clone(), lookups: landscape.lookups.clone(), ..Program::default() };
        let unknowns = program.add_buffer(Role::Unknowns, landscape.slots.len());
        let scopes = vec![Scope { steps: Vec::new(), known: HashMap::new(), kind: ScopeKind::Whole }];
        Lowering { landscape, program, scopes, unknowns, families: HashMap::new() }
    }

    fn finish(mut self) -> Program {
        self.program.body = std::mem::take(&mut self.scopes[0].steps);
        self.program
    }

    fn store(&mut self, buffer: BufferId, place: usize, from: Register) {
        let at = Index::Affine(Affine::constant(place as i64));
        self.scopes[0].steps.push(Step::Do(Instruction::Store { buffer, at, from }));
    }

    fn term(&mut self, id: TermId) -> Register {
        self.place(id).0
    }

    /// The register of a term and the number of the scope that it stands in.
    fn place(&mut self, id: TermId) -> (Register, usize) {
        // Parts before wholes, by a stack of our own: chains of operations can be long. Loops and choices nest by recursion.
        let mut waiting = vec![(id, false)];
        let mut placed = None;
        while let Some((id, ready)) = waiting.pop() {
            placed = self.find(id);
            if placed.is_some() {
                continue;
            }
            let term = self.landscape.terms.get(id);
            if !ready && matches!(term, Term::Unary(..) | Term::Binary(..) | Term::Power(..) | Term::Select { .. }) {
                waiting.push((id, true));
                let n_waiting = waiting.len();
                waiting.extend(term.parts().map(|part| (part, false)));
                waiting[n_waiting..].reverse();
                continue;
            }
            let (register, scope) = self.compute(id);
            self.scopes[scope].known.insert(id, register);
            placed = Some((register, scope));
        }
        placed.expect("the last to leave the stack is the term itself")
    }

    fn find(&self, id: TermId) -> Option<(Register, usize)> {
        let scopes = self.scopes.iter().enumerate().rev();
        scopes.filter_map(|(number, scope)| scope.known.get(&id).map(|&register| (register, number))).next()
    }

    fn compute(&mut self, id: TermId) -> (Register, usize) {
        match self.landscape.terms.get(id).clone() {
            Term::Constant(bits) => self.emit(0, |to, _| Instruction::Constant { to, bits }),
            Term::Counter(index) => {
                let scope = self.outermost(index.levels(), true);
                self.emit(scope, |to, depths| Instruction::Number { to, index: depths.index(&index) })
            }
            Term::Table(table, at) => {
                let scope = self.outermost_load(&at, self.landscape.tables[table as usize].len());
                self.emit(scope, |to, depths| Instruction::Table { to, table, at: depths.index(&at) })
            }
            Term::Unknown(at) => self.load(self.unknowns, &at),
            Term::Family(family, at) => {
                let buffer = self.family(family);
                self.load(buffer, &at)
            }
            Term::Unary(operation, of) => {
                let total = matches!(
                    operation,
                    Unary::Negate | Unary::Absolute | Unary::Floor | Unary::Sign | Unary::Sine | Unary::Cosine
                );
                let own = self.outermost(self.landscape.terms.info(id).levels, total);
                let (of, scope) = self.place(of);
                self.emit(own.max(scope), |to, _| Instruction::Unary { to, operation, of })
            }
            Term::Binary(operation, left, right) => {
                let total = matches!(
                    operation,
                    Binary::Add | Binary::Subtract | Binary::Multiply | Binary::Minimum | Binary::Maximum
                );
                let own = self.outermost(self.landscape.terms.info(id).levels, total);
                let ((left, a), (right, b)) = (self.place(left), self.place(right));
                self.emit(own.max(a).max(b), |to, _| Instruction::Binary { to, operation, left, right })
            }
            Term::Power(of, exponent) => {
                let own = self.outermost(self.landscape.terms.info(id).levels, exponent > 0);
                let (of, scope) = self.place(of);
                self.emit(own.max(scope), |to, _| Instruction::Power { to, of, exponent })
            }
            Term::Select { relation, left, right, then, otherwise } => {
                let own = self.outermost(self.landscape.terms.info(id).levels, true);
                let parts = [left, right, then, otherwise].map(|part| self.place(part));
                let scope = parts.iter().fold(own, |scope, part| scope.max(part.1));
                let [left, right, then, otherwise] = parts.map(|part| part.0);
                self.emit(scope, |to, _| Instruction::Select { to, relation, left, right, then, otherwise })
            }
            Term::Choose { condition, then, otherwise } => self.choose(id, &condition, then, otherwise),
            Term::Reduce { operator, level, first, last, condition, body } => {
                self.reduce(id, operator, level, (&first, &last), condition.as_ref(), body)
            }
        }
    }

    fn emit(&mut self, scope: usize, make: impl FnOnce(Register, &Depths<'_>) -> Instruction) -> (Register, usize) {
        let to = self.program.fresh();
        let instruction = make(to, &Depths { scopes: &self.scopes[..=scope] });
        self.scopes[scope].steps.push(Step::Do(instruction));
        (to, scope)
    }

    fn load(&mut self, buffer: BufferId, at: &Index) -> (Register, usize) {
        let scope = self.outermost_load(at, self.program.buffers[buffer.0 as usize].length);
        self.emit(scope, |to, depths| Instruction::Load { to, buffer, at: depths.index(at) })
    }

    /// The outermost scope for something that depends on these levels.
    fn outermost(&self, levels: u64, total: bool) -> usize {
        for (number, scope) in self.scopes.iter().enumerate().rev() {
            match scope.kind {
                ScopeKind::Whole | ScopeKind::Branch => return number,
                ScopeKind::Loop { level, .. } if levels >> level & 1 == 1 => return number,
                ScopeKind::Loop { can_be_empty: true, .. } if !total => return number,
                ScopeKind::Loop { .. } => {}
            }
        }
        0
    }

    /// The same for a load from a buffer of some length.
    fn outermost_load(&self, at: &Index, length: usize) -> usize {
        let target = self.outermost(at.levels(), true);
        let (low, high) = Depths { scopes: &self.scopes[..=target] }.bound(at, &self.landscape.lookups);
        let safe = 0 <= low && high < length as i64;
        if safe { target } else { self.scopes.len() - 1 }
    }

    fn choose(&mut self, id: TermId, condition: &IndexCondition, then: TermId, otherwise: TermId) -> (Register, usize) {
        // Its parts may be partial, so it stays inside any loop that can be empty.
        let scope = self.outermost(self.landscape.terms.info(id).levels, false);
        let inner = self.scopes.split_off(scope + 1);
        let to = self.program.fresh();
        let blocks = [then, otherwise].map(|part| {
            self.scopes.push(Scope { steps: Vec::new(), known: HashMap::new(), kind: ScopeKind::Branch });
            let from = self.term(part);
            let mut steps = self.scopes.pop().map(|scope| scope.steps).unwrap_or_default();
            steps.push(Step::Do(Instruction::Copy { to, from }));
            steps
        });
        let [then, otherwise] = blocks;
        let condition = Depths { scopes: &self.scopes }.condition(condition);
        self.scopes[scope].steps.push(Step::When { condition, then, otherwise });
        self.scopes.extend(inner);
        (to, scope)
    }

    fn reduce(
        &mut self,
        id: TermId,
        operator: Reduction,
        level: Level,
        (first, last): (&Index, &Index),
        condition: Option<&IndexCondition>,
        body: TermId,
    ) -> (Register, usize) {
        let scope = self.outermost(self.landscape.terms.info(id).levels, false);
        let inner = self.scopes.split_off(scope + 1);
        let (operation, neutral) = match operator {
            Reduction::Sum => (Binary::Add, 0.0),
            Reduction::Product => (Binary::Multiply, 1.0),
            Reduction::Minimum => (Binary::Minimum, f64::INFINITY),
            Reduction::Maximum => (Binary::Maximum, f64::NEG_INFINITY),
        };
        let to = self.program.fresh();
        self.scopes[scope].steps.push(Step::Do(Instruction::Constant { to, bits: f64::to_bits(neutral) }));
        let body = self.in_loop(level, first, last, |lowering| {
            let right = match condition {
                None => lowering.term(body),
                Some(condition) => {
                    let held = lowering.program.fresh();
                    lowering.guarded(condition, body, held, neutral);
                    held
                }
            };
            let update = Instruction::Binary { to, operation, left: to, right };
            lowering.innermost().push(Step::Do(update));
        });
        self.scopes[scope].steps.push(body);
        self.scopes.extend(inner);
        (to, scope)
    }

    fn guarded(&mut self, condition: &IndexCondition, body: TermId, to: Register, neutral: f64) {
        self.scopes.push(Scope { steps: Vec::new(), known: HashMap::new(), kind: ScopeKind::Branch });
        let from = self.term(body);
        let mut then = self.scopes.pop().map(|scope| scope.steps).unwrap_or_default();
        then.push(Step::Do(Instruction::Copy { to, from }));
        let from = self.program.fresh();
        let constant = Step::Do(Instruction::Constant { to: from, bits: neutral.to_bits() });
        let otherwise = vec![constant, Step::Do(Instruction::Copy { to, from })];
        let condition = Depths { scopes: &self.scopes }.condition(condition);
        self.innermost().push(Step::When { condition, then, otherwise });
    }

    fn innermost(&mut self) -> &mut Vec<Step> {
        let last = self.scopes.len() - 1;
        &mut self.scopes[last].steps
    }

    fn in_loop(&mut self, level: Level, first: &Index, last: &Index, fill: impl FnOnce(&mut Self)) -> Step {
        let depths = Depths { scopes: &self.scopes };
        let lookups = &self.landscape.lookups;
        let (starts, ends) = (depths.bound(first, lookups), depths.bound(last, lookups));
        let (outer_first, outer_last) = (depths.index(first), depths.index(last));
        let can_be_empty = starts.1 > ends.0;
        let kind = ScopeKind::Loop { level, low: starts.0, high: ends.1, can_be_empty };
        self.scopes.push(Scope { steps: Vec::new(), known: HashMap::new(), kind });
        fill(self);
        let body = self.scopes.pop().map(|scope| scope.steps).unwrap_or_default();
        Step::Loop { first: outer_first, last: outer_last, descending: false, body }
    }

    /// The buffer of a let family, filled at the head of the program when it is first needed.
    fn family(&mut self, number: u32) -> BufferId {
        if let Some(&buffer) = self.families.get(&number) {
            return buffer;
        }
        let landscape = self.landscape;
        let family = &landscape.families[number as usize];
        let inner = self.scopes.split_off(1);
        let buffer = self.program.add_buffer(Role::Scratch, family.count);
        let step = self.fill(family, 0, buffer);
        self.scopes[0].steps.extend(step);
        self.scopes.extend(inner);
        self.families.insert(number, buffer);
        buffer
    }

    fn fill(&mut self, family: &StoredFamily, level: usize, buffer: BufferId) -> Option<Step> {
        let Some((first, last)) = family.loops.get(level) else {
            let from = self.term(family.body);
            let at = Depths { scopes: &self.scopes }.index(&family.place);
            self.innermost().push(Step::Do(Instruction::Store { buffer, at, from }));
            return None;
        };
        Some(self.in_loop(level as Level, first, last, |lowering| {
            if let Some(step) = lowering.fill(family, level + 1, buffer) {
                lowering.innermost().push(step);
            }
        }))
    }
}

/// Levels of terms as depths of the program's loops.
struct Depths<'a> {
    scopes: &'a [Scope],
}

impl Depths<'_> {
    fn depth(&self, level: Level) -> Level {
        let mut depth = 0;
        let mut found = 0;
        for scope in self.scopes {
            if let ScopeKind::Loop { level: bound, .. } = scope.kind {
                if bound == level {
                    found = depth;
                }
                depth += 1;
            }
        }
        found
    }

    fn affine(&self, affine: &Affine) -> Affine {
        let mut factors: Vec<(Level, i64)> =
            affine.factors.iter().map(|&(level, factor)| (self.depth(level), factor)).collect();
        factors.sort_unstable();
        Affine { constant: affine.constant, factors }
    }

    fn index(&self, index: &Index) -> Index {
        match index {
            Index::Affine(affine) => Index::Affine(self.affine(affine)),
            Index::Lookup { table, at } => Index::Lookup { table: *table, at: self.affine(at) },
        }
    }

    fn condition(&self, condition: &IndexCondition) -> IndexCondition {
        match condition {
            IndexCondition::Compare(relation, left, right) => {
                IndexCondition::Compare(*relation, self.index(left), self.index(right))
            }
            IndexCondition::All(parts) => IndexCondition::All(parts.iter().map(|part| self.condition(part)).collect()),
            IndexCondition::Any(parts) => IndexCondition::Any(parts.iter().map(|part| self.condition(part)).collect()),
            IndexCondition::Not(part) => IndexCondition::Not(Box::new(self.condition(part))),
        }
    }

    /// The least and greatest value of an index over the loops.
    fn bound(&self, index: &Index, lookups: &[Vec<i64>]) -> (i64, i64) {
        let affine = |affine: &Affine| {
            affine.factors.iter().fold((affine.constant, affine.constant), |(low, high), &(level, factor)| {
                let range = self.scopes.iter().rev().find_map(|scope| match scope.kind {
                    ScopeKind::Loop { level: bound, low, high, .. } if bound == level => Some((low, high)),
                    _ => None,
                });
                let (a, b) = range.unwrap_or((i64::MIN / 4, i64::MAX / 4));
                let (a, b) = (a.saturating_mul(factor), b.saturating_mul(factor));
                (low.saturating_add(a.min(b)), high.saturating_add(a.max(b)))
            })
        };
        match index {
            Index::Affine(form) => affine(form),
            Index::Lookup { table, at } => {
                let values = &lookups[*table as usize];
                let (low, high) = affine(at);
                if 0 <= low && high < values.len() as i64 && low <= high {
                    let part = &values[low as usize..=high as usize];
                    (part.iter().copied().min().unwrap_or(0), part.iter().copied().max().unwrap_or(0))
                } else {
                    (i64::MIN / 4, i64::MAX / 4)
                }
            }
        }
    }
}
