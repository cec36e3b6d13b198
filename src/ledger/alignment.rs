//! Lays one cloud of points on another.
//!
//! Two rows of the first cloud span a frame; so do pairs of rows of the second with the same kinds, distances from the
//! middle and distance from each other. Each such pair gives one rotation (and one improper one, where mirror images are
//! the same), which the caller tests on the whole. The first pair is chosen rare, so that few candidates come up: a
//! cloud without symmetry has one.

use crate::base::order::Total;

/// A cloud of points that declared rigid motions move together.
#[derive(Clone, Debug)]
pub struct Cloud {
    rows: Vec<Vec<usize>>,
    dimensions: usize,
    /// Rows of one kind may be exchanged; others have kinds of their own.
    kinds: Vec<usize>,
    /// Kinds as the invariants know them: one for all where rows may be renumbered.
    loose_kinds: Vec<usize>,
    unit: f64,
    /// Whether a shift is declared.
    pub shifts: bool,
    /// Whether mirror images are the same.
    pub mirrors: bool,
}

type Point = [f64; 3];

impl Cloud {
    /// A cloud of rows of 2 or 3 slots; lengths are measured in `unit`.
    pub fn new(rows: &[Vec<usize>], exchanges: &[Vec<Vec<usize>>], unit: f64) -> Self {
        let mut group_kinds = vec![None; exchanges.len()];
        let mut n_kinds = 0;
        let mut new_kind = || {
            n_kinds += 1;
            n_kinds - 1
        };
        let kinds = rows
            .iter()
            .map(|row| match exchanges.iter().position(|group| group.iter().any(|other| other.contains(&row[0]))) {
                Some(group) => *group_kinds[group].get_or_insert_with(&mut new_kind),
                None => new_kind(),
            })
            .collect::<Vec<usize>>();
        let loose_kinds = kinds.clone();
        Cloud {
            loose_kinds,
            dimensions: rows[0].len(),
            rows: rows.to_vec(),
            kinds,
            unit,
            shifts: false,
            mirrors: false,
        }
    }

    /// Makes the invariants blind to the numbers of rows if any of its slots is renumbered by a reversal or a cycle.
    pub fn loosen(&mut self, renumbered: impl Fn(usize) -> bool) {
        if self.rows.iter().flatten().any(|&slot| renumbered(slot)) {
            self.loose_kinds.iter_mut().for_each(|kind| *kind = 0);
        }
    }

    /// Its rows.
    pub fn rows(&self) -> &[Vec<usize>] {
        &self.rows
    }

    /// Whether a slot is in one of its rows.
    pub fn has_slot(&self, slot: usize) -> bool {
        self.rows.iter().any(|row| row.contains(&slot))
    }

    /// Whether these are its rows.
    pub fn has_rows(&self, rows: &[Vec<usize>]) -> bool {
        self.rows == rows
    }

    /// The distances of the rows from the middle, in units: sorted within each kind, kind by kind.
    pub fn sorted_radii(&self, at: &[f64]) -> Vec<f64> {
        let (points, _) = self.points(at);
        let mut radii: Vec<(usize, Total)> = points
            .iter()
            .zip(&self.loose_kinds)
            .map(|(point, &kind)| (kind, Total(length(point) / self.unit)))
            .collect();
        radii.sort();
        radii.into_iter().map(|(_, radius)| radius.0).collect()
    }

    /// The rows as points about their middle (about the origin where no shift is declared), and the middle.
    fn points(&self, at: &[f64]) -> (Vec<Point>, Point) {
        let mut middle = [0.0; 3];
        let coordinate = |row: &[usize], k: usize| if k < self.dimensions { at[row[k]] } else { 0.0 };
        if self.shifts {
            for (k, middle) in middle.iter_mut().enumerate() {
                *middle = self.rows.iter().map(|row| coordinate(row, k)).sum::<f64>() / self.rows.len() as f64;
            }
        }
        let points = self.rows.iter().map(|row| std::array::from_fn(|k| coordinate(row, k) - middle[k])).collect();
        (points, middle)
    }
}

fn length(a: &Point) -> f64 {
    inner(a, a).sqrt()
}

fn inner(a: &Point, b: &Point) -> f64 {
    a[0] * b[0] + a[1] * b[1] + a[2] * b[2]
}

fn minus(a: &Point, b: &Point) -> Point {
    [a[0] - b[0], a[1] - b[1], a[2] - b[2]]
}

fn cross(a: &Point, b: &Point) -> Point {
    [a[1] * b[2] - a[2] * b[1], a[2] * b[0] - a[0] * b[2], a[0] * b[1] - a[1] * b[0]]
}

fn unit(a: &Point) -> Point {
    let size = length(a);
    a.map(|x| x / size)
}

/// A right-handed orthonormal frame whose first axis is along `a`, the second in the half plane of `b`.
fn frame(a: &Point, b: &Point) -> [Point; 3] {
    let first = unit(a);
    let along = inner(b, &first);
    let second = unit(&[b[0] - along * first[0], b[1] - along * first[1], b[2] - along * first[2]]);
    [first, second, cross(&first, &second)]
}

/// Offers `right` with this cloud moved onto that of `left` in every way that may fit within `near`, until one is taken.
pub fn placements(cloud: &Cloud, left: &[f64], right: &[f64], near: f64, take: &mut dyn FnMut(Vec<f64>) -> bool) {
    let ((ours, middle), (theirs, _)) = (cloud.points(left), cloud.points(right));
    let slack = 4.0 * near * cloud.unit;
    let (our_radii, their_radii): (Vec<f64>, Vec<f64>) =
        (ours.iter().map(length).collect(), theirs.iter().map(length).collect());
    let size = our_radii.iter().copied().fold(0.0, f64::max);
    let like = |row: usize, other: usize| {
        cloud.kinds[row] == cloud.kinds[other] && (our_radii[row] - their_radii[other]).abs() <= slack
    };
    let count_like = |row: usize| (0..theirs.len()).filter(|&other| like(row, other)).count();
    let far_enough = |row: &usize| our_radii[*row] > 0.2 * size && our_radii[*row] > slack;
    let place = |rotation: &dyn Fn(&Point) -> Point| {
        let mut placed = right.to_vec();
        for (row, point) in cloud.rows.iter().zip(&theirs) {
            let turned = rotation(point);
            row.iter().enumerate().for_each(|(k, &slot)| placed[slot] = turned[k] + middle[k]);
        }
        placed
    };
    let Some(first) = (0..ours.len()).filter(far_enough).min_by_key(|&row| (count_like(row), row)) else {
        take(place(&|point| *point));
        return;
    };
    let a = &ours[first];
    if cloud.dimensions == 2 {
        for other in (0..theirs.len()).filter(|&other| like(first, other)) {
            let b = &theirs[other];
            let scale = our_radii[first] * their_radii[other];
            for mirrored in [false, true].into_iter().filter(|&mirrored| !mirrored || cloud.mirrors) {
                let sign = if mirrored { -1.0 } else { 1.0 };
                // The complex number a / b, or a / conjugate(b).
                let (c, s) = ((a[0] * b[0] + sign * a[1] * b[1]) / scale, (a[1] * b[0] - sign * a[0] * b[1]) / scale);
                let rotation = |p: &Point| [c * p[0] - sign * s * p[1], s * p[0] + sign * c * p[1], 0.0];
                if take(place(&rotation)) {
                    return;
                }
            }
        }
        return;
    }
    let sine = |row: usize| length(&cross(&unit(a), &ours[row]));
    let spread = (0..ours.len()).map(sine).fold(0.0, f64::max);
    // A second row well off the axis of the first; rare by kind, radius and distance from it.
    let apart = |row: usize| length(&minus(&ours[row], a));
    let count_pairs = |row: usize| {
        let fits = |other: usize, k: usize| {
            like(first, other)
                && like(row, k)
                && (length(&minus(&theirs[k], &theirs[other])) - apart(row)).abs() <= 2.0 * slack
        };
        let other = (0..theirs.len()).find(|&other| like(first, other)).unwrap_or(0);
        (0..theirs.len()).filter(|&k| fits(other, k)).count()
    };
    let second = (0..ours.len())
        .filter(|&row| row != first && sine(row) > 0.3 * spread && sine(row) > 1e-9 * size)
        .min_by_key(|&row| (count_pairs(row), row));
    for other in (0..theirs.len()).filter(|&other| like(first, other)) {
        let b = &theirs[other];
        if spread <= slack {
            // All on one line, as far as can be told: any rotation of the line onto the line.
            let helper = |p: &Point| if p[0].abs() < 0.7 * length(p) { [1.0, 0.0, 0.0] } else { [0.0, 1.0, 0.0] };
            let (to, from) = (frame(a, &helper(a)), frame(b, &helper(b)));
            if take(place(&|point| turn(&to, &from, point, 1.0))) {
                return;
            }
        }
        let Some(second) = second else { continue };
        let to = frame(a, &ours[second]);
        for (k, point) in theirs.iter().enumerate() {
            let fits = k != other
                && like(second, k)
                && (length(&minus(point, b)) - apart(second)).abs() <= 2.0 * slack
                && length(&cross(&unit(b), point)) > 0.1 * sine(second);
            if !fits {
                continue;
            }
            let from = frame(b, point);
            for sign in [1.0, -1.0].into_iter().filter(|&sign| sign > 0.0 || cloud.mirrors) {
                if take(place(&|point| turn(&to, &from, point, sign))) {
                    return;
                }
            }
        }
    }
}

/// A point seen from one frame and drawn in another; with sign -1 mirrored in the plane of the first two axes.
fn turn(to: &[Point; 3], from: &[Point; 3], point: &Point, sign: f64) -> Point {
    let seen = [inner(point, &from[0]), inner(point, &from[1]), sign * inner(point, &from[2])];
    std::array::from_fn(|k| seen[0] * to[0][k] + seen[1] * to[1][k] + seen[2] * to[2][k])
}
