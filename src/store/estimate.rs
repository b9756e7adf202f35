//! Estimations without a study.

use chrono::{DateTime, Utc};
use sqlx::PgConnection;
use sqlx::types::Json;

use super::Error;

/// An estimation to be stored.
#[derive(Clone, Debug)]
pub struct NewEstimate<'a> {
    /// Name of the method.
    pub method: &'a str,
    /// Version of the methods.
    pub method_version: &'a str,
    /// Who asked for it.
    pub author: &'a str,
    /// The request as it came.
    pub request: &'a str,
    /// Vintages it read.
    pub pins: &'a serde_json::Value,
    /// What came out.
    pub report: &'a serde_json::Value,
    /// The rows it was computed from.
    pub sample: &'a serde_json::Value,
}

/// A stored estimation without its rows.
#[derive(Clone, Debug)]
pub struct EstimateRow {
    /// Number.
    pub id: i64,
    /// Who asked for it.
    pub author: String,
    /// When.
    pub recorded: DateTime<Utc>,
    /// The request as it came.
    pub request: String,
    /// Vintages it read.
    pub pins: Json<serde_json::Value>,
    /// What came out.
    pub report: Json<serde_json::Value>,
}

/// Stores an estimation and gives its number.
///
/// # Errors
/// [`Error::Database`].
pub async fn insert(connection: &mut PgConnection, new: NewEstimate<'_>) -> Result<i64, Error> {
    let row = sqlx::query!(
        "INSERT INTO estimate (method, method_version, author, request, pins, report, sample)
         VALUES ($1, $2, $3, $4, $5, $6, $7) RETURNING id",
        new.method,
        new.method_version,
        new.author,
        new.request,
        new.pins,
        new.report,
        new.sample
    )
    .fetch_one(connection)
    .await?;
    Ok(row.id)
}

/// One estimation.
///
/// # Errors
/// [`Error::Database`].
pub async fn get(connection: &mut PgConnection, id: i64) -> Result<Option<EstimateRow>, Error> {
    let row = sqlx::query_as!(
        EstimateRow,
        r#"SELECT id, author, recorded, request, pins AS "pins: Json<serde_json::Value>",
             report AS "report: Json<serde_json::Value>"
           FROM estimate WHERE id = $1"#,
        id
    )
    .fetch_optional(connection)
    .await?;
    Ok(row)
}

/// What an estimation found, and the rows it was computed from.
#[derive(Clone, Debug)]
pub struct SampleRow {
    /// What came out.
    pub report: Json<serde_json::Value>,
    /// The rows.
    pub sample: Json<serde_json::Value>,
}

/// The rows of one estimation.
///
/// # Errors
/// [`Error::Database`].
pub async fn sample(connection: &mut PgConnection, id: i64) -> Result<Option<SampleRow>, Error> {
    let row = sqlx::query_as!(
        SampleRow,
        r#"SELECT report AS "report: Json<serde_json::Value>",
             sample AS "sample: Json<serde_json::Value>"
           FROM estimate WHERE id = $1"#,
        id
    )
    .fetch_optional(connection)
    .await?;
    Ok(row)
}

/// A line of the list.
#[derive(Clone, Debug)]
pub struct ListedEstimate {
    /// Number.
    pub id: i64,
    /// Name of the method.
    pub method: String,
    /// Version of the methods.
    pub method_version: String,
    /// Who asked for it.
    pub author: String,
    /// When.
    pub recorded: DateTime<Utc>,
}

/// Estimations, newest first, before a number.
///
/// # Errors
/// [`Error::Database`].
pub async fn list(
    connection: &mut PgConnection,
    before: i64,
    limit: i64,
) -> Result<Vec<ListedEstimate>, Error> {
    let rows = sqlx::query_as!(
        ListedEstimate,
        "SELECT id, method, method_version, author, recorded FROM estimate
         WHERE id < $1 ORDER BY id DESC LIMIT $2",
        before,
        limit
    )
    .fetch_all(connection)
    .await?;
    Ok(rows)
}

/// Erases one estimation; answers whether it was there.
///
/// # Errors
/// [`Error::Database`].
pub async fn delete(connection: &mut PgConnection, id: i64) -> Result<bool, Error> {
    let done = sqlx::query!("DELETE FROM estimate WHERE id = $1", id)
        .execute(connection)
        .await?;
    Ok(done.rows_affected() > 0)
}

/// Erases estimations recorded before a moment.
///
/// # Errors
/// [`Error::Database`].
pub async fn delete_before(
    connection: &mut PgConnection,
    moment: DateTime<Utc>,
) -> Result<u64, Error> {
    let done = sqlx::query!("DELETE FROM estimate WHERE recorded < $1", moment)
        .execute(connection)
        .await?;
    Ok(done.rows_affected())
}
