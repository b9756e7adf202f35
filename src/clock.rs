//! The one clock: everything else takes the time as a value.

use chrono::{DateTime, Utc};

/// The present instant in UTC.
#[must_use]
#[expect(
    clippy::disallowed_methods,
    reason = "this is the one place that reads the clock"
)]
pub fn now() -> DateTime<Utc> {
    Utc::now()
}
