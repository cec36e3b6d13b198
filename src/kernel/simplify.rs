//! Simpler programs with the same values: shared subterms, folded constants, hoisted invariants, powers as products.
//!
//! Instructions are gone through in order and written anew. A register that is assigned once and whose instruction has
//! no effect is *pure*: an equal one that stands in a block around is used again, and a new one goes to the outermost
//! block that has its operands. Nothing leaves a block of an index condition, and no load leaves a loop unless its row
//! exists for all values of the counters outside. Registers assigned more than once stay as they are.
//!
//! Rewriting may change the last digits of a value, never where it is infinite or not a number: `0 x` stays, and sums
//! are not reordered. Every executor runs the simplified program, so all of them agree to the bit.

use std::collections::HashMap;

use crate::numbers::functions;
use crate::numbers::operation::{Binary, Unary};

use super::program::{BufferId, Instruction, Program, Register, Role, Step};
use super::ranges::Ranges;

/// The simplified program; what nothing needs is still there (see [`super::dead`]).
pub fn simplify(source: &Program) -> Program {
    let mut assignments = HashMap::new();
    count_assignments(&source.body, &mut assignments);
    let mut simplifier = Simplifier {
        source,
        assignments,
        out: Program { body: Vec::new(), registers: 0, ..source.clone() },
        scopes: vec![Scope::new(ScopeKind::Whole)],
        names: HashMap::new(),
        facts: HashMap::new(),
        ranges: Ranges::new(&source.lookups),
    };
    simplifier.block(&source.body);
    let body = simplifier.scopes.pop().map(|scope| scope.steps).unwrap_or_default();
    simplifier.out.body = body;
    simplifier.out
}

#[derive(Clone, Copy, PartialEq)]
enum ScopeKind {
    Whole,
    Loop,
    Branch,
}

struct Scope {
    kind: ScopeKind,
    steps: Vec<Step>,
    known: HashMap<Instruction, Register>,
}

impl Scope {
    fn new(kind: ScopeKind) -> Self {
        Scope { kind, steps: Vec::new(), known: HashMap::new() }
    }
}

/// What is known of a pure register of the new program.
#[derive(Clone)]
struct Fact {
    scope: usize,
    instruction: Instruction,
}

struct Simplifier<'a> {
    source: &'a Program,
    assignments: HashMap<Register, u32>,
    out: Program,
    scopes: Vec<Scope>,
    names: HashMap<Register, Register>,
    facts: HashMap<Register, Fact>,
    ranges: Ranges<'a>,
}

fn count_assignments(steps: &[Step], counts: &mut HashMap<Register, u32>) {
    for step in steps {
        match step {
            Step::Do(instruction) => {
                if let Some(to) = instruction.target() {
                    *counts.entry(to).or_default() += 1;
                }
            }
            Step::Loop { body, .. } => count_assignments(body, counts),
            Step::When { then, otherwise, .. } => {
                count_assignments(then, counts);
                count_assignments(otherwise, counts);
            }
        }
    }
}

impl Simplifier<'_> {
    fn block(&mut self, steps: &[Step]) {
        for step in steps {
            match step {
                Step::Do(instruction) => self.instruction(instruction),
                Step::Loop { first, last, descending, body } => {
                    self.ranges.enter(first, last);
                    self.scopes.push(Scope::new(ScopeKind::Loop));
                    self.block(body);
                    let body = self.scopes.pop().map(|scope| scope.steps).unwrap_or_default();
                    self.ranges.leave();
                    let (first, last) = (first.clone(), last.clone());
                    self.here().push(Step::Loop { first, last, descending: *descending, body });
                }
                Step::When { condition, then, otherwise } => {
                    let [then, otherwise] = [then, otherwise].map(|steps| {
                        self.scopes.push(Scope::new(ScopeKind::Branch));
                        self.block(steps);
                        self.scopes.pop().map(|scope| scope.steps).unwrap_or_default()
                    });
                    self.here().push(Step::When { condition: condition.clone(), then, otherwise });
                }
            }
        }
    }

    fn here(&mut self) -> &mut Vec<Step> {
        let last = self.scopes.len() - 1;
        &mut self.scopes[last].steps
    }

    fn is_mutable(&self, register: Register) -> bool {
        self.assignments.get(&register).copied().unwrap_or(0) != 1
    }

    fn name(&mut self, register: Register) -> Register {
        if let Some(&name) = self.names.get(&register) {
            return name;
        }
        let name = self.out.fresh();
        self.names.insert(register, name);
        name
    }

    fn instruction(&mut self, instruction: &Instruction) {
        let plain = instruction.target().is_some_and(|to| !self.is_mutable(to));
        let mut instruction = instruction.clone();
        // Sources by their new names; an unnamed one is a mutable register met for the first time.
        let mut renamed = HashMap::new();
        for source in instruction.sources() {
            renamed.insert(source, self.name(source));
        }
        instruction = instruction.renamed(|source| renamed[&source], |to| to);
        match (plain, instruction.target()) {
            (true, Some(to)) => {
                let register = self.pure(instruction);
                self.names.insert(to, register);
            }
            (_, to) => {
                let to = to.map(|to| self.name(to));
                let instruction = self.shorten(instruction.renamed(|source| source, |old| to.unwrap_or(old)));
                self.here().push(Step::Do(instruction));
            }
        }
    }

    /// Negatives that are added become what is subtracted.
    fn shorten(&self, instruction: Instruction) -> Instruction {
        match instruction {
            Instruction::Accumulate { buffer, ref at, from } => match self.negated(from) {
                Some(from) => Instruction::Deduct { buffer, at: at.clone(), from },
                None => instruction,
            },
            Instruction::Binary { to, operation: Binary::Add, left, right } => match self.negated(right) {
                Some(right) => Instruction::Binary { to, operation: Binary::Subtract, left, right },
                None => instruction,
            },
            _ => instruction,
        }
    }

    fn negated(&self, register: Register) -> Option<Register> {
        match self.facts.get(&register)?.instruction {
            Instruction::Unary { operation: Unary::Negate, of, .. } => Some(of),
            _ => None,
        }
    }

    fn constant_of(&self, register: Register) -> Option<f64> {
        match self.facts.get(&register)?.instruction {
            Instruction::Constant { bits, .. } => Some(f64::from_bits(bits)),
            _ => None,
        }
    }

    fn constant(&mut self, value: f64) -> Register {
        self.share(Instruction::Constant { to: Register(0), bits: value.to_bits() })
    }

    /// A constant factor and the rest, of a product with a constant or of a negative.
    fn scaled(&self, register: Register) -> Option<(f64, Register)> {
        match self.facts.get(&register)?.instruction {
            Instruction::Unary { operation: Unary::Negate, of, .. } => Some((-1.0, of)),
            Instruction::Binary { operation: Binary::Multiply, left, right, .. } => {
                self.constant_of(left).map(|factor| (factor, right))
            }
            _ => None,
        }
    }

    /// A pure instruction, its sources renamed: a register that holds its value.
    fn pure(&mut self, instruction: Instruction) -> Register {
        match instruction {
            // A copy of something that never changes is that thing.
            Instruction::Copy { from, .. } if self.facts.contains_key(&from) => from,
            Instruction::Unary { operation, of, .. } => self.unary(operation, of),
            Instruction::Binary { operation, left, right, .. } => self.binary(operation, left, right),
            Instruction::Power { of, exponent, .. } => self.power(of, exponent),
            Instruction::Select { relation, left, right, then, otherwise, .. } => {
                if then == otherwise {
                    return then;
                }
                if let (Some(a), Some(b)) = (self.constant_of(left), self.constant_of(right)) {
                    return if relation.holds(a, b) { then } else { otherwise };
                }
                self.share(instruction)
            }
            _ => self.share(instruction),
        }
    }

    fn unary(&mut self, operation: Unary, of: Register) -> Register {
        if let Some(value) = self.constant_of(of) {
            return self.constant(functions::unary(operation, value));
        }
        if operation == Unary::Negate {
            if let Some((factor, rest)) = self.scaled(of) {
                return self.times(-factor, rest);
            }
            if let Some(Instruction::Binary { operation: Binary::Subtract, left, right, .. }) =
                self.facts.get(&of).map(|fact| fact.instruction.clone())
            {
                return self.binary(Binary::Subtract, right, left);
            }
        }
        self.share(Instruction::Unary { to: Register(0), operation, of })
    }

    fn times(&mut self, factor: f64, of: Register) -> Register {
        if factor == 1.0 {
            return of;
        }
        // A power of two times a sum of scaled terms goes into the scales, without a rounding.
        if functions::is_power_of_two(factor)
            && factor.abs() != 1.0
            && let Some(Fact { instruction: Instruction::Binary { operation, left, right, .. }, .. }) =
                self.facts.get(&of).cloned()
            && matches!(operation, Binary::Add | Binary::Subtract)
            && let (Some((a, left)), Some((b, right))) = (self.scaled(left), self.scaled(right))
        {
            let (left, right) = (self.times(factor * a, left), self.times(factor * b, right));
            return self.binary(operation, left, right);
        }
        if factor == -1.0 {
            return self.share(Instruction::Unary { to: Register(0), operation: Unary::Negate, of });
        }
        let left = self.constant(factor);
        self.share(Instruction::Binary { to: Register(0), operation: Binary::Multiply, left, right: of })
    }

    fn binary(&mut self, operation: Binary, left: Register, right: Register) -> Register {
        let (a, b) = (self.constant_of(left), self.constant_of(right));
        match (operation, a, b) {
            (_, Some(a), Some(b)) => return self.constant(functions::binary(operation, a, b)),
            (Binary::Add, Some(0.0), _) => return right,
            (Binary::Add | Binary::Subtract, _, Some(0.0)) => return left,
            (Binary::Subtract, Some(0.0), _) => return self.unary(Unary::Negate, right),
            (Binary::Multiply | Binary::Divide, _, Some(1.0)) => return left,
            (Binary::Divide, Some(1.0), _) => return self.unary(Unary::Reciprocal, right),
            (Binary::Multiply, None, Some(_)) => return self.binary(operation, right, left),
            (Binary::Multiply, Some(factor), None) => {
                // Two constant factors are one.
                if let Some((inner, rest)) = self.scaled(right)
                    && (factor * inner).is_finite()
                {
                    return self.times(factor * inner, rest);
                }
                return self.times(factor, right);
            }
            _ => {}
        }
        match operation {
            Binary::Add => {
                if let Some(right) = self.negated(right) {
                    return self.binary(Binary::Subtract, left, right);
                }
                if let Some(left) = self.negated(left) {
                    return self.binary(Binary::Subtract, right, left);
                }
            }
            Binary::Subtract => {
                if let Some(right) = self.negated(right) {
                    return self.binary(Binary::Add, left, right);
                }
            }
            Binary::Multiply => {
                for (side, other) in [(left, right), (right, left)] {
                    if let Some(inner) = self.negated(side) {
                        let product = self.binary(Binary::Multiply, inner, other);
                        return self.unary(Unary::Negate, product);
                    }
                }
            }
            _ => {}
        }
        // One order for what has none.
        let (left, right) = match operation {
            Binary::Add | Binary::Multiply if right < left => (right, left),
            _ => (left, right),
        };
        self.share(Instruction::Binary { to: Register(0), operation, left, right })
    }

    fn power(&mut self, of: Register, exponent: i32) -> Register {
        if let Some(value) = self.constant_of(of) {
            return self.constant(functions::power(value, exponent));
        }
        let base = if exponent < 0 { self.unary(Unary::Reciprocal, of) } else { of };
        match exponent.unsigned_abs() {
            0 => self.constant(1.0),
            exponent => {
                let mut numbers = vec![base];
                for step in functions::power_steps(exponent) {
                    numbers.push(self.binary(Binary::Multiply, numbers[step.left], numbers[step.right]));
                }
                numbers[numbers.len() - 1]
            }
        }
    }

    /// Uses an equal instruction again, or writes the new one in the outermost block where it may stand.
    fn share(&mut self, instruction: Instruction) -> Register {
        let key = instruction.renamed(|source| source, |_| Register(0));
        let Some(scope) = self.outermost(&key) else {
            let to = self.out.fresh();
            self.here().push(Step::Do(key.renamed(|source| source, |_| to)));
            return to;
        };
        for known in self.scopes.iter().map(|scope| &scope.known) {
            if let Some(&register) = known.get(&key) {
                return register;
            }
        }
        let to = self.out.fresh();
        let instruction = key.renamed(|source| source, |_| to);
        self.scopes[scope].steps.push(Step::Do(instruction.clone()));
        self.scopes[scope].known.insert(key, to);
        self.facts.insert(to, Fact { scope, instruction });
        to
    }

    /// The outermost block for an instruction; `None` where it must stay and cannot be shared.
    fn outermost(&self, instruction: &Instruction) -> Option<usize> {
        let mut scope = 0;
        for source in instruction.sources() {
            scope = scope.max(self.facts.get(&source)?.scope);
        }
        let barrier = self.scopes.iter().rposition(|scope| scope.kind == ScopeKind::Branch).unwrap_or(0);
        if !matches!(instruction, Instruction::Constant { .. }) {
            scope = scope.max(barrier);
        }
        let index = match instruction {
            Instruction::Number { index, .. } => Some((index, None)),
            Instruction::Table { table, at, .. } => Some((at, Some(self.source.tables[*table as usize].len()))),
            Instruction::Load { buffer, at, .. } => {
                self.read_only(*buffer)?;
                Some((at, Some(self.source.buffers[buffer.0 as usize].length)))
            }
            _ => None,
        };
        if let Some((index, length)) = index {
            let deepest = index.affine().factors.iter().map(|factor| factor.0 as usize + 1).max().unwrap_or(0);
            scope = scope.max(self.scope_of_loop(deepest));
            let (low, high) = self.ranges.of(index);
            if length.is_some_and(|length| low < 0 || high >= length as i64) {
                scope = self.scopes.len() - 1;
            }
        }
        Some(scope)
    }

    fn read_only(&self, buffer: BufferId) -> Option<()> {
        matches!(self.source.buffers[buffer.0 as usize].role, Role::Unknowns | Role::Direction).then_some(())
    }

    /// The scope that is the body of the n-th loop around this place, counted from outside, 0 for none.
    fn scope_of_loop(&self, count: usize) -> usize {
        let mut loops = 0;
        for (number, scope) in self.scopes.iter().enumerate() {
            if scope.kind == ScopeKind::Loop {
                loops += 1;
                if loops == count {
                    return number;
                }
            }
        }
        0
    }
}
