//! Ratios of the kernel's speed to stated peers.

fn main() {}
