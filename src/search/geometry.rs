//! Clouds as points in space: read from a vector of unknowns, measured, written back.

use rand::Rng;
use rand_distr::{Distribution, UnitCircle, UnitSphere};

use crate::base::order::Total;

use super::structure::Cloud;

/// A point of a cloud; the third coordinate of a cloud in the plane is 0.
pub type Point = [f64; 3];

/// The points of a cloud.
pub fn points_of(cloud: &Cloud, at: &[f64]) -> Vec<Point> {
    let coordinate = |row: &[usize; 3], k: usize| if k < cloud.dimensions { at[row[k]] } else { 0.0 };
    cloud.rows.iter().map(|row| [coordinate(row, 0), coordinate(row, 1), coordinate(row, 2)]).collect()
}

/// Writes the points of a cloud back.
pub fn write_points(cloud: &Cloud, points: &[Point], at: &mut [f64]) {
    for (row, point) in cloud.rows.iter().zip(points) {
        (0..cloud.dimensions).for_each(|k| at[row[k]] = point[k]);
    }
}

/// The mean of some points.
pub fn centroid_of(points: &[Point]) -> Point {
    let mut centroid = [0.0; 3];
    for point in points {
        (0..3).for_each(|k| centroid[k] += point[k] / points.len() as f64);
    }
    centroid
}

/// The difference of two points.
pub fn minus(left: &Point, right: &Point) -> Point {
    std::array::from_fn(|k| left[k] - right[k])
}

/// A point plus a multiple of another.
pub fn plus(left: &Point, factor: f64, right: &Point) -> Point {
    std::array::from_fn(|k| left[k] + factor * right[k])
}

/// The inner product.
pub fn inner(left: &Point, right: &Point) -> f64 {
    left[0] * right[0] + left[1] * right[1] + left[2] * right[2]
}

/// The outer product.
pub fn outer(left: &Point, right: &Point) -> Point {
    [
        left[1] * right[2] - left[2] * right[1],
        left[2] * right[0] - left[0] * right[2],
        left[0] * right[1] - left[1] * right[0],
    ]
}

/// The distance of two points.
pub fn distance(left: &Point, right: &Point) -> f64 {
    let offset = minus(left, right);
    inner(&offset, &offset).sqrt()
}

/// The median distance of a point to its nearest neighbour.
pub fn usual_contact(points: &[Point]) -> f64 {
    let mut nearest: Vec<Total> = (0..points.len())
        .map(|row| {
            let others = (0..points.len()).filter(|&other| other != row);
            Total(others.map(|other| distance(&points[row], &points[other])).fold(f64::INFINITY, f64::min))
        })
        .collect();
    nearest.sort();
    nearest.get(nearest.len() / 2).map_or(0.0, |middle| middle.0)
}

/// The largest distance from the centroid.
pub fn reach_of(points: &[Point], centroid: &Point) -> f64 {
    points.iter().map(|point| distance(point, centroid)).fold(0.0, f64::max)
}

/// A direction, uniform on the circle or the sphere: by rejection (Marsaglia 1972), products and a square root only, so
/// the bits are the same everywhere.
pub fn random_direction(dimensions: usize, rng: &mut impl Rng) -> Point {
    if dimensions == 2 {
        let [x, y]: [f64; 2] = UnitCircle.sample(rng);
        return [x, y, 0.0];
    }
    UnitSphere.sample(rng)
}

/// A linear map of space, by rows.
pub type Map = [[f64; 3]; 3];

/// The map applied to a point.
pub fn apply(map: &Map, point: &Point) -> Point {
    std::array::from_fn(|k| inner(&map[k], point))
}

/// A rotation, uniform over all: two orthonormal random directions and their outer product; about the third axis only
/// for a cloud in the plane.
pub fn random_rotation(dimensions: usize, rng: &mut impl Rng) -> Map {
    let first = random_direction(dimensions, rng);
    if dimensions == 2 {
        return [first, [-first[1], first[0], 0.0], [0.0, 0.0, 1.0]];
    }
    loop {
        let other = random_direction(3, rng);
        let aside = plus(&other, -inner(&other, &first), &first);
        let length = inner(&aside, &aside).sqrt();
        if length > 0.1 {
            let second = plus(&[0.0; 3], 1.0 / length, &aside);
            return [first, second, outer(&first, &second)];
        }
    }
}

/// The outermost place on the ray from `centroid` along `direction` at which the nearest of the points is exactly
/// `contact` away: there a point touches the surface from outside. `skip` is left out of the points.
pub fn touch(points: &[Point], skip: Option<usize>, centroid: &Point, direction: &Point, contact: f64) -> Point {
    let mut reach: f64 = 0.0;
    for (other, point) in points.iter().enumerate() {
        if Some(other) == skip {
            continue;
        }
        let offset = minus(point, centroid);
        let along = inner(&offset, direction);
        let aside = inner(&offset, &offset) - along * along;
        let half = contact * contact - aside;
        if half > 0.0 {
            reach = reach.max(along + half.sqrt());
        }
    }
    plus(centroid, reach, direction)
}
