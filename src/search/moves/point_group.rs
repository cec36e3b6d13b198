//! The finite groups of rotations and reflections of space and of the plane.

use rand::{Rng, RngExt};

use crate::numbers::functions;
use crate::search::geometry::{Map, Point, apply};

/// The order of the rotations about one axis that is tried at most.
const MOST_FOLD: u32 = 6;

/// A finite group of maps that fix the origin.
#[derive(Clone, Debug)]
pub struct PointGroup {
    /// Every element, the identity first.
    pub elements: Vec<Map>,
}

const IDENTITY: Map = [[1.0, 0.0, 0.0], [0.0, 1.0, 0.0], [0.0, 0.0, 1.0]];
const INVERSION: Map = [[-1.0, 0.0, 0.0], [0.0, -1.0, 0.0], [0.0, 0.0, -1.0]];
/// Reflection in the plane across the main axis.
const ACROSS: Map = [[1.0, 0.0, 0.0], [0.0, 1.0, 0.0], [0.0, 0.0, -1.0]];
/// Reflection in a plane that holds the main axis.
const ALONG: Map = [[1.0, 0.0, 0.0], [0.0, -1.0, 0.0], [0.0, 0.0, 1.0]];
/// Half a turn about an axis across the main one.
const HALF_ACROSS: Map = [[1.0, 0.0, 0.0], [0.0, -1.0, 0.0], [0.0, 0.0, -1.0]];
/// A third of a turn about the diagonal of the cube.
const THIRD: Map = [[0.0, 0.0, 1.0], [1.0, 0.0, 0.0], [0.0, 1.0, 0.0]];
/// Half a turn about the main axis.
const HALF: Map = [[-1.0, 0.0, 0.0], [0.0, -1.0, 0.0], [0.0, 0.0, 1.0]];
/// A quarter of a turn about the main axis.
const QUARTER: Map = [[0.0, -1.0, 0.0], [1.0, 0.0, 0.0], [0.0, 0.0, 1.0]];
/// Reflection that exchanges two axes.
const DIAGONAL: Map = [[0.0, 1.0, 0.0], [1.0, 0.0, 0.0], [0.0, 0.0, 1.0]];

impl PointGroup {
    /// A group drawn at random: in the plane a cyclic or dihedral one; in space one of Cs, Ci, Cn, Cnv, Cnh, S2n, Dn, Dnh,
    /// Dnd (n from 2 to 6), T, Td, Th, O, Oh, I, Ih (Schoenflies 1891). The seven without a main axis are a third of all
    /// draws.
    pub fn random(dimensions: usize, rng: &mut impl Rng) -> PointGroup {
        let fold = rng.random_range(2..=MOST_FOLD);
        let turn = turn_about_main(fold, 1);
        if dimensions == 2 {
            return match rng.random_range(0..3) {
                0 => PointGroup::generated(&[ALONG]),
                1 => PointGroup::generated(&[turn]),
                _ => PointGroup::generated(&[turn, ALONG]),
            };
        }
        let half_step = multiply(&ACROSS, &turn_about_main(2 * fold, 1));
        match rng.random_range(0..24) {
            0 => PointGroup::generated(&[ACROSS]),
            1 => PointGroup::generated(&[INVERSION]),
            2 | 3 => PointGroup::generated(&[turn]),
            4 | 5 => PointGroup::generated(&[turn, ALONG]),
            6 | 7 => PointGroup::generated(&[turn, ACROSS]),
            8 => PointGroup::generated(&[half_step]),
            9 | 10 => PointGroup::generated(&[turn, HALF_ACROSS]),
            11..=13 => PointGroup::generated(&[turn, HALF_ACROSS, ACROSS]),
            14 | 15 => PointGroup::generated(&[half_step, HALF_ACROSS]),
            16 => PointGroup::generated(&[HALF, THIRD]),
            17 | 18 => PointGroup::generated(&[HALF, THIRD, DIAGONAL]),
            19 => PointGroup::generated(&[HALF, THIRD, INVERSION]),
            20 => PointGroup::generated(&[QUARTER, THIRD]),
            21 => PointGroup::generated(&[QUARTER, THIRD, INVERSION]),
            22 => PointGroup::generated(&[fifth(), THIRD]),
            _ => PointGroup::generated(&[fifth(), THIRD, INVERSION]),
        }
    }

    /// The group that some maps generate.
    pub fn generated(generators: &[Map]) -> PointGroup {
        let mut elements = vec![IDENTITY];
        let mut next = 0;
        while next < elements.len() {
            for generator in generators {
                let product = multiply(generator, &elements[next]);
                if !elements.iter().any(|known| same(known, &product)) {
                    elements.push(product);
                }
            }
            next += 1;
        }
        PointGroup { elements }
    }

    /// The distinct images of a point.
    pub fn orbit(&self, point: &Point) -> Vec<Point> {
        let mut orbit: Vec<Point> = Vec::new();
        for element in &self.elements {
            let image = apply(element, point);
            let near = |known: &Point| (0..3).all(|k| (known[k] - image[k]).abs() < 1e-6);
            if !orbit.iter().any(near) {
                orbit.push(image);
            }
        }
        orbit
    }

    /// The point moved onto the axis, plane or centre that a random element leaves in place: the mean of its images under
    /// the powers of that element. Its orbit is then a smaller one.
    pub fn special(&self, point: &Point, rng: &mut impl Rng) -> Point {
        if self.elements.len() == 1 {
            return *point;
        }
        let chosen = &self.elements[rng.random_range(1..self.elements.len())];
        let (mut mean, mut image, mut count) = (*point, apply(chosen, point), 1.0);
        let mut power = *chosen;
        while !same(&power, &IDENTITY) {
            (0..3).for_each(|k| mean[k] += image[k]);
            image = apply(chosen, &image);
            power = multiply(chosen, &power);
            count += 1.0;
        }
        mean.map(|x| x / count)
    }
}

fn multiply(left: &Map, right: &Map) -> Map {
    std::array::from_fn(|row| std::array::from_fn(|column| (0..3).map(|k| left[row][k] * right[k][column]).sum()))
}

fn same(left: &Map, right: &Map) -> bool {
    (0..3).all(|row| (0..3).all(|column| (left[row][column] - right[row][column]).abs() < 1e-6))
}

/// `times` n-ths of a turn about the main axis.
fn turn_about_main(n: u32, times: u32) -> Map {
    let angle = 2.0 * std::f64::consts::PI * f64::from(times) / f64::from(n);
    let (sine, cosine) = (functions::sine(angle), functions::cosine(angle));
    [[cosine, -sine, 0.0], [sine, cosine, 0.0], [0.0, 0.0, 1.0]]
}

/// A fifth of a turn about a vertex (0, 1, phi) of the icosahedron; with [`THIRD`] it generates all its rotations.
fn fifth() -> Map {
    let golden = 0.5 * (1.0 + 5.0_f64.sqrt());
    let (a, b, c) = (0.5, 0.5 * golden, 0.5 * (golden - 1.0));
    // The images of the axes, each half a golden rectangle's corner away from another.
    [[c, -b, a], [b, a, c], [-a, c, b]]
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::base::random::{Purpose, stream};
    use crate::search::geometry::inner;

    /// The orders of the groups without a main axis (International Tables for Crystallography A, 10.1).
    #[test]
    fn orders() {
        let order = |generators: &[Map]| PointGroup::generated(generators).elements.len();
        assert_eq!(order(&[HALF, THIRD]), 12);
        assert_eq!(order(&[HALF, THIRD, DIAGONAL]), 24);
        assert_eq!(order(&[HALF, THIRD, INVERSION]), 24);
        assert_eq!(order(&[QUARTER, THIRD]), 24);
        assert_eq!(order(&[QUARTER, THIRD, INVERSION]), 48);
        assert_eq!(order(&[fifth(), THIRD]), 60);
        assert_eq!(order(&[fifth(), THIRD, INVERSION]), 120);
        assert_eq!(order(&[turn_about_main(5, 1), HALF_ACROSS, ACROSS]), 20);
        assert_eq!(order(&[multiply(&ACROSS, &turn_about_main(6, 1)), HALF_ACROSS]), 12);
    }

    /// Every element keeps lengths; orbits of special points divide the order.
    #[test]
    fn random_groups_are_groups() {
        let mut rng = stream(1, 0, 0, Purpose::Task);
        for round in 0..400 {
            let group = PointGroup::random(2 + round % 2, &mut rng);
            let order = group.elements.len();
            assert!(order > 1 && order <= 120);
            for element in &group.elements {
                assert!(element.iter().all(|row| (inner(row, row) - 1.0).abs() < 1e-12));
            }
            let point = group.special(&[0.3, 1.2, if round % 2 == 0 { 0.0 } else { -0.7 }], &mut rng);
            assert_eq!(order % group.orbit(&point).len(), 0, "{order}");
        }
    }
}
