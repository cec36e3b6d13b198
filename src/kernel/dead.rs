//! Removes what nothing needs: instructions whose result is not used, rows written and never read, empty loops.

use std::collections::HashSet;

use super::program::{BufferId, Instruction, Program, Register, Role, Step};

/// The program without its dead parts.
pub fn remove_dead(source: &Program) -> Program {
    let mut needed = Needed { registers: HashSet::new(), buffers: HashSet::new() };
    for (number, buffer) in source.buffers.iter().enumerate() {
        if matches!(buffer.role, Role::Value | Role::Gradient | Role::Curvature | Role::Shown) {
            needed.buffers.insert(BufferId(number as u32));
        }
    }
    // Loops carry needs backward: again, until nothing is added.
    loop {
        let before = (needed.registers.len(), needed.buffers.len());
        needed.spread(&source.body);
        if before == (needed.registers.len(), needed.buffers.len()) {
            break;
        }
    }
    Program { body: needed.keep(&source.body), ..source.clone() }
}

struct Needed {
    registers: HashSet<Register>,
    buffers: HashSet<BufferId>,
}

impl Needed {
    fn is_needed(&self, instruction: &Instruction) -> bool {
        match instruction {
            Instruction::Store { buffer, .. }
            | Instruction::Accumulate { buffer, .. }
            | Instruction::Deduct { buffer, .. } => self.buffers.contains(buffer),
            _ => instruction.target().is_some_and(|to| self.registers.contains(&to)),
        }
    }

    fn spread(&mut self, steps: &[Step]) {
        for step in steps.iter().rev() {
            match step {
                Step::Do(instruction) if self.is_needed(instruction) => {
                    if let Instruction::Load { buffer, .. } = instruction {
                        self.buffers.insert(*buffer);
                    }
                    self.registers.extend(instruction.sources());
                }
                Step::Do(_) => {}
                Step::Loop { body, .. } => self.spread(body),
                Step::When { then, otherwise, .. } => {
                    self.spread(then);
                    self.spread(otherwise);
                }
            }
        }
    }

    fn keep(&self, steps: &[Step]) -> Vec<Step> {
        let kept = steps.iter().filter_map(|step| match step {
            Step::Do(instruction) => self.is_needed(instruction).then(|| step.clone()),
            Step::Loop { first, last, descending, body } => {
                let body = self.keep(body);
                let (first, last) = (first.clone(), last.clone());
                (!body.is_empty()).then_some(Step::Loop { first, last, descending: *descending, body })
            }
            Step::When { condition, then, otherwise } => {
                let (then, otherwise) = (self.keep(then), self.keep(otherwise));
                let condition = condition.clone();
                (!then.is_empty() || !otherwise.is_empty()).then_some(Step::When { condition, then, otherwise })
            }
        });
        kept.collect()
    }
}
