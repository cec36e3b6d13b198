//! The meaning of statements: givens, unknowns, lets, shown quantities.

use std::rc::Rc;

use crate::language::diagnostic::Span;
use crate::language::tree::{
    Axis, Binder, Domain, Expression, FamilyIndex, GivenValue, Interval, LetForm, Name, Statement, StatementKind,
};

use super::build::{Outcome, Told};
use super::check::{Checker, Function, Symbol};
use super::elaborate::places_of;
use super::evaluate::TermEvaluator;
use super::mistake::Mistake;
use super::term::{Affine, Index, Level, TermId};
use super::value::{Array, Backing, Store, Value};
use super::{AxisRange, Show, Slot, StoredFamily, UnknownFamily};

/// The most elements of a shown family: each is a formula of its own.
const MAX_SHOWN: u64 = 10_000;

impl Checker<'_> {
    pub(super) fn define(&mut self, statement: &Statement) -> Outcome<Symbol> {
        match &statement.kind {
            StatementKind::Given { name, indices, value } => self.given(name, indices, value).map(Symbol::Value),
            StatementKind::Unknown { name, axes, domain, cyclic, sampled } => {
                self.unknown(name, axes, domain, *cyclic, sampled.as_ref()).map(Symbol::Value)
            }
            StatementKind::Let { form: LetForm::Value, value, .. } => self.value(value).map(Symbol::Value),
            StatementKind::Let { form: LetForm::Function(parameters), value, .. } => {
                for (number, parameter) in parameters.iter().enumerate() {
                    self.demand_new(parameter)?;
                    if let Some(first) = parameters[..number].iter().find(|other| other.text == parameter.text) {
                        let (name, first) = (parameter.text.clone(), first.span);
                        return self.build.refuse(Mistake::Redefined { name, first }, parameter.span);
                    }
                }
                Ok(Symbol::Function(Rc::new(Function { parameters: parameters.clone(), body: value.clone() })))
            }
            StatementKind::Let { name, form: LetForm::Family(indices), value } => {
                self.family(name, indices, value).map(Symbol::Value)
            }
            _ => Err(Told),
        }
    }

    fn given(&mut self, name: &Name, indices: &[Binder], value: &GivenValue) -> Outcome<Value> {
        if let Some((_, number)) = self.overrides.iter().find(|entry| entry.0 == name.text) {
            return Ok(Value::Number(self.build.constant(*number)?));
        }
        let formula = match value {
            GivenValue::Table { span, .. } => return self.build.refuse(Mistake::NotYet("tables are"), *span),
            GivenValue::Formula(formula) => formula,
        };
        if indices.is_empty() {
            return match self.value(formula)? {
                Value::Number(id) => {
                    let number = self.finite(id, formula.span)?;
                    Ok(Value::Number(self.build.constant(number)?))
                }
                Value::Array(array) => {
                    let elements = self.elements(&array, formula.span)?;
                    let numbers: Vec<f64> =
                        elements.into_iter().map(|id| self.finite(id, formula.span)).collect::<Outcome<_>>()?;
                    Ok(self.table(array.axes.clone(), numbers))
                }
                Value::Condition(_) => self.build.refuse(Mistake::NeedsNumberNotCondition, formula.span),
            };
        }
        let axes = self.open_axes(indices)?;
        let body = self.number(formula);
        indices.iter().for_each(|_| drop(self.close_loop()));
        let body = body?;
        if self.build.terms.info(body).unknowns {
            return self.build.refuse(Mistake::NotConstant, formula.span);
        }
        self.demand_axes(&axes, name.span)?;
        let numbers = self.all_values(body, &axes);
        if let Some(&value) = numbers.iter().find(|number| !number.is_finite()) {
            return self.build.refuse(Mistake::NotFinite { value }, formula.span);
        }
        Ok(self.table(axes, numbers))
    }

    fn finite(&mut self, id: TermId, span: Span) -> Outcome<f64> {
        if self.build.terms.info(id).unknowns {
            return self.build.refuse(Mistake::NotConstant, span);
        }
        match self.build.number(id) {
            Some(value) if value.is_finite() => Ok(value),
            Some(value) => self.build.refuse(Mistake::NotFinite { value }, span),
            None => self.build.refuse(Mistake::LoopInConstant, span),
        }
    }

    fn table(&mut self, axes: Vec<AxisRange>, numbers: Vec<f64>) -> Value {
        self.build.tables.push(numbers);
        let store = Store::Table(self.build.tables.len() as u32 - 1);
        let offset = Index::Affine(Affine::default());
        Value::Array(Rc::new(Array { axes, backing: Backing::Stored(store, offset) }))
    }

    /// Opens a loop for each index of a family; its ranges are constants.
    fn open_axes(&mut self, indices: &[Binder]) -> Outcome<Vec<AxisRange>> {
        let mut axes = Vec::new();
        for binder in indices {
            self.demand_new(&binder.name)?;
            let (first, last) = (self.constant(&binder.first), self.constant(&binder.last));
            let axis = self.axis(first?, last?, binder.first.span.to(binder.last.span))?;
            axes.push(axis);
            let end = axis.first + axis.count as i64 - 1;
            let bound = |whole| Index::Affine(Affine::constant(whole));
            self.open_loop(binder, bound(axis.first), bound(end));
        }
        Ok(axes)
    }

    fn axis(&mut self, first: f64, last: f64, span: Span) -> Outcome<AxisRange> {
        for end in [first, last] {
            if super::build::whole_number(end).is_none() {
                return self.build.refuse(Mistake::NotWhole(end), span);
            }
        }
        let count = self.demand_count(last - first + 1.0, span)?;
        Ok(AxisRange { first: first as i64, count })
    }

    /// The values of a constant term over its axes, whose indices are levels 0, 1, ….
    fn all_values(&mut self, body: TermId, axes: &[AxisRange]) -> Vec<f64> {
        let count: usize = axes.iter().map(|axis| axis.count).product();
        let mut evaluator = TermEvaluator::new(&self.build.terms, &self.build.tables, &self.build.lookups, &[]);
        (0..count)
            .map(|mut flat| {
                for (level, axis) in axes.iter().enumerate().rev() {
                    evaluator.levels[level] = axis.first + (flat % axis.count) as i64;
                    flat /= axis.count;
                }
                evaluator.value(body).unwrap_or(f64::NAN)
            })
            .collect()
    }

    fn unknown(
        &mut self,
        name: &Name,
        axes: &[Axis],
        domain: &Domain,
        cyclic: Option<Span>,
        sampled: Option<&Interval>,
    ) -> Outcome<Value> {
        let bounds = match domain {
            Domain::Interval(interval) => interval,
            Domain::Choices { span, .. } => {
                return self.build.refuse(Mistake::NotYet("whole-number and catalogue unknowns are"), *span);
            }
        };
        let mut ranges = Vec::new();
        for axis in axes {
            let (binder, range) = match axis {
                Axis::Range(binder) => {
                    self.demand_new(&binder.name)?;
                    let (first, last) = (self.constant(&binder.first), self.constant(&binder.last));
                    (binder.clone(), self.axis(first?, last?, binder.first.span.to(binder.last.span))?)
                }
                Axis::Count(count) => {
                    let number = self.constant(count)?;
                    if super::build::whole_number(number).is_none() {
                        return self.build.refuse(Mistake::NotWhole(number), count.span);
                    }
                    let range = AxisRange { first: 1, count: self.demand_count(number, count.span)? };
                    let hidden = Name { text: String::new(), span: count.span };
                    (Binder { name: hidden, first: count.clone(), last: count.clone() }, range)
                }
            };
            let bound = |whole| Index::Affine(Affine::constant(whole));
            self.open_loop(&binder, bound(range.first), bound(range.first + range.count as i64 - 1));
            ranges.push(range);
        }
        let ends = self.ends(bounds, &ranges);
        let region = sampled.map(|interval| self.ends(interval, &ranges));
        axes.iter().for_each(|_| drop(self.close_loop()));
        let ((lower, upper), region) = (ends?, region.transpose()?);
        let count = self.demand_axes(&ranges, name.span)?;
        let first_slot = self.slots.len();
        for place in 0..count {
            let (lower, upper) = (lower[place], upper[place]);
            let (start_lower, start_upper) =
                region.as_ref().map_or((lower, upper), |ends| (ends.0[place], ends.1[place]));
            let slot = Slot { lower, upper, start_lower, start_upper, cyclic: cyclic.is_some() };
            self.demand_slot(&slot, bounds.span, cyclic, sampled.map(|interval| interval.span))?;
            self.slots.push(slot);
        }
        let family = UnknownFamily { name: name.text.clone(), axes: ranges, first_slot, count };
        let value = if family.axes.is_empty() {
            let place = Index::Affine(Affine::constant(first_slot as i64));
            Value::Number(self.build.load(Store::Unknowns, place, name.span)?)
        } else {
            self.unknown_array(&family)
        };
        self.unknowns.push(family);
        Ok(value)
    }

    /// The ends of an interval for each element of a family.
    fn ends(&mut self, interval: &Interval, axes: &[AxisRange]) -> Outcome<(Vec<f64>, Vec<f64>)> {
        let (lower, upper) = (self.number(&interval.lower), self.number(&interval.upper));
        let mut ends = Vec::new();
        for (id, span) in [(lower?, interval.lower.span), (upper?, interval.upper.span)] {
            if self.build.terms.info(id).unknowns {
                return self.build.refuse(Mistake::NotConstant, span);
            }
            let values = self.all_values(id, axes);
            if values.iter().any(|value| value.is_nan()) {
                return self.build.refuse(Mistake::BadBound, span);
            }
            ends.push(values);
        }
        let upper = ends.pop().unwrap_or_default();
        Ok((ends.pop().unwrap_or_default(), upper))
    }

    fn demand_slot(&mut self, slot: &Slot, bounds: Span, cyclic: Option<Span>, sampled: Option<Span>) -> Outcome<()> {
        let &Slot { lower, upper, start_lower, start_upper, .. } = slot;
        if lower >= upper {
            return self.build.refuse(Mistake::EmptyBounds { lower, upper }, bounds);
        }
        let open = !lower.is_finite() || !upper.is_finite() || !(upper - lower).is_finite();
        match (sampled, cyclic) {
            (_, Some(word)) if open => self.build.refuse(Mistake::CyclicOpen, word),
            (None, _) if open => self.build.refuse(Mistake::OpenBounds, bounds),
            (None, _) => Ok(()),
            (Some(span), _) if start_lower >= start_upper => {
                self.build.refuse(Mistake::EmptyBounds { lower: start_lower, upper: start_upper }, span)
            }
            (Some(span), _) if !(start_upper - start_lower).is_finite() => {
                self.build.refuse(Mistake::SampledOpen, span)
            }
            (Some(span), _) if start_lower < lower || upper < start_upper => {
                self.build.refuse(Mistake::SampledOutside, span)
            }
            _ => Ok(()),
        }
    }

    fn family(&mut self, name: &Name, indices: &[FamilyIndex], value: &Expression) -> Outcome<Value> {
        let mut binders = Vec::new();
        for index in indices {
            match index {
                FamilyIndex::Range(binder) => binders.push(binder.clone()),
                FamilyIndex::Place(place) => {
                    return self.build.refuse(Mistake::NotYet("recurrences are"), name.span.to(place.span));
                }
            }
        }
        if binders.is_empty() {
            return self.build.refuse(Mistake::BadCount { count: 0.0, limit: super::check::MAX_ELEMENTS }, name.span);
        }
        let mut axes = self.open_axes(&binders)?;
        let body = self.value(value);
        let result = body.and_then(|body| self.store(name, &mut axes, body, value.span));
        self.build.loops.clear();
        self.locals.clear();
        result
    }

    /// Stores the elements of a family inside its open loops; a family of vectors gets a further axis.
    fn store(&mut self, name: &Name, axes: &mut Vec<AxisRange>, body: Value, span: Span) -> Outcome<Value> {
        let element = match body {
            Value::Number(id) => id,
            Value::Condition(_) => return self.build.refuse(Mistake::NeedsNumberNotCondition, span),
            Value::Array(array) => {
                let mut places = Vec::new();
                for axis in &array.axes {
                    let level = self.build.loops.len() as Level;
                    places.push(Index::Affine(Affine::level(level)));
                    let (low, high) = (axis.first, axis.first + axis.count as i64 - 1);
                    let bound = |whole| Index::Affine(Affine::constant(whole));
                    let scope = super::build::LoopScope {
                        name: "element".into(),
                        first: bound(low),
                        last: bound(high),
                        low,
                        high,
                    };
                    self.build.loops.push(scope);
                    axes.push(*axis);
                }
                self.element(&array, &places, span)?
            }
        };
        let count = self.demand_axes(axes, name.span)?;
        if !self.build.terms.info(element).unknowns {
            let numbers = self.all_values(element, axes);
            return Ok(self.table(axes.clone(), numbers));
        }
        let levels: Vec<Index> = (0..axes.len()).map(|level| Index::Affine(Affine::level(level as Level))).collect();
        let zero = Index::Affine(Affine::default());
        let place = self.build.flatten(&levels, axes, &zero, span)?;
        let loops = self.build.loops.iter().map(|scope| (scope.first.clone(), scope.last.clone())).collect();
        self.build.families.push(StoredFamily { name: name.text.clone(), count, loops, place, body: element });
        let store = Store::Family(self.build.families.len() as u32 - 1);
        Ok(Value::Array(Rc::new(Array { axes: axes.clone(), backing: Backing::Stored(store, zero) })))
    }

    pub(super) fn show(&mut self, name: &Name, indices: &[Binder], value: &Expression) -> Outcome<Show> {
        if indices.is_empty() {
            return match self.value(value)? {
                Value::Number(id) => Ok(Show { name: name.text.clone(), axes: Vec::new(), elements: vec![id] }),
                Value::Condition(_) => self.build.refuse(Mistake::NeedsNumberNotCondition, value.span),
                Value::Array(array) => {
                    self.demand_shown(array.count(), value.span)?;
                    let elements = self.elements(&array, value.span)?;
                    Ok(Show { name: name.text.clone(), axes: array.axes.clone(), elements })
                }
            };
        }
        let axes = self.open_axes(indices)?;
        indices.iter().for_each(|_| drop(self.close_loop()));
        self.demand_shown(axes.iter().map(|axis| axis.count).product(), name.span)?;
        let mut elements = Vec::new();
        for places in places_of(&axes) {
            for (binder, place) in indices.iter().zip(&places) {
                let counter = self.build.index_term(place, value.span)?;
                self.locals.push((binder.name.text.clone(), Value::Number(counter)));
            }
            let element = self.number(value);
            self.locals.truncate(self.locals.len() - indices.len());
            elements.push(element?);
        }
        Ok(Show { name: name.text.clone(), axes, elements })
    }

    fn demand_shown(&mut self, count: usize, span: Span) -> Outcome<()> {
        if count as u64 <= MAX_SHOWN {
            return Ok(());
        }
        self.build.refuse(Mistake::BadCount { count: count as f64, limit: MAX_SHOWN }, span)
    }
}
