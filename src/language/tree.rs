//! The tree of a problem file: faithful to the text, one type per production, a span on everything.
//!
//! Nothing here is resolved: a [`ExpressionKind::Call`] may name a function that does not exist, and `p[i]` may be a
//! row or an element. What the parts mean is decided by `landscape`.

use super::diagnostic::Span;

/// A whole problem file, in the order of the text.
#[derive(Clone, Debug, Default, PartialEq)]
pub struct File {
    /// The statements that were understood.
    pub statements: Vec<Statement>,
}

/// A name where it stands.
#[derive(Clone, Debug, PartialEq)]
pub struct Name {
    /// The name.
    pub text: String,
    /// Where it stands.
    pub span: Span,
}

/// One statement.
#[derive(Clone, Debug, PartialEq)]
pub struct Statement {
    /// The whole statement, from its first word to its last.
    pub span: Span,
    /// What it says.
    pub kind: StatementKind,
}

/// The kinds of statement.
#[allow(clippy::large_enum_variant, reason = "a file has few statements, and none is copied")]
#[derive(Clone, Debug, PartialEq)]
pub enum StatementKind {
    /// `title "…"`
    Title(String),
    /// `given n = 13`, `given w = [1, 2]`, `given h[i in 1..n] = …`, `given obs = table "decay.csv"`
    Given {
        /// The name.
        name: Name,
        /// The loop indices of a family by formula; empty otherwise.
        indices: Vec<Binder>,
        /// The right-hand side.
        value: GivenValue,
    },
    /// `unknown p[n, 3] in [-2, 2] cyclic sampled [-1, 1]`
    Unknown {
        /// The name.
        name: Name,
        /// The axes; empty for a single unknown.
        axes: Vec<Axis>,
        /// Where it may lie.
        domain: Domain,
        /// The word `cyclic`, if it stands.
        cyclic: Option<Span>,
        /// The region to start from, if it stands.
        sampled: Option<Interval>,
    },
    /// `let r = …`, `let f(x, y) = …`, `let rho[i in 1..n] = …`, `let y[0] = …`
    Let {
        /// The name.
        name: Name,
        /// What stands between the name and `=`.
        form: LetForm,
        /// The right-hand side.
        value: Expression,
    },
    /// `require g <= 0`, `require for i in 1..n: …`
    Require {
        /// The loop indices after `for`; empty without.
        indices: Vec<Binder>,
        /// The condition on the indices after `if`.
        condition: Option<Expression>,
        /// The requirement: a comparison.
        body: Expression,
    },
    /// `minimise e`, `maximise e`
    Objective {
        /// `maximise` rather than `minimise`.
        maximise: bool,
        /// The word itself.
        word: Span,
        /// The objective.
        value: Expression,
    },
    /// `alike shift p, rotate p, exchange (p, q)`
    Alike(Vec<Promise>),
    /// `show name = …`, `show name[i in 1..n] = …`
    Show {
        /// The name.
        name: Name,
        /// The loop indices of a family; empty for a scalar.
        indices: Vec<Binder>,
        /// The quantity.
        value: Expression,
    },
}

/// The right-hand side of a `given`.
#[derive(Clone, Debug, PartialEq)]
pub enum GivenValue {
    /// A formula or a (nested) bracketed list.
    Formula(Expression),
    /// `table "file.csv"`
    Table {
        /// The file's name as written.
        file: String,
        /// The whole right-hand side.
        span: Span,
    },
}

/// One axis of an unknown family.
#[derive(Clone, Debug, PartialEq)]
pub enum Axis {
    /// `n`: indices 1 to n.
    Count(Expression),
    /// `i in 0..n`: with its own range, and a name that the bounds may use.
    Range(Binder),
}

/// Where an unknown may lie.
#[derive(Clone, Debug, PartialEq)]
pub enum Domain {
    /// `[lo, hi]`
    Interval(Interval),
    /// `{4..24}` or `{6, 8, 10}`
    Choices {
        /// The items.
        items: Vec<Choice>,
        /// From brace to brace.
        span: Span,
    },
}

/// `[lo, hi]`
#[derive(Clone, Debug, PartialEq)]
pub struct Interval {
    /// The lower end.
    pub lower: Expression,
    /// The upper end.
    pub upper: Expression,
    /// From bracket to bracket.
    pub span: Span,
}

/// An item of a `{…}` domain.
#[derive(Clone, Debug, PartialEq)]
pub enum Choice {
    /// One value.
    Value(Expression),
    /// `a..b`
    Range(Expression, Expression),
}

/// What a `let` defines.
#[derive(Clone, Debug, PartialEq)]
pub enum LetForm {
    /// `let r = …`
    Value,
    /// `let f(x, y) = …`
    Function(Vec<Name>),
    /// `let rho[i in 1..n] = …`, or one entry `let y[0] = …`
    Family(Vec<FamilyIndex>),
}

/// One index of a let family.
#[derive(Clone, Debug, PartialEq)]
pub enum FamilyIndex {
    /// `i in 1..n`
    Range(Binder),
    /// One place, as in `let y[0] = a`.
    Place(Expression),
}

/// `i in a..b`
#[derive(Clone, Debug, PartialEq)]
pub struct Binder {
    /// The index's name.
    pub name: Name,
    /// The first value.
    pub first: Expression,
    /// The last value, included.
    pub last: Expression,
}

/// One promise of an `alike` statement.
#[derive(Clone, Debug, PartialEq)]
pub struct Promise {
    /// The kind of symmetry.
    pub kind: PromiseKind,
    /// The word.
    pub word: Span,
    /// What it speaks of: one operand, or several in parentheses that move together.
    pub operands: Vec<PromiseOperand>,
    /// The whole promise.
    pub span: Span,
}

/// The kinds of symmetry that can be promised.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum PromiseKind {
    /// The rows are interchangeable.
    Exchange,
    /// The same displacement of all rows.
    Shift,
    /// A rotation of all rows about the origin, in 2 or 3 dimensions.
    Rotate,
    /// A mirror image of all rows, in 2 or 3 dimensions.
    Mirror,
    /// A change of sign of everything at once.
    Flip,
    /// The opposite order along the first index.
    Reverse,
    /// A cyclic renumbering along the first index.
    Cycle,
}

/// `p`, `p[3]`, `p[1..4]`: a family or some of its rows.
#[derive(Clone, Debug, PartialEq)]
pub struct PromiseOperand {
    /// The unknown's name.
    pub name: Name,
    /// The rows `a..b` (or `a..a` for one row); all without.
    pub rows: Option<(Expression, Expression)>,
    /// The whole operand.
    pub span: Span,
}

/// An expression.
#[derive(Clone, Debug, PartialEq)]
pub struct Expression {
    /// Where it stands.
    pub span: Span,
    /// What it is.
    pub kind: ExpressionKind,
}

/// The kinds of expression.
#[derive(Clone, Debug, PartialEq)]
pub enum ExpressionKind {
    /// A number.
    Number(f64),
    /// A name alone: constant, given, unknown, let, loop index or parameter.
    Name(String),
    /// `[a, b, c]`
    List(Vec<Expression>),
    /// `f(a, b)`, including `sum(x)`, `min(a, b)`, `norm(u)`, `count(obs)`, `spline(…)`
    Call {
        /// The function's name.
        name: Name,
        /// The arguments.
        arguments: Vec<Expression>,
    },
    /// `a[i, j]`
    Index {
        /// What is indexed.
        base: Box<Expression>,
        /// The indices.
        indices: Vec<Expression>,
    },
    /// `obs.time`
    Column {
        /// The table.
        table: Name,
        /// The column.
        column: Name,
    },
    /// `-x`
    Negate(Box<Expression>),
    /// `+ - * / ^`
    Arithmetic {
        /// Which.
        operator: Arithmetic,
        /// The left operand.
        left: Box<Expression>,
        /// The right operand.
        right: Box<Expression>,
    },
    /// `< <= > >= == !=`
    Compare {
        /// Which.
        operator: Comparison,
        /// The left operand.
        left: Box<Expression>,
        /// The right operand.
        right: Box<Expression>,
    },
    /// `a and b`
    And(Box<Expression>, Box<Expression>),
    /// `a or b`
    Or(Box<Expression>, Box<Expression>),
    /// `not a`
    Not(Box<Expression>),
    /// `if c then a else b`
    If {
        /// The condition.
        condition: Box<Expression>,
        /// The value where it holds.
        then: Box<Expression>,
        /// The value where it does not.
        otherwise: Box<Expression>,
    },
    /// `sum(i in 1..n, j in i+1..n if …: body)`
    Reduce {
        /// Which.
        operator: Reduction,
        /// The word.
        word: Span,
        /// The loop indices, outermost first; a later range may use an earlier index.
        indices: Vec<Binder>,
        /// The condition after `if`.
        condition: Option<Box<Expression>>,
        /// What is reduced.
        body: Box<Expression>,
    },
}

/// The arithmetic operators.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Arithmetic {
    /// `+`
    Add,
    /// `-`
    Subtract,
    /// `*`
    Multiply,
    /// `/`
    Divide,
    /// `^`
    Power,
}

/// The comparison operators.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Comparison {
    /// `<`
    Less,
    /// `<=`
    LessOrEqual,
    /// `>`
    Greater,
    /// `>=`
    GreaterOrEqual,
    /// `==`
    Equal,
    /// `!=`
    NotEqual,
}

/// The reductions over ranges.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash, PartialOrd, Ord)]
pub enum Reduction {
    /// `sum`; 0 over an empty range.
    Sum,
    /// `product`; 1 over an empty range.
    Product,
    /// `min`; infinity over an empty range.
    Minimum,
    /// `max`; minus infinity over an empty range.
    Maximum,
}
