//! What can go wrong between the service and Postgres.

/// A failure of the store.
#[derive(Debug, thiserror::Error)]
pub enum Error {
    /// The database refused, failed or went away.
    #[error(transparent)]
    Database(#[from] sqlx::Error),
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
            Self::Database(_) | Self::OutcomeUnknown(_) | Self::Corrupt { .. } => false,
        }
    }

    /// Name of the violated constraint, if that is what failed.
    #[must_use]
    pub fn constraint(&self) -> Option<&str> {
        match self {
            Self::Database(sqlx::Error::Database(e)) => e.constraint(),
            Self::Database(_) | Self::OutcomeUnknown(_) | Self::Corrupt { .. } => None,
        }
    }

    pub(super) fn corrupt(what: impl ToString, reason: impl ToString) -> Self {
        Self::Corrupt {
            what: what.to_string(),
            reason: reason.to_string(),
        }
    }
}
