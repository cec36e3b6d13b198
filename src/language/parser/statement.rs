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

/// Words that other notations have for our statements, too far from them for a count of letters.
const ELSEWHERE: [(&str, &str); 16] = [
    ("var", "unknown"),
    ("variable", "unknown"),
    ("variables", "unknown"),
    ("const", "given"),
    ("constant", "given"),
    ("param", "given"),
    ("parameter", "given"),
    ("data", "given"),
    ("def", "let"),
    ("define", "let"),
    ("function", "let"),
    ("constraint", "require"),
    ("subject", "require"),
    ("objective", "minimise"),
    ("symmetry", "alike"),
    ("print", "show"),
];

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
            _ => self.no_statement(word, start),
        }?;
        let span = start.to(self.last_span());
        match self.kind() {
            TokenKind::LineEnd => Ok(Statement { span, kind }),
            found => {
                let found = found.to_string();
                self.refuse(Mistake::Trailing(found), self.span())
            }
        }
    }

    /// What may have been meant by a line that begins with none of the words.
    fn no_statement<T>(&mut self, word: String, start: Span) -> Parsed<T> {
        if self.is_sign(Sign::Assign) {
            return self.refuse(Mistake::BareDefinition(word), start);
        }
        let other = ELSEWHERE.iter().find(|entry| entry.0 == word.to_lowercase());
        let meant = suggest(&word, STATEMENT_WORDS).or_else(|| other.map(|entry| entry.1.to_string()));
        let line = self.tokens[self.place..].iter().take_while(|token| token.kind != TokenKind::LineEnd);
        if meant.is_none() && line.take(50).any(|token| token.kind == TokenKind::Sign(Sign::Assign)) {
            return self.refuse(Mistake::BareDefinition(word), start);
        }
        self.refuse(Mistake::UnknownStatement { word, meant }, start)
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
            self.some(Sign::CloseSquare, "`,` or `]`", "a count or a range", Self::axis)?
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
        let items = self.some(Sign::CloseCurly, "`,` or `}`", "a value or a range", |parser| {
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
            LetForm::Family(self.some(
                Sign::CloseSquare,
                "`,` or `]`",
                "an index, as in `i in 1..n`",
                Self::family_index,
            )?)
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
        if self.is_sign(Sign::Colon) {
            return self.expected("the objective, without a colon");
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
            self.some(Sign::CloseSquare, "`,` or `]`", "an index, as in `i in 1..n`", Self::binder)
        } else {
            Ok(Vec::new())
        }
    }

    /// `i in 1..n, j in i+1..n if c:` up to and with the colon.
    pub(super) fn binders_and_condition(&mut self) -> Parsed<(Vec<Binder>, Option<Expression>)> {
        let mut indices = vec![self.binder()?];
        let mut height = self.height;
        while self.take_sign(Sign::Comma) {
            indices.push(self.binder()?);
            height = height.max(self.height);
        }
        let condition = if self.take_word("if") { Some(self.expression()?) } else { None };
        self.height = height.max(self.height);
        self.need_sign(Sign::Colon, "`:` after the ranges")?;
        Ok((indices, condition))
    }

    /// Whether `name in` comes next, or `name = first..last`, which is a slip for it.
    pub(super) fn at_binder(&self) -> bool {
        if !matches!(self.kind(), TokenKind::Word(_)) {
            return false;
        }
        match self.ahead(1) {
            TokenKind::Word(word) => word == "in",
            TokenKind::Sign(Sign::Assign) => {
                let item = self.tokens[self.place..].iter().map(|token| &token.kind).take_while(|kind| {
                    !matches!(kind, TokenKind::LineEnd | TokenKind::Sign(Sign::Comma | Sign::Colon | Sign::CloseSquare))
                });
                item.take(50).any(|kind| kind == &TokenKind::Sign(Sign::Range))
            }
            _ => false,
        }
    }

    pub(super) fn binder(&mut self) -> Parsed<Binder> {
        let name: Name = self.name("an index, as in `i in 1..n`")?;
        if self.is_sign(Sign::Assign) {
            return self.refuse(Mistake::IndexByAssignment(name.text), self.span());
        }
        self.need_word("in", "`in` and a range")?;
        let first = self.expression()?;
        let height = self.height;
        self.need_sign(Sign::Range, "`..` and the last value")?;
        let last = self.expression()?;
        self.height = height.max(self.height);
        Ok(Binder { name, first, last })
    }
}
