//! Symmetric starts for clouds of like points: random orbits of a random point group until every point is placed.
//!
//! Low minima of cohesive clouds are often symmetric, and a symmetric arrangement has far fewer degrees of freedom to
//! draw. It is one proposal among several: landscapes without symmetric minima get nothing from it.

use rand::{Rng, RngExt};

use crate::search::geometry::{
    Point, centroid_of, distance, points_of, random_direction, random_rotation, reach_of, touch, usual_contact,
    write_points,
};
use crate::search::structure::{Cloud, Structure};
use crate::search::{geometry, start};

use super::point_group::PointGroup;

/// Orbits tried before a closer packing is allowed.
const PATIENCE: usize = 60;
/// The nearest that points may be placed, in usual contacts, at first and at last.
const SPACING: (f64, f64) = (0.9, 0.5);
/// The shake after the placing, in usual contacts: less would leave descents on the saddles that symmetry makes.
const SHAKE: f64 = 0.06;

/// A symmetric start. `model` is a low minimum, from which the usual contact, the size and the middle are read; without
/// one they are guessed from the start region.
pub fn start(structure: &Structure, model: Option<&[f64]>, rng: &mut impl Rng) -> Vec<f64> {
    let mut at = model.map_or_else(|| start::uniform(structure, rng), <[f64]>::to_vec);
    for cloud in &structure.clouds {
        let known = points_of(cloud, &at);
        let centroid = centroid_of(&known);
        let size = if model.is_some() {
            (usual_contact(&known), reach_of(&known, &centroid))
        } else {
            let reach = reach_of(&known, &centroid) * 0.8;
            (1.6 * reach / side(known.len() as f64, cloud.dimensions), reach)
        };
        let points = place(cloud, size, rng);
        let turn = random_rotation(cloud.dimensions, rng);
        let placed: Vec<Point> =
            points.iter().map(|point| geometry::plus(&centroid, 1.0, &geometry::apply(&turn, point))).collect();
        write_points(cloud, &placed, &mut at);
    }
    structure.bring_inside(&mut at);
    at
}

/// How many of `count` points stand along one side.
fn side(count: f64, dimensions: usize) -> f64 {
    if dimensions == 2 { count.sqrt() } else { cube_root(count) }
}

/// By Newton steps: the library's own cube root may differ from platform to platform.
fn cube_root(x: f64) -> f64 {
    let mut root = 1.0 + x / 3.0;
    for _ in 0..60 {
        root -= (root * root * root - x) / (3.0 * root * root);
    }
    root
}

/// Points about the origin. `size` is the usual contact and the largest distance from the middle.
fn place(cloud: &Cloud, size: (f64, f64), rng: &mut impl Rng) -> Vec<Point> {
    let (contact, reach) = size;
    let n_rows = cloud.rows.len();
    // Not always the size of the model: the lowest may be more compact or more open.
    let reach = reach * (0.85 + 0.25 * rng.random::<f64>());
    let group = PointGroup::random(cloud.dimensions, rng);
    let mut left: Vec<usize> = vec![0; cloud.n_kinds];
    cloud.kinds.iter().for_each(|&kind| left[kind] += 1);
    let mut placed: Vec<(usize, Point)> = Vec::with_capacity(n_rows);
    let mut tries = 0;
    while placed.len() < n_rows && tries < 6 * PATIENCE {
        let ease = tries as f64 / (6 * PATIENCE) as f64;
        tries += 1;
        let spacing = contact * (SPACING.0 + (SPACING.1 - SPACING.0) * ease);
        let direction = random_direction(cloud.dimensions, rng);
        let draw = rng.random::<f64>();
        let radius = reach * if cloud.dimensions == 2 { draw.sqrt() } else { cube_root(draw) };
        let mut point = direction.map(|x| radius * x);
        if rng.random::<f64>() < 0.6 {
            point = group.special(&point, rng);
        }
        let orbit = group.orbit(&point);
        let kind = rng.random_range(0..cloud.n_kinds);
        // The group is at home in what is placed: one point of the orbit speaks for all.
        let mut others = orbit[1..].iter().chain(placed.iter().map(|entry| &entry.1));
        let fits = orbit.len() <= left[kind] && others.all(|other| distance(&orbit[0], other) >= spacing);
        if fits {
            left[kind] -= orbit.len();
            placed.extend(orbit.into_iter().map(|at| (kind, at)));
        }
    }
    // What no orbit fits is put on the surface.
    for (kind, count) in left.into_iter().enumerate() {
        for _ in 0..count {
            let points: Vec<Point> = placed.iter().map(|entry| entry.1).collect();
            let direction = random_direction(cloud.dimensions, rng);
            placed.push((kind, touch(&points, None, &[0.0; 3], &direction, contact)));
        }
    }
    placed.sort_by_key(|entry| entry.0);
    // Each row takes the next point of its kind.
    let mut next: Vec<usize> = (0..cloud.n_kinds).map(|kind| placed.partition_point(|entry| entry.0 < kind)).collect();
    cloud
        .kinds
        .iter()
        .map(|&kind| {
            let point = placed[next[kind]].1;
            next[kind] += 1;
            let shift = random_direction(cloud.dimensions, rng);
            geometry::plus(&point, SHAKE * contact * rng.random::<f64>(), &shift)
        })
        .collect()
}
