//! What the derivative passes ask of a lowered program: what depends on unknowns, who owns a register, how far a loop
//! can run.

use std::collections::{BTreeSet, HashMap, HashSet};

use crate::landscape::term::Index;
use crate::numbers::operation::Unary;

use super::program::{BufferId, Instruction, Program, Register, Role, Step};
use super::ranges::Ranges;

/// Facts about a lowered program.
pub struct Activity {
    active: HashSet<Register>,
    active_buffers: HashSet<BufferId>,
    trips: HashMap<(Index, Index), (i64, i64)>,
}

impl Activity {
    /// Works the facts out.
    pub fn of(program: &Program) -> Self {
        let unknowns = program.buffer(Role::Unknowns);
        let mut activity =
            Activity { active: HashSet::new(), active_buffers: unknowns.into_iter().collect(), trips: HashMap::new() };
        // An accumulator's update can come after its use in an earlier turn: again, until nothing changes.
        loop {
            let before = (activity.active.len(), activity.active_buffers.len());
            activity.spread(&program.body);
            if before == (activity.active.len(), activity.active_buffers.len()) {
                break;
            }
        }
        activity.measure(&program.body, &mut Ranges::new(&program.lookups));
        activity
    }

    /// Whether a register's value depends on the unknowns in a way that has a derivative.
    pub fn is_active(&self, register: Register) -> bool {
        self.active.contains(&register)
    }

    /// Whether a buffer holds such values.
    pub fn is_active_buffer(&self, buffer: BufferId) -> bool {
        self.active_buffers.contains(&buffer)
    }

    /// The least value of a loop's counter, and how many values from there on it can have.
    pub fn trip_range(&self, step: &Step) -> (i64, usize) {
        let Step::Loop { first, last, .. } = step else { return (0, 0) };
        let (low, high) = self.trips.get(&(first.clone(), last.clone())).copied().unwrap_or((0, -1));
        (low, (high - low + 1).max(1) as usize)
    }

    fn spread(&mut self, steps: &[Step]) {
        for step in steps {
            match step {
                Step::Do(instruction) => {
                    let active = match instruction {
                        Instruction::Load { buffer, .. } => self.active_buffers.contains(buffer),
                        Instruction::Unary { operation: Unary::Floor | Unary::Sign, .. } => false,
                        // What only decides a selection has no derivative through it.
                        Instruction::Select { then, otherwise, .. } => {
                            self.is_active(*then) || self.is_active(*otherwise)
                        }
                        _ => instruction.sources().any(|source| self.is_active(source)),
                    };
                    match instruction {
                        Instruction::Store { buffer, .. }
                        | Instruction::Accumulate { buffer, .. }
                        | Instruction::Deduct { buffer, .. } => {
                            if active {
                                self.active_buffers.insert(*buffer);
                            }
                        }
                        _ => {
                            if let Some(to) = instruction.target().filter(|_| active) {
                                self.active.insert(to);
                            }
                        }
                    }
                }
                Step::Loop { body, .. } => self.spread(body),
                Step::When { then, otherwise, .. } => {
                    self.spread(then);
                    self.spread(otherwise);
                }
            }
        }
    }

    fn measure(&mut self, steps: &[Step], ranges: &mut Ranges<'_>) {
        for step in steps {
            match step {
                Step::Do(_) => {}
                Step::Loop { first, last, body, .. } => {
                    let range = ranges.enter(first, last);
                    let known = self.trips.entry((first.clone(), last.clone())).or_insert(range);
                    *known = (known.0.min(range.0), known.1.max(range.1));
                    self.measure(body, ranges);
                    ranges.leave();
                }
                Step::When { then, otherwise, .. } => {
                    self.measure(then, ranges);
                    self.measure(otherwise, ranges);
                }
            }
        }
    }
}

/// Whether an instruction updates an accumulator in place.
pub fn is_update(instruction: &Instruction) -> bool {
    matches!(instruction, Instruction::Binary { to, left, .. } if to == left)
}

/// The registers that a block itself defines: not the accumulators that it updates, not the result that it copies out.
pub fn owned_registers(steps: &[Step]) -> BTreeSet<Register> {
    let mut owned = BTreeSet::new();
    for step in steps {
        match step {
            Step::Do(Instruction::Copy { .. }) => {}
            Step::Do(instruction) if is_update(instruction) => {}
            Step::Do(instruction) => owned.extend(instruction.target()),
            Step::Loop { .. } => {}
            Step::When { then, .. } => {
                if let Some(Step::Do(Instruction::Copy { to, .. })) = then.last() {
                    owned.insert(*to);
                }
            }
        }
    }
    owned
}

/// The registers that steps read and do not define, the left side of updates not counted.
pub fn free_registers<'s>(steps: impl Iterator<Item = &'s Step>) -> BTreeSet<Register> {
    fn visit(step: &Step, read: &mut BTreeSet<Register>, defined: &mut BTreeSet<Register>) {
        match step {
            Step::Do(instruction) => {
                let skipped = match instruction {
                    Instruction::Binary { left, .. } if is_update(instruction) => Some(*left),
                    _ => None,
                };
                read.extend(instruction.sources().filter(|source| Some(*source) != skipped));
                if !is_update(instruction) {
                    defined.extend(instruction.target());
                }
            }
            Step::Loop { body, .. } => body.iter().for_each(|step| visit(step, read, defined)),
            Step::When { then, otherwise, .. } => {
                then.iter().chain(otherwise).for_each(|step| visit(step, read, defined));
            }
        }
    }
    let (mut read, mut defined) = (BTreeSet::new(), BTreeSet::new());
    steps.for_each(|step| visit(step, &mut read, &mut defined));
    &read - &defined
}
