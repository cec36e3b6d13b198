//! From a start to a minimum: a descent that asks for points and is told values.
//!
//! Enters: a region, a start, values and gradients. Leaves: an end. Promised: the same answers give the same questions,
//! bit for bit. Deliberately absent: the objective itself, clocks, threads, and any knowledge of other descents.
//!
//! A [`Descent`] goes down to where values no longer change; a [`Confirmation`] then polishes with exact second
//! derivatives and tells minima from saddles and flats by the spectrum of stiffnesses.

mod confirmation;
mod history;
mod linear_algebra;
mod quasi_newton;
mod region;
mod vectors;

pub use confirmation::{Ask, Confirmation, Judgement};
pub use quasi_newton::{Descent, End, EndKind, Progress};
pub use region::Region;
