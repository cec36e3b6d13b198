//! Reads programs from text.

use std::fmt;

use crate::landscape::term::{Affine, Index, IndexCondition};
use crate::numbers::operation::{Binary, Relation, Unary};

use super::super::program::{Buffer, BufferId, Instruction, Program, Register, Step};
use super::ROLES;

/// Why a text is not a program.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct ReadError {
    /// The line, from 1.
    pub line: usize,
    /// What is wrong with it.
    pub kind: ReadErrorKind,
}

/// What is wrong with a line.
#[derive(Clone, Debug, PartialEq, Eq)]
pub enum ReadErrorKind {
    /// A word that means nothing here.
    UnknownWord(String),
    /// Something is missing.
    Missing(&'static str),
    /// Something does not read as what it should be.
    Unreadable(String),
    /// Something is left at the end of the line.
    Trailing(String),
    /// An `end` or `otherwise` without its beginning.
    Stray,
    /// A loop or condition that does not end.
    Unended,
}

impl fmt::Display for ReadError {
    fn fmt(&self, out: &mut fmt::Formatter<'_>) -> fmt::Result {
        write!(out, "line {}: ", self.line)?;
        match &self.kind {
            ReadErrorKind::UnknownWord(word) => write!(out, "`{word}` means nothing here"),
            ReadErrorKind::Missing(what) => write!(out, "{what} is missing"),
            ReadErrorKind::Unreadable(text) => write!(out, "`{text}` cannot be read"),
            ReadErrorKind::Trailing(text) => write!(out, "`{text}` is left over"),
            ReadErrorKind::Stray => write!(out, "there is nothing to end"),
            ReadErrorKind::Unended => write!(out, "a loop or condition does not end"),
        }
    }
}

impl std::error::Error for ReadError {}

/// A block that is open: its steps so far, and how it began.
struct Open {
    steps: Vec<Step>,
    head: Head,
}

enum Head {
    Whole,
    Loop(Index, Index, bool),
    Then(IndexCondition),
    Otherwise(IndexCondition, Vec<Step>),
}

/// Reads a program as [`Program`]'s `Display` writes it; `#` begins a comment. The number of registers is one more than
/// the highest.
///
/// # Errors
/// A [`ReadError`] for the first line that cannot be read.
pub fn read(text: &str) -> Result<Program, ReadError> {
    let mut program = Program::default();
    let mut open = vec![Open { steps: Vec::new(), head: Head::Whole }];
    let mut n_lines = 0;
    for (number, line) in text.lines().enumerate() {
        n_lines = number + 1;
        let line = line.split('#').next().unwrap_or("").trim();
        if !line.is_empty() {
            read_line(line, &mut program, &mut open).map_err(|kind| ReadError { line: number + 1, kind })?;
        }
    }
    match (open.pop(), open.is_empty()) {
        (Some(Open { steps, head: Head::Whole }), true) => program.body = steps,
        _ => return Err(ReadError { line: n_lines, kind: ReadErrorKind::Unended }),
    }
    Ok(program)
}

fn read_line(line: &str, program: &mut Program, open: &mut Vec<Open>) -> Result<(), ReadErrorKind> {
    let mut words = Words { rest: line };
    let push = |open: &mut Vec<Open>, step: Step| match open.last_mut() {
        Some(block) => {
            block.steps.push(step);
            Ok(())
        }
        None => Err(ReadErrorKind::Stray),
    };
    let first = words.word("a word")?;
    match first {
        "buffer" => {
            words.word("a buffer")?;
            let name = words.word("a role")?;
            let role = ROLES.iter().find(|entry| entry.0 == name).map(|entry| entry.1);
            let role = role.ok_or_else(|| ReadErrorKind::UnknownWord(name.to_string()))?;
            let length = parse(words.word("a length")?)?;
            program.buffers.push(Buffer { role, length });
        }
        "table" => {
            words.word("a table")?;
            program
                .tables
                .push(std::mem::take(&mut words.rest).split_whitespace().map(parse).collect::<Result<_, _>>()?);
        }
        "lookup" => {
            words.word("a lookup")?;
            program
                .lookups
                .push(std::mem::take(&mut words.rest).split_whitespace().map(parse).collect::<Result<_, _>>()?);
        }
        "loop" => {
            let mut counter = words.word("a counter")?;
            let descending = counter == "descending";
            if descending {
                counter = words.word("a counter")?;
            }
            prefixed(counter, 'i')?;
            let (first, last) = words.rest.split_once("..").ok_or(ReadErrorKind::Missing("a range"))?;
            let head = Head::Loop(whole_index(first)?, whole_index(last)?, descending);
            words.rest = "";
            open.push(Open { steps: Vec::new(), head });
        }
        "when" => {
            let condition = words.condition()?;
            open.push(Open { steps: Vec::new(), head: Head::Then(condition) });
        }
        "otherwise" => match open.pop() {
            Some(Open { steps, head: Head::Then(condition) }) => {
                open.push(Open { steps: Vec::new(), head: Head::Otherwise(condition, steps) });
            }
            _ => return Err(ReadErrorKind::Stray),
        },
        "end" => match open.pop() {
            Some(Open { steps, head: Head::Loop(first, last, descending) }) => {
                push(open, Step::Loop { first, last, descending, body: steps })?;
            }
            Some(Open { steps, head: Head::Otherwise(condition, then) }) => {
                push(open, Step::When { condition, then, otherwise: steps })?;
            }
            _ => return Err(ReadErrorKind::Stray),
        },
        "store" | "accumulate" | "deduct" => {
            let buffer = BufferId(prefixed(words.word("a buffer")?, 'b')?);
            let at = words.index()?;
            let from = words.register()?;
            program.registers = program.registers.max(from.0 + 1);
            push(
                open,
                Step::Do(match first {
                    "store" => Instruction::Store { buffer, at, from },
                    "accumulate" => Instruction::Accumulate { buffer, at, from },
                    _ => Instruction::Deduct { buffer, at, from },
                }),
            )?;
        }
        target => {
            let to = Register(prefixed(target, 'r')?);
            if words.word("`=`")? != "=" {
                return Err(ReadErrorKind::Missing("`=`"));
            }
            let instruction = words.instruction(to)?;
            let highest = instruction.sources().chain([to]).map(|register| register.0 + 1).max().unwrap_or(0);
            program.registers = program.registers.max(highest);
            push(open, Step::Do(instruction))?;
        }
    }
    match words.rest.trim() {
        "" => Ok(()),
        rest => Err(ReadErrorKind::Trailing(rest.to_string())),
    }
}

fn parse<T: std::str::FromStr>(text: &str) -> Result<T, ReadErrorKind> {
    text.parse().map_err(|_| ReadErrorKind::Unreadable(text.to_string()))
}

fn prefixed(text: &str, letter: char) -> Result<u32, ReadErrorKind> {
    match text.strip_prefix(letter) {
        Some(number) => parse(number),
        None => Err(ReadErrorKind::UnknownWord(text.to_string())),
    }
}

fn whole_index(text: &str) -> Result<Index, ReadErrorKind> {
    let mut words = Words { rest: text };
    let index = words.index()?;
    match words.rest.trim() {
        "" => Ok(index),
        rest => Err(ReadErrorKind::Trailing(rest.to_string())),
    }
}

struct Words<'a> {
    rest: &'a str,
}

impl<'a> Words<'a> {
    fn word(&mut self, what: &'static str) -> Result<&'a str, ReadErrorKind> {
        self.rest = self.rest.trim_start();
        let end = self.rest.find(char::is_whitespace).unwrap_or(self.rest.len());
        let (word, rest) = self.rest.split_at(end);
        self.rest = rest;
        if word.is_empty() { Err(ReadErrorKind::Missing(what)) } else { Ok(word) }
    }

    fn register(&mut self) -> Result<Register, ReadErrorKind> {
        Ok(Register(prefixed(self.word("a register")?, 'r')?))
    }

    fn take(&mut self, sign: &str) -> bool {
        let rest = self.rest.trim_start();
        match rest.strip_prefix(sign) {
            Some(rest) => {
                self.rest = rest;
                true
            }
            None => false,
        }
    }

    fn digits(&mut self) -> Option<&'a str> {
        let rest = self.rest.trim_start();
        let end = rest.find(|c: char| !c.is_ascii_digit()).unwrap_or(rest.len());
        let (digits, rest) = rest.split_at(end);
        if digits.is_empty() {
            return None;
        }
        self.rest = rest;
        Some(digits)
    }

    fn index(&mut self) -> Result<Index, ReadErrorKind> {
        if self.take("k") {
            let table = parse(self.digits().ok_or(ReadErrorKind::Missing("a lookup"))?)?;
            if !self.take("[") {
                return Err(ReadErrorKind::Missing("`[`"));
            }
            let at = self.affine()?;
            return if self.take("]") { Ok(Index::Lookup { table, at }) } else { Err(ReadErrorKind::Missing("`]`")) };
        }
        Ok(Index::Affine(self.affine()?))
    }

    fn affine(&mut self) -> Result<Affine, ReadErrorKind> {
        let mut affine = Affine::default();
        let mut sign = if self.take("-") { -1 } else { 1 };
        loop {
            let (factor, counter) = if self.take("i") {
                (1, true)
            } else {
                let size = parse(self.digits().ok_or(ReadErrorKind::Missing("an index"))?)?;
                let counter = self.take("*");
                if counter && !self.take("i") {
                    return Err(ReadErrorKind::Missing("a counter"));
                }
                (size, counter)
            };
            let part = if counter {
                Affine::level(parse(self.digits().ok_or(ReadErrorKind::Missing("a counter"))?)?)
            } else {
                Affine::constant(1)
            };
            affine = affine.plus(&part, sign * factor).ok_or(ReadErrorKind::Missing("a smaller index"))?;
            sign = if self.take("+") {
                1
            } else if self.take("-") {
                -1
            } else {
                return Ok(affine);
            };
        }
    }

    fn condition(&mut self) -> Result<IndexCondition, ReadErrorKind> {
        for word in ["all(", "any(", "not("] {
            if !self.take(word) {
                continue;
            }
            let mut parts = Vec::new();
            while !self.take(")") {
                parts.push(self.condition()?);
                self.take(",");
            }
            return Ok(match (word, parts.pop()) {
                ("not(", Some(part)) => IndexCondition::Not(Box::new(part)),
                ("not(", None) => return Err(ReadErrorKind::Missing("a condition")),
                (word, last) => {
                    parts.extend(last);
                    if word == "all(" { IndexCondition::All(parts) } else { IndexCondition::Any(parts) }
                }
            });
        }
        let left = self.index()?;
        let signs =
            [("<=", Relation::LessOrEqual), ("<", Relation::Less), ("==", Relation::Equal), ("!=", Relation::NotEqual)];
        let relation =
            signs.into_iter().find(|sign| self.take(sign.0)).ok_or(ReadErrorKind::Missing("a comparison"))?.1;
        Ok(IndexCondition::Compare(relation, left, self.index()?))
    }

    fn instruction(&mut self, to: Register) -> Result<Instruction, ReadErrorKind> {
        let word = self.word("an operation")?;
        if let Some(operation) = Unary::from_name(word) {
            return Ok(Instruction::Unary { to, operation, of: self.register()? });
        }
        if let Some(operation) = Binary::from_name(word) {
            return Ok(Instruction::Binary { to, operation, left: self.register()?, right: self.register()? });
        }
        Ok(match word {
            "constant" => Instruction::Constant { to, bits: parse::<f64>(self.word("a number")?)?.to_bits() },
            "number" => Instruction::Number { to, index: self.index()? },
            "table" => Instruction::Table { to, table: prefixed(self.word("a table")?, 't')?, at: self.index()? },
            "load" => {
                Instruction::Load { to, buffer: BufferId(prefixed(self.word("a buffer")?, 'b')?), at: self.index()? }
            }
            "copy" => Instruction::Copy { to, from: self.register()? },
            "power" => Instruction::Power { to, of: self.register()?, exponent: parse(self.word("an exponent")?)? },
            "muladd" => {
                Instruction::MultiplyAdd { to, left: self.register()?, right: self.register()?, plus: self.register()? }
            }
            "select" => {
                let name = self.word("a comparison")?;
                let relation = Relation::from_name(name).ok_or_else(|| ReadErrorKind::UnknownWord(name.to_string()))?;
                let (left, right) = (self.register()?, self.register()?);
                Instruction::Select { to, relation, left, right, then: self.register()?, otherwise: self.register()? }
            }
            _ => return Err(ReadErrorKind::UnknownWord(word.to_string())),
        })
    }
}
