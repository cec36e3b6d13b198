//! Every way in which a readable problem can be wrong or doubtful, one variant each.

use crate::language::diagnostic::{Diagnostic, Note, Severity, Span};

/// A mistake, or a doubt, about what a problem means.
#[derive(Clone, Debug, PartialEq)]
pub enum Mistake {
    /// A name that nothing defines.
    UnknownName {
        /// The name.
        name: String,
        /// What may be meant.
        meant: Option<String>,
    },
    /// A function that does not exist.
    UnknownFunction {
        /// The name.
        name: String,
        /// What may be meant.
        meant: Option<String>,
    },
    /// A name defined twice.
    Redefined {
        /// The name.
        name: String,
        /// Where it was defined first.
        first: Span,
    },
    /// A name of the language (a constant or a function) defined anew.
    TakenName(String),
    /// A loop index or parameter that hides something.
    HiddenName(String),
    /// The wrong number of arguments.
    ArgumentCount {
        /// The function.
        name: String,
        /// How many it takes.
        takes: String,
        /// How many there are.
        given: usize,
    },
    /// The wrong number of indices.
    IndexCount {
        /// What is indexed.
        name: String,
        /// How many it takes.
        takes: usize,
        /// How many there are.
        given: usize,
    },
    /// Something without indices is indexed.
    NotAFamily,
    /// A function without its arguments.
    BareFunction(String),
    /// A call of something that is no function.
    NotAFunction(String),
    /// An index that leaves its range.
    OutOfRange {
        /// The value that it takes.
        value: i64,
        /// The first of the range.
        first: i64,
        /// The last of the range.
        last: i64,
        /// The loop values at which it does, outermost first.
        loops: Vec<(String, i64)>,
    },
    /// An index of which it cannot be shown with reasonable effort that it stays in its range.
    RangeUnproven,
    /// An index or range that depends on unknowns.
    UnknownInIndex,
    /// An index or range that is not a whole number.
    NotWhole(f64),
    /// A constant is needed, and this depends on unknowns.
    NotConstant,
    /// A constant is needed, and this depends on a loop index.
    LoopInConstant,
    /// Shapes that do not go together.
    ShapeMismatch {
        /// The left shape.
        left: String,
        /// The right shape.
        right: String,
    },
    /// A number is needed, and this is a family.
    NeedsNumber(String),
    /// A vector is needed.
    NeedsVector(&'static str),
    /// A comparison stands where a number is needed.
    NeedsNumberNotCondition,
    /// A number stands where a condition is needed.
    NeedsCondition,
    /// A ragged list.
    RaggedList,
    /// Definitions that go round in a circle.
    Circle(Vec<String>),
    /// An empty or reversed interval.
    EmptyBounds {
        /// The lower end.
        lower: f64,
        /// The upper end.
        upper: f64,
    },
    /// Open bounds without a region to start from.
    OpenBounds,
    /// A region to start from outside the bounds.
    SampledOutside,
    /// A region to start from that is infinite.
    SampledOpen,
    /// A cyclic unknown with open bounds.
    CyclicOpen,
    /// A bound that is not a number.
    BadBound,
    /// A constant that is not finite.
    NotFinite {
        /// Its value.
        value: f64,
    },
    /// A count of elements that is not positive, or too large.
    BadCount {
        /// The count.
        count: f64,
        /// The limit.
        limit: u64,
    },
    /// No objective.
    NoObjective,
    /// A second objective.
    SecondObjective(Span),
    /// No unknowns.
    NoUnknowns,
    /// The objective depends on no unknown.
    ConstantObjective,
    /// A second title.
    SecondTitle,
    /// A problem whose work for one value is beyond the limit.
    TooMuchWork {
        /// Operations.
        work: f64,
        /// The limit.
        limit: f64,
    },
    /// Formulas that nest or grow beyond measure when their functions are expanded.
    TooIntricate,
    /// Something that this version does not have yet.
    NotYet(&'static str),
    /// A promise about something that is no unknown.
    PromiseNeedsUnknown(String),
    /// A promise about rows that do not exist.
    PromiseRows {
        /// The first row.
        first: i64,
        /// The last row.
        last: i64,
    },
    /// A promise that needs rows of 2 or 3.
    PromiseDimensions {
        /// The kind.
        kind: &'static str,
        /// The length of the rows.
        length: usize,
    },
    /// Operands of one promise that do not fit each other.
    PromiseShapes,
    /// Interchangeable rows with different bounds.
    PromiseBounds,
    /// A promise about a single row.
    PromiseOneRow(&'static str),
    /// Warning: an unknown or a given that nothing uses.
    Unused(&'static str, String),
    /// Warning: a function that can leave its domain inside the bounds.
    LeavesDomain(&'static str),
    /// Warning: a kink.
    Kink(&'static str),
}

impl Mistake {
    /// What the user is told.
    pub fn at(&self, span: Span) -> Diagnostic {
        let severity = match self {
            Mistake::Unused(..) | Mistake::LeavesDomain(_) | Mistake::Kink(_) => Severity::Warning,
            _ => Severity::Refusal,
        };
        #[cfg(test)]
        tests::TOLD.with_borrow_mut(|told| told.insert(self.variant()));
        let (message, remedy) = self.words();
        Diagnostic { severity, span, message, notes: self.notes(), remedy }
    }

    fn notes(&self) -> Vec<Note> {
        let place = |span: &Span, text: &str| vec![Note { span: Some(*span), text: text.to_string() }];
        match self {
            Mistake::Redefined { first, .. } => place(first, "it was defined here"),
            Mistake::SecondObjective(first) => place(first, "the first stands here"),
            Mistake::OutOfRange { loops, .. } if !loops.is_empty() => {
                let values: Vec<String> = loops.iter().map(|(name, value)| format!("{name} = {value}")).collect();
                vec![Note { span: None, text: format!("it does at {}", values.join(", ")) }]
            }
            _ => Vec::new(),
        }
    }

    fn words(&self) -> (String, Option<String>) {
        let some = |text: &str| Some(text.to_string());
        let meant = |word: &Option<String>| word.as_ref().map(|word| format!("did you mean `{word}`?"));
        match self {
            Mistake::UnknownName { name, meant: guess } => (format!("`{name}` is not defined"), meant(guess)),
            Mistake::UnknownFunction { name, meant: guess } => (format!("there is no function `{name}`"), meant(guess)),
            Mistake::Redefined { name, .. } => (format!("`{name}` is defined twice"), some("choose another name")),
            Mistake::TakenName(name) => (format!("`{name}` is a name of the language"), some("choose another name")),
            Mistake::HiddenName(name) => {
                (format!("`{name}` already has a meaning here"), some("choose another name for the index or parameter"))
            }
            Mistake::ArgumentCount { name, takes, given } => {
                (format!("`{name}` takes {takes}, and {given} {} given", plural(*given)), None)
            }
            Mistake::IndexCount { name, takes, given } => (
                format!(
                    "{name} has {takes} {}, and {given} {} given",
                    if *takes == 1 { "index" } else { "indices" },
                    plural(*given)
                ),
                None,
            ),
            Mistake::NotAFamily => ("this has no indices".into(), None),
            Mistake::BareFunction(name) => {
                (format!("`{name}` is a function and needs its arguments"), Some(format!("write `{name}(…)`")))
            }
            Mistake::NotAFunction(name) => (
                format!("`{name}` is not a function"),
                Some(format!("to take an element write `{name}[…]`, to multiply write `{name}*(…)`")),
            ),
            Mistake::OutOfRange { value, first, last, .. } => (
                format!("this index can be {value}, outside {first}..{last}"),
                some("narrow the range of the loop, or add a condition on its indices"),
            ),
            Mistake::RangeUnproven => (
                "it cannot be shown with reasonable effort that this index stays in its range".into(),
                some("write the index as a sum of loop indices and constants"),
            ),
            Mistake::UnknownInIndex => (
                "an index or range cannot depend on unknowns".into(),
                some("the structure of a landscape is the same at every point; use `if` for a choice between values"),
            ),
            Mistake::NotWhole(value) => (format!("a whole number is needed here, and this is {value}"), None),
            Mistake::NotConstant => ("a constant is needed here, and this depends on unknowns".into(), None),
            Mistake::LoopInConstant => ("a constant is needed here, and this depends on a loop index".into(), None),
            Mistake::ShapeMismatch { left, right } => (format!("{left} and {right} do not go together"), None),
            Mistake::NeedsNumber(shape) => (format!("a number is needed here, and this is {shape}"), None),
            Mistake::NeedsVector(what) => (format!("{what} is needed here"), None),
            Mistake::NeedsNumberNotCondition => {
                ("a number is needed here, and this is a condition".into(), some("write `if … then 1 else 0`"))
            }
            Mistake::NeedsCondition => {
                ("a condition is needed here, and this is a number".into(), some("compare it with something"))
            }
            Mistake::RaggedList => ("the rows of this list have different lengths".into(), None),
            Mistake::Circle(names) => (
                format!("the definition goes round in a circle: {}", names.join(", then ")),
                some("nothing can be defined by itself"),
            ),
            Mistake::EmptyBounds { lower, upper } => (
                format!("there is nothing between {lower} and {upper}"),
                some("the lower end comes first; a fixed quantity is a `given`"),
            ),
            Mistake::OpenBounds => (
                "open bounds need a region to start from".into(),
                some("add `sampled [lower, upper]` with finite ends"),
            ),
            Mistake::SampledOutside => ("the region to start from reaches beyond the bounds".into(), None),
            Mistake::SampledOpen => ("the region to start from must have finite ends".into(), None),
            Mistake::CyclicOpen => ("the two ends of a cyclic unknown must be finite".into(), None),
            Mistake::BadBound => ("a bound must be a number".into(), None),
            Mistake::NotFinite { value } if value.is_nan() => {
                ("this constant is not a number".into(), some("it lies where the operation has no value"))
            }
            Mistake::NotFinite { value } => {
                (format!("this constant is {value}"), some("only `inf` as a bound may be infinite"))
            }
            Mistake::BadCount { count, limit } => {
                (format!("{count} elements"), Some(format!("a family has at least one and at most {limit}")))
            }
            Mistake::NoObjective => ("there is no objective".into(), some("add `minimise …` or `maximise …`")),
            Mistake::SecondObjective(_) => {
                ("there is a second objective".into(), some("combine the two, with weights, in one"))
            }
            Mistake::NoUnknowns => ("there are no unknowns".into(), some("add `unknown x in [lower, upper]`")),
            Mistake::ConstantObjective => ("the objective depends on no unknown".into(), None),
            Mistake::SecondTitle => ("there is a second title".into(), some("remove one")),
            Mistake::TooMuchWork { work, limit } => (
                format!("one value would take about {work:.1e} operations"),
                Some(format!("the limit is {limit:.0e}; are the ranges right?")),
            ),
            Mistake::TooIntricate => (
                "this formula is too long or too deep once the functions in it are written out".into(),
                some("write a long sum as a list and a `sum` over it, and name by `let` what is used twice"),
            ),
            Mistake::NotYet(what) => (format!("{what} not available yet in this version"), None),
            Mistake::PromiseNeedsUnknown(name) => {
                (format!("`{name}` is not an unknown"), some("symmetries speak of unknowns"))
            }
            Mistake::PromiseRows { first, last } => (format!("there are no rows {first}..{last}"), None),
            Mistake::PromiseDimensions { kind, length } => (
                format!("`{kind}` needs points of 2 or 3 coordinates, and these have {length}"),
                some("a cloud of points is a family with two indices, the second of length 2 or 3"),
            ),
            Mistake::PromiseShapes => {
                ("the parts of this symmetry have different numbers of rows or coordinates".into(), None)
            }
            Mistake::PromiseBounds => (
                "these rows have different bounds, so they are not interchangeable".into(),
                some("give them the same bounds, or exchange only rows that have"),
            ),
            Mistake::PromiseOneRow(kind) => (format!("`{kind}` needs at least two rows"), None),
            Mistake::Unused(what, name) => (format!("the {what} `{name}` is used by nothing"), None),
            Mistake::LeavesDomain(what) => {
                (format!("{what} inside the bounds"), some("such points count as outside the landscape"))
            }
            Mistake::Kink(what) => (
                format!("`{what}` makes the landscape non-smooth"),
                some("a descent may stall at the kink; such ends are labelled"),
            ),
        }
    }
}

fn plural(count: usize) -> &'static str {
    if count == 1 { "is" } else { "are" }
}

#[cfg(test)]
pub(super) mod tests {
    use std::cell::RefCell;
    use std::collections::BTreeSet;

    use super::Mistake;

    thread_local! {
        /// The variants that this thread has told, for the test that every one has a golden file.
        pub static TOLD: RefCell<BTreeSet<String>> = const { RefCell::new(BTreeSet::new()) };
    }

    impl Mistake {
        pub(super) fn variant(&self) -> String {
            format!("{self:?}").split(|c: char| !c.is_alphanumeric()).next().unwrap_or_default().to_string()
        }
    }
}
