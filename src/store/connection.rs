//! Connections and transactions, as `service` holds them.

use sqlx::postgres::{PgDatabaseError, PgSeverity};
use sqlx::{Executor, PgConnection, PgPool, Postgres};

use super::{Database, Error};

/// A connection that a function works on.
pub type Connection = PgConnection;

/// A connection on loan from a pool.
pub type Borrowed = sqlx::pool::PoolConnection<Postgres>;

/// A transaction; dropped, it rolls back.
pub type Transaction = sqlx::Transaction<'static, Postgres>;

impl Database {
    /// A connection for reading, or for a single statement.
    ///
    /// # Errors
    /// [`Error::Database`]; [`Error::Busy`].
    pub async fn connection(&self) -> Result<Borrowed, Error> {
        let pool = self.pool();
        pool.acquire().await.map_err(|e| not_given(pool, e))
    }

    /// A transaction.
    ///
    /// # Errors
    /// [`Error::Database`]; [`Error::Busy`].
    pub async fn begin(&self) -> Result<Transaction, Error> {
        let pool = self.pool();
        pool.begin().await.map_err(|e| not_given(pool, e))
    }

    /// A transaction from the pool of uploads, so that slow clients take nothing from readers.
    ///
    /// # Errors
    /// [`Error::Database`]; [`Error::Busy`].
    pub async fn begin_upload(&self) -> Result<Transaction, Error> {
        let pool = self.upload_pool();
        pool.begin().await.map_err(|e| not_given(pool, e))
    }
}

/// A database that does not come up lets callers wait as long as one whose connections are all in use.
fn not_given(pool: &PgPool, error: sqlx::Error) -> Error {
    let all_in_use = pool.size() >= pool.options().get_max_connections();
    if all_in_use && matches!(error, sqlx::Error::PoolTimedOut) {
        return Error::Busy;
    }
    Error::Database(error)
}

/// Commits.
///
/// # Errors
/// [`Error::Database`] where the database refused: nothing was changed. [`Error::OutcomeUnknown`] where
/// it went away before it answered: the transaction counts whole or not at all.
pub async fn commit(transaction: Transaction) -> Result<(), Error> {
    transaction.commit().await.map_err(|error| {
        let refused = error
            .as_database_error()
            .and_then(|e| e.try_downcast_ref::<PgDatabaseError>())
            .is_some_and(|e| e.severity() == PgSeverity::Error);
        if refused {
            Error::Database(error)
        } else {
            Error::OutcomeUnknown(error)
        }
    })
}

/// Rolls back.
///
/// # Errors
/// [`Error::Database`].
pub async fn rollback(transaction: Transaction) -> Result<(), Error> {
    Ok(transaction.rollback().await?)
}

/// Points to which an upload's transaction may return.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Savepoint {
    /// Before anything of its rows is stored.
    Upload,
    /// Before it becomes current.
    Landing,
}

/// Sets a savepoint.
///
/// # Errors
/// [`Error::Database`].
pub async fn savepoint(connection: &mut Connection, point: Savepoint) -> Result<(), Error> {
    let statement = match point {
        Savepoint::Upload => "SAVEPOINT upload",
        Savepoint::Landing => "SAVEPOINT landing",
    };
    connection.execute(statement).await?;
    Ok(())
}

/// Returns to a savepoint.
///
/// # Errors
/// [`Error::Database`].
pub async fn rollback_to(connection: &mut Connection, point: Savepoint) -> Result<(), Error> {
    let statement = match point {
        Savepoint::Upload => "ROLLBACK TO SAVEPOINT upload",
        Savepoint::Landing => "ROLLBACK TO SAVEPOINT landing",
    };
    connection.execute(statement).await?;
    Ok(())
}
