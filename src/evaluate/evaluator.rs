//! One thread's way to evaluate: lane machines of several widths over one kernel.

use std::sync::Arc;

use crate::kernel::{Kernel, LaneMachine, Role};

/// The most points that one call evaluates.
pub const MAX_LANES: usize = 32;

/// The widths of the machines. A narrow machine serves a batch that would leave most lanes of a wide one idle.
const WIDTHS: [usize; 4] = [4, 8, 16, 32];

/// Evaluates points of one landscape; owned by one thread.
pub struct Evaluator {
    kernel: Arc<Kernel>,
    gradient: [Option<LaneMachine>; 4],
    curvature: Option<LaneMachine>,
    shown: Option<LaneMachine>,
    last: usize,
}

impl Evaluator {
    /// An evaluator over a compiled kernel. Machines are set up when first needed.
    pub fn new(kernel: &Arc<Kernel>) -> Self {
        Evaluator { kernel: kernel.clone(), gradient: [None, None, None, None], curvature: None, shown: None, last: 0 }
    }

    /// The number of unknowns.
    pub fn n_unknowns(&self) -> usize {
        self.kernel.n_unknowns
    }

    /// Gets a machine with at least so many lanes (at most [`MAX_LANES`]) ready; gives its width. Fill
    /// [`Evaluator::points_mut`], [`Evaluator::run`], then read the answers.
    pub fn prepare(&mut self, lanes: usize) -> usize {
        debug_assert!(lanes <= MAX_LANES);
        self.last = WIDTHS.iter().position(|&width| lanes <= width).unwrap_or(WIDTHS.len() - 1);
        let width = WIDTHS[self.last];
        self.gradient[self.last].get_or_insert_with(|| LaneMachine::new(&self.kernel.gradient, width));
        width
    }

    /// The points of the machine that is ready: a row for each unknown, one number a lane.
    pub fn points_mut(&mut self) -> &mut [f64] {
        self.gradient[self.last].as_mut().map_or(&mut [], |machine| machine.rows_mut(Role::Unknowns))
    }

    /// The same, to read.
    pub fn points(&self) -> &[f64] {
        self.rows(Role::Unknowns)
    }

    /// Evaluates all lanes of the machine that is ready.
    pub fn run(&mut self) {
        if let Some(machine) = &mut self.gradient[self.last] {
            machine.run();
        }
    }

    /// The values, one a lane.
    pub fn values(&self) -> &[f64] {
        self.rows(Role::Value)
    }

    /// The gradients: a row for each unknown, one number a lane.
    pub fn gradients(&self) -> &[f64] {
        self.rows(Role::Gradient)
    }

    fn rows(&self, role: Role) -> &[f64] {
        self.gradient[self.last].as_ref().map_or(&[], |machine| machine.rows(role))
    }

    /// Writes a point into a lane.
    pub fn put(&mut self, lane: usize, point: &[f64]) {
        let width = WIDTHS[self.last];
        for (row, &value) in self.points_mut().chunks_exact_mut(width).zip(point) {
            row[lane] = value;
        }
    }

    /// The point in a lane.
    pub fn point(&self, lane: usize) -> Vec<f64> {
        self.points().chunks_exact(WIDTHS[self.last]).map(|row| row[lane]).collect()
    }

    /// Evaluates `count` points (at most [`MAX_LANES`], at least 1); `point(k)` is the k-th, of one number per unknown.
    /// Read the answers with [`Evaluator::value`] and [`Evaluator::read_gradient`] before the next call.
    pub fn evaluate<'a>(&mut self, count: usize, point: impl Fn(usize) -> &'a [f64]) {
        let width = self.prepare(count);
        for lane in 0..width {
            // Idle lanes repeat the first point: a usual one, which cannot be slow by being subnormal or infinite.
            self.put(lane, point(if lane < count { lane } else { 0 }));
        }
        self.run();
    }

    /// The value of the k-th point of the last call.
    pub fn value(&self, k: usize) -> f64 {
        self.values().get(k).copied().unwrap_or(f64::NAN)
    }

    /// Writes the gradient at the k-th point of the last call.
    pub fn read_gradient(&self, k: usize, gradient: &mut [f64]) {
        let width = WIDTHS[self.last];
        for (row, entry) in self.gradients().chunks_exact(width).zip(gradient) {
            *entry = row[k];
        }
    }

    /// Value and gradient at one point.
    pub fn value_and_gradient(&mut self, at: &[f64]) -> (f64, Vec<f64>) {
        self.evaluate(1, |_| at);
        let mut gradient = vec![0.0; at.len()];
        self.read_gradient(0, &mut gradient);
        (self.value(0), gradient)
    }

    /// The matrix of second derivatives at a point, row by row (n * n numbers): forward over reverse, one lane for each
    /// of n unit directions, then made symmetric by averaging (the two triangles differ in rounding only).
    pub fn curvature(&mut self, at: &[f64]) -> Vec<f64> {
        let n = at.len();
        let width = WIDTHS.into_iter().find(|&width| n <= width).unwrap_or(16);
        let machine = self.curvature.get_or_insert_with(|| LaneMachine::new(&self.kernel.curvature, width));
        let mut matrix = vec![0.0; n * n];
        for first in (0..n).step_by(width) {
            for (slot, &value) in at.iter().enumerate() {
                machine.rows_mut(Role::Unknowns)[slot * width..][..width].fill(value);
            }
            let directions = machine.rows_mut(Role::Direction);
            directions.fill(0.0);
            for lane in 0..width.min(n - first) {
                directions[(first + lane) * width + lane] = 1.0;
            }
            machine.run();
            let rows = machine.rows(Role::Curvature);
            for lane in 0..width.min(n - first) {
                for slot in 0..n {
                    matrix[slot * n + first + lane] = rows[slot * width + lane];
                }
            }
        }
        for row in 0..n {
            for column in 0..row {
                let mean = 0.5 * (matrix[row * n + column] + matrix[column * n + row]);
                matrix[row * n + column] = mean;
                matrix[column * n + row] = mean;
            }
        }
        matrix
    }

    /// The shown quantities at a point, in the order of their elements; none where the problem shows none.
    pub fn shown(&mut self, at: &[f64]) -> Vec<f64> {
        let Some(program) = &self.kernel.shown else { return Vec::new() };
        let width = WIDTHS[0];
        let machine = self.shown.get_or_insert_with(|| LaneMachine::new(program, width));
        for (slot, &value) in at.iter().enumerate() {
            machine.rows_mut(Role::Unknowns)[slot * width..][..width].fill(value);
        }
        machine.run();
        machine.rows(Role::Shown).iter().step_by(width).copied().collect()
    }
}
