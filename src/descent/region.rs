//! Where a descent may go, in what units it measures, and which rigid motions cost nothing.

use crate::landscape::Slot;
use crate::landscape::symmetry::Symmetry;

/// The region of a landscape, as descents see it.
#[derive(Clone, Debug)]
pub struct Region {
    /// For each slot, its lower bound; minus infinity for cyclic ones, which wrap only at the end.
    pub lower: Vec<f64>,
    /// For each slot, its upper bound; infinity for cyclic ones.
    pub upper: Vec<f64>,
    /// For each slot, its natural unit: the width of its start region. Rows that rotate together have one unit, since
    /// another would bend their geometry.
    pub scale: Vec<f64>,
    /// The unit, where all slots have the same.
    pub uniform: Option<f64>,
    /// For cyclic slots, lower end and period.
    cyclic: Vec<Option<(f64, f64)>>,
    /// For bounded slots, the middle of the box.
    middle: Vec<f64>,
    motions: Vec<Motion>,
}

#[derive(Clone, Debug)]
enum Motion {
    Shift(Vec<Vec<usize>>),
    Rotate(Vec<Vec<usize>>),
}

impl Region {
    /// The region of a landscape with these slots and promises.
    pub fn new(slots: &[Slot], symmetries: &[Symmetry]) -> Self {
        let mut scale: Vec<f64> = slots.iter().map(|slot| slot.start_upper - slot.start_lower).collect();
        let mut motions = Vec::new();
        for symmetry in symmetries {
            match symmetry {
                Symmetry::Shift { rows, .. } => motions.push(Motion::Shift(rows.clone())),
                Symmetry::Rotate { rows } => {
                    let widest = rows.iter().flatten().map(|&slot| scale[slot]).fold(0.0, f64::max);
                    rows.iter().flatten().for_each(|&slot| scale[slot] = widest);
                    motions.push(Motion::Rotate(rows.clone()));
                }
                _ => {}
            }
        }
        let open = |slot: &Slot, bound: f64, infinity: f64| if slot.cyclic { infinity } else { bound };
        let uniform = scale.first().copied().filter(|first| scale.iter().all(|scale| scale == first));
        Region {
            lower: slots.iter().map(|slot| open(slot, slot.lower, f64::NEG_INFINITY)).collect(),
            upper: slots.iter().map(|slot| open(slot, slot.upper, f64::INFINITY)).collect(),
            cyclic: slots.iter().map(|slot| slot.cyclic.then_some((slot.lower, slot.upper - slot.lower))).collect(),
            middle: slots.iter().map(|slot| 0.5 * (slot.lower + slot.upper)).collect(),
            scale,
            uniform,
            motions,
        }
    }

    /// The number of unknowns.
    pub fn n_unknowns(&self) -> usize {
        self.scale.len()
    }

    /// Brings cyclic unknowns back between their ends.
    pub fn wrap(&self, at: &mut [f64]) {
        for (x, cyclic) in at.iter_mut().zip(&self.cyclic) {
            if let &Some((lower, period)) = cyclic {
                let turned = *x - period * ((*x - lower) / period).floor();
                // Rounding can leave a hair's breadth outside.
                *x = if turned < lower || turned >= lower + period { lower } else { turned };
            }
        }
    }

    /// The point with each shifted cloud in the middle of its box, if a cloud touches its box: the touch is then an
    /// accident of where the cloud drifted to. `None` where no cloud touches, or its middle is not known.
    pub fn recentre(&self, at: &[f64]) -> Option<Vec<f64>> {
        let mut moved: Option<Vec<f64>> = None;
        for motion in &self.motions {
            let Motion::Shift(rows) = motion else { continue };
            let touches = |&slot: &usize| at[slot] <= self.lower[slot] || at[slot] >= self.upper[slot];
            if !rows.iter().flatten().any(touches) || rows.iter().flatten().any(|&slot| !self.middle[slot].is_finite())
            {
                continue;
            }
            let moved = moved.get_or_insert_with(|| at.to_vec());
            for column in 0..rows[0].len() {
                let slots = || rows.iter().map(|row| row[column]);
                let (low, high) = slots().fold((f64::INFINITY, f64::NEG_INFINITY), |(low, high), slot| {
                    (f64::min(low, at[slot]), f64::max(high, at[slot]))
                });
                let middle = slots().map(|slot| self.middle[slot]).sum::<f64>() / rows.len() as f64;
                slots().for_each(|slot| moved[slot] += middle - 0.5 * (low + high));
            }
        }
        moved
    }

    /// The directions at a point, in units of the scales, along which the declared rigid motions move it: orthonormal,
    /// those that vanish there (the spin of a line about itself) left out. Each is as long as there are unknowns.
    pub fn motions(&self, at: &[f64]) -> Vec<Vec<f64>> {
        let n = self.n_unknowns();
        let mut found: Vec<Vec<f64>> = Vec::new();
        let mut add = |mut direction: Vec<f64>| {
            let before = norm(&direction);
            // Twice, since once leaves a trace where directions are nearly parallel.
            for _ in 0..2 {
                for other in &found {
                    let overlap: f64 = other.iter().zip(&direction).map(|(a, b)| a * b).sum();
                    direction.iter_mut().zip(other).for_each(|(a, b)| *a -= overlap * b);
                }
            }
            let after = norm(&direction);
            if after > 1e-6 * before && before > 0.0 {
                direction.iter_mut().for_each(|x| *x /= after);
                found.push(direction);
            }
        };
        for motion in &self.motions {
            match motion {
                Motion::Shift(rows) => {
                    for column in 0..rows[0].len() {
                        let mut direction = vec![0.0; n];
                        rows.iter().for_each(|row| direction[row[column]] = 1.0 / self.scale[row[column]]);
                        add(direction);
                    }
                }
                Motion::Rotate(rows) => {
                    let planes: &[(usize, usize)] =
                        if rows[0].len() == 2 { &[(0, 1)] } else { &[(0, 1), (1, 2), (2, 0)] };
                    // Rotations about the cloud's own middle differ from those about the origin by shifts only; where
                    // no shift is declared they are about the origin.
                    for &(a, b) in planes {
                        let mut direction = vec![0.0; n];
                        for row in rows {
                            direction[row[a]] = -at[row[b]] / self.scale[row[a]];
                            direction[row[b]] = at[row[a]] / self.scale[row[b]];
                        }
                        add(direction);
                    }
                }
            }
        }
        found
    }
}

fn norm(vector: &[f64]) -> f64 {
    vector.iter().map(|x| x * x).sum::<f64>().sqrt()
}
