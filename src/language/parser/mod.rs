//! From words to tree, one function per production.
//!
//! A mistake ends its statement, not the file: the parser goes on at the next line end, so that all independent
//! mistakes are told at once. Within a statement only the first is, since what follows it is guesswork.

mod expression;
mod promise;
mod statement;

use super::diagnostic::{Diagnostic, Span};
use super::lexer::{MAX_DEPTH, STATEMENT_WORDS};
use super::mistake::Mistake;
use super::token::{Sign, Token, TokenKind};
use super::tree::{File, Name};

/// Words that cannot be names.
pub const RESERVED: [&str; 13] =
    ["in", "if", "then", "else", "and", "or", "not", "for", "table", "cyclic", "sampled", "minimise", "maximise"];

/// A mistake on its way to the end of the statement.
struct Stop;

type Parsed<T> = Result<T, Stop>;

/// Parses tokens; what was understood is in the file, the rest in the diagnostics.
pub(super) fn parse_tokens(tokens: &[Token], diagnostics: &mut Vec<Diagnostic>) -> File {
    let mut parser = Parser { tokens, place: 0, depth: 0, diagnostics };
    let mut file = File::default();
    while !parser.is_done() {
        if parser.kind() == &TokenKind::LineEnd {
            parser.place += 1;
            continue;
        }
        match parser.statement() {
            Ok(statement) => file.statements.push(statement),
            Err(Stop) => parser.skip_statement(),
        }
    }
    file
}

struct Parser<'a> {
    tokens: &'a [Token],
    place: usize,
    depth: usize,
    diagnostics: &'a mut Vec<Diagnostic>,
}

impl Parser<'_> {
    fn is_done(&self) -> bool {
        self.place >= self.tokens.len()
    }

    fn kind(&self) -> &TokenKind {
        self.ahead(0)
    }

    fn ahead(&self, count: usize) -> &TokenKind {
        self.tokens.get(self.place + count).map_or(&TokenKind::LineEnd, |token| &token.kind)
    }

    /// The place of the next token; at a line end, the place just behind the last word.
    fn span(&self) -> Span {
        match self.tokens.get(self.place) {
            Some(token) if token.kind != TokenKind::LineEnd => token.span,
            _ => {
                let end = self.last_span().end;
                Span { start: end, end }
            }
        }
    }

    fn last_span(&self) -> Span {
        self.place.checked_sub(1).and_then(|place| self.tokens.get(place)).map_or(Span::default(), |token| token.span)
    }

    fn refuse<T>(&mut self, mistake: Mistake, span: Span) -> Parsed<T> {
        self.diagnostics.push(mistake.at(span));
        Err(Stop)
    }

    fn expected<T>(&mut self, needed: &'static str) -> Parsed<T> {
        let found = self.kind().to_string();
        self.refuse(Mistake::Expected { needed, found }, self.span())
    }

    fn skip_statement(&mut self) {
        while !self.is_done() && self.kind() != &TokenKind::LineEnd {
            self.place += 1;
        }
    }

    fn is_sign(&self, sign: Sign) -> bool {
        self.kind() == &TokenKind::Sign(sign)
    }

    fn take_sign(&mut self, sign: Sign) -> bool {
        let there = self.is_sign(sign);
        self.place += usize::from(there);
        there
    }

    fn need_sign(&mut self, sign: Sign, needed: &'static str) -> Parsed<()> {
        if self.take_sign(sign) { Ok(()) } else { self.expected(needed) }
    }

    fn is_word(&self, word: &str) -> bool {
        matches!(self.kind(), TokenKind::Word(found) if found == word)
    }

    fn take_word(&mut self, word: &str) -> bool {
        let there = self.is_word(word);
        self.place += usize::from(there);
        there
    }

    fn need_word(&mut self, word: &str, needed: &'static str) -> Parsed<()> {
        if self.take_word(word) { Ok(()) } else { self.expected(needed) }
    }

    /// A name that the user gives.
    fn name(&mut self, needed: &'static str) -> Parsed<Name> {
        let span = self.span();
        match self.kind() {
            TokenKind::Word(word) if RESERVED.contains(&word.as_str()) || STATEMENT_WORDS.contains(&word.as_str()) => {
                let word = word.clone();
                self.refuse(Mistake::ReservedName(word), span)
            }
            TokenKind::Word(word) => {
                let text = word.clone();
                self.place += 1;
                Ok(Name { text, span })
            }
            _ => self.expected(needed),
        }
    }

    /// Items between commas up to a closing sign, which is taken.
    fn list<T>(
        &mut self,
        close: Sign,
        needed: &'static str,
        mut item: impl FnMut(&mut Self) -> Parsed<T>,
    ) -> Parsed<Vec<T>> {
        let mut items = Vec::new();
        if self.take_sign(close) {
            return Ok(items);
        }
        loop {
            items.push(item(self)?);
            if self.take_sign(close) {
                return Ok(items);
            }
            self.need_sign(Sign::Comma, needed)?;
        }
    }

    /// Runs a production one level deeper.
    fn deeper<T>(&mut self, production: impl FnOnce(&mut Self) -> Parsed<T>) -> Parsed<T> {
        if self.depth >= MAX_DEPTH {
            return self.refuse(Mistake::TooDeep(MAX_DEPTH), self.span());
        }
        self.depth += 1;
        let result = production(self);
        self.depth -= 1;
        result
    }
}
