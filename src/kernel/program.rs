//! The program: a nest of loops over straight-line instructions on lane registers.
//!
//! Every register holds one number per lane; every buffer holds rows of such numbers. Loops and index conditions are
//! the same for all lanes, since indices never depend on unknowns. Instructions are simple and have at most three
//! operands (a selection has four), so that an executor may interpret them over arrays of lanes or turn each into a few
//! vector machine instructions.
//!
//! A loop's counter is a *level*: the number of loops around it *in the program*. Indices are those of
//! [`crate::landscape::term`], read with these levels.

use crate::landscape::term::{Index, IndexCondition};
use crate::numbers::operation::{Binary, Relation, Unary};

/// A lane register: `r7` in printed programs.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash, PartialOrd, Ord)]
pub struct Register(pub u32);

/// A buffer of lane rows: `b2` in printed programs.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash, PartialOrd, Ord)]
pub struct BufferId(pub u32);

/// A whole program.
#[derive(Clone, Debug, PartialEq, Default)]
pub struct Program {
    /// The buffers; `BufferId(k)` is number k.
    pub buffers: Vec<Buffer>,
    /// Constant tables of numbers, the same for all lanes.
    pub tables: Vec<Vec<f64>>,
    /// Constant tables of whole numbers for indices.
    pub lookups: Vec<Vec<i64>>,
    /// How many registers there are.
    pub registers: u32,
    /// What to do, in order.
    pub body: Vec<Step>,
}

/// A buffer.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Buffer {
    /// What it is for.
    pub role: Role,
    /// How many rows it has.
    pub length: usize,
}

/// What a buffer is for. There is at most one of each but `Scratch`.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash)]
pub enum Role {
    /// The point: one row per slot. Read only.
    Unknowns,
    /// A direction at the point: one row per slot. Read only.
    Direction,
    /// The value: one row.
    Value,
    /// The gradient: one row per slot.
    Gradient,
    /// The derivative of the gradient along the direction: one row per slot.
    Curvature,
    /// Shown quantities, one row per element.
    Shown,
    /// The program's own; holds nothing at the start.
    Scratch,
}

/// One step of a block.
#[derive(Clone, Debug, PartialEq)]
pub enum Step {
    /// An instruction.
    Do(Instruction),
    /// A loop over whole numbers from `first` to `last`, both included; not at all when `last < first`.
    Loop {
        /// The first value of the counter.
        first: Index,
        /// The last value of the counter.
        last: Index,
        /// Runs from `last` down to `first`.
        descending: bool,
        /// The body.
        body: Vec<Step>,
    },
    /// One of two blocks, decided by the counters.
    When {
        /// The condition.
        condition: IndexCondition,
        /// Where it holds.
        then: Vec<Step>,
        /// Where it does not.
        otherwise: Vec<Step>,
    },
}

/// An instruction: the same on every lane.
#[derive(Clone, Debug, PartialEq, Eq, Hash)]
pub enum Instruction {
    /// `to = value`, by its bits.
    Constant {
        /// The target.
        to: Register,
        /// The bits.
        bits: u64,
    },
    /// `to = index`, as a number.
    Number {
        /// The target.
        to: Register,
        /// The whole number.
        index: Index,
    },
    /// `to = tables[table][at]`
    Table {
        /// The target.
        to: Register,
        /// The table.
        table: u32,
        /// The place.
        at: Index,
    },
    /// `to = buffer[at]`
    Load {
        /// The target.
        to: Register,
        /// The buffer.
        buffer: BufferId,
        /// The row.
        at: Index,
    },
    /// `buffer[at] = from`
    Store {
        /// The buffer.
        buffer: BufferId,
        /// The row.
        at: Index,
        /// The source.
        from: Register,
    },
    /// `buffer[at] = buffer[at] + from`
    Accumulate {
        /// The buffer.
        buffer: BufferId,
        /// The row.
        at: Index,
        /// The source.
        from: Register,
    },
    /// `buffer[at] = buffer[at] - from`
    Deduct {
        /// The buffer.
        buffer: BufferId,
        /// The row.
        at: Index,
        /// The source.
        from: Register,
    },
    /// `to = of^exponent`, a whole power. The simplify pass turns it into products.
    Power {
        /// The target.
        to: Register,
        /// The base.
        of: Register,
        /// The exponent.
        exponent: i32,
    },
    /// `to = from`
    Copy {
        /// The target.
        to: Register,
        /// The source.
        from: Register,
    },
    /// `to = operation(of)`
    Unary {
        /// The target.
        to: Register,
        /// The operation.
        operation: Unary,
        /// The operand.
        of: Register,
    },
    /// `to = operation(left, right)`
    Binary {
        /// The target.
        to: Register,
        /// The operation.
        operation: Binary,
        /// The left operand.
        left: Register,
        /// The right operand.
        right: Register,
    },
    /// `to = left * right + plus`, rounded after the product and after the sum: one pass over memory, two roundings.
    MultiplyAdd {
        /// The target.
        to: Register,
        /// A factor.
        left: Register,
        /// A factor.
        right: Register,
        /// What is added.
        plus: Register,
    },
    /// `to = left relation right ? then : otherwise`
    Select {
        /// The target.
        to: Register,
        /// The comparison.
        relation: Relation,
        /// Its left operand.
        left: Register,
        /// Its right operand.
        right: Register,
        /// Where it holds.
        then: Register,
        /// Where it does not.
        otherwise: Register,
    },
}

impl Instruction {
    /// The register that it sets, if it sets one.
    pub fn target(&self) -> Option<Register> {
        use Instruction::*;
        match *self {
            Constant { to, .. }
            | Number { to, .. }
            | Table { to, .. }
            | Load { to, .. }
            | Copy { to, .. }
            | Unary { to, .. }
            | Power { to, .. }
            | Binary { to, .. }
            | MultiplyAdd { to, .. }
            | Select { to, .. } => Some(to),
            Store { .. } | Accumulate { .. } | Deduct { .. } => None,
        }
    }

    /// The registers that it reads.
    pub fn sources(&self) -> impl Iterator<Item = Register> + use<> {
        use Instruction::*;
        let sources: [Option<Register>; 4] = match *self {
            Constant { .. } | Number { .. } | Table { .. } | Load { .. } => [None; 4],
            Store { from, .. } | Accumulate { from, .. } | Deduct { from, .. } | Copy { from, .. } => {
                [Some(from), None, None, None]
            }
            Unary { of, .. } | Power { of, .. } => [Some(of), None, None, None],
            Binary { left, right, .. } => [Some(left), Some(right), None, None],
            MultiplyAdd { left, right, plus, .. } => [Some(left), Some(right), Some(plus), None],
            Select { left, right, then, otherwise, .. } => [Some(left), Some(right), Some(then), Some(otherwise)],
        };
        sources.into_iter().flatten()
    }

    /// The same with other registers: sources first, then the target.
    pub fn renamed(
        &self,
        mut source: impl FnMut(Register) -> Register,
        target: impl FnOnce(Register) -> Register,
    ) -> Self {
        use Instruction::*;
        let mut instruction = self.clone();
        match &mut instruction {
            Constant { .. } | Number { .. } | Table { .. } | Load { .. } => {}
            Store { from, .. } | Accumulate { from, .. } | Deduct { from, .. } | Copy { from, .. } => {
                *from = source(*from)
            }
            Unary { of, .. } | Power { of, .. } => *of = source(*of),
            Binary { left, right, .. } => (*left, *right) = (source(*left), source(*right)),
            MultiplyAdd { left, right, plus, .. } => {
                (*left, *right, *plus) = (source(*left), source(*right), source(*plus));
            }
            Select { left, right, then, otherwise, .. } => {
                (*left, *right) = (source(*left), source(*right));
                (*then, *otherwise) = (source(*then), source(*otherwise));
            }
        }
        match &mut instruction {
            Constant { to, .. }
            | Number { to, .. }
            | Table { to, .. }
            | Load { to, .. }
            | Copy { to, .. }
            | Unary { to, .. }
            | Power { to, .. }
            | Binary { to, .. }
            | MultiplyAdd { to, .. }
            | Select { to, .. } => *to = target(*to),
            Store { .. } | Accumulate { .. } | Deduct { .. } => {}
        }
        instruction
    }
}

impl Program {
    /// A new register.
    pub fn fresh(&mut self) -> Register {
        self.registers += 1;
        Register(self.registers - 1)
    }

    /// A new buffer.
    pub fn add_buffer(&mut self, role: Role, length: usize) -> BufferId {
        self.buffers.push(Buffer { role, length });
        BufferId(self.buffers.len() as u32 - 1)
    }

    /// The buffer with a role, if there is one; the first for `Scratch`.
    pub fn buffer(&self, role: Role) -> Option<BufferId> {
        self.buffers.iter().position(|buffer| buffer.role == role).map(|place| BufferId(place as u32))
    }

    /// The number of instructions, each counted once however often it runs.
    pub fn n_instructions(&self) -> usize {
        fn count(steps: &[Step]) -> usize {
            let of = |step: &Step| match step {
                Step::Do(_) => 1,
                Step::Loop { body, .. } => count(body),
                Step::When { then, otherwise, .. } => count(then) + count(otherwise),
            };
            steps.iter().map(of).sum()
        }
        count(&self.body)
    }
}
