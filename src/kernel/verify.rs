//! The verifier. A verified program
//!
//! 1. names only registers, buffers, tables and lookups that it has;
//! 2. reads a register only where it has been assigned on every way there (a loop may run zero times, so what it assigns
//!    counts only inside);
//! 3. keeps every row of a buffer, every place of a table and a lookup in range, for all values of the counters;
//! 4. uses the counters of the loops around it and no others;
//! 5. writes no read-only buffer;
//! 6. has at most [`MAX_ROWS`] registers and rows, so that no place in memory overflows;
//! 7. has no index whose partial sums leave the range of `i64` for any values of the counters.
//!
//! Whether scratch rows are written before they are read is not asked: every executor begins with all buffers but the
//! read-only ones at zero, so what such a read gives is defined.
//!
//! That is all that an executor needs to leave out its own checks. Rows are kept in range by the ranges of the counters
//! where that is enough; else the counters are gone through one by one, conditions included, within a stated effort.

use std::collections::HashSet;
use std::fmt;

use crate::landscape::term::{Affine, Index, IndexCondition};

use super::program::{Instruction, Program, Register, Role, Step};
use super::text::Shown;

/// Values of counters that the verifier goes through at most, for one program.
const MAX_EFFORT: u64 = 50_000_000;

/// Registers and rows of buffers that a program may have in all: more would not fit into memory in lanes.
pub const MAX_ROWS: usize = 1 << 28;

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
    /// More registers and rows than [`MAX_ROWS`].
    TooLarge,
    /// An index that can leave the range of `i64`.
    Overflow(String),
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
            Fault::TooLarge => write!(out, "more than {MAX_ROWS} registers and rows"),
            Fault::Overflow(index) => write!(out, "the index `{index}` can overflow"),
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
    let rows =
        program.buffers.iter().try_fold(program.registers as usize, |sum, buffer| sum.checked_add(buffer.length));
    if rows.is_none_or(|rows| rows > MAX_ROWS) {
        return Err(Fault::TooLarge);
    }
    let mut check = Check { program: &program, loops: Vec::new(), conditions: Vec::new(), effort: 0 };
    check.block(&program.body, &mut HashSet::new())?;
    Ok(Verified(program))
}

struct Check<'a> {
    program: &'a Program,
    loops: Vec<(&'a Index, &'a Index, (i64, i64))>,
    /// The conditions around this place, with the number of loops around each.
    conditions: Vec<(usize, &'a IndexCondition, bool)>,
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
                        self.conditions.push((self.loops.len(), condition, holds));
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
        if let Some(factor) = affine.factors.iter().find(|factor| factor.0 as usize >= self.loops.len()) {
            return Err(Fault::NoCounter(factor.0));
        }
        match self.form(affine) {
            Some(_) => Ok(()),
            None => Err(Fault::Overflow(Shown(&Index::Affine(affine.clone())).to_string())),
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
        // Outermost first, and before the bounds of the next loop: those may look up what only the condition keeps in range.
        let mut here = self.conditions.iter().filter(|condition| condition.0 == depth);
        if !here.all(|(_, condition, holds)| condition.holds(levels, lookups) == *holds) {
            return Ok(None);
        }
        let Some(&(first, last, _)) = self.loops.get(depth) else {
            let value = index.at(levels, lookups);
            return Ok((!(0 <= value && value < length as i64)).then_some(value));
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

    /// The least and greatest value of an index by the ranges of the counters alone; its counters are checked before.
    fn bound(&self, index: &Index) -> (i64, i64) {
        match index {
            Index::Affine(form) => self.form(form).unwrap_or((i64::MIN, i64::MAX)),
            Index::Lookup { table, .. } => {
                let values = &self.program.lookups[*table as usize];
                (values.iter().copied().min().unwrap_or(0), values.iter().copied().max().unwrap_or(0))
            }
        }
    }

    /// The least and greatest value of an affine form; nothing where a product or partial sum can overflow. Sums are never
    /// cut off at the ends of `i64`: the next summand could bring a cut-off sum back into range, and a wrong row with it.
    fn form(&self, affine: &Affine) -> Option<(i64, i64)> {
        affine.factors.iter().try_fold((affine.constant, affine.constant), |(low, high), &(level, factor)| {
            let (a, b) = self.loops[level as usize].2;
            let (a, b) = (a.checked_mul(factor)?, b.checked_mul(factor)?);
            Some((low.checked_add(a.min(b))?, high.checked_add(a.max(b))?))
        })
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::kernel::text::read;

    fn fault(text: &str) -> Option<Fault> {
        verify(read(text).unwrap()).err()
    }

    #[test]
    fn registers_are_set_on_every_way() {
        let unset = Some(Fault::Unassigned(Register(0)));
        let out = "buffer b0 value 1\n";
        assert_eq!(fault(&format!("{out}store b0 0 r0")), unset);
        assert_eq!(fault(&format!("{out}loop i0 0 .. 3\nr0 = constant 1.0\nend\nstore b0 0 r0")), unset);
        let branch = "loop i0 0 .. 3\nwhen i0 < 2\nr0 = constant 1.0\notherwise\n";
        assert_eq!(fault(&format!("{out}{branch}end\nstore b0 0 r0\nend")), unset);
        assert_eq!(fault(&format!("{out}{branch}r0 = constant 2.0\nend\nstore b0 0 r0\nend")), None);
        // The second turn finds what the first has set, but the first does not.
        assert_eq!(fault(&format!("{out}loop i0 0 .. 3\nstore b0 0 r0\nr0 = constant 1.0\nend")), unset);
    }

    #[test]
    fn rows_are_in_range_for_all_counters() {
        let load = "buffer b0 unknowns 4\n";
        assert_eq!(fault(&format!("{load}loop i0 0 .. 3\nr0 = load b0 i0\nend")), None);
        let out = fault(&format!("{load}loop i0 0 .. 3\nr0 = load b0 1 + i0\nend"));
        assert!(matches!(out, Some(Fault::OutOfRange { value: 4, length: 4, .. })), "{out:?}");
        let out = fault(&format!("{load}loop i0 0 .. 3\nr0 = load b0 -1 + i0\nend"));
        assert!(matches!(out, Some(Fault::OutOfRange { value: -1, .. })), "{out:?}");
        // Ranges alone say -3..3: only going through the counters shows it, and only with the condition.
        assert_eq!(fault(&format!("{load}loop i0 0 .. 3\nloop i1 i0 .. 3\nr0 = load b0 i1 - i0\nend\nend")), None);
        let inner = "when i0 < i1\nr0 = load b0 -1 + i1 - i0\notherwise\nend\n";
        let nest = format!("{load}loop i0 0 .. 3\nloop i1 i0 .. 3\n");
        assert_eq!(fault(&format!("{nest}{inner}end\nend")), None);
        assert!(fault(&format!("{nest}r0 = load b0 -1 + i1 - i0\nend\nend")).is_some());
    }

    #[test]
    fn lookups_may_lean_on_conditions() {
        // k0 has places for i0 = 0 and 1 only; the bounds of the inner loop look it up under the condition.
        let head = "buffer b0 unknowns 3\nlookup k0 0 2\nloop i0 0 .. 5\n";
        let body = "loop i1 0 .. k0[i0]\nr0 = load b0 i1 - 2*i0 + 2\nend\n";
        let out = fault(&format!("{head}when i0 < 2\n{body}otherwise\nend\nend"));
        assert!(matches!(out, None | Some(Fault::OutOfRange { .. })), "{out:?}");
        let out = fault(&format!("{head}{body}end"));
        assert!(matches!(out, Some(Fault::OutOfRange { value: 2, length: 2, .. })), "{out:?}");
    }

    #[test]
    fn what_is_not_there_is_refused() {
        assert_eq!(fault("r0 = load b0 0"), Some(Fault::NoStore("buffer b0".to_string())));
        assert_eq!(fault("r0 = table t0 0"), Some(Fault::NoStore("table t0".to_string())));
        assert_eq!(fault("r0 = number k0[0]"), Some(Fault::NoStore("lookup k0".to_string())));
        assert_eq!(fault("r0 = number i0"), Some(Fault::NoCounter(0)));
        assert_eq!(fault("r0 = constant 1.0\nr1 = power r0 3"), Some(Fault::Unexpanded));
        let write = fault("buffer b0 unknowns 1\nr0 = constant 1.0\naccumulate b0 0 r0");
        assert!(matches!(write, Some(Fault::ReadOnly(_))), "{write:?}");
    }

    #[test]
    fn nothing_overflows() {
        assert_eq!(fault("buffer b0 scratch 2305843009213693952\nbuffer b1 value 1"), Some(Fault::TooLarge));
        // With sums cut off at the ends of i64 this row would count as 0; wrapping arithmetic gives i64::MAX.
        let text = "buffer b0 unknowns 1\nloop i0 2 .. 2\nloop i1 1 .. 1\n\
                    r0 = load b0 9223372036854775807*i0 - 9223372036854775807*i1\nend\nend";
        assert!(matches!(fault(text), Some(Fault::Overflow(_))));
    }
}
