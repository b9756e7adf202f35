//! Uploads: what came, when, from whom, in which state, with its raw bytes and rejects.

use futures_util::StreamExt;
use futures_util::stream::BoxStream;
use sqlx::PgConnection;
use sqlx::types::Json;
use sqlx::types::chrono::{DateTime, NaiveDate, Utc};

use super::{Database, Error, day};
use crate::time::Date;

/// What is known of an upload before its body.
#[derive(Clone, Debug)]
pub struct NewUpload<'a> {
    /// Kind of data.
    pub kind: &'a str,
    /// Reading parameters and scope.
    pub parameters: &'a serde_json::Value,
    /// Date of release by the source.
    pub released: Date,
    /// Title.
    pub title: &'a str,
    /// Publisher.
    pub publisher: &'a str,
    /// Note.
    pub note: &'a str,
    /// Who sends it.
    pub author: &'a str,
}

/// An upload as stored.
#[derive(Clone, Debug)]
pub struct UploadRow {
    /// Number.
    pub id: i64,
    /// Kind of data.
    pub kind: String,
    /// `landed`, `held`, `refused` or `withdrawn`.
    pub state: String,
    /// SHA-256 of the body as it came.
    pub sha256: Vec<u8>,
    /// Length of the body as it came.
    pub byte_count: i64,
    /// `none` or `gzip`.
    pub compression: String,
    /// Reading parameters and scope.
    pub parameters: Json<serde_json::Value>,
    /// Date of release.
    pub released: NaiveDate,
    /// Title.
    pub title: String,
    /// Publisher.
    pub publisher: String,
    /// Note.
    pub note: String,
    /// Who sent it.
    pub author: String,
    /// When it was recorded.
    pub recorded: DateTime<Utc>,
    /// Revision that made it current.
    pub landed_revision: Option<i64>,
    /// Revision that withdrew it.
    pub withdrawn_revision: Option<i64>,
    /// The report.
    pub report: Json<serde_json::Value>,
}

/// Begins an upload; invisible to others until the transaction commits.
///
/// # Errors
/// [`Error::Database`].
pub async fn begin(connection: &mut PgConnection, new: &NewUpload<'_>) -> Result<i64, Error> {
    let row = sqlx::query!(
        "INSERT INTO upload (kind, state, sha256, byte_count, compression, parameters, released, title,
             publisher, note, author, recorded, report)
         VALUES ($1, 'receiving', '', 0, '', $2, $3, $4, $5, $6, $7, clock_timestamp(), '{}')
         RETURNING id",
        new.kind,
        new.parameters,
        day(new.released),
        new.title,
        new.publisher,
        new.note,
        new.author
    )
    .fetch_one(connection)
    .await?;
    Ok(row.id)
}

/// Keeps one part of the raw bytes, already compressed.
///
/// # Errors
/// [`Error::Database`].
pub async fn insert_part(
    connection: &mut PgConnection,
    upload: i64,
    number: i32,
    bytes: &[u8],
) -> Result<(), Error> {
    sqlx::query!(
        "INSERT INTO upload_part (upload_id, number, bytes) VALUES ($1, $2, $3)",
        upload,
        number,
        bytes
    )
    .execute(connection)
    .await?;
    Ok(())
}

/// What is known of an upload after its body.
#[derive(Clone, Debug)]
pub struct Outcome<'a> {
    /// New state.
    pub state: &'a str,
    /// SHA-256 of the body.
    pub sha256: &'a [u8],
    /// Its length.
    pub byte_count: i64,
    /// Its coding.
    pub compression: &'a str,
    /// Revision that made it current.
    pub landed_revision: Option<i64>,
    /// The report.
    pub report: &'a serde_json::Value,
}

/// Ends an upload.
///
/// # Errors
/// [`Error::Database`].
pub async fn finish(
    connection: &mut PgConnection,
    id: i64,
    outcome: &Outcome<'_>,
) -> Result<(), Error> {
    sqlx::query!(
        "UPDATE upload SET state = $2, sha256 = $3, byte_count = $4, compression = $5,
             landed_revision = $6, report = $7, recorded = clock_timestamp()
         WHERE id = $1",
        id,
        outcome.state,
        outcome.sha256,
        outcome.byte_count,
        outcome.compression,
        outcome.landed_revision,
        outcome.report
    )
    .execute(connection)
    .await?;
    Ok(())
}

/// Keeps rejects, numbered from 1.
///
/// # Errors
/// [`Error::Database`].
pub async fn insert_rejects(
    connection: &mut PgConnection,
    id: i64,
    rejects: &[serde_json::Value],
) -> Result<(), Error> {
    sqlx::query!(
        "INSERT INTO upload_reject (upload_id, number, reject)
         SELECT $1, i, r FROM unnest($2::jsonb[]) WITH ORDINALITY AS q(r, i)",
        id,
        rejects
    )
    .execute(connection)
    .await?;
    Ok(())
}

/// Rejects of an upload after a number.
///
/// # Errors
/// [`Error::Database`].
pub async fn rejects(
    connection: &mut PgConnection,
    id: i64,
    after: i32,
    limit: i64,
) -> Result<Vec<(i32, serde_json::Value)>, Error> {
    let rows = sqlx::query!(
        "SELECT number, reject FROM upload_reject
         WHERE upload_id = $1 AND number > $2 ORDER BY number LIMIT $3",
        id,
        after,
        limit
    )
    .fetch_all(connection)
    .await?;
    Ok(rows.into_iter().map(|r| (r.number, r.reject)).collect())
}

/// One upload.
///
/// # Errors
/// [`Error::Database`].
pub async fn get(connection: &mut PgConnection, id: i64) -> Result<Option<UploadRow>, Error> {
    let row = sqlx::query_as!(
        UploadRow,
        r#"SELECT id, kind, state, sha256, byte_count, compression,
             parameters AS "parameters: Json<serde_json::Value>", released, title, publisher, note,
             author, recorded, landed_revision, withdrawn_revision,
             report AS "report: Json<serde_json::Value>"
           FROM upload WHERE id = $1"#,
        id
    )
    .fetch_optional(connection)
    .await?;
    Ok(row)
}

/// What an upload says of the publication that its file is from.
#[derive(Clone, Debug)]
pub struct Publication {
    /// Number of the upload.
    pub id: i64,
    /// Title.
    pub title: String,
    /// Publisher.
    pub publisher: String,
    /// Date of release.
    pub released: NaiveDate,
}

/// The publications of some uploads.
///
/// # Errors
/// [`Error::Database`].
pub async fn publications(
    connection: &mut PgConnection,
    ids: &[i64],
) -> Result<Vec<Publication>, Error> {
    let rows = sqlx::query_as!(
        Publication,
        "SELECT id, title, publisher, released FROM upload WHERE id = ANY($1)",
        ids
    )
    .fetch_all(connection)
    .await?;
    Ok(rows)
}

/// Locks one upload until the transaction ends and answers its state.
///
/// # Errors
/// [`Error::Database`].
pub async fn lock(connection: &mut PgConnection, id: i64) -> Result<Option<String>, Error> {
    let state = sqlx::query_scalar!("SELECT state FROM upload WHERE id = $1 FOR UPDATE", id)
        .fetch_optional(connection)
        .await?;
    Ok(state)
}

/// Changes state and revisions of an upload.
///
/// # Errors
/// [`Error::Database`].
pub async fn set_state(
    connection: &mut PgConnection,
    id: i64,
    state: &str,
    landed_revision: Option<i64>,
    withdrawn_revision: Option<i64>,
    report: &serde_json::Value,
) -> Result<(), Error> {
    sqlx::query!(
        "UPDATE upload SET state = $2, landed_revision = coalesce($3, landed_revision),
             withdrawn_revision = $4, report = $5
         WHERE id = $1",
        id,
        state,
        landed_revision,
        withdrawn_revision,
        report
    )
    .execute(connection)
    .await?;
    Ok(())
}

/// Uploads by number, newest first, before a number; optionally of one state or kind.
///
/// # Errors
/// [`Error::Database`].
pub async fn list(
    connection: &mut PgConnection,
    state: Option<&str>,
    kind: Option<&str>,
    before: i64,
    limit: i64,
) -> Result<Vec<UploadRow>, Error> {
    let rows = sqlx::query_as!(
        UploadRow,
        r#"SELECT id, kind, state, sha256, byte_count, compression,
             parameters AS "parameters: Json<serde_json::Value>", released, title, publisher, note,
             author, recorded, landed_revision, withdrawn_revision,
             '{}' AS "report!: Json<serde_json::Value>"
           FROM upload
           WHERE id < $1 AND ($2::text IS NULL OR state = $2) AND ($3::text IS NULL OR kind = $3)
           ORDER BY id DESC LIMIT $4"#,
        before,
        state,
        kind,
        limit
    )
    .fetch_all(connection)
    .await?;
    Ok(rows)
}

/// Uploads of the same bytes that landed or are held, oldest first.
///
/// # Errors
/// [`Error::Database`].
pub async fn same_bytes(
    connection: &mut PgConnection,
    sha256: &[u8],
) -> Result<Vec<UploadRow>, Error> {
    // Two uploads of the same bytes at once must see each other: the second waits for the first.
    sqlx::query!(
        "SELECT pg_advisory_xact_lock(hashtextextended(encode($1, 'hex'), 1))",
        sha256
    )
    .execute(&mut *connection)
    .await?;
    let rows = sqlx::query_as!(
        UploadRow,
        r#"SELECT id, kind, state, sha256, byte_count, compression,
             parameters AS "parameters: Json<serde_json::Value>", released, title, publisher, note,
             author, recorded, landed_revision, withdrawn_revision,
             report AS "report: Json<serde_json::Value>"
           FROM upload WHERE sha256 = $1 AND state IN ('landed', 'held') ORDER BY id"#,
        sha256
    )
    .fetch_all(connection)
    .await?;
    Ok(rows)
}

/// Uploads that landed and were released on or after a date.
///
/// # Errors
/// [`Error::Database`].
pub async fn landed_from(connection: &mut PgConnection, date: Date) -> Result<Vec<i64>, Error> {
    let ids = sqlx::query_scalar!(
        "SELECT id FROM upload WHERE state = 'landed' AND released >= $1",
        day(date)
    )
    .fetch_all(connection)
    .await?;
    Ok(ids)
}

/// The raw bytes in order, each part still compressed.
#[must_use]
pub fn parts(database: &Database, upload: i64) -> BoxStream<'static, Result<Vec<u8>, Error>> {
    let pool = database.pool().clone();
    futures_util::stream::try_unfold(0_i32, move |number| {
        let pool = pool.clone();
        async move {
            let part = sqlx::query_scalar!(
                "SELECT bytes FROM upload_part WHERE upload_id = $1 AND number = $2",
                upload,
                number
            )
            .fetch_optional(&pool)
            .await?;
            Ok(part.map(|bytes| (bytes, number + 1)))
        }
    })
    .boxed()
}

/// Erases refused uploads recorded before a moment, with everything kept of them.
///
/// # Errors
/// [`Error::Database`].
pub async fn delete_refused_before(
    connection: &mut PgConnection,
    moment: DateTime<Utc>,
) -> Result<u64, Error> {
    let done = sqlx::query!(
        "DELETE FROM upload WHERE state = 'refused' AND recorded < $1",
        moment
    )
    .execute(connection)
    .await?;
    Ok(done.rows_affected())
}
