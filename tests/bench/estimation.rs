//! Estimation side by side with general-purpose libraries, and with `-- --coverage` the size of each test and the
//! coverage of each interval on simulated economies (`--runs N` for other than the default number of them).
//!
//! The libraries run in one Python process whose environment is that of `.ci/reference`, their threads as
//! their users have them. Contestants take turns within each round; medians are printed. A speed-up is the
//! library's time over ours; where a library would take too long, it does a stated part of the work.
#![expect(clippy::print_stdout, reason = "a benchmark prints its table")]

mod estimation {
    pub(crate) mod coverage;
    pub(crate) mod economy;
    pub(crate) mod estimators;
    pub(crate) mod library;
    pub(crate) mod marks;
    pub(crate) mod size;
    pub(crate) mod speed;
}
#[path = "support/table.rs"]
mod table;

use anyhow::Context;
use estimation::{coverage, marks, size, speed};

/// Runs a cell of the coverage table: all cells within ten minutes on two cores.
const COVERAGE_RUNS: usize = 300;
/// Runs a row of the table of sizes.
const SIZE_RUNS: usize = 2000;

fn main() -> anyhow::Result<()> {
    let threads = std::thread::available_parallelism()?.get();
    let arguments: Vec<String> = std::env::args().skip(1).collect();
    if !arguments.iter().any(|a| a == "--coverage") {
        return speed::print(threads);
    }
    let after_runs = arguments.iter().skip_while(|a| *a != "--runs").nth(1);
    let runs: Option<usize> = match after_runs {
        Some(number) => Some(number.parse().context("--runs takes a number")?),
        None => None,
    };
    size::print(runs.unwrap_or(SIZE_RUNS), threads);
    marks::print(runs.unwrap_or(SIZE_RUNS), threads);
    coverage::print(runs.unwrap_or(COVERAGE_RUNS), threads);
    Ok(())
}
