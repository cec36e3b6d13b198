//! From words to tree, one function per production.
//!
//! A mistake ends its statement, not the file: the parser goes on at the next line end, so that all independent
//! mistakes are told at once. Within a statement only the first is, since what follows it is guesswork.

mod expression;
mod promise;
mod statement;

use super::diagnostic::{Diagnostic, Span};
use super::lexer::{Lexed, MAX_DEPTH, STATEMENT_WORDS};
use super::mistake::Mistake;
use super::token::{Sign, Token, TokenKind};
use super::tree::{File, Name};

/// Words that cannot be names.
pub const RESERVED: [&str; 13] =
    ["in", "if", "then", "else", "and", "or", "not", "for", "table", "cyclic", "sampled", "minimise", "maximise"];

/// A mistake on its way to the end of the statement.
struct Stop;

type Parsed<T> = Result<T, Stop>;

/// The tallest tree of an expression. Whoever walks trees may recurse; a chain such as `a + b + c` makes a tree as tall
/// as it is long. A longer one was written by a program, which can write a list and a `sum` over it.
const MAX_HEIGHT: usize = 1000;

/// Parses tokens; what was understood is in the file, the rest in the diagnostics.
pub(super) fn parse_tokens(lexed: &Lexed, diagnostics: &mut Vec<Diagnostic>) -> File {
    let mut parser = Parser { tokens: &lexed.tokens, place: 0, depth: 0, height: 0, diagnostics };
    let mut file = File::default();
    while !parser.is_done() {
        if parser.kind() == &TokenKind::LineEnd {
            parser.place += 1;
            continue;
        }
        let (start, n_before) = (parser.span().start, parser.diagnostics.len());
        match parser.statement() {
            Ok(statement) => file.statements.push(statement),
            Err(Stop) => {
                parser.skip_statement();
                let end = parser.tokens.get(parser.place).map_or(u32::MAX, |token| token.span.end);
                // One slip, one message: where the lexer could not tell what was meant, neither can the parser.
                let first = lexed.doubts.partition_point(|&place| place < start);
                if lexed.doubts.get(first).is_some_and(|&place| place <= end) {
                    parser.diagnostics.truncate(n_before);
                }
            }
        }
    }
    file
}

struct Parser<'a> {
    tokens: &'a [Token],
    place: usize,
    depth: usize,
    /// How tall the tree of the expression is that was parsed last.
    height: usize,
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

    /// Counts a node above the operand parsed last and others, of which the tallest has the height `others`.
    fn grow(&mut self, others: usize) -> Parsed<usize> {
        self.height = others.max(self.height) + 1;
        if self.height > MAX_HEIGHT {
            return self.refuse(Mistake::TooDeep(MAX_HEIGHT), self.span());
        }
        Ok(self.height)
    }

    /// Items between commas up to a closing sign, which is taken; at least one.
    fn some<T>(
        &mut self,
        close: Sign,
        needed: &'static str,
        empty: &'static str,
        item: impl FnMut(&mut Self) -> Parsed<T>,
    ) -> Parsed<Vec<T>> {
        if self.is_sign(close) { self.expected(empty) } else { self.list(close, needed, item) }
    }

    /// Items between commas up to a closing sign, which is taken.
    fn list<T>(
        &mut self,
        close: Sign,
        needed: &'static str,
        mut item: impl FnMut(&mut Self) -> Parsed<T>,
    ) -> Parsed<Vec<T>> {
        let mut items = Vec::new();
        let mut height = 0;
        if self.take_sign(close) {
            self.height = height;
            return Ok(items);
        }
        loop {
            items.push(item(self)?);
            height = height.max(self.height);
            if self.take_sign(close) {
                self.height = height;
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

#[cfg(test)]
mod tests {
    use std::time::{Duration, Instant};

    use super::super::{parse, render};
    use super::MAX_HEIGHT;

    fn messages(text: &str) -> Vec<String> {
        parse(text).diagnostics.into_iter().map(|diagnostic| diagnostic.message).collect()
    }

    #[test]
    fn statements_go_on_where_they_must_and_end_where_the_next_begins() {
        let whole = |text: &str, n: usize| {
            let parsed = parse(text);
            assert_eq!(parsed.diagnostics, [], "{text}");
            assert_eq!(parsed.file.statements.len(), n, "{text}");
        };
        whole("minimise if x > 0\n\n  then 1 # one\n  # two\n  else 2\nlet a = 1", 2);
        whole("\u{feff}let a =\r\n  1 +\r\n\t2\r\n\r\nlet b = [1,\r\n2]\r\n", 2);
        whole("let a = 1 # not +\nlet b = 2 + # more\n 3", 2);
        whole("let a = 2*π", 1);

        // An operator or a bracket left over takes its own statement along, and no other.
        let parsed = parse("minimise x +\nshow a = 1\nlet b = (1\nlet c = 2");
        assert_eq!(parsed.file.statements.len(), 2);
        assert_eq!(parsed.diagnostics.len(), 2);
    }

    #[test]
    fn one_slip_is_one_message() {
        assert_eq!(messages("unknown x in [-1, 1"), ["`[` is not closed"]);
        assert_eq!(messages("let a = 1 $ 2"), ["the character '$' has no meaning here"]);
        assert_eq!(messages("title “a b”"), ["`“` is not a sign of the language"]);
        // Of two statements each tells its own.
        assert_eq!(messages("let a = 1 $ 2\nlet b = 1 2").len(), 2);
    }

    /// The tallest trees that are let through, by every way to grow them, are walked and dropped on a test's small stack.
    #[test]
    fn trees_are_bounded_however_they_grow() {
        let chain = |n: usize| " + x".repeat(n);
        let tall =
            |n: usize, links: usize| format!("minimise {}x{}", "(".repeat(n), format!("{})", chain(links)).repeat(n));
        let too_tall = format!("nested more than {MAX_HEIGHT} deep");
        assert_eq!(messages(&tall(190, 2000)), [too_tall.as_str()]);
        assert_eq!(messages(&tall(100, 20)), [too_tall.as_str()]);
        assert_eq!(messages(&format!("minimise x{}", "[1]".repeat(3000))), [too_tall.as_str()]);
        for text in [
            tall(99, 10),
            format!("minimise x{}", chain(MAX_HEIGHT - 1)),
            format!("minimise x{}", "[1]".repeat(MAX_HEIGHT - 1)),
            format!("minimise {}", "x < 1 and ".repeat(990) + "x < 2"),
            format!("minimise {}x{}", "f(".repeat(90), format!("{})", "*x".repeat(10)).repeat(90)),
            format!("minimise {}x{}", "if x > 1 then 1 else ".repeat(90), chain(900)),
        ] {
            let parsed = parse(&text);
            assert_eq!(parsed.diagnostics, [], "{}", &text[..60]);
            assert_eq!(parsed.clone(), parsed);
            crate::language::print(&parsed.file);
            let _ = crate::landscape::check(&parsed.file, &[]);
        }
    }

    #[test]
    fn large_texts_are_read_and_refused_soon() {
        let lines = |line: &str| format!("{line}\n").repeat(100_000);
        let texts = [
            format!("given w = [{}1]", "1.5, ".repeat(200_000)),
            format!("given w = [{}1]", "a_long_name, ".repeat(200_000)),
            lines("0.5,1.5,2.5"),
            lines("let a = (1 $ 2"),
            lines("let"),
            "x ".repeat(500_000),
            "“".repeat(100_000),
        ];
        for text in texts {
            let start = Instant::now();
            let parsed = parse(&text);
            let drawn = render("large.land", &text, &parsed.diagnostics);
            // A second is promised of optimised builds; this bound only tells what grows out of proportion.
            assert!(start.elapsed() < Duration::from_secs(5), "{:.40}: {:?}", text, start.elapsed());
            assert!(drawn.len() < 100_000);
        }
    }
}
