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

/// Longer names are refused: messages repeat names, and the search for what a misspelt one meant takes the square of
/// its length.
pub const MAX_LETTERS: usize = 200;

/// Characters that word processors and papers use, with what the language has for them.
const FANCY: &[(char, &str)] = &[
    ('−', "-"),
    ('–', "-"),
    ('—', "-"),
    ('×', "*"),
    ('·', "*"),
    ('÷', "/"),
    ('≤', "<="),
    ('≥', ">="),
    ('≠', "!="),
    ('∗', "*"),
    ('⋅', "*"),
    ('∙', "*"),
    ('⁄', "/"),
    ('∕', "/"),
    ('“', "\""),
    ('”', "\""),
    ('…', ".."),
    ('∞', "inf"),
    ('∈', "in"),
    ('∧', "and"),
    ('∨', "or"),
    ('¬', "not"),
    ('√', "sqrt"),
    ('∑', "sum"),
    ('⁰', "^0"),
    ('¹', "^1"),
    ('²', "^2"),
    ('³', "^3"),
    ('⁴', "^4"),
    ('⁵', "^5"),
    ('⁶', "^6"),
    ('⁷', "^7"),
    ('⁸', "^8"),
    ('⁹', "^9"),
    ('₀', "_0"),
    ('₁', "_1"),
    ('₂', "_2"),
    ('₃', "_3"),
    ('₄', "_4"),
    ('₅', "_5"),
    ('₆', "_6"),
    ('₇', "_7"),
    ('₈', "_8"),
    ('₉', "_9"),
];

/// Signs of other notations, with what the language has for them; longer ones first.
const FOREIGN: [(&str, &str); 8] =
    [("**", "^"), ("&&", "and"), ("||", "or"), (":=", "="), ("<>", "!="), ("=<", "<="), ("=>", ">="), ("!", "not")];

/// What the lexer made of a text.
pub struct Lexed {
    /// The tokens. Every statement ends in a [`TokenKind::LineEnd`].
    pub tokens: Vec<Token>,
    /// Places, ascending, of mistakes that leave open what was meant: what a parser says of their statements is a guess.
    pub doubts: Vec<u32>,
}

/// Whether a character may stand in a name behind its first letter. Digits of other kinds (`²`, `₁`) may not: they would
/// make names of what was meant as a power or an index.
fn is_of_name(character: char) -> bool {
    character.is_alphabetic() || character.is_ascii_digit() || character == '_'
}

/// Characters that a terminal obeys rather than shows: controls, and marks that change the direction of writing.
pub fn is_unseen(character: char) -> bool {
    character.is_control()
        || matches!(character, '\u{200b}'..='\u{200f}' | '\u{2028}'..='\u{202e}' | '\u{2066}'..='\u{2069}')
}

/// The tokens of a text; what was wrong with it joins the diagnostics.
pub fn lex(text: &str, diagnostics: &mut Vec<Diagnostic>) -> Lexed {
    let start = if text.starts_with('\u{feff}') { '\u{feff}'.len_utf8() } else { 0 };
    let mut lexer = Lexer { text, place: start, tokens: Vec::new(), open: Vec::new(), doubts: Vec::new(), diagnostics };
    lexer.run();
    lexer.doubts.sort_unstable();
    Lexed { tokens: lexer.tokens, doubts: lexer.doubts }
}

struct Lexer<'a> {
    text: &'a str,
    place: usize,
    tokens: Vec<Token>,
    open: Vec<(char, Span)>,
    doubts: Vec<u32>,
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
                '"' => self.text('"'),
                '“' => {
                    self.refuse(Mistake::FancyCharacter('“', "\""), start, start + '“'.len_utf8());
                    self.text('”');
                }
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

    /// The same for a mistake that leaves open what was meant.
    fn doubt(&mut self, mistake: Mistake, span: Span) {
        self.doubts.push(span.start);
        self.diagnostics.push(mistake.at(span));
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
        let length = self.rest().find(|c: char| !is_of_name(c)).unwrap_or(self.rest().len());
        self.place += length;
        let word = &self.text[start..self.place];
        // Neither an open bracket nor an operator at the end of the line before reaches over the next statement.
        if STATEMENT_WORDS.contains(&word) {
            let first_of_line = self.text[..start].rsplit('\n').next().is_some_and(|before| before.trim().is_empty());
            if first_of_line && self.tokens.last().is_some_and(|token| token.kind != TokenKind::LineEnd) {
                self.close_all();
                self.push(TokenKind::LineEnd, start, start);
            }
        }
        let letters = word.chars().count();
        if letters > MAX_LETTERS {
            let kept: String = word.chars().take(MAX_LETTERS).collect();
            self.refuse(Mistake::LongName(letters), start, self.place);
            return self.push(TokenKind::Word(kept), start, self.place);
        }
        // What a reader of mathematics expects.
        let word = if word == "π" { "pi".to_string() } else { word.to_string() };
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
        let mut stop = end;
        loop {
            let glued = self.text[stop..].find(|c: char| !is_of_name(c)).unwrap_or(self.text.len() - stop);
            stop += glued;
            // So is a number with two points; `1..3` is a range.
            if bytes.get(stop) != Some(&b'.') || !bytes.get(stop + 1).is_some_and(u8::is_ascii_digit) {
                break;
            }
            stop += 1;
        }
        let glued = stop - end;
        self.place = stop;
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

    fn text(&mut self, close: char) {
        let start = self.place;
        let first = start + self.rest().chars().next().map_or(0, char::len_utf8);
        let line = self.text[first..].split('\n').next().unwrap_or("");
        let inside = match line.find(['"', close]) {
            Some(length) => {
                let inside = &line[..length];
                self.place = first + length + line[length..].chars().next().map_or(0, char::len_utf8);
                inside
            }
            None => {
                let inside = line.trim_end();
                self.place = first + inside.len();
                self.refuse(Mistake::OpenText, start, self.place);
                inside
            }
        };
        // Texts are shown by reports and terminals later.
        if let Some((at, unseen)) = inside.char_indices().find(|&(_, character)| is_unseen(character)) {
            self.refuse(Mistake::UnknownCharacter(unseen), first + at, first + at + unseen.len_utf8());
        }
        self.push(TokenKind::Text(inside.to_string()), start, self.place);
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
                self.doubt(Mistake::UnknownCharacter(character), Span::new(start..self.place));
                if character == ';' && self.open.is_empty() {
                    self.push(TokenKind::LineEnd, start, self.place);
                }
            }
        }
    }

    /// Goes on as if the plain sign or word had been written, so that one slip is one message.
    fn stand_in(&mut self, plain: &str, start: usize) {
        let end = self.place;
        if let Some(entry) = Sign::WRITTEN.iter().find(|entry| entry.0 == plain) {
            self.push(TokenKind::Sign(entry.1), start, end);
        } else if let Some(digit) = plain.strip_prefix('^') {
            self.push(TokenKind::Sign(Sign::Power), start, end);
            self.push(TokenKind::Number(digit.parse().unwrap_or(1.0)), start, end);
        } else if plain.starts_with(char::is_alphabetic) {
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
            None => self.doubt(Mistake::StrayBracket(close), span),
            Some((opened, _)) if opened == open => {}
            Some((opened, place)) => {
                self.doubt(Mistake::CrossedBrackets { open: opened, opened: place, close }, span);
            }
        }
    }

    fn close_all(&mut self) {
        // The innermost is the one to mend; those around it are usually closed once it is.
        if let Some((open, span)) = self.open.pop() {
            self.doubt(Mistake::OpenBracket(open), span);
        }
        self.open.clear();
    }
}
