//! Everything that touches Postgres; the only user of sqlx.
//!
//! Functions take a connection; `service` owns the transactions. One file an aggregate. SQL is checked
//! at compile time against the migrations.

pub mod archive;
pub mod change;
pub mod cluster;
mod connection;
mod copy;
pub mod currency;
pub mod document;
mod error;
pub mod estimate;
pub mod fragment;
mod pool;
pub mod search;
pub mod series;
pub mod simulation;
pub mod staging;
pub mod token;
pub mod upload;
pub mod vintage;

use chrono::{Datelike, NaiveDate};
pub use connection::{
    Borrowed, Connection, Savepoint, Transaction, commit, rollback, rollback_to, savepoint,
};
pub use error::Error;
pub use pool::{Database, DatabaseOptions, OpenError, Place, migrations_digest};

use crate::time::Date;

/// The database's form of a date.
fn day(date: Date) -> NaiveDate {
    NaiveDate::from_num_days_from_ce_opt(date.days()).unwrap_or(NaiveDate::MIN)
}

/// Our form of the database's date.
///
/// # Errors
/// [`Error::Corrupt`] outside the years 1 to 9999.
pub fn date(day: NaiveDate) -> Result<Date, Error> {
    Date::from_days(day.num_days_from_ce()).ok_or_else(|| Error::corrupt("date", day))
}
