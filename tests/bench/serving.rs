//! Benchmark.

fn main() {}
