//! What moves may know of a landscape: its families, clouds and kinds, read off the promised symmetries.

use crate::landscape::Landscape;
use crate::landscape::symmetry::Symmetry;

/// The structure of a landscape as moves see it.
#[derive(Clone, Debug)]
pub struct Structure {
    /// For each slot, the lower end of the start region.
    pub start_lower: Vec<f64>,
    /// For each slot, the upper end of the start region.
    pub start_upper: Vec<f64>,
    /// For each slot, the lower bound.
    pub lower: Vec<f64>,
    /// For each slot, the upper bound.
    pub upper: Vec<f64>,
    /// For each slot, the scale of a move of size 1: the width of its start region.
    pub scale: Vec<f64>,
    /// For each slot, whether it wraps.
    pub cyclic: Vec<bool>,
    /// Clouds of points: rows that a declared rigid motion moves together.
    pub clouds: Vec<Cloud>,
    /// Groups of two or more rows that may be exchanged.
    pub exchanges: Vec<Vec<Vec<usize>>>,
}

/// Rows of 2 or 3 slots that declared rotations or shifts move together.
#[derive(Clone, Debug)]
pub struct Cloud {
    /// The slots of each row.
    pub rows: Vec<[usize; 3]>,
    /// 2 or 3; a row's further places repeat its last slot and mean nothing.
    pub dimensions: usize,
    /// For each row, its kind: rows of one kind are interchangeable. Rows that nothing exchanges have kinds of their
    /// own.
    pub kinds: Vec<usize>,
    /// How many kinds there are.
    pub n_kinds: usize,
    /// Whether a shift of the whole cloud is declared.
    pub shifts: bool,
}

impl Structure {
    /// Reads the structure of a landscape.
    pub fn new(landscape: &Landscape) -> Self {
        let slots = &landscape.slots;
        let exchanges: Vec<Vec<Vec<usize>>> = landscape
            .symmetries
            .iter()
            .filter_map(|symmetry| match symmetry {
                Symmetry::Exchange { rows } if rows.len() > 1 => Some(rows.clone()),
                _ => None,
            })
            .collect();
        let mut clouds: Vec<Cloud> = Vec::new();
        for symmetry in &landscape.symmetries {
            let Symmetry::Rotate { rows } = symmetry else { continue };
            let dimensions = rows.first().map_or(0, Vec::len);
            if !(2..=3).contains(&dimensions) || rows.len() < 2 {
                continue;
            }
            let points: Vec<[usize; 3]> = rows.iter().map(|row| [row[0], row[1], row[dimensions - 1]]).collect();
            let shifts = landscape.symmetries.iter().any(
                |other| matches!(other, Symmetry::Shift { rows: shifted, .. } if rows.iter().all(|row| shifted.contains(row))),
            );
            let (kinds, n_kinds) = kinds_of(rows, &exchanges);
            clouds.push(Cloud { rows: points, dimensions, kinds, n_kinds, shifts });
        }
        Structure {
            start_lower: slots.iter().map(|slot| slot.start_lower).collect(),
            start_upper: slots.iter().map(|slot| slot.start_upper).collect(),
            lower: slots.iter().map(|slot| slot.lower).collect(),
            upper: slots.iter().map(|slot| slot.upper).collect(),
            scale: slots.iter().map(|slot| slot.start_upper - slot.start_lower).collect(),
            cyclic: slots.iter().map(|slot| slot.cyclic).collect(),
            clouds,
            exchanges,
        }
    }

    /// The number of unknowns.
    pub fn n_unknowns(&self) -> usize {
        self.scale.len()
    }

    /// The difference of two numbers in a slot; the short way round for cyclic ones.
    pub fn difference(&self, slot: usize, left: f64, right: f64) -> f64 {
        let difference = left - right;
        if !self.cyclic[slot] {
            return difference;
        }
        let period = self.upper[slot] - self.lower[slot];
        difference - period * (difference / period + 0.5).floor()
    }

    /// Brings a point into the bounds: cyclic unknowns wrap, the others are reflected once and then clamped, so that
    /// moves near a bound do not pile up on it.
    pub fn bring_inside(&self, at: &mut [f64]) {
        for (slot, x) in at.iter_mut().enumerate() {
            let (lower, upper) = (self.lower[slot], self.upper[slot]);
            if self.cyclic[slot] {
                let period = upper - lower;
                *x -= period * ((*x - lower) / period).floor();
                continue;
            }
            if *x < lower {
                *x = lower + (lower - *x);
            } else if *x > upper {
                *x = upper - (*x - upper);
            }
            *x = x.max(lower).min(upper);
        }
    }
}

/// The kind of each row: the exchange group that holds one of its slots, or a kind of its own.
fn kinds_of(rows: &[Vec<usize>], exchanges: &[Vec<Vec<usize>>]) -> (Vec<usize>, usize) {
    let mut group_kinds: Vec<Option<usize>> = vec![None; exchanges.len()];
    let mut n_kinds = 0;
    let mut new_kind = || {
        n_kinds += 1;
        n_kinds - 1
    };
    let kinds = rows
        .iter()
        .map(|row| {
            let group =
                exchanges.iter().position(|group| group.iter().any(|other| row.iter().all(|s| other.contains(s))));
            match group {
                Some(group) => *group_kinds[group].get_or_insert_with(&mut new_kind),
                None => new_kind(),
            }
        })
        .collect();
    (kinds, n_kinds)
}
