//! `alike` statements.

use super::super::mistake::Mistake;
use super::super::suggest::suggest;
use super::super::token::{Sign, TokenKind};
use super::super::tree::{Promise, PromiseKind, PromiseOperand, StatementKind};
use super::{Parsed, Parser};

impl PromiseKind {
    /// The kinds with their words.
    pub const WORDS: [(&'static str, PromiseKind); 7] = [
        ("exchange", PromiseKind::Exchange),
        ("shift", PromiseKind::Shift),
        ("rotate", PromiseKind::Rotate),
        ("mirror", PromiseKind::Mirror),
        ("flip", PromiseKind::Flip),
        ("reverse", PromiseKind::Reverse),
        ("cycle", PromiseKind::Cycle),
    ];

    /// The word.
    pub fn word(self) -> &'static str {
        PromiseKind::WORDS.iter().find(|entry| entry.1 == self).map_or("", |entry| entry.0)
    }
}

impl Parser<'_> {
    pub(super) fn alike(&mut self) -> Parsed<StatementKind> {
        let mut promises = vec![self.promise()?];
        while self.take_sign(Sign::Comma) {
            promises.push(self.promise()?);
        }
        Ok(StatementKind::Alike(promises))
    }

    fn promise(&mut self) -> Parsed<Promise> {
        let word = self.span();
        let TokenKind::Word(text) = self.kind() else {
            return self.expected("a kind of symmetry, such as `exchange`");
        };
        let text = text.clone();
        let Some(&(_, kind)) = PromiseKind::WORDS.iter().find(|entry| entry.0 == text) else {
            let meant = suggest(&text, PromiseKind::WORDS.map(|entry| entry.0));
            return self.refuse(Mistake::UnknownPromise { word: text, meant }, word);
        };
        self.place += 1;
        let operands = if self.take_sign(Sign::OpenRound) {
            self.some(Sign::CloseRound, "`,` or `)`", "the name of an unknown", Self::operand)?
        } else {
            vec![self.operand()?]
        };
        Ok(Promise { kind, word, operands, span: word.to(self.last_span()) })
    }

    fn operand(&mut self) -> Parsed<PromiseOperand> {
        let name = self.name("the name of an unknown")?;
        let mut rows = None;
        if self.take_sign(Sign::OpenSquare) {
            let first = self.expression()?;
            let last = if self.take_sign(Sign::Range) { self.expression()? } else { first.clone() };
            self.need_sign(Sign::CloseSquare, "`]` after the rows")?;
            rows = Some((first, last));
        }
        let span = name.span.to(self.last_span());
        Ok(PromiseOperand { name, rows, span })
    }
}
