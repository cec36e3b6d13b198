//! The limited memory of a block of descents: the last few steps with the changes of gradient that they met (Nocedal
//! 1980).
//!
//! All lanes of a block share the place of the newest pair, which moves on with every evaluation. A lane whose trial was
//! refused leaves its pair void, so its memory is of the last evaluations rather than of the last steps; with two
//! places more that takes fewer evaluations than the usual kind.

use crate::kernel::lanes::algebra::{BLOCK, Lanes, Memory, Short, Summed};

/// Pairs remembered, times unknowns: what a step may cost. In few unknowns more pairs are as cheap, and where stiff walls
/// and soft bends meet (a chain of ten bends) they save seven evaluations of eight.
const SIZE: usize = 240;
/// The fewest and the most pairs.
const PAIRS: (usize, usize) = (7, 20);

/// A pair is void unless its curvature is safely positive: the cosine between step and change.
const LEAST_COSINE: f32 = 1e-6;

/// The last pairs of step and change of each lane.
pub struct Pairs {
    /// Rows of a vector.
    length: usize,
    steps: Vec<Short>,
    changes: Vec<Short>,
    /// `1 / (step . change)` of each pair; 0 where it is void.
    inverses: Vec<Short>,
    /// What the change of each pair was multiplied by.
    downs: Vec<Lanes>,
    newest: usize,
    /// For each lane, a bit for each pair that is not void.
    kept: [u32; BLOCK],
    /// `(step . change) / (change . change)` of the newest pair that is not void: the scale of the inverse curvature.
    scale: Lanes,
}

impl Pairs {
    /// An empty memory for vectors of so many rows.
    pub fn new(length: usize) -> Self {
        let n_pairs = (SIZE / length.max(1)).clamp(PAIRS.0, PAIRS.1);
        Pairs {
            length,
            steps: vec![Short::ZERO; n_pairs * length],
            changes: vec![Short::ZERO; n_pairs * length],
            inverses: vec![Short::ZERO; n_pairs],
            downs: vec![Lanes::ZERO; n_pairs],
            newest: 0,
            kept: [0; BLOCK],
            scale: Lanes([1.0; BLOCK]),
        }
    }

    /// Forgets everything about a lane.
    pub fn clear(&mut self, lane: usize) {
        self.steps.iter_mut().chain(&mut self.changes).for_each(|row| row.0[lane] = 0.0);
        self.inverses.iter_mut().for_each(|inverse| inverse.0[lane] = 0.0);
        self.downs.iter_mut().for_each(|down| down.0[lane] = 0.0);
        self.scale.0[lane] = 1.0;
        self.kept[lane] = 0;
    }

    /// Takes over what another memory of the same size remembers about a lane, pair by pair from the newest.
    pub fn take_over(&mut self, lane: usize, other: &Pairs, other_lane: usize) {
        let n_pairs = self.inverses.len();
        self.kept[lane] = 0;
        self.scale.0[lane] = other.scale.0[other_lane];
        for age in 0..n_pairs {
            let [to, from] = [self.newest, other.newest].map(|newest| (newest + n_pairs - age) % n_pairs);
            self.inverses[to].0[lane] = other.inverses[from].0[other_lane];
            self.downs[to].0[lane] = other.downs[from].0[other_lane];
            self.kept[lane] |= (other.kept[other_lane] >> from & 1) << to;
            for row in 0..self.length {
                let (to, from) = (to * self.length + row, from * self.length + row);
                self.steps[to].0[lane] = other.steps[from].0[other_lane];
                self.changes[to].0[lane] = other.changes[from].0[other_lane];
            }
        }
    }

    /// Whether nothing is remembered about a lane.
    pub fn is_empty(&self, lane: usize) -> bool {
        self.kept[lane] == 0
    }

    /// The scale of a lane's inverse curvature.
    pub fn scale(&self, lane: usize) -> f64 {
        self.scale.0[lane]
    }

    /// Moves on by one place, where all pairs are void; gives it to be filled.
    pub fn advance(&mut self) -> (&mut [Short], &mut [Short]) {
        self.newest = (self.newest + 1) % self.inverses.len();
        self.inverses[self.newest] = Short::ZERO;
        self.downs[self.newest] = Lanes::ZERO;
        self.kept.iter_mut().for_each(|kept| *kept &= !(1 << self.newest));
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
        self.kept[lane] |= 1 << self.newest;
        self.scale.0[lane] = f64::from(curvature) / f64::from(square) * down;
    }

    /// The memory as the algebra wants it.
    pub fn memory(&self) -> Memory<'_> {
        Memory {
            steps: &self.steps,
            changes: &self.changes,
            inverses: &self.inverses,
            downs: &self.downs,
            per_scale: Lanes(self.scale.0.map(|scale| 1.0 / scale)),
            newest: self.newest,
        }
    }
}
