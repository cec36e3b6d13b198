//! The way from bytes to a tree.

use super::diagnostic::{Diagnostic, Span};
use super::lexer::lex;
use super::mistake::Mistake;
use super::parser::parse_tokens;
use super::tree::File;

/// What was understood of a text, and what was wrong with it.
#[derive(Clone, Debug, PartialEq)]
pub struct Parsed {
    /// The statements that were understood.
    pub file: File,
    /// Every mistake, in the order of the text. If there is none, `file` is the whole text.
    pub diagnostics: Vec<Diagnostic>,
}

/// The text of a problem file's bytes.
///
/// # Errors
/// A diagnostic where the bytes are not UTF-8 or hold a zero byte, with the readable text before that place.
pub fn decode(bytes: &[u8]) -> Result<String, (String, Diagnostic)> {
    let valid = match std::str::from_utf8(bytes) {
        Ok(text) => text,
        Err(error) => std::str::from_utf8(&bytes[..error.valid_up_to()]).unwrap_or(""),
    };
    let end = valid.find('\0').unwrap_or(valid.len());
    if end == bytes.len() {
        return Ok(valid.to_string());
    }
    Err((valid[..end].to_string(), Mistake::NotText.at(Span::new(end..end))))
}

/// Parses a problem file.
///
/// ```
/// let parsed = thalweg::language::parse("unknown x in [-1, 1]\nminimise x^2");
/// assert!(parsed.diagnostics.is_empty());
/// assert_eq!(parsed.file.statements.len(), 2);
/// ```
pub fn parse(text: &str) -> Parsed {
    let mut diagnostics = Vec::new();
    let lexed = lex(text, &mut diagnostics);
    let file = parse_tokens(&lexed, &mut diagnostics);
    if file.statements.is_empty() && diagnostics.is_empty() {
        diagnostics.push(Mistake::NoStatement.at(Span::default()));
    }
    diagnostics.sort_by_key(|diagnostic| (diagnostic.span.start, diagnostic.span.end));
    // One slip can be met twice, by the lexer and by the parser at the same place: the first is the cause.
    diagnostics.dedup_by_key(|diagnostic| diagnostic.span.start);
    Parsed { file, diagnostics }
}
