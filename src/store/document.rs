//! Documents with versions, and their runs.

use sqlx::PgConnection;
use sqlx::types::Json;
use sqlx::types::chrono::{DateTime, Utc};

use super::Error;

/// A stored version of a document.
#[derive(Clone, Debug)]
pub struct DocumentRow {
    /// Name.
    pub name: String,
    /// Version, from 1.
    pub version: i32,
    /// The text as it was put.
    pub body: String,
    /// Who put it.
    pub author: String,
    /// When.
    pub recorded: DateTime<Utc>,
}

/// The newest version, unless the document was deleted.
///
/// # Errors
/// [`Error::Database`].
pub async fn newest(
    connection: &mut PgConnection,
    kind: &str,
    name: &str,
) -> Result<Option<DocumentRow>, Error> {
    let row = sqlx::query!(
        "SELECT name, version, body, author, recorded, deleted FROM document
         WHERE kind = $1 AND name = $2 ORDER BY version DESC LIMIT 1",
        kind,
        name
    )
    .fetch_optional(connection)
    .await?;
    Ok(row.filter(|r| !r.deleted).map(|r| DocumentRow {
        name: r.name,
        version: r.version,
        body: r.body,
        author: r.author,
        recorded: r.recorded,
    }))
}

/// One version, deleted or not.
///
/// # Errors
/// [`Error::Database`].
pub async fn version(
    connection: &mut PgConnection,
    kind: &str,
    name: &str,
    version: i32,
) -> Result<Option<DocumentRow>, Error> {
    let row = sqlx::query_as!(
        DocumentRow,
        "SELECT name, version, body, author, recorded FROM document
         WHERE kind = $1 AND name = $2 AND version = $3 AND NOT deleted",
        kind,
        name,
        version
    )
    .fetch_optional(connection)
    .await?;
    Ok(row)
}

/// Newest versions of the documents of a kind by name, after a name.
///
/// # Errors
/// [`Error::Database`].
pub async fn list(
    connection: &mut PgConnection,
    kind: &str,
    after: &str,
    limit: i64,
) -> Result<Vec<DocumentRow>, Error> {
    let rows = sqlx::query_as!(
        DocumentRow,
        r#"SELECT name AS "name!", version AS "version!", body AS "body!", author AS "author!",
             recorded AS "recorded!"
           FROM (SELECT DISTINCT ON (name) * FROM document
                 WHERE kind = $1 AND name > $2 ORDER BY name, version DESC) d
           WHERE NOT deleted ORDER BY name LIMIT $3"#,
        kind,
        after,
        limit
    )
    .fetch_all(connection)
    .await?;
    Ok(rows)
}

/// Serialises writers of one document and answers the highest version, deleted ones included.
///
/// # Errors
/// [`Error::Database`].
pub async fn lock(connection: &mut PgConnection, kind: &str, name: &str) -> Result<i32, Error> {
    sqlx::query!(
        "SELECT pg_advisory_xact_lock(hashtextextended($1 || '/' || $2, 0))",
        kind,
        name
    )
    .execute(&mut *connection)
    .await?;
    let row = sqlx::query!(
        r#"SELECT coalesce(max(version), 0) AS "version!" FROM document WHERE kind = $1 AND name = $2"#,
        kind,
        name
    )
    .fetch_one(connection)
    .await?;
    Ok(row.version)
}

/// Writes a version; a deletion is a version without text.
///
/// # Errors
/// [`Error::Database`].
pub async fn insert(
    connection: &mut PgConnection,
    kind: &str,
    name: &str,
    version: i32,
    body: Option<&str>,
    author: &str,
) -> Result<(), Error> {
    sqlx::query!(
        "INSERT INTO document (kind, name, version, body, deleted, author)
         VALUES ($1, $2, $3, $4, $5, $6)",
        kind,
        name,
        version,
        body.unwrap_or_default(),
        body.is_none(),
        author
    )
    .execute(connection)
    .await?;
    Ok(())
}

/// A run of a document.
#[derive(Clone, Debug)]
pub struct RunRow {
    /// Number.
    pub id: i64,
    /// Name of the document.
    pub name: String,
    /// Its version.
    pub version: i32,
    /// Version of the method.
    pub method_version: String,
    /// Who started it.
    pub author: String,
    /// When.
    pub recorded: DateTime<Utc>,
    /// Vintages it read.
    pub pins: Json<serde_json::Value>,
    /// What came out.
    pub result: Json<serde_json::Value>,
}

/// Stores a run.
///
/// # Errors
/// [`Error::Database`].
#[expect(clippy::too_many_arguments, reason = "one a column")]
pub async fn insert_run(
    connection: &mut PgConnection,
    kind: &str,
    name: &str,
    version: i32,
    method_version: &str,
    author: &str,
    pins: &serde_json::Value,
    result: &serde_json::Value,
) -> Result<i64, Error> {
    let row = sqlx::query!(
        "INSERT INTO run (kind, name, version, method_version, author, pins, result)
         VALUES ($1, $2, $3, $4, $5, $6, $7) RETURNING id",
        kind,
        name,
        version,
        method_version,
        author,
        pins,
        result
    )
    .fetch_one(connection)
    .await?;
    Ok(row.id)
}

/// Replaces the result of a run that the same transaction inserted.
///
/// # Errors
/// [`Error::Database`].
pub async fn set_run_result(
    connection: &mut PgConnection,
    id: i64,
    result: &serde_json::Value,
) -> Result<(), Error> {
    sqlx::query!("UPDATE run SET result = $2 WHERE id = $1", id, result)
        .execute(connection)
        .await?;
    Ok(())
}

/// One run of a document.
///
/// # Errors
/// [`Error::Database`].
pub async fn run(
    connection: &mut PgConnection,
    kind: &str,
    name: &str,
    id: i64,
) -> Result<Option<RunRow>, Error> {
    let row = sqlx::query_as!(
        RunRow,
        r#"SELECT id, name, version, method_version, author, recorded,
             pins AS "pins: Json<serde_json::Value>", result AS "result: Json<serde_json::Value>"
           FROM run WHERE kind = $1 AND name = $2 AND id = $3"#,
        kind,
        name,
        id
    )
    .fetch_optional(connection)
    .await?;
    Ok(row)
}

/// A run by number alone, for lineage.
///
/// # Errors
/// [`Error::Database`].
pub async fn run_by_id(connection: &mut PgConnection, id: i64) -> Result<Option<RunRow>, Error> {
    let row = sqlx::query_as!(
        RunRow,
        r#"SELECT id, name, version, method_version, author, recorded,
             pins AS "pins: Json<serde_json::Value>", result AS "result: Json<serde_json::Value>"
           FROM run WHERE id = $1"#,
        id
    )
    .fetch_optional(connection)
    .await?;
    Ok(row)
}

/// A line of a list of runs.
#[derive(Clone, Debug)]
pub struct ListedRun {
    /// Number.
    pub id: i64,
    /// Version of the document.
    pub version: i32,
    /// Version of the method.
    pub method_version: String,
    /// Who started it.
    pub author: String,
    /// When.
    pub recorded: DateTime<Utc>,
}

/// Runs of a document, newest first, before a number.
///
/// # Errors
/// [`Error::Database`].
pub async fn list_runs(
    connection: &mut PgConnection,
    kind: &str,
    name: &str,
    before: i64,
    limit: i64,
) -> Result<Vec<ListedRun>, Error> {
    let rows = sqlx::query_as!(
        ListedRun,
        "SELECT id, version, method_version, author, recorded FROM run
         WHERE kind = $1 AND name = $2 AND id < $3 ORDER BY id DESC LIMIT $4",
        kind,
        name,
        before,
        limit
    )
    .fetch_all(connection)
    .await?;
    Ok(rows)
}

/// Number of runs of a document up to and with this one.
///
/// # Errors
/// [`Error::Database`].
pub async fn count_runs_until(
    connection: &mut PgConnection,
    kind: &str,
    name: &str,
    id: i64,
) -> Result<i64, Error> {
    let row = sqlx::query!(
        r#"SELECT count(*) AS "count!" FROM run WHERE kind = $1 AND name = $2 AND id <= $3"#,
        kind,
        name,
        id
    )
    .fetch_one(connection)
    .await?;
    Ok(row.count)
}
