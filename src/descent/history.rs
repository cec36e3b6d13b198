//! The limited memory: the last few steps with the changes of gradient that they met (Nocedal 1980).

use super::vectors::{add_scaled, dot};

/// Pairs remembered, times unknowns: what a step may cost. In few unknowns more pairs are as cheap, and where stiff walls
/// and soft bends meet (a chain of ten bends) they save seven evaluations of eight.
const SIZE: usize = 240;
/// The fewest and the most pairs.
const PAIRS: (usize, usize) = (5, 20);

/// The last pairs of step and change, as the inverse of a curvature.
#[derive(Clone, Debug)]
pub struct History {
    steps: Vec<Vec<f64>>,
    changes: Vec<Vec<f64>>,
    /// `1 / (step . change)` of each pair.
    inverses: Vec<f64>,
    count: usize,
    newest: usize,
    /// `(step . change) / (change . change)` of the newest pair: the scale of the inverse curvature.
    scale: f64,
}

impl History {
    /// An empty memory for padded vectors of a length.
    pub fn new(length: usize) -> Self {
        let memory = (SIZE / length.max(1)).clamp(PAIRS.0, PAIRS.1);
        History {
            steps: vec![vec![0.0; length]; memory],
            changes: vec![vec![0.0; length]; memory],
            inverses: vec![0.0; memory],
            count: 0,
            newest: memory - 1,
            scale: 1.0,
        }
    }

    /// Forgets everything.
    pub fn clear(&mut self) {
        self.count = 0;
    }

    /// Whether nothing is remembered.
    pub fn is_empty(&self) -> bool {
        self.count == 0
    }

    /// Remembers a pair, written by `fill` into the vectors it is given; unless its curvature is not safely positive.
    pub fn remember(&mut self, fill: impl FnOnce(&mut [f64], &mut [f64])) {
        let place = (self.newest + 1) % self.steps.len();
        fill(&mut self.steps[place], &mut self.changes[place]);
        let (step, change) = (&self.steps[place], &self.changes[place]);
        let (curvature, square, length) = (dot(step, change), dot(change, change), dot(step, step));
        // NaN fails too.
        if !(curvature > 1e-10 * (square * length).sqrt()) || !square.is_finite() {
            // The oldest pair stood in this place, if the memory was full.
            self.count = self.count.min(self.steps.len() - 1);
            return;
        }
        self.inverses[place] = 1.0 / curvature;
        self.scale = curvature / square;
        self.newest = place;
        self.count = (self.count + 1).min(self.steps.len());
    }

    /// Turns a gradient into the step to the minimum of the remembered curvature, in place: the two-loop recursion.
    pub fn step(&self, gradient: &mut [f64]) {
        let mut weights = [0.0; PAIRS.1];
        let memory = self.steps.len();
        let places = (0..self.count).map(|age| (self.newest + memory - age) % memory);
        for place in places.clone() {
            weights[place] = self.inverses[place] * dot(&self.steps[place], gradient);
            add_scaled(gradient, -weights[place], &self.changes[place]);
        }
        let scale = -self.scale;
        gradient.iter_mut().for_each(|x| *x *= scale);
        for place in places.rev() {
            let back = self.inverses[place] * dot(&self.changes[place], gradient);
            add_scaled(gradient, -weights[place] - back, &self.steps[place]);
        }
    }
}
