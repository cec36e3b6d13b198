//! From a tree to a landscape: definitions found on demand, every mistake told.
//!
//! Definitions may stand in any order, as in a paper; one that needs itself is a circle and refused. Each is worked out
//! in a context of its own, whoever asked for it.

use std::collections::{BTreeSet, HashMap};
use std::rc::Rc;

use crate::language::diagnostic::{Diagnostic, Severity, Span};
use crate::language::suggest;
use crate::language::tree::{Expression, File, LetForm, Name, Reduction, StatementKind};
use crate::numbers::operation::{Binary, Relation, Unary};

use super::build::{Builder, MAX_WORK, Outcome, Told};
use super::calls::is_function;
use super::mistake::Mistake;
use super::symmetry::Symmetry;
use super::term::{Index, TermId};
use super::value::{Array, Backing, Store, Value};
use super::{AxisRange, Landscape, Show, Slot, UnknownFamily};

/// The most elements that a family may have.
pub const MAX_ELEMENTS: u64 = 4_000_000;

/// What came of checking.
#[derive(Clone, Debug)]
pub struct Checked {
    /// The landscape, unless something was refused.
    pub landscape: Option<Landscape>,
    /// Refusals and warnings, in the order of the text.
    pub diagnostics: Vec<Diagnostic>,
}

/// Values from the command line for givens of the file.
pub type Overrides = [(String, f64)];

/// Why an override was refused.
#[derive(Clone, Debug, PartialEq)]
pub enum OverrideError {
    /// No given has this name.
    Unknown {
        /// The name.
        name: String,
        /// What may be meant.
        meant: Option<String>,
    },
    /// The given is a list, a family or a table.
    NotANumber(String),
    /// The name stands twice.
    Repeated(String),
}

impl std::fmt::Display for OverrideError {
    fn fmt(&self, out: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        match self {
            OverrideError::Unknown { name, meant: None } => write!(out, "the problem has no given `{name}`"),
            OverrideError::Unknown { name, meant: Some(meant) } => {
                write!(out, "the problem has no given `{name}`; did you mean `{meant}`?")
            }
            OverrideError::NotANumber(name) => write!(out, "the given `{name}` is not a single number"),
            OverrideError::Repeated(name) => write!(out, "the given `{name}` is set twice"),
        }
    }
}

impl std::error::Error for OverrideError {}

/// Checks a parsed file.
///
/// # Errors
/// An [`OverrideError`] where an override does not fit the file; mistakes in the file itself are diagnostics.
///
/// ```
/// let parsed = thalweg::language::parse("given n = 3\nunknown x[n] in [-1, 1]\nminimise sum(i in 1..n: x[i]^2)");
/// let checked = thalweg::landscape::check(&parsed.file, &[("n".into(), 8.0)]).unwrap();
/// assert_eq!(checked.landscape.unwrap().slots.len(), 8);
/// ```
pub fn check(file: &File, overrides: &Overrides) -> Result<Checked, OverrideError> {
    demand_overrides(file, overrides)?;
    let mut checker = Checker::new(file, overrides);
    let landscape = checker.run().ok();
    let mut diagnostics = checker.build.diagnostics;
    diagnostics.sort_by_key(|diagnostic| (diagnostic.span.start, diagnostic.severity, diagnostic.span.end));
    diagnostics.dedup_by(|a, b| a.span == b.span && a.message == b.message);
    let refused = diagnostics.iter().any(|diagnostic| diagnostic.severity == Severity::Refusal);
    Ok(Checked { landscape: landscape.filter(|_| !refused), diagnostics })
}

fn demand_overrides(file: &File, overrides: &Overrides) -> Result<(), OverrideError> {
    let givens: Vec<(&str, bool)> = file
        .statements
        .iter()
        .filter_map(|statement| match &statement.kind {
            StatementKind::Given { name, indices, value } => {
                use crate::language::tree::{ExpressionKind, GivenValue};
                let listed = match value {
                    GivenValue::Table { .. } => true,
                    GivenValue::Formula(formula) => matches!(formula.kind, ExpressionKind::List(_)),
                };
                Some((name.text.as_str(), indices.is_empty() && !listed))
            }
            _ => None,
        })
        .collect();
    for (number, (name, _)) in overrides.iter().enumerate() {
        if overrides[..number].iter().any(|other| other.0 == *name) {
            return Err(OverrideError::Repeated(name.clone()));
        }
        match givens.iter().find(|given| given.0 == name) {
            None => {
                let meant = suggest(name, givens.iter().map(|given| given.0));
                return Err(OverrideError::Unknown { name: name.clone(), meant });
            }
            Some((_, false)) => return Err(OverrideError::NotANumber(name.clone())),
            Some(_) => {}
        }
    }
    Ok(())
}

/// What a name stands for.
#[derive(Clone, Debug)]
pub(super) enum Symbol {
    Value(Value),
    Function(Rc<Function>),
}

#[derive(Debug)]
pub(super) struct Function {
    pub(super) parameters: Vec<Name>,
    pub(super) body: Expression,
}

enum Progress {
    Waiting,
    Begun,
    Done(Outcome<Symbol>),
}

struct Definition {
    statement: usize,
    span: Span,
    progress: Progress,
    used: bool,
}

pub(super) struct Checker<'a> {
    file: &'a File,
    pub(super) overrides: &'a Overrides,
    pub(super) build: Builder,
    definitions: HashMap<String, Definition>,
    pub(super) locals: Vec<(String, Value)>,
    pub(super) calls: Vec<String>,
    pub(super) told_functions: BTreeSet<String>,
    pub(super) unknowns: Vec<UnknownFamily>,
    pub(super) slots: Vec<Slot>,
    pub(super) kinks: Vec<(&'static str, Span)>,
    pub(super) domains: Vec<(Domain, TermId, Span, Vec<Known>)>,
    /// Comparisons of unknowns that hold at this place.
    pub(super) known: Vec<Known>,
    path: Vec<String>,
    /// How deep the formula at hand nests, definitions and calls included, and how much was looked at in all.
    pub(super) depth: usize,
    pub(super) steps: u64,
    pub(super) overgrown: bool,
}

/// A comparison that holds.
pub(super) type Known = (Relation, TermId, TermId);

/// Where a function is defined, to be compared with where its argument can be.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(super) enum Domain {
    NotZero,
    Positive,
    NotNegative,
    Unit,
    /// Of a negative whole power.
    Base,
    /// Of a power that is not whole.
    RealBase,
}

impl<'a> Checker<'a> {
    fn new(file: &'a File, overrides: &'a Overrides) -> Self {
        Checker {
            file,
            overrides,
            build: Builder::default(),
            definitions: HashMap::new(),
            locals: Vec::new(),
            calls: Vec::new(),
            told_functions: BTreeSet::new(),
            unknowns: Vec::new(),
            slots: Vec::new(),
            kinks: Vec::new(),
            domains: Vec::new(),
            known: Vec::new(),
            path: Vec::new(),
            depth: 0,
            steps: 0,
            overgrown: false,
        }
    }

    fn run(&mut self) -> Outcome<Landscape> {
        let file = self.file;
        for (number, statement) in file.statements.iter().enumerate() {
            if let StatementKind::Given { name, .. }
            | StatementKind::Unknown { name, .. }
            | StatementKind::Let { name, .. } = &statement.kind
            {
                self.announce(name, number);
            }
        }
        // Unknowns in the order of the text: it numbers the slots.
        let mut names: Vec<(usize, String)> =
            self.definitions.iter().map(|(name, definition)| (definition.statement, name.clone())).collect();
        names.sort();
        for (statement, name) in &names {
            if matches!(file.statements[*statement].kind, StatementKind::Unknown { .. }) {
                let _ = self.resolve(name);
            }
        }
        for (_, name) in &names {
            let _ = self.resolve(name);
        }
        let mut title = None;
        let mut shown: Vec<(&str, Span)> = Vec::new();
        let mut objective: Option<(Span, bool, Outcome<TermId>, Span)> = None;
        let (mut shows, mut symmetries): (Vec<Show>, Vec<Symmetry>) = (Vec::new(), Vec::new());
        for statement in &file.statements {
            match &statement.kind {
                StatementKind::Title(text) if title.is_none() => title = Some(text.clone()),
                StatementKind::Title(_) => {
                    let _ = self.build.refuse::<()>(Mistake::SecondTitle, statement.span);
                }
                StatementKind::Require { .. } => {
                    let _ = self.build.refuse::<()>(Mistake::NotYet("constraints (`require`) are"), statement.span);
                }
                StatementKind::Objective { maximise, word, value } => match objective {
                    Some((first, ..)) => {
                        let _ = self.build.refuse::<()>(Mistake::SecondObjective(first), *word);
                    }
                    None => objective = Some((*word, *maximise, self.number(value), value.span)),
                },
                StatementKind::Show { name, indices, value } => {
                    if let Some(&(_, first)) = shown.iter().find(|known| known.0 == name.text) {
                        let _ =
                            self.build.refuse::<()>(Mistake::Redefined { name: name.text.clone(), first }, name.span);
                    } else if let Ok(show) = self.show(name, indices, value) {
                        shows.push(show);
                    }
                    shown.push((&name.text, name.span));
                    self.build.loops.clear();
                    self.locals.clear();
                }
                StatementKind::Alike(promises) => {
                    for promise in promises {
                        if let Ok(symmetry) = self.promise(promise) {
                            symmetries.push(symmetry);
                        }
                    }
                }
                _ => {}
            }
        }
        for (_, name) in &names {
            let uncalled = self.definitions.get(name).filter(|definition| !definition.used);
            if let Some(Progress::Done(Ok(Symbol::Function(function)))) = uncalled.map(|uncalled| &uncalled.progress) {
                let function = Rc::clone(function);
                self.demand_names(&function);
            }
        }
        let end = file.statements.last().map_or(Span::default(), |statement| statement.span);
        let end = Span { start: end.end, end: end.end };
        if self.unknowns.is_empty()
            && !names.iter().any(|(n, _)| matches!(file.statements[*n].kind, StatementKind::Unknown { .. }))
        {
            let _ = self.build.refuse::<()>(Mistake::NoUnknowns, end);
        }
        let Some((_, maximise, objective, span)) = objective else {
            return self.build.refuse(Mistake::NoObjective, end);
        };
        let mut objective = objective?;
        if !self.build.terms.info(objective).unknowns {
            return self.build.refuse(Mistake::ConstantObjective, span);
        }
        let work =
            self.build.total_work([objective].into_iter().chain(self.build.families.iter().map(|family| family.body)));
        if work > MAX_WORK {
            return self.build.refuse(Mistake::TooMuchWork { work, limit: MAX_WORK }, span);
        }
        if maximise {
            objective = self.build.unary(Unary::Negate, objective, span)?;
        }
        self.warn_unused();
        let kinked = self.warn_kinks(objective);
        self.warn_domains();
        Ok(Landscape {
            title,
            unknowns: std::mem::take(&mut self.unknowns),
            slots: std::mem::take(&mut self.slots),
            tables: std::mem::take(&mut self.build.tables),
            lookups: std::mem::take(&mut self.build.lookups),
            families: std::mem::take(&mut self.build.families),
            terms: std::mem::take(&mut self.build.terms),
            objective,
            maximise,
            shows,
            symmetries,
            kinked,
            work: work as u64,
        })
    }

    fn announce(&mut self, name: &Name, statement: usize) {
        if is_function(&name.text) || ["pi", "e", "inf"].contains(&name.text.as_str()) {
            let _ = self.build.refuse::<()>(Mistake::TakenName(name.text.clone()), name.span);
        } else if let Some(known) = self.definitions.get(&name.text) {
            let family = |number: usize| {
                matches!(self.file.statements[number].kind, StatementKind::Let { form: LetForm::Family(_), .. })
            };
            if family(statement) && family(known.statement) {
                // The parts of a recurrence repeat the name.
                let _ = self.build.refuse::<()>(Mistake::NotYet("recurrences are"), name.span);
                return;
            }
            let first = known.span;
            let _ = self.build.refuse::<()>(Mistake::Redefined { name: name.text.clone(), first }, name.span);
        } else {
            let definition = Definition { statement, span: name.span, progress: Progress::Waiting, used: false };
            self.definitions.insert(name.text.clone(), definition);
        }
    }

    /// What a name stands for here.
    pub(super) fn find(&mut self, name: &str, span: Span) -> Outcome<Symbol> {
        if let Some((_, value)) = self.locals.iter().rev().find(|local| local.0 == name) {
            return Ok(Symbol::Value(value.clone()));
        }
        let constant = match name {
            "pi" => Some(std::f64::consts::PI),
            "e" => Some(std::f64::consts::E),
            "inf" => Some(f64::INFINITY),
            _ => None,
        };
        if let Some(constant) = constant {
            return Ok(Symbol::Value(Value::Number(self.build.constant(constant)?)));
        }
        let Some(definition) = self.definitions.get_mut(name) else {
            let candidates = self.defined_names();
            let locals = self.locals.iter().map(|local| local.0.as_str());
            let meant = suggest(name, locals.chain(candidates.iter().map(String::as_str)).chain(["pi", "inf"]));
            if is_function(name) {
                return self.build.refuse(Mistake::BareFunction(name.to_string()), span);
            }
            return self.build.refuse(Mistake::UnknownName { name: name.to_string(), meant }, span);
        };
        definition.used = true;
        if matches!(definition.progress, Progress::Begun) {
            let kind = &self.file.statements[definition.statement].kind;
            if matches!(kind, StatementKind::Let { form: LetForm::Family(_), .. }) {
                return self.build.refuse(Mistake::NotYet("recurrences are"), span);
            }
            let from = self.path.iter().position(|step| step == name).unwrap_or(0);
            let mut circle: Vec<String> = self.path[from..].iter().map(|step| format!("`{step}`")).collect();
            circle.push(format!("`{name}`"));
            return self.build.refuse(Mistake::Circle(circle), span);
        }
        self.resolve(name)
    }

    /// Works a definition out, once.
    fn resolve(&mut self, name: &str) -> Outcome<Symbol> {
        let file = self.file;
        let Some(definition) = self.definitions.get_mut(name) else { return Err(Told) };
        match &definition.progress {
            Progress::Done(symbol) => return symbol.clone(),
            Progress::Begun => return Err(Told),
            Progress::Waiting => definition.progress = Progress::Begun,
        }
        let statement = &file.statements[definition.statement];
        let loops = std::mem::take(&mut self.build.loops);
        let conditions = std::mem::take(&mut self.build.conditions);
        let known = std::mem::take(&mut self.known);
        let locals = std::mem::take(&mut self.locals);
        let calls = std::mem::take(&mut self.calls);
        self.path.push(name.to_string());
        let symbol = self.define(statement);
        self.path.pop();
        (self.build.loops, self.build.conditions, self.known) = (loops, conditions, known);
        (self.locals, self.calls) = (locals, calls);
        if let Some(definition) = self.definitions.get_mut(name) {
            definition.progress = Progress::Done(symbol.clone());
        }
        symbol
    }

    pub(super) fn is_defined(&self, name: &str) -> bool {
        self.definitions.contains_key(name) || self.locals.iter().any(|local| local.0 == name)
    }

    pub(super) fn defined_names(&self) -> Vec<String> {
        let mut names: Vec<String> = self.definitions.keys().cloned().collect();
        names.sort();
        names
    }

    pub(super) fn function_names(&self) -> Vec<String> {
        let is_function = |definition: &Definition| {
            matches!(
                &self.file.statements[definition.statement].kind,
                StatementKind::Let { form: LetForm::Function(_), .. }
            )
        };
        let mut names: Vec<String> =
            self.definitions.iter().filter(|entry| is_function(entry.1)).map(|entry| entry.0.clone()).collect();
        names.sort();
        names
    }

    /// The family that an unknown's name stands for, for promises; does not count as a use.
    pub(super) fn unknown_family(&self, name: &str) -> Option<UnknownFamily> {
        self.unknowns.iter().find(|family| family.name == name).cloned()
    }

    /// Demands that the name of an index or parameter hides nothing.
    pub(super) fn demand_new(&mut self, name: &Name) -> Outcome<()> {
        if is_function(&name.text) || ["pi", "e", "inf"].contains(&name.text.as_str()) {
            return self.build.refuse(Mistake::TakenName(name.text.clone()), name.span);
        }
        if self.is_defined(&name.text) {
            return self.build.refuse(Mistake::HiddenName(name.text.clone()), name.span);
        }
        Ok(())
    }

    fn warn_unused(&mut self) {
        let mut unused: Vec<(Span, &'static str, String)> = Vec::new();
        for (name, definition) in &self.definitions {
            let kind = match &self.file.statements[definition.statement].kind {
                StatementKind::Given { .. } => "given",
                StatementKind::Unknown { .. } => "unknown",
                _ => continue,
            };
            if !definition.used {
                unused.push((definition.span, kind, name.clone()));
            }
        }
        for (span, kind, name) in unused {
            self.build.diagnostics.push(Mistake::Unused(kind, name).at(span));
        }
    }

    pub(super) fn note_reduction(&mut self, operator: Reduction, of: TermId, word: Span) {
        match operator {
            Reduction::Minimum if self.build.terms.info(of).unknowns => self.kinks.push(("min", word)),
            Reduction::Maximum if self.build.terms.info(of).unknowns => self.kinks.push(("max", word)),
            _ => {}
        }
    }

    /// Whether a name stands for an unknown in the text, well declared or not.
    pub(super) fn is_unknown(&self, name: &str) -> bool {
        self.definitions.get(name).is_some_and(|definition| {
            matches!(self.file.statements[definition.statement].kind, StatementKind::Unknown { .. })
        })
    }

    pub(super) fn note_unary(&mut self, operation: Unary, of: TermId, word: Span, argument: Span) {
        if !self.build.terms.info(of).unknowns {
            return;
        }
        match operation {
            Unary::Absolute => self.kinks.push(("abs", word)),
            Unary::Floor => self.kinks.push(("floor", word)),
            Unary::Sign => self.kinks.push(("sign", word)),
            Unary::Logarithm | Unary::Logarithm10 => self.note_domain(Domain::Positive, of, argument),
            Unary::SquareRoot => self.note_domain(Domain::NotNegative, of, argument),
            Unary::ArcSine | Unary::ArcCosine => self.note_domain(Domain::Unit, of, argument),
            _ => {}
        }
    }

    fn note_domain(&mut self, domain: Domain, of: TermId, span: Span) {
        self.domains.push((domain, of, span, self.known.clone()));
    }

    pub(super) fn note_binary(&mut self, operation: Binary, left: TermId, right: TermId, a: Span, b: Span) {
        match operation {
            Binary::Divide if self.build.terms.info(right).unknowns => {
                self.note_domain(Domain::NotZero, right, b);
            }
            Binary::Power if self.build.terms.info(left).unknowns => {
                let domain = match self.build.number(right) {
                    Some(exponent) if exponent.floor() == exponent && exponent < 0.0 => Domain::Base,
                    Some(exponent) if exponent.floor() == exponent => return,
                    _ => Domain::RealBase,
                };
                self.note_domain(domain, left, a);
            }
            _ => {}
        }
    }

    /// Tells the kinks; says whether the objective has one.
    fn warn_kinks(&mut self, objective: TermId) -> bool {
        let kinked = has_kink(&self.build, objective)
            || self.build.families.iter().any(|family| has_kink(&self.build, family.body));
        if kinked {
            for (word, span) in std::mem::take(&mut self.kinks) {
                self.build.diagnostics.push(Mistake::Kink(word).at(span));
            }
        }
        kinked
    }

    pub(super) fn unknown_array(&self, family: &UnknownFamily) -> Value {
        let offset = Index::Affine(super::term::Affine::constant(family.first_slot as i64));
        if family.axes.is_empty() {
            // The caller makes the term; a single unknown is never an array.
            return Value::Array(Rc::new(Array {
                axes: Vec::new(),
                backing: Backing::Stored(Store::Unknowns, offset),
            }));
        }
        Value::Array(Rc::new(Array { axes: family.axes.clone(), backing: Backing::Stored(Store::Unknowns, offset) }))
    }

    pub(super) fn demand_count(&mut self, count: f64, span: Span) -> Outcome<usize> {
        if count >= 1.0 && count <= MAX_ELEMENTS as f64 {
            return Ok(count as usize);
        }
        self.build.refuse(Mistake::BadCount { count, limit: MAX_ELEMENTS }, span)
    }

    pub(super) fn demand_axes(&mut self, axes: &[AxisRange], span: Span) -> Outcome<usize> {
        let count = axes.iter().map(|axis| axis.count as f64).product();
        self.demand_count(count, span)
    }
}

fn has_kink(build: &Builder, root: TermId) -> bool {
    use super::term::Term;
    let mut seen = vec![false; build.terms.len()];
    let mut stack = vec![root];
    while let Some(id) = stack.pop() {
        if std::mem::replace(&mut seen[id.0 as usize], true) || !build.terms.info(id).unknowns {
            continue;
        }
        let kinked = match build.terms.get(id) {
            Term::Unary(operation, _) => matches!(operation, Unary::Absolute | Unary::Floor | Unary::Sign),
            Term::Binary(operation, ..) => matches!(operation, Binary::Minimum | Binary::Maximum),
            Term::Reduce { operator, .. } => matches!(operator, Reduction::Minimum | Reduction::Maximum),
            Term::Select { .. } => true,
            _ => false,
        };
        if kinked {
            return true;
        }
        stack.extend(build.terms.get(id).parts());
    }
    false
}
