//! The promised symmetries, as actions on slots.
//!
//! Every promise speaks of *rows*: lists of slots of equal length that move together. A row of `p[n, 3]` is the three
//! slots of one point; with `exchange (p, q)` a row is the slots of `p[i]` followed by those of `q[i]`; a row of a plain
//! family is one slot. All promises of a file together generate one group; two points that a member of it maps onto each
//! other are the same answer.

/// One promise.
#[derive(Clone, Debug, PartialEq)]
pub enum Symmetry {
    /// Any permutation of the rows.
    Exchange {
        /// The interchangeable rows.
        rows: Vec<Vec<usize>>,
    },
    /// The same displacement of all rows.
    Shift {
        /// The rows.
        rows: Vec<Vec<usize>>,
        /// For each column, its period where it is cyclic.
        periods: Vec<Option<f64>>,
    },
    /// A rotation of all rows about the origin; rows have 2 or 3 slots.
    Rotate {
        /// The rows.
        rows: Vec<Vec<usize>>,
    },
    /// A mirror image of all rows (the last column changes sign); rows have 2 or 3 slots.
    Mirror {
        /// The rows.
        rows: Vec<Vec<usize>>,
    },
    /// All slots change sign at once.
    Flip {
        /// The slots.
        slots: Vec<usize>,
    },
    /// The rows in the opposite order.
    Reverse {
        /// The rows, in order.
        rows: Vec<Vec<usize>>,
    },
    /// The rows renumbered cyclically.
    Cycle {
        /// The rows, in order.
        rows: Vec<Vec<usize>>,
    },
}
