//! Vacancy filling: the worst-bound points of a cloud go to the best empty places on its surface, while the value falls.
//!
//! How well a place is bound is told by its contacts, the points about one usual contact away: that needs no knowledge
//! of the energy. Contacts only choose which few exchanges are tried; values decide. A descent follows.

use crate::base::order::Total;
use crate::search::geometry::{Point, centroid_of, distance, inner, minus, outer, plus, points_of, usual_contact};
use crate::search::structure::{Cloud, Structure};

/// Two points nearer than this many usual contacts touch.
const CONTACT: f64 = 1.25;
/// An empty place has no point nearer than this many usual contacts.
const ROOM: f64 = 0.85;
/// Places tried for one row.
const PLACES: usize = 4;
/// Rows tried in vain before the filling ends.
const ROWS: usize = 3;
/// Rows moved at most.
const MOST_MOVED: usize = 12;

/// An empty place, with the number of its contacts.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Vacancy {
    /// Where.
    pub at: Point,
    /// How many points it would touch.
    pub contacts: usize,
}

/// The empty places where a new point would touch `dimensions` points or more and overlap none, best first.
pub fn vacancies(points: &[Point], dimensions: usize, contact: f64) -> Vec<Vacancy> {
    let near: Vec<Vec<usize>> = (0..points.len())
        .map(|row| {
            let reach = 1.6 * contact;
            let mut near: Vec<usize> = (0..points.len())
                .filter(|&other| other != row && distance(&points[row], &points[other]) < reach)
                .collect();
            near.sort_by_key(|&other| (Total(distance(&points[row], &points[other])), other));
            near
        })
        .collect();
    let mut found: Vec<Vacancy> = Vec::new();
    let mut consider = |first: usize, at: Point| {
        let room = ROOM * contact;
        if near[first].iter().any(|&other| distance(&points[other], &at) < room) {
            return;
        }
        if points.iter().any(|point| distance(point, &at) < room) {
            return;
        }
        let contacts = points.iter().filter(|point| distance(point, &at) < CONTACT * contact).count();
        // Nearly the same place by way of other points: the better one stays.
        match found.iter_mut().find(|known| distance(&known.at, &at) < 0.4 * contact) {
            Some(known) if known.contacts < contacts => *known = Vacancy { at, contacts },
            Some(_) => {}
            None => found.push(Vacancy { at, contacts }),
        }
    };
    for first in 0..points.len() {
        for (k, &second) in near[first].iter().enumerate().filter(|&(_, &second)| second > first) {
            if dimensions == 2 {
                for at in apexes_of_pair(&points[first], &points[second], contact).into_iter().flatten() {
                    consider(first, at);
                }
                continue;
            }
            for &third in near[first][..].iter().skip(k + 1).filter(|&&third| third > first) {
                if distance(&points[second], &points[third]) > 1.6 * contact {
                    continue;
                }
                for at in apexes(&points[first], &points[second], &points[third], contact).into_iter().flatten() {
                    consider(first, at);
                }
            }
        }
    }
    found.sort_by_key(|vacancy| std::cmp::Reverse(vacancy.contacts));
    found
}

/// The two places at `contact` from three points.
fn apexes(a: &Point, b: &Point, c: &Point, contact: f64) -> [Option<Point>; 2] {
    let (u, v) = (minus(b, a), minus(c, a));
    let normal = outer(&u, &v);
    let (uu, vv, uv, nn) = (inner(&u, &u), inner(&v, &v), inner(&u, &v), inner(&normal, &normal));
    if nn < 1e-12 * uu * vv {
        return [None, None];
    }
    // The centre of the circle through the three, then up and down along the normal.
    let (alpha, beta) = (vv * (uu - uv) / (2.0 * nn), uu * (vv - uv) / (2.0 * nn));
    let middle = plus(&plus(a, alpha, &u), beta, &v);
    let offset = minus(&middle, a);
    let height = contact * contact - inner(&offset, &offset);
    if height <= 0.0 {
        return [None, None];
    }
    let factor = (height / nn).sqrt();
    [Some(plus(&middle, factor, &normal)), Some(plus(&middle, -factor, &normal))]
}

/// The two places in the plane at `contact` from two points.
fn apexes_of_pair(a: &Point, b: &Point, contact: f64) -> [Option<Point>; 2] {
    let u = minus(b, a);
    let uu = inner(&u, &u);
    let height = contact * contact - 0.25 * uu;
    if height <= 0.0 || uu == 0.0 {
        return [None, None];
    }
    let middle = plus(a, 0.5, &u);
    let normal = [-u[1], u[0], 0.0];
    let factor = (height / uu).sqrt();
    [Some(plus(&middle, factor, &normal)), Some(plus(&middle, -factor, &normal))]
}

/// A filling under way: asks for values, ends in a point.
#[derive(Clone, Debug)]
pub struct Filling {
    cloud: Cloud,
    at: Vec<f64>,
    value: f64,
    contact: f64,
    /// The rows to try, worst bound last; the places to try for the one in hand, best last.
    rows: Vec<usize>,
    places: Vec<Point>,
    row: usize,
    trial: Vec<f64>,
    /// The best place for the row so far that lowers the value.
    best: Option<(f64, Vec<f64>)>,
    in_vain: usize,
    n_moved: usize,
    ended: bool,
}

impl Filling {
    /// A filling of the first cloud from a minimum; `None` where there is no cloud, or no empty place.
    pub fn new(structure: &Structure, at: &[f64], value: f64) -> Option<Filling> {
        let cloud = structure.clouds.first().filter(|cloud| cloud.rows.len() > cloud.dimensions + 2)?;
        let contact = usual_contact(&points_of(cloud, at));
        let mut filling = Filling {
            cloud: cloud.clone(),
            at: at.to_vec(),
            value,
            contact,
            rows: Vec::new(),
            places: Vec::new(),
            row: 0,
            trial: Vec::new(),
            best: None,
            in_vain: 0,
            n_moved: 0,
            ended: false,
        };
        filling.rank_rows();
        filling.next_place();
        (!filling.ended).then_some(filling)
    }

    /// The point whose value is wanted.
    pub fn ask(&self) -> &[f64] {
        &self.trial
    }

    /// Takes the value in.
    pub fn tell(&mut self, value: f64) {
        if value < self.value && self.best.as_ref().is_none_or(|best| value < best.0) {
            self.best = Some((value, std::mem::take(&mut self.trial)));
        }
        self.next_place();
    }

    /// Whether it has ended.
    pub fn has_ended(&self) -> bool {
        self.ended
    }

    /// The point that it led to, if any row was moved.
    pub fn result(&self) -> Option<&[f64]> {
        (self.n_moved > 0).then_some(&self.at[..])
    }

    /// Lists the worst-bound rows.
    fn rank_rows(&mut self) {
        let points = points_of(&self.cloud, &self.at);
        let centroid = centroid_of(&points);
        let contacts = |row: usize| {
            let reach = CONTACT * self.contact;
            points
                .iter()
                .enumerate()
                .filter(|&(other, point)| other != row && distance(point, &points[row]) < reach)
                .count()
        };
        // Fewest contacts first; of equals the outermost.
        let mut rows: Vec<(usize, Total, usize)> =
            (0..points.len()).map(|row| (contacts(row), Total(-distance(&points[row], &centroid)), row)).collect();
        rows.sort();
        self.rows = rows.into_iter().take(ROWS).map(|row| row.2).rev().collect();
        self.places.clear();
    }

    /// Goes on to the next trial, or to the next row, or ends.
    fn next_place(&mut self) {
        loop {
            if let Some(place) = self.places.pop() {
                self.trial.clone_from(&self.at);
                let slots = self.cloud.rows[self.row];
                (0..self.cloud.dimensions).for_each(|k| self.trial[slots[k]] = place[k]);
                return;
            }
            if let Some((value, at)) = self.best.take() {
                self.value = value;
                self.at = at;
                self.n_moved += 1;
                self.in_vain = 0;
                if self.n_moved >= MOST_MOVED {
                    self.ended = true;
                    return;
                }
                self.rank_rows();
            } else if !self.trial.is_empty() {
                self.in_vain += 1;
            }
            let Some(row) = self.rows.pop().filter(|_| self.in_vain < ROWS) else {
                self.ended = true;
                return;
            };
            self.row = row;
            let mut others = points_of(&self.cloud, &self.at);
            let own = others.swap_remove(row);
            let touching = |at: &Point| distance(at, &own) < 0.4 * self.contact;
            let places = vacancies(&others, self.cloud.dimensions, self.contact);
            self.places =
                places.into_iter().map(|vacancy| vacancy.at).filter(|at| !touching(at)).take(PLACES).collect();
            self.places.reverse();
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    const TETRAHEDRON: [Point; 4] = [[1.0, 1.0, 1.0], [1.0, -1.0, -1.0], [-1.0, 1.0, -1.0], [-1.0, -1.0, 1.0]];

    /// A regular tetrahedron has one empty place over each face, and none inside.
    #[test]
    fn places_over_the_faces_of_a_tetrahedron() {
        let contact = 8.0_f64.sqrt();
        let found = vacancies(&TETRAHEDRON, 3, contact);
        assert_eq!(found.len(), 4, "{found:?}");
        for vacancy in found {
            assert_eq!(vacancy.contacts, 3);
            assert!((inner(&vacancy.at, &vacancy.at).sqrt() - 25.0 / 75.0_f64.sqrt()).abs() < 1e-9, "{vacancy:?}");
        }
    }

    /// The two sides of a pair in the plane.
    #[test]
    fn places_beside_a_pair_in_the_plane() {
        let found = vacancies(&[[0.0, 0.0, 0.0], [1.0, 0.0, 0.0]], 2, 1.0);
        assert_eq!(found.len(), 2);
        assert!(found.iter().all(|vacancy| (vacancy.at[1].abs() - 0.75_f64.sqrt()).abs() < 1e-12));
    }
}
