//! The group of the declared symmetries, and whether one of its members maps a point onto another.
//!
//! The group is taken apart: what turns, shifts and mirrors clouds is matched by laying one cloud on the other (see
//! `alignment`); shifts of plain and cyclic families by the mean or by a reference row; flips, reversals and cycles, a
//! finite set, are tried one by one; exchanges, last, by giving each row its nearest. Invariants that cost little are
//! compared first.
//!
//! Where promises do not respect each other (a flip of some of the rows that an exchange renumbers, a rotation of rows
//! together whose shifts are apart) the generated group is larger than what is gone through here. Images that only the rest
//! relates then stay two entries: too many minima, never too few.

use crate::base::order::Total;
use crate::landscape::Slot;
use crate::landscape::symmetry::Symmetry;

use super::alignment::{Cloud, placements};
use super::invariant::{Invariant, Moves, Turned};

/// The most combinations of flips, reversals and cycles that are tried.
const MAX_FINITE: usize = 20_000;

/// When two points are the same. All deviations are in units of the start region's widths.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Tolerances {
    /// Values: relative to the larger of the two, or to the scale of values given to the ledger.
    pub value: f64,
    /// Places after the best match: the largest deviation of an unknown.
    pub place: f64,
    /// Pairs within so many times a tolerance are near twins.
    pub near: f64,
    /// The two tolerances are so many times larger for ends at kinks, which are met less exactly.
    pub kinked: f64,
}

impl Default for Tolerances {
    /// Values of images of one minimum agree to 1e-12, places to 1e-7; different minima of small clusters lie as close
    /// as 6e-8 in value.
    fn default() -> Self {
        Tolerances { value: 2e-9, place: 1e-5, near: 10.0, kinked: 1000.0 }
    }
}

/// Invariants of a point under the group: sorted distances from the middle for clouds, in units, and one number for all.
#[derive(Clone, Debug, Default, PartialEq)]
pub struct Fingerprint {
    radii: Vec<f64>,
    number: f64,
}

impl Fingerprint {
    /// A number that no member of the group changes.
    pub fn number(&self) -> f64 {
        self.number
    }
}

/// How two points compare.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum Match {
    /// A member of the group maps one onto the other, with this deviation.
    Same(f64),
    /// Close, but farther than the tolerance.
    Near(f64),
    /// Different.
    Distinct,
}

/// What makes two points of a landscape the same.
#[derive(Clone, Debug)]
pub struct Identity {
    scale: Vec<f64>,
    periods: Vec<Option<f64>>,
    clouds: Vec<Cloud>,
    shifts: Vec<Shift>,
    finite: Vec<Finite>,
    exchanges: Vec<Vec<Vec<usize>>>,
    /// Slots that no exchange moves.
    fixed: Vec<usize>,
    invariant: Invariant,
}

/// A shift of rows that no rotation turns.
#[derive(Clone, Debug)]
struct Shift {
    rows: Vec<Vec<usize>>,
    periods: Vec<Option<f64>>,
}

/// A generator of the finite part.
#[derive(Clone, Debug)]
enum Finite {
    Flip(Vec<usize>),
    Reverse(Vec<Vec<usize>>),
    Cycle(Vec<Vec<usize>>),
}

impl Finite {
    fn flipped(&self) -> Option<&Vec<usize>> {
        match self {
            Finite::Flip(slots) => Some(slots),
            _ => None,
        }
    }

    fn renumbered(&self) -> Option<&Vec<Vec<usize>>> {
        match self {
            Finite::Flip(_) => None,
            Finite::Reverse(rows) | Finite::Cycle(rows) => Some(rows),
        }
    }

    fn order(&self) -> usize {
        match self {
            Finite::Flip(_) | Finite::Reverse(_) => 2,
            Finite::Cycle(rows) => rows.len(),
        }
    }

    /// Whether it moves or flips a slot.
    fn moves(&self, slot: usize) -> bool {
        match self {
            Finite::Flip(slots) => slots.contains(&slot),
            Finite::Reverse(rows) | Finite::Cycle(rows) => rows.iter().any(|row| row.contains(&slot)),
        }
    }

    fn apply(&self, times: usize, from: &[f64]) -> Vec<f64> {
        let mut to = from.to_vec();
        let mut renumber = |rows: &[Vec<usize>], source: &dyn Fn(usize) -> usize| {
            for (row, slots) in rows.iter().enumerate() {
                slots.iter().zip(&rows[source(row)]).for_each(|(&slot, &other)| to[slot] = from[other]);
            }
        };
        match self {
            _ if times == 0 => {}
            Finite::Flip(slots) => slots.iter().for_each(|&slot| to[slot] = -from[slot]),
            Finite::Reverse(rows) => renumber(rows, &|row| rows.len() - 1 - row),
            Finite::Cycle(rows) => renumber(rows, &|row| (row + times) % rows.len()),
        }
        to
    }
}

impl Identity {
    /// Reads the group off the promises.
    pub fn new(slots: &[Slot], symmetries: &[Symmetry]) -> Self {
        let mut scale: Vec<f64> = slots.iter().map(|slot| slot.start_upper - slot.start_lower).collect();
        let periods: Vec<Option<f64>> =
            slots.iter().map(|slot| slot.cyclic.then_some(slot.upper - slot.lower)).collect();
        let exchanges: Vec<Vec<Vec<usize>>> = symmetries
            .iter()
            .filter_map(|symmetry| match symmetry {
                Symmetry::Exchange { rows } => Some(rows.clone()),
                _ => None,
            })
            .collect();
        let (mut clouds, mut finite): (Vec<Cloud>, Vec<Finite>) = (Vec::new(), Vec::new());
        for symmetry in symmetries {
            match symmetry {
                Symmetry::Rotate { rows } => {
                    let widest = rows.iter().flatten().map(|&slot| scale[slot]).fold(0.0, f64::max);
                    rows.iter().flatten().for_each(|&slot| scale[slot] = widest);
                    clouds.push(Cloud::new(rows, &exchanges, widest));
                }
                Symmetry::Flip { slots } => finite.push(Finite::Flip(slots.clone())),
                Symmetry::Reverse { rows } => finite.push(Finite::Reverse(rows.clone())),
                Symmetry::Cycle { rows } => finite.push(Finite::Cycle(rows.clone())),
                _ => {}
            }
        }
        let mut shifts = Vec::new();
        for symmetry in symmetries {
            match symmetry {
                Symmetry::Shift { rows, periods } => match clouds.iter_mut().find(|cloud| cloud.has_rows(rows)) {
                    Some(cloud) => cloud.shifts = true,
                    None => shifts.push(Shift { rows: rows.clone(), periods: periods.clone() }),
                },
                Symmetry::Mirror { rows } => match clouds.iter_mut().find(|cloud| cloud.has_rows(rows)) {
                    Some(cloud) => cloud.mirrors = true,
                    // Without rotations the mirror image is one element: the last column changes sign.
                    None => finite.push(Finite::Flip(rows.iter().filter_map(|row| row.last().copied()).collect())),
                },
                _ => {}
            }
        }
        for cloud in &mut clouds {
            cloud.loosen(|slot| {
                finite.iter().any(|generator| {
                    matches!(generator, Finite::Reverse(_) | Finite::Cycle(_)) && generator.moves(slot)
                })
            });
        }
        let mut exchanged = vec![false; slots.len()];
        exchanges.iter().flatten().flatten().for_each(|&slot| exchanged[slot] = true);
        let fixed = (0..slots.len()).filter(|&slot| !exchanged[slot]).collect();
        let moves = Moves {
            scale: scale.clone(),
            periods: periods.clone(),
            turned: clouds.iter().map(|cloud| Turned { rows: cloud.rows().to_vec(), shifts: cloud.shifts }).collect(),
            shifted: shifts.iter().map(|shift| (shift.rows.clone(), shift.periods.clone())).collect(),
            flipped: finite.iter().filter_map(Finite::flipped).cloned().collect(),
            renumbered: finite.iter().filter_map(Finite::renumbered).chain(&exchanges).cloned().collect(),
        };
        let invariant = Invariant::new(&moves);
        Identity { scale, periods, clouds, shifts, finite, exchanges, fixed, invariant }
    }

    /// The invariants of a point.
    pub fn fingerprint(&self, at: &[f64]) -> Fingerprint {
        let steady = self.clouds.iter().enumerate().filter(|(number, _)| self.invariant.is_steady(*number));
        let radii = steady.flat_map(|(_, cloud)| cloud.sorted_radii(at)).collect();
        Fingerprint { radii, number: self.invariant.of(at) }
    }

    /// Whether the invariants allow two points to be the same within a deviation of each slot.
    pub fn alike(&self, left: &Fingerprint, right: &Fingerprint, deviation: f64) -> bool {
        // A distance changes by what its row and the middle move, in up to three columns.
        let tolerance = 4.0 * deviation;
        (left.number - right.number).abs() <= self.slack(deviation)
            && left.radii.iter().zip(&right.radii).all(|(a, b)| (a - b).abs() <= tolerance)
    }

    /// By how much [`Fingerprint::number`] may differ between points that are the same within a deviation of each slot.
    pub fn slack(&self, deviation: f64) -> f64 {
        self.invariant.slack(deviation)
    }

    /// Compares two points by an explicit match. Beyond `tolerance` and up to `near` it is [`Match::Near`].
    pub fn compare(&self, left: &[f64], right: &[f64], tolerance: f64, near: f64) -> Match {
        self.compare_counted(left, right, tolerance, near).0
    }

    /// The same, with the number of placements that were tried on the whole: what the comparison costs.
    pub fn compare_counted(&self, left: &[f64], right: &[f64], tolerance: f64, near: f64) -> (Match, usize) {
        let mut n_placements = 0;
        let mut least = f64::INFINITY;
        let orders: Vec<usize> = self.finite.iter().map(Finite::order).collect();
        let n_finite = orders.iter().try_fold(1_usize, |count, order| count.checked_mul(*order)).unwrap_or(MAX_FINITE);
        for number in 0..n_finite.min(MAX_FINITE) {
            let mut rest = number;
            let mut turned = right.to_vec();
            for (generator, order) in self.finite.iter().zip(&orders) {
                if !rest.is_multiple_of(*order) {
                    turned = generator.apply(rest % order, &turned);
                }
                rest /= order;
            }
            self.align(left, turned, tolerance, near, &mut |placed| {
                n_placements += 1;
                let deviation = self.deviation(left, placed, near);
                least = least.min(deviation);
                least <= tolerance
            });
            if least <= tolerance {
                return (Match::Same(least), n_placements);
            }
        }
        (if least <= near { Match::Near(least) } else { Match::Distinct }, n_placements)
    }

    /// Offers every placement of `right` that may lie on `left`, until one is taken.
    fn align(
        &self,
        left: &[f64],
        right: Vec<f64>,
        tolerance: f64,
        near: f64,
        take: &mut dyn FnMut(&[f64]) -> bool,
    ) -> bool {
        self.align_from(0, left, right, tolerance.max(near), take)
    }

    fn align_from(
        &self,
        number: usize,
        left: &[f64],
        right: Vec<f64>,
        near: f64,
        take: &mut dyn FnMut(&[f64]) -> bool,
    ) -> bool {
        if let Some(cloud) = self.clouds.get(number) {
            let mut taken = false;
            placements(cloud, left, &right, near, &mut |placed| {
                // What this cloud alone decides is looked at before the next is laid: else the counts of placements of
                // all clouds would multiply.
                let hopeless = self.clouds.len() > 1 && self.deviation_within(cloud, left, &placed, near) > near;
                taken = !hopeless && self.align_from(number + 1, left, placed, near, take);
                taken
            });
            return taken;
        }
        let Some(shift) = self.shifts.get(number - self.clouds.len()) else { return take(&right) };
        for moved in self.shifted(shift, left, &right) {
            if self.align_from(number + 1, left, moved, near, take) {
                return true;
            }
        }
        false
    }

    /// The placements of shifted rows: by the mean for open columns, which no exchange changes; by a reference row for
    /// cyclic ones.
    fn shifted(&self, shift: &Shift, left: &[f64], right: &[f64]) -> Vec<Vec<f64>> {
        let exchangeable = self.exchanges.iter().any(|rows| rows.iter().any(|row| row.contains(&shift.rows[0][0])));
        let cyclic = shift.periods.iter().any(Option::is_some);
        let references = if cyclic && exchangeable { shift.rows.len() } else { 1 };
        (0..references)
            .map(|reference| {
                let mut moved = right.to_vec();
                for (column, period) in shift.periods.iter().enumerate() {
                    let mean = |at: &[f64]| {
                        shift.rows.iter().map(|row| at[row[column]]).sum::<f64>() / shift.rows.len() as f64
                    };
                    let by = match period {
                        Some(_) => left[shift.rows[0][column]] - right[shift.rows[reference][column]],
                        None => mean(left) - mean(right),
                    };
                    shift.rows.iter().for_each(|row| moved[row[column]] += by);
                }
                moved
            })
            .collect()
    }

    /// The difference of two numbers in a slot, in its unit.
    fn difference(&self, slot: usize, left: f64, right: f64) -> f64 {
        let mut difference = (left - right).abs();
        if let Some(period) = self.periods[slot] {
            difference -= period * (difference / period).floor();
            difference = difference.min(period - difference);
        }
        difference / self.scale[slot]
    }

    /// The largest deviation once each exchangeable row has its nearest; infinity as soon as it exceeds `limit`.
    fn deviation(&self, left: &[f64], right: &[f64], limit: f64) -> f64 {
        self.deviation_of(&|_| true, left, right, limit)
    }

    /// The same for the slots of a cloud, but for those that are exchanged together with others.
    fn deviation_within(&self, cloud: &Cloud, left: &[f64], right: &[f64], limit: f64) -> f64 {
        self.deviation_of(&|slot| cloud.has_slot(slot), left, right, limit)
    }

    fn deviation_of(&self, counts: &dyn Fn(usize) -> bool, left: &[f64], right: &[f64], limit: f64) -> f64 {
        let mut most: f64 = 0.0;
        for &slot in self.fixed.iter().filter(|&&slot| counts(slot)) {
            most = most.max(self.difference(slot, left[slot], right[slot]));
            if most > limit {
                return f64::INFINITY;
            }
        }
        for rows in self.exchanges.iter().filter(|rows| rows.iter().flatten().all(|&slot| counts(slot))) {
            // Greedy is right while the tolerance is far below the distance of rows; where rows of one point lie closer
            // than that, they are as good as equal and it does not matter which goes to which.
            let mut free: Vec<usize> = (0..rows.len()).collect();
            for row in rows {
                let distance = |other: &[usize]| {
                    let mut most: f64 = 0.0;
                    for (&a, &b) in row.iter().zip(other) {
                        most = most.max(self.difference(a, left[a], right[b]));
                        if most > limit {
                            break;
                        }
                    }
                    most
                };
                let nearest = (0..free.len()).map(|place| (Total(distance(&rows[free[place]])), place)).min();
                let Some((Total(distance), place)) = nearest else { return f64::INFINITY };
                most = most.max(distance);
                if most > limit {
                    return f64::INFINITY;
                }
                free.swap_remove(place);
            }
        }
        most
    }
}
