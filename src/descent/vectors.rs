//! Sums over vectors in a fixed order: eight partial sums, then a fixed tree. The same bits whatever the processor, and
//! a loop that the compiler turns into vector instructions. Vectors are padded with zeros to a multiple of eight.

/// The padded length of a vector of `n` numbers.
pub fn padded(n: usize) -> usize {
    n.div_ceil(8) * 8
}

/// The inner product of two padded vectors.
#[inline]
pub fn dot(left: &[f64], right: &[f64]) -> f64 {
    let mut sums = [0.0; 8];
    for (a, b) in left.chunks_exact(8).zip(right.chunks_exact(8)) {
        for k in 0..8 {
            sums[k] += a[k] * b[k];
        }
    }
    ((sums[0] + sums[4]) + (sums[2] + sums[6])) + ((sums[1] + sums[5]) + (sums[3] + sums[7]))
}

/// `target += factor * other`
#[inline]
pub fn add_scaled(target: &mut [f64], factor: f64, other: &[f64]) {
    for (a, b) in target.chunks_exact_mut(8).zip(other.chunks_exact(8)) {
        for k in 0..8 {
            a[k] += factor * b[k];
        }
    }
}

/// The largest size of an element.
#[inline]
pub fn largest(vector: &[f64]) -> f64 {
    let mut most = [0.0_f64; 8];
    for a in vector.chunks_exact(8) {
        for k in 0..8 {
            let size = a[k].abs();
            most[k] = if size > most[k] { size } else { most[k] };
        }
    }
    most.into_iter().fold(0.0, |most, size| if size > most { size } else { most })
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn sums_are_sums() {
        let left: Vec<f64> = (0..16).map(f64::from).collect();
        let mut right = vec![2.0; 16];
        assert_eq!(dot(&left, &right), 240.0);
        add_scaled(&mut right, -1.0, &left);
        assert_eq!(right[15], -13.0);
        assert_eq!(largest(&right), 13.0);
    }
}
