//! Calls: the functions of the language, and those of the file.

use std::rc::Rc;

use crate::language::diagnostic::Span;
use crate::language::suggest;
use crate::language::tree::{Expression, Name, Reduction};
use crate::numbers::operation::{Binary, Unary};

use super::AxisRange;
use super::build::Outcome;
use super::check::{Checker, Symbol};
use super::mistake::Mistake;
use super::term::TermId;
use super::value::{Array, Backing, Value};

/// Functions of one number.
const UNARY: [(&str, Unary); 16] = [
    ("sqrt", Unary::SquareRoot),
    ("exp", Unary::Exponential),
    ("log", Unary::Logarithm),
    ("log10", Unary::Logarithm10),
    ("sin", Unary::Sine),
    ("cos", Unary::Cosine),
    ("tan", Unary::Tangent),
    ("asin", Unary::ArcSine),
    ("acos", Unary::ArcCosine),
    ("atan", Unary::ArcTangent),
    ("sinh", Unary::HyperbolicSine),
    ("cosh", Unary::HyperbolicCosine),
    ("tanh", Unary::HyperbolicTangent),
    ("abs", Unary::Absolute),
    ("sign", Unary::Sign),
    ("floor", Unary::Floor),
];

/// The other functions of the language.
const OTHER: [&str; 15] = [
    "erf", "atan2", "hypot", "sum", "product", "min", "max", "dot", "norm", "cross", "angle", "dihedral", "count",
    "spline", "linear",
];

/// Whether a name is a function of the language.
pub fn is_function(name: &str) -> bool {
    OTHER.contains(&name) || UNARY.iter().any(|entry| entry.0 == name)
}

/// What a misspelt function may have been: those of the language, then those of the file.
pub(super) fn function_candidates(own: Vec<String>) -> Vec<String> {
    UNARY.iter().map(|entry| entry.0).chain(OTHER).map(str::to_string).chain(own).collect()
}

impl Checker<'_> {
    pub(super) fn call(&mut self, name: &Name, arguments: &[Expression], span: Span) -> Outcome<Value> {
        if let Some(&(_, operation)) = UNARY.iter().find(|entry| entry.0 == name.text) {
            self.demand_arguments(&name.text, arguments, 1, span)?;
            let argument = self.value(&arguments[0])?;
            let Value::Number(id) = argument else {
                return self.build.refuse(Mistake::NeedsNumber(argument.describe()), arguments[0].span);
            };
            self.note_unary(operation, id, name.span, arguments[0].span);
            return Ok(Value::Number(self.build.unary(operation, id, span)?));
        }
        match name.text.as_str() {
            "erf" => {
                self.demand_arguments("erf", arguments, 1, span)?;
                let id = self.number(&arguments[0])?;
                Ok(Value::Number(self.build.unary(Unary::ErrorFunction, id, span)?))
            }
            "atan2" | "hypot" => {
                self.demand_arguments(&name.text, arguments, 2, span)?;
                let (left, right) = (self.number(&arguments[0]), self.number(&arguments[1]));
                let operation = if name.text == "atan2" { Binary::ArcTangent2 } else { Binary::Hypotenuse };
                Ok(Value::Number(self.build.binary(operation, left?, right?, span)?))
            }
            "sum" => self.whole(Reduction::Sum, name, arguments, span),
            "product" => self.whole(Reduction::Product, name, arguments, span),
            "min" => self.whole(Reduction::Minimum, name, arguments, span),
            "max" => self.whole(Reduction::Maximum, name, arguments, span),
            "dot" => {
                let [a, b] = self.vectors(name, arguments, span)?;
                self.demand_like(&a, &b, span)?;
                Ok(Value::Number(self.reduce_array(Reduction::Sum, &a, Some(&b), span)?))
            }
            "norm" => {
                let [a] = self.vectors(name, arguments, span)?;
                Ok(Value::Number(self.norm(&a, span)?))
            }
            "cross" => {
                let [a, b] = self.vectors(name, arguments, span)?;
                let listed = self.cross(&a, &b, span)?;
                Ok(Value::Array(listed))
            }
            "angle" => {
                let [a, b, c] = self.vectors(name, arguments, span)?;
                let (u, v) = (self.difference(&a, &b, span)?, self.difference(&c, &b, span)?);
                self.angle(&u, &v, span)
            }
            "dihedral" => {
                let [a, b, c, d] = self.vectors(name, arguments, span)?;
                self.dihedral([&a, &b, &c, &d], span)
            }
            "count" => {
                let [a] = self.vectors(name, arguments, span)?;
                Ok(Value::Number(self.build.constant(a.axes[0].count as f64)?))
            }
            "spline" | "linear" => {
                let what = if name.text == "spline" { "`spline` is" } else { "`linear` is" };
                self.build.refuse(Mistake::NotYet(what), span)
            }
            _ => self.call_own(name, arguments, span),
        }
    }

    /// A function of the file: its body with the arguments in place of the parameters.
    fn call_own(&mut self, name: &Name, arguments: &[Expression], span: Span) -> Outcome<Value> {
        if !self.is_defined(&name.text) {
            let candidates = function_candidates(self.function_names());
            let meant = suggest(&name.text, candidates.iter().map(String::as_str));
            return self.build.refuse(Mistake::UnknownFunction { name: name.text.clone(), meant }, name.span);
        }
        let Symbol::Function(function) = self.find(&name.text, name.span)? else {
            return self.build.refuse(Mistake::NotAFunction(name.text.clone()), name.span);
        };
        self.demand_arguments(&name.text, arguments, function.parameters.len(), span)?;
        let values: Vec<Outcome<Value>> = arguments.iter().map(|argument| self.value(argument)).collect();
        let values: Vec<Value> = values.into_iter().collect::<Outcome<_>>()?;
        if let Some(place) = self.calls.iter().position(|call| *call == name.text) {
            let circle = self.calls[place..].iter().chain([&name.text]).map(|name| format!("`{name}`")).collect();
            return self.build.refuse(Mistake::Circle(circle), span);
        }
        // The body sees its parameters and the file's names, not the caller's indices.
        let parameters = function.parameters.iter().map(|parameter| parameter.text.clone());
        let outer = std::mem::replace(&mut self.locals, parameters.zip(values).collect());
        self.calls.push(name.text.clone());
        let before = self.build.diagnostics.len();
        let result = self.value(&function.body);
        self.calls.pop();
        self.locals = outer;
        // A mistake in the body is told once, however often the function is called.
        if self.build.diagnostics.len() > before && !self.told_functions.insert(name.text.clone()) {
            self.build.diagnostics.truncate(before);
        }
        result
    }

    /// `min(a, b, c)` of numbers, or `min(x)` of a whole family.
    fn whole(&mut self, operator: Reduction, name: &Name, arguments: &[Expression], span: Span) -> Outcome<Value> {
        if matches!(operator, Reduction::Minimum | Reduction::Maximum) {
            let word = if operator == Reduction::Minimum { "min" } else { "max" };
            let before = self.build.terms.len();
            let result = self.whole_of(operator, name, arguments, span)?;
            if let Value::Number(id) = result
                && self.build.terms.info(id).unknowns
                && self.build.terms.len() > before
            {
                self.kinks.push((word, name.span));
            }
            return Ok(result);
        }
        self.whole_of(operator, name, arguments, span)
    }

    fn whole_of(&mut self, operator: Reduction, name: &Name, arguments: &[Expression], span: Span) -> Outcome<Value> {
        if arguments.is_empty() {
            let mistake =
                Mistake::ArgumentCount { name: name.text.clone(), takes: "at least one argument".into(), given: 0 };
            return self.build.refuse(mistake, span);
        }
        let values: Vec<Outcome<Value>> = arguments.iter().map(|argument| self.value(argument)).collect();
        let mut result = None;
        for (value, argument) in values.into_iter().zip(arguments) {
            let part = match value? {
                Value::Number(id) => id,
                Value::Array(array) => self.reduce_array(operator, &array, None, span)?,
                Value::Condition(_) => return self.build.refuse(Mistake::NeedsNumberNotCondition, argument.span),
            };
            result = Some(match result {
                None => part,
                Some(sum) => self.build.binary(super::elaborate::operation_of(operator), sum, part, span)?,
            });
        }
        result.map(Value::Number).ok_or(super::build::Told)
    }

    fn demand_arguments(&mut self, name: &str, arguments: &[Expression], count: usize, span: Span) -> Outcome<()> {
        if arguments.len() == count {
            return Ok(());
        }
        let takes = if count == 1 { "1 argument".to_string() } else { format!("{count} arguments") };
        self.build.refuse(Mistake::ArgumentCount { name: name.to_string(), takes, given: arguments.len() }, span)
    }

    fn vectors<const N: usize>(
        &mut self,
        name: &Name,
        arguments: &[Expression],
        span: Span,
    ) -> Outcome<[Rc<Array>; N]> {
        self.demand_arguments(&name.text, arguments, N, span)?;
        let values: Vec<Outcome<Value>> = arguments.iter().map(|argument| self.value(argument)).collect();
        let mut arrays = Vec::with_capacity(N);
        for (value, argument) in values.into_iter().zip(arguments) {
            match value? {
                Value::Array(array) => arrays.push(array),
                _ => return self.build.refuse(Mistake::NeedsVector("a vector or a family"), argument.span),
            }
        }
        arrays.try_into().map_err(|_| super::build::Told)
    }

    fn demand_like(&mut self, left: &Array, right: &Array, span: Span) -> Outcome<()> {
        if left.axes.iter().map(|axis| axis.count).eq(right.axes.iter().map(|axis| axis.count)) {
            return Ok(());
        }
        self.build.refuse(Mistake::ShapeMismatch { left: left.describe(), right: right.describe() }, span)
    }

    fn norm(&mut self, array: &Rc<Array>, span: Span) -> Outcome<TermId> {
        let square = self.reduce_array(Reduction::Sum, array, Some(array), span)?;
        self.build.unary(Unary::SquareRoot, square, span)
    }

    fn difference(&mut self, left: &Rc<Array>, right: &Rc<Array>, span: Span) -> Outcome<Rc<Array>> {
        self.demand_like(left, right, span)?;
        let pairs: Vec<(TermId, TermId)> =
            self.elements(left, span)?.into_iter().zip(self.elements(right, span)?).collect();
        let listed =
            pairs.into_iter().map(|(a, b)| self.build.binary(Binary::Subtract, a, b, span)).collect::<Outcome<_>>()?;
        Ok(Rc::new(Array { axes: left.axes.clone(), backing: Backing::Listed(listed) }))
    }

    fn cross(&mut self, left: &Rc<Array>, right: &Rc<Array>, span: Span) -> Outcome<Rc<Array>> {
        let (a, b) = (self.elements(left, span)?, self.elements(right, span)?);
        if a.len() != 3 || b.len() != 3 {
            return self.build.refuse(Mistake::NeedsVector("a vector of length 3"), span);
        }
        let mut listed = Vec::new();
        for (i, j) in [(1, 2), (2, 0), (0, 1)] {
            let plus = self.build.binary(Binary::Multiply, a[i], b[j], span)?;
            let minus = self.build.binary(Binary::Multiply, a[j], b[i], span)?;
            listed.push(self.build.binary(Binary::Subtract, plus, minus, span)?);
        }
        Ok(Rc::new(Array { axes: vec![AxisRange { first: 1, count: 3 }], backing: Backing::Listed(listed) }))
    }

    /// The angle between two vectors: `atan2(|u x v|, u . v)` in space, which keeps its digits near 0 and pi, where the
    /// inverse cosine loses half of them; in the plane the same with the third coordinate 0.
    fn angle(&mut self, u: &Rc<Array>, v: &Rc<Array>, span: Span) -> Outcome<Value> {
        let across = match u.count() {
            3 => {
                let cross = self.cross(u, v, span)?;
                self.norm(&cross, span)?
            }
            2 => {
                let (a, b) = (self.elements(u, span)?, self.elements(v, span)?);
                let plus = self.build.binary(Binary::Multiply, a[0], b[1], span)?;
                let minus = self.build.binary(Binary::Multiply, a[1], b[0], span)?;
                let cross = self.build.binary(Binary::Subtract, plus, minus, span)?;
                self.build.unary(Unary::Absolute, cross, span)?
            }
            _ => return self.build.refuse(Mistake::NeedsVector("points of 2 or 3 coordinates"), span),
        };
        let along = self.reduce_array(Reduction::Sum, u, Some(v), span)?;
        Ok(Value::Number(self.build.binary(Binary::ArcTangent2, across, along, span)?))
    }

    /// The torsion angle of four points, from -pi to pi, 0 when the outer two are on one side; positive when, seen
    /// along the middle bond, the far one is turned clockwise (IUPAC 1974).
    fn dihedral(&mut self, points: [&Rc<Array>; 4], span: Span) -> Outcome<Value> {
        let first = self.difference(points[1], points[0], span)?;
        let middle = self.difference(points[2], points[1], span)?;
        let last = self.difference(points[3], points[2], span)?;
        let (left, right) = (self.cross(&first, &middle, span)?, self.cross(&middle, &last, span)?);
        let along = self.reduce_array(Reduction::Sum, &left, Some(&right), span)?;
        let length = self.norm(&middle, span)?;
        let lever = self.reduce_array(Reduction::Sum, &first, Some(&right), span)?;
        let across = self.build.binary(Binary::Multiply, length, lever, span)?;
        Ok(Value::Number(self.build.binary(Binary::ArcTangent2, across, along, span)?))
    }
}
