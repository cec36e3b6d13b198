//! Which sums of a block have an adjoint that is known before their loop runs.
//!
//! It is where everything between the sum and what the block gives to the outside is linear, with factors that do not
//! depend on unknowns. Found by going backward through the block once, without writing code.

use std::collections::{BTreeMap, BTreeSet, HashMap};

use crate::numbers::operation::{Binary, Unary};

use super::activity::{Activity, free_registers, is_update};
use super::program::{Instruction, Program, Register, Role, Step};

/// An adjoint that is known beforehand: `coefficient * factors * (adjoint of base)`; without a base that of the value, 1.
#[derive(Clone, Debug, PartialEq)]
pub struct Linear {
    /// The accumulator of an outer block whose adjoint it is a multiple of.
    pub base: Option<Register>,
    /// The constant factor.
    pub coefficient: f64,
    /// Registers that do not depend on unknowns, sorted.
    pub factors: Vec<Register>,
}

#[derive(Clone, Debug, PartialEq)]
enum State {
    Known(Linear),
    Unknown,
}

/// For the number of each loop that can be fused: its accumulators with their adjoints.
pub fn known_sums(
    steps: &[Step],
    owned: &BTreeSet<Register>,
    program: &Program,
    activity: &Activity,
) -> HashMap<usize, Vec<(Register, Linear)>> {
    let mut search = Search { states: BTreeMap::new(), constants: HashMap::new(), places: HashMap::new(), activity };
    for (number, step) in steps.iter().enumerate() {
        if let Step::Do(instruction) = step {
            if let Instruction::Constant { to, bits } = instruction {
                search.constants.insert(*to, f64::from_bits(*bits));
            }
            if let Some(to) = instruction.target().filter(|_| !is_update(instruction)) {
                search.places.insert(to, number);
            }
        }
        if let Step::When { then, .. } = step
            && let Some(Step::Do(Instruction::Copy { to, .. })) = then.last()
        {
            search.places.insert(*to, number);
        }
    }
    let mut found = HashMap::new();
    for (number, step) in steps.iter().enumerate().rev() {
        match step {
            Step::Do(instruction) => search.instruction(instruction, owned, program),
            Step::Loop { body, .. } => {
                let sums = search.sums(body, number);
                for register in free_registers(body.iter()) {
                    search.give_up(register);
                }
                if let Some(sums) = sums {
                    found.insert(number, sums);
                }
            }
            Step::When { then, otherwise, .. } => {
                for register in free_registers(then.iter().chain(otherwise)) {
                    search.give_up(register);
                }
            }
        }
    }
    found
}

struct Search<'a> {
    states: BTreeMap<Register, State>,
    constants: HashMap<Register, f64>,
    /// Where in the block a register is defined.
    places: HashMap<Register, usize>,
    activity: &'a Activity,
}

impl Search<'_> {
    fn give_up(&mut self, register: Register) {
        if self.activity.is_active(register) {
            self.states.insert(register, State::Unknown);
        }
    }

    fn give(&mut self, register: Register, linear: Linear) {
        if !self.activity.is_active(register) {
            return;
        }
        let state = match self.states.remove(&register) {
            None => State::Known(linear),
            Some(State::Known(known)) if known.base == linear.base && known.factors == linear.factors => {
                State::Known(Linear { coefficient: known.coefficient + linear.coefficient, ..known })
            }
            Some(_) => State::Unknown,
        };
        self.states.insert(register, state);
    }

    fn instruction(&mut self, instruction: &Instruction, owned: &BTreeSet<Register>, program: &Program) {
        let one = |base| Linear { base, coefficient: 1.0, factors: Vec::new() };
        match *instruction {
            Instruction::Store { buffer, from, .. } => {
                if program.buffers[buffer.0 as usize].role == Role::Value {
                    self.give(from, one(None));
                } else {
                    self.give_up(from);
                }
                return;
            }
            Instruction::Binary { to, operation, right, .. } if !owned.contains(&to) => {
                if operation == Binary::Add {
                    self.give(right, one(Some(to)));
                } else {
                    self.give_up(right);
                }
                return;
            }
            Instruction::Copy { from, .. } => return self.give_up(from),
            _ => {}
        }
        let state = instruction.target().and_then(|to| self.states.get(&to).cloned());
        let (Some(State::Known(linear)), Some(rule)) = (&state, rule(instruction)) else {
            if state.is_some() {
                instruction.sources().for_each(|source| self.give_up(source));
            }
            return;
        };
        let scaled = |factor: f64| Linear { coefficient: factor * linear.coefficient, ..linear.clone() };
        match rule {
            Rule::Sum(left, a, right, b) => {
                self.give(left, scaled(a));
                self.give(right, scaled(b));
            }
            Rule::Negative(of) => self.give(of, scaled(-1.0)),
            Rule::Product(left, right) => {
                let (factor, part) = if self.activity.is_active(left) { (right, left) } else { (left, right) };
                match self.constants.get(&factor) {
                    _ if self.activity.is_active(factor) => {
                        [left, right].into_iter().for_each(|side| self.give_up(side))
                    }
                    Some(&constant) => self.give(part, scaled(constant)),
                    None => {
                        let mut factors = linear.factors.clone();
                        factors.push(factor);
                        factors.sort();
                        self.give(part, Linear { factors, ..linear.clone() });
                    }
                }
            }
        }
    }

    /// The accumulators of a loop, if all of them are sums with known adjoints.
    fn sums(&self, body: &[Step], number: usize) -> Option<Vec<(Register, Linear)>> {
        let mut sums = Vec::new();
        for step in body {
            match step {
                Step::Do(Instruction::Store { .. }) => return None,
                Step::Do(instruction @ Instruction::Binary { to, operation, .. }) if is_update(instruction) => {
                    if !self.activity.is_active(*to) {
                        continue;
                    }
                    match self.states.get(to) {
                        Some(State::Known(linear)) if *operation == Binary::Add => {
                            // The factors must be there before the loop is.
                            let late = |factor: &Register| self.places.get(factor).is_some_and(|&place| place > number);
                            if linear.factors.iter().any(late) {
                                return None;
                            }
                            sums.push((*to, linear.clone()));
                        }
                        _ => return None,
                    }
                }
                _ => {}
            }
        }
        (!sums.is_empty()).then_some(sums)
    }
}

enum Rule {
    Sum(Register, f64, Register, f64),
    Negative(Register),
    Product(Register, Register),
}

fn rule(instruction: &Instruction) -> Option<Rule> {
    match *instruction {
        Instruction::Binary { operation: Binary::Add, left, right, .. } => Some(Rule::Sum(left, 1.0, right, 1.0)),
        Instruction::Binary { operation: Binary::Subtract, left, right, .. } => Some(Rule::Sum(left, 1.0, right, -1.0)),
        Instruction::Binary { operation: Binary::Multiply, left, right, .. } => Some(Rule::Product(left, right)),
        Instruction::Unary { operation: Unary::Negate, of, .. } => Some(Rule::Negative(of)),
        _ => None,
    }
}
