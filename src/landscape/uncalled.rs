//! Functions that nothing calls: their names are looked at all the same.
//!
//! A function has no meaning before its arguments are known, so only this much can be said of one without a call.

use crate::language::suggest;
use crate::language::tree::{Expression, ExpressionKind, Name};

use super::calls::{function_candidates, is_function};
use super::check::{Checker, Function};
use super::mistake::Mistake;

impl Checker<'_> {
    /// Tells the names in a function's body that nothing defines.
    pub(super) fn demand_names(&mut self, function: &Function) {
        let mut bound = function.parameters.clone();
        self.names_in(&function.body, &mut bound, 0);
    }

    fn names_in(&mut self, expression: &Expression, bound: &mut Vec<Name>, depth: usize) {
        // No formula that was read is higher; see the parser's limit.
        if depth > 1000 {
            return;
        }
        let depth = depth + 1;
        match &expression.kind {
            ExpressionKind::Number(_) | ExpressionKind::Column { .. } => {}
            ExpressionKind::Name(name) => {
                let known = bound.iter().any(|other| other.text == *name) || self.is_defined(name);
                if !known && !["pi", "e", "inf"].contains(&name.as_str()) && !is_function(name) {
                    let names = self.defined_names();
                    let bound = bound.iter().map(|name| name.text.as_str());
                    let meant = suggest(name, bound.chain(names.iter().map(String::as_str)));
                    let _ =
                        self.build.refuse::<()>(Mistake::UnknownName { name: name.clone(), meant }, expression.span);
                }
            }
            ExpressionKind::Call { name, arguments } => {
                if !is_function(&name.text) && !self.is_defined(&name.text) {
                    let candidates = function_candidates(self.function_names());
                    let meant = suggest(&name.text, candidates.iter().map(String::as_str));
                    let mistake = Mistake::UnknownFunction { name: name.text.clone(), meant };
                    let _ = self.build.refuse::<()>(mistake, name.span);
                }
                arguments.iter().for_each(|part| self.names_in(part, bound, depth));
            }
            ExpressionKind::List(parts) => parts.iter().for_each(|part| self.names_in(part, bound, depth)),
            ExpressionKind::Index { base, indices } => {
                self.names_in(base, bound, depth);
                indices.iter().for_each(|part| self.names_in(part, bound, depth));
            }
            ExpressionKind::Negate(inner) | ExpressionKind::Not(inner) => self.names_in(inner, bound, depth),
            ExpressionKind::Arithmetic { left, right, .. }
            | ExpressionKind::Compare { left, right, .. }
            | ExpressionKind::And(left, right)
            | ExpressionKind::Or(left, right) => {
                [left, right].into_iter().for_each(|part| self.names_in(part, bound, depth));
            }
            ExpressionKind::If { condition, then, otherwise } => {
                [condition, then, otherwise].into_iter().for_each(|part| self.names_in(part, bound, depth));
            }
            ExpressionKind::Reduce { indices, condition, body, .. } => {
                let outside = bound.len();
                for binder in indices {
                    self.names_in(&binder.first, bound, depth);
                    self.names_in(&binder.last, bound, depth);
                    bound.push(binder.name.clone());
                }
                if let Some(condition) = condition {
                    self.names_in(condition, bound, depth);
                }
                self.names_in(body, bound, depth);
                bound.truncate(outside);
            }
        }
    }
}
