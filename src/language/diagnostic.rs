//! What the tool says about a problem file: found in one place, drawn in another.

use std::ops::Range;

/// A stretch of the source text, in bytes.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq, Hash)]
pub struct Span {
    /// The first byte.
    pub start: u32,
    /// One past the last byte.
    pub end: u32,
}

impl Span {
    /// The span of a byte range.
    pub fn new(range: Range<usize>) -> Self {
        Span { start: range.start as u32, end: range.end as u32 }
    }

    /// The smallest span that holds both.
    pub fn to(self, other: Span) -> Self {
        Span { start: self.start.min(other.start), end: self.end.max(other.end) }
    }
}

/// How much a diagnostic matters.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord)]
pub enum Severity {
    /// The problem is refused.
    Refusal,
    /// The problem stands, but the user should know.
    Warning,
}

/// One thing to tell the user: the place, the cause and, where there is one, the remedy.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Diagnostic {
    /// Refusal or warning.
    pub severity: Severity,
    /// The exact place.
    pub span: Span,
    /// What is wrong, in the user's terms; a sentence without its full stop.
    pub message: String,
    /// Further places and facts that explain it, in order.
    pub notes: Vec<Note>,
    /// What to do about it, where something is likely.
    pub remedy: Option<String>,
}

/// A further fact of a diagnostic.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Note {
    /// Its place in the file, if it has one.
    pub span: Option<Span>,
    /// The fact.
    pub text: String,
}
