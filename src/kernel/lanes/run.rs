//! The loop over the flat code, in three builds.

use std::arch::is_x86_feature_detected;

use crate::kernel::program::Program;
use crate::landscape::term::Index;
use crate::numbers::functions;
use crate::numbers::operation::{Binary, Relation, Unary};

use super::code::{Code, Cursor, Kind, Moves, Operation, Pointer};

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

/// Counters, pointers and places of a run.
pub struct State {
    counters: Vec<i64>,
    ends: Vec<i64>,
    pointers: Vec<*mut f64>,
    places: Vec<i64>,
}

// SAFETY: the pointers are set from the machine's own memory at the beginning of each run and used in that run only.
unsafe impl Send for State {}

impl State {
    pub fn new(code: &Code) -> Self {
        State {
            counters: vec![0; code.depth],
            ends: vec![0; code.depth],
            pointers: vec![std::ptr::null_mut(); code.pointers.len()],
            places: vec![0; code.places.len()],
        }
    }
}

/// What a run works with.
pub struct Run<'a> {
    pub code: &'a Code,
    pub program: &'a Program,
    pub lanes: usize,
    pub memory: &'a mut [f64],
    pub state: &'a mut State,
}

/// Runs the code once.
///
/// The code must be made from the program, the memory have `code.rows * lanes` places, and the program be verified: the
/// caller is `LaneMachine`, which holds all three.
pub fn run(build: Build, run: Run<'_>) {
    assert_eq!(run.memory.len(), run.code.rows * run.lanes);
    #[cfg(target_arch = "x86_64")]
    match build {
        // SAFETY: `Build::best` has seen that the processor has these features, and no better build is ever asked for.
        Build::Avx512 => return unsafe { run_avx512(run) },
        // SAFETY: as above.
        Build::Avx2 => return unsafe { run_avx2(run) },
        Build::Baseline => {}
    }
    // SAFETY: the contract of this function.
    unsafe { run_here(run) }
}

#[cfg(target_arch = "x86_64")]
#[target_feature(enable = "avx512f,avx512dq,avx512vl")]
unsafe fn run_avx512(run: Run<'_>) {
    // SAFETY: the caller's contract is that of `run`.
    unsafe { run_here(run) }
}

#[cfg(target_arch = "x86_64")]
#[target_feature(enable = "avx2")]
unsafe fn run_avx2(run: Run<'_>) {
    // SAFETY: the caller's contract is that of `run`.
    unsafe { run_here(run) }
}

/// # Safety
/// The contract of [`run`].
#[inline(always)]
unsafe fn run_here(run: Run<'_>) {
    // SAFETY: passed on; the width of a machine is one of these.
    unsafe {
        match run.lanes {
            4 => interpret::<4, 4>(run),
            8 => interpret::<8, 8>(run),
            16 => interpret::<16, 8>(run),
            _ => interpret::<32, 8>(run),
        }
    }
}

#[allow(clippy::undocumented_unsafe_blocks, reason = "one argument, above the match, serves all its arms")]
/// Interprets the code with rows of `K` lanes, `C` at a time.
///
/// # Safety
/// The contract of [`run`], with `lanes = K`.
#[inline(always)]
unsafe fn interpret<const K: usize, const C: usize>(run: Run<'_>) {
    let Run { code, program, memory, state, .. } = run;
    let memory = memory.as_mut_ptr();
    for (pointer, &row) in state.pointers.iter_mut().zip(&code.pointers) {
        // SAFETY: the rows of pointers that do not move lie in the memory; those that do are set by their loops before
        // they are used, and start at the first row of their buffer.
        *pointer = unsafe { memory.add(row * K) };
    }
    let operations = code.operations.as_ptr();
    let n_operations = code.operations.len();
    let mut place = 0;
    while place < n_operations {
        // SAFETY: the place is below the number of operations.
        let operation = unsafe { &*operations.add(place) };
        place += 1;
        let pointers = state.pointers.as_ptr();
        // SAFETY: pointers are numbered below the length of `pointers`, and each points to a row inside the memory: the
        // verifier has shown that every index stays inside its buffer.
        let at = |pointer: Pointer| unsafe { *pointers.add(pointer as usize) };
        // Does something for the operation and, where the next is its twin, for that too: one dispatch for both.
        macro_rules! each {
            (|$operation:ident, $to:ident, [$a:ident, $b:ident, $c:ident, $d:ident]| $body:expr) => {{
                // A loop and no closure: a closure called twice becomes a function of its own, without this build's
                // vector instructions.
                let mut $operation: &Operation = operation;
                loop {
                    let $to = at($operation.to);
                    let [$a, $b, $c, $d] = $operation.from.map(at);
                    let _ = ($a, $b, $c, $d);
                    // SAFETY: rows are disjoint or the same, and operands are read, chunk by chunk, before the result is
                    // written; so an operation may write a row that it reads.
                    unsafe { $body };
                    if !$operation.twin {
                        break;
                    }
                    // SAFETY: a twin is followed by its other half.
                    $operation = unsafe { &*operations.add(place) };
                    place += 1;
                }
            }};
        }
        match operation.kind {
            Kind::Multiply => each!(|_o, to, [a, b, _c, _d]| pairs::<K, C>(to, a, b, |x, y| x * y)),
            Kind::Add => each!(|_o, to, [a, b, _c, _d]| pairs::<K, C>(to, a, b, |x, y| x + y)),
            Kind::Subtract => each!(|_o, to, [a, b, _c, _d]| pairs::<K, C>(to, a, b, |x, y| x - y)),
            Kind::Reciprocal => each!(|_o, to, [a, _b, _c, _d]| singles::<K, C>(to, a, |x| 1.0 / x)),
            Kind::Negate => each!(|_o, to, [a, _b, _c, _d]| singles::<K, C>(to, a, |x| -x)),
            Kind::SquareRoot => each!(|_o, to, [a, _b, _c, _d]| singles::<K, C>(to, a, f64::sqrt)),
            Kind::Copy => each!(|_o, to, [a, _b, _c, _d]| singles::<K, C>(to, a, |x| x)),
            Kind::MultiplyAdd => each!(|_o, to, [a, b, c, _d]| {
                for chunk in 0..K / C {
                    let (x, y, z) = (read::<C>(a, chunk), read::<C>(b, chunk), read::<C>(c, chunk));
                    write::<C>(to, chunk, std::array::from_fn(|lane| x[lane] * y[lane] + z[lane]));
                }
            }),
            Kind::Fill => {
                each!(|o, to, [_a, _b, _c, _d]| fill::<K, C>(to, *code.numbers.get_unchecked(o.extra as usize)))
            }
            Kind::Number => {
                each!(|o, to, [_a, _b, _c, _d]| fill::<K, C>(to, *state.places.get_unchecked(o.extra as usize) as f64))
            }
            Kind::Table => each!(|o, to, [_a, _b, _c, _d]| {
                let number = o.extra as usize;
                let table = code.places.get_unchecked(number).unwrap_or(0) as usize;
                let place = *state.places.get_unchecked(number) as usize;
                fill::<K, C>(to, *program.tables.get_unchecked(table).get_unchecked(place));
            }),
            Kind::Unary => each!(|o, to, [a, _b, _c, _d]| unary::<K, C>(Unary::ALL[o.extra as usize], to, a)),
            Kind::Binary => each!(|o, to, [a, b, _c, _d]| binary::<K, C>(Binary::ALL[o.extra as usize], to, a, b)),
            Kind::Select => {
                each!(|o, to, [a, b, c, d]| select::<K, C>(Relation::ALL[o.extra as usize], to, [a, b, c, d]))
            }
            Kind::Spread => each!(|_o, to, [a, b, row, _d]| {
                for chunk in 0..K / C {
                    let (x, y) = (read::<C>(a, chunk), read::<C>(b, chunk));
                    let (sum, less) = (read::<C>(to, chunk), read::<C>(row, chunk));
                    let t: [f64; C] = std::array::from_fn(|lane| x[lane] * y[lane]);
                    write::<C>(to, chunk, std::array::from_fn(|lane| sum[lane] + t[lane]));
                    write::<C>(row, chunk, std::array::from_fn(|lane| less[lane] - t[lane]));
                }
            }),
            Kind::Square => each!(|_o, to, [a, b, square, _d]| {
                for chunk in 0..K / C {
                    let (x, y) = (read::<C>(a, chunk), read::<C>(b, chunk));
                    let t: [f64; C] = std::array::from_fn(|lane| x[lane] - y[lane]);
                    write::<C>(to, chunk, t);
                    write::<C>(square, chunk, std::array::from_fn(|lane| t[lane] * t[lane]));
                }
            }),
            Kind::SquareAdd => each!(|_o, to, [a, b, square, plus]| {
                for chunk in 0..K / C {
                    let (x, y, z) = (read::<C>(a, chunk), read::<C>(b, chunk), read::<C>(plus, chunk));
                    let t: [f64; C] = std::array::from_fn(|lane| x[lane] - y[lane]);
                    write::<C>(to, chunk, t);
                    write::<C>(square, chunk, std::array::from_fn(|lane| t[lane] * t[lane] + z[lane]));
                }
            }),
            Kind::AddDifference => each!(|_o, to, [a, b, plus, _d]| {
                for chunk in 0..K / C {
                    let (x, y, z) = (read::<C>(a, chunk), read::<C>(b, chunk), read::<C>(plus, chunk));
                    write::<C>(to, chunk, std::array::from_fn(|lane| z[lane] + (x[lane] - y[lane])));
                }
            }),
            Kind::AddLessProduct => each!(|_o, to, [a, b, plus, whole]| {
                for chunk in 0..K / C {
                    let (x, y) = (read::<C>(a, chunk), read::<C>(b, chunk));
                    let (z, w) = (read::<C>(plus, chunk), read::<C>(whole, chunk));
                    write::<C>(to, chunk, std::array::from_fn(|lane| z[lane] + (w[lane] - x[lane] * y[lane])));
                }
            }),
            Kind::ReciprocalSquare => each!(|_o, to, [a, _b, square, _d]| {
                for chunk in 0..K / C {
                    let x = read::<C>(a, chunk);
                    let t: [f64; C] = std::array::from_fn(|lane| 1.0 / x[lane]);
                    write::<C>(to, chunk, t);
                    write::<C>(square, chunk, std::array::from_fn(|lane| t[lane] * t[lane]));
                }
            }),
            Kind::SquareProduct => each!(|_o, to, [a, _b, product, _d]| {
                for chunk in 0..K / C {
                    let x = read::<C>(a, chunk);
                    let t: [f64; C] = std::array::from_fn(|lane| x[lane] * x[lane]);
                    write::<C>(to, chunk, t);
                    write::<C>(product, chunk, std::array::from_fn(|lane| x[lane] * t[lane]));
                }
            }),
            Kind::Distance => each!(|o, _to, [_a, _b, _c, _d]| {
                let rows = code.wides.get_unchecked(o.extra as usize).map(at);
                for chunk in 0..K / C {
                    let difference = |k: usize| -> [f64; C] {
                        let (x, y) = (read::<C>(rows[3 * k], chunk), read::<C>(rows[3 * k + 1], chunk));
                        std::array::from_fn(|lane| x[lane] - y[lane])
                    };
                    let (x, y, z) = (difference(0), difference(1), difference(2));
                    write::<C>(rows[2], chunk, x);
                    write::<C>(rows[5], chunk, y);
                    write::<C>(rows[8], chunk, z);
                    let sum = |lane: usize| {
                        let two = y[lane] * y[lane] + x[lane] * x[lane];
                        z[lane] * z[lane] + two
                    };
                    write::<C>(rows[9], chunk, std::array::from_fn(sum));
                }
            }),
            Kind::SpreadThree => each!(|o, _to, [_a, _b, _c, _d]| {
                let rows = code.wides.get_unchecked(o.extra as usize).map(at);
                for chunk in 0..K / C {
                    for k in 0..3 {
                        let (x, y) = (read::<C>(rows[4 * k], chunk), read::<C>(rows[4 * k + 1], chunk));
                        let (sum, less) = (read::<C>(rows[4 * k + 2], chunk), read::<C>(rows[4 * k + 3], chunk));
                        let t: [f64; C] = std::array::from_fn(|lane| x[lane] * y[lane]);
                        write::<C>(rows[4 * k + 2], chunk, std::array::from_fn(|lane| sum[lane] + t[lane]));
                        write::<C>(rows[4 * k + 3], chunk, std::array::from_fn(|lane| less[lane] - t[lane]));
                    }
                }
            }),
            Kind::Begin => {
                let scope = &code.loops[operation.extra as usize];
                let first = scope.first.at(&state.counters, &program.lookups);
                let last = scope.last.at(&state.counters, &program.lookups);
                if first > last {
                    place = scope.exit as usize;
                    continue;
                }
                let (start, end) = if scope.descending { (last, first) } else { (first, last) };
                state.counters[scope.depth] = start;
                state.ends[scope.depth] = end;
                for cursor in &scope.cursors {
                    set::<K>(cursor, memory, state, &program.lookups);
                }
                place = scope.body as usize;
                if let Some(pair) = scope.pair
                    && last > first
                {
                    for &(first, second, rows) in &scope.second {
                        state.pointers[second as usize] =
                            state.pointers[first as usize].wrapping_offset(rows.wrapping_mul(K as isize));
                    }
                    place = pair as usize;
                }
            }
            Kind::EndPair => {
                let scope = &code.loops[operation.extra as usize];
                // The counter is that of the first of the two turns, and such loops run upward.
                let left = state.ends[scope.depth] - state.counters[scope.depth] - 1;
                if left <= 0 {
                    place = scope.exit as usize;
                    continue;
                }
                state.counters[scope.depth] += 2;
                for &(pointer, rows) in &scope.pair_steps {
                    // SAFETY: pointers are numbered below the length of `pointers`.
                    let pointer = unsafe { state.pointers.get_unchecked_mut(pointer as usize) };
                    *pointer = pointer.wrapping_offset(rows.wrapping_mul(K as isize));
                }
                place = if left >= 2 { scope.pair.unwrap_or(scope.body) } else { scope.body } as usize;
            }
            Kind::End => {
                let scope = &code.loops[operation.extra as usize];
                let counter = &mut state.counters[scope.depth];
                if *counter != state.ends[scope.depth] {
                    let way = if scope.descending { -1 } else { 1 };
                    *counter += way;
                    for &(pointer, rows) in &scope.steps {
                        // SAFETY: pointers are numbered below the length of `pointers`.
                        let pointer = unsafe { state.pointers.get_unchecked_mut(pointer as usize) };
                        *pointer = pointer.wrapping_offset(rows.wrapping_mul(K as isize));
                    }
                    for cursor in &scope.others {
                        match (cursor.stride, cursor.moves) {
                            (Some(stride), Moves::Place(number)) => {
                                let place = &mut state.places[number as usize];
                                *place = place.wrapping_add(stride.wrapping_mul(way));
                            }
                            _ => set::<K>(cursor, memory, state, &program.lookups),
                        }
                    }
                    place = scope.body as usize;
                }
            }
            Kind::Unless => {
                let branch = &code.branches[operation.extra as usize];
                if !branch.condition.holds(&state.counters, &program.lookups) {
                    place = branch.otherwise as usize;
                }
            }
            Kind::Jump => place = operation.extra as usize,
        }
    }
}

/// Works a cursor out. One whose place is guarded by a condition that does not hold may stand outside its buffer: it is
/// then not used.
#[inline(always)]
fn set<const K: usize>(cursor: &Cursor, memory: *mut f64, state: &mut State, lookups: &[Vec<i64>]) {
    let form = cursor.index.affine().at(&state.counters);
    let value = match &cursor.index {
        Index::Affine(_) => form,
        Index::Lookup { table, .. } => lookups[*table as usize].get(form as usize).copied().unwrap_or(0),
    };
    match cursor.moves {
        Moves::Pointer(pointer, row) => {
            state.pointers[pointer as usize] =
                memory.wrapping_offset(((row as i64).wrapping_add(value) as isize).wrapping_mul(K as isize));
        }
        Moves::Place(number) => state.places[number as usize] = value,
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
unsafe fn fill<const K: usize, const C: usize>(to: *mut f64, value: f64) {
    for chunk in 0..K / C {
        // SAFETY: by contract.
        unsafe { write::<C>(to, chunk, [value; C]) }
    }
}

/// # Safety
/// The rows must have the chunks.
#[inline(always)]
unsafe fn singles<const K: usize, const C: usize>(to: *mut f64, a: *const f64, f: impl Fn(f64) -> f64) {
    for chunk in 0..K / C {
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
unsafe fn pairs<const K: usize, const C: usize>(
    to: *mut f64,
    a: *const f64,
    b: *const f64,
    f: impl Fn(f64, f64) -> f64,
) {
    for chunk in 0..K / C {
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
unsafe fn angles<const K: usize, const C: usize>(
    to: *mut f64,
    a: *const f64,
    near: impl Fn(f64) -> f64,
    any: impl Fn(f64) -> f64,
) {
    for chunk in 0..K / C {
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
#[allow(clippy::undocumented_unsafe_blocks, reason = "the contract above serves every arm of the macro")]
#[inline(always)]
unsafe fn unary<const K: usize, const C: usize>(kind: Unary, to: *mut f64, a: *const f64) {
    macro_rules! each {
        ($($name:ident),*) => {
            match kind {
                // SAFETY: by contract, here and below.
                Unary::Sine => unsafe { angles::<K, C>( to, a, functions::moderate_sine, functions::sine) },
                Unary::Cosine => unsafe { angles::<K, C>( to, a, functions::moderate_cosine, functions::cosine) },
                Unary::Tangent => unsafe { angles::<K, C>( to, a, functions::moderate_tangent, functions::tangent) },
                $(Unary::$name => unsafe { singles::<K, C>( to, a, |x| functions::unary(Unary::$name, x)) },)*
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
#[allow(clippy::undocumented_unsafe_blocks, reason = "the contract above serves every arm of the macro")]
#[inline(always)]
unsafe fn binary<const K: usize, const C: usize>(kind: Binary, to: *mut f64, a: *const f64, b: *const f64) {
    macro_rules! each {
        ($($name:ident),*) => {
            match kind {
                // SAFETY: by contract.
                $(Binary::$name => unsafe { pairs::<K, C>( to, a, b, |x, y| functions::binary(Binary::$name, x, y)) },)*
            }
        };
    }
    each!(Add, Subtract, Multiply, Divide, Minimum, Maximum, Power, ArcTangent2, Hypotenuse, Gate);
}

/// # Safety
/// The rows must have the chunks.
#[allow(clippy::undocumented_unsafe_blocks, reason = "the contract above serves every arm of the macro")]
#[inline(always)]
unsafe fn select<const K: usize, const C: usize>(relation: Relation, to: *mut f64, rows: [*mut f64; 4]) {
    macro_rules! each {
        ($($name:ident),*) => {
            match relation {
                $(Relation::$name => for chunk in 0..K / C {
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
