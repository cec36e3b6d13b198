//! The command line: what was typed is validated, then done; everything here sees the library's facade only.

mod check;
mod command;
mod display;
mod hunt;
mod minima;
mod screen;
mod source;
mod values;

pub(crate) use command::main;
