//! The words and signs of the language.

use std::fmt;

use super::diagnostic::Span;

/// One word or sign, and where it stands.
#[derive(Clone, Debug, PartialEq)]
pub struct Token {
    /// What it is.
    pub kind: TokenKind,
    /// Where it stands.
    pub span: Span,
}

/// The kinds of word and sign.
#[derive(Clone, Debug, PartialEq)]
pub enum TokenKind {
    /// A number.
    Number(f64),
    /// A name or a word of the language.
    Word(String),
    /// A text in double quotes, without them.
    Text(String),
    /// A sign such as `+` or `..`.
    Sign(Sign),
    /// The end of a line.
    LineEnd,
}

/// The signs.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Sign {
    /// `(`
    OpenRound,
    /// `)`
    CloseRound,
    /// `[`
    OpenSquare,
    /// `]`
    CloseSquare,
    /// `{`
    OpenCurly,
    /// `}`
    CloseCurly,
    /// `,`
    Comma,
    /// `:`
    Colon,
    /// `.`
    Dot,
    /// `..`
    Range,
    /// `=`
    Assign,
    /// `+`
    Plus,
    /// `-`
    Minus,
    /// `*`
    Times,
    /// `/`
    Over,
    /// `^`
    Power,
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

impl Sign {
    /// The signs with how they are written, longer ones before those that begin them.
    pub const WRITTEN: [(&'static str, Sign); 22] = [
        ("..", Sign::Range),
        ("<=", Sign::LessOrEqual),
        (">=", Sign::GreaterOrEqual),
        ("==", Sign::Equal),
        ("!=", Sign::NotEqual),
        ("(", Sign::OpenRound),
        (")", Sign::CloseRound),
        ("[", Sign::OpenSquare),
        ("]", Sign::CloseSquare),
        ("{", Sign::OpenCurly),
        ("}", Sign::CloseCurly),
        (",", Sign::Comma),
        (":", Sign::Colon),
        (".", Sign::Dot),
        ("=", Sign::Assign),
        ("+", Sign::Plus),
        ("-", Sign::Minus),
        ("*", Sign::Times),
        ("/", Sign::Over),
        ("^", Sign::Power),
        ("<", Sign::Less),
        (">", Sign::Greater),
    ];

    /// How it is written.
    pub fn written(self) -> &'static str {
        Sign::WRITTEN.iter().find(|entry| entry.1 == self).map_or("", |entry| entry.0)
    }

    /// Whether a line that ends in it goes on in the next.
    pub fn continues(self) -> bool {
        use Sign::*;
        matches!(
            self,
            Comma
                | Colon
                | Range
                | Assign
                | Plus
                | Minus
                | Times
                | Over
                | Power
                | Less
                | LessOrEqual
                | Greater
                | GreaterOrEqual
                | Equal
                | NotEqual
        )
    }
}

impl fmt::Display for TokenKind {
    fn fmt(&self, out: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            TokenKind::Number(number) => write!(out, "the number {number}"),
            TokenKind::Word(word) => write!(out, "`{word}`"),
            TokenKind::Text(_) => write!(out, "a text in quotes"),
            TokenKind::Sign(sign) => write!(out, "`{}`", sign.written()),
            TokenKind::LineEnd => write!(out, "the end of the line"),
        }
    }
}

/// Words that a line may end in and go on, besides the operators.
pub const CONTINUING_WORDS: [&str; 8] = ["in", "if", "then", "else", "and", "or", "not", "for"];
