//! What an expression means to the checker: a number, a condition, or a family of numbers.

use std::rc::Rc;

use crate::language::diagnostic::Span;
use crate::numbers::operation::{Binary, Relation, Unary};

use super::AxisRange;
use super::term::{Index, IndexCondition, TermId};

/// The meaning of an expression.
#[derive(Clone, Debug)]
pub enum Value {
    /// A number.
    Number(TermId),
    /// A family, a row, a vector.
    Array(Rc<Array>),
    /// A condition.
    Condition(Condition),
}

/// Numbers with axes; elements become terms when they are asked for.
#[derive(Clone, Debug)]
pub struct Array {
    /// The axes; at least one.
    pub axes: Vec<AxisRange>,
    /// Where the elements come from.
    pub backing: Backing,
}

/// Where the elements of an array come from.
#[derive(Clone, Debug)]
pub enum Backing {
    /// Stored row by row, from an offset.
    Stored(Store, Index),
    /// Listed row by row.
    Listed(Vec<TermId>),
    /// An operation on each element.
    Mapped(Unary, Rc<Array>),
    /// An operation on pairs of elements, or on elements and one number.
    Paired(Binary, Operand, Operand, Span),
}

/// One side of a paired operation.
#[derive(Clone, Debug)]
pub enum Operand {
    /// The same number for all.
    Number(TermId),
    /// Element by element.
    Array(Rc<Array>),
}

/// A place where numbers are stored.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Store {
    /// A constant table.
    Table(u32),
    /// The unknowns.
    Unknowns,
    /// A let family.
    Family(u32),
}

/// A condition, decided by indices or at each point.
#[derive(Clone, Debug)]
pub enum Condition {
    /// Decided by indices.
    Index(IndexCondition),
    /// A comparison at each point.
    Compare(Relation, TermId, TermId),
    /// Both.
    And(Box<Condition>, Box<Condition>),
    /// Either.
    Or(Box<Condition>, Box<Condition>),
    /// The opposite.
    Not(Box<Condition>),
}

impl Array {
    /// How many elements there are.
    pub fn count(&self) -> usize {
        self.axes.iter().map(|axis| axis.count).product()
    }

    /// `a vector of 3`, `a family of 13 by 3`.
    pub fn describe(&self) -> String {
        match self.axes.as_slice() {
            [axis] => format!("a vector of {}", axis.count),
            axes => {
                let counts: Vec<String> = axes.iter().map(|axis| axis.count.to_string()).collect();
                format!("a family of {}", counts.join(" by "))
            }
        }
    }
}

impl Value {
    /// In the user's words.
    pub fn describe(&self) -> String {
        match self {
            Value::Number(_) => "a number".into(),
            Value::Condition(_) => "a condition".into(),
            Value::Array(array) => array.describe(),
        }
    }
}
