//! A product and the sum that uses it, in one instruction: one pass over memory, the same two roundings.

use std::collections::HashMap;

use crate::numbers::operation::Binary;

use super::program::{Instruction, Program, Register, Step};

/// Fuses products into the sums of the same block that alone use them. The bits stay the same.
pub fn fuse(source: &Program) -> Program {
    let mut uses = HashMap::new();
    count(&source.body, &mut uses);
    Program { body: fuse_block(&source.body, &uses), ..source.clone() }
}

/// How often a register is read and assigned.
type Uses = HashMap<Register, (u32, u32)>;

fn count(steps: &[Step], uses: &mut Uses) {
    for step in steps {
        match step {
            Step::Do(instruction) => {
                instruction.sources().for_each(|source| uses.entry(source).or_default().0 += 1);
                instruction.target().into_iter().for_each(|to| uses.entry(to).or_default().1 += 1);
            }
            Step::Loop { body, .. } => count(body, uses),
            Step::When { then, otherwise, .. } => {
                count(then, uses);
                count(otherwise, uses);
            }
        }
    }
}

fn fuse_block(steps: &[Step], uses: &Uses) -> Vec<Step> {
    let mut out: Vec<Option<Step>> = Vec::new();
    // Where in `out` a product stands that only one instruction reads.
    let mut products: HashMap<Register, (usize, Register, Register)> = HashMap::new();
    for step in steps {
        let step = match step {
            Step::Loop { first, last, descending, body } => Step::Loop {
                first: first.clone(),
                last: last.clone(),
                descending: *descending,
                body: fuse_block(body, uses),
            },
            Step::When { condition, then, otherwise } => Step::When {
                condition: condition.clone(),
                then: fuse_block(then, uses),
                otherwise: fuse_block(otherwise, uses),
            },
            Step::Do(Instruction::Binary { to, operation: Binary::Add, left, right }) => {
                let side = [(*right, *left), (*left, *right)]
                    .into_iter()
                    .find_map(|(part, plus)| products.remove(&part).map(|product| (product, plus)));
                match side {
                    Some(((place, left, right), plus)) => {
                        out[place] = None;
                        Step::Do(Instruction::MultiplyAdd { to: *to, left, right, plus })
                    }
                    None => step.clone(),
                }
            }
            Step::Do(instruction) => {
                if let Instruction::Binary { to, operation: Binary::Multiply, left, right } = instruction
                    && uses.get(to) == Some(&(1, 1))
                    && [left, right].into_iter().all(|side| uses.get(side).is_some_and(|use_| use_.1 == 1))
                {
                    products.insert(*to, (out.len(), *left, *right));
                }
                step.clone()
            }
        };
        out.push(Some(step));
    }
    out.into_iter().flatten().collect()
}
