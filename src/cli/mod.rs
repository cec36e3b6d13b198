//! The command line: what was typed is validated, then done; everything here sees the library's facade only.

mod budget;
mod check;
mod command;
mod display;
mod hunt;
mod look;
mod minima;
mod resume;
mod screen;
mod session;
mod source;
mod values;

pub(crate) use command::main;
