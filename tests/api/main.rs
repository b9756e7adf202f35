//! Tests through the real HTTP interface on a real Postgres.

mod cluster;
mod support;
