//! Every way in which a text can fail to be a problem file, one variant each.

use super::diagnostic::{Diagnostic, Note, Severity, Span};

/// A mistake in the text.
#[derive(Clone, Debug, PartialEq)]
pub enum Mistake {
    /// The bytes are not text in UTF-8.
    NotText,
    /// A character that the language does not have.
    UnknownCharacter(char),
    /// A character pasted from a paper, for which the language has a plain sign.
    FancyCharacter(char, &'static str),
    /// A sign of another notation, for which the language has one of its own.
    ForeignSign(&'static str, &'static str),
    /// A text in quotes that does not end on its line.
    OpenText,
    /// A number that cannot be read.
    BadNumber(String),
    /// A number too large for a 64-bit float.
    HugeNumber(String),
    /// A name longer than any reader would follow.
    LongName(usize),
    /// A bracket that nothing closes.
    OpenBracket(char),
    /// A closing bracket without its opening one.
    StrayBracket(char),
    /// A bracket closed by another kind.
    CrossedBrackets {
        /// The opening bracket.
        open: char,
        /// The place of the opening bracket.
        opened: Span,
        /// What closes it.
        close: char,
    },
    /// Brackets, conditions or signs nested too deep.
    TooDeep(usize),
    /// The file has no statement.
    NoStatement,
    /// A line that begins with no word of the language.
    UnknownStatement {
        /// The word.
        word: String,
        /// The statement that may be meant.
        meant: Option<String>,
    },
    /// `n = 13` without the word that says what it is.
    BareDefinition(String),
    /// A line that begins with no word at all.
    NotAStatement(String),
    /// Something else stands where a certain thing is needed.
    Expected {
        /// What is needed.
        needed: &'static str,
        /// What stands there.
        found: String,
    },
    /// Something follows a statement on its line.
    Trailing(String),
    /// A word of the language used as a name.
    ReservedName(String),
    /// `a < b < c`
    ChainedComparison,
    /// `=` where a comparison is meant.
    AssignmentInExpression,
    /// `i = 1..n`
    IndexByAssignment(String),
    /// An `if` without `else`.
    MissingElse,
    /// No kind of symmetry has this name.
    UnknownPromise {
        /// The word.
        word: String,
        /// The kind that may be meant.
        meant: Option<String>,
    },
    /// `cyclic` or `sampled` twice.
    RepeatedWord(&'static str),
}

impl Mistake {
    /// What the user is told.
    pub fn at(&self, span: Span) -> Diagnostic {
        let (message, remedy) = self.words();
        let notes = match self {
            Mistake::CrossedBrackets { opened, open, .. } => {
                vec![Note { span: Some(*opened), text: format!("`{open}` was opened here") }]
            }
            _ => Vec::new(),
        };
        Diagnostic { severity: Severity::Refusal, span, message, notes, remedy }
    }

    fn words(&self) -> (String, Option<String>) {
        let some = |text: &str| Some(text.to_string());
        let meant = |word: &Option<String>| word.as_ref().map(|word| format!("did you mean `{word}`?"));
        match self {
            Mistake::NotText => (
                "the file is not text".into(),
                some("a problem file is plain text in UTF-8; this one has other bytes from here on"),
            ),
            Mistake::UnknownCharacter(character) => (
                format!("the character {character:?} has no meaning here"),
                some(if *character == ';' { "a statement ends with its line" } else { "remove it" }),
            ),
            Mistake::FancyCharacter(character, plain) => {
                (format!("`{character}` is not a sign of the language"), Some(format!("write `{plain}`")))
            }
            Mistake::ForeignSign(found, plain) => {
                (format!("`{found}` is not a sign of the language"), Some(format!("write `{plain}`")))
            }
            Mistake::OpenText => {
                ("the text in quotes does not end".into(), some("close it with `\"` on the same line"))
            }
            Mistake::BadNumber(text) => (
                format!("`{text}` is not a number"),
                product(text).or_else(|| some("numbers look like 12, 2.5 or 1e-3; names do not begin with a digit")),
            ),
            Mistake::LongName(letters) => (
                format!("this name has {letters} letters"),
                Some(format!("names have at most {}", super::lexer::MAX_LETTERS)),
            ),
            Mistake::HugeNumber(text) => {
                (format!("{text} is too large"), some("numbers go up to about 1.8e308; `inf` is infinity"))
            }
            Mistake::OpenBracket(open) => (format!("`{open}` is not closed"), None),
            Mistake::StrayBracket(close) => (format!("`{close}` closes nothing"), None),
            Mistake::CrossedBrackets { open, close, .. } => (format!("`{close}` cannot close `{open}`"), None),
            Mistake::TooDeep(limit) => (
                format!("nested more than {limit} deep"),
                some("name the inner parts with `let`, or reduce a list by `sum`"),
            ),
            Mistake::NoStatement => (
                "the file says nothing".into(),
                some(
                    "a problem needs at least an `unknown` and an objective, as in\n    unknown x in [-5, 5]\n    minimise x^2",
                ),
            ),
            Mistake::UnknownStatement { word, meant: guess } => (
                format!("`{word}` begins no statement"),
                meant(guess).or_else(|| {
                    some("statements begin with title, given, unknown, let, require, minimise, maximise, alike or show")
                }),
            ),
            Mistake::BareDefinition(word) => (
                format!("`{word}` begins no statement"),
                some("a definition begins with `given` (a constant), `unknown` or `let` (a formula)"),
            ),
            Mistake::NotAStatement(found) => (
                format!("a statement cannot begin with {found}"),
                some("a line goes on only while a bracket is open or the line before ends in an operator or comma"),
            ),
            Mistake::Expected { needed, found } => (format!("here should stand {needed}, and there is {found}"), None),
            Mistake::Trailing(found) => (
                format!("the statement is complete before {found}"),
                some("one statement a line; is an operator missing?"),
            ),
            Mistake::ReservedName(word) => {
                (format!("`{word}` is a word of the language and cannot be a name"), some("choose another name"))
            }
            Mistake::ChainedComparison => ("comparisons cannot be chained".into(), some("write `a < b and b < c`")),
            Mistake::AssignmentInExpression => ("`=` defines and does not compare".into(), some("write `==`")),
            Mistake::IndexByAssignment(name) => (
                "an index is not assigned".into(),
                Some(format!("write `{name} in` and its range, as in `{name} in 1..n`")),
            ),
            Mistake::MissingElse => {
                ("this `if` has no `else`".into(), some("an `if` is a value: say what it is otherwise"))
            }
            Mistake::UnknownPromise { word, meant: guess } => (
                format!("`{word}` is no kind of symmetry"),
                meant(guess).or_else(|| some("there are exchange, shift, rotate, mirror, flip, reverse and cycle")),
            ),
            Mistake::RepeatedWord(word) => (format!("`{word}` stands twice"), some("remove one")),
        }
    }
}

/// `2*x` for `2x`; nothing where an exponent or separated digits may be meant.
fn product(text: &str) -> Option<String> {
    let (number, name) = text.split_at(text.find(|letter: char| !(letter.is_ascii_digit() || letter == '.'))?);
    let is_exponent = name.strip_prefix(['e', 'E']).is_some_and(|rest| !rest.starts_with(char::is_alphabetic));
    let is_name = name.starts_with(char::is_alphabetic) && !name.contains('.');
    (number.parse::<f64>().is_ok() && is_name && !is_exponent).then(|| format!("write `{number}*{name}`"))
}
