//! The meaning of expressions.

use std::rc::Rc;

use crate::language::diagnostic::Span;
use crate::language::tree::{Arithmetic, Binder, Expression, ExpressionKind, Reduction};
use crate::numbers::operation::{Binary, Relation, Unary};

use super::AxisRange;
use super::build::{LoopScope, Outcome};
use super::check::{Checker, Symbol};
use super::mistake::Mistake;
use super::term::{Affine, Index, IndexCondition, Level, Term, TermId};
use super::value::{Array, Backing, Condition, Operand, Value};

/// Ranges of at most this many values are written out, so that the coordinates of a point need no loop.
const MAX_UNROLLED: i64 = 4;

/// Vectors of at most this length are written out in `dot`, `norm` and whole-family reductions.
const MAX_LISTED: usize = 8;

/// Choices and sums of a list of at most this length are written one behind the other.
const MAX_CHOICES: usize = 64;

/// Formulas may nest this deep, functions and definitions that they lean on included.
pub(super) const MAX_DEPTH: usize = 400;

/// All formulas of a file, functions written out, may have this many parts.
const MAX_STEPS: u64 = 2_000_000;

impl Checker<'_> {
    /// An expression that must be a number.
    pub(super) fn number(&mut self, expression: &Expression) -> Outcome<TermId> {
        match self.value(expression)? {
            Value::Number(id) => Ok(id),
            Value::Condition(_) => self.build.refuse(Mistake::NeedsNumberNotCondition, expression.span),
            value => self.build.refuse(Mistake::NeedsNumber(value.describe()), expression.span),
        }
    }

    /// An expression that must be a whole number of constants and loop indices.
    pub(super) fn index(&mut self, expression: &Expression) -> Outcome<Index> {
        let id = self.number(expression)?;
        self.build.index(id, expression.span)
    }

    /// An expression that must be a constant.
    pub(super) fn constant(&mut self, expression: &Expression) -> Outcome<f64> {
        let id = self.number(expression)?;
        if let Some(value) = self.build.number(id) {
            return Ok(value);
        }
        let unknowns = self.build.terms.info(id).unknowns;
        self.build.refuse(if unknowns { Mistake::NotConstant } else { Mistake::LoopInConstant }, expression.span)
    }

    /// What an expression means.
    ///
    /// Everything that nests comes by here, calls and definitions included: so this is where depth and growth are
    /// limited. A chain of functions that each call the next twice doubles with every link.
    pub(super) fn value(&mut self, expression: &Expression) -> Outcome<Value> {
        self.deeper(expression, Self::understand)
    }

    pub(super) fn deeper<T>(
        &mut self,
        expression: &Expression,
        look: fn(&mut Self, &Expression) -> Outcome<T>,
    ) -> Outcome<T> {
        self.steps += 1;
        if self.depth >= MAX_DEPTH || self.steps > MAX_STEPS {
            if !std::mem::replace(&mut self.overgrown, true) {
                let _ = self.build.refuse::<()>(Mistake::TooIntricate, expression.span);
            }
            return Err(super::build::Told);
        }
        self.depth += 1;
        let result = look(self, expression);
        self.depth -= 1;
        result
    }

    fn understand(&mut self, expression: &Expression) -> Outcome<Value> {
        let span = expression.span;
        match &expression.kind {
            ExpressionKind::Number(number) => Ok(Value::Number(self.build.constant(*number)?)),
            ExpressionKind::Name(name) => self.named(name, span),
            ExpressionKind::List(items) => self.list(items, span),
            ExpressionKind::Call { name, arguments } => self.call(name, arguments, span),
            ExpressionKind::Index { base, indices } => self.indexed(base, indices, span),
            ExpressionKind::Column { .. } => self.build.refuse(Mistake::NotYet("tables are"), span),
            ExpressionKind::Negate(inner) => {
                let inner = self.value(inner)?;
                self.map(Unary::Negate, inner, span)
            }
            ExpressionKind::Arithmetic { .. } => self.chain(expression),
            ExpressionKind::Compare { .. }
            | ExpressionKind::And(..)
            | ExpressionKind::Or(..)
            | ExpressionKind::Not(_) => Ok(Value::Condition(self.condition(expression)?)),
            ExpressionKind::If { condition, then, otherwise } => self.conditional(condition, then, otherwise, span),
            ExpressionKind::Reduce { operator, word, indices, condition, body } => {
                let id = self.reduction(*operator, indices, condition.as_deref(), body, span)?;
                self.note_reduction(*operator, id, *word);
                Ok(Value::Number(id))
            }
        }
    }

    /// Arithmetic. A sum of many terms is a long chain of left operands: it is gone along, not down.
    fn chain(&mut self, expression: &Expression) -> Outcome<Value> {
        let mut links = Vec::new();
        let mut first = expression;
        while let ExpressionKind::Arithmetic { operator, left, right } = &first.kind {
            links.push((operator, left.span, &**right));
            first = left;
        }
        let mut value = self.value(first);
        for (operator, left, right) in links.into_iter().rev() {
            // Both sides are looked at before giving up, so that both can be told.
            let other = self.value(right);
            let operation = match operator {
                Arithmetic::Add => Binary::Add,
                Arithmetic::Subtract => Binary::Subtract,
                Arithmetic::Multiply => Binary::Multiply,
                Arithmetic::Divide => Binary::Divide,
                Arithmetic::Power => Binary::Power,
            };
            value = match (value, other) {
                (Ok(value), Ok(other)) => self.pair(operation, value, other, left, right.span),
                _ => Err(super::build::Told),
            };
        }
        value
    }

    fn named(&mut self, name: &str, span: Span) -> Outcome<Value> {
        match self.find(name, span)? {
            Symbol::Value(value) => Ok(value),
            Symbol::Function(_) => self.build.refuse(Mistake::BareFunction(name.to_string()), span),
        }
    }

    fn list(&mut self, items: &[Expression], span: Span) -> Outcome<Value> {
        if items.is_empty() {
            return self.build.refuse(Mistake::BadCount { count: 0.0, limit: super::check::MAX_ELEMENTS }, span);
        }
        let values: Vec<Outcome<Value>> = items.iter().map(|item| self.value(item)).collect();
        let values: Vec<Value> = values.into_iter().collect::<Outcome<_>>()?;
        let mut elements = Vec::new();
        let mut inner: Option<Vec<AxisRange>> = None;
        for (value, item) in values.iter().zip(items) {
            let axes = match value {
                Value::Number(id) => {
                    elements.push(*id);
                    Vec::new()
                }
                Value::Array(array) => {
                    elements.extend(self.elements(array, item.span)?);
                    array.axes.clone()
                }
                Value::Condition(_) => return self.build.refuse(Mistake::NeedsNumberNotCondition, item.span),
            };
            if inner.get_or_insert_with(|| axes.clone()) != &axes {
                return self.build.refuse(Mistake::RaggedList, span);
            }
        }
        let mut axes = vec![AxisRange { first: 1, count: items.len() }];
        axes.extend(inner.unwrap_or_default());
        Ok(Value::Array(Rc::new(Array { axes, backing: Backing::Listed(elements) })))
    }

    fn indexed(&mut self, base: &Expression, indices: &[Expression], span: Span) -> Outcome<Value> {
        let value = self.value(base);
        let places: Vec<Outcome<Index>> = indices.iter().map(|index| self.index(index)).collect();
        let array = match value? {
            Value::Array(array) => array,
            _ => return self.build.refuse(Mistake::NotAFamily, base.span),
        };
        if indices.is_empty() || indices.len() > array.axes.len() {
            let name = match &base.kind {
                ExpressionKind::Name(name) => format!("`{name}`"),
                _ => "this".to_string(),
            };
            let mistake = Mistake::IndexCount { name, takes: array.axes.len(), given: indices.len() };
            return self.build.refuse(mistake, span);
        }
        let places: Vec<Index> = places.into_iter().collect::<Outcome<_>>()?;
        for ((place, axis), index) in places.iter().zip(&array.axes).zip(indices) {
            self.build.demand_range(place, axis.first, axis.count, index.span)?;
        }
        if places.len() == array.axes.len() {
            return Ok(Value::Number(self.element(&array, &places, span)?));
        }
        Ok(Value::Array(self.row(&array, &places, span)?))
    }

    /// The part of an array that is left when its first axes are fixed.
    fn row(&mut self, array: &Rc<Array>, places: &[Index], span: Span) -> Outcome<Rc<Array>> {
        let axes = array.axes[places.len()..].to_vec();
        let backing = match &array.backing {
            Backing::Stored(store, offset) => {
                Backing::Stored(*store, self.build.flatten(places, &array.axes, offset, span)?)
            }
            Backing::Mapped(operation, inner) => Backing::Mapped(*operation, self.row(inner, places, span)?),
            Backing::Paired(operation, left, right, place) => {
                let mut side = |operand: &Operand| {
                    Ok(match operand {
                        Operand::Number(id) => Operand::Number(*id),
                        Operand::Array(inner) => Operand::Array(self.row(inner, places, span)?),
                    })
                };
                Backing::Paired(*operation, side(left)?, side(right)?, *place)
            }
            Backing::Listed(_) => {
                let rest = Array { axes: axes.clone(), backing: Backing::Listed(Vec::new()) };
                let mut listed = Vec::new();
                for inner in places_of(&rest.axes) {
                    let all: Vec<Index> = places.iter().cloned().chain(inner).collect();
                    listed.push(self.element(array, &all, span)?);
                }
                Backing::Listed(listed)
            }
        };
        Ok(Rc::new(Array { axes, backing }))
    }

    /// One element; the indices are in range.
    pub(super) fn element(&mut self, array: &Rc<Array>, places: &[Index], span: Span) -> Outcome<TermId> {
        match &array.backing {
            Backing::Stored(store, offset) => {
                let place = self.build.flatten(places, &array.axes, offset, span)?;
                self.build.load(*store, place, span)
            }
            Backing::Mapped(operation, inner) => {
                let inner = self.element(inner, places, span)?;
                self.build.unary(*operation, inner, span)
            }
            Backing::Paired(operation, left, right, place) => {
                let mut side = |operand: &Operand| match operand {
                    Operand::Number(id) => Ok(*id),
                    // The two sides agree in shape, and each counts from the first index of its own axes.
                    Operand::Array(inner) => {
                        let moved = self.shift_places(places, &array.axes, &inner.axes, span)?;
                        self.element(inner, &moved, span)
                    }
                };
                let (left, right) = (side(left)?, side(right)?);
                self.build.binary(*operation, left, right, *place)
            }
            Backing::Listed(elements) => {
                let zero = Index::Affine(Affine::constant(0));
                let flat = self.build.flatten(places, &array.axes, &zero, span)?;
                if let Some(place) = flat.constant() {
                    return Ok(elements[place as usize]);
                }
                // A loop index picks from a list of formulas: a chain of choices, one for each; of a long list by halves,
                // so that choices do not nest without end.
                if elements.len() > MAX_CHOICES {
                    return self.halved(&flat, elements, 0, span);
                }
                let mut chosen = elements[elements.len() - 1];
                for (place, &element) in elements.iter().enumerate().rev().skip(1) {
                    let here = Index::Affine(Affine::constant(place as i64));
                    let condition = Condition::Index(IndexCondition::Compare(Relation::Equal, flat.clone(), here));
                    chosen = self.build.choose(&condition, element, chosen, span)?;
                }
                Ok(chosen)
            }
        }
    }

    /// The element at a place that is looked up by halving; `first` is the place of the first of the elements.
    fn halved(&mut self, at: &Index, elements: &[TermId], first: usize, span: Span) -> Outcome<TermId> {
        let (below, above) = match elements {
            [only] => return Ok(*only),
            _ => elements.split_at(elements.len() / 2),
        };
        let middle = first + below.len();
        let (left, right) = (self.halved(at, below, first, span)?, self.halved(at, above, middle, span)?);
        let middle = Index::Affine(Affine::constant(middle as i64));
        let condition = Condition::Index(IndexCondition::Compare(Relation::Less, at.clone(), middle));
        self.build.choose(&condition, left, right, span)
    }

    fn shift_places(
        &mut self,
        places: &[Index],
        from: &[AxisRange],
        to: &[AxisRange],
        span: Span,
    ) -> Outcome<Vec<Index>> {
        places
            .iter()
            .zip(from.iter().zip(to))
            .map(|(place, (from, to))| {
                if from.first == to.first {
                    return Ok(place.clone());
                }
                let term = self.build.index_term(place, span)?;
                let move_by = self.build.constant((to.first - from.first) as f64)?;
                let moved = self.build.binary(Binary::Add, term, move_by, span)?;
                self.build.index(moved, span)
            })
            .collect()
    }

    /// All elements, row by row.
    pub(super) fn elements(&mut self, array: &Rc<Array>, span: Span) -> Outcome<Vec<TermId>> {
        if let Backing::Listed(elements) = &array.backing {
            return Ok(elements.clone());
        }
        places_of(&array.axes).map(|places| self.element(array, &places, span)).collect()
    }

    /// An operation on a number or on each element.
    pub(super) fn map(&mut self, operation: Unary, value: Value, span: Span) -> Outcome<Value> {
        match value {
            Value::Number(id) => Ok(Value::Number(self.build.unary(operation, id, span)?)),
            Value::Array(array) => {
                let axes = array.axes.clone();
                Ok(Value::Array(Rc::new(Array { axes, backing: Backing::Mapped(operation, array) })))
            }
            Value::Condition(_) => self.build.refuse(Mistake::NeedsNumberNotCondition, span),
        }
    }

    fn pair(&mut self, operation: Binary, left: Value, right: Value, a: Span, b: Span) -> Outcome<Value> {
        let span = a.to(b);
        let (left, right, axes) = match (left, right) {
            (Value::Condition(_), _) => return self.build.refuse(Mistake::NeedsNumberNotCondition, a),
            (_, Value::Condition(_)) => return self.build.refuse(Mistake::NeedsNumberNotCondition, b),
            (Value::Number(left), Value::Number(right)) => {
                self.note_binary(operation, left, right, a, b);
                return Ok(Value::Number(self.build.binary(operation, left, right, span)?));
            }
            (Value::Array(left), Value::Array(right)) => {
                let like = |left: &Array, right: &Array| {
                    left.axes.iter().map(|axis| axis.count).eq(right.axes.iter().map(|axis| axis.count))
                };
                if !matches!(operation, Binary::Add | Binary::Subtract) || !like(&left, &right) {
                    let mistake = Mistake::ShapeMismatch { left: left.describe(), right: right.describe() };
                    return self.build.refuse(mistake, span);
                }
                let axes = left.axes.clone();
                (Operand::Array(left), Operand::Array(right), axes)
            }
            (Value::Number(left), Value::Array(right)) if operation == Binary::Multiply => {
                let axes = right.axes.clone();
                (Operand::Number(left), Operand::Array(right), axes)
            }
            (Value::Array(left), Value::Number(right)) if matches!(operation, Binary::Multiply | Binary::Divide) => {
                if operation == Binary::Divide {
                    self.note_binary(operation, right, right, b, b);
                }
                let axes = left.axes.clone();
                (Operand::Array(left), Operand::Number(right), axes)
            }
            (left, right) => {
                let mistake = Mistake::ShapeMismatch { left: left.describe(), right: right.describe() };
                return self.build.refuse(mistake, span);
            }
        };
        Ok(Value::Array(Rc::new(Array { axes, backing: Backing::Paired(operation, left, right, span) })))
    }

    /// Opens a loop.
    pub(super) fn open_loop(&mut self, binder: &Binder, first: Index, last: Index) {
        let (low, high) = (self.build.bound(&first).0, self.build.bound(&last).1);
        let level = self.build.loops.len() as Level;
        let index = Index::Affine(Affine::level(level));
        self.build.loops.push(LoopScope { name: binder.name.text.clone(), first, last, low, high });
        let counter = self.build.terms.add(Term::Counter(index));
        self.build.work.resize(self.build.terms.len(), 0.0);
        self.locals.push((binder.name.text.clone(), Value::Number(counter)));
    }

    /// Closes the innermost loop.
    pub(super) fn close_loop(&mut self) -> Option<LoopScope> {
        self.locals.pop();
        self.build.loops.pop()
    }

    pub(super) fn reduction(
        &mut self,
        operator: Reduction,
        indices: &[Binder],
        condition: Option<&Expression>,
        body: &Expression,
        span: Span,
    ) -> Outcome<TermId> {
        let Some((binder, rest)) = indices.split_first() else {
            return self.reduced_body(operator, condition, body, span);
        };
        self.demand_new(&binder.name)?;
        let (first, last) = (self.index(&binder.first), self.index(&binder.last));
        let (first, last) = (first?, last?);
        if self.build.loops.len() >= 48 {
            return self
                .build
                .refuse(Mistake::TooMuchWork { work: f64::INFINITY, limit: super::build::MAX_WORK }, span);
        }
        if let (Some(low), Some(high)) = (first.constant(), last.constant())
            && high - low < MAX_UNROLLED
        {
            let mut result = self.neutral(operator)?;
            for whole in low..=high {
                let counter = self.build.constant(whole as f64)?;
                self.locals.push((binder.name.text.clone(), Value::Number(counter)));
                let part = self.reduction(operator, rest, condition, body, span);
                self.locals.pop();
                result = self.build.binary(operation_of(operator), result, part?, span)?;
            }
            return Ok(result);
        }
        self.open_loop(binder, first, last);
        let inner = self.reduction(operator, rest, condition, body, span);
        let scope = self.close_loop();
        let (inner, Some(scope)) = (inner?, scope) else { return Err(super::build::Told) };
        self.build.reduce(operator, &scope, None, inner, span)
    }

    /// The body of a reduction inside all its loops: where the condition does not hold it adds nothing.
    fn reduced_body(
        &mut self,
        operator: Reduction,
        condition: Option<&Expression>,
        body: &Expression,
        span: Span,
    ) -> Outcome<TermId> {
        let Some(condition) = condition else { return self.number(body) };
        let decided = self.condition(condition)?;
        let Condition::Index(test) = &decided else {
            return self.build.refuse(Mistake::UnknownInIndex, condition.span);
        };
        self.build.conditions.push(test.clone());
        let part = self.number(body);
        self.build.conditions.pop();
        let neutral = self.neutral(operator)?;
        self.build.choose(&decided, part?, neutral, span)
    }

    pub(super) fn neutral(&mut self, operator: Reduction) -> Outcome<TermId> {
        self.build.constant(match operator {
            Reduction::Sum => 0.0,
            Reduction::Product => 1.0,
            Reduction::Minimum => f64::INFINITY,
            Reduction::Maximum => f64::NEG_INFINITY,
        })
    }

    /// Reduces whole arrays element by element: `sum(x)`, and with two the sum of products for `dot`.
    pub(super) fn reduce_array(
        &mut self,
        operator: Reduction,
        array: &Rc<Array>,
        other: Option<&Rc<Array>>,
        span: Span,
    ) -> Outcome<TermId> {
        let product = |checker: &mut Self, places: &[Index]| {
            let left = checker.element(array, places, span)?;
            let Some(other) = other else { return Ok(left) };
            let moved = checker.shift_places(places, &array.axes, &other.axes, span)?;
            let right = checker.element(other, &moved, span)?;
            checker.build.binary(Binary::Multiply, left, right, span)
        };
        if array.count() <= MAX_LISTED || matches!(array.backing, Backing::Listed(_)) {
            let mut parts = places_of(&array.axes).map(|places| product(self, &places)).collect::<Outcome<Vec<_>>>()?;
            // Long lists are joined by pairs, so that terms do not nest without end.
            while parts.len() > MAX_CHOICES {
                parts = parts
                    .chunks(2)
                    .map(|pair| match *pair {
                        [left, right] => self.build.binary(operation_of(operator), left, right, span),
                        _ => Ok(pair[0]),
                    })
                    .collect::<Outcome<Vec<_>>>()?;
            }
            let mut result = self.neutral(operator)?;
            for part in parts {
                result = self.build.binary(operation_of(operator), result, part, span)?;
            }
            return Ok(result);
        }
        let mut places = Vec::new();
        for axis in &array.axes {
            let level = self.build.loops.len() as Level;
            places.push(Index::Affine(Affine::level(level)));
            let (low, high) = (axis.first, axis.first + axis.count as i64 - 1);
            let (first, last) = (Index::Affine(Affine::constant(low)), Index::Affine(Affine::constant(high)));
            self.build.loops.push(LoopScope { name: "element".into(), first, last, low, high });
        }
        let mut result = product(self, &places);
        for _ in &array.axes {
            let scope = self.build.loops.pop();
            let (Ok(part), Some(scope)) = (result, scope) else { continue };
            result = self.build.reduce(operator, &scope, None, part, span);
        }
        result
    }
}

/// The places of an array, row by row, as constants.
pub(super) fn places_of(axes: &[AxisRange]) -> impl Iterator<Item = Vec<Index>> + use<> {
    let axes = axes.to_vec();
    let count: usize = axes.iter().map(|axis| axis.count).product();
    (0..count).map(move |mut flat| {
        let mut places = vec![Index::Affine(Affine::default()); axes.len()];
        for (place, axis) in places.iter_mut().zip(&axes).rev() {
            *place = Index::Affine(Affine::constant(axis.first + (flat % axis.count) as i64));
            flat /= axis.count;
        }
        places
    })
}

pub(super) fn operation_of(operator: Reduction) -> Binary {
    match operator {
        Reduction::Sum => Binary::Add,
        Reduction::Product => Binary::Multiply,
        Reduction::Minimum => Binary::Minimum,
        Reduction::Maximum => Binary::Maximum,
    }
}
