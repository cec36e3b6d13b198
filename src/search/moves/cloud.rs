//! Moves for clouds of points.

use rand::{Rng, RngExt};
use rand_distr::{Distribution, UnitCircle, UnitSphere};

use crate::base::order::Total;
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
        placed[row] = touch(&placed, row, &centroid, &direction, contact);
    }
    for (row, point) in placed.iter().enumerate() {
        for k in 0..cloud.dimensions {
            at[cloud.rows[row][k]] = point[k];
        }
    }
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

fn points_of(cloud: &Cloud, at: &[f64]) -> Vec<[f64; 3]> {
    let coordinate = |row: &[usize; 3], k: usize| if k < cloud.dimensions { at[row[k]] } else { 0.0 };
    cloud.rows.iter().map(|row| [coordinate(row, 0), coordinate(row, 1), coordinate(row, 2)]).collect()
}

fn centroid_of(points: &[[f64; 3]]) -> [f64; 3] {
    let mut centroid = [0.0; 3];
    for point in points {
        (0..3).for_each(|k| centroid[k] += point[k] / points.len() as f64);
    }
    centroid
}

fn distance(left: &[f64; 3], right: &[f64; 3]) -> f64 {
    (0..3).map(|k| (left[k] - right[k]) * (left[k] - right[k])).sum::<f64>().sqrt()
}

/// The median distance of a row to its nearest neighbour.
fn usual_contact(points: &[[f64; 3]]) -> f64 {
    let mut nearest: Vec<Total> = (0..points.len())
        .map(|row| {
            let others = (0..points.len()).filter(|&other| other != row);
            Total(others.map(|other| distance(&points[row], &points[other])).fold(f64::INFINITY, f64::min))
        })
        .collect();
    nearest.sort();
    nearest[nearest.len() / 2].0
}

/// By rejection (Marsaglia 1972): products and a square root only, so the bits are the same everywhere.
fn random_direction(dimensions: usize, rng: &mut impl Rng) -> [f64; 3] {
    if dimensions == 2 {
        let [x, y]: [f64; 2] = UnitCircle.sample(rng);
        return [x, y, 0.0];
    }
    UnitSphere.sample(rng)
}

/// The outermost place on the ray from the centroid at which the nearest other row is exactly `contact` away: there
/// the row touches the surface from outside.
fn touch(points: &[[f64; 3]], row: usize, centroid: &[f64; 3], direction: &[f64; 3], contact: f64) -> [f64; 3] {
    let mut reach: f64 = 0.0;
    for (other, point) in points.iter().enumerate() {
        if other == row {
            continue;
        }
        let offset = [point[0] - centroid[0], point[1] - centroid[1], point[2] - centroid[2]];
        let along: f64 = (0..3).map(|k| offset[k] * direction[k]).sum();
        let aside = (0..3).map(|k| offset[k] * offset[k]).sum::<f64>() - along * along;
        let half = contact * contact - aside;
        if half > 0.0 {
            reach = reach.max(along + half.sqrt());
        }
    }
    std::array::from_fn(|k| centroid[k] + reach * direction[k])
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
