//! From text to words and signs; finds where statements end.
//!
//! A statement ends with its line unless a bracket is open or the line ends in an operator, a comma or a word that
//! wants more. Brackets are therefore matched here: one that is never closed would otherwise swallow the file, so an
//! open bracket ends at a line that begins with a word of a statement (`let`, `unknown`, …), which cannot stand inside.

use super::diagnostic::{Diagnostic, Span};
use super::mistake::Mistake;
use super::token::{CONTINUING_WORDS, Sign, Token, TokenKind};

/// The words that begin a statement.
pub const STATEMENT_WORDS: [&str; 11] =
    ["title", "given", "unknown", "let", "require", "minimise", "minimize", "maximise", "maximize", "alike", "show"];

/// Brackets nested deeper than this are refused, so that no later stage runs out of stack.
pub const MAX_DEPTH: usize = 200;

/// Characters that word processors and papers use, with what the language has for them.
const FANCY: [(char, &str); 12] = [
    ('−', "-"),
    ('–', "-"),
    ('—', "-"),
    ('×', "*"),
    ('·', "*"),
    ('÷', "/"),
    ('≤', "<="),
    ('≥', ">="),
    ('≠', "!="),
    ('“', "\""),
    ('”', "\""),
    ('…', ".."),
];

/// Signs of other notations, with what the language has for them; longer ones first.
const FOREIGN: [(&str, &str); 8] =
    [("**", "^"), ("&&", "and"), ("||", "or"), (":=", "="), ("<>", "!="), ("=<", "<="), ("=>", ">="), ("!", "not")];

/// The tokens of a text, and what was wrong with it. Every statement ends in a [`TokenKind::LineEnd`].
pub fn lex(text: &str, diagnostics: &mut Vec<Diagnostic>) -> Vec<Token> {
    let start = if text.starts_with('\u{feff}') { '\u{feff}'.len_utf8() } else { 0 };
    let mut lexer = Lexer { text, place: start, tokens: Vec::new(), open: Vec::new(), diagnostics };
    lexer.run();
    lexer.tokens
}

struct Lexer<'a> {
    text: &'a str,
    place: usize,
    tokens: Vec<Token>,
    open: Vec<(char, Span)>,
    diagnostics: &'a mut Vec<Diagnostic>,
}

impl Lexer<'_> {
    fn run(&mut self) {
        while let Some(character) = self.rest().chars().next() {
            let start = self.place;
            match character {
                '\n' => {
                    self.place += 1;
                    self.end_line(start);
                }
                '#' => self.place += self.rest().find('\n').unwrap_or(self.rest().len()),
                ' ' | '\t' | '\r' | '\u{a0}' => self.place += character.len_utf8(),
                '"' => self.text(),
                '0'..='9' => self.number(),
                '.' if self.rest()[1..].starts_with(|next: char| next.is_ascii_digit()) => self.number(),
                _ if character.is_alphabetic() || character == '_' => self.word(),
                _ => self.sign(character),
            }
        }
        self.close_all();
        let end = self.text.len();
        self.push(TokenKind::LineEnd, end, end);
    }

    fn rest(&self) -> &str {
        &self.text[self.place..]
    }

    fn push(&mut self, kind: TokenKind, start: usize, end: usize) {
        self.tokens.push(Token { kind, span: Span::new(start..end) });
    }

    fn refuse(&mut self, mistake: Mistake, start: usize, end: usize) {
        self.diagnostics.push(mistake.at(Span::new(start..end)));
    }

    fn end_line(&mut self, start: usize) {
        let continues = match self.tokens.last().map(|token| &token.kind) {
            Some(TokenKind::Sign(sign)) => sign.continues(),
            Some(TokenKind::Word(word)) => CONTINUING_WORDS.contains(&word.as_str()),
            _ => false,
        };
        if self.open.is_empty() && !continues {
            self.push(TokenKind::LineEnd, start, start + 1);
        }
    }

    fn word(&mut self) {
        let start = self.place;
        let length = self.rest().find(|c: char| !(c.is_alphanumeric() || c == '_')).unwrap_or(self.rest().len());
        self.place += length;
        let word = &self.text[start..self.place];
        let first_of_line = self.text[..start].rsplit('\n').next().is_some_and(|before| before.trim().is_empty());
        if first_of_line && !self.open.is_empty() && STATEMENT_WORDS.contains(&word) {
            self.close_all();
            self.push(TokenKind::LineEnd, start, start);
        }
        let word = word.to_string();
        self.push(TokenKind::Word(word), start, self.place);
    }

    /// Digits, a point that is not the first of `..`, more digits, an exponent.
    fn number(&mut self) {
        let start = self.place;
        let bytes = self.text.as_bytes();
        let digits = |mut place: usize| {
            while bytes.get(place).is_some_and(u8::is_ascii_digit) {
                place += 1;
            }
            place
        };
        let mut end = digits(start);
        if bytes.get(end) == Some(&b'.') && bytes.get(end + 1) != Some(&b'.') {
            end = digits(end + 1);
        }
        if matches!(bytes.get(end), Some(b'e' | b'E')) {
            let sign = usize::from(matches!(bytes.get(end + 1), Some(b'+' | b'-')));
            let exponent = digits(end + 1 + sign);
            if exponent > end + 1 + sign {
                end = exponent;
            }
        }
        // A name glued to a number (`2x`) is one mistake, not a number and a name.
        let glued =
            self.text[end..].find(|c: char| !(c.is_alphanumeric() || c == '_')).unwrap_or(self.text.len() - end);
        self.place = end + glued;
        let written = &self.text[start..self.place];
        match written.parse::<f64>() {
            Ok(number) if glued == 0 && number.is_finite() => self.push(TokenKind::Number(number), start, end),
            Ok(_) if glued == 0 => {
                self.refuse(Mistake::HugeNumber(written.to_string()), start, end);
                self.push(TokenKind::Number(1.0), start, end);
            }
            _ => {
                self.refuse(Mistake::BadNumber(written.to_string()), start, self.place);
                self.push(TokenKind::Number(1.0), start, self.place);
            }
        }
    }

    fn text(&mut self) {
        let start = self.place;
        let inside = &self.text[start + 1..];
        let line = inside.split('\n').next().unwrap_or("");
        match line.find('"') {
            Some(length) => {
                self.place = start + length + 2;
                self.push(TokenKind::Text(line[..length].to_string()), start, self.place);
            }
            None => {
                self.place = start + 1 + line.len();
                self.refuse(Mistake::OpenText, start, self.place);
                self.push(TokenKind::Text(line.trim_end().to_string()), start, self.place);
            }
        }
    }

    fn sign(&mut self, character: char) {
        let start = self.place;
        let rest = self.rest();
        let known = Sign::WRITTEN.iter().find(|entry| rest.starts_with(entry.0));
        let foreign = FOREIGN.iter().find(|entry| rest.starts_with(entry.0));
        let fancy = FANCY.iter().find(|entry| entry.0 == character);
        match (foreign, known, fancy) {
            // `!=` and `<=` are known and begin like foreign signs; the longer match counts.
            (Some(&(found, plain)), known, _) if known.is_none_or(|known| known.0.len() < found.len()) => {
                self.place += found.len();
                self.refuse(Mistake::ForeignSign(found, plain), start, self.place);
                self.stand_in(plain, start);
            }
            (_, Some(&(written, sign)), _) => {
                self.place += written.len();
                self.bracket(sign, start);
                self.push(TokenKind::Sign(sign), start, self.place);
            }
            (_, None, Some(&(_, plain))) => {
                self.place += character.len_utf8();
                self.refuse(Mistake::FancyCharacter(character, plain), start, self.place);
                self.stand_in(plain, start);
            }
            _ => {
                self.place += character.len_utf8();
                self.refuse(Mistake::UnknownCharacter(character), start, self.place);
            }
        }
    }

    /// Goes on as if the plain sign or word had been written, so that one slip is one message.
    fn stand_in(&mut self, plain: &str, start: usize) {
        let end = self.place;
        if let Some(entry) = Sign::WRITTEN.iter().find(|entry| entry.0 == plain) {
            self.push(TokenKind::Sign(entry.1), start, end);
        } else if plain != "\"" {
            self.push(TokenKind::Word(plain.to_string()), start, end);
        }
    }

    fn bracket(&mut self, sign: Sign, start: usize) {
        let span = Span::new(start..start + 1);
        let (open, close) = match sign {
            Sign::OpenRound | Sign::OpenSquare | Sign::OpenCurly => {
                let open = sign.written().chars().next().unwrap_or('(');
                self.open.push((open, span));
                if self.open.len() == MAX_DEPTH + 1 {
                    self.diagnostics.push(Mistake::TooDeep(MAX_DEPTH).at(span));
                }
                return;
            }
            Sign::CloseRound => ('(', ')'),
            Sign::CloseSquare => ('[', ']'),
            Sign::CloseCurly => ('{', '}'),
            _ => return,
        };
        match self.open.pop() {
            None => self.diagnostics.push(Mistake::StrayBracket(close).at(span)),
            Some((opened, _)) if opened == open => {}
            Some((opened, place)) => {
                self.diagnostics.push(Mistake::CrossedBrackets { open: opened, opened: place, close }.at(span));
            }
        }
    }

    fn close_all(&mut self) {
        // The innermost is the one to mend; those around it are usually closed once it is.
        if let Some((open, span)) = self.open.pop() {
            self.diagnostics.push(Mistake::OpenBracket(open).at(span));
        }
        self.open.clear();
    }
}
