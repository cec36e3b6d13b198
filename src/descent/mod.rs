//! From starts to minima: descents that ask for points and are told values.
//!
//! Enters: a region, starts, values and gradients in rows of lanes. Leaves: ends. Promised: the same answers give the
//! same questions, bit for bit, in every lane, beside any neighbours, in every build. Deliberately absent: the objective
//! itself, clocks, threads, and any knowledge of other descents.
//!
//! [`Descents`] go down to where values no longer change; a [`Confirmation`] then polishes with exact second derivatives
//! and tells minima from saddles and flats by the spectrum of stiffnesses.

mod confirmation;
mod lane;
mod linear_algebra;
mod memory;
mod quasi_newton;
mod region;

pub use confirmation::{Ask, Confirmation, Judgement};
pub use lane::EndKind;
pub use quasi_newton::{Descents, End};
pub use region::Region;
