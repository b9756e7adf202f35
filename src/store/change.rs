//! Revisions: one number a committed change, in commit order.

use sqlx::PgConnection;
use sqlx::types::chrono::{DateTime, Utc};

use super::Error;

/// The advisory lock that orders commits ("rev" in ASCII).
const REVISION_LOCK: i64 = 0x0072_6576;

/// What a change does.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Action {
    /// An upload landed.
    Land,
    /// A held upload was accepted.
    Accept,
    /// An upload was withdrawn.
    Withdraw,
    /// A preparation wrote its outputs.
    Run,
}

impl Action {
    fn as_str(self) -> &'static str {
        match self {
            Self::Land => "land",
            Self::Accept => "accept",
            Self::Withdraw => "withdraw",
            Self::Run => "run",
        }
    }
}

/// A revision and the moment it was drawn.
#[derive(Clone, Copy, Debug)]
pub struct Revision {
    /// The number.
    pub number: i64,
    /// When, by the database's clock.
    pub recorded: DateTime<Utc>,
}

/// Draws the next revision and records the change; the lock is held until the transaction ends, so
/// that revisions appear to readers in their order.
///
/// # Errors
/// [`Error::Database`].
pub async fn draw(
    connection: &mut PgConnection,
    action: Action,
    upload: Option<i64>,
    run: Option<i64>,
    author: &str,
) -> Result<Revision, Error> {
    sqlx::query!("SELECT pg_advisory_xact_lock($1)", REVISION_LOCK)
        .execute(&mut *connection)
        .await?;
    let row = sqlx::query!(
        r#"INSERT INTO change (revision, recorded, action, upload_id, run_id, author)
           SELECT coalesce(max(revision), 0) + 1, clock_timestamp(), $1, $2, $3, $4 FROM change
           RETURNING revision, recorded"#,
        action.as_str(),
        upload,
        run,
        author
    )
    .fetch_one(connection)
    .await?;
    Ok(Revision {
        number: row.revision,
        recorded: row.recorded,
    })
}

/// The newest revision recorded until a moment; 0 before the first.
///
/// # Errors
/// [`Error::Database`].
pub async fn revision_at(
    connection: &mut PgConnection,
    moment: DateTime<Utc>,
) -> Result<i64, Error> {
    let row = sqlx::query!(
        r#"SELECT coalesce(max(revision), 0) AS "revision!" FROM change WHERE recorded <= $1"#,
        moment
    )
    .fetch_one(connection)
    .await?;
    Ok(row.revision)
}

/// The newest revision; 0 before the first. Revisions commit in their order, so that what was read until
/// this one is one state of the store.
///
/// # Errors
/// [`Error::Database`].
pub async fn newest(connection: &mut PgConnection) -> Result<i64, Error> {
    let newest =
        sqlx::query_scalar!(r#"SELECT coalesce(max(revision), 0) AS "revision!" FROM change"#)
            .fetch_one(connection)
            .await?;
    Ok(newest)
}
