//! What benchmarks share: medians, the table, the target lines, and the service they measure.

pub(crate) mod load;
pub(crate) mod pgbench;
pub(crate) mod service;
mod table;

pub(crate) use table::{median, print_table, print_target};
