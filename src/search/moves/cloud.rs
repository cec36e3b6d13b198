//! Moves for clouds of points.

use rand::{Rng, RngExt};

use crate::base::order::Total;
use crate::search::geometry::{centroid_of, distance, points_of, random_direction, touch, usual_contact, write_points};
use crate::search::structure::{Cloud, Structure};

/// The share of rows that one relocation moves, at most.
const MOST_RELOCATED: f64 = 0.12;

/// Puts one or a few of the rows farthest from the centroid elsewhere on the surface: in a random direction, at the
/// place where the row's distance to its nearest neighbour is a usual one in this cloud.
///
/// The outermost rows have the fewest neighbours, which in a cohesive cloud makes them the worst placed; in others the
/// move is a harmless local redraw. Reading each row's own energy instead would cost an evaluation a row and would tie
/// the move to landscapes that are sums over rows.
pub fn relocate(structure: &Structure, at: &mut [f64], rng: &mut impl Rng) {
    let Some(cloud) = choose(structure, rng) else { return };
    let points = points_of(cloud, at);
    let n_rows = points.len();
    let centroid = centroid_of(&points);
    let mut by_radius: Vec<(Total, usize)> =
        points.iter().enumerate().map(|(row, point)| (Total(-distance(point, &centroid)), row)).collect();
    by_radius.sort();
    let most = ((n_rows as f64 * MOST_RELOCATED) as usize).max(1);
    let n_moved = rng.random_range(1..=most);
    // Not always the very outermost: a draw from the outer part, so that repeats differ.
    let n_pool = (n_moved * 2 + 1).min(n_rows);
    let mut placed = points.clone();
    let contact = usual_contact(&points);
    let mut pool: Vec<usize> = by_radius[..n_pool].iter().map(|entry| entry.1).collect();
    for _ in 0..n_moved {
        let row = pool.swap_remove(rng.random_range(0..pool.len()));
        let direction = random_direction(cloud.dimensions, rng);
        placed[row] = touch(&placed, Some(row), &centroid, &direction, contact);
    }
    write_points(cloud, &placed, at);
}

/// Exchanges the places of two rows of different kinds, a few times at most.
pub fn swap(structure: &Structure, at: &mut [f64], rng: &mut impl Rng) {
    let Some(cloud) = choose(structure, rng) else { return };
    if cloud.n_kinds < 2 {
        return;
    }
    let n_swaps = rng.random_range(1..=3);
    for _ in 0..n_swaps {
        let first = rng.random_range(0..cloud.rows.len());
        let others: Vec<usize> = (0..cloud.rows.len()).filter(|&row| cloud.kinds[row] != cloud.kinds[first]).collect();
        let second = others[rng.random_range(0..others.len())];
        for k in 0..cloud.dimensions {
            at.swap(cloud.rows[first][k], cloud.rows[second][k]);
        }
    }
}

fn choose<'a>(structure: &'a Structure, rng: &mut impl Rng) -> Option<&'a Cloud> {
    match structure.clouds.len() {
        0 => None,
        n => structure.clouds.get(rng.random_range(0..n)),
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::base::random::{Purpose, stream};

    fn cloud_of(n: usize, kinds: Vec<usize>) -> Structure {
        let rows = (0..n).map(|row| [3 * row, 3 * row + 1, 3 * row + 2]).collect();
        let n_kinds = kinds.iter().max().map_or(0, |kind| kind + 1);
        Structure {
            start_lower: vec![-3.0; 3 * n],
            start_upper: vec![3.0; 3 * n],
            lower: vec![-9.0; 3 * n],
            upper: vec![9.0; 3 * n],
            scale: vec![6.0; 3 * n],
            cyclic: vec![false; 3 * n],
            clouds: vec![Cloud { rows, dimensions: 3, kinds, n_kinds, shifts: true }],
            exchanges: Vec::new(),
        }
    }

    /// A relocated row ends at the usual distance from its nearest neighbour, never on top of another.
    #[test]
    fn relocated_rows_touch_the_surface() {
        let structure = cloud_of(8, vec![0; 8]);
        let mut at = Vec::new();
        for corner in 0..8 {
            (0..3).for_each(|k| at.push(f64::from((corner >> k) & 1)));
        }
        let mut rng = stream(3, 0, 0, Purpose::Task);
        for _ in 0..100 {
            let mut moved = at.clone();
            relocate(&structure, &mut moved, &mut rng);
            assert_ne!(moved, at);
            let points = points_of(&structure.clouds[0], &moved);
            for left in 0..8 {
                for right in 0..left {
                    assert!(distance(&points[left], &points[right]) > 1.0 - 1e-9);
                }
            }
        }
    }

    #[test]
    fn swaps_exchange_kinds_and_keep_the_places() {
        let structure = cloud_of(4, vec![0, 0, 1, 1]);
        let at: Vec<f64> = (0..12).map(f64::from).collect();
        let mut rng = stream(4, 0, 0, Purpose::Task);
        let mut moved = at.clone();
        swap(&structure, &mut moved, &mut rng);
        assert_ne!(moved, at);
        moved.sort_by(f64::total_cmp);
        assert_eq!(moved, at);
    }
}
