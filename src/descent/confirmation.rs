//! The polish and the stiffness test.
//!
//! A converged point gets its exact matrix of second derivatives once. With the declared rigid motions and the slots that
//! a bound holds taken out, Newton steps with that one matrix bring the gradient to rounding level: each costs one
//! gradient, and so near the minimum each gains several digits. The eigenvalues say what the point is.
//!
//! Everything is measured in the units of the region; the spectrum is told in the unknowns' own units.

use std::sync::Arc;

use super::linear_algebra::{cholesky, eigenvalues, eigenvector, lift, solve};
use super::region::Region;

/// An eigenvalue below this, relative to the largest, is as good as 0. The softest true mode of small clusters is 1e-5
/// of the stiffest; rounding is 1e-14.
const FLAT: f64 = 1e-10;
/// Polishing steps with one matrix.
const MOST_STEPS: u32 = 10;
/// Matrices for one point.
const MOST_MATRICES: u32 = 4;
/// A residual that ends the polish.
const CLEAN: f64 = 1e-15;
/// A residual that is good enough when it no longer falls.
const GOOD: f64 = 1e-10;
/// How far from a saddle a descent starts again, in units of the region.
const ESCAPE: f64 = 0.01;

/// What a confirmation wants to know.
#[derive(Debug)]
pub enum Ask<'a> {
    /// Value and gradient at a point.
    Gradient(&'a [f64]),
    /// The matrix of second derivatives at a point, row by row.
    Curvature(&'a [f64]),
}

/// What a point is.
#[derive(Clone, Debug, PartialEq)]
pub enum Judgement {
    /// A minimum.
    Minimum {
        /// The value.
        value: f64,
        /// The polished point.
        at: Vec<f64>,
        /// The eigenvalues of the second derivatives in the free slots, ascending, in the unknowns' own units; exactly 0
        /// for each declared motion.
        stiffness: Vec<f64>,
        /// The displacement, in units of the region, that would explain what is left of the gradient: its largest
        /// element over the largest stiffness.
        residual: f64,
        /// The slots that a bound holds.
        active: Vec<usize>,
        /// Whether some stiffness vanishes beyond the declared motions: the minimum is not isolated, as far as second
        /// derivatives can tell.
        flat: bool,
    },
    /// A saddle; a descent from here goes down on.
    Saddle {
        /// A start a little down the softest direction.
        escape: Vec<f64>,
    },
    /// The polish failed, or led out of the landscape.
    Failed,
}

#[derive(Clone, Copy, PartialEq)]
enum Stage {
    Gradient,
    Curvature,
    Polish,
}

/// A confirmation under way.
pub struct Confirmation {
    region: Arc<Region>,
    stage: Stage,
    /// The best point so far, with value, gradient (own units) and residual.
    at: Vec<f64>,
    value: f64,
    gradient: Vec<f64>,
    residual: f64,
    trial: Vec<f64>,
    free: Vec<usize>,
    active: Vec<usize>,
    motions: Vec<Vec<f64>>,
    factor: Vec<f64>,
    stiffest: f64,
    stiffness: Vec<f64>,
    flat: bool,
    steps: u32,
    matrices: u32,
    judgement: Option<Judgement>,
}

impl Confirmation {
    /// A confirmation of a converged point.
    pub fn new(region: &Arc<Region>, at: &[f64]) -> Self {
        Confirmation {
            region: region.clone(),
            stage: Stage::Gradient,
            at: at.to_vec(),
            value: f64::NAN,
            gradient: Vec::new(),
            residual: f64::INFINITY,
            trial: at.to_vec(),
            free: Vec::new(),
            active: Vec::new(),
            motions: Vec::new(),
            factor: Vec::new(),
            stiffest: 0.0,
            stiffness: Vec::new(),
            flat: false,
            steps: 0,
            matrices: 0,
            judgement: None,
        }
    }

    /// What is wanted next.
    pub fn ask(&self) -> Ask<'_> {
        match self.stage {
            Stage::Curvature => Ask::Curvature(&self.at),
            _ => Ask::Gradient(&self.trial),
        }
    }

    /// The judgement, once there is one.
    pub fn judgement(&self) -> Option<&Judgement> {
        self.judgement.as_ref()
    }

    /// Takes value and gradient at the point asked for.
    pub fn tell_gradient(&mut self, value: f64, gradient: &[f64]) {
        if !value.is_finite() || gradient.iter().any(|g| !g.is_finite()) {
            return self.stop_polish();
        }
        if self.stage == Stage::Gradient {
            self.value = value;
            self.gradient = gradient.to_vec();
            self.split_slots();
            self.stage = Stage::Curvature;
            return;
        }
        let residual = self.residual_of(gradient);
        let before = self.residual;
        if residual < before {
            self.at.copy_from_slice(&self.trial);
            self.value = value;
            self.gradient.copy_from_slice(gradient);
            self.residual = residual;
        }
        if self.residual <= CLEAN || residual >= 0.5 * before && self.residual <= GOOD {
            return self.conclude();
        }
        if residual >= 0.5 * before || self.steps >= MOST_STEPS {
            // The matrix was taken too far away.
            return self.renew();
        }
        self.step();
    }

    /// Takes the matrix of second derivatives at the point asked for, row by row.
    pub fn tell_curvature(&mut self, matrix: &[f64]) {
        let all = self.region.n_unknowns();
        self.matrices += 1;
        let scale = &self.region.scale;
        let n = self.free.len();
        let mut scaled = vec![0.0; n * n];
        for (row, &a) in self.free.iter().enumerate() {
            for (column, &b) in self.free.iter().enumerate() {
                scaled[row * n + column] = matrix[a * all + b] * scale[a] * scale[b];
            }
        }
        if scaled.iter().any(|x| !x.is_finite()) {
            self.judgement = Some(Judgement::Failed);
            return;
        }
        self.motions = self.free_motions();
        let lifted = lift(&scaled, n, &self.motions, beyond(&scaled, n));
        let mut spectrum = eigenvalues(&lifted, n);
        spectrum.truncate(n - self.motions.len());
        self.stiffest = spectrum.last().copied().unwrap_or(0.0).max(0.0);
        let least = spectrum.first().copied().unwrap_or(1.0);
        let floor = FLAT * self.stiffest.max(spectrum.first().map_or(0.0, |x| -x));
        if least < -floor {
            self.judgement = Some(self.saddle(&lifted, n, least));
            return;
        }
        self.flat = least <= floor;
        self.stiffness = self.own_units(matrix, &spectrum);
        self.residual = self.residual_of(&self.gradient);
        // A flat direction is lifted a little, so that the step along it stays finite.
        let mut solvable = lifted;
        if self.flat {
            (0..n).for_each(|k| solvable[k * n + k] += 1e-6 * self.stiffest + f64::MIN_POSITIVE);
        }
        match cholesky(&solvable, n) {
            Some(factor) => self.factor = factor,
            None => return self.conclude(),
        }
        self.stage = Stage::Polish;
        self.steps = 0;
        if self.residual <= CLEAN || n == 0 { self.conclude() } else { self.step() }
    }

    /// A slot is held by a bound when it stands there and the gradient pushes it outward.
    fn split_slots(&mut self) {
        let held = |slot: usize| {
            let (x, g) = (self.at[slot], self.gradient[slot]);
            x <= self.region.lower[slot] && g > 0.0 || x >= self.region.upper[slot] && g < 0.0
        };
        (self.active, self.free) = (0..self.at.len()).partition(|&slot| held(slot));
    }

    /// The declared motions in the free slots; one that would move a held slot is none here.
    fn free_motions(&self) -> Vec<Vec<f64>> {
        let all = self.region.motions(&self.at);
        if self.active.is_empty() {
            return all;
        }
        let moves_held = |motion: &Vec<f64>| self.active.iter().any(|&slot| motion[slot].abs() > 1e-9);
        let free = all.into_iter().filter(|motion| !moves_held(motion));
        free.map(|motion| self.free.iter().map(|&slot| motion[slot]).collect()).collect()
    }

    fn residual_of(&self, gradient: &[f64]) -> f64 {
        let largest =
            self.free.iter().map(|&slot| (gradient[slot] * self.region.scale[slot]).abs()).fold(0.0, f64::max);
        if largest == 0.0 { 0.0 } else { largest / self.stiffest.max(f64::MIN_POSITIVE) }
    }

    fn step(&mut self) {
        self.steps += 1;
        let n = self.free.len();
        let mut step: Vec<f64> = self.free.iter().map(|&slot| -self.gradient[slot] * self.region.scale[slot]).collect();
        solve(&self.factor, n, &mut step);
        let longest = step.iter().fold(0.0, |most: f64, x| most.max(x.abs()));
        let shorten = if longest > 0.02 { 0.02 / longest } else { 1.0 };
        self.trial.copy_from_slice(&self.at);
        for (&slot, x) in self.free.iter().zip(&step) {
            let moved = self.at[slot] + shorten * x * self.region.scale[slot];
            self.trial[slot] = moved.max(self.region.lower[slot]).min(self.region.upper[slot]);
        }
        if self.trial == self.at {
            self.conclude();
        }
    }

    fn renew(&mut self) {
        if self.matrices >= MOST_MATRICES {
            return if self.residual <= 1e-7 { self.conclude() } else { self.judgement = Some(Judgement::Failed) };
        }
        self.split_slots();
        self.stage = Stage::Curvature;
    }

    fn stop_polish(&mut self) {
        if self.stage == Stage::Polish && self.residual <= GOOD {
            self.conclude();
        } else {
            self.judgement = Some(Judgement::Failed);
        }
    }

    fn conclude(&mut self) {
        let mut at = self.at.clone();
        self.region.wrap(&mut at);
        self.judgement = Some(Judgement::Minimum {
            value: self.value,
            at,
            stiffness: self.stiffness.clone(),
            residual: self.residual,
            active: self.active.clone(),
            flat: self.flat,
        });
    }

    fn saddle(&self, lifted: &[f64], n: usize, least: f64) -> Judgement {
        let direction = eigenvector(lifted, n, least);
        let longest = direction.iter().fold(0.0, |most: f64, x| most.max(x.abs()));
        // Down the slope that is left, or to a fixed side where there is none.
        let slope: f64 =
            self.free.iter().zip(&direction).map(|(&slot, d)| self.gradient[slot] * self.region.scale[slot] * d).sum();
        let side = if slope > 0.0 { -1.0 } else { 1.0 };
        let mut escape = self.at.clone();
        for (&slot, d) in self.free.iter().zip(&direction) {
            let moved = self.at[slot] + side * ESCAPE / longest * d * self.region.scale[slot];
            escape[slot] = moved.max(self.region.lower[slot]).min(self.region.upper[slot]);
        }
        Judgement::Saddle { escape }
    }

    /// The spectrum in the unknowns' own units, with a 0 for each motion.
    fn own_units(&self, matrix: &[f64], spectrum: &[f64]) -> Vec<f64> {
        let all = self.region.n_unknowns();
        let n = self.free.len();
        let mut own: Vec<f64> = match self.region.uniform {
            Some(unit) => spectrum.iter().map(|x| x / (unit * unit)).collect(),
            None => {
                let mut part = vec![0.0; n * n];
                for (row, &a) in self.free.iter().enumerate() {
                    for (column, &b) in self.free.iter().enumerate() {
                        part[row * n + column] = matrix[a * all + b];
                    }
                }
                // The motions in own units: scaled back, and made orthonormal again.
                let motions = own_motions(&self.motions, &self.free, &self.region.scale);
                let mut own = eigenvalues(&lift(&part, n, &motions, beyond(&part, n)), n);
                own.truncate(n - motions.len());
                own
            }
        };
        own.extend(self.motions.iter().map(|_| 0.0));
        own.sort_by(f64::total_cmp);
        own
    }
}

/// A stiffness beyond all eigenvalues: twice the largest sum of sizes in a row (Gershgorin 1931).
fn beyond(matrix: &[f64], n: usize) -> f64 {
    let sums = matrix.chunks_exact(n.max(1)).map(|row| row.iter().map(|x| x.abs()).sum::<f64>());
    // Not 0, so that even a matrix of zeros gets a factor.
    2.0 * sums.fold(0.0, f64::max) + f64::MIN_POSITIVE
}

fn own_motions(motions: &[Vec<f64>], free: &[usize], scale: &[f64]) -> Vec<Vec<f64>> {
    let mut own: Vec<Vec<f64>> = Vec::new();
    for motion in motions {
        let mut direction: Vec<f64> = motion.iter().zip(free).map(|(x, &slot)| x * scale[slot]).collect();
        for _ in 0..2 {
            for other in &own {
                let overlap: f64 = other.iter().zip(&direction).map(|(a, b)| a * b).sum();
                direction.iter_mut().zip(other).for_each(|(a, b)| *a -= overlap * b);
            }
        }
        let length = direction.iter().map(|x| x * x).sum::<f64>().sqrt();
        if length > 0.0 {
            direction.iter_mut().for_each(|x| *x /= length);
            own.push(direction);
        }
    }
    own
}
