//! Arithmetic: the operations of the language, the elementary functions, and the number algebras.
//!
//! Enters: numbers. Leaves: numbers. Promised: the same bits on every CPU and platform (no platform libm, no fused
//! multiply-add), and the accuracy that each function's docs state. Deliberately absent: anything that knows a term or
//! a program.

pub mod algebra;
pub mod functions;
pub mod interval;
pub mod operation;
