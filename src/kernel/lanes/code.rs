//! The flat code.

use std::collections::HashMap;

use crate::kernel::program::{BufferId, Instruction, Program, Register, Role, Step};
use crate::landscape::term::{Affine, Index, IndexCondition};
use crate::numbers::operation::{Binary, Relation, Unary};

/// A row of memory: fixed, or moved by a cursor.
#[derive(Clone, Copy, Debug, Default)]
pub struct Row {
    /// The row without the cursor.
    pub base: u32,
    /// The cursor whose value is added; cursor 0 is always 0.
    pub cursor: u32,
}

/// What an operation does with its rows.
#[derive(Clone, Copy, Debug)]
pub enum Kind {
    /// `to = number`, in all lanes.
    Fill(f64),
    /// `to = value of the cursor of a`.
    Number,
    /// `to = tables[table][cursor of a]`.
    Table(u32),
    /// `to = a`
    Copy,
    /// `to = operation(a)`
    Unary(Unary),
    /// `to = operation(a, b)`
    Binary(Binary),
    /// `to = a * b + c`, rounded twice.
    MultiplyAdd,
    /// `to = a relation b ? c : d`
    Select(Relation),
    /// Begins a loop.
    Begin(u32),
    /// Ends a turn of a loop.
    End(u32),
    /// Goes on at the place unless the condition holds.
    Unless(u32, u32),
    /// Goes on at the place.
    Jump(u32),
}

/// One operation.
#[derive(Clone, Copy, Debug)]
pub struct Operation {
    /// What it does.
    pub kind: Kind,
    /// The target.
    pub to: Row,
    /// The operands.
    pub from: [Row; 4],
}

/// A loop.
#[derive(Clone, Debug)]
pub struct Loop {
    /// Its first value.
    pub first: Index,
    /// Its last value.
    pub last: Index,
    /// Whether it runs downward.
    pub descending: bool,
    /// How many loops are around it.
    pub depth: usize,
    /// The cursors that it keeps.
    pub cursors: Vec<Cursor>,
    /// The operation behind its end.
    pub exit: u32,
    /// The first operation of its body.
    pub body: u32,
}

/// An index that a loop keeps up to date.
#[derive(Clone, Debug)]
pub struct Cursor {
    /// Its number.
    pub number: u32,
    /// The index.
    pub index: Index,
    /// By how much the affine form moves with each turn.
    pub stride: i64,
}

/// A program as flat code.
#[derive(Clone, Debug)]
pub struct Code {
    /// The operations.
    pub operations: Vec<Operation>,
    /// The loops.
    pub loops: Vec<Loop>,
    /// The index conditions.
    pub conditions: Vec<IndexCondition>,
    /// The cursors outside all loops.
    pub outer: Vec<Cursor>,
    /// How many cursors there are.
    pub n_cursors: usize,
    /// The first row of each buffer.
    pub buffer_rows: Vec<usize>,
    /// How many rows there are.
    pub rows: usize,
    /// How deep the loops nest.
    pub depth: usize,
}

impl Code {
    /// Makes the flat code of a program.
    pub fn new(program: &Program) -> Self {
        let mut buffer_rows = Vec::new();
        let mut rows = program.registers as usize;
        for buffer in &program.buffers {
            buffer_rows.push(rows);
            rows += buffer.length;
        }
        let mut assignments = vec![0_u32; program.registers as usize];
        count_assignments(&program.body, &mut assignments);
        let code = Code {
            operations: Vec::new(),
            loops: Vec::new(),
            conditions: Vec::new(),
            outer: Vec::new(),
            n_cursors: 1,
            buffer_rows,
            rows,
            depth: 0,
        };
        let mut maker = Maker { program, code, assignments, aliases: HashMap::new(), open: Vec::new() };
        maker.block(&program.body);
        maker.code
    }
}

fn count_assignments(steps: &[Step], counts: &mut [u32]) {
    for step in steps {
        match step {
            Step::Do(instruction) => {
                if let Some(to) = instruction.target() {
                    counts[to.0 as usize] += 1;
                }
            }
            Step::Loop { body, .. } => count_assignments(body, counts),
            Step::When { then, otherwise, .. } => {
                count_assignments(then, counts);
                count_assignments(otherwise, counts);
            }
        }
    }
}

struct Maker<'a> {
    program: &'a Program,
    code: Code,
    assignments: Vec<u32>,
    /// Registers that are a row of a read-only buffer and nothing else.
    aliases: HashMap<Register, Row>,
    /// The loops around this place.
    open: Vec<usize>,
}

impl Maker<'_> {
    fn block(&mut self, steps: &[Step]) {
        for step in steps {
            match step {
                Step::Do(instruction) => self.instruction(instruction),
                Step::Loop { first, last, descending, body } => {
                    let number = self.code.loops.len();
                    self.code.loops.push(Loop {
                        first: first.clone(),
                        last: last.clone(),
                        descending: *descending,
                        depth: self.open.len(),
                        cursors: Vec::new(),
                        exit: 0,
                        body: 0,
                    });
                    self.put(Kind::Begin(number as u32), Row::default(), [Row::default(); 4]);
                    self.code.loops[number].body = self.here();
                    self.open.push(number);
                    self.code.depth = self.code.depth.max(self.open.len());
                    self.block(body);
                    self.open.pop();
                    self.put(Kind::End(number as u32), Row::default(), [Row::default(); 4]);
                    self.code.loops[number].exit = self.here();
                }
                Step::When { condition, then, otherwise } => {
                    let number = self.code.conditions.len() as u32;
                    self.code.conditions.push(condition.clone());
                    let branch = self.code.operations.len();
                    self.put(Kind::Unless(number, 0), Row::default(), [Row::default(); 4]);
                    self.block(then);
                    let jump = self.code.operations.len();
                    self.put(Kind::Jump(0), Row::default(), [Row::default(); 4]);
                    self.code.operations[branch].kind = Kind::Unless(number, self.here());
                    self.block(otherwise);
                    self.code.operations[jump].kind = Kind::Jump(self.here());
                }
            }
        }
    }

    fn here(&self) -> u32 {
        self.code.operations.len() as u32
    }

    fn put(&mut self, kind: Kind, to: Row, from: [Row; 4]) {
        self.code.operations.push(Operation { kind, to, from });
    }

    fn row(&self, register: Register) -> Row {
        self.aliases.get(&register).copied().unwrap_or(Row { base: register.0, cursor: 0 })
    }

    /// The cursor of an index in the innermost loop; cursor 0 for a constant, which goes to the base.
    fn place(&mut self, base: usize, at: &Index) -> Row {
        if let Some(constant) = at.constant() {
            return Row { base: (base as i64 + constant) as u32, cursor: 0 };
        }
        let depth = self.open.len();
        let cursors = match self.open.last() {
            Some(&number) => &mut self.code.loops[number].cursors,
            None => &mut self.code.outer,
        };
        if let Some(known) = cursors.iter().find(|cursor| cursor.index == *at) {
            return Row { base: base as u32, cursor: known.number };
        }
        let number = self.code.n_cursors as u32;
        self.code.n_cursors += 1;
        let Affine { factors, .. } = at.affine();
        let stride = factors.iter().find(|factor| factor.0 as usize + 1 == depth).map_or(0, |factor| factor.1);
        cursors.push(Cursor { number, index: at.clone(), stride });
        Row { base: base as u32, cursor: number }
    }

    fn buffer(&mut self, buffer: BufferId, at: &Index) -> Row {
        let base = self.code.buffer_rows[buffer.0 as usize];
        self.place(base, at)
    }

    fn instruction(&mut self, instruction: &Instruction) {
        let none = Row::default();
        let to = instruction.target().map_or(none, |to| Row { base: to.0, cursor: 0 });
        match *instruction {
            Instruction::Constant { bits, .. } => self.put(Kind::Fill(f64::from_bits(bits)), to, [none; 4]),
            Instruction::Number { ref index, .. } => match index.constant() {
                Some(whole) => self.put(Kind::Fill(whole as f64), to, [none; 4]),
                None => {
                    let place = self.place(0, index);
                    self.put(Kind::Number, to, [place, none, none, none]);
                }
            },
            Instruction::Table { table, ref at, .. } => match at.constant() {
                Some(place) => {
                    let value = self.program.tables[table as usize][place as usize];
                    self.put(Kind::Fill(value), to, [none; 4]);
                }
                None => {
                    let place = self.place(0, at);
                    self.put(Kind::Table(table), to, [place, none, none, none]);
                }
            },
            Instruction::Load { to: target, buffer, ref at } => {
                let row = self.buffer(buffer, at);
                let role = self.program.buffers[buffer.0 as usize].role;
                let fixed = matches!(role, Role::Unknowns | Role::Direction);
                if fixed && self.assignments[target.0 as usize] == 1 {
                    self.aliases.insert(target, row);
                } else {
                    self.put(Kind::Copy, to, [row, none, none, none]);
                }
            }
            Instruction::Store { buffer, ref at, from } => {
                let (row, from) = (self.buffer(buffer, at), self.row(from));
                self.put(Kind::Copy, row, [from, none, none, none]);
            }
            Instruction::Accumulate { buffer, ref at, from } => {
                let (row, from) = (self.buffer(buffer, at), self.row(from));
                self.put(Kind::Binary(Binary::Add), row, [row, from, none, none]);
            }
            Instruction::Deduct { buffer, ref at, from } => {
                let (row, from) = (self.buffer(buffer, at), self.row(from));
                self.put(Kind::Binary(Binary::Subtract), row, [row, from, none, none]);
            }
            Instruction::Copy { from, .. } => {
                let from = self.row(from);
                self.put(Kind::Copy, to, [from, none, none, none]);
            }
            Instruction::Unary { operation, of, .. } => {
                let of = self.row(of);
                self.put(Kind::Unary(operation), to, [of, none, none, none]);
            }
            Instruction::Binary { operation, left, right, .. } => {
                let (left, right) = (self.row(left), self.row(right));
                self.put(Kind::Binary(operation), to, [left, right, none, none]);
            }
            Instruction::MultiplyAdd { left, right, plus, .. } => {
                let (left, right, plus) = (self.row(left), self.row(right), self.row(plus));
                self.put(Kind::MultiplyAdd, to, [left, right, plus, none]);
            }
            Instruction::Select { relation, left, right, then, otherwise, .. } => {
                let from = [left, right, then, otherwise].map(|register| self.row(register));
                self.put(Kind::Select(relation), to, from);
            }
            // A verified program has none.
            Instruction::Power { .. } => {}
        }
    }
}
