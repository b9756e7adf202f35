//! The `realterms` program.

fn main() {}
