//! Everything that touches Postgres; the only user of sqlx.

pub mod archive;
pub mod cluster;
mod pool;

pub use pool::{Database, DatabaseOptions, OpenError, Place, migrations_digest};
