//! The `bandproof` program.

fn main() {}
