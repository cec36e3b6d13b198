//! One number that no member of the group changes: the second key of the ledger.
//!
//! Values alone are a poor key where many minima share them: equal wells in equal places, or sign patterns of a problem
//! whose symmetry was not declared. The number is a sum of parts, one for each slot or row, with weights at random that are
//! equal within each class of slots that some promise renumbers:
//!
//! - for a row of a cloud, its distance from the middle;
//! - for the rows of a shift, the distance from their mean, or on a circle the length of the mean arrow;
//! - for any other slot its number, on a circle the cosine; its magnitude where it can be flipped.
//!
//! Where promises overlap in a way that leaves none of these unchanged, the part is left out: the key is then less sharp,
//! never wrong.

use std::collections::BTreeSet;

use crate::numbers::functions::cosine;
use crate::numbers::functions::sine;

/// How a slot enters the sum.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord)]
enum Treatment {
    Plain,
    Cloud(usize),
    /// Of a shift, a column.
    Shift(usize, usize),
    Nothing,
}

/// What the sum is made of.
#[derive(Clone, Debug)]
enum Part {
    /// The distance of a row from the middle of all rows of its cloud, or from the origin.
    Radius { cloud: usize, row: usize },
    /// The distance of a slot from the mean of some slots; signed unless it can be flipped.
    FromMean { slot: usize, slots: Vec<usize>, flips: bool },
    /// The length of the mean of unit vectors at angles with a period.
    Arrow { slots: Vec<usize>, period: f64 },
    /// The cosine of an angle with a period.
    Angle { slot: usize, period: f64 },
    /// A number.
    Number { slot: usize, flips: bool },
}

/// Rows that are turned together, and whether they are shifted too.
#[derive(Clone, Debug)]
pub struct Turned {
    /// The rows.
    pub rows: Vec<Vec<usize>>,
    /// Whether the middle does not matter.
    pub shifts: bool,
}

/// Rows that are shifted together and not turned, and the periods of their columns.
pub type Shifted = (Vec<Vec<usize>>, Vec<Option<f64>>);

/// What the promises do, as far as the invariant has to know it.
#[derive(Debug, Default)]
pub struct Moves {
    /// Widths of the start region, the units.
    pub scale: Vec<f64>,
    /// Periods of cyclic slots.
    pub periods: Vec<Option<f64>>,
    /// Clouds.
    pub turned: Vec<Turned>,
    /// Shifts of rows that are not a cloud.
    pub shifted: Vec<Shifted>,
    /// Sets of slots that change their signs together.
    pub flipped: Vec<Vec<usize>>,
    /// Rows that are renumbered, in whatever way.
    pub renumbered: Vec<Vec<Vec<usize>>>,
}

/// The sum.
#[derive(Clone, Debug)]
pub struct Invariant {
    parts: Vec<(f64, Part)>,
    clouds: Vec<Turned>,
    /// For each cloud, whether its distances from the middle are invariant.
    steady: Vec<bool>,
    slack: f64,
}

impl Invariant {
    /// Chooses the parts.
    pub fn new(moves: &Moves) -> Self {
        let n = moves.scale.len();
        let mut classes: Vec<usize> = (0..n).collect();
        for rows in &moves.renumbered {
            for row in rows {
                row.iter().zip(&rows[0]).for_each(|(&slot, &first)| join(&mut classes, slot, first));
            }
        }
        let mut treatments = vec![Treatment::Plain; n];
        let mut broken = BTreeSet::new();
        let mut treat = |slot: usize, treatment: Treatment| {
            let before = std::mem::replace(&mut treatments[slot], treatment);
            if before != Treatment::Plain {
                broken.extend([before, treatment]);
            }
        };
        for (number, cloud) in moves.turned.iter().enumerate() {
            for row in &cloud.rows {
                row.iter().for_each(|&slot| treat(slot, Treatment::Cloud(number)));
                row.iter().for_each(|&slot| join(&mut classes, slot, row[0]));
            }
        }
        for (number, (rows, _)) in moves.shifted.iter().enumerate() {
            for row in rows {
                row.iter().enumerate().for_each(|(column, &slot)| treat(slot, Treatment::Shift(number, column)));
            }
        }
        // A set of flipped slots must hold of each cloud the same columns of all rows, of each shift whole columns.
        for slots in &moves.flipped {
            for (number, cloud) in moves.turned.iter().enumerate() {
                let columns = |row: &Vec<usize>| row.iter().map(|slot| slots.contains(slot)).collect::<Vec<_>>();
                if cloud.rows.iter().any(|row| columns(row) != columns(&cloud.rows[0])) {
                    broken.insert(Treatment::Cloud(number));
                }
            }
            for (number, (rows, _)) in moves.shifted.iter().enumerate() {
                for column in 0..rows[0].len() {
                    if rows.iter().any(|row| slots.contains(&row[column]) != slots.contains(&rows[0][column])) {
                        broken.insert(Treatment::Shift(number, column));
                    }
                }
            }
        }
        // Renumbering must not lead out of what is treated alike; a break spreads until it does not.
        let classes: Vec<usize> = (0..n).map(|slot| root(&classes, slot)).collect();
        loop {
            let before = broken.len();
            let mut mixed = BTreeSet::new();
            for slot in 0..n {
                if treatments[slot] != treatments[classes[slot]] || broken.contains(&treatments[slot]) {
                    mixed.insert(classes[slot]);
                }
            }
            for slot in (0..n).filter(|&slot| mixed.contains(&classes[slot])) {
                if treatments[slot] != Treatment::Plain {
                    broken.insert(treatments[slot]);
                }
                treatments[slot] = Treatment::Nothing;
            }
            if broken.len() == before {
                break;
            }
        }
        let mut class_flips = vec![false; n];
        moves.flipped.iter().flatten().for_each(|&slot| class_flips[classes[slot]] = true);
        let flips = |slot: usize| class_flips[classes[slot]];
        // One unit for a class, so that equal numbers count equally wherever they stand.
        let mut units = vec![0.0_f64; n];
        (0..n).for_each(|slot| units[classes[slot]] = units[classes[slot]].max(moves.scale[slot]));
        let mut parts = Vec::new();
        let mut put = |class: usize, unit: f64, part: Part| parts.push((weight(class) / unit, part));
        for slot in (0..n).filter(|&slot| treatments[slot] == Treatment::Plain) {
            let (class, flips) = (classes[slot], flips(slot));
            match moves.periods[slot] {
                Some(period) => put(class, 1.0, Part::Angle { slot, period }),
                None => put(class, units[class], Part::Number { slot, flips }),
            }
        }
        for (number, cloud) in moves.turned.iter().enumerate() {
            if !broken.contains(&Treatment::Cloud(number)) {
                for (row, slots) in cloud.rows.iter().enumerate() {
                    let class = classes[slots[0]];
                    put(class, units[class], Part::Radius { cloud: number, row });
                }
            }
        }
        for (number, (rows, periods)) in moves.shifted.iter().enumerate() {
            for (column, period) in periods.iter().enumerate() {
                if broken.contains(&Treatment::Shift(number, column)) {
                    continue;
                }
                let slots: Vec<usize> = rows.iter().map(|row| row[column]).collect();
                if let Some(period) = *period {
                    put(classes[slots[0]], 1.0, Part::Arrow { slots, period });
                    continue;
                }
                for &slot in &slots {
                    let class = classes[slot];
                    put(class, units[class], Part::FromMean { slot, slots: slots.clone(), flips: flips(slot) });
                }
            }
        }
        let steady = (0..moves.turned.len()).map(|number| !broken.contains(&Treatment::Cloud(number))).collect();
        let mut invariant = Invariant { parts, clouds: moves.turned.clone(), steady, slack: 0.0 };
        invariant.slack = invariant.parts.iter().map(|(weight, part)| weight * part.steepness(moves)).sum();
        invariant
    }

    /// Whether the distances from the middle of a cloud are invariants of the whole group.
    pub fn is_steady(&self, cloud: usize) -> bool {
        self.steady[cloud]
    }

    /// By how much the numbers of two points may differ that a member of the group maps onto each other within a
    /// deviation, in units, of every slot.
    pub fn slack(&self, deviation: f64) -> f64 {
        // A little more for the rounding of sums of many parts.
        self.slack * deviation + 1e-12 * self.parts.len() as f64
    }

    /// The number of a point.
    pub fn of(&self, at: &[f64]) -> f64 {
        let middles: Vec<Vec<f64>> = self.clouds.iter().map(|cloud| middle(cloud, at)).collect();
        self.parts.iter().map(|(weight, part)| weight * part.of(at, &self.clouds, &middles)).sum()
    }
}

impl Part {
    fn of(&self, at: &[f64], clouds: &[Turned], middles: &[Vec<f64>]) -> f64 {
        let magnitude = |x: f64, flips: bool| if flips { x.abs() } else { x };
        match self {
            Part::Radius { cloud, row } => {
                let place = clouds[*cloud].rows[*row].iter().zip(&middles[*cloud]);
                place.map(|(&slot, middle)| (at[slot] - middle) * (at[slot] - middle)).sum::<f64>().sqrt()
            }
            Part::FromMean { slot, slots, flips } => {
                let mean = slots.iter().map(|&slot| at[slot]).sum::<f64>() / slots.len() as f64;
                magnitude(at[*slot] - mean, *flips)
            }
            Part::Arrow { slots, period } => {
                let angle = |slot: usize| angle(at[slot], *period);
                let along: f64 = slots.iter().map(|&slot| cosine(angle(slot))).sum();
                let across: f64 = slots.iter().map(|&slot| sine(angle(slot))).sum();
                (along * along + across * across).sqrt() / slots.len() as f64
            }
            Part::Angle { slot, period } => cosine(angle(at[*slot], *period)),
            Part::Number { slot, flips } => magnitude(at[*slot], *flips),
        }
    }

    /// How much it changes at most with a deviation of 1 unit of every slot.
    fn steepness(&self, moves: &Moves) -> f64 {
        let around = |slot: usize, period: f64| std::f64::consts::TAU * moves.scale[slot] / period;
        match self {
            // The row and the middle may move by as much each, in every column.
            Part::Radius { cloud, row } => {
                4.0 * moves.turned[*cloud].rows[*row].iter().map(|&slot| moves.scale[slot]).fold(0.0, f64::max)
            }
            Part::FromMean { slots, .. } => 2.0 * slots.iter().map(|&slot| moves.scale[slot]).fold(0.0, f64::max),
            Part::Arrow { slots, period } => slots.iter().map(|&slot| around(slot, *period)).fold(0.0, f64::max),
            Part::Angle { slot, period } => around(*slot, *period),
            Part::Number { slot, .. } => moves.scale[*slot],
        }
    }
}

fn middle(cloud: &Turned, at: &[f64]) -> Vec<f64> {
    let mean = |column: usize| cloud.rows.iter().map(|row| at[row[column]]).sum::<f64>() / cloud.rows.len() as f64;
    (0..cloud.rows[0].len()).map(|column| if cloud.shifts { mean(column) } else { 0.0 }).collect()
}

fn angle(x: f64, period: f64) -> f64 {
    let turns = x / period;
    std::f64::consts::TAU * (turns - turns.floor())
}

/// A weight between 0.5 and 1.5: an integer hash (SplitMix64; Steele, Lea and Flood 2014) of the class.
fn weight(class: usize) -> f64 {
    let mut bits = (class as u64 + 1).wrapping_mul(0x9e37_79b9_7f4a_7c15);
    bits = (bits ^ (bits >> 30)).wrapping_mul(0xbf58_476d_1ce4_e5b9);
    bits = (bits ^ (bits >> 27)).wrapping_mul(0x94d0_49bb_1331_11eb);
    0.5 + ((bits ^ (bits >> 31)) >> 11) as f64 / (1_u64 << 53) as f64
}

fn root(classes: &[usize], mut slot: usize) -> usize {
    while classes[slot] != slot {
        slot = classes[slot];
    }
    slot
}

fn join(classes: &mut [usize], a: usize, b: usize) {
    let (a, b) = (root(classes, a), root(classes, b));
    classes[a.max(b)] = a.min(b);
}
