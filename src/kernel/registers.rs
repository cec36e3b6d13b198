//! Register planning: many registers that are needed in turn become few, so that all lanes of all of them stay in the
//! nearest cache.
//!
//! What is loaded from a read-only buffer keeps a number of its own, behind the others: the lane interpreter reads such
//! rows where they are and gives these registers no memory traffic.
//!
//! A register is live from its first assignment to its last use in the order of the text; one that is assigned outside a
//! loop and read or updated inside stays live to the loop's end, since the next turn needs it. Registers whose lives do
//! not overlap share a place (linear scan, Poletto and Sarkar 1999).

use std::collections::{BTreeMap, BTreeSet, HashMap};

use super::program::{Instruction, Program, Register, Role, Step};

/// The program with as few registers as its lives allow.
pub fn plan_registers(source: &Program) -> Program {
    let mut lives = Lives { clock: 0, lives: BTreeMap::new() };
    lives.block(&source.body, &mut Vec::new());
    let mut loaded = BTreeSet::new();
    collect_loads(source, &source.body, &mut loaded);
    let mut by_start: Vec<(u32, u32, Register)> =
        lives.lives.iter().map(|(register, life)| (life.first, life.last, *register)).collect();
    by_start.sort();
    let mut free: BTreeSet<u32> = BTreeSet::new();
    let mut busy: BTreeSet<(u32, u32)> = BTreeSet::new();
    let mut places = HashMap::new();
    let mut count = 0;
    for (first, last, register) in by_start {
        while let Some(&(end, place)) = busy.first().filter(|(end, _)| *end < first) {
            busy.remove(&(end, place));
            free.insert(place);
        }
        if loaded.contains(&register) {
            continue;
        }
        let place = free.pop_first().unwrap_or_else(|| {
            count += 1;
            count - 1
        });
        busy.insert((last, place));
        places.insert(register, Register(place));
    }
    for register in loaded {
        places.insert(register, Register(count));
        count += 1;
    }
    let body = rename(&source.body, &places);
    Program { registers: count, body, ..source.clone() }
}

fn collect_loads(program: &Program, steps: &[Step], loaded: &mut BTreeSet<Register>) {
    for step in steps {
        match step {
            Step::Do(Instruction::Load { to, buffer, .. }) => {
                if matches!(program.buffers[buffer.0 as usize].role, Role::Unknowns | Role::Direction) {
                    loaded.insert(*to);
                }
            }
            Step::Do(_) => {}
            Step::Loop { body, .. } => collect_loads(program, body, loaded),
            Step::When { then, otherwise, .. } => {
                collect_loads(program, then, loaded);
                collect_loads(program, otherwise, loaded);
            }
        }
    }
}

#[derive(Clone, Copy)]
struct Life {
    first: u32,
    last: u32,
}

struct Lives {
    clock: u32,
    lives: BTreeMap<Register, Life>,
}

impl Lives {
    /// `starts` are the times at which the loops around this place began.
    fn block(&mut self, steps: &[Step], starts: &mut Vec<(u32, Vec<Register>)>) {
        for step in steps {
            self.clock += 1;
            match step {
                Step::Do(instruction) => {
                    for register in instruction.sources().chain(instruction.target()) {
                        self.touch(register, starts);
                    }
                }
                Step::Loop { body, .. } => {
                    starts.push((self.clock, Vec::new()));
                    self.block(body, starts);
                    self.clock += 1;
                    if let Some((_, carried)) = starts.pop() {
                        for register in carried {
                            if let Some(life) = self.lives.get_mut(&register) {
                                life.last = self.clock;
                            }
                        }
                    }
                }
                Step::When { then, otherwise, .. } => {
                    // A result is assigned in both blocks; what is set in one must not be overwritten in the other.
                    self.block(then, starts);
                    self.block(otherwise, starts);
                    self.clock += 1;
                }
            }
        }
    }

    fn touch(&mut self, register: Register, starts: &mut [(u32, Vec<Register>)]) {
        let clock = self.clock;
        let life = self.lives.entry(register).or_insert(Life { first: clock, last: clock });
        life.last = clock;
        for (start, carried) in starts.iter_mut() {
            if life.first < *start {
                carried.push(register);
            }
        }
    }
}

fn rename(steps: &[Step], places: &HashMap<Register, Register>) -> Vec<Step> {
    steps
        .iter()
        .map(|step| match step {
            Step::Do(instruction) => Step::Do(instruction.renamed(|source| places[&source], |to| places[&to])),
            Step::Loop { first, last, descending, body } => Step::Loop {
                first: first.clone(),
                last: last.clone(),
                descending: *descending,
                body: rename(body, places),
            },
            Step::When { condition, then, otherwise } => Step::When {
                condition: condition.clone(),
                then: rename(then, places),
                otherwise: rename(otherwise, places),
            },
        })
        .collect()
}
