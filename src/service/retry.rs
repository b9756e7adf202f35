//! Transactions that are run again where the database asks for it.

use super::Fault;

/// How often a transaction, or its merge, is tried.
pub(super) const ATTEMPTS: usize = 4;

/// Runs a use case that is one transaction from its beginning to its commit, and runs it again where
/// the database gave it up for the sake of another: serialization failure or deadlock.
pub(super) async fn retried<T>(work: impl AsyncFn() -> Result<T, Fault>) -> Result<T, Fault> {
    let mut attempt = 1;
    loop {
        match work().await {
            Err(Fault::Store(e)) if e.is_transient() && attempt < ATTEMPTS => {
                tracing::info!(attempt, error = %e, "the transaction is tried again");
                attempt += 1;
            }
            outcome => return outcome,
        }
    }
}
