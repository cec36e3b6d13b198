//! Statements.

use super::super::diagnostic::Span;
use super::super::lexer::STATEMENT_WORDS;
use super::super::mistake::Mistake;
use super::super::suggest::suggest;
use super::super::token::{Sign, TokenKind};
use super::super::tree::{
    Axis, Binder, Choice, Domain, Expression, FamilyIndex, GivenValue, Interval, LetForm, Name, Statement,
    StatementKind,
};
use super::{Parsed, Parser};

impl Parser<'_> {
    pub(super) fn statement(&mut self) -> Parsed<Statement> {
        let start = self.span();
        let TokenKind::Word(word) = self.kind() else {
            let found = self.kind().to_string();
            return self.refuse(Mistake::NotAStatement(found), start);
        };
        let word = word.clone();
        self.place += 1;
        let kind = match word.as_str() {
            "title" => self.title(),
            "given" => self.given(),
            "unknown" => self.unknown(),
            "let" => self.define(),
            "require" => self.require(),
            "minimise" | "minimize" | "maximise" | "maximize" => self.objective(start, word.starts_with("max")),
            "alike" => self.alike(),
            "show" => self.show(),
            _ => {
                let meant = suggest(&word, STATEMENT_WORDS);
                self.refuse(Mistake::UnknownStatement { word, meant }, start)
            }
        }?;
        let span = start.to(self.last_span());
        match self.kind() {
            TokenKind::LineEnd => Ok(Statement { span, kind }),
            TokenKind::Sign(Sign::Assign) => self.refuse(Mistake::AssignmentInExpression, self.span()),
            found => {
                let found = found.to_string();
                self.refuse(Mistake::Trailing(found), self.span())
            }
        }
    }

    fn title(&mut self) -> Parsed<StatementKind> {
        match self.kind() {
            TokenKind::Text(text) => {
                let text = text.clone();
                self.place += 1;
                Ok(StatementKind::Title(text))
            }
            _ => self.expected("a text in quotes"),
        }
    }

    fn given(&mut self) -> Parsed<StatementKind> {
        let name = self.name("a name")?;
        let indices = self.optional_binders()?;
        self.need_sign(Sign::Assign, "`=` and a value")?;
        let start = self.span();
        let value = if self.take_word("table") {
            match self.kind() {
                TokenKind::Text(file) => {
                    let file = file.clone();
                    self.place += 1;
                    GivenValue::Table { file, span: start.to(self.last_span()) }
                }
                _ => return self.expected("the name of a CSV file in quotes"),
            }
        } else {
            GivenValue::Formula(self.expression()?)
        };
        Ok(StatementKind::Given { name, indices, value })
    }

    fn unknown(&mut self) -> Parsed<StatementKind> {
        let name = self.name("a name")?;
        let axes = if self.take_sign(Sign::OpenSquare) {
            self.list(Sign::CloseSquare, "`,` or `]`", Self::axis)?
        } else {
            Vec::new()
        };
        self.need_word("in", "`in` and the bounds `[lower, upper]`")?;
        let domain = self.domain()?;
        let (mut cyclic, mut sampled) = (None, None);
        loop {
            let span = self.span();
            if self.take_word("cyclic") {
                if cyclic.replace(span).is_some() {
                    return self.refuse(Mistake::RepeatedWord("cyclic"), span);
                }
            } else if self.take_word("sampled") {
                let interval = self.interval()?;
                if sampled.replace(interval).is_some() {
                    return self.refuse(Mistake::RepeatedWord("sampled"), span);
                }
            } else {
                return Ok(StatementKind::Unknown { name, axes, domain, cyclic, sampled });
            }
        }
    }

    fn axis(&mut self) -> Parsed<Axis> {
        if self.at_binder() { Ok(Axis::Range(self.binder()?)) } else { Ok(Axis::Count(self.expression()?)) }
    }

    fn domain(&mut self) -> Parsed<Domain> {
        let start = self.span();
        if !self.take_sign(Sign::OpenCurly) {
            return Ok(Domain::Interval(self.interval()?));
        }
        let items = self.list(Sign::CloseCurly, "`,` or `}`", |parser| {
            let first = parser.expression()?;
            if parser.take_sign(Sign::Range) {
                return Ok(Choice::Range(first, parser.expression()?));
            }
            Ok(Choice::Value(first))
        })?;
        Ok(Domain::Choices { items, span: start.to(self.last_span()) })
    }

    fn interval(&mut self) -> Parsed<Interval> {
        let start = self.span();
        self.need_sign(Sign::OpenSquare, "bounds `[lower, upper]`")?;
        let lower = self.expression()?;
        self.need_sign(Sign::Comma, "`,` between the bounds")?;
        let upper = self.expression()?;
        self.need_sign(Sign::CloseSquare, "`]` after the bounds")?;
        Ok(Interval { lower, upper, span: start.to(self.last_span()) })
    }

    fn define(&mut self) -> Parsed<StatementKind> {
        let name = self.name("a name")?;
        let form = if self.take_sign(Sign::OpenRound) {
            LetForm::Function(
                self.list(Sign::CloseRound, "`,` or `)`", |parser| parser.name("the name of a parameter"))?,
            )
        } else if self.take_sign(Sign::OpenSquare) {
            LetForm::Family(self.list(Sign::CloseSquare, "`,` or `]`", Self::family_index)?)
        } else {
            LetForm::Value
        };
        self.need_sign(Sign::Assign, "`=` and a formula")?;
        Ok(StatementKind::Let { name, form, value: self.expression()? })
    }

    fn family_index(&mut self) -> Parsed<FamilyIndex> {
        if self.at_binder() {
            Ok(FamilyIndex::Range(self.binder()?))
        } else {
            Ok(FamilyIndex::Place(self.expression()?))
        }
    }

    fn require(&mut self) -> Parsed<StatementKind> {
        let (mut indices, mut condition) = (Vec::new(), None);
        if self.take_word("for") {
            (indices, condition) = self.binders_and_condition()?;
        }
        Ok(StatementKind::Require { indices, condition, body: self.expression()? })
    }

    fn objective(&mut self, word: Span, maximise: bool) -> Parsed<StatementKind> {
        // `minimise: e` is a common slip, and harmless.
        if self.is_sign(Sign::Colon) {
            return self.expected("the objective");
        }
        Ok(StatementKind::Objective { maximise, word, value: self.expression()? })
    }

    fn show(&mut self) -> Parsed<StatementKind> {
        let name = self.name("a name for the quantity")?;
        let indices = self.optional_binders()?;
        self.need_sign(Sign::Assign, "`=` and a formula")?;
        Ok(StatementKind::Show { name, indices, value: self.expression()? })
    }

    fn optional_binders(&mut self) -> Parsed<Vec<Binder>> {
        if self.take_sign(Sign::OpenSquare) {
            self.list(Sign::CloseSquare, "`,` or `]`", Self::binder)
        } else {
            Ok(Vec::new())
        }
    }

    /// `i in 1..n, j in i+1..n if c:` up to and with the colon.
    pub(super) fn binders_and_condition(&mut self) -> Parsed<(Vec<Binder>, Option<Expression>)> {
        let mut indices = vec![self.binder()?];
        while self.take_sign(Sign::Comma) {
            indices.push(self.binder()?);
        }
        let condition = if self.take_word("if") { Some(self.expression()?) } else { None };
        self.need_sign(Sign::Colon, "`:` after the ranges")?;
        Ok((indices, condition))
    }

    /// Whether `name in` comes next.
    pub(super) fn at_binder(&self) -> bool {
        matches!(self.kind(), TokenKind::Word(_)) && matches!(self.ahead(1), TokenKind::Word(word) if word == "in")
    }

    pub(super) fn binder(&mut self) -> Parsed<Binder> {
        let name: Name = self.name("an index, as in `i in 1..n`")?;
        self.need_word("in", "`in` and a range")?;
        let first = self.expression()?;
        self.need_sign(Sign::Range, "`..` and the last value")?;
        let last = self.expression()?;
        Ok(Binder { name, first, last })
    }
}
