//! The reference interpreter: one lane, any number algebra, no cleverness.

use crate::numbers::algebra::Number;
use crate::numbers::operation::Binary;

use super::program::{Instruction, Program, Role, Step};

/// Runs a program over an algebra. `inputs` gives the rows of the read-only buffers; the result holds the rows of every
/// buffer, in the order of `program.buffers`.
///
/// # Panics
/// Where the program is not sound; verify it first.
pub fn interpret<N: Number>(program: &Program, inputs: &[(Role, Vec<N>)]) -> Vec<Vec<N>> {
    let zero = N::constant(0.0);
    let buffers = program
        .buffers
        .iter()
        .map(|buffer| {
            let given = inputs.iter().find(|input| input.0 == buffer.role);
            given.map_or_else(|| vec![zero.clone(); buffer.length], |input| input.1.clone())
        })
        .collect();
    let registers = vec![zero; program.registers as usize];
    let mut machine = Machine { program, registers, buffers, counters: Vec::new() };
    machine.block(&program.body);
    machine.buffers
}

/// The rows of the buffer with a role, of what [`interpret`] gave.
pub fn rows<'a, N>(program: &Program, buffers: &'a [Vec<N>], role: Role) -> &'a [N] {
    program.buffer(role).map_or(&[], |id| &buffers[id.0 as usize])
}

struct Machine<'a, N> {
    program: &'a Program,
    registers: Vec<N>,
    buffers: Vec<Vec<N>>,
    counters: Vec<i64>,
}

impl<N: Number> Machine<'_, N> {
    fn block(&mut self, steps: &[Step]) {
        for step in steps {
            match step {
                Step::Do(instruction) => self.instruction(instruction),
                Step::Loop { first, last, descending, body } => {
                    let lookups = &self.program.lookups;
                    let (first, last) = (first.at(&self.counters, lookups), last.at(&self.counters, lookups));
                    for turn in 0..(last - first + 1).max(0) {
                        self.counters.push(if *descending { last - turn } else { first + turn });
                        self.block(body);
                        self.counters.pop();
                    }
                }
                Step::When { condition, then, otherwise } => {
                    let holds = condition.holds(&self.counters, &self.program.lookups);
                    self.block(if holds { then } else { otherwise });
                }
            }
        }
    }

    fn instruction(&mut self, instruction: &Instruction) {
        let place = |index: &crate::landscape::term::Index| index.at(&self.counters, &self.program.lookups);
        let read = |register: &super::program::Register| &self.registers[register.0 as usize];
        let value = match instruction {
            Instruction::Store { buffer, at, from } => {
                let (row, value) = (place(at) as usize, read(from).clone());
                self.buffers[buffer.0 as usize][row] = value;
                return;
            }
            Instruction::Accumulate { buffer, at, from } | Instruction::Deduct { buffer, at, from } => {
                let operation =
                    if matches!(instruction, Instruction::Accumulate { .. }) { Binary::Add } else { Binary::Subtract };
                let row = place(at) as usize;
                let sum = N::binary(operation, &self.buffers[buffer.0 as usize][row], read(from));
                self.buffers[buffer.0 as usize][row] = sum;
                return;
            }
            Instruction::Constant { bits, .. } => N::constant(f64::from_bits(*bits)),
            Instruction::Number { index, .. } => N::constant(place(index) as f64),
            Instruction::Table { table, at, .. } => {
                N::constant(self.program.tables[*table as usize][place(at) as usize])
            }
            Instruction::Load { buffer, at, .. } => self.buffers[buffer.0 as usize][place(at) as usize].clone(),
            Instruction::Copy { from, .. } => read(from).clone(),
            Instruction::Unary { operation, of, .. } => N::unary(*operation, read(of)),
            Instruction::Power { of, exponent, .. } => N::power(read(of), *exponent),
            Instruction::Binary { operation, left, right, .. } => N::binary(*operation, read(left), read(right)),
            Instruction::MultiplyAdd { left, right, plus, .. } => {
                let product = N::binary(Binary::Multiply, read(left), read(right));
                N::binary(Binary::Add, &product, read(plus))
            }
            Instruction::Select { relation, left, right, then, otherwise, .. } => {
                N::select(*relation, read(left), read(right), read(then), read(otherwise))
            }
        };
        if let Some(to) = instruction.target() {
            self.registers[to.0 as usize] = value;
        }
    }
}
