//! Tests through the real HTTP interface on a real Postgres.

#![expect(clippy::unwrap_used, reason = "a failed unwrap is a failed test")]

mod architecture;
mod bulk;
mod cluster;
mod command;
mod held;
mod hostile;
mod support;
mod uploads;
mod vintages;
mod wrong_input;
