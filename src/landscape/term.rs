//! The terms: what an evaluation computes, as a shared graph with its loops still rolled.
//!
//! Functions are expanded and names are gone. A loop index is a *level*: the number of loops around it in its own
//! statement, 0 for the outermost (de Bruijn levels), so that equal subterms under equal loops are one term and are
//! computed once. Indices never depend on unknowns: they are affine in the levels, or looked up in a table of whole
//! numbers at an affine place.
//!
//! Terms are hash-consed: build them through [`Terms::add`], and equality is equality of [`TermId`].

use std::collections::HashMap;

use crate::language::tree::Reduction;
use crate::numbers::operation::{Binary, Relation, Unary};

/// A loop index, by the number of loops around its loop.
pub type Level = u32;

/// `constant + sum of factor * level`; sorted by level, no factor is 0.
#[derive(Clone, Debug, Default, PartialEq, Eq, Hash, PartialOrd, Ord)]
pub struct Affine {
    /// The constant.
    pub constant: i64,
    /// The levels with their factors.
    pub factors: Vec<(Level, i64)>,
}

impl Affine {
    /// A constant.
    pub fn constant(constant: i64) -> Self {
        Affine { constant, factors: Vec::new() }
    }

    /// A level.
    pub fn level(level: Level) -> Self {
        Affine { constant: 0, factors: vec![(level, 1)] }
    }

    /// `self + factor * other`; `None` on overflow.
    pub fn plus(&self, other: &Affine, factor: i64) -> Option<Affine> {
        let mut constant = other.constant.checked_mul(factor)?;
        constant = constant.checked_add(self.constant)?;
        let mut factors: Vec<(Level, i64)> = Vec::with_capacity(self.factors.len() + other.factors.len());
        let (mut left, mut right) = (self.factors.iter().peekable(), other.factors.iter().peekable());
        loop {
            let next = match (left.peek(), right.peek()) {
                (None, None) => break,
                (Some(a), Some(b)) if a.0 == b.0 => {
                    let sum = (a.0, a.1.checked_add(b.1.checked_mul(factor)?)?);
                    left.next();
                    right.next();
                    sum
                }
                (Some(a), b) if b.is_none_or(|b| a.0 < b.0) => {
                    let own = **a;
                    left.next();
                    own
                }
                (_, Some(b)) => {
                    let scaled = (b.0, b.1.checked_mul(factor)?);
                    right.next();
                    scaled
                }
                (Some(_), None) => break,
            };
            if next.1 != 0 {
                factors.push(next);
            }
        }
        Some(Affine { constant, factors })
    }

    /// Its value, given those of the levels (`levels[k]` is level k).
    pub fn at(&self, levels: &[i64]) -> i64 {
        self.factors.iter().fold(self.constant, |sum, &(level, factor)| {
            // Wraps only for indices that their range check refuses.
            sum.wrapping_add(factor.wrapping_mul(levels[level as usize]))
        })
    }
}

/// A whole number that depends on levels only.
#[derive(Clone, Debug, PartialEq, Eq, Hash, PartialOrd, Ord)]
pub enum Index {
    /// An affine one.
    Affine(Affine),
    /// `lookups[table][at]`
    Lookup {
        /// Which table of `Landscape::lookups`.
        table: u32,
        /// The place in it, 0-based.
        at: Affine,
    },
}

impl Index {
    /// Its value, given those of the levels and the tables.
    pub fn at(&self, levels: &[i64], lookups: &[Vec<i64>]) -> i64 {
        match self {
            Index::Affine(affine) => affine.at(levels),
            Index::Lookup { table, at } => lookups[*table as usize][at.at(levels) as usize],
        }
    }

    /// The levels in it, as bits.
    pub fn levels(&self) -> u64 {
        self.affine().factors.iter().fold(0, |levels, &(level, _)| levels | 1 << level)
    }

    /// The whole number that it is, if it is one.
    pub fn constant(&self) -> Option<i64> {
        match self {
            Index::Affine(affine) if affine.factors.is_empty() => Some(affine.constant),
            _ => None,
        }
    }

    /// The affine form that it is, or whose place it looks up.
    pub fn affine(&self) -> &Affine {
        match self {
            Index::Affine(affine) | Index::Lookup { at: affine, .. } => affine,
        }
    }
}

/// A condition on levels only: decided alike for every point.
#[derive(Clone, Debug, PartialEq, Eq, Hash, PartialOrd, Ord)]
pub enum IndexCondition {
    /// A comparison of whole numbers.
    Compare(Relation, Index, Index),
    /// All of them.
    All(Vec<IndexCondition>),
    /// Any of them.
    Any(Vec<IndexCondition>),
    /// Its opposite.
    Not(Box<IndexCondition>),
}

impl IndexCondition {
    /// Whether it holds, given the levels and the tables.
    pub fn holds(&self, levels: &[i64], lookups: &[Vec<i64>]) -> bool {
        match self {
            IndexCondition::Compare(relation, left, right) => {
                let (left, right) = (left.at(levels, lookups), right.at(levels, lookups));
                match relation {
                    Relation::Less => left < right,
                    Relation::LessOrEqual => left <= right,
                    Relation::Equal => left == right,
                    Relation::NotEqual => left != right,
                }
            }
            IndexCondition::All(parts) => parts.iter().all(|part| part.holds(levels, lookups)),
            IndexCondition::Any(parts) => parts.iter().any(|part| part.holds(levels, lookups)),
            IndexCondition::Not(part) => !part.holds(levels, lookups),
        }
    }
}

impl IndexCondition {
    /// The levels in it, as bits.
    pub fn levels(&self) -> u64 {
        match self {
            IndexCondition::Compare(_, left, right) => left.levels() | right.levels(),
            IndexCondition::All(parts) | IndexCondition::Any(parts) => {
                parts.iter().fold(0, |levels, part| levels | part.levels())
            }
            IndexCondition::Not(part) => part.levels(),
        }
    }
}

impl Term {
    /// The terms that it is made of.
    pub fn parts(&self) -> impl Iterator<Item = TermId> {
        let parts: [Option<TermId>; 4] = match *self {
            Term::Constant(_) | Term::Counter(_) | Term::Table(..) | Term::Unknown(_) | Term::Family(..) => [None; 4],
            Term::Unary(_, of) | Term::Power(of, _) | Term::Reduce { body: of, .. } => [Some(of), None, None, None],
            Term::Binary(_, left, right) => [Some(left), Some(right), None, None],
            Term::Choose { then, otherwise, .. } => [Some(then), Some(otherwise), None, None],
            Term::Select { left, right, then, otherwise, .. } => [Some(left), Some(right), Some(then), Some(otherwise)],
        };
        parts.into_iter().flatten()
    }
}

/// The number of a term in its [`Terms`].
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash, PartialOrd, Ord)]
pub struct TermId(pub u32);

/// A scalar quantity.
#[derive(Clone, Debug, PartialEq, Eq, Hash)]
pub enum Term {
    /// A number, by its bits.
    Constant(u64),
    /// A whole number used as a number.
    Counter(Index),
    /// `tables[table][at]`
    Table(u32, Index),
    /// The unknown in a slot.
    Unknown(Index),
    /// An element of a stored let family, by its place.
    Family(u32, Index),
    /// An operation of one operand.
    Unary(Unary, TermId),
    /// An operation of two operands.
    Binary(Binary, TermId, TermId),
    /// A whole power; the exponent is neither 0 nor 1.
    Power(TermId, i32),
    /// A reduction over one loop; several nest.
    Reduce {
        /// Which.
        operator: Reduction,
        /// The level that its loop binds.
        level: Level,
        /// The first value.
        first: Index,
        /// The last value, included; the range is empty when it is below the first.
        last: Index,
        /// Only where this holds.
        condition: Option<IndexCondition>,
        /// What is reduced.
        body: TermId,
    },
    /// One of two, decided by indices.
    Choose {
        /// The condition.
        condition: IndexCondition,
        /// Where it holds.
        then: TermId,
        /// Where it does not.
        otherwise: TermId,
    },
    /// One of two, decided by the unknowns at each point. Conditions with `and`, `or`, `not` are nested selections.
    Select {
        /// The comparison.
        relation: Relation,
        /// Its left operand.
        left: TermId,
        /// Its right operand.
        right: TermId,
        /// Where it holds.
        then: TermId,
        /// Where it does not.
        otherwise: TermId,
    },
}

/// What a term depends on.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq)]
pub struct TermInfo {
    /// Whether it depends on unknowns.
    pub unknowns: bool,
    /// The levels that it depends on and does not bind itself, as bits.
    pub levels: u64,
    /// How many terms stand one above the other in it.
    pub height: u32,
}

/// The store of terms, each once.
#[derive(Clone, Debug, Default)]
pub struct Terms {
    terms: Vec<Term>,
    infos: Vec<TermInfo>,
    numbers: HashMap<Term, TermId>,
}

impl Terms {
    /// The number of a term, which is stored if it is new.
    pub fn add(&mut self, term: Term) -> TermId {
        if let Some(&id) = self.numbers.get(&term) {
            return id;
        }
        let id = TermId(self.terms.len() as u32);
        self.infos.push(self.examine(&term));
        self.terms.push(term.clone());
        self.numbers.insert(term, id);
        id
    }

    /// A constant.
    pub fn constant(&mut self, value: f64) -> TermId {
        self.add(Term::Constant(value.to_bits()))
    }

    /// The term of a number.
    pub fn get(&self, id: TermId) -> &Term {
        &self.terms[id.0 as usize]
    }

    /// What a term depends on.
    pub fn info(&self, id: TermId) -> TermInfo {
        self.infos[id.0 as usize]
    }

    fn examine(&self, term: &Term) -> TermInfo {
        let mut info = TermInfo::default();
        match term {
            Term::Constant(_) => {}
            Term::Counter(index) | Term::Table(_, index) => info.levels = index.levels(),
            Term::Unknown(index) | Term::Family(_, index) => {
                info = TermInfo { unknowns: true, levels: index.levels(), height: 0 };
            }
            _ => {}
        }
        for part in term.parts() {
            let part = self.info(part);
            info.unknowns |= part.unknowns;
            info.levels |= part.levels;
            info.height = info.height.max(part.height + 1);
        }
        match term {
            Term::Reduce { level, first, last, condition, .. } => {
                info.levels |= condition.as_ref().map_or(0, IndexCondition::levels);
                info.levels &= !(1 << level);
                info.levels |= first.levels() | last.levels();
            }
            Term::Choose { condition, .. } => info.levels |= condition.levels(),
            _ => {}
        }
        info
    }

    /// How many there are.
    pub fn len(&self) -> usize {
        self.terms.len()
    }

    /// Whether there are none.
    pub fn is_empty(&self) -> bool {
        self.terms.is_empty()
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn affine_forms_add() {
        let left = Affine { constant: 2, factors: vec![(0, 3), (2, 1)] };
        let right = Affine { constant: 1, factors: vec![(0, 3), (1, 5)] };
        let sum = left.plus(&right, -1).unwrap();
        assert_eq!(sum, Affine { constant: 1, factors: vec![(1, -5), (2, 1)] });
        assert_eq!(sum.at(&[7, 2, 4]), 1 - 10 + 4);
        assert_eq!(Affine::constant(i64::MAX).plus(&Affine::constant(1), 1), None);
    }

    #[test]
    fn equal_terms_are_one() {
        let mut terms = Terms::default();
        let one = terms.constant(1.0);
        assert_eq!(one, terms.constant(1.0));
        assert_ne!(one, terms.constant(-0.0));
    }
}
