//! Cut and splice (Deaven and Ho 1995): two clouds are turned at random and cut by a plane, and a part of each makes a
//! new one.

use rand::{Rng, RngExt};

use crate::base::order::Total;
use crate::search::geometry::{
    Point, apply, centroid_of, minus, plus, points_of, random_direction, random_rotation, write_points,
};
use crate::search::structure::{Cloud, Structure};

/// The share of the points of one parent lies between this and the rest.
const LEAST_SHARE: f64 = 0.2;

/// A child of two points of a landscape. Unknowns outside the clouds come from one parent or the other, each at random.
pub fn splice(structure: &Structure, mother: &[f64], father: &[f64], rng: &mut impl Rng) -> Vec<f64> {
    let mut child: Vec<f64> =
        mother.iter().zip(father).map(|(&a, &b)| if rng.random::<bool>() { a } else { b }).collect();
    for cloud in &structure.clouds {
        let (mother, father) = (points_of(cloud, mother), points_of(cloud, father));
        let middle = centroid_of(&mother);
        let points = splice_points(cloud, &mother, &father, rng);
        let placed: Vec<Point> = points.iter().map(|point| plus(&middle, 1.0, point)).collect();
        write_points(cloud, &placed, &mut child);
    }
    structure.bring_inside(&mut child);
    child
}

/// The points of the child about the origin. Of each kind the upper points of one parent and the lower ones of the
/// other, in numbers that add up.
fn splice_points(cloud: &Cloud, mother: &[Point], father: &[Point], rng: &mut impl Rng) -> Vec<Point> {
    let turned = |points: &[Point], rng: &mut _| {
        let (centroid, turn) = (centroid_of(points), random_rotation(cloud.dimensions, rng));
        points.iter().map(|point| apply(&turn, &minus(point, &centroid))).collect::<Vec<Point>>()
    };
    let (mother, father) = (turned(mother, rng), turned(father, rng));
    let normal = random_direction(cloud.dimensions, rng);
    let height = |point: &Point| crate::search::geometry::inner(point, &normal);
    let share = LEAST_SHARE + (1.0 - 2.0 * LEAST_SHARE) * rng.random::<f64>();
    let mut child = vec![[0.0; 3]; cloud.rows.len()];
    for kind in 0..cloud.n_kinds {
        let rows: Vec<usize> = (0..cloud.rows.len()).filter(|&row| cloud.kinds[row] == kind).collect();
        let ranked = |points: &[Point], downwards: f64| {
            let mut ranked: Vec<(Total, usize)> =
                rows.iter().map(|&row| (Total(downwards * height(&points[row])), row)).collect();
            ranked.sort();
            ranked
        };
        // One row alone goes with either parent.
        let wanted = share * rows.len() as f64;
        let n_upper = wanted as usize + usize::from(rng.random::<f64>() < wanted - wanted.floor());
        let upper = ranked(&mother, -1.0).into_iter().take(n_upper).map(|entry| mother[entry.1]);
        let lower = ranked(&father, 1.0).into_iter().take(rows.len() - n_upper).map(|entry| father[entry.1]);
        rows.iter().zip(upper.chain(lower)).for_each(|(&row, point)| child[row] = point);
    }
    child
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::base::random::{Purpose, stream};

    /// Every point of the child comes from a parent: its distance from the parent's centroid is one that the parent has.
    #[test]
    fn children_have_the_points_of_their_parents() {
        let n = 20;
        let cloud = Cloud {
            rows: (0..n).map(|row| [3 * row, 3 * row + 1, 3 * row + 2]).collect(),
            dimensions: 3,
            kinds: (0..n).map(|row| usize::from(row >= 12)).collect(),
            n_kinds: 2,
            shifts: true,
        };
        let mut rng = stream(5, 0, 0, Purpose::Task);
        let random =
            |rng: &mut _| (0..n).map(|_| crate::search::geometry::random_direction(3, rng)).collect::<Vec<_>>();
        for _ in 0..50 {
            let (mother, father) = (random(&mut rng), random(&mut rng));
            let child = splice_points(&cloud, &mother, &father, &mut rng);
            let radii = |points: &[Point], at: &Point| -> Vec<f64> {
                points.iter().map(|point| crate::search::geometry::distance(point, at)).collect()
            };
            let known: Vec<f64> =
                [radii(&mother, &centroid_of(&mother)), radii(&father, &centroid_of(&father))].concat();
            for radius in radii(&child, &[0.0; 3]) {
                assert!(known.iter().any(|other| (other - radius).abs() < 1e-12));
            }
        }
    }
}
