//! What all requests share.

use crate::service::Database;
use crate::service::receiving::Limits;
use crate::service::tokens::Gate;

/// What all requests share.
pub(super) struct Shared {
    pub(super) database: Database,
    pub(super) gate: Gate,
    pub(super) limits: Limits,
    /// Days that estimates are kept.
    pub(super) estimate_days: u32,
}
