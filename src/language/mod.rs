//! From text to tree: the words of a problem file, without their meaning.
//!
//! Enters: the text of one file. Leaves: a [`tree::File`] of what was understood, and every [`diagnostic::Diagnostic`]
//! at once. Promised: never a panic, whatever the bytes; every node carries its span; spans are byte offsets into the
//! text. Deliberately absent: names, shapes and values (see `landscape`), and any look at the disk.
//!
#![doc = include_str!("reference.md")]

pub mod diagnostic;
#[cfg(test)]
mod goldens;
mod lexer;
pub mod mistake;
mod parse;
mod parser;
mod print;
mod render;
mod suggest;
mod token;
pub mod tree;

pub use parse::{Parsed, decode, parse};
pub use print::print;
pub use render::render;
pub use suggest::suggest;
