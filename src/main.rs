//! The `thalweg` command.

fn main() {}
