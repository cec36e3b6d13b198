//! Expressions, loosest binding first: `if`, `or`, `and`, `not`, comparison, sum, product, sign, power, index.

use super::super::diagnostic::Span;
use super::super::mistake::Mistake;
use super::super::token::{Sign, TokenKind};
use super::super::tree::{Arithmetic, Comparison, Expression, ExpressionKind, Name, Reduction};
use super::{Parsed, Parser, RESERVED};

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

    fn conditional(&mut self) -> Parsed<Expression> {
        let start = self.span();
        self.need_word("if", "`if`")?;
        let condition = Box::new(self.expression()?);
        let height = self.height;
        self.go_on_at("then");
        self.need_word("then", "`then`")?;
        let then = Box::new(self.expression()?);
        let height = height.max(self.height);
        self.go_on_at("else");
        if !self.take_word("else") {
            return self.refuse(Mistake::MissingElse, start);
        }
        let otherwise = Box::new(self.expression()?);
        self.grow(height)?;
        let end = otherwise.span;
        Ok(node(start, end, ExpressionKind::If { condition, then, otherwise }))
    }

    /// Passes line ends before `then` or `else`: nothing else can begin with these.
    fn go_on_at(&mut self, word: &str) {
        let n_ends = self.tokens[self.place..].iter().take_while(|token| token.kind == TokenKind::LineEnd).count();
        if matches!(self.ahead(n_ends), TokenKind::Word(found) if found == word) {
            self.place += n_ends;
        }
    }

    fn disjunction(&mut self) -> Parsed<Expression> {
        let mut left = self.conjunction()?;
        let mut height = self.height;
        while self.take_word("or") {
            let right = self.conjunction()?;
            height = self.grow(height)?;
            left = node(left.span, right.span, ExpressionKind::Or(Box::new(left), Box::new(right)));
        }
        Ok(left)
    }

    fn conjunction(&mut self) -> Parsed<Expression> {
        let mut left = self.negation()?;
        let mut height = self.height;
        while self.take_word("and") {
            let right = self.negation()?;
            height = self.grow(height)?;
            left = node(left.span, right.span, ExpressionKind::And(Box::new(left), Box::new(right)));
        }
        Ok(left)
    }

    fn negation(&mut self) -> Parsed<Expression> {
        let start = self.span();
        if self.take_word("not") {
            let inner = self.deeper(Self::negation)?;
            self.grow(0)?;
            return Ok(node(start, inner.span, ExpressionKind::Not(Box::new(inner))));
        }
        self.comparison()
    }

    fn comparison(&mut self) -> Parsed<Expression> {
        let left = self.sum()?;
        let height = self.height;
        if self.is_sign(Sign::Assign) {
            // Every `=` that defines has been taken before a formula begins.
            return self.refuse(Mistake::AssignmentInExpression, self.span());
        }
        let Some(operator) = self.comparison_sign() else { return Ok(left) };
        self.place += 1;
        let right = self.sum()?;
        self.grow(height)?;
        if self.comparison_sign().is_some() || self.is_sign(Sign::Assign) {
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
        let mut height = self.height;
        loop {
            let operator = match self.kind() {
                TokenKind::Sign(Sign::Plus) => Arithmetic::Add,
                TokenKind::Sign(Sign::Minus) => Arithmetic::Subtract,
                _ => return Ok(left),
            };
            self.place += 1;
            let right = self.term()?;
            height = self.grow(height)?;
            left = arithmetic(operator, left, right);
        }
    }

    fn term(&mut self) -> Parsed<Expression> {
        let mut left = self.signed()?;
        let mut height = self.height;
        loop {
            let operator = match self.kind() {
                TokenKind::Sign(Sign::Times) => Arithmetic::Multiply,
                TokenKind::Sign(Sign::Over) => Arithmetic::Divide,
                _ => return Ok(left),
            };
            self.place += 1;
            let right = self.signed()?;
            height = self.grow(height)?;
            left = arithmetic(operator, left, right);
        }
    }

    /// `-x`, which binds looser than a power: `-x^2` is `-(x^2)`.
    fn signed(&mut self) -> Parsed<Expression> {
        let start = self.span();
        if self.take_sign(Sign::Minus) {
            let inner = self.deeper(Self::signed)?;
            self.grow(0)?;
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
        let height = self.height;
        let exponent = self.deeper(Self::signed)?;
        self.grow(height)?;
        Ok(arithmetic(Arithmetic::Power, base, exponent))
    }

    fn indexed(&mut self) -> Parsed<Expression> {
        let mut base = self.primary()?;
        let mut height = self.height;
        while self.take_sign(Sign::OpenSquare) {
            let indices = self.some(Sign::CloseSquare, "`,` or `]`", "an index", Self::expression)?;
            height = self.grow(height)?;
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
                self.height = 1;
                Ok(node(start, start, ExpressionKind::Number(number)))
            }
            TokenKind::Sign(Sign::OpenRound) => {
                self.place += 1;
                let inner = self.expression()?;
                self.need_sign(Sign::CloseRound, "`)`")?;
                Ok(node(start, self.last_span(), inner.kind))
            }
            TokenKind::Sign(Sign::OpenSquare) => {
                self.place += 1;
                let items = self.list(Sign::CloseSquare, "`,` or `]`", Self::expression)?;
                self.grow(0)?;
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
        self.height = 1;
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
            let height = self.height;
            let condition = condition.map(Box::new);
            let body = Box::new(self.expression()?);
            self.grow(height)?;
            self.need_sign(Sign::CloseRound, "`)`")?;
            let kind = ExpressionKind::Reduce { operator, word: start, indices, condition, body };
            return Ok(node(start, self.last_span(), kind));
        }
        let arguments = self.list(Sign::CloseRound, "`,` or `)`", Self::expression)?;
        self.grow(0)?;
        Ok(node(start, self.last_span(), ExpressionKind::Call { name, arguments }))
    }
}

fn arithmetic(operator: Arithmetic, left: Expression, right: Expression) -> Expression {
    let (start, end) = (left.span, right.span);
    node(start, end, ExpressionKind::Arithmetic { operator, left: Box::new(left), right: Box::new(right) })
}
