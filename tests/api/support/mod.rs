//! What the tests stand on: one cluster for the run, one database for a test.

pub(crate) mod cluster;
pub(crate) mod db;
