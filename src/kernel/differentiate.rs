//! Reverse mode on the rolled program: from value to value and gradient (Linnainmaa 1970; Speelpenning 1980).
//!
//! Each block is gone through forward, as it stands, and then backward, collecting adjoints. A loop's body is computed
//! again in the backward sweep instead of keeping a tape: loops stay rolled, and memory stays what the forward program
//! needs. Where the adjoint of a sum is known before its loop runs, because everything behind the sum is linear with
//! constant factors, the loop is gone through once, value and adjoints together (*fused*). That is the case of usual
//! energies, and makes their gradient cost little more than their value.
//!
//! Adjoints of registers of an outer block are gathered in cells, which are set to 0 before the inner block and added to
//! in it. Products, minima and maxima over loops keep the running result before each turn in a buffer and are gone
//! through in descending order, so that factors of 0 are right.
//!
//! What a branch that was not taken would contribute is an exact 0, which [`Binary::Gate`] keeps from becoming NaN.

use std::collections::{BTreeMap, BTreeSet, HashMap};

use crate::landscape::term::{Affine, Index};
use crate::numbers::operation::{Binary, Relation};

use super::activity::{Activity, free_registers, owned_registers};
use super::amount::{Amount, Writer};
use super::linear::{Linear, known_sums};
use super::program::{BufferId, Instruction, Program, Register, Role, Step};

/// A program for value and gradient from a lowered program for the value.
pub fn differentiate(source: &Program) -> Program {
    let mut out = Program { body: Vec::new(), registers: 0, ..source.clone() };
    let n_unknowns = source.buffer(Role::Unknowns).map_or(0, |buffer| source.buffers[buffer.0 as usize].length);
    let gradient = out.add_buffer(Role::Gradient, n_unknowns);
    let mut adjoint_buffers = HashMap::new();
    let mut steps = vec![clear(&mut out, gradient)];
    for (number, buffer) in source.buffers.iter().enumerate() {
        let id = BufferId(number as u32);
        match buffer.role {
            Role::Unknowns => drop(adjoint_buffers.insert(id, gradient)),
            Role::Scratch => {
                let adjoint = out.add_buffer(Role::Scratch, buffer.length);
                steps.push(clear(&mut out, adjoint));
                adjoint_buffers.insert(id, adjoint);
            }
            _ => {}
        }
    }
    let mut reverse = Reverse { activity: Activity::of(source), source, out, adjoint_buffers, depth: 0 };
    let mut frame = Frame::default();
    reverse.block(&source.body, &mut frame, true, &mut steps);
    reverse.out.body = steps;
    reverse.out
}

fn clear(program: &mut Program, buffer: BufferId) -> Step {
    let length = program.buffers[buffer.0 as usize].length as i64;
    let from = program.fresh();
    let at = Index::Affine(Affine::level(0));
    Step::Loop {
        first: Index::Affine(Affine::constant(0)),
        last: Index::Affine(Affine::constant(length - 1)),
        descending: false,
        body: vec![
            Step::Do(Instruction::Constant { to: from, bits: 0 }),
            Step::Do(Instruction::Store { buffer, at, from }),
        ],
    }
}

/// What a block knows: names of source registers in the new program, and adjoints.
#[derive(Clone, Default)]
struct Frame {
    names: HashMap<Register, Register>,
    adjoints: HashMap<Register, Amount>,
    /// Cells for registers of outer blocks.
    cells: BTreeMap<Register, Cell>,
    /// Adjoints of the accumulators that this block updates.
    seeds: HashMap<Register, Amount>,
    /// For accumulators of other kinds than sums: where the result before this turn is kept, and the adjoint, which
    /// changes from turn to turn.
    running: HashMap<Register, (Register, Register)>,
}

/// Which effects on the outside a copied step keeps.
#[derive(Clone, Copy)]
struct Keep {
    updates: bool,
    stores: bool,
}

#[derive(Clone, Copy)]
struct Cell {
    register: Register,
    gated: bool,
    /// Whether anything is added to it. A cell that stays at 0 must not be passed on: what it would be multiplied with may
    /// be infinite or not a number where it is not used.
    used: bool,
}

struct Reverse<'a> {
    source: &'a Program,
    activity: Activity,
    out: Program,
    adjoint_buffers: HashMap<BufferId, BufferId>,
    /// Loops around the block at hand, in the new program as in the source.
    depth: u32,
}

impl Reverse<'_> {
    /// Forward and backward through a block. With `keep`, what the block does to the outside (updates of accumulators,
    /// stores) is done; without, the block is only computed again for its adjoints.
    fn block(&mut self, steps: &[Step], frame: &mut Frame, keep: bool, out: &mut Vec<Step>) {
        let owned = owned_registers(steps);
        let known = known_sums(steps, &owned, self.source, &self.activity);
        for (number, step) in steps.iter().enumerate() {
            match (step, known.get(&number)) {
                (Step::Loop { .. }, Some(sums)) => {
                    let seeds = sums.iter().map(|(acc, linear)| (*acc, self.amount(linear, frame, out))).collect();
                    self.turn(step, frame, seeds, true, out);
                }
                _ => self.forward(step, frame, &owned, Keep { updates: keep, stores: keep }, out),
            }
        }
        for (number, step) in steps.iter().enumerate().rev() {
            match step {
                Step::Do(instruction) => self.backward(instruction, frame, &owned, out),
                Step::Loop { body, .. } if !known.contains_key(&number) => self.backward_loop(step, body, frame, out),
                Step::Loop { .. } => {}
                Step::When { condition, then, otherwise } => {
                    if !results(then).iter().any(|result| frame.adjoints.contains_key(result)) {
                        continue;
                    }
                    let cells = self.open_cells(steps_of_when(then, otherwise), frame, out);
                    let mut blocks = [then, otherwise].map(|steps| {
                        // With the adjoint of the result, which goes to what each branch copies into it.
                        let mut inner = Frame { cells: cells.clone(), ..frame.clone() };
                        let mut block = Vec::new();
                        self.block(steps, &mut inner, false, &mut block);
                        (block, inner.cells)
                    });
                    let first = blocks[0].1.clone();
                    let (then, otherwise) = (std::mem::take(&mut blocks[0].0), std::mem::take(&mut blocks[1].0));
                    out.push(Step::When { condition: condition.clone(), then, otherwise });
                    let both = cells.into_iter().map(|(register, mut cell)| {
                        cell.gated = first[&register].gated || blocks[1].1[&register].gated;
                        cell.used = first[&register].used || blocks[1].1[&register].used;
                        (register, cell)
                    });
                    self.close_cells(both.collect(), frame, out);
                }
            }
        }
    }

    fn writer<'b>(&'b mut self, steps: &'b mut Vec<Step>) -> Writer<'b> {
        Writer { program: &mut self.out, steps }
    }

    fn amount(&mut self, linear: &Linear, frame: &Frame, out: &mut Vec<Step>) -> Amount {
        let mut amount = linear.base.map_or(Amount::Constant(1.0), |base| frame.seeds[&base]);
        let mut writer = self.writer(out);
        amount = writer.multiply(amount, Amount::Constant(linear.coefficient));
        for factor in &linear.factors {
            amount = writer.multiply(amount, Amount::of(frame.names[factor]));
        }
        amount
    }

    /// Copies a step under new names.
    fn forward(&mut self, step: &Step, frame: &mut Frame, owned: &BTreeSet<Register>, keep: Keep, out: &mut Vec<Step>) {
        match step {
            Step::Do(instruction) => {
                let kept = match instruction.target() {
                    Some(to) => keep.updates || owned.contains(&to),
                    None => keep.stores,
                };
                if !kept {
                    return;
                }
                let names = &frame.names;
                let fresh = &mut self.out;
                let mut given = None;
                let renamed = instruction.renamed(
                    |register| names[&register],
                    |to| match names.get(&to) {
                        Some(&known) => known,
                        None => *given.insert(fresh.fresh()),
                    },
                );
                if let (Some(to), Some(name)) = (instruction.target(), given) {
                    frame.names.insert(to, name);
                }
                out.push(Step::Do(renamed));
            }
            Step::Loop { first, last, descending, body } => {
                let mut inner = frame.clone();
                let mut block = Vec::new();
                let own = owned_registers(body);
                for step in body {
                    self.forward(step, &mut inner, &own, Keep { updates: true, ..keep }, &mut block);
                }
                let (first, last) = (first.clone(), last.clone());
                out.push(Step::Loop { first, last, descending: *descending, body: block });
            }
            Step::When { condition, then, otherwise } => {
                for result in results(then) {
                    let name = self.out.fresh();
                    frame.names.insert(result, name);
                }
                let [then, otherwise] = [then, otherwise].map(|steps| {
                    let mut inner = frame.clone();
                    let mut block = Vec::new();
                    let own = owned_registers(steps);
                    for step in steps {
                        self.forward(step, &mut inner, &own, Keep { updates: true, ..keep }, &mut block);
                    }
                    block
                });
                out.push(Step::When { condition: condition.clone(), then, otherwise });
            }
        }
    }

    /// One pass through a loop that computes its body and the adjoints of it.
    fn turn(
        &mut self,
        step: &Step,
        frame: &mut Frame,
        seeds: HashMap<Register, Amount>,
        keep: bool,
        out: &mut Vec<Step>,
    ) {
        let Step::Loop { first, last, descending, body } = step else { return };
        let cells = self.open_cells(body.iter(), frame, out);
        let mut inner =
            Frame { names: frame.names.clone(), adjoints: HashMap::new(), cells, seeds, running: HashMap::new() };
        let mut block = Vec::new();
        self.depth += 1;
        self.block(body, &mut inner, keep, &mut block);
        self.depth -= 1;
        out.push(Step::Loop { first: first.clone(), last: last.clone(), descending: *descending, body: block });
        self.close_cells(inner.cells, frame, out);
    }

    fn open_cells<'s>(
        &mut self,
        steps: impl Iterator<Item = &'s Step>,
        frame: &Frame,
        out: &mut Vec<Step>,
    ) -> BTreeMap<Register, Cell> {
        let mut cells = BTreeMap::new();
        for register in free_registers(steps) {
            if self.activity.is_active(register) && frame.names.contains_key(&register) {
                let cell = self.writer(out).put(|to| Instruction::Constant { to, bits: 0 });
                cells.insert(register, Cell { register: cell, gated: false, used: false });
            }
        }
        cells
    }

    fn close_cells(&mut self, cells: BTreeMap<Register, Cell>, frame: &mut Frame, out: &mut Vec<Step>) {
        for (register, cell) in cells.into_iter().filter(|(_, cell)| cell.used) {
            self.contribute(register, Amount::Register(cell.register, cell.gated), frame, out);
        }
    }

    /// Adds to the adjoint of a source register.
    fn contribute(&mut self, register: Register, amount: Amount, frame: &mut Frame, out: &mut Vec<Step>) {
        if amount.is_zero() || !self.activity.is_active(register) {
            return;
        }
        if let Some(cell) = frame.cells.get_mut(&register) {
            cell.gated |= amount.is_gated();
            cell.used = true;
            let to = cell.register;
            let right = self.writer(out).register(amount);
            out.push(Step::Do(Instruction::Binary { to, operation: Binary::Add, left: to, right }));
            return;
        }
        let before = frame.adjoints.get(&register).copied().unwrap_or(Amount::Constant(0.0));
        let after = self.writer(out).add(before, amount);
        frame.adjoints.insert(register, after);
    }

    fn backward(
        &mut self,
        instruction: &Instruction,
        frame: &mut Frame,
        owned: &BTreeSet<Register>,
        out: &mut Vec<Step>,
    ) {
        match *instruction {
            Instruction::Store { buffer, ref at, from } => {
                let amount = match self.source.buffers[buffer.0 as usize].role {
                    Role::Value => Amount::Constant(1.0),
                    _ => match self.adjoint_buffers.get(&buffer) {
                        Some(&adjoint) if self.activity.is_active(from) => {
                            Amount::of(self.writer(out).put(|to| Instruction::Load {
                                to,
                                buffer: adjoint,
                                at: at.clone(),
                            }))
                        }
                        _ => return,
                    },
                };
                self.contribute(from, amount, frame, out);
            }
            // The update of an accumulator of an outer block.
            Instruction::Binary { to, operation, right, .. } if !owned.contains(&to) => {
                if let Some(&seed) = frame.seeds.get(&to) {
                    self.contribute(right, seed, frame, out);
                } else if let Some(&(before, adjoint)) = frame.running.get(&to) {
                    self.backward_running(operation, right, before, adjoint, frame, out);
                }
            }
            _ => {
                let Some(to) = instruction.target() else { return };
                // A copy into the result of an index condition belongs to the block outside.
                let amount = frame.adjoints.get(&to).copied();
                let Some(amount) = amount.filter(|_| self.activity.is_active(to)) else { return };
                self.pull(instruction, amount, frame, out);
            }
        }
    }

    /// Passes an adjoint on to the operands.
    fn pull(&mut self, instruction: &Instruction, amount: Amount, frame: &mut Frame, out: &mut Vec<Step>) {
        let name = |register: Register| frame.names[&register];
        match *instruction {
            Instruction::Load { buffer, ref at, .. } => {
                if let Some(&adjoint) = self.adjoint_buffers.get(&buffer) {
                    let from = self.writer(out).register(amount);
                    out.push(Step::Do(Instruction::Accumulate { buffer: adjoint, at: at.clone(), from }));
                }
            }
            Instruction::Copy { from, .. } => self.contribute(from, amount, frame, out),
            Instruction::Unary { to, operation, of } => {
                let (x, value) = (name(of), name(to));
                let mut writer = self.writer(out);
                let slope = writer.unary_slope(operation, x, value);
                let part = writer.multiply(amount, slope);
                self.contribute(of, part, frame, out);
            }
            Instruction::Power { of, exponent, .. } => {
                let base = Amount::of(name(of));
                let mut writer = self.writer(out);
                let scaled = writer.multiply(amount, Amount::Constant(f64::from(exponent)));
                let slope = writer.power(base, exponent - 1);
                let part = writer.multiply(scaled, slope);
                self.contribute(of, part, frame, out);
            }
            Instruction::Binary { to, operation, left, right } => {
                let asked = (self.activity.is_active(left), self.activity.is_active(right));
                let (sides, value) = ((name(left), name(right)), name(to));
                let mut writer = self.writer(out);
                let slopes = writer.binary_slopes(operation, sides, value, asked);
                let zero = Amount::Constant(0.0);
                let by_left = if asked.0 { writer.multiply(amount, slopes.0) } else { zero };
                let by_right = if asked.1 { writer.multiply(amount, slopes.1) } else { zero };
                self.contribute(left, by_left, frame, out);
                self.contribute(right, by_right, frame, out);
            }
            Instruction::Select { relation, left, right, then, otherwise, .. } => {
                let sides = (name(left), name(right));
                let zero = Amount::Constant(0.0);
                if self.activity.is_active(then) {
                    let part = self.writer(out).gate(relation, sides, amount, zero);
                    self.contribute(then, part, frame, out);
                }
                if self.activity.is_active(otherwise) {
                    let part = self.writer(out).gate(relation, sides, zero, amount);
                    self.contribute(otherwise, part, frame, out);
                }
            }
            // Fused forms come later, and the others have no operands.
            _ => {}
        }
    }

    fn backward_loop(&mut self, step: &Step, body: &[Step], frame: &mut Frame, out: &mut Vec<Step>) {
        let own = owned_registers(body);
        let mut seeds = HashMap::new();
        let mut running = None;
        let mut stores = has_stores(body);
        for inner in body {
            if let Step::Do(Instruction::Binary { to, operation, .. }) = inner
                && !own.contains(to)
            {
                let adjoint = frame.adjoints.get(to).copied();
                match adjoint.filter(|_| self.activity.is_active(*to)) {
                    Some(amount) if *operation == Binary::Add => drop(seeds.insert(*to, amount)),
                    Some(amount) => running = Some((*to, *operation, amount)),
                    None => {}
                }
            }
        }
        stores |= !seeds.is_empty();
        if let Some((acc, operation, amount)) = running {
            self.running_loop(step, body, (acc, operation, amount), frame, out);
        } else if stores {
            self.turn(step, frame, seeds, false, out);
        }
    }

    /// The backward sweep of a product, minimum or maximum over a loop.
    fn running_loop(
        &mut self,
        step: &Step,
        body: &[Step],
        accumulator: (Register, Binary, Amount),
        frame: &mut Frame,
        out: &mut Vec<Step>,
    ) {
        let Step::Loop { first, last, .. } = step else { return };
        let (acc, operation, amount) = accumulator;
        let (low, length) = self.activity.trip_range(step);
        let buffer = self.out.add_buffer(Role::Scratch, length);
        let at = Index::Affine(Affine { constant: -low, factors: vec![(self.depth, 1)] });
        // Once more forward, keeping the result before each turn.
        let neutral = match operation {
            Binary::Multiply => 1.0,
            Binary::Minimum => f64::INFINITY,
            _ => f64::NEG_INFINITY,
        };
        let again = self.writer(out).put(|to| Instruction::Constant { to, bits: neutral.to_bits() });
        let mut inner = frame.clone();
        inner.names.insert(acc, again);
        let mut block = vec![Step::Do(Instruction::Store { buffer, at: at.clone(), from: again })];
        let own = owned_registers(body);
        for step in body {
            self.forward(step, &mut inner, &own, Keep { updates: true, stores: false }, &mut block);
        }
        out.push(Step::Loop { first: first.clone(), last: last.clone(), descending: false, body: block });
        // And backward, with the adjoint of the result so far in a register of its own.
        let from = self.writer(out).register(amount);
        let adjoint = self.writer(out).put(|to| Instruction::Copy { to, from });
        let cells = self.open_cells(body.iter(), frame, out);
        let mut block = Vec::new();
        let before = self.writer(&mut block).put(|to| Instruction::Load { to, buffer, at });
        let mut inner = Frame { names: frame.names.clone(), cells, ..Frame::default() };
        inner.running.insert(acc, (before, adjoint));
        self.depth += 1;
        self.block(body, &mut inner, false, &mut block);
        self.depth -= 1;
        out.push(Step::Loop { first: first.clone(), last: last.clone(), descending: true, body: block });
        self.close_cells(inner.cells, frame, out);
    }

    fn backward_running(
        &mut self,
        operation: Binary,
        right: Register,
        before: Register,
        adjoint: Register,
        frame: &mut Frame,
        out: &mut Vec<Step>,
    ) {
        let part = frame.names[&right];
        let amount = Amount::Register(adjoint, true);
        let mut writer = self.writer(out);
        let zero = Amount::Constant(0.0);
        let (by_part, onward) = match operation {
            Binary::Multiply => {
                (writer.multiply(amount, Amount::of(before)), writer.multiply(amount, Amount::of(part)))
            }
            _ => {
                let sides = if operation == Binary::Minimum { (before, part) } else { (part, before) };
                (writer.gate(Relation::Less, sides, zero, amount), writer.gate(Relation::Less, sides, amount, zero))
            }
        };
        let from = writer.register(onward);
        // The part's adjoint is fixed in a register of its own before the running one changes.
        let by_part = writer.register(by_part);
        out.push(Step::Do(Instruction::Copy { to: adjoint, from }));
        self.contribute(right, Amount::Register(by_part, true), frame, out);
    }
}

fn steps_of_when<'s>(then: &'s [Step], otherwise: &'s [Step]) -> impl Iterator<Item = &'s Step> {
    then.iter().chain(otherwise)
}

/// The registers that a block of an index condition copies its result into.
fn results(steps: &[Step]) -> Vec<Register> {
    match steps.last() {
        Some(Step::Do(Instruction::Copy { to, .. })) => vec![*to],
        _ => Vec::new(),
    }
}

fn has_stores(steps: &[Step]) -> bool {
    steps.iter().any(|step| match step {
        Step::Do(instruction) => matches!(instruction, Instruction::Store { .. }),
        Step::Loop { body, .. } => has_stores(body),
        Step::When { then, otherwise, .. } => has_stores(then) || has_stores(otherwise),
    })
}
