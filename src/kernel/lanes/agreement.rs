//! Random sound programs: every build, width and lane must give the bits of the reference interpreter, before and after
//! fusing and register planning, on the first run of a machine and on the second. A NaN equals any NaN: which operand's
//! payload survives is the processor's choice.

use std::io::Write;
use std::sync::Arc;

use rand::RngExt;
use rand_chacha::ChaCha8Rng;

use crate::base::random::{Purpose, stream};
use crate::kernel::fuse::fuse;
use crate::kernel::program::{BufferId, Instruction, Program, Register, Role, Step};
use crate::kernel::reference::{interpret, rows};
use crate::kernel::registers::plan_registers;
use crate::kernel::{Build, LaneMachine, text, verify};
use crate::landscape::term::{Affine, Index, IndexCondition};
use crate::numbers::operation::{Binary, Relation, Unary};

/// Counters, lookups and places of the table stay below it.
const SIZE: i64 = 5;

/// Rows of each buffer.
const LENGTH: i64 = 3 * SIZE;

const UNKNOWNS: BufferId = BufferId(0);

/// What a program leaves behind, in the order of comparison.
const RESULTS: [Role; 4] = [Role::Value, Role::Gradient, Role::Shown, Role::Scratch];

/// Writes programs whose indices are in range and whose registers are set by construction.
struct Writer {
    random: ChaCha8Rng,
    program: Program,
}

impl Writer {
    fn program(seed: u64) -> Program {
        let mut writer = Writer { random: stream(seed, 0, 0, Purpose::Check), program: Program::default() };
        for role in [Role::Unknowns].into_iter().chain(RESULTS) {
            writer.program.add_buffer(role, LENGTH as usize);
        }
        writer.program.tables.push((0..SIZE).map(|_| writer.random.random_range(-2.0..2.0)).collect());
        writer.program.lookups.push(vec![3, 0, 4, 1, 2]);
        writer.program.lookups.push(vec![0, 1, 1, 3, 3]);
        let to = writer.program.fresh();
        let mut body = vec![Step::Do(Instruction::Constant { to, bits: 0.5_f64.to_bits() })];
        body.extend(writer.block(&mut vec![to], 0));
        writer.program.body = body;
        writer.program
    }

    fn below(&mut self, count: usize) -> usize {
        self.random.random_range(0..count)
    }

    fn pick<T: Copy>(&mut self, all: &[T]) -> T {
        all[self.below(all.len())]
    }

    fn constant(&mut self, below: i64) -> Affine {
        Affine::constant(self.random.random_range(0..below))
    }

    fn level(&mut self, depth: u32) -> Affine {
        // Most often the innermost: that is what moves pointers.
        match depth {
            0 => self.constant(SIZE),
            depth if self.below(3) > 0 => Affine::level(depth - 1),
            depth => Affine::level(self.below(depth as usize) as u32),
        }
    }

    /// An index between 0 and `SIZE - 1`.
    fn index(&mut self, depth: u32) -> Index {
        let level = self.level(depth);
        match self.below(5) {
            0 => Index::Affine(self.constant(SIZE)),
            1 | 2 => Index::Affine(level),
            3 => Index::Affine(Affine::constant(SIZE - 1).plus(&level, -1).unwrap()),
            _ => Index::Lookup { table: self.below(2) as u32, at: level },
        }
    }

    /// An index between 0 and `LENGTH - 1`.
    fn row(&mut self, depth: u32) -> Index {
        let (level, other) = (self.level(depth), self.level(depth));
        match self.below(8) {
            0..3 => self.index(depth),
            3 => Index::Affine(self.constant(LENGTH)),
            4 => Index::Affine(level.plus(&self.constant(3), 1).unwrap()),
            5 => Index::Affine(level.plus(&other, 1).unwrap()),
            6 => Index::Affine(level.plus(&level, 1).unwrap()),
            _ => Index::Affine(Affine::constant(2 * SIZE).plus(&level, -1).unwrap()),
        }
    }

    fn condition(&mut self, depth: u32, nesting: u32) -> IndexCondition {
        match if nesting == 0 { 0 } else { self.below(4) } {
            0 => IndexCondition::Compare(self.pick(Relation::ALL), self.index(depth), self.index(depth)),
            1 => IndexCondition::All((0..2).map(|_| self.condition(depth, nesting - 1)).collect()),
            2 => IndexCondition::Any((0..2).map(|_| self.condition(depth, nesting - 1)).collect()),
            _ => IndexCondition::Not(Box::new(self.condition(depth, nesting - 1))),
        }
    }

    fn block(&mut self, set: &mut Vec<Register>, depth: u32) -> Vec<Step> {
        // Bodies without branches are what the lane interpreter rewrites.
        let straight = depth > 0 && self.below(2) == 0;
        let mut steps = Vec::new();
        for _ in 0..3 + self.below(6) {
            self.step(set, depth, straight, &mut steps);
        }
        steps
    }

    fn step(&mut self, set: &mut Vec<Register>, depth: u32, straight: bool, steps: &mut Vec<Step>) {
        let n_set = set.len();
        match if depth < 3 && !straight { self.below(10) } else { 3 + self.below(7) } {
            0 | 1 => {
                let (first, last) = if self.below(2) == 0 {
                    (self.index(depth), self.index(depth))
                } else {
                    (Index::Affine(self.constant(2)), Index::Affine(Affine::constant(SIZE - 1)))
                };
                let descending = self.below(4) == 0;
                let body = self.block(set, depth + 1);
                set.truncate(n_set);
                steps.push(Step::Loop { first, last, descending, body });
            }
            2 => {
                let condition = self.condition(depth, 2);
                let [then, otherwise] = [0, 1].map(|_| {
                    let mut block = Vec::new();
                    for _ in 0..2 {
                        self.step(set, depth, true, &mut block);
                    }
                    set.truncate(n_set);
                    block
                });
                steps.push(Step::When { condition, then, otherwise });
            }
            3 | 4 => self.idiom(set, depth, steps),
            _ => {
                let instruction = self.instruction(set, depth);
                steps.push(Step::Do(instruction));
            }
        }
    }

    fn target(&mut self, set: &mut Vec<Register>) -> Register {
        // One in four goes to a register that is set already: that is what accumulators do.
        let to = if self.below(4) == 0 { self.pick(set) } else { self.program.fresh() };
        if !set.contains(&to) {
            set.push(to);
        }
        to
    }

    fn writable(&mut self) -> BufferId {
        BufferId(1 + self.below(RESULTS.len()) as u32)
    }

    /// What the lane interpreter joins, with registers and rows at random.
    fn idiom(&mut self, set: &mut Vec<Register>, depth: u32, steps: &mut Vec<Step>) {
        let [a, b, c, d] = std::array::from_fn(|_| self.pick(set));
        let mut put = |instruction: Instruction| steps.push(Step::Do(instruction));
        let binary = |to, operation, left, right| Instruction::Binary { to, operation, left, right };
        match self.below(6) {
            0 => {
                for _ in 0..self.pick(&[1, 1, 3]) {
                    let (left, right) = (self.pick(set), self.pick(set));
                    let from = self.target(set);
                    let (buffer, other) = (self.writable(), self.writable());
                    put(binary(from, Binary::Multiply, left, right));
                    if self.below(2) == 0 {
                        put(binary(c, Binary::Add, c, from));
                    } else {
                        put(Instruction::Accumulate { buffer, at: self.row(depth), from });
                    }
                    put(Instruction::Deduct { buffer: other, at: self.row(depth), from });
                }
            }
            1 => {
                let mut plus = self.target(set);
                let difference = self.target(set);
                put(binary(difference, Binary::Subtract, a, b));
                put(binary(plus, Binary::Multiply, difference, difference));
                for _ in 0..2 {
                    let (left, right) = (self.pick(set), self.pick(set));
                    let (difference, to) = (self.target(set), self.target(set));
                    put(binary(difference, Binary::Subtract, left, right));
                    put(Instruction::MultiplyAdd { to, left: difference, right: difference, plus });
                    plus = to;
                }
            }
            2 => {
                let (difference, to) = (self.target(set), self.target(set));
                put(binary(difference, Binary::Subtract, a, b));
                put(binary(to, Binary::Add, c, difference));
            }
            3 => {
                let (product, difference, to) = (self.target(set), self.target(set), self.target(set));
                put(binary(product, Binary::Multiply, a, b));
                put(binary(difference, Binary::Subtract, d, product));
                put(binary(to, Binary::Add, difference, c));
            }
            4 => {
                let (inverse, square) = (self.target(set), self.target(set));
                put(Instruction::Unary { to: inverse, operation: Unary::Reciprocal, of: a });
                put(binary(square, Binary::Multiply, inverse, inverse));
            }
            _ => {
                let (square, cube) = (self.target(set), self.target(set));
                put(binary(square, Binary::Multiply, a, a));
                put(binary(cube, Binary::Multiply, square, a));
            }
        }
    }

    fn instruction(&mut self, set: &mut Vec<Register>, depth: u32) -> Instruction {
        let [a, b, c, d] = std::array::from_fn(|_| self.pick(set));
        let (at, buffer) = (self.row(depth), self.writable());
        match self.below(12) {
            0 => return Instruction::Store { buffer, at, from: a },
            1 | 2 => return Instruction::Accumulate { buffer, at, from: a },
            3 => return Instruction::Deduct { buffer, at, from: a },
            _ => {}
        }
        let to = self.target(set);
        match self.below(12) {
            0 => Instruction::Constant { to, bits: self.random.random_range(-3.0_f64..3.0).to_bits() },
            1 => Instruction::Number { to, index: at },
            2 => Instruction::Table { to, table: 0, at: self.index(depth) },
            3 | 4 => Instruction::Load { to, buffer: UNKNOWNS, at },
            5 => Instruction::Load { to, buffer, at },
            6 => Instruction::Copy { to, from: a },
            7 => Instruction::Unary { to, operation: self.pick(Unary::ALL), of: a },
            8 => Instruction::Binary { to, operation: self.pick(Binary::ALL), left: a, right: b },
            9 => {
                let operation = self.pick(&[Binary::Add, Binary::Multiply]);
                Instruction::Binary { to, operation, left: a, right: b }
            }
            10 => Instruction::MultiplyAdd { to, left: a, right: b, plus: c },
            _ => {
                Instruction::Select { to, relation: self.pick(Relation::ALL), left: a, right: b, then: c, otherwise: d }
            }
        }
    }
}

fn bits(x: f64) -> u64 {
    if x.is_nan() { u64::MAX } else { x.to_bits() }
}

fn points(seed: u64) -> Vec<Vec<f64>> {
    let special = [0.0, -0.0, f64::INFINITY, f64::NEG_INFINITY, f64::NAN, 1e300, 1e-310];
    let mut random = stream(seed, 1, 0, Purpose::Check);
    let mut coordinate = || match random.random_range(0..60) {
        number if number < special.len() => special[number],
        _ => random.random_range(-3.0..3.0),
    };
    (0..32).map(|_| (0..LENGTH).map(|_| coordinate()).collect()).collect()
}

/// Runs a machine twice and compares every lane with what is expected of its point.
fn compare(machine: &mut LaneMachine, points: &[Vec<f64>], expected: &[Vec<u64>], turn: usize, told: &str) {
    let lanes = machine.n_lanes();
    for run in 0..2 {
        // Turned, so that a point does not always sit in the same lane.
        let at = |lane: usize| (lane + turn + 3 * run) % points.len();
        for lane in 0..lanes {
            for (slot, x) in points[at(lane)].iter().enumerate() {
                machine.rows_mut(Role::Unknowns)[slot * lanes + lane] = *x;
            }
        }
        machine.run();
        for lane in 0..lanes {
            let rows = RESULTS.iter().flat_map(|role| machine.rows(*role).iter().skip(lane).step_by(lanes));
            let got: Vec<u64> = rows.map(|&x| bits(x)).collect();
            assert_eq!(got, expected[at(lane)], "run {run}, {lanes} lanes, lane {lane}, {told}");
        }
    }
}

/// Whether this processor can run a build; says so where it cannot, since a test that is left out must not look like one
/// that passed.
fn can_run(build: Build) -> bool {
    let can = build <= Build::best();
    if !can {
        let _ = writeln!(std::io::stderr(), "NOT TESTED: this processor cannot run the {build:?} build");
    }
    can
}

fn random_programs_run_alike(build: Build) {
    if !can_run(build) {
        return;
    }
    let (mut n_finite, mut n_values) = (0, 0);
    for seed in 0..400 {
        let program = Writer::program(seed);
        let printed = program.to_string();
        assert_eq!(text::read(&printed).unwrap().body, program.body, "{printed}");
        let points = points(seed);
        let expected: Vec<Vec<u64>> = points
            .iter()
            .map(|point| {
                let buffers = interpret(&program, &[(Role::Unknowns, point.clone())]);
                RESULTS.iter().flat_map(|role| rows(&program, &buffers, *role)).map(|&x| bits(x)).collect()
            })
            .collect();
        n_values += expected.len() * expected[0].len();
        n_finite += expected.iter().flatten().filter(|&&x| x != 0 && f64::from_bits(x).is_finite()).count();
        let variants = [program.clone(), fuse(&program), plan_registers(&program), plan_registers(&fuse(&program))];
        for (number, variant) in variants.into_iter().enumerate() {
            let told = format!("seed {seed}, variant {number}\n{variant}");
            let verified = Arc::new(verify(variant).unwrap_or_else(|fault| panic!("{fault}, {told}")));
            for lanes in [4, 8, 16, 32] {
                let mut machine = LaneMachine::with_build(&verified, lanes, build);
                compare(&mut machine, &points, &expected, seed as usize + number, &told);
            }
        }
    }
    // The comparison would be empty if nothing but zeros and NaN came out.
    assert!(12 * n_finite > n_values, "{n_finite} of {n_values}");
}

#[test]
fn random_programs_run_alike_in_the_baseline_build() {
    random_programs_run_alike(Build::Baseline);
}

#[test]
fn random_programs_run_alike_with_avx2_where_the_processor_has_it() {
    random_programs_run_alike(Build::Avx2);
}

#[test]
fn random_programs_run_alike_with_avx512_where_the_processor_has_it() {
    random_programs_run_alike(Build::Avx512);
}

fn machine(text: &str, lanes: usize) -> LaneMachine {
    LaneMachine::new(&Arc::new(verify(text::read(text).unwrap()).unwrap()), lanes)
}

#[test]
fn a_run_sees_nothing_of_an_earlier_one() {
    let text = "buffer b0 unknowns 1\nbuffer b1 value 1\nbuffer b2 scratch 1\n\
                r0 = load b0 0\naccumulate b2 0 r0\nr1 = load b2 0\naccumulate b1 0 r1";
    let mut machine = machine(text, 4);
    machine.rows_mut(Role::Unknowns).copy_from_slice(&[1.0, 2.0, 3.0, 4.0]);
    for _ in 0..2 {
        machine.run();
        assert_eq!(machine.rows(Role::Value), [1.0, 2.0, 3.0, 4.0]);
    }
}

#[test]
fn places_that_no_run_reaches_are_no_fault() {
    let text = "buffer b0 value 1\ntable t0 1.0\nloop i0 1 .. 0\nr0 = table t0 7\nr1 = load b0 -9\nr2 = load b0 7\nend\n\
                r1 = constant 2.0\nstore b0 0 r1";
    let mut machine = machine(text, 8);
    machine.run();
    assert_eq!(machine.rows(Role::Value), [2.0; 8]);
}

/// One row may be both the sum that is added to and the row that is deducted from.
#[test]
fn a_spread_onto_one_row_cancels() {
    let text = "buffer b0 unknowns 4\nbuffer b1 gradient 4\nlookup k0 0 0 2 2\nloop i0 0 .. 3\nr0 = load b0 i0\n\
                r1 = mul r0 r0\naccumulate b1 i0 r1\ndeduct b1 k0[i0] r1\nend";
    let mut machine = machine(text, 4);
    machine.rows_mut(Role::Unknowns).fill(2.0);
    machine.run();
    assert_eq!(machine.rows(Role::Gradient).iter().step_by(4).copied().collect::<Vec<_>>(), [-4.0, 4.0, -4.0, 4.0]);
}

/// The square of the first difference is used again behind the distance that it is a part of.
#[test]
fn a_part_of_a_distance_is_kept() {
    let text = "buffer b0 unknowns 2\nbuffer b1 value 1\nr9 = constant 0.0\nloop i0 0 .. 1\nr0 = load b0 i0\n\
                r1 = sub r0 r9\nr2 = mul r1 r1\nr3 = sub r9 r0\nr4 = muladd r3 r3 r2\nr5 = sub r0 r9\n\
                r6 = muladd r5 r5 r4\naccumulate b1 0 r2\naccumulate b1 0 r6\nend";
    let mut machine = machine(text, 4);
    machine.rows_mut(Role::Unknowns).fill(2.0);
    machine.run();
    assert_eq!(machine.rows(Role::Value), [32.0; 4]);
}

/// What a loop sets anew in each turn may still be read behind it.
#[test]
fn the_last_turn_is_seen_behind_its_loop() {
    for last in [3, 4] {
        let text = format!(
            "buffer b0 unknowns 5\nbuffer b1 value 1\nbuffer b2 gradient 5\nr1 = constant 0.0\n\
             loop i0 0 .. {last}\nr0 = load b0 i0\nr1 = mul r0 r0\nstore b2 i0 r1\nend\nstore b1 0 r1"
        );
        let mut machine = machine(&text, 4);
        for (slot, row) in machine.rows_mut(Role::Unknowns).chunks_exact_mut(4).enumerate() {
            row.fill(slot as f64 + 1.0);
        }
        machine.run();
        assert_eq!(machine.rows(Role::Value)[0], f64::from((last + 1) * (last + 1)));
    }
}
