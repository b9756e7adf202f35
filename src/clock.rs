//! The one clock: everything else takes the time as a value.

use chrono::{DateTime, Datelike, Utc};

use crate::time::Date;

/// The present instant in UTC.
#[must_use]
#[expect(
    clippy::disallowed_methods,
    reason = "this is the one place that reads the clock"
)]
pub fn now() -> DateTime<Utc> {
    Utc::now()
}

/// Today in UTC.
#[must_use]
pub fn today() -> Date {
    let now = now();
    Date::new(now.year(), now.month(), now.day())
        .expect("the clock shows a year between 1 and 9999")
}
