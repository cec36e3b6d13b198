//! Expressions, loosest binding first: `if`, `or`, `and`, `not`, comparison, sum, product, sign, power, index.

use super::super::diagnostic::Span;
use super::super::mistake::Mistake;
use super::super::token::{Sign, TokenKind};
use super::super::tree::{Arithmetic, Comparison, Expression, ExpressionKind, Name, Reduction};
use super::{Parsed, Parser, RESERVED};

/// The most operators in a row. A longer sum was written by a program, which can write a list and a `sum` over it.
const MAX_LINKS: usize = 2000;

const REDUCTIONS: [(&str, Reduction); 4] = [
    ("sum", Reduction::Sum),
    ("product", Reduction::Product),
    ("min", Reduction::Minimum),
    ("max", Reduction::Maximum),
];

fn node(start: Span, end: Span, kind: ExpressionKind) -> Expression {
    Expression { span: start.to(end), kind }
}

impl Parser<'_> {
    pub(super) fn expression(&mut self) -> Parsed<Expression> {
        self.deeper(|parser| if parser.is_word("if") { parser.conditional() } else { parser.disjunction() })
    }

    /// Counts a link of a chain such as `a + b + c`, whose tree is as deep as the chain is long.
    fn link(&mut self, links: &mut usize) -> Parsed<()> {
        *links += 1;
        if *links > MAX_LINKS {
            return self.refuse(Mistake::TooDeep(MAX_LINKS), self.span());
        }
        Ok(())
    }

    fn conditional(&mut self) -> Parsed<Expression> {
        let start = self.span();
        self.need_word("if", "`if`")?;
        let condition = Box::new(self.expression()?);
        self.need_word("then", "`then`")?;
        let then = Box::new(self.expression()?);
        // The `else` may stand on the next line: nothing else can begin with it.
        if self.kind() == &TokenKind::LineEnd && matches!(self.ahead(1), TokenKind::Word(word) if word == "else") {
            self.place += 1;
        }
        if !self.take_word("else") {
            return self.refuse(Mistake::MissingElse, start);
        }
        let otherwise = Box::new(self.expression()?);
        let end = otherwise.span;
        Ok(node(start, end, ExpressionKind::If { condition, then, otherwise }))
    }

    fn disjunction(&mut self) -> Parsed<Expression> {
        let mut left = self.conjunction()?;
        let mut links = 0;
        while self.take_word("or") {
            self.link(&mut links)?;
            let right = self.conjunction()?;
            left = node(left.span, right.span, ExpressionKind::Or(Box::new(left), Box::new(right)));
        }
        Ok(left)
    }

    fn conjunction(&mut self) -> Parsed<Expression> {
        let mut left = self.negation()?;
        let mut links = 0;
        while self.take_word("and") {
            self.link(&mut links)?;
            let right = self.negation()?;
            left = node(left.span, right.span, ExpressionKind::And(Box::new(left), Box::new(right)));
        }
        Ok(left)
    }

    fn negation(&mut self) -> Parsed<Expression> {
        let start = self.span();
        if self.take_word("not") {
            let inner = self.deeper(Self::negation)?;
            return Ok(node(start, inner.span, ExpressionKind::Not(Box::new(inner))));
        }
        self.comparison()
    }

    fn comparison(&mut self) -> Parsed<Expression> {
        let left = self.sum()?;
        let Some(operator) = self.comparison_sign() else { return Ok(left) };
        self.place += 1;
        let right = self.sum()?;
        if self.comparison_sign().is_some() {
            return self.refuse(Mistake::ChainedComparison, left.span.to(self.span()));
        }
        let (start, end) = (left.span, right.span);
        Ok(node(start, end, ExpressionKind::Compare { operator, left: Box::new(left), right: Box::new(right) }))
    }

    fn comparison_sign(&self) -> Option<Comparison> {
        let TokenKind::Sign(sign) = self.kind() else { return None };
        match sign {
            Sign::Less => Some(Comparison::Less),
            Sign::LessOrEqual => Some(Comparison::LessOrEqual),
            Sign::Greater => Some(Comparison::Greater),
            Sign::GreaterOrEqual => Some(Comparison::GreaterOrEqual),
            Sign::Equal => Some(Comparison::Equal),
            Sign::NotEqual => Some(Comparison::NotEqual),
            _ => None,
        }
    }

    fn sum(&mut self) -> Parsed<Expression> {
        let mut left = self.term()?;
        let mut links = 0;
        loop {
            self.link(&mut links)?;
            let operator = match self.kind() {
                TokenKind::Sign(Sign::Plus) => Arithmetic::Add,
                TokenKind::Sign(Sign::Minus) => Arithmetic::Subtract,
                _ => return Ok(left),
            };
            self.place += 1;
            let right = self.term()?;
            left = arithmetic(operator, left, right);
        }
    }

    fn term(&mut self) -> Parsed<Expression> {
        let mut left = self.signed()?;
        let mut links = 0;
        loop {
            self.link(&mut links)?;
            let operator = match self.kind() {
                TokenKind::Sign(Sign::Times) => Arithmetic::Multiply,
                TokenKind::Sign(Sign::Over) => Arithmetic::Divide,
                _ => return Ok(left),
            };
            self.place += 1;
            let right = self.signed()?;
            left = arithmetic(operator, left, right);
        }
    }

    /// `-x`, which binds looser than a power: `-x^2` is `-(x^2)`.
    fn signed(&mut self) -> Parsed<Expression> {
        let start = self.span();
        if self.take_sign(Sign::Minus) {
            let inner = self.deeper(Self::signed)?;
            return Ok(node(start, inner.span, ExpressionKind::Negate(Box::new(inner))));
        }
        if self.take_sign(Sign::Plus) {
            return self.deeper(Self::signed);
        }
        self.power()
    }

    fn power(&mut self) -> Parsed<Expression> {
        let base = self.indexed()?;
        if !self.take_sign(Sign::Power) {
            return Ok(base);
        }
        // Right associative, and `2^-x` is allowed: the exponent is a signed operand, which is a power again.
        let exponent = self.deeper(Self::signed)?;
        Ok(arithmetic(Arithmetic::Power, base, exponent))
    }

    fn indexed(&mut self) -> Parsed<Expression> {
        let mut base = self.primary()?;
        let mut links = 0;
        while self.take_sign(Sign::OpenSquare) {
            self.link(&mut links)?;
            let indices = self.list(Sign::CloseSquare, "`,` or `]`", Self::expression)?;
            let start = base.span;
            base = node(start, self.last_span(), ExpressionKind::Index { base: Box::new(base), indices });
        }
        Ok(base)
    }

    fn primary(&mut self) -> Parsed<Expression> {
        let start = self.span();
        match self.kind() {
            TokenKind::Number(number) => {
                let number = *number;
                self.place += 1;
                Ok(node(start, start, ExpressionKind::Number(number)))
            }
            TokenKind::Sign(Sign::OpenRound) => {
                self.place += 1;
                let inner = self.expression()?;
                if self.is_sign(Sign::Assign) {
                    return self.refuse(Mistake::AssignmentInExpression, self.span());
                }
                self.need_sign(Sign::CloseRound, "`)`")?;
                Ok(node(start, self.last_span(), inner.kind))
            }
            TokenKind::Sign(Sign::OpenSquare) => {
                self.place += 1;
                let items = self.list(Sign::CloseSquare, "`,` or `]`", Self::expression)?;
                Ok(node(start, self.last_span(), ExpressionKind::List(items)))
            }
            TokenKind::Word(word) if word == "if" => self.deeper(Self::conditional),
            TokenKind::Word(word) if !RESERVED.contains(&word.as_str()) => self.named(),
            _ => self.expected("a number, a name or `(`"),
        }
    }

    /// A name, a call, a reduction or a column.
    fn named(&mut self) -> Parsed<Expression> {
        let name: Name = self.name("a name")?;
        let start = name.span;
        if self.take_sign(Sign::Dot) {
            let column = self.name("the name of a column")?;
            let end = column.span;
            return Ok(node(start, end, ExpressionKind::Column { table: name, column }));
        }
        if !self.take_sign(Sign::OpenRound) {
            return Ok(node(start, start, ExpressionKind::Name(name.text)));
        }
        let reduction = REDUCTIONS.iter().find(|entry| entry.0 == name.text);
        if let (Some(&(_, operator)), true) = (reduction, self.at_binder()) {
            let (indices, condition) = self.deeper(Self::binders_and_condition)?;
            let condition = condition.map(Box::new);
            let body = Box::new(self.expression()?);
            self.need_sign(Sign::CloseRound, "`)`")?;
            let kind = ExpressionKind::Reduce { operator, word: start, indices, condition, body };
            return Ok(node(start, self.last_span(), kind));
        }
        let arguments = self.list(Sign::CloseRound, "`,` or `)`", Self::expression)?;
        Ok(node(start, self.last_span(), ExpressionKind::Call { name, arguments }))
    }
}

fn arithmetic(operator: Arithmetic, left: Expression, right: Expression) -> Expression {
    let (start, end) = (left.span, right.span);
    node(start, end, ExpressionKind::Arithmetic { operator, left: Box::new(left), right: Box::new(right) })
}
