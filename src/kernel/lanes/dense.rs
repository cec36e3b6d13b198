//! Dense symmetric matrices for confirmations, in three builds: only products, sums and square roots, in a fixed order.
//!
//! Matrices are stored row by row; rows and vectors are padded with zeros to a multiple of eight, so that loops have no
//! rest.

use super::Build;
use super::algebra::{Algebra, in_each_build};

/// Numbers taken at once.
const CHUNK: usize = 8;

/// The padded length of a vector of `n` numbers.
pub fn padded(n: usize) -> usize {
    n.next_multiple_of(CHUNK)
}

#[inline(always)]
fn product(left: &[f64], right: &[f64]) -> f64 {
    let mut sums = [0.0; CHUNK];
    for (a, b) in left.chunks_exact(CHUNK).zip(right.chunks_exact(CHUNK)) {
        for k in 0..CHUNK {
            sums[k] += a[k] * b[k];
        }
    }
    ((sums[0] + sums[4]) + (sums[2] + sums[6])) + ((sums[1] + sums[5]) + (sums[3] + sums[7]))
}

/// `row -= a * left + b * right`
#[inline(always)]
fn less_two(row: &mut [f64], a: f64, left: &[f64], b: f64, right: &[f64]) {
    let others = left.chunks_exact(CHUNK).zip(right.chunks_exact(CHUNK));
    for (row, (left, right)) in row.chunks_exact_mut(CHUNK).zip(others) {
        for k in 0..CHUNK {
            row[k] -= a * left[k] + b * right[k];
        }
    }
}

in_each_build! {
    /// The products of a matrix of `n` rows with some vectors, one after the other.
    images(matrix: &[f64], n: usize, vectors: &[f64]) -> Vec<f64> {
        let width = padded(n);
        let mut images = vec![0.0; vectors.len()];
        for row in 0..n {
            let a = &matrix[row * width..][..width];
            for (image, vector) in images.chunks_exact_mut(width).zip(vectors.chunks_exact(width)) {
                image[row] = product(a, vector);
            }
        }
        images
    }
}

in_each_build! {
    /// Takes `left right^T + right left^T` off a matrix of `n` rows for each pair of vectors.
    take_off(matrix: &mut [f64], n: usize, left: &[f64], right: &[f64]) -> () {
        let width = padded(n);
        for row in 0..n {
            let a = &mut matrix[row * width..][..width];
            for (left, right) in left.chunks_exact(width).zip(right.chunks_exact(width)) {
                less_two(a, left[row], right, right[row], left);
            }
        }
    }
}

in_each_build! {
    /// Reduces a matrix of `n` rows to three diagonals (Householder 1958): gives the diagonal, and what stands left of it
    /// (the first is 0). The matrix is used up.
    ///
    /// The change that a step makes to a row waits until the next step reads it, so that every row is passed over once a
    /// step.
    tridiagonal(matrix: &mut [f64], n: usize) -> (Vec<f64>, Vec<f64>) {
        let width = padded(n);
        let (mut diagonal, mut beside) = (vec![0.0; n], vec![0.0; n]);
        let (mut u, mut p) = (vec![0.0; width], vec![0.0; width]);
        let (mut next_u, mut next_p) = (vec![0.0; width], vec![0.0; width]);
        for k in (0..n).rev() {
            let used = padded(k + 1);
            // Row k, left of the diagonal, is turned onto its last element.
            let row = &mut matrix[k * width..][..used];
            less_two(row, u[k], &p, p[k], &u);
            diagonal[k] = row[k];
            if k == 0 {
                break;
            }
            let scale = row[..k].iter().fold(0.0, |most: f64, x| if x.abs() > most { x.abs() } else { most });
            let last = row[k - 1];
            next_u.fill(0.0);
            next_p.fill(0.0);
            beside[k] = last;
            let mut half_square = 0.0;
            if scale > 0.0 && k > 1 {
                for (u, x) in next_u.iter_mut().zip(&row[..k]) {
                    *u = x / scale;
                }
                let norm = product(&next_u[..used], &next_u[..used]).sqrt();
                let alpha = if last > 0.0 { -norm } else { norm };
                beside[k] = alpha * scale;
                next_u[k - 1] -= alpha;
                half_square = 0.5 * product(&next_u[..used], &next_u[..used]);
            }
            if !(half_square > 0.0) {
                next_u.fill(0.0);
            }
            for row in 0..k {
                let a = &mut matrix[row * width..][..used];
                less_two(a, u[row], &p, p[row], &u);
                next_p[row] = product(a, &next_u);
            }
            if half_square > 0.0 {
                next_p.iter_mut().for_each(|p| *p /= half_square);
                let overlap = product(&next_p[..used], &next_u[..used]) / (2.0 * half_square);
                next_p.iter_mut().zip(&next_u).for_each(|(p, u)| *p -= overlap * u);
            }
            std::mem::swap(&mut u, &mut next_u);
            std::mem::swap(&mut p, &mut next_p);
        }
        (diagonal, beside)
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::numbers::functions::sine;

    /// Every build gives the same bits.
    #[test]
    fn builds_agree() {
        for n in [1, 2, 7, 8, 13, 39] {
            let width = padded(n);
            let mut matrix = vec![0.0; n * width];
            for row in 0..n {
                for column in 0..n {
                    matrix[row * width + column] = sine((row * column) as f64) + sine((row + column) as f64);
                }
            }
            let vectors: Vec<f64> =
                (0..2 * width).map(|k| if k % width < n { sine((3 * k + 1) as f64) } else { 0.0 }).collect();
            let results = [Build::Baseline, Build::Avx2, Build::Avx512].map(|build| {
                let algebra = Algebra::with_build(build);
                let images = algebra.images(&matrix, n, &vectors);
                let mut less = matrix.clone();
                algebra.take_off(&mut less, n, &vectors, &images);
                let (diagonal, beside) = algebra.tridiagonal(&mut less.clone(), n);
                [images, less, diagonal, beside].concat().iter().map(|x| x.to_bits()).collect::<Vec<_>>()
            });
            assert!(results[0] == results[1] && results[0] == results[2], "n = {n}");
        }
    }
}
