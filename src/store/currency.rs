//! Currencies that users declare, and the areas whose own money they are.

use sqlx::PgConnection;
use sqlx::types::chrono::{DateTime, Utc};

use super::Error;

/// A declared currency.
#[derive(Clone, Debug)]
pub struct CurrencyRow {
    /// Code.
    pub code: String,
    /// Name.
    pub name: String,
    /// Areas whose own money it is.
    pub areas: Vec<String>,
    /// When it was declared last.
    pub recorded: DateTime<Utc>,
}

/// The advisory lock of those who declare ("cur" in ASCII).
const LOCK: i64 = 0x0063_7572;

/// Lets one transaction at a time look at the declarations and change them.
///
/// # Errors
/// [`Error::Database`].
pub async fn lock(connection: &mut PgConnection) -> Result<(), Error> {
    sqlx::query!("SELECT pg_advisory_xact_lock($1)", LOCK)
        .execute(connection)
        .await?;
    Ok(())
}

/// Declares a currency or declares it anew; true where it is new.
///
/// # Errors
/// [`Error::Database`].
pub async fn put(
    connection: &mut PgConnection,
    code: &str,
    name: &str,
    areas: &[String],
) -> Result<bool, Error> {
    let row = sqlx::query!(
        r#"INSERT INTO currency (code, name, areas) VALUES ($1, $2, $3)
           ON CONFLICT (code) DO UPDATE
           SET name = excluded.name, areas = excluded.areas, recorded = clock_timestamp()
           RETURNING (xmax = 0) AS "created!""#,
        code,
        name,
        areas
    )
    .fetch_one(connection)
    .await?;
    Ok(row.created)
}

/// All declared currencies by code.
///
/// # Errors
/// [`Error::Database`].
pub async fn list(connection: &mut PgConnection) -> Result<Vec<CurrencyRow>, Error> {
    let rows = sqlx::query_as!(
        CurrencyRow,
        "SELECT code, name, areas, recorded FROM currency ORDER BY code"
    )
    .fetch_all(connection)
    .await?;
    Ok(rows)
}

/// Removes a declaration; false where there is none.
///
/// # Errors
/// [`Error::Database`].
pub async fn delete(connection: &mut PgConnection, code: &str) -> Result<bool, Error> {
    let done = sqlx::query!("DELETE FROM currency WHERE code = $1", code)
        .execute(connection)
        .await?;
    Ok(done.rows_affected() > 0)
}

/// Whether a series in this currency is stored.
///
/// # Errors
/// [`Error::Database`].
pub async fn in_use(connection: &mut PgConnection, code: &str) -> Result<bool, Error> {
    let row = sqlx::query!(
        r#"SELECT EXISTS (
               SELECT FROM series WHERE currency = $1
           ) OR EXISTS (
               SELECT FROM segment
               WHERE $1 IN (unit->>'currency', unit->>'numerator', unit->>'denominator')
           ) AS "used!""#,
        code
    )
    .fetch_one(connection)
    .await?;
    Ok(row.used)
}

/// Whether a series of an area is stored in this currency, declared as the area's own money.
///
/// # Errors
/// [`Error::Database`].
pub async fn own_money_in_use(connection: &mut PgConnection, code: &str) -> Result<bool, Error> {
    let row = sqlx::query!(
        r#"SELECT EXISTS (
               SELECT FROM currency c JOIN series s ON s.area = ANY(c.areas)
               JOIN segment g ON g.series_id = s.id
               WHERE c.code = $1
                   AND $1 IN (g.unit->>'currency', g.unit->>'numerator', g.unit->>'denominator')
           ) AS "used!""#,
        code
    )
    .fetch_one(connection)
    .await?;
    Ok(row.used)
}
