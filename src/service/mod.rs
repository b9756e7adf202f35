//! The use cases: they own the transactions, call the pure rooms and fill views.
//!
//! A route calls one function here; a function here calls `store` and the pure rooms. Work that would
//! hold up the event loop runs on a blocking thread.

mod body;
pub mod currencies;
pub mod documents;
pub mod estimates;
mod fault;
mod groups;
mod landing;
pub mod lineage;
pub mod preparations;
mod preview;
pub mod receiving;
mod retry;
pub mod series;
pub mod studies;
pub mod tokens;
pub mod uploads;
mod views;

pub use fault::Fault;
pub use views::*;

pub use crate::store::Database;
pub use crate::store::simulation::Simulations;

/// Runs pure work on a blocking thread, in the current span.
async fn blocking<T: Send + 'static>(
    work: impl FnOnce() -> T + Send + 'static,
) -> Result<T, Fault> {
    let span = tracing::Span::current();
    tokio::task::spawn_blocking(move || span.in_scope(work))
        .await
        .map_err(|e| Fault::Internal(format!("a worker thread failed: {e}")))
}

/// Answers whether the database can be reached and is migrated.
///
/// # Errors
/// [`Fault::Store`].
pub async fn ready(database: &Database) -> Result<(), Fault> {
    let mut connection = database.connection().await?;
    tokens::existing(&mut connection).await.map(|_| ())
}
