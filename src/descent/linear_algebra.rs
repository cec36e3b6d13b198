//! Dense symmetric matrices: Cholesky, eigenvalues, an eigenvector. Row by row, only products, sums and square roots, in
//! a fixed order: a library's matrix products choose fused instructions by processor, and the bits would follow.

use crate::kernel::lanes::algebra::Algebra;
use crate::kernel::lanes::dense::padded;

/// The lower triangle `L` with `L L^T = matrix`; `None` where the matrix is not positive definite.
pub fn cholesky(matrix: &[f64], n: usize) -> Option<Vec<f64>> {
    let mut lower = vec![0.0; n * n];
    for row in 0..n {
        for column in 0..=row {
            let (above, left) = (&lower[column * n..column * n + column], &lower[row * n..row * n + column]);
            let sum = matrix[row * n + column] - product(left, above);
            if row == column {
                // NaN fails too.
                if !(sum > 0.0) {
                    return None;
                }
                lower[row * n + row] = sum.sqrt();
            } else {
                lower[row * n + column] = sum / lower[column * n + column];
            }
        }
    }
    Some(lower)
}

/// Solves `L L^T x = b` in place.
pub fn solve(lower: &[f64], n: usize, b: &mut [f64]) {
    for row in 0..n {
        let sum = b[row] - product(&lower[row * n..row * n + row], &b[..row]);
        b[row] = sum / lower[row * n + row];
    }
    for row in (0..n).rev() {
        b[row] /= lower[row * n + row];
        let value = b[row];
        for column in 0..row {
            b[column] -= lower[row * n + column] * value;
        }
    }
}

fn product(left: &[f64], right: &[f64]) -> f64 {
    let mut sums = [0.0; 4];
    let (a, b) = (left.chunks_exact(4), right.chunks_exact(4));
    let rest: f64 = a.remainder().iter().zip(b.remainder()).map(|(a, b)| a * b).sum();
    for (a, b) in a.zip(b) {
        for k in 0..4 {
            sums[k] += a[k] * b[k];
        }
    }
    ((sums[0] + sums[2]) + (sums[1] + sums[3])) + rest
}

/// The eigenvalues of a symmetric matrix, ascending: Householder (1958) reduction to three diagonals, then implicit QL
/// with Wilkinson's (1968) shift.
pub fn eigenvalues(matrix: &[f64], n: usize) -> Vec<f64> {
    let (mut diagonal, mut beside) = Algebra::new().tridiagonal(&mut pad(matrix, n), n);
    ql(&mut diagonal, &mut beside);
    diagonal.sort_by(f64::total_cmp);
    diagonal
}

/// The matrix without what it does along some orthonormal directions, and with `stiffness` along them instead.
pub fn lift(matrix: &[f64], n: usize, directions: &[Vec<f64>], stiffness: f64) -> Vec<f64> {
    if n == 0 {
        return Vec::new();
    }
    // P A P + stiffness D D^T with P = 1 - D D^T, as A - D C^T - C D^T with C = A D - D (D^T A D + stiffness) / 2.
    let width = padded(n);
    let algebra = Algebra::new();
    let mut lifted = pad(matrix, n);
    let columns: Vec<f64> = directions.iter().flat_map(|d| d.iter().copied().chain((n..width).map(|_| 0.0))).collect();
    let images = algebra.images(&lifted, n, &columns);
    let mut halves = images.clone();
    for (number, half) in halves.chunks_exact_mut(width).enumerate() {
        let image = &images[number * width..][..width];
        for (other, direction) in columns.chunks_exact(width).enumerate() {
            let along = product(direction, image) + if other == number { stiffness } else { 0.0 };
            half.iter_mut().zip(direction).for_each(|(c, d)| *c -= 0.5 * along * d);
        }
    }
    algebra.take_off(&mut lifted, n, &columns, &halves);
    lifted.chunks_exact(width).flat_map(|row| &row[..n]).copied().collect()
}

fn pad(matrix: &[f64], n: usize) -> Vec<f64> {
    let width = padded(n);
    let mut wide = vec![0.0; n * width];
    for (wide, row) in wide.chunks_exact_mut(width.max(1)).zip(matrix.chunks_exact(n.max(1))) {
        wide[..n].copy_from_slice(row);
    }
    wide
}

/// Implicit QL on a matrix of three diagonals; `beside[k]` stands left of `diagonal[k]`.
fn ql(diagonal: &mut [f64], beside: &mut [f64]) {
    let n = diagonal.len();
    for k in 1..n {
        beside[k - 1] = beside[k];
    }
    if n > 0 {
        beside[n - 1] = 0.0;
    }
    for start in 0..n {
        for _ in 0..60 {
            let small = |k: usize| beside[k].abs() <= f64::EPSILON * (diagonal[k].abs() + diagonal[k + 1].abs());
            let end = (start..n - 1).find(|&k| small(k)).unwrap_or(n - 1);
            if end == start {
                break;
            }
            let g = (diagonal[start + 1] - diagonal[start]) / (2.0 * beside[start]);
            let r = (g * g + 1.0).sqrt();
            let mut g = diagonal[end] - diagonal[start] + beside[start] / (g + r.copysign(g));
            let (mut sine, mut cosine, mut shift) = (1.0, 1.0, 0.0);
            let mut broken = false;
            for k in (start..end).rev() {
                let f = sine * beside[k];
                let b = cosine * beside[k];
                let r = (f * f + g * g).sqrt();
                beside[k + 1] = r;
                if r == 0.0 {
                    diagonal[k + 1] -= shift;
                    beside[end] = 0.0;
                    broken = true;
                    break;
                }
                sine = f / r;
                cosine = g / r;
                g = diagonal[k + 1] - shift;
                let r = (diagonal[k] - g) * sine + 2.0 * cosine * b;
                shift = sine * r;
                diagonal[k + 1] = g + shift;
                g = cosine * r - b;
            }
            if !broken {
                diagonal[start] -= shift;
                beside[start] = g;
                beside[end] = 0.0;
            }
        }
    }
}

/// A unit eigenvector for an eigenvalue, by inverse iteration from a fixed start; its largest element is positive.
pub fn eigenvector(matrix: &[f64], n: usize, eigenvalue: f64) -> Vec<f64> {
    let size = matrix.iter().fold(0.0, |most: f64, x| most.max(x.abs()));
    let mut shifted = matrix.to_vec();
    for k in 0..n {
        // Slightly off the eigenvalue, so that no pivot is exactly 0.
        shifted[k * n + k] -= eigenvalue + 1e-10 * size;
    }
    // Elimination with partial pivoting, kept for a few right-hand sides.
    let mut order: Vec<usize> = (0..n).collect();
    for k in 0..n {
        let pivot = (k..n).max_by(|&a, &b| shifted[a * n + k].abs().total_cmp(&shifted[b * n + k].abs())).unwrap_or(k);
        if pivot != k {
            for column in 0..n {
                shifted.swap(k * n + column, pivot * n + column);
            }
            order.swap(k, pivot);
        }
        let top = shifted[k * n + k];
        let top = if top == 0.0 { f64::EPSILON * size + f64::MIN_POSITIVE } else { top };
        shifted[k * n + k] = top;
        for row in k + 1..n {
            let factor = shifted[row * n + k] / top;
            shifted[row * n + k] = factor;
            for column in k + 1..n {
                shifted[row * n + column] -= factor * shifted[k * n + column];
            }
        }
    }
    let mut vector: Vec<f64> = (0..n).map(|k| 1.0 + 0.1 * ((k * 7) % 11) as f64).collect();
    for _ in 0..4 {
        let mut next: Vec<f64> = order.iter().map(|&row| vector[row]).collect();
        for row in 0..n {
            for column in 0..row {
                next[row] -= shifted[row * n + column] * next[column];
            }
        }
        for row in (0..n).rev() {
            for column in row + 1..n {
                next[row] -= shifted[row * n + column] * next[column];
            }
            next[row] /= shifted[row * n + row];
        }
        let most = next.iter().fold(0.0, |most: f64, x| if x.abs() > most.abs() { *x } else { most });
        let scaled: Vec<f64> = next.iter().map(|x| x / most).collect();
        let length = scaled.iter().map(|x| x * x).sum::<f64>().sqrt();
        vector = scaled.into_iter().map(|x| x / length).collect();
    }
    vector
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::base::random::{Purpose, stream};
    use rand::RngExt;

    fn random_symmetric(n: usize) -> Vec<f64> {
        let mut rng = stream(5, 0, n as u64, Purpose::Check);
        let mut matrix = vec![0.0; n * n];
        for row in 0..n {
            for column in 0..=row {
                let x = 2.0 * rng.random::<f64>() - 1.0;
                matrix[row * n + column] = x;
                matrix[column * n + row] = x;
            }
        }
        matrix
    }

    /// Against a general-purpose library (nalgebra).
    #[test]
    fn eigenvalues_are_those_of_a_library() {
        for n in [1, 2, 3, 7, 39, 60] {
            let matrix = random_symmetric(n);
            let ours = eigenvalues(&matrix, n);
            let mut theirs: Vec<f64> =
                nalgebra::DMatrix::from_row_slice(n, n, &matrix).symmetric_eigenvalues().iter().copied().collect();
            theirs.sort_by(f64::total_cmp);
            for (a, b) in ours.iter().zip(&theirs) {
                assert!((a - b).abs() < 1e-12 * n as f64, "n = {n}: {a} for {b}");
            }
            let vector = eigenvector(&matrix, n, ours[0]);
            for row in 0..n {
                let image: f64 = (0..n).map(|column| matrix[row * n + column] * vector[column]).sum();
                assert!((image - ours[0] * vector[row]).abs() < 1e-8, "n = {n}");
            }
        }
    }

    #[test]
    fn diagonal_and_degenerate_matrices() {
        assert_eq!(eigenvalues(&[3.0, 0.0, 0.0, 0.0, 1.0, 0.0, 0.0, 0.0, 2.0], 3), [1.0, 2.0, 3.0]);
        assert_eq!(eigenvalues(&[0.0; 9], 3), [0.0; 3]);
        let ones = eigenvalues(&[1.0; 16], 4);
        assert!((ones[3] - 4.0).abs() < 1e-14 && ones[..3].iter().all(|x| x.abs() < 1e-14));
    }

    #[test]
    fn cholesky_solves() {
        let n = 9;
        let half = random_symmetric(n);
        let mut matrix = vec![0.0; n * n];
        for row in 0..n {
            for column in 0..n {
                matrix[row * n + column] = (0..n).map(|k| half[row * n + k] * half[column * n + k]).sum();
            }
            matrix[row * n + row] += 0.1;
        }
        let mut x: Vec<f64> =
            (0..n).map(|row| (0..n).map(|column| matrix[row * n + column] * column as f64).sum()).collect();
        solve(&cholesky(&matrix, n).unwrap(), n, &mut x);
        assert!(x.iter().enumerate().all(|(k, x)| (x - k as f64).abs() < 1e-9));
        assert_eq!(cholesky(&[1.0, 2.0, 2.0, 1.0], 2), None);
    }

    /// Along the directions there is the new stiffness, and across them what was there.
    #[test]
    fn lifted_directions_are_eigenvectors() {
        for n in [3, 8, 21] {
            let matrix = random_symmetric(n);
            let third = (1.0_f64 / 3.0).sqrt();
            let unit = |places: [usize; 3], signs: [f64; 3]| {
                let mut direction = vec![0.0; n];
                (0..3).for_each(|k| direction[places[k]] = third * signs[k]);
                direction
            };
            let directions = [unit([0, 1, 2], [1.0, 1.0, 1.0])];
            let lifted = lift(&matrix, n, &directions, 7.0);
            for row in 0..n {
                let image = lifted[row * n..(row + 1) * n].iter().zip(&directions[0]).map(|(a, d)| a * d).sum::<f64>();
                assert!((image - 7.0 * directions[0][row]).abs() < 1e-13, "n = {n}, row {row}");
            }
            // Across: (1, -1, 0) / sqrt(2) is orthogonal to it.
            let across = |m: &[f64]| m[0] - m[1] - m[n] + m[n + 1];
            assert!((across(&lifted) - across(&matrix)).abs() < 1e-13);
        }
        assert!(lift(&[], 0, &[], 1.0).is_empty());
    }
}
