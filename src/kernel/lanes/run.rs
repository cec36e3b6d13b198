//! The loop over the flat code, in three builds.

use std::arch::is_x86_feature_detected;

use crate::kernel::program::Program;
use crate::landscape::term::Index;
use crate::numbers::functions;
use crate::numbers::operation::{Binary, Relation, Unary};

use super::code::{Code, Cursor, Kind, Row};

/// A build of the interpreter.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord)]
pub enum Build {
    /// What every processor of the target can run.
    Baseline,
    /// With AVX2.
    Avx2,
    /// With AVX-512.
    Avx512,
}

impl Build {
    /// The best that this processor can run.
    pub fn best() -> Self {
        #[cfg(target_arch = "x86_64")]
        {
            if is_x86_feature_detected!("avx512f")
                && is_x86_feature_detected!("avx512dq")
                && is_x86_feature_detected!("avx512vl")
            {
                return Build::Avx512;
            }
            if is_x86_feature_detected!("avx2") {
                return Build::Avx2;
            }
        }
        Build::Baseline
    }
}

/// Counters and cursors of a run.
pub struct State {
    counters: Vec<i64>,
    ends: Vec<i64>,
    /// The affine forms of the cursors.
    forms: Vec<i64>,
    /// The values of the cursors.
    values: Vec<i64>,
}

impl State {
    pub fn new(code: &Code) -> Self {
        State {
            counters: vec![0; code.depth],
            ends: vec![0; code.depth],
            forms: vec![0; code.n_cursors],
            values: vec![0; code.n_cursors],
        }
    }
}

/// Runs the code once.
///
/// `code` must be made from `program`, `memory` have `code.rows * lanes` places, and the program be verified: the caller
/// is `LaneMachine`, which holds all three.
pub fn run(build: Build, code: &Code, program: &Program, lanes: usize, memory: &mut [f64], state: &mut State) {
    assert_eq!(memory.len(), code.rows * lanes);
    #[cfg(target_arch = "x86_64")]
    match build {
        // SAFETY: `Build::best` has seen that the processor has these features, and no better build is ever asked for.
        Build::Avx512 => return unsafe { run_avx512(code, program, lanes, memory, state) },
        // SAFETY: as above.
        Build::Avx2 => return unsafe { run_avx2(code, program, lanes, memory, state) },
        Build::Baseline => {}
    }
    // SAFETY: the contract of this function.
    unsafe { run_here(code, program, lanes, memory, state) }
}

#[cfg(target_arch = "x86_64")]
#[target_feature(enable = "avx512f,avx512dq,avx512vl")]
unsafe fn run_avx512(code: &Code, program: &Program, lanes: usize, memory: &mut [f64], state: &mut State) {
    // SAFETY: the caller's contract is that of `run`.
    unsafe { run_here(code, program, lanes, memory, state) }
}

#[cfg(target_arch = "x86_64")]
#[target_feature(enable = "avx2")]
unsafe fn run_avx2(code: &Code, program: &Program, lanes: usize, memory: &mut [f64], state: &mut State) {
    // SAFETY: the caller's contract is that of `run`.
    unsafe { run_here(code, program, lanes, memory, state) }
}

/// # Safety
/// The contract of [`run`].
#[inline(always)]
unsafe fn run_here(code: &Code, program: &Program, lanes: usize, memory: &mut [f64], state: &mut State) {
    // SAFETY: passed on; rows of 4 lanes are one chunk of 4, others are chunks of 8.
    unsafe {
        if lanes == 4 {
            interpret::<4>(code, program, 1, memory, state);
        } else {
            interpret::<8>(code, program, lanes / 8, memory, state);
        }
    }
}

/// Interprets the code with rows of `n_chunks` chunks of `C` lanes.
///
/// # Safety
/// The contract of [`run`], with `lanes = C * n_chunks`.
#[inline(always)]
unsafe fn interpret<const C: usize>(
    code: &Code,
    program: &Program,
    n_chunks: usize,
    memory: &mut [f64],
    state: &mut State,
) {
    let lanes = C * n_chunks;
    let memory = memory.as_mut_ptr();
    enter(&code.outer, &state.counters, &program.lookups, &mut state.forms, &mut state.values);
    let mut place = 0;
    while let Some(operation) = code.operations.get(place) {
        place += 1;
        let values = &state.values;
        // SAFETY: cursors are numbered below `n_cursors`, which is the length of `values`; the verifier has shown that
        // every index stays inside its buffer, so every row lies inside the memory.
        let row = |row: Row| unsafe {
            let at = i64::from(row.base) + values.get_unchecked(row.cursor as usize);
            memory.add(at as usize * lanes)
        };
        let [a, b, c, d] = operation.from;
        // SAFETY (for the blocks below): rows are disjoint or the same, so that chunk by chunk, with operands read before the
        // result is written, an operation may write a row that it reads.
        match operation.kind {
            Kind::Binary(Binary::Multiply) => unsafe {
                pairs::<C>(n_chunks, row(operation.to), row(a), row(b), |x, y| x * y)
            },
            Kind::Binary(Binary::Add) => unsafe {
                pairs::<C>(n_chunks, row(operation.to), row(a), row(b), |x, y| x + y)
            },
            Kind::Binary(Binary::Subtract) => unsafe {
                pairs::<C>(n_chunks, row(operation.to), row(a), row(b), |x, y| x - y)
            },
            Kind::MultiplyAdd => unsafe {
                let (to, a, b, c) = (row(operation.to), row(a), row(b), row(c));
                for chunk in 0..n_chunks {
                    let (x, y, z) = (read::<C>(a, chunk), read::<C>(b, chunk), read::<C>(c, chunk));
                    write::<C>(to, chunk, std::array::from_fn(|lane| x[lane] * y[lane] + z[lane]));
                }
            },
            Kind::Unary(kind) => unsafe { unary::<C>(kind, n_chunks, row(operation.to), row(a)) },
            Kind::Binary(kind) => unsafe { binary::<C>(kind, n_chunks, row(operation.to), row(a), row(b)) },
            Kind::Copy => unsafe { singles::<C>(n_chunks, row(operation.to), row(a), |x| x) },
            Kind::Fill(value) => unsafe { fill::<C>(n_chunks, row(operation.to), value) },
            Kind::Number => unsafe {
                let value = *values.get_unchecked(a.cursor as usize) as f64;
                fill::<C>(n_chunks, row(operation.to), value);
            },
            Kind::Table(table) => unsafe {
                let place = *values.get_unchecked(a.cursor as usize) as usize;
                let value = *program.tables.get_unchecked(table as usize).get_unchecked(place);
                fill::<C>(n_chunks, row(operation.to), value);
            },
            Kind::Select(relation) => unsafe {
                let rows = [a, b, c, d].map(row);
                select::<C>(relation, n_chunks, row(operation.to), rows);
            },
            Kind::Begin(number) => {
                let scope = &code.loops[number as usize];
                let first = scope.first.at(&state.counters, &program.lookups);
                let last = scope.last.at(&state.counters, &program.lookups);
                if first > last {
                    place = scope.exit as usize;
                    continue;
                }
                let (start, end) = if scope.descending { (last, first) } else { (first, last) };
                state.counters[scope.depth] = start;
                state.ends[scope.depth] = end;
                enter(&scope.cursors, &state.counters, &program.lookups, &mut state.forms, &mut state.values);
            }
            Kind::End(number) => {
                let scope = &code.loops[number as usize];
                if state.counters[scope.depth] != state.ends[scope.depth] {
                    let way = if scope.descending { -1 } else { 1 };
                    state.counters[scope.depth] += way;
                    advance(&scope.cursors, way, &program.lookups, &mut state.forms, &mut state.values);
                    place = scope.body as usize;
                }
            }
            Kind::Unless(number, otherwise) => {
                if !code.conditions[number as usize].holds(&state.counters, &program.lookups) {
                    place = otherwise as usize;
                }
            }
            Kind::Jump(to) => place = to as usize,
        }
    }
}

/// Works the cursors of a loop out at its beginning.
#[inline(always)]
fn enter(cursors: &[Cursor], counters: &[i64], lookups: &[Vec<i64>], forms: &mut [i64], values: &mut [i64]) {
    for cursor in cursors {
        let form = cursor.index.affine().at(counters);
        forms[cursor.number as usize] = form;
        values[cursor.number as usize] = match &cursor.index {
            Index::Affine(_) => form,
            Index::Lookup { table, .. } => lookups[*table as usize].get(form as usize).copied().unwrap_or(0),
        };
    }
}

/// Moves the cursors of a loop on by a turn.
#[inline(always)]
fn advance(cursors: &[Cursor], way: i64, lookups: &[Vec<i64>], forms: &mut [i64], values: &mut [i64]) {
    for cursor in cursors {
        let form = forms[cursor.number as usize] + way * cursor.stride;
        forms[cursor.number as usize] = form;
        values[cursor.number as usize] = match &cursor.index {
            Index::Affine(_) => form,
            Index::Lookup { table, .. } => lookups[*table as usize].get(form as usize).copied().unwrap_or(0),
        };
    }
}

/// # Safety
/// The row must have the chunk.
#[inline(always)]
unsafe fn read<const C: usize>(row: *const f64, chunk: usize) -> [f64; C] {
    // SAFETY: by contract; an array of floats has the alignment of a float.
    unsafe { *row.add(chunk * C).cast::<[f64; C]>() }
}

/// # Safety
/// The row must have the chunk.
#[inline(always)]
unsafe fn write<const C: usize>(row: *mut f64, chunk: usize, values: [f64; C]) {
    // SAFETY: by contract.
    unsafe { *row.add(chunk * C).cast::<[f64; C]>() = values }
}

/// # Safety
/// The row must have the chunks.
#[inline(always)]
unsafe fn fill<const C: usize>(n_chunks: usize, to: *mut f64, value: f64) {
    for chunk in 0..n_chunks {
        // SAFETY: by contract.
        unsafe { write::<C>(to, chunk, [value; C]) }
    }
}

/// # Safety
/// The rows must have the chunks.
#[inline(always)]
unsafe fn singles<const C: usize>(n_chunks: usize, to: *mut f64, a: *const f64, f: impl Fn(f64) -> f64) {
    for chunk in 0..n_chunks {
        // SAFETY: by contract.
        unsafe {
            let x = read::<C>(a, chunk);
            let mut out = [0.0; C];
            for lane in 0..C {
                out[lane] = f(x[lane]);
            }
            write(to, chunk, out);
        }
    }
}

/// # Safety
/// The rows must have the chunks.
#[inline(always)]
unsafe fn pairs<const C: usize>(
    n_chunks: usize,
    to: *mut f64,
    a: *const f64,
    b: *const f64,
    f: impl Fn(f64, f64) -> f64,
) {
    for chunk in 0..n_chunks {
        // SAFETY: by contract.
        unsafe {
            let (x, y) = (read::<C>(a, chunk), read::<C>(b, chunk));
            let mut out = [0.0; C];
            for lane in 0..C {
                out[lane] = f(x[lane], y[lane]);
            }
            write(to, chunk, out);
        }
    }
}

/// Angles: the straight line for ordinary ones, one by one where a lane holds a huge one. The bits are the same.
///
/// # Safety
/// The rows must have the chunks.
#[inline(always)]
unsafe fn angles<const C: usize>(
    n_chunks: usize,
    to: *mut f64,
    a: *const f64,
    near: impl Fn(f64) -> f64,
    any: impl Fn(f64) -> f64,
) {
    for chunk in 0..n_chunks {
        // SAFETY: by contract.
        unsafe {
            let x = read::<C>(a, chunk);
            let mut out = [0.0; C];
            if x.iter().all(|&x| functions::is_moderate_angle(x)) {
                for lane in 0..C {
                    out[lane] = near(x[lane]);
                }
            } else {
                for lane in 0..C {
                    out[lane] = any(x[lane]);
                }
            }
            write(to, chunk, out);
        }
    }
}

/// # Safety
/// The rows must have the chunks.
#[inline(always)]
unsafe fn unary<const C: usize>(kind: Unary, n_chunks: usize, to: *mut f64, a: *const f64) {
    macro_rules! each {
        ($($name:ident),*) => {
            match kind {
                // SAFETY: by contract, here and below.
                Unary::Sine => unsafe { angles::<C>(n_chunks, to, a, functions::moderate_sine, functions::sine) },
                Unary::Cosine => unsafe { angles::<C>(n_chunks, to, a, functions::moderate_cosine, functions::cosine) },
                Unary::Tangent => unsafe { angles::<C>(n_chunks, to, a, functions::moderate_tangent, functions::tangent) },
                $(Unary::$name => unsafe { singles::<C>(n_chunks, to, a, |x| functions::unary(Unary::$name, x)) },)*
            }
        };
    }
    each!(
        Negate,
        Absolute,
        Sign,
        Floor,
        Reciprocal,
        SquareRoot,
        Exponential,
        Logarithm,
        Logarithm10,
        ArcSine,
        ArcCosine,
        ArcTangent,
        HyperbolicSine,
        HyperbolicCosine,
        HyperbolicTangent,
        ErrorFunction
    );
}

/// # Safety
/// The rows must have the chunks.
#[inline(always)]
unsafe fn binary<const C: usize>(kind: Binary, n_chunks: usize, to: *mut f64, a: *const f64, b: *const f64) {
    macro_rules! each {
        ($($name:ident),*) => {
            match kind {
                // SAFETY: by contract.
                $(Binary::$name => unsafe { pairs::<C>(n_chunks, to, a, b, |x, y| functions::binary(Binary::$name, x, y)) },)*
            }
        };
    }
    each!(Add, Subtract, Multiply, Divide, Minimum, Maximum, Power, ArcTangent2, Hypotenuse, Gate);
}

/// # Safety
/// The rows must have the chunks.
#[inline(always)]
unsafe fn select<const C: usize>(relation: Relation, n_chunks: usize, to: *mut f64, rows: [*mut f64; 4]) {
    macro_rules! each {
        ($($name:ident),*) => {
            match relation {
                $(Relation::$name => for chunk in 0..n_chunks {
                    // SAFETY: by contract.
                    unsafe {
                        let [x, y, then, otherwise] = rows.map(|row| read::<C>(row, chunk));
                        let mut out = [0.0; C];
                        for lane in 0..C {
                            out[lane] = if Relation::$name.holds(x[lane], y[lane]) { then[lane] } else { otherwise[lane] };
                        }
                        write(to, chunk, out);
                    }
                },)*
            }
        };
    }
    each!(Less, LessOrEqual, Equal, NotEqual);
}
