//! The lane interpreter: every instruction over an array of lanes.
//!
//! A verified program becomes flat code over one block of memory, in rows of K lanes: the registers first, then the
//! buffers. An operand is a row, fixed or moved by a *cursor*, the value of an index that its loop keeps up to date; so
//! what is loaded from a read-only buffer is never copied, and no index is worked out twice.
//!
//! The loop over the code is compiled three times, for AVX-512, for AVX2 and for the baseline, and chosen when a machine
//! is made. All give the same bits: there is no fused multiply-add, and a lane never looks at another.
//!
//! The flat code is meant to be the input of a generator of machine code too: straight runs of simple operations on
//! rows, loops with known cursors, nothing that depends on a lane.
//!
//! - `code`: the flat code and how it is made.
//! - `run`: the loop over it, in three builds.

mod code;
mod run;

use std::sync::Arc;

use super::program::Role;
use super::verify::Verified;

pub use run::Build;

use code::Code;

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
    memory: Vec<f64>,
    state: run::State,
}

impl LaneMachine {
    /// A machine with so many lanes: 4, or a multiple of 8. The best build that this processor can run is chosen.
    ///
    /// # Panics
    /// For another number of lanes.
    pub fn new(program: &Arc<Verified>, lanes: usize) -> Self {
        LaneMachine::with_build(program, lanes, Build::best())
    }

    /// The same with a given build; one that the processor cannot run is replaced by the best that it can.
    ///
    /// # Panics
    /// For a number of lanes that is neither 4 nor a multiple of 8.
    pub fn with_build(program: &Arc<Verified>, lanes: usize, build: Build) -> Self {
        assert!(lanes == 4 || lanes > 0 && lanes.is_multiple_of(8), "4 lanes, or a multiple of 8");
        let code = Code::new(program.program());
        let memory = vec![0.0; code.rows * lanes];
        let state = run::State::new(&code);
        LaneMachine { program: program.clone(), code, lanes, build: build.min(Build::best()), memory, state }
    }

    /// The number of lanes.
    pub fn n_lanes(&self) -> usize {
        self.lanes
    }

    /// The rows of the buffer with a role: row r, lane l at `r * n_lanes + l`. Empty where the program has no such buffer.
    pub fn rows_mut(&mut self, role: Role) -> &mut [f64] {
        let range = self.range(role);
        &mut self.memory[range]
    }

    /// The same, to read.
    pub fn rows(&self, role: Role) -> &[f64] {
        &self.memory[self.range(role)]
    }

    /// Runs the program once on all lanes.
    pub fn run(&mut self) {
        let program = self.program.program();
        run::run(self.build, &self.code, program, self.lanes, &mut self.memory, &mut self.state);
    }

    fn range(&self, role: Role) -> std::ops::Range<usize> {
        let program = self.program.program();
        match program.buffer(role) {
            None => 0..0,
            Some(id) => {
                let first = self.code.buffer_rows[id.0 as usize];
                first * self.lanes..(first + program.buffers[id.0 as usize].length) * self.lanes
            }
        }
    }
}
