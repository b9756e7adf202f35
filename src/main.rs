//! The `realterms` program.

use std::process::ExitCode;

fn main() -> ExitCode {
    realterms::cli::main()
}
