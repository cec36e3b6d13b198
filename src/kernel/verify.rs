//! The verifier. A verified program
//!
//! 1. names only registers, buffers, tables and lookups that it has;
//! 2. reads a register only where it has been assigned on every way there (a loop may run zero times, so what it assigns
//!    counts only inside);
//! 3. keeps every row of a buffer, every place of a table and a lookup in range, for all values of the counters;
//! 4. uses the counters of the loops around it and no others;
//! 5. writes no read-only buffer.
//!
//! That is all that an executor needs to leave out its own checks. Rows are kept in range by the ranges of the counters
//! where that is enough; else the counters are gone through one by one, conditions included, within a stated effort.

use std::collections::HashSet;
use std::fmt;

use crate::landscape::term::{Affine, Index, IndexCondition};

use super::program::{Instruction, Program, Register, Role, Step};

/// Values of counters that the verifier goes through at most, for one program.
const MAX_EFFORT: u64 = 50_000_000;

/// A verified program.
#[derive(Clone, Debug)]
pub struct Verified(Program);

impl Verified {
    /// The program.
    pub fn program(&self) -> &Program {
        &self.0
    }
}

/// Why a program is not sound; always a fault of a pass.
#[derive(Clone, Debug, PartialEq, Eq)]
pub enum Fault {
    /// A register beyond those that there are.
    NoRegister(Register),
    /// A register that may not have been assigned.
    Unassigned(Register),
    /// A buffer, table or lookup that there is not.
    NoStore(String),
    /// A place outside its buffer, table or lookup.
    OutOfRange {
        /// The instruction.
        place: String,
        /// The value of the index.
        value: i64,
        /// How many there are.
        length: usize,
    },
    /// A counter of no loop around.
    NoCounter(u32),
    /// A store to something that is read only.
    ReadOnly(String),
    /// A whole power, which the simplify pass should have expanded.
    Unexpanded,
    /// Ranges that cannot be shown with the effort allowed.
    Effort,
}

impl fmt::Display for Fault {
    fn fmt(&self, out: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            Fault::NoRegister(register) => write!(out, "there is no register r{}", register.0),
            Fault::Unassigned(register) => write!(out, "register r{} may be read before it is set", register.0),
            Fault::NoStore(what) => write!(out, "there is no {what}"),
            Fault::OutOfRange { place, value, length } => write!(out, "place {value} of {length} in `{place}`"),
            Fault::NoCounter(level) => write!(out, "there is no counter i{level} here"),
            Fault::ReadOnly(what) => write!(out, "`{what}` writes what is read only"),
            Fault::Unexpanded => write!(out, "a whole power is left"),
            Fault::Effort => write!(out, "the ranges of its indices cannot be shown with reasonable effort"),
        }
    }
}

impl std::error::Error for Fault {}

/// Verifies a program.
///
/// # Errors
/// The first [`Fault`].
pub fn verify(program: Program) -> Result<Verified, Fault> {
    let mut check = Check { program: &program, loops: Vec::new(), conditions: Vec::new(), effort: 0 };
    check.block(&program.body, &mut HashSet::new())?;
    Ok(Verified(program))
}

struct Check<'a> {
    program: &'a Program,
    loops: Vec<(&'a Index, &'a Index, (i64, i64))>,
    conditions: Vec<(&'a IndexCondition, bool)>,
    effort: u64,
}

impl<'a> Check<'a> {
    fn block(&mut self, steps: &'a [Step], assigned: &mut HashSet<Register>) -> Result<(), Fault> {
        for step in steps {
            match step {
                Step::Do(instruction) => self.instruction(instruction, assigned)?,
                Step::Loop { first, last, body, .. } => {
                    self.counters(first.affine())?;
                    self.counters(last.affine())?;
                    self.lookup(first)?;
                    self.lookup(last)?;
                    let range = (self.bound(first).0, self.bound(last).1);
                    self.loops.push((first, last, range));
                    self.block(body, &mut assigned.clone())?;
                    self.loops.pop();
                }
                Step::When { condition, then, otherwise } => {
                    self.condition(condition)?;
                    let (mut left, mut right) = (assigned.clone(), assigned.clone());
                    for (holds, steps, set) in [(true, then, &mut left), (false, otherwise, &mut right)] {
                        self.conditions.push((condition, holds));
                        self.block(steps, set)?;
                        self.conditions.pop();
                    }
                    assigned.extend(left.intersection(&right));
                }
            }
        }
        Ok(())
    }

    fn instruction(&mut self, instruction: &Instruction, assigned: &mut HashSet<Register>) -> Result<(), Fault> {
        for source in instruction.sources() {
            if source.0 >= self.program.registers {
                return Err(Fault::NoRegister(source));
            }
            if !assigned.contains(&source) {
                return Err(Fault::Unassigned(source));
            }
        }
        match instruction {
            Instruction::Number { index, .. } => {
                self.counters(index.affine())?;
                self.lookup(index)?;
            }
            Instruction::Table { table, at, .. } => {
                let values = self.program.tables.get(*table as usize);
                let length = values.ok_or_else(|| Fault::NoStore(format!("table t{table}")))?.len();
                self.place(at, length, instruction)?;
            }
            Instruction::Load { buffer, at, .. }
            | Instruction::Store { buffer, at, .. }
            | Instruction::Accumulate { buffer, at, .. }
            | Instruction::Deduct { buffer, at, .. } => {
                let known = self.program.buffers.get(buffer.0 as usize);
                let known = known.ok_or_else(|| Fault::NoStore(format!("buffer b{}", buffer.0)))?;
                self.place(at, known.length, instruction)?;
                let writes = !matches!(instruction, Instruction::Load { .. });
                if writes && matches!(known.role, Role::Unknowns | Role::Direction) {
                    return Err(Fault::ReadOnly(instruction.to_string()));
                }
            }
            Instruction::Power { .. } => return Err(Fault::Unexpanded),
            _ => {}
        }
        if let Some(to) = instruction.target() {
            if to.0 >= self.program.registers {
                return Err(Fault::NoRegister(to));
            }
            assigned.insert(to);
        }
        Ok(())
    }

    fn counters(&self, affine: &Affine) -> Result<(), Fault> {
        match affine.factors.iter().find(|factor| factor.0 as usize >= self.loops.len()) {
            Some(factor) => Err(Fault::NoCounter(factor.0)),
            None => Ok(()),
        }
    }

    fn condition(&mut self, condition: &'a IndexCondition) -> Result<(), Fault> {
        match condition {
            IndexCondition::Compare(_, left, right) => {
                for side in [left, right] {
                    self.counters(side.affine())?;
                    self.lookup(side)?;
                }
                Ok(())
            }
            IndexCondition::All(parts) | IndexCondition::Any(parts) => {
                parts.iter().try_for_each(|part| self.condition(part))
            }
            IndexCondition::Not(part) => self.condition(part),
        }
    }

    fn lookup(&mut self, index: &Index) -> Result<(), Fault> {
        let Index::Lookup { table, at } = index else { return Ok(()) };
        let values = self.program.lookups.get(*table as usize);
        let length = values.ok_or_else(|| Fault::NoStore(format!("lookup k{table}")))?.len();
        self.in_range(&Index::Affine(at.clone()), length, &|| format!("lookup k{table}"))
    }

    fn place(&mut self, at: &Index, length: usize, instruction: &Instruction) -> Result<(), Fault> {
        self.counters(at.affine())?;
        self.lookup(at)?;
        self.in_range(at, length, &|| instruction.to_string())
    }

    fn in_range(&mut self, index: &Index, length: usize, name: &dyn Fn() -> String) -> Result<(), Fault> {
        let (low, high) = self.bound(index);
        if low > high || 0 <= low && high < length as i64 {
            return Ok(());
        }
        let mut levels = vec![0; self.loops.len()];
        match self.search(0, &mut levels, index, length)? {
            Some(value) => Err(Fault::OutOfRange { place: name(), value, length }),
            None => Ok(()),
        }
    }

    fn search(
        &mut self,
        depth: usize,
        levels: &mut Vec<i64>,
        index: &Index,
        length: usize,
    ) -> Result<Option<i64>, Fault> {
        let lookups = &self.program.lookups;
        let Some(&(first, last, _)) = self.loops.get(depth) else {
            let reached = self.conditions.iter().all(|(condition, holds)| condition.holds(levels, lookups) == *holds);
            let value = index.at(levels, lookups);
            return Ok((reached && !(0 <= value && value < length as i64)).then_some(value));
        };
        for value in first.at(levels, lookups)..=last.at(levels, lookups) {
            self.effort += 1;
            if self.effort > MAX_EFFORT {
                return Err(Fault::Effort);
            }
            levels[depth] = value;
            if let Some(found) = self.search(depth + 1, levels, index, length)? {
                return Ok(Some(found));
            }
        }
        Ok(None)
    }

    fn bound(&self, index: &Index) -> (i64, i64) {
        let affine = |affine: &Affine| {
            affine.factors.iter().fold((affine.constant, affine.constant), |(low, high), &(level, factor)| {
                let (a, b) = self.loops.get(level as usize).map_or((0, 0), |scope| scope.2);
                let (a, b) = (a.saturating_mul(factor), b.saturating_mul(factor));
                (low.saturating_add(a.min(b)), high.saturating_add(a.max(b)))
            })
        };
        match index {
            Index::Affine(form) => affine(form),
            Index::Lookup { table, .. } => {
                let values = &self.program.lookups[*table as usize];
                (values.iter().copied().min().unwrap_or(0), values.iter().copied().max().unwrap_or(0))
            }
        }
    }
}
