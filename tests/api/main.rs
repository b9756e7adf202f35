//! Tests through the real HTTP interface on a real Postgres.

mod support;
