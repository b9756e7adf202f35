//! Tests through the real HTTP interface on a real Postgres.

#![expect(clippy::unwrap_used, reason = "a failed unwrap is a failed test")]

mod architecture;
mod cluster;
mod command;
mod ending;
mod kill;
mod reading;
mod storing;
mod support;
mod uploads;
