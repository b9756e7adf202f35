//! What the tests stand on: one cluster for the run, one database for a test, the service on it.

pub(crate) mod app;
pub(crate) mod cluster;
pub(crate) mod contract;
pub(crate) mod db;
pub(crate) mod program;
pub(crate) mod sample;
pub(crate) mod wire;
