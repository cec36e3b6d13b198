//! Writes a tree as text, with no more brackets than it needs.

use std::fmt::{self, Display, Formatter};

use super::tree::{
    Arithmetic, Axis, Binder, Choice, Comparison, Domain, Expression, ExpressionKind, FamilyIndex, File, GivenValue,
    Interval, LetForm, Promise, PromiseOperand, Reduction, Statement, StatementKind,
};

/// The tree as text, one statement a line. It parses to the same tree, up to the places.
///
/// That holds for the trees of parsed texts. One made by hand can hold what no text says: a negative number, a name with
/// a blank.
///
/// ```
/// use thalweg::language::{parse, print};
/// let text = "unknown x in [-1,1]\nminimise ((x)^2)   # a bowl";
/// assert_eq!(print(&parse(text).file), "unknown x in [-1, 1]\nminimise x^2\n");
/// ```
pub fn print(file: &File) -> String {
    file.statements.iter().map(|statement| format!("{statement}\n")).collect()
}

impl Display for Statement {
    fn fmt(&self, out: &mut Formatter<'_>) -> fmt::Result {
        match &self.kind {
            StatementKind::Title(text) => write!(out, "title \"{text}\""),
            StatementKind::Given { name, indices, value } => {
                write!(out, "given {}{} = ", name.text, bracketed(indices))?;
                match value {
                    GivenValue::Formula(formula) => write!(out, "{formula}"),
                    GivenValue::Table { file, .. } => write!(out, "table \"{file}\""),
                }
            }
            StatementKind::Unknown { name, axes, domain, cyclic, sampled } => {
                write!(out, "unknown {}{} in {domain}", name.text, bracketed(axes))?;
                if cyclic.is_some() {
                    write!(out, " cyclic")?;
                }
                sampled.as_ref().map_or(Ok(()), |region| write!(out, " sampled {region}"))
            }
            StatementKind::Let { name, form, value } => match form {
                LetForm::Value => write!(out, "let {} = {value}", name.text),
                LetForm::Function(parameters) => {
                    let parameters: Vec<&str> = parameters.iter().map(|name| name.text.as_str()).collect();
                    write!(out, "let {}({}) = {value}", name.text, parameters.join(", "))
                }
                LetForm::Family(indices) => write!(out, "let {}[{}] = {value}", name.text, joined(indices)),
            },
            StatementKind::Require { indices, condition, body } => {
                write!(out, "require ")?;
                if !indices.is_empty() {
                    write!(out, "for {}: ", Ranges { indices, condition: condition.as_ref() })?;
                }
                write!(out, "{body}")
            }
            StatementKind::Objective { maximise, value, .. } => {
                write!(out, "{} {value}", if *maximise { "maximise" } else { "minimise" })
            }
            StatementKind::Alike(promises) => write!(out, "alike {}", joined(promises)),
            StatementKind::Show { name, indices, value } => {
                write!(out, "show {}{} = {value}", name.text, bracketed(indices))
            }
        }
    }
}

fn joined<T: Display>(items: &[T]) -> String {
    items.iter().map(T::to_string).collect::<Vec<String>>().join(", ")
}

/// `[a, b]`, or nothing for nothing.
fn bracketed<T: Display>(items: &[T]) -> String {
    if items.is_empty() { String::new() } else { format!("[{}]", joined(items)) }
}

impl Display for Axis {
    fn fmt(&self, out: &mut Formatter<'_>) -> fmt::Result {
        match self {
            Axis::Count(count) => write!(out, "{count}"),
            Axis::Range(binder) => write!(out, "{binder}"),
        }
    }
}

impl Display for FamilyIndex {
    fn fmt(&self, out: &mut Formatter<'_>) -> fmt::Result {
        match self {
            FamilyIndex::Place(place) => write!(out, "{place}"),
            FamilyIndex::Range(binder) => write!(out, "{binder}"),
        }
    }
}

impl Display for Binder {
    fn fmt(&self, out: &mut Formatter<'_>) -> fmt::Result {
        write!(out, "{} in {}..{}", self.name.text, self.first, self.last)
    }
}

/// What stands before the colon of a reduction or a `require for`.
struct Ranges<'a> {
    indices: &'a [Binder],
    condition: Option<&'a Expression>,
}

impl Display for Ranges<'_> {
    fn fmt(&self, out: &mut Formatter<'_>) -> fmt::Result {
        write!(out, "{}", joined(self.indices))?;
        self.condition.map_or(Ok(()), |condition| write!(out, " if {condition}"))
    }
}

impl Display for Domain {
    fn fmt(&self, out: &mut Formatter<'_>) -> fmt::Result {
        match self {
            Domain::Interval(interval) => write!(out, "{interval}"),
            Domain::Choices { items, .. } => write!(out, "{{{}}}", joined(items)),
        }
    }
}

impl Display for Interval {
    fn fmt(&self, out: &mut Formatter<'_>) -> fmt::Result {
        write!(out, "[{}, {}]", self.lower, self.upper)
    }
}

impl Display for Choice {
    fn fmt(&self, out: &mut Formatter<'_>) -> fmt::Result {
        match self {
            Choice::Value(value) => write!(out, "{value}"),
            Choice::Range(first, last) => write!(out, "{first}..{last}"),
        }
    }
}

impl Display for Promise {
    fn fmt(&self, out: &mut Formatter<'_>) -> fmt::Result {
        match self.operands.as_slice() {
            [operand] => write!(out, "{} {operand}", self.kind.word()),
            operands => write!(out, "{} ({})", self.kind.word(), joined(operands)),
        }
    }
}

impl Display for PromiseOperand {
    fn fmt(&self, out: &mut Formatter<'_>) -> fmt::Result {
        write!(out, "{}", self.name.text)?;
        let Some((first, last)) = &self.rows else { return Ok(()) };
        let (first, last) = (first.to_string(), last.to_string());
        if first == last { write!(out, "[{first}]") } else { write!(out, "[{first}..{last}]") }
    }
}

/// How tightly a production binds, loosest first, as in the parser.
#[derive(Clone, Copy, PartialEq, PartialOrd)]
enum Tightness {
    Conditional,
    Disjunction,
    Conjunction,
    Negation,
    Comparison,
    Sum,
    Term,
    Signed,
    Power,
    Indexed,
}

impl Expression {
    fn tightness(&self) -> Tightness {
        match &self.kind {
            ExpressionKind::If { .. } => Tightness::Conditional,
            ExpressionKind::Or(..) => Tightness::Disjunction,
            ExpressionKind::And(..) => Tightness::Conjunction,
            ExpressionKind::Not(_) => Tightness::Negation,
            ExpressionKind::Compare { .. } => Tightness::Comparison,
            ExpressionKind::Negate(_) => Tightness::Signed,
            ExpressionKind::Arithmetic { operator, .. } => operator.tightness(),
            ExpressionKind::Number(_)
            | ExpressionKind::Name(_)
            | ExpressionKind::List(_)
            | ExpressionKind::Call { .. }
            | ExpressionKind::Index { .. }
            | ExpressionKind::Column { .. }
            | ExpressionKind::Reduce { .. } => Tightness::Indexed,
        }
    }
}

impl Arithmetic {
    fn tightness(self) -> Tightness {
        match self {
            Arithmetic::Add | Arithmetic::Subtract => Tightness::Sum,
            Arithmetic::Multiply | Arithmetic::Divide => Tightness::Term,
            Arithmetic::Power => Tightness::Power,
        }
    }
}

/// An expression in a place that takes what binds at least so tightly.
struct Operand<'a>(&'a Expression, Tightness);

impl Display for Operand<'_> {
    fn fmt(&self, out: &mut Formatter<'_>) -> fmt::Result {
        if self.0.tightness() >= self.1 { write!(out, "{}", self.0) } else { write!(out, "({})", self.0) }
    }
}

impl Display for Expression {
    fn fmt(&self, out: &mut Formatter<'_>) -> fmt::Result {
        match &self.kind {
            ExpressionKind::Number(number) => write_number(*number, out),
            ExpressionKind::Name(name) => write!(out, "{name}"),
            ExpressionKind::List(items) => write!(out, "[{}]", joined(items)),
            ExpressionKind::Call { name, arguments } => write!(out, "{}({})", name.text, joined(arguments)),
            ExpressionKind::Index { base, indices } => {
                write!(out, "{}[{}]", Operand(base, Tightness::Indexed), joined(indices))
            }
            ExpressionKind::Column { table, column } => write!(out, "{}.{}", table.text, column.text),
            ExpressionKind::Negate(inner) => write!(out, "-{}", Operand(inner, Tightness::Signed)),
            ExpressionKind::Arithmetic { operator, left, right } => {
                let (sign, least_left, least_right) = match operator {
                    Arithmetic::Add => (" + ", Tightness::Sum, Tightness::Term),
                    Arithmetic::Subtract => (" - ", Tightness::Sum, Tightness::Term),
                    Arithmetic::Multiply => ("*", Tightness::Term, Tightness::Signed),
                    Arithmetic::Divide => ("/", Tightness::Term, Tightness::Signed),
                    Arithmetic::Power => ("^", Tightness::Indexed, Tightness::Signed),
                };
                write!(out, "{}{sign}{}", Operand(left, least_left), Operand(right, least_right))
            }
            ExpressionKind::Compare { operator, left, right } => {
                let (left, right) = (Operand(left, Tightness::Sum), Operand(right, Tightness::Sum));
                write!(out, "{left} {} {right}", operator.written())
            }
            ExpressionKind::And(left, right) => {
                let (left, right) = (Operand(left, Tightness::Conjunction), Operand(right, Tightness::Negation));
                write!(out, "{left} and {right}")
            }
            ExpressionKind::Or(left, right) => {
                let (left, right) = (Operand(left, Tightness::Disjunction), Operand(right, Tightness::Conjunction));
                write!(out, "{left} or {right}")
            }
            ExpressionKind::Not(inner) => write!(out, "not {}", Operand(inner, Tightness::Negation)),
            ExpressionKind::If { condition, then, otherwise } => {
                write!(out, "if {condition} then {then} else {otherwise}")
            }
            ExpressionKind::Reduce { operator, indices, condition, body, .. } => {
                let ranges = Ranges { indices, condition: condition.as_deref() };
                write!(out, "{}({ranges}: {body})", operator.word())
            }
        }
    }
}

/// The shortest digits that read back to the same number; with an exponent where there would be many zeros.
fn write_number(number: f64, out: &mut Formatter<'_>) -> fmt::Result {
    let size = number.abs();
    if number == 0.0 || (1e-5..1e16).contains(&size) || size.is_infinite() {
        write!(out, "{number}")
    } else {
        write!(out, "{number:e}")
    }
}

impl Comparison {
    /// The sign.
    pub fn written(self) -> &'static str {
        match self {
            Comparison::Less => "<",
            Comparison::LessOrEqual => "<=",
            Comparison::Greater => ">",
            Comparison::GreaterOrEqual => ">=",
            Comparison::Equal => "==",
            Comparison::NotEqual => "!=",
        }
    }
}

impl Reduction {
    /// The word.
    pub fn word(self) -> &'static str {
        match self {
            Reduction::Sum => "sum",
            Reduction::Product => "product",
            Reduction::Minimum => "min",
            Reduction::Maximum => "max",
        }
    }
}

#[cfg(test)]
mod tests {
    use std::fs;
    use std::path::Path;

    use proptest::prelude::*;

    use super::super::diagnostic::Span;
    use super::super::parse;
    use super::super::tree::Name;
    use super::*;

    /// The tree without its places.
    fn shape(file: &File) -> String {
        let text = format!("{file:?}");
        text.split("Span {").map(|part| part.split_once('}').map_or(part, |(_, rest)| rest)).collect()
    }

    fn read(text: &str) -> File {
        let parsed = parse(text);
        assert_eq!(parsed.diagnostics, [], "{text}");
        parsed.file
    }

    fn assert_returns(file: &File) {
        let printed = print(file);
        assert_eq!(shape(&read(&printed)), shape(file), "{printed}");
    }

    #[test]
    fn a_file_that_says_everything_prints_as_its_golden_file() {
        let folder = Path::new(env!("CARGO_MANIFEST_DIR")).join("tests/data/language");
        let file = read(&fs::read_to_string(folder.join("trees/everything.land")).unwrap());
        let golden = folder.join("printed/everything.txt");
        if std::env::var_os("BLESS").is_some() {
            fs::write(&golden, print(&file)).unwrap();
        }
        assert_eq!(print(&file), fs::read_to_string(&golden).unwrap(), "BLESS=1 rewrites it");
        assert_returns(&file);
    }

    #[test]
    fn every_problem_of_the_project_returns() {
        let folder = Path::new(env!("CARGO_MANIFEST_DIR")).join("problems");
        let paths: Vec<_> = fs::read_dir(folder).unwrap().map(|entry| entry.unwrap().path()).collect();
        assert!(paths.len() >= 9);
        for path in paths.iter().filter(|path| path.extension().is_some_and(|end| end == "land")) {
            assert_returns(&read(&fs::read_to_string(path).unwrap()));
        }
    }

    #[test]
    fn brackets_stand_only_where_they_are_needed() {
        for (text, printed) in [
            ("(a + b) + c", "a + b + c"),
            ("a + (b + c)", "a + (b + c)"),
            ("a - (b - c)", "a - (b - c)"),
            ("(a*b)/c", "a*b/c"),
            ("a*(b/c)", "a*(b/c)"),
            ("-(a*b)", "-(a*b)"),
            ("(-a)*b", "-a*b"),
            ("a*(-b)", "a*-b"),
            ("-(x^2)", "-x^2"),
            ("(-x)^2", "(-x)^2"),
            ("2^(-x)", "2^-x"),
            ("(2^3)^4", "(2^3)^4"),
            ("2^(3^4)", "2^3^4"),
            ("(p[1])[2]", "p[1][2]"),
            ("(a + b)[1]", "(a + b)[1]"),
            ("1 + (if a < b then c else d)", "1 + (if a < b then c else d)"),
            ("if a < b then c else (if b < c then d else a)", "if a < b then c else if b < c then d else a"),
            (
                "sum(i in (1)..(n - 1) if (i < 2 or (i > 3 and i > 4)): (i))",
                "sum(i in 1..n - 1 if i < 2 or i > 3 and i > 4: i)",
            ),
            ("if not (a < b) then 1 else 0", "if not a < b then 1 else 0"),
            ("if not (a < b and b < c) then 1 else 0", "if not (a < b and b < c) then 1 else 0"),
            ("13.0 + 0.5 + 1e300 + 1e-9 + 0", "13 + 0.5 + 1e300 + 1e-9 + 0"),
        ] {
            assert_eq!(print(&read(&format!("minimise {text}"))), format!("minimise {printed}\n"));
        }
    }

    fn expression(kind: ExpressionKind) -> Expression {
        Expression { span: Span::default(), kind }
    }

    fn name(text: &str) -> Name {
        Name { text: text.into(), span: Span::default() }
    }

    /// Any expression that a text can say.
    fn any_expression() -> impl Strategy<Value = Expression> {
        let number = (0u64..f64::INFINITY.to_bits()).prop_map(|bits| ExpressionKind::Number(f64::from_bits(bits)));
        let word = prop::sample::select(vec!["a", "n", "θ", "x_1", "e"]);
        let leaf = prop_oneof![
            number,
            (0..100u32).prop_map(|number| ExpressionKind::Number(f64::from(number))),
            word.prop_map(|text| ExpressionKind::Name(text.into())),
            Just(ExpressionKind::Column { table: name("obs"), column: name("time") }),
        ];
        leaf.prop_map(expression).prop_recursive(5, 40, 3, |inner| {
            let one = || inner.clone().prop_map(Box::new);
            let several = || prop::collection::vec(inner.clone(), 1..4);
            let operators = vec![
                Arithmetic::Add,
                Arithmetic::Subtract,
                Arithmetic::Multiply,
                Arithmetic::Divide,
                Arithmetic::Power,
            ];
            let signs = vec![
                Comparison::Less,
                Comparison::LessOrEqual,
                Comparison::Greater,
                Comparison::GreaterOrEqual,
                Comparison::Equal,
                Comparison::NotEqual,
            ];
            let reductions = vec![Reduction::Sum, Reduction::Product, Reduction::Minimum, Reduction::Maximum];
            let binder =
                (inner.clone(), inner.clone()).prop_map(|(first, last)| Binder { name: name("i"), first, last });
            let kind = prop_oneof![
                several().prop_map(ExpressionKind::List),
                several().prop_map(|arguments| ExpressionKind::Call { name: name("f"), arguments }),
                (one(), several()).prop_map(|(base, indices)| ExpressionKind::Index { base, indices }),
                one().prop_map(ExpressionKind::Negate),
                one().prop_map(ExpressionKind::Not),
                (prop::sample::select(operators), one(), one())
                    .prop_map(|(operator, left, right)| ExpressionKind::Arithmetic { operator, left, right }),
                (prop::sample::select(signs), one(), one())
                    .prop_map(|(operator, left, right)| ExpressionKind::Compare { operator, left, right }),
                (one(), one()).prop_map(|(left, right)| ExpressionKind::And(left, right)),
                (one(), one()).prop_map(|(left, right)| ExpressionKind::Or(left, right)),
                (one(), one(), one()).prop_map(|(condition, then, otherwise)| ExpressionKind::If {
                    condition,
                    then,
                    otherwise
                }),
                (prop::sample::select(reductions), prop::collection::vec(binder, 1..3), prop::option::of(one()), one())
                    .prop_map(|(operator, indices, condition, body)| ExpressionKind::Reduce {
                        operator,
                        word: Span::default(),
                        indices,
                        condition,
                        body
                    }),
            ];
            kind.prop_map(expression)
        })
    }

    proptest! {
        /// Whatever tree a text can say comes back from its print.
        #[test]
        fn any_tree_returns(value in any_expression(), maximise in any::<bool>()) {
            let kind = StatementKind::Objective { maximise, word: Span::default(), value };
            assert_returns(&File { statements: vec![Statement { span: Span::default(), kind }] });
        }
    }
}
