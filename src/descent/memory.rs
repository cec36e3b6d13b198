//! The limited memory of a block of descents: the last few steps with the changes of gradient that they met (Nocedal
//! 1980).
//!
//! All lanes of a block share the place of the newest pair, which moves on with every evaluation. A lane whose trial was
//! refused leaves its pair void, so its memory is of the last evaluations rather than of the last steps; with seven
//! places that takes fewer evaluations than five pairs of the usual kind.

use crate::kernel::lanes::algebra::{BLOCK, Lanes, Memory, Short, Summed};

/// Pairs remembered.
const PAIRS: usize = 7;

/// A pair is void unless its curvature is safely positive: the cosine between step and change.
const LEAST_COSINE: f32 = 1e-6;

/// The last pairs of step and change of each lane.
pub struct Pairs {
    /// Rows of a vector.
    length: usize,
    steps: Vec<Short>,
    changes: Vec<Short>,
    /// `1 / (step . change)` of each pair; 0 where it is void.
    inverses: [Short; PAIRS],
    /// What the change of each pair was multiplied by.
    downs: [Lanes; PAIRS],
    newest: usize,
    /// `(step . change) / (change . change)` of the newest pair that is not void: the scale of the inverse curvature.
    scale: Lanes,
    ratios: [Short; PAIRS],
}

impl Pairs {
    /// An empty memory for vectors of so many rows.
    pub fn new(length: usize) -> Self {
        Pairs {
            length,
            steps: vec![Short::ZERO; PAIRS * length],
            changes: vec![Short::ZERO; PAIRS * length],
            inverses: [Short::ZERO; PAIRS],
            downs: [Lanes::ZERO; PAIRS],
            newest: 0,
            scale: Lanes([1.0; BLOCK]),
            ratios: [Short::ZERO; PAIRS],
        }
    }

    /// Forgets everything about a lane.
    pub fn clear(&mut self, lane: usize) {
        self.steps.iter_mut().chain(&mut self.changes).for_each(|row| row.0[lane] = 0.0);
        self.inverses.iter_mut().for_each(|inverse| inverse.0[lane] = 0.0);
    }

    /// Whether nothing is remembered about a lane.
    pub fn is_empty(&self, lane: usize) -> bool {
        self.inverses.iter().all(|inverse| inverse.0[lane] == 0.0)
    }

    /// The scale of a lane's inverse curvature.
    pub fn scale(&self, lane: usize) -> f64 {
        self.scale.0[lane]
    }

    /// Moves on by one place, where all pairs are void; gives it to be filled.
    pub fn advance(&mut self) -> (&mut [Short], &mut [Short]) {
        self.newest = (self.newest + 1) % PAIRS;
        self.inverses[self.newest] = Short::ZERO;
        let rows = self.newest * self.length..(self.newest + 1) * self.length;
        (&mut self.steps[rows.clone()], &mut self.changes[rows])
    }

    /// Fills the newest place with zeros.
    pub fn leave_void(&mut self) {
        let rows = self.newest * self.length..(self.newest + 1) * self.length;
        self.steps[rows.clone()].fill(Short::ZERO);
        self.changes[rows].fill(Short::ZERO);
    }

    /// Makes a lane's newest pair count, if its curvature is safely positive; `down` is what its change was multiplied
    /// by.
    pub fn remember(&mut self, lane: usize, sums: &Summed, down: f64) {
        let (curvature, square, length) = (sums.curvature.0[lane], sums.square.0[lane], sums.length.0[lane]);
        let inverse = 1.0 / curvature;
        // NaN fails too.
        if !(curvature > LEAST_COSINE * (square.sqrt() * length.sqrt())) || !square.is_finite() || !inverse.is_finite()
        {
            let rows = self.newest * self.length..(self.newest + 1) * self.length;
            let void = self.steps[rows.clone()].iter_mut().chain(&mut self.changes[rows]);
            void.for_each(|row| row.0[lane] = 0.0);
            return;
        }
        self.inverses[self.newest].0[lane] = inverse;
        self.downs[self.newest].0[lane] = down;
        self.scale.0[lane] = f64::from(curvature) / f64::from(square) * down;
    }

    /// The memory as the algebra wants it.
    pub fn memory(&mut self) -> Memory<'_> {
        let per_scale = self.scale.0.map(|scale| 1.0 / scale);
        for (ratio, (inverse, down)) in self.ratios.iter_mut().zip(self.inverses.iter().zip(&self.downs)) {
            for lane in 0..BLOCK {
                let weight = (down.0[lane] * per_scale[lane]) as f32;
                ratio.0[lane] = if inverse.0[lane] == 0.0 { 0.0 } else { weight };
            }
        }
        Memory {
            steps: &self.steps,
            changes: &self.changes,
            inverses: &self.inverses,
            ratios: &self.ratios,
            newest: self.newest,
        }
    }
}
