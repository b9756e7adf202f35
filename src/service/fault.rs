//! What can go wrong in a use case, without any notion of HTTP.

use super::views::UploadView;
use crate::finding::Finding;
use crate::store;

/// A use case that did not succeed. Unless it says otherwise, nothing was changed.
#[derive(Debug)]
pub enum Fault {
    /// The request cannot be understood.
    BadRequest {
        /// What is wrong, in a sentence.
        detail: String,
        /// Where, and what was expected.
        errors: Vec<Finding>,
    },
    /// The request is understood and its content is wrong.
    Invalid {
        /// Stable code.
        code: &'static str,
        /// What is wrong, in a sentence.
        detail: String,
        /// Where, and what was expected.
        errors: Vec<Finding>,
    },
    /// An upload was refused for its rejects; it is kept with its report, and no series changed.
    Refused {
        /// What is wrong, in a sentence.
        detail: String,
        /// The first rejects.
        errors: Vec<Finding>,
        /// The upload, as stored.
        upload: Box<UploadView>,
    },
    /// What the request names does not exist.
    NotFound {
        /// Kind and name of the thing.
        what: String,
    },
    /// The request contradicts the present state.
    Conflict {
        /// Stable code.
        code: &'static str,
        /// What stands against it, and what to do.
        detail: String,
    },
    /// The condition that the client set does not hold.
    PreconditionFailed {
        /// Which, and what holds instead.
        detail: String,
    },
    /// The body is larger than a limit.
    TooLarge {
        /// Which limit.
        detail: String,
        /// What was expected, and what to do.
        errors: Vec<Finding>,
    },
    /// The body came too slowly.
    TooSlow {
        /// Which rate was expected.
        detail: String,
    },
    /// The database is away, or asks for another try.
    Store(store::Error),
    /// More is asked for at once than there are connections.
    Busy,
    /// The database went away while it committed: all was done, or nothing.
    OutcomeUnknown(store::Error),
    /// A fault of the program.
    Internal(String),
}

impl std::fmt::Display for Fault {
    fn fmt(&self, f: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        match self {
            Self::BadRequest { detail, .. }
            | Self::Invalid { detail, .. }
            | Self::Refused { detail, .. }
            | Self::Conflict { detail, .. }
            | Self::PreconditionFailed { detail }
            | Self::TooLarge { detail, .. }
            | Self::TooSlow { detail } => f.write_str(detail),
            Self::NotFound { what } => write!(f, "there is no {what}"),
            Self::Store(error) => write!(f, "the database failed: {error}"),
            Self::Busy => f.write_str("no connection to the database became free in time"),
            Self::OutcomeUnknown(error) => {
                write!(f, "all was done, or nothing; look which: {error}")
            }
            Self::Internal(reason) => write!(f, "an error of the program: {reason}"),
        }
    }
}

impl From<store::Error> for Fault {
    fn from(error: store::Error) -> Self {
        match error {
            store::Error::OutcomeUnknown(_) => Self::OutcomeUnknown(error),
            store::Error::Busy => Self::Busy,
            store::Error::Database(_) if error.is_passing() => Self::Store(error),
            store::Error::Database(_) | store::Error::Corrupt { .. } => {
                Self::Internal(error.to_string())
            }
        }
    }
}

impl Fault {
    /// Something that does not exist.
    pub(super) fn not_found(what: impl Into<String>) -> Self {
        Self::NotFound { what: what.into() }
    }

    /// Findings in a document or a file that make it unusable.
    pub(super) fn invalid(code: &'static str, errors: Vec<Finding>) -> Self {
        let detail = match errors.as_slice() {
            [] => "the content is wrong".to_owned(),
            [only] => only.message.clone(),
            [first, rest @ ..] => format!("{} (and {} more)", first.message, rest.len()),
        };
        Self::Invalid {
            code,
            detail,
            errors,
        }
    }
}
