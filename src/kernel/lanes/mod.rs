//! The lane interpreter: every instruction over an array of lanes.
//!
//! A verified program becomes flat code over one block of memory, in rows of K lanes: the registers first, then the
//! buffers. An operand is a pointer to a row, fixed or moved on by its loop with each turn; so what is loaded from a
//! read-only buffer is never copied, and no index is worked out twice.
//!
//! The loop over the code is compiled three times, for AVX-512, for AVX2 and for the baseline, and chosen when a machine
//! is made. All give the same bits: there is no fused multiply-add, and a lane never looks at another.
//!
//! The flat code is meant to be the input of a generator of machine code too: straight runs of simple operations on
//! rows, loops with known cursors, nothing that depends on a lane.
//!
//! - `code`: the flat code and how it is made.
//! - `compound`: innermost loops made faster; `lives`: what they must leave behind.
//! - `run`: the loop over it, in three builds.
//! - [`algebra`]: vector algebra for descents, over rows like those of a machine.
//! - [`dense`]: symmetric matrices, for the spectra of confirmations.

#[cfg(test)]
mod agreement;
pub mod algebra;
mod code;
mod compound;
pub mod dense;
mod lives;
mod run;

use std::ops::Range;
use std::sync::Arc;

use super::clearing::buffers_to_clear;
use super::program::{BufferId, Role};
use super::verify::Verified;

pub use run::Build;

use code::Code;

/// Memory comes in cache lines: a row that straddled two would cost twice.
#[derive(Clone, Copy)]
#[repr(C, align(64))]
struct Line([f64; 8]);

/// A program with memory for its lanes; owned by one thread.
///
/// ```
/// use std::sync::Arc;
/// use thalweg::kernel::{LaneMachine, Role, text, verify};
/// let program = text::read("buffer b0 unknowns 1\nbuffer b1 value 1\nr0 = load b0 0\nr1 = mul r0 r0\nstore b1 0 r1").unwrap();
/// let mut machine = LaneMachine::new(&Arc::new(verify(program).unwrap()), 4);
/// machine.rows_mut(Role::Unknowns).copy_from_slice(&[1.0, 2.0, 3.0, 4.0]);
/// machine.run();
/// assert_eq!(machine.rows(Role::Value), [1.0, 4.0, 9.0, 16.0]);
/// ```
pub struct LaneMachine {
    program: Arc<Verified>,
    code: Code,
    lanes: usize,
    build: Build,
    memory: Vec<Line>,
    /// Buffers to be cleared before each run.
    cleared: Vec<Range<usize>>,
    state: run::State,
}

impl LaneMachine {
    /// A machine with 4, 8, 16 or 32 lanes. The best build that this processor can run is chosen.
    ///
    /// # Panics
    /// For another number of lanes.
    pub fn new(program: &Arc<Verified>, lanes: usize) -> Self {
        LaneMachine::with_build(program, lanes, Build::best())
    }

    /// The same with a given build; one that the processor cannot run is replaced by the best that it can.
    ///
    /// # Panics
    /// As above.
    pub fn with_build(program: &Arc<Verified>, lanes: usize, build: Build) -> Self {
        assert!([4, 8, 16, 32].contains(&lanes), "4, 8, 16 or 32 lanes");
        let code = Code::new(program.program()).expect("no program within the work limit has 2^32 rows");
        let memory = vec![Line([0.0; 8]); (code.rows * lanes).div_ceil(8)];
        let state = run::State::new(&code);
        let (build, program) = (build.min(Build::best()), program.clone());
        let mut machine = LaneMachine { program, code, lanes, build, memory, cleared: Vec::new(), state };
        machine.cleared =
            buffers_to_clear(machine.program.program()).into_iter().map(|id| machine.range_of(id)).collect();
        machine
    }

    /// The number of lanes.
    pub fn n_lanes(&self) -> usize {
        self.lanes
    }

    /// The rows of the buffer with a role: row r, lane l at `r * n_lanes + l`. Empty where the program has no such buffer.
    pub fn rows_mut(&mut self, role: Role) -> &mut [f64] {
        let range = self.range(role);
        &mut flat_mut(&mut self.memory)[range]
    }

    /// The same, to read.
    pub fn rows(&self, role: Role) -> &[f64] {
        &flat(&self.memory)[self.range(role)]
    }

    /// Runs the program once on all lanes, from buffers at zero but for the read-only ones: a run never sees an earlier
    /// one.
    pub fn run(&mut self) {
        for range in &self.cleared {
            flat_mut(&mut self.memory)[range.clone()].fill(0.0);
        }
        let (code, program) = (&self.code, self.program.program());
        let n_places = code.rows * self.lanes;
        let (memory, state) = (&mut flat_mut(&mut self.memory)[..n_places], &mut self.state);
        run::run(self.build, run::Run { code, program, lanes: self.lanes, memory, state });
    }

    fn range(&self, role: Role) -> Range<usize> {
        self.program.program().buffer(role).map_or(0..0, |id| self.range_of(id))
    }

    fn range_of(&self, id: BufferId) -> Range<usize> {
        let first = self.code.buffer_rows[id.0 as usize];
        first * self.lanes..(first + self.program.program().buffers[id.0 as usize].length) * self.lanes
    }
}

fn flat(memory: &[Line]) -> &[f64] {
    // SAFETY: a line is eight floats in a row (`repr(C)`, its size is its alignment), so lines in a row are floats in a row.
    unsafe { std::slice::from_raw_parts(memory.as_ptr().cast::<f64>(), memory.len() * 8) }
}

fn flat_mut(memory: &mut [Line]) -> &mut [f64] {
    // SAFETY: as above, and the borrow is exclusive.
    unsafe { std::slice::from_raw_parts_mut(memory.as_mut_ptr().cast::<f64>(), memory.len() * 8) }
}
