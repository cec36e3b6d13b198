//! Forward mode on programs (Wengert 1964): beside each quantity its derivative along a direction.
//!
//! Applied to a program for value and gradient it gives the second derivatives along the direction (forward over
//! reverse). One run of its lanes serves as many directions at one point.

use std::collections::HashMap;

use crate::numbers::operation::Binary;

use super::activity::{Activity, is_update};
use super::amount::{Amount, Writer};
use super::program::{BufferId, Instruction, Program, Register, Role, Step};

/// A program that also gives the derivative of the gradient along a direction.
pub fn differentiate_along(source: &Program) -> Program {
    let mut out = Program { body: Vec::new(), ..source.clone() };
    let activity = Activity::of(source);
    let mut twins = HashMap::new();
    for (number, buffer) in source.buffers.iter().enumerate() {
        let id = BufferId(number as u32);
        let role = match buffer.role {
            Role::Unknowns => Role::Direction,
            Role::Gradient => Role::Curvature,
            Role::Scratch if activity.is_active_buffer(id) => Role::Scratch,
            _ => continue,
        };
        twins.insert(id, out.add_buffer(role, buffer.length));
    }
    let gating = has_choices(&source.body);
    let mut tangent = Tangent { activity, out, twins, slopes: HashMap::new(), gating };
    let body = tangent.block(&source.body);
    tangent.out.body = body;
    tangent.out
}

struct Tangent {
    activity: Activity,
    out: Program,
    twins: HashMap<BufferId, BufferId>,
    /// The derivative of each register; those of accumulators and results stay in one register.
    slopes: HashMap<Register, Register>,
    /// Whether a derivative of 0 may mean "not taken", and must then not meet an infinity.
    gating: bool,
}

fn has_choices(steps: &[Step]) -> bool {
    steps.iter().any(|step| match step {
        Step::Do(Instruction::Select { .. }) => true,
        Step::Do(Instruction::Binary { operation, .. }) => {
            matches!(operation, Binary::Gate | Binary::Minimum | Binary::Maximum)
        }
        Step::Do(_) => false,
        Step::Loop { body, .. } => has_choices(body),
        Step::When { then, otherwise, .. } => has_choices(then) || has_choices(otherwise),
    })
}

impl Tangent {
    fn block(&mut self, steps: &[Step]) -> Vec<Step> {
        let mut out = Vec::new();
        for step in steps {
            match step {
                Step::Do(instruction) => self.instruction(instruction, &mut out),
                Step::Loop { first, last, descending, body } => {
                    let body = self.block(body);
                    out.push(Step::Loop { first: first.clone(), last: last.clone(), descending: *descending, body });
                }
                Step::When { condition, then, otherwise } => {
                    let (then, otherwise) = (self.block(then), self.block(otherwise));
                    out.push(Step::When { condition: condition.clone(), then, otherwise });
                }
            }
        }
        out
    }

    /// The register for a derivative, the same for every assignment to the register.
    fn slope_register(&mut self, of: Register) -> Register {
        let out = &mut self.out;
        *self.slopes.entry(of).or_insert_with(|| out.fresh())
    }

    fn slope(&self, of: Register) -> Amount {
        match self.slopes.get(&of) {
            Some(&register) if self.activity.is_active(of) => Amount::Register(register, self.gating),
            _ => Amount::Constant(0.0),
        }
    }

    fn set_slope(&mut self, to: Register, amount: Amount, out: &mut Vec<Step>) {
        let from = Writer { program: &mut self.out, steps: out }.register(amount);
        let to = self.slope_register(to);
        out.push(Step::Do(Instruction::Copy { to, from }));
    }

    fn instruction(&mut self, instruction: &Instruction, out: &mut Vec<Step>) {
        let active = instruction.target().is_some_and(|to| self.activity.is_active(to));
        if active && is_update(instruction) {
            // The derivative first: it needs the accumulator as it was.
            self.update(instruction, out);
            out.push(Step::Do(instruction.clone()));
            return;
        }
        out.push(Step::Do(instruction.clone()));
        match instruction {
            Instruction::Store { buffer, at, from } => {
                self.pass(*buffer, *from, out, |buffer, from| Instruction::Store { buffer, at: at.clone(), from })
            }
            Instruction::Accumulate { buffer, at, from } => {
                self.pass(*buffer, *from, out, |buffer, from| Instruction::Accumulate { buffer, at: at.clone(), from })
            }
            Instruction::Deduct { buffer, at, from } => {
                self.pass(*buffer, *from, out, |buffer, from| Instruction::Deduct { buffer, at: at.clone(), from })
            }
            _ if active => self.derive(instruction, out),
            _ => {}
        }
    }

    fn pass(
        &mut self,
        buffer: BufferId,
        from: Register,
        out: &mut Vec<Step>,
        make: impl FnOnce(BufferId, Register) -> Instruction,
    ) {
        let Some(&twin) = self.twins.get(&buffer) else { return };
        let slope = self.slope(from);
        let from = Writer { program: &mut self.out, steps: out }.register(slope);
        out.push(Step::Do(make(twin, from)));
    }

    fn update(&mut self, instruction: &Instruction, out: &mut Vec<Step>) {
        let Instruction::Binary { to, operation, left, right } = *instruction else { return };
        let (old, part) = (self.slope(left), self.slope(right));
        let asked = (true, !part.is_zero());
        let mut writer = Writer { program: &mut self.out, steps: out };
        let amount = if operation == Binary::Add {
            writer.add(old, part)
        } else {
            let value = if matches!(operation, Binary::Multiply | Binary::Minimum | Binary::Maximum) {
                left
            } else {
                writer.put(|to| Instruction::Binary { to, operation, left, right })
            };
            let slopes = writer.binary_slopes(operation, (left, right), value, asked);
            let (a, b) = (writer.multiply(old, slopes.0), writer.multiply(part, slopes.1));
            writer.add(a, b)
        };
        self.set_slope(to, amount, out);
    }

    fn derive(&mut self, instruction: &Instruction, out: &mut Vec<Step>) {
        let Some(to) = instruction.target() else { return };
        let amount = match *instruction {
            Instruction::Load { buffer, ref at, .. } => match self.twins.get(&buffer) {
                Some(&twin) => {
                    let mut writer = Writer { program: &mut self.out, steps: out };
                    Amount::of(writer.put(|to| Instruction::Load { to, buffer: twin, at: at.clone() }))
                }
                None => Amount::Constant(0.0),
            },
            Instruction::Copy { from, .. } => self.slope(from),
            Instruction::Unary { operation, of, .. } => {
                let part = self.slope(of);
                let mut writer = Writer { program: &mut self.out, steps: out };
                let slope = writer.unary_slope(operation, of, to);
                writer.multiply(part, slope)
            }
            Instruction::Power { of, exponent, .. } => {
                let part = self.slope(of);
                let mut writer = Writer { program: &mut self.out, steps: out };
                let scaled = writer.multiply(part, Amount::Constant(f64::from(exponent)));
                let slope = writer.power(Amount::of(of), exponent - 1);
                writer.multiply(scaled, slope)
            }
            Instruction::Binary { operation, left, right, .. } => {
                let (a, b) = (self.slope(left), self.slope(right));
                let mut writer = Writer { program: &mut self.out, steps: out };
                let slopes = writer.binary_slopes(operation, (left, right), to, (!a.is_zero(), !b.is_zero()));
                let (a, b) = (writer.multiply(a, slopes.0), writer.multiply(b, slopes.1));
                writer.add(a, b)
            }
            Instruction::Select { relation, left, right, then, otherwise, .. } => {
                let (then, otherwise) = (self.slope(then), self.slope(otherwise));
                let mut writer = Writer { program: &mut self.out, steps: out };
                writer.gate(relation, (left, right), then, otherwise)
            }
            _ => Amount::Constant(0.0),
        };
        self.set_slope(to, amount, out);
    }
}
