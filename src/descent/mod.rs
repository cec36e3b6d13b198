//! From a start to a minimum: a descent that asks for points and is told values.
//!
//! Enters: a region, a start, values and gradients. Leaves: an end. Promised: the same answers give the same questions,
//! bit for bit. Deliberately absent: the objective itself, clocks, threads, and any knowledge of other descents.
