//! From text to tree: the words of a problem file, without their meaning.
//!
//! Enters: the text of one file. Leaves: a [`tree::File`] of what was understood, and every [`diagnostic::Diagnostic`]
//! at once. Promised: never a panic, whatever the bytes; every node carries its span; spans are byte offsets into the
//! text. Deliberately absent: names, shapes and values (see `landscape`), and any look at the disk.

pub mod diagnostic;
pub mod tree;
