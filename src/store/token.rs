//! Bearer tokens, kept as SHA-256.

use sqlx::PgConnection;
use sqlx::types::chrono::{DateTime, Utc};

use super::Error;

/// A token as listed; the secret itself is never stored.
#[derive(Clone, Debug)]
pub struct TokenRow {
    /// Number.
    pub id: i64,
    /// Name, unique among those not revoked.
    pub name: String,
    /// `read`, `contribute` or `administer`.
    pub role: String,
    /// When it was made.
    pub created: DateTime<Utc>,
    /// When it was revoked.
    pub revoked: Option<DateTime<Utc>>,
}

/// Stores a new token.
///
/// # Errors
/// [`Error::Database`]; constraint `token_name_unique` where the name is taken.
pub async fn insert(
    connection: &mut PgConnection,
    name: &str,
    role: &str,
    hash: &[u8],
) -> Result<i64, Error> {
    let row = sqlx::query!(
        "INSERT INTO token (name, role, hash) VALUES ($1, $2, $3) RETURNING id",
        name,
        role,
        hash
    )
    .fetch_one(connection)
    .await?;
    Ok(row.id)
}

/// All tokens, oldest first.
///
/// # Errors
/// [`Error::Database`].
pub async fn list(connection: &mut PgConnection) -> Result<Vec<TokenRow>, Error> {
    let rows = sqlx::query_as!(
        TokenRow,
        "SELECT id, name, role, created, revoked FROM token ORDER BY id"
    )
    .fetch_all(connection)
    .await?;
    Ok(rows)
}

/// Revokes a token by name; false where no valid token has it.
///
/// # Errors
/// [`Error::Database`].
pub async fn revoke(connection: &mut PgConnection, name: &str) -> Result<bool, Error> {
    let done = sqlx::query!(
        "UPDATE token SET revoked = clock_timestamp() WHERE name = $1 AND revoked IS NULL",
        name
    )
    .execute(connection)
    .await?;
    Ok(done.rows_affected() > 0)
}

/// Name and role of the valid token with this hash.
///
/// # Errors
/// [`Error::Database`].
pub async fn find(
    connection: &mut PgConnection,
    hash: &[u8],
) -> Result<Option<(String, String)>, Error> {
    let row = sqlx::query!(
        "SELECT name, role FROM token WHERE hash = $1 AND revoked IS NULL",
        hash
    )
    .fetch_optional(connection)
    .await?;
    Ok(row.map(|r| (r.name, r.role)))
}

/// Which tokens there are.
#[derive(Clone, Copy, Debug)]
pub struct Existing {
    /// Whether one was ever made, revoked ones included.
    pub ever: bool,
    /// Whether one is valid.
    pub valid: bool,
}

/// Whether tokens exist.
///
/// # Errors
/// [`Error::Database`].
pub async fn existing(connection: &mut PgConnection) -> Result<Existing, Error> {
    let row = sqlx::query_as!(
        Existing,
        r#"SELECT EXISTS (SELECT FROM token) AS "ever!",
             EXISTS (SELECT FROM token WHERE revoked IS NULL) AS "valid!""#
    )
    .fetch_one(connection)
    .await?;
    Ok(row)
}
