//! The meaning of conditions, and of choices by them.

use std::rc::Rc;

use crate::language::diagnostic::Span;
use crate::language::tree::{Comparison, Expression, ExpressionKind};
use crate::numbers::operation::Relation;

use super::build::Outcome;
use super::check::Checker;
use super::mistake::Mistake;
use super::term::IndexCondition;
use super::value::{Array, Backing, Condition, Value};

impl Checker<'_> {
    /// An expression that must be a condition.
    pub(super) fn condition(&mut self, expression: &Expression) -> Outcome<Condition> {
        self.deeper(expression, Self::decide)
    }

    fn decide(&mut self, expression: &Expression) -> Outcome<Condition> {
        let fold = |parts: [Condition; 2], all: bool| match parts {
            [Condition::Index(a), Condition::Index(b)] => {
                Condition::Index(if all { IndexCondition::All(vec![a, b]) } else { IndexCondition::Any(vec![a, b]) })
            }
            [a, b] if all => Condition::And(Box::new(a), Box::new(b)),
            [a, b] => Condition::Or(Box::new(a), Box::new(b)),
        };
        match &expression.kind {
            ExpressionKind::And(left, right) | ExpressionKind::Or(left, right) => {
                let (a, b) = (self.condition(left), self.condition(right));
                Ok(fold([a?, b?], matches!(expression.kind, ExpressionKind::And(..))))
            }
            ExpressionKind::Not(inner) => Ok(match self.condition(inner)? {
                Condition::Index(condition) => Condition::Index(IndexCondition::Not(Box::new(condition))),
                condition => Condition::Not(Box::new(condition)),
            }),
            ExpressionKind::Compare { operator, left, right } => {
                let (a, b) = (self.number(left), self.number(right));
                let (a, b) = (a?, b?);
                let (relation, a, b) = match operator {
                    Comparison::Less => (Relation::Less, a, b),
                    Comparison::LessOrEqual => (Relation::LessOrEqual, a, b),
                    Comparison::Greater => (Relation::Less, b, a),
                    Comparison::GreaterOrEqual => (Relation::LessOrEqual, b, a),
                    Comparison::Equal => (Relation::Equal, a, b),
                    Comparison::NotEqual => (Relation::NotEqual, a, b),
                };
                self.build.compare(relation, a, b, expression.span)
            }
            _ => match self.value(expression)? {
                Value::Condition(condition) => Ok(condition),
                _ => self.build.refuse(Mistake::NeedsCondition, expression.span),
            },
        }
    }

    /// A choice between two values.
    pub(super) fn conditional(
        &mut self,
        condition: &Expression,
        then: &Expression,
        otherwise: &Expression,
        span: Span,
    ) -> Outcome<Value> {
        let decided = self.condition(condition)?;
        let (then_part, other_part) = match &decided {
            Condition::Index(test) => {
                let opposite = IndexCondition::Not(Box::new(test.clone()));
                (self.under(test.clone(), then), self.under(opposite, otherwise))
            }
            _ => {
                self.kinks.push(("if", condition.span));
                let n_known = self.known.len();
                let mut under = |holds: bool, part: &Expression| {
                    self.learn(&decided, holds);
                    let value = self.value(part);
                    self.known.truncate(n_known);
                    value
                };
                (under(true, then), under(false, otherwise))
            }
        };
        match (then_part?, other_part?) {
            (Value::Number(a), Value::Number(b)) => Ok(Value::Number(self.build.choose(&decided, a, b, span)?)),
            (Value::Array(a), Value::Array(b)) if a.axes == b.axes && a.count() <= 10_000 => {
                let (left, right) = (self.elements(&a, then.span)?, self.elements(&b, otherwise.span)?);
                let pairs = left.into_iter().zip(right);
                let chosen =
                    pairs.map(|(a, b)| self.build.choose(&decided, a, b, span)).collect::<Outcome<Vec<_>>>()?;
                Ok(Value::Array(Rc::new(Array { axes: a.axes.clone(), backing: Backing::Listed(chosen) })))
            }
            (a, b) => {
                let mistake = Mistake::ShapeMismatch { left: a.describe(), right: b.describe() };
                self.build.refuse(mistake, span)
            }
        }
    }

    /// Notes the comparisons that follow from a condition or from its opposite.
    fn learn(&mut self, condition: &Condition, holds: bool) {
        match condition {
            Condition::Index(_) => {}
            Condition::Compare(relation, left, right) => {
                let (relation, left, right) = match (relation, holds) {
                    (_, true) => (*relation, *left, *right),
                    (Relation::Less, false) => (Relation::LessOrEqual, *right, *left),
                    (Relation::LessOrEqual, false) => (Relation::Less, *right, *left),
                    (Relation::Equal, false) => (Relation::NotEqual, *left, *right),
                    (Relation::NotEqual, false) => (Relation::Equal, *left, *right),
                };
                self.known.push((relation, left, right));
            }
            Condition::And(a, b) if holds => [a, b].into_iter().for_each(|part| self.learn(part, true)),
            Condition::Or(a, b) if !holds => [a, b].into_iter().for_each(|part| self.learn(part, false)),
            Condition::And(..) | Condition::Or(..) => {}
            Condition::Not(inner) => self.learn(inner, !holds),
        }
    }

    /// A value where a condition on indices holds.
    pub(super) fn under(&mut self, condition: IndexCondition, expression: &Expression) -> Outcome<Value> {
        self.build.conditions.push(condition);
        let value = self.value(expression);
        self.build.conditions.pop();
        value
    }
}
