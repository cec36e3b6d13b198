//! The flat code.

use std::collections::{BTreeMap, HashMap, HashSet};

use crate::kernel::program::{BufferId, Instruction, Program, Register, Role, Step};
use crate::landscape::term::{Affine, Index, IndexCondition};
use crate::numbers::operation::{Binary, Unary};

use super::compound::{Standing, can_pair, join, temporaries, widen};
use super::lives::live_behind_loops;

/// The place of a pointer to a row.
pub type Pointer = u32;

/// What an operation does with its rows.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
#[repr(u8)]
pub enum Kind {
    /// `to = numbers[extra]`, in all lanes.
    Fill,
    /// `to = the counter's index number extra`.
    Number,
    /// `to = tables[..]` at a moving place, number `extra`.
    Table,
    /// `to = a`
    Copy,
    /// `to = a + b`
    Add,
    /// `to = a - b`
    Subtract,
    /// `to = a * b`
    Multiply,
    /// `to = a * b + c`, rounded twice.
    MultiplyAdd,
    /// `to = 1 / a`
    Reciprocal,
    /// `to = -a`
    Negate,
    /// `to = sqrt(a)`
    SquareRoot,
    /// `to = Unary::ALL[extra](a)`
    Unary,
    /// `to = Binary::ALL[extra](a, b)`
    Binary,
    /// `to = a Relation::ALL[extra] b ? c : d`
    Select,
    /// `t = a * b; to = to + t; c = c - t`, each rounded.
    Spread,
    /// `to = a - b; c = to * to`, each rounded.
    Square,
    /// `to = a - b; c = to * to + d`, each rounded.
    SquareAdd,
    /// `to = c + (a - b)`, each rounded.
    AddDifference,
    /// `to = c + (d - a * b)`, each rounded.
    AddLessProduct,
    /// `to = 1 / a; c = to * to`, each rounded.
    ReciprocalSquare,
    /// `to = a * a; c = a * to`, each rounded.
    SquareProduct,
    /// A square and two added squares, those of the distance of two points: differences and sum as `wides[extra]` says.
    Distance,
    /// Three spreads, those of the slopes of a distance, as `wides[extra]` says.
    SpreadThree,
    /// Begins loop `extra`.
    Begin,
    /// Ends two turns of loop `extra`.
    EndPair,
    /// Ends a turn of loop `extra`.
    End,
    /// Goes on at the target of branch `extra` unless its condition holds.
    Unless,
    /// Goes on at operation `extra`.
    Jump,
}

/// One operation.
#[derive(Clone, Copy, Debug)]
pub struct Operation {
    /// What it does.
    pub kind: Kind,
    /// The target.
    pub to: Pointer,
    /// The operands.
    pub from: [Pointer; 4],
    /// A number whose meaning depends on the kind.
    pub extra: u32,
    /// Whether the next operation is the same for the other of two turns.
    pub twin: bool,
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
    /// Those of the cursors that only move a pointer by so many rows with each turn.
    pub steps: Vec<(Pointer, isize)>,
    /// The others, which are worked out or are places.
    pub others: Vec<Cursor>,
    /// The pointers of both turns side by side, with the rows of two turns.
    pub pair_steps: Vec<(Pointer, isize)>,
    /// The pointers of the first and of the second of two turns side by side, and the rows between them.
    pub second: Vec<(Pointer, Pointer, isize)>,
    /// The operation behind its end.
    pub exit: u32,
    /// The first operation of its body.
    pub body: u32,
    /// The first operation of its body for two turns, if it has one.
    pub pair: Option<u32>,
}

impl Operation {
    /// The pointers whose rows it reads.
    pub fn reads(&self) -> Vec<Pointer> {
        let [a, b, c, d] = self.from;
        match self.kind {
            // Wide operations are formed when nobody asks any more.
            Kind::Distance | Kind::SpreadThree => Vec::new(),
            Kind::Fill
            | Kind::Number
            | Kind::Table
            | Kind::Begin
            | Kind::End
            | Kind::EndPair
            | Kind::Unless
            | Kind::Jump => Vec::new(),
            Kind::Copy
            | Kind::Reciprocal
            | Kind::ReciprocalSquare
            | Kind::SquareProduct
            | Kind::Negate
            | Kind::SquareRoot
            | Kind::Unary => vec![a],
            Kind::Add | Kind::Subtract | Kind::Multiply | Kind::Binary | Kind::Square => vec![a, b],
            Kind::MultiplyAdd | Kind::AddDifference => vec![a, b, c],
            Kind::Spread => vec![a, b, c, self.to],
            Kind::SquareAdd => vec![a, b, d],
            Kind::Select | Kind::AddLessProduct => vec![a, b, c, d],
        }
    }

    /// The pointers whose rows it writes.
    pub fn writes(&self) -> Vec<Pointer> {
        match self.kind {
            Kind::Begin | Kind::End | Kind::EndPair | Kind::Unless | Kind::Jump => Vec::new(),
            Kind::Spread | Kind::Square | Kind::SquareAdd | Kind::ReciprocalSquare | Kind::SquareProduct => {
                vec![self.to, self.from[2]]
            }
            _ => vec![self.to],
        }
    }

    /// The same with other pointers.
    fn with_pointers(&self, rename: impl Fn(Pointer) -> Pointer) -> Self {
        Operation { to: rename(self.to), from: self.from.map(&rename), ..*self }
    }
}

/// A pointer or a place that a loop keeps up to date.
#[derive(Clone, Debug)]
pub struct Cursor {
    /// What it moves.
    pub moves: Moves,
    /// The index.
    pub index: Index,
    /// By how much the index moves with each turn; `None` where it is looked up, and worked out each time.
    pub stride: Option<i64>,
}

/// What a cursor moves.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Moves {
    /// A pointer to the row at the index behind a first row.
    Pointer(Pointer, usize),
    /// Place number so much of [`super::run::State`]'s places, with what stands there.
    Place(u32),
}

/// A branch on an index condition.
#[derive(Clone, Debug)]
pub struct Branch {
    /// The condition.
    pub condition: IndexCondition,
    /// The operation to go on at where it does not hold.
    pub otherwise: u32,
}

/// A program as flat code.
#[derive(Clone, Debug)]
pub struct Code {
    /// The operations.
    pub operations: Vec<Operation>,
    /// The loops.
    pub loops: Vec<Loop>,
    /// The branches.
    pub branches: Vec<Branch>,
    /// Pointers of operations that have many: for a distance `a, b, difference` three times, then the sum; for three
    /// spreads `a, b, sum, row` three times.
    pub wides: Vec<[Pointer; 12]>,
    /// Numbers that rows are filled with.
    pub numbers: Vec<f64>,
    /// The row that each pointer points to at the start.
    pub pointers: Vec<usize>,
    /// For each moving place: the table that it is a place of, if it is not a number itself.
    pub places: Vec<Option<u32>>,
    /// The first row of each buffer.
    pub buffer_rows: Vec<usize>,
    /// How many rows there are.
    pub rows: usize,
    /// How deep the loops nest.
    pub depth: usize,
}

impl Code {
    /// Makes the flat code of a program; `None` for one that needs more than 2^32 pointers.
    pub fn new(program: &Program) -> Option<Self> {
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
            branches: Vec::new(),
            wides: Vec::new(),
            numbers: Vec::new(),
            pointers: Vec::new(),
            places: Vec::new(),
            buffer_rows,
            rows,
            depth: 0,
        };
        let mut maker = Maker {
            program,
            code,
            assignments,
            live_behind: live_behind_loops(program),
            aliases: HashMap::new(),
            fixed: HashMap::new(),
            open: Vec::new(),
        };
        maker.block(&program.body)?;
        Some(maker.code)
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
    /// For each loop, the registers that are read behind it.
    live_behind: Vec<HashSet<Register>>,
    /// Registers that are a row of a read-only buffer and nothing else.
    aliases: HashMap<Register, Pointer>,
    /// Pointers to rows that do not move.
    fixed: HashMap<usize, Pointer>,
    /// The loops around this place.
    open: Vec<usize>,
}

impl Maker<'_> {
    fn block(&mut self, steps: &[Step]) -> Option<()> {
        for step in steps {
            match step {
                Step::Do(instruction) => self.instruction(instruction)?,
                Step::Loop { first, last, descending, body } => {
                    let number = self.code.loops.len();
                    self.code.loops.push(Loop {
                        first: first.clone(),
                        last: last.clone(),
                        descending: *descending,
                        depth: self.open.len(),
                        cursors: Vec::new(),
                        steps: Vec::new(),
                        others: Vec::new(),
                        pair_steps: Vec::new(),
                        second: Vec::new(),
                        exit: 0,
                        body: 0,
                        pair: None,
                    });
                    self.put(Kind::Begin, 0, [0; 4], number as u32);
                    self.code.loops[number].body = self.here();
                    self.open.push(number);
                    self.code.depth = self.code.depth.max(self.open.len());
                    self.block(body)?;
                    if body.iter().all(|step| matches!(step, Step::Do(_))) {
                        self.refine(number)?;
                    }
                    self.open.pop();
                    let scope = &mut self.code.loops[number];
                    for cursor in &scope.cursors {
                        match (cursor.moves, cursor.stride) {
                            (Moves::Pointer(pointer, _), Some(stride)) => {
                                let way = if scope.descending { -1 } else { 1 };
                                scope.steps.push((pointer, stride.wrapping_mul(way) as isize));
                            }
                            _ => scope.others.push(cursor.clone()),
                        }
                    }
                    for &(first, second, rows) in &scope.second {
                        let two = rows.wrapping_mul(2);
                        scope.pair_steps.extend([(first, two), (second, two)]);
                    }
                    self.put(Kind::End, 0, [0; 4], number as u32);
                    self.code.loops[number].exit = self.here();
                }
                Step::When { condition, then, otherwise } => {
                    let branch = self.code.branches.len();
                    self.code.branches.push(Branch { condition: condition.clone(), otherwise: 0 });
                    self.put(Kind::Unless, 0, [0; 4], branch as u32);
                    self.block(then)?;
                    let jump = self.code.operations.len();
                    self.put(Kind::Jump, 0, [0; 4], 0);
                    self.code.branches[branch].otherwise = self.here();
                    self.block(otherwise)?;
                    self.code.operations[jump].extra = self.here();
                }
            }
        }
        Some(())
    }

    /// Makes the body of an innermost loop faster: compound operations, and two turns side by side where that is safe.
    fn refine(&mut self, number: usize) -> Option<()> {
        let plain = self.code.operations.split_off(self.code.loops[number].body as usize);
        let n_registers = self.program.registers as usize;
        let pointers = self.code.pointers.clone();
        let behind = &self.live_behind[number];
        let temporary = temporaries(&plain, |pointer| {
            let row = pointers[pointer as usize];
            row < n_registers && !behind.contains(&Register(row as u32))
        });
        let scope = &self.code.loops[number];
        let mut standing = BTreeMap::new();
        let mut plain_cursors = !scope.descending;
        for cursor in &scope.cursors {
            match (cursor.moves, cursor.stride, &cursor.index) {
                (Moves::Pointer(pointer, first), Some(stride), Index::Affine(row)) => {
                    drop(standing.insert(pointer, Standing { first, row: row.clone(), stride }));
                }
                _ => plain_cursors = false,
            }
        }
        let buffer_of = |pointer: Pointer| {
            let row = pointers[pointer as usize];
            self.code.buffer_rows.partition_point(|&first| first <= row)
        };
        let is_moving = |pointer: Pointer| {
            let moves = |cursor: &Cursor| matches!(cursor.moves, Moves::Pointer(moved, _) if moved == pointer);
            scope.cursors.iter().any(moves)
        };
        // Rows that are never the same in one turn.
        let apart = |a: Pointer, b: Pointer| {
            buffer_of(a) != buffer_of(b)
                || match (standing.get(&a), standing.get(&b)) {
                    (Some(a), Some(b)) => a.row.factors == b.row.factors && a.row.constant != b.row.constant,
                    _ => !is_moving(a) && !is_moving(b) && a != b,
                }
        };
        let single = join(&plain, &temporary, &apart);
        if plain_cursors && can_pair(&single, &temporary, &standing) {
            let mut renamed = BTreeMap::new();
            for &pointer in &temporary {
                self.code.rows += 1;
                let row = self.code.rows - 1;
                renamed.insert(pointer, self.new_pointer(row)?);
            }
            for cursor in self.code.loops[number].cursors.clone() {
                let (Moves::Pointer(pointer, first), Some(stride)) = (cursor.moves, cursor.stride) else { continue };
                let other = self.new_pointer(first)?;
                renamed.insert(pointer, other);
                self.code.loops[number].second.push((pointer, other, stride as isize));
            }
            let rename = |pointer: Pointer| renamed.get(&pointer).copied().unwrap_or(pointer);
            self.code.loops[number].pair = Some(self.here());
            let renamed: Vec<Operation> = single.iter().map(|operation| operation.with_pointers(rename)).collect();
            let others = temporary.iter().map(|&pointer| rename(pointer)).collect();
            let firsts = widen(&single, &temporary, &mut self.code.wides);
            let seconds = widen(&renamed, &others, &mut self.code.wides);
            for (first, second) in firsts.into_iter().zip(seconds) {
                self.code.operations.push(Operation { twin: true, ..first });
                self.code.operations.push(second);
            }
            self.put(Kind::EndPair, 0, [0; 4], number as u32);
            self.code.loops[number].body = self.here();
        }
        let single = widen(&single, &temporary, &mut self.code.wides);
        self.code.operations.extend(single);
        Some(())
    }

    fn here(&self) -> u32 {
        self.code.operations.len() as u32
    }

    fn put(&mut self, kind: Kind, to: Pointer, from: [Pointer; 4], extra: u32) {
        self.code.operations.push(Operation { kind, to, from, extra, twin: false });
    }

    fn new_pointer(&mut self, row: usize) -> Option<Pointer> {
        self.code.pointers.push(row);
        Pointer::try_from(self.code.pointers.len() - 1).ok()
    }

    fn fixed(&mut self, row: usize) -> Option<Pointer> {
        if let Some(&known) = self.fixed.get(&row) {
            return Some(known);
        }
        let pointer = self.new_pointer(row)?;
        self.fixed.insert(row, pointer);
        Some(pointer)
    }

    fn register(&mut self, register: Register) -> Option<Pointer> {
        match self.aliases.get(&register) {
            Some(&alias) => Some(alias),
            None => self.fixed(register.0 as usize),
        }
    }

    /// The whole number that an index is, if no counter is in it. One that looks up a place which is not there stands
    /// where no run gets; the verifier has shown it.
    fn constant(&self, index: &Index) -> Option<i64> {
        match index {
            Index::Lookup { table, at } if at.factors.is_empty() => {
                let values = &self.program.lookups[*table as usize];
                Some(usize::try_from(at.constant).ok().and_then(|place| values.get(place)).copied().unwrap_or(0))
            }
            _ => index.constant(),
        }
    }

    /// The pointer to a row of a buffer, kept by the innermost loop where it moves.
    fn buffer(&mut self, buffer: BufferId, at: &Index) -> Option<Pointer> {
        let first = self.code.buffer_rows[buffer.0 as usize];
        let Some(&number) = self.open.last().filter(|_| self.constant(at).is_none()) else {
            // Outside only where no run gets; the verifier has shown it.
            let row = self.constant(at).unwrap_or(0).clamp(0, self.program.buffers[buffer.0 as usize].length as i64);
            return self.fixed(first + row as usize);
        };
        for cursor in &self.code.loops[number].cursors {
            if let Moves::Pointer(pointer, row) = cursor.moves
                && row == first
                && cursor.index == *at
            {
                return Some(pointer);
            }
        }
        let pointer = self.new_pointer(first)?;
        self.keep(number, Moves::Pointer(pointer, first), at);
        Some(pointer)
    }

    /// The number of a moving place.
    fn place(&mut self, table: Option<u32>, at: &Index) -> u32 {
        self.code.places.push(table);
        let place = self.code.places.len() as u32 - 1;
        // An index that is not constant has a loop around it.
        if let Some(&number) = self.open.last() {
            self.keep(number, Moves::Place(place), at);
        }
        place
    }

    fn keep(&mut self, number: usize, moves: Moves, at: &Index) {
        let depth = self.open.len();
        let stride = match at {
            Index::Lookup { .. } => None,
            Index::Affine(Affine { factors, .. }) => {
                Some(factors.iter().find(|factor| factor.0 as usize + 1 == depth).map_or(0, |factor| factor.1))
            }
        };
        self.code.loops[number].cursors.push(Cursor { moves, index: at.clone(), stride });
    }

    fn fill(&mut self, to: Pointer, value: f64) {
        self.code.numbers.push(value);
        self.put(Kind::Fill, to, [0; 4], self.code.numbers.len() as u32 - 1);
    }

    fn instruction(&mut self, instruction: &Instruction) -> Option<()> {
        if let Instruction::Load { to, buffer, at } = instruction {
            let role = self.program.buffers[buffer.0 as usize].role;
            let fixed = matches!(role, Role::Unknowns | Role::Direction);
            let row = self.buffer(*buffer, at)?;
            if fixed && self.assignments[to.0 as usize] == 1 {
                self.aliases.insert(*to, row);
            } else {
                let to = self.fixed(to.0 as usize)?;
                self.put(Kind::Copy, to, [row, 0, 0, 0], 0);
            }
            return Some(());
        }
        let mut from = [0; 4];
        for (place, source) in from.iter_mut().zip(instruction.sources()) {
            *place = self.register(source)?;
        }
        let to = match instruction.target() {
            Some(to) => self.fixed(to.0 as usize)?,
            None => 0,
        };
        match *instruction {
            Instruction::Constant { bits, .. } => self.fill(to, f64::from_bits(bits)),
            Instruction::Number { ref index, .. } => match self.constant(index) {
                Some(whole) => self.fill(to, whole as f64),
                None => {
                    let place = self.place(None, index);
                    self.put(Kind::Number, to, from, place);
                }
            },
            Instruction::Table { table, ref at, .. } => match self.constant(at) {
                Some(place) => {
                    // Outside only where no run gets; the verifier has shown it.
                    let value = self.program.tables[table as usize].get(place as usize).copied().unwrap_or(0.0);
                    self.fill(to, value);
                }
                None => {
                    let place = self.place(Some(table), at);
                    self.put(Kind::Table, to, from, place);
                }
            },
            Instruction::Store { buffer, ref at, .. } => {
                let row = self.buffer(buffer, at)?;
                self.put(Kind::Copy, row, from, 0);
            }
            Instruction::Accumulate { buffer, ref at, .. } => {
                let row = self.buffer(buffer, at)?;
                self.put(Kind::Add, row, [row, from[0], 0, 0], 0);
            }
            Instruction::Deduct { buffer, ref at, .. } => {
                let row = self.buffer(buffer, at)?;
                self.put(Kind::Subtract, row, [row, from[0], 0, 0], 0);
            }
            Instruction::Copy { .. } => self.put(Kind::Copy, to, from, 0),
            Instruction::Unary { operation, .. } => match operation {
                Unary::Reciprocal => self.put(Kind::Reciprocal, to, from, 0),
                Unary::Negate => self.put(Kind::Negate, to, from, 0),
                Unary::SquareRoot => self.put(Kind::SquareRoot, to, from, 0),
                _ => self.put(Kind::Unary, to, from, operation as u32),
            },
            Instruction::Binary { operation, .. } => match operation {
                Binary::Add => self.put(Kind::Add, to, from, 0),
                Binary::Subtract => self.put(Kind::Subtract, to, from, 0),
                Binary::Multiply => self.put(Kind::Multiply, to, from, 0),
                _ => self.put(Kind::Binary, to, from, operation as u32),
            },
            Instruction::MultiplyAdd { .. } => self.put(Kind::MultiplyAdd, to, from, 0),
            Instruction::Select { relation, .. } => self.put(Kind::Select, to, from, relation as u32),
            // Loads are done above, and a verified program has no whole powers left.
            Instruction::Load { .. } | Instruction::Power { .. } => {}
        }
        Some(())
    }
}
