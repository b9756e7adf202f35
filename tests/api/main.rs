//! Tests through the real HTTP interface on a real Postgres.

#![expect(clippy::unwrap_used, reason = "a failed unwrap is a failed test")]

mod access;
mod architecture;
mod bulk;
mod cluster;
mod command;
mod contract;
mod conventions;
mod demo;
mod ending;
mod estimate_dynamics;
mod estimate_faults;
mod estimate_methods;
mod estimates;
mod held;
mod hostile;
mod kill;
mod logs;
mod open_data;
mod reading;
mod readme;
mod representations;
mod runs;
mod simulations;
mod storing;
mod support;
mod uploads;
mod vintages;
mod wrong_input;
