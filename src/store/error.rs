//! What can go wrong between the service and Postgres.

use sqlx::postgres::{PgDatabaseError, PgSeverity};

/// A failure of the store.
#[derive(Debug, thiserror::Error)]
pub enum Error {
    /// The database refused, failed or went away.
    #[error(transparent)]
    Database(#[from] sqlx::Error),
    /// All connections of a pool stayed in use for longer than anybody is let wait.
    #[error("no connection to the database became free in time")]
    Busy,
    /// The database went away between the order to commit and its answer.
    #[error("no answer to a commit: {0}")]
    OutcomeUnknown(sqlx::Error),
    /// A stored row does not hold what this program writes.
    #[error("stored {what} cannot be read: {reason}")]
    Corrupt {
        /// Which row.
        what: String,
        /// What is wrong with it.
        reason: String,
    },
}

impl Error {
    /// Whether the same transaction may succeed when tried again: serialization failure or deadlock.
    #[must_use]
    pub fn is_transient(&self) -> bool {
        match self {
            Self::Database(sqlx::Error::Database(e)) => {
                matches!(e.code().as_deref(), Some("40001" | "40P01"))
            }
            Self::Database(_) | Self::Busy | Self::OutcomeUnknown(_) | Self::Corrupt { .. } => {
                false
            }
        }
    }

    /// Whether the database is away, overloaded or asks for another try, so that the same may succeed
    /// later. Else it has refused what this program said, and will again.
    #[must_use]
    pub fn is_passing(&self) -> bool {
        match self {
            Self::Database(sqlx::Error::Database(e)) => {
                // Connection, rollback, resources, intervention; and whatever ended the connection.
                let class = e.code().and_then(|code| code.get(..2).map(str::to_owned));
                matches!(class.as_deref(), Some("08" | "40" | "53" | "57"))
                    || e.try_downcast_ref::<PgDatabaseError>()
                        .is_some_and(|e| e.severity() != PgSeverity::Error)
            }
            Self::Database(e) => matches!(
                e,
                sqlx::Error::Io(_)
                    | sqlx::Error::Tls(_)
                    | sqlx::Error::PoolTimedOut
                    | sqlx::Error::PoolClosed
                    | sqlx::Error::WorkerCrashed
            ),
            Self::Busy | Self::OutcomeUnknown(_) | Self::Corrupt { .. } => false,
        }
    }

    /// Name of the violated constraint, if that is what failed.
    #[must_use]
    pub fn constraint(&self) -> Option<&str> {
        match self {
            Self::Database(sqlx::Error::Database(e)) => e.constraint(),
            Self::Database(_) | Self::Busy | Self::OutcomeUnknown(_) | Self::Corrupt { .. } => None,
        }
    }

    pub(super) fn corrupt(what: impl ToString, reason: impl ToString) -> Self {
        Self::Corrupt {
            what: what.to_string(),
            reason: reason.to_string(),
        }
    }
}
