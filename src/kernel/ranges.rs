//! The values that indices can have inside the loops around them.

use crate::landscape::term::{Affine, Index};

/// The loops around a place, with the range of each counter.
pub struct Ranges<'a> {
    lookups: &'a [Vec<i64>],
    counters: Vec<(i64, i64)>,
}

impl<'a> Ranges<'a> {
    /// Outside all loops.
    pub fn new(lookups: &'a [Vec<i64>]) -> Self {
        Ranges { lookups, counters: Vec::new() }
    }

    /// Goes into a loop; gives the least and greatest value of its counter.
    pub fn enter(&mut self, first: &Index, last: &Index) -> (i64, i64) {
        let range = (self.of(first).0, self.of(last).1);
        self.counters.push(range);
        range
    }

    /// Goes out of the innermost loop.
    pub fn leave(&mut self) {
        self.counters.pop();
    }

    /// The least and greatest value of an index, found by the range of each counter alone.
    pub fn of(&self, index: &Index) -> (i64, i64) {
        match index {
            Index::Affine(affine) => self.affine(affine),
            Index::Lookup { table, at } => {
                let values = &self.lookups[*table as usize];
                let (low, high) = self.affine(at);
                if 0 <= low && low <= high && high < values.len() as i64 {
                    let part = &values[low as usize..=high as usize];
                    (part.iter().copied().min().unwrap_or(0), part.iter().copied().max().unwrap_or(0))
                } else {
                    (i64::MIN / 4, i64::MAX / 4)
                }
            }
        }
    }

    fn affine(&self, affine: &Affine) -> (i64, i64) {
        affine.factors.iter().fold((affine.constant, affine.constant), |(low, high), &(level, factor)| {
            let (a, b) = self.counters.get(level as usize).copied().unwrap_or((i64::MIN / 4, i64::MAX / 4));
            let (a, b) = (a.saturating_mul(factor), b.saturating_mul(factor));
            (low.saturating_add(a.min(b)), high.saturating_add(a.max(b)))
        })
    }
}
