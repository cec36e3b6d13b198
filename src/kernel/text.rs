//! Programs as text: printed, and read back.
//!
//! ```text
//! buffer b0 unknowns 3
//! buffer b1 value 1
//! r0 = constant 0.0
//! loop i0 0 .. 2
//!   r1 = load b0 i0
//!   r0 = add r0 r1
//! end
//! store b1 0 r0
//! ```
//!
//! An index is a whole number and multiples of counters, `2 + 3*i0 - i1`, or a lookup, `k0[i0]`. Tables follow the
//! buffers: `table t0 1.0 2.5`, `lookup k0 1 2`. Numbers are written so that they read back to the same bits.

use std::fmt;

use crate::landscape::term::{Affine, Index, IndexCondition};
use crate::numbers::operation::Relation;

use super::program::{Instruction, Program, Role, Step};

mod read;

pub use read::{ReadError, ReadErrorKind, read};

const ROLES: [(&str, Role); 7] = [
    ("unknowns", Role::Unknowns),
    ("direction", Role::Direction),
    ("value", Role::Value),
    ("gradient", Role::Gradient),
    ("curvature", Role::Curvature),
    ("shown", Role::Shown),
    ("scratch", Role::Scratch),
];

impl fmt::Display for Program {
    fn fmt(&self, out: &mut fmt::Formatter<'_>) -> fmt::Result {
        for (number, buffer) in self.buffers.iter().enumerate() {
            let role = ROLES.iter().find(|entry| entry.1 == buffer.role).map_or("", |entry| entry.0);
            writeln!(out, "buffer b{number} {role} {}", buffer.length)?;
        }
        for (number, table) in self.tables.iter().enumerate() {
            write!(out, "table t{number}")?;
            table.iter().try_for_each(|value| write!(out, " {value:?}"))?;
            writeln!(out)?;
        }
        for (number, lookup) in self.lookups.iter().enumerate() {
            write!(out, "lookup k{number}")?;
            lookup.iter().try_for_each(|value| write!(out, " {value}"))?;
            writeln!(out)?;
        }
        write_block(out, &self.body, 0, 0)
    }
}

fn write_block(out: &mut fmt::Formatter<'_>, steps: &[Step], indent: usize, depth: usize) -> fmt::Result {
    for step in steps {
        let margin = "  ".repeat(indent);
        match step {
            Step::Do(instruction) => writeln!(out, "{margin}{instruction}")?,
            Step::Loop { first, last, descending, body } => {
                let way = if *descending { "descending " } else { "" };
                writeln!(out, "{margin}loop {way}i{depth} {} .. {}", Shown(first), Shown(last))?;
                write_block(out, body, indent + 1, depth + 1)?;
                writeln!(out, "{margin}end")?;
            }
            Step::When { condition, then, otherwise } => {
                writeln!(out, "{margin}when {}", ShownCondition(condition))?;
                write_block(out, then, indent + 1, depth)?;
                writeln!(out, "{margin}otherwise")?;
                write_block(out, otherwise, indent + 1, depth)?;
                writeln!(out, "{margin}end")?;
            }
        }
    }
    Ok(())
}

impl fmt::Display for Instruction {
    fn fmt(&self, out: &mut fmt::Formatter<'_>) -> fmt::Result {
        if let Some(to) = self.target() {
            write!(out, "r{} = ", to.0)?;
        }
        match self {
            Instruction::Constant { bits, .. } => write!(out, "constant {:?}", f64::from_bits(*bits)),
            Instruction::Number { index, .. } => write!(out, "number {}", Shown(index)),
            Instruction::Table { table, at, .. } => write!(out, "table t{table} {}", Shown(at)),
            Instruction::Load { buffer, at, .. } => write!(out, "load b{} {}", buffer.0, Shown(at)),
            Instruction::Store { buffer, at, from } => write!(out, "store b{} {} r{}", buffer.0, Shown(at), from.0),
            Instruction::Accumulate { buffer, at, from } => {
                write!(out, "accumulate b{} {} r{}", buffer.0, Shown(at), from.0)
            }
            Instruction::Deduct { buffer, at, from } => write!(out, "deduct b{} {} r{}", buffer.0, Shown(at), from.0),
            Instruction::Copy { from, .. } => write!(out, "copy r{}", from.0),
            Instruction::Unary { operation, of, .. } => write!(out, "{} r{}", operation.name(), of.0),
            Instruction::Power { of, exponent, .. } => write!(out, "power r{} {exponent}", of.0),
            Instruction::Binary { operation, left, right, .. } => {
                write!(out, "{} r{} r{}", operation.name(), left.0, right.0)
            }
            Instruction::MultiplyAdd { left, right, plus, .. } => {
                write!(out, "muladd r{} r{} r{}", left.0, right.0, plus.0)
            }
            Instruction::Select { relation, left, right, then, otherwise, .. } => {
                write!(out, "select {} r{} r{} r{} r{}", relation.name(), left.0, right.0, then.0, otherwise.0)
            }
        }
    }
}

pub(super) struct Shown<'a>(pub(super) &'a Index);

impl fmt::Display for Shown<'_> {
    fn fmt(&self, out: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self.0 {
            Index::Affine(affine) => write_affine(out, affine),
            Index::Lookup { table, at } => {
                write!(out, "k{table}[")?;
                write_affine(out, at)?;
                write!(out, "]")
            }
        }
    }
}

fn write_affine(out: &mut fmt::Formatter<'_>, affine: &Affine) -> fmt::Result {
    let mut first = true;
    if affine.constant != 0 || affine.factors.is_empty() {
        write!(out, "{}", affine.constant)?;
        first = false;
    }
    for &(level, factor) in &affine.factors {
        let sign = match (first, factor < 0) {
            (true, false) => "",
            (true, true) => "-",
            (false, false) => " + ",
            (false, true) => " - ",
        };
        match factor.unsigned_abs() {
            1 => write!(out, "{sign}i{level}")?,
            size => write!(out, "{sign}{size}*i{level}")?,
        }
        first = false;
    }
    Ok(())
}

struct ShownCondition<'a>(&'a IndexCondition);

impl fmt::Display for ShownCondition<'_> {
    fn fmt(&self, out: &mut fmt::Formatter<'_>) -> fmt::Result {
        let list = |out: &mut fmt::Formatter<'_>, word: &str, parts: &[IndexCondition]| {
            write!(out, "{word}(")?;
            for (number, part) in parts.iter().enumerate() {
                write!(out, "{}{}", if number == 0 { "" } else { ", " }, ShownCondition(part))?;
            }
            write!(out, ")")
        };
        match self.0 {
            IndexCondition::Compare(relation, left, right) => {
                let sign = match relation {
                    Relation::Less => "<",
                    Relation::LessOrEqual => "<=",
                    Relation::Equal => "==",
                    Relation::NotEqual => "!=",
                };
                write!(out, "{} {sign} {}", Shown(left), Shown(right))
            }
            IndexCondition::All(parts) => list(out, "all", parts),
            IndexCondition::Any(parts) => list(out, "any", parts),
            IndexCondition::Not(part) => list(out, "not", std::slice::from_ref(part)),
        }
    }
}
