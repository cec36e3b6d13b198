//! The promised symmetries, as actions on slots.
//!
//! Every promise speaks of *rows*: lists of slots of equal length that move together. A row of `p[n, 3]` is the three
//! slots of one point; with `exchange (p, q)` a row is the slots of `p[i]` followed by those of `q[i]`; a row of a plain
//! family is one slot. All promises of a file together generate one group; two points that a member of it maps onto each
//! other are the same answer.

use rand::seq::SliceRandom;
use rand::{Rng, RngExt};

use super::Slot;

/// One promise.
#[derive(Clone, Debug, PartialEq)]
pub enum Symmetry {
    /// Any permutation of the rows.
    Exchange {
        /// The interchangeable rows.
        rows: Vec<Vec<usize>>,
    },
    /// The same displacement of all rows.
    Shift {
        /// The rows.
        rows: Vec<Vec<usize>>,
        /// For each column, its period where it is cyclic.
        periods: Vec<Option<f64>>,
    },
    /// A rotation of all rows about the origin; rows have 2 or 3 slots.
    Rotate {
        /// The rows.
        rows: Vec<Vec<usize>>,
    },
    /// A mirror image of all rows (the last column changes sign); rows have 2 or 3 slots.
    Mirror {
        /// The rows.
        rows: Vec<Vec<usize>>,
    },
    /// All slots change sign at once.
    Flip {
        /// The slots.
        slots: Vec<usize>,
    },
    /// The rows in the opposite order.
    Reverse {
        /// The rows, in order.
        rows: Vec<Vec<usize>>,
    },
    /// The rows renumbered cyclically.
    Cycle {
        /// The rows, in order.
        rows: Vec<Vec<usize>>,
    },
}

impl Symmetry {
    /// A random member of the group applied to a point of the landscape.
    ///
    /// Rotations are uniform: from a uniform unit vector of four dimensions as a quaternion (Shoemake 1992) in space,
    /// from a uniform unit vector in the plane. Shifts are up to a tenth of the start region.
    pub fn transform(&self, slots: &[Slot], at: &[f64], rng: &mut impl Rng) -> Vec<f64> {
        let mut image = at.to_vec();
        match self {
            Symmetry::Exchange { rows } => {
                let mut order: Vec<usize> = (0..rows.len()).collect();
                order.shuffle(rng);
                renumber(rows, at, &mut image, |row| order[row]);
            }
            Symmetry::Reverse { rows } => renumber(rows, at, &mut image, |row| rows.len() - 1 - row),
            Symmetry::Cycle { rows } => {
                let turn = rng.random_range(1..rows.len());
                renumber(rows, at, &mut image, |row| (row + turn) % rows.len());
            }
            Symmetry::Shift { rows, .. } => {
                for column in 0..rows[0].len() {
                    let slot = &slots[rows[0][column]];
                    let shift = 0.1 * (slot.start_upper - slot.start_lower) * (2.0 * rng.random::<f64>() - 1.0);
                    rows.iter().for_each(|row| image[row[column]] += shift);
                }
            }
            Symmetry::Rotate { rows } => {
                let matrix = random_rotation(rows[0].len(), rng);
                for row in rows {
                    for (i, &slot) in row.iter().enumerate() {
                        image[slot] = row.iter().enumerate().map(|(k, &from)| matrix[i][k] * at[from]).sum();
                    }
                }
            }
            Symmetry::Mirror { rows } => rows.iter().for_each(|row| {
                if let Some(&slot) = row.last() {
                    image[slot] = -at[slot];
                }
            }),
            Symmetry::Flip { slots } => slots.iter().for_each(|&slot| image[slot] = -at[slot]),
        }
        image
    }
}

fn renumber(rows: &[Vec<usize>], at: &[f64], image: &mut [f64], source: impl Fn(usize) -> usize) {
    for (row, slots) in rows.iter().enumerate() {
        for (&slot, &from) in slots.iter().zip(&rows[source(row)]) {
            image[slot] = at[from];
        }
    }
}

/// A uniform rotation in the plane or in space; the third row and column mean nothing in the plane.
pub fn random_rotation(dimensions: usize, rng: &mut impl Rng) -> [[f64; 3]; 3] {
    if dimensions == 2 {
        let [c, s] = unit_vector::<2>(rng);
        return [[c, -s, 0.0], [s, c, 0.0], [0.0, 0.0, 1.0]];
    }
    let [w, x, y, z] = unit_vector::<4>(rng);
    [
        [1.0 - 2.0 * (y * y + z * z), 2.0 * (x * y - w * z), 2.0 * (x * z + w * y)],
        [2.0 * (x * y + w * z), 1.0 - 2.0 * (x * x + z * z), 2.0 * (y * z - w * x)],
        [2.0 * (x * z - w * y), 2.0 * (y * z + w * x), 1.0 - 2.0 * (x * x + y * y)],
    ]
}

/// By rejection from the cube: nothing but products and a square root, so the bits are the same everywhere.
fn unit_vector<const N: usize>(rng: &mut impl Rng) -> [f64; N] {
    loop {
        let vector: [f64; N] = std::array::from_fn(|_| 2.0 * rng.random::<f64>() - 1.0);
        let square: f64 = vector.iter().map(|x| x * x).sum();
        if 1e-4 < square && square <= 1.0 {
            let length = square.sqrt();
            return vector.map(|x| x / length);
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::base::random::{Purpose, stream};

    #[test]
    fn rotations_keep_lengths_and_handedness() {
        let mut rng = stream(1, 0, 0, Purpose::Check);
        for dimensions in [2, 3] {
            let m = random_rotation(dimensions, &mut rng);
            let determinant = m[0][0] * (m[1][1] * m[2][2] - m[1][2] * m[2][1])
                - m[0][1] * (m[1][0] * m[2][2] - m[1][2] * m[2][0])
                + m[0][2] * (m[1][0] * m[2][1] - m[1][1] * m[2][0]);
            assert!((determinant - 1.0).abs() < 1e-14);
            for row in m {
                assert!((row.iter().map(|x| x * x).sum::<f64>() - 1.0).abs() < 1e-14);
            }
        }
    }
}
