//! Simulated null distributions under the settings that determine them.

use sqlx::{PgConnection, PgPool};
use tokio::runtime::Handle;

use super::{Database, Error};
use crate::estimate::{NullDistribution, SimulationStore};

/// What is kept under these settings, in order; empty where nothing is.
///
/// # Errors
/// [`Error::Database`]; [`Error::Corrupt`] for a count below 0.
pub async fn read(
    connection: &mut PgConnection,
    settings: &str,
) -> Result<Vec<NullDistribution>, Error> {
    let rows = sqlx::query!(
        "SELECT draws, quantiles FROM simulation WHERE settings = $1 ORDER BY position",
        settings
    )
    .fetch_all(connection)
    .await?;
    rows.into_iter()
        .map(|row| {
            let draws = usize::try_from(row.draws);
            Ok(NullDistribution {
                draws: draws.map_err(|_| Error::corrupt("simulation", row.draws))?,
                quantiles: row.quantiles,
            })
        })
        .collect()
}

/// Keeps distributions, all or none; what is there already stays, being the same.
///
/// # Errors
/// [`Error::Database`].
pub async fn insert(
    connection: &mut PgConnection,
    settings: &str,
    distributions: &[NullDistribution],
) -> Result<(), Error> {
    let mut transaction = sqlx::Connection::begin(connection).await?;
    for (position, distribution) in (0_i32..).zip(distributions) {
        sqlx::query!(
            "INSERT INTO simulation (settings, position, draws, quantiles) VALUES ($1, $2, $3, $4)
             ON CONFLICT ON CONSTRAINT simulation_pk DO NOTHING",
            settings,
            position,
            i64::try_from(distribution.draws).unwrap_or(i64::MAX),
            &distribution.quantiles
        )
        .execute(&mut *transaction)
        .await?;
    }
    Ok(transaction.commit().await?)
}

/// The store that estimators on blocking threads are given: it waits for the database where it is called.
///
/// A cache that fails costs time and no result: failures are logged, and the distribution is simulated.
/// Not to be called from an asynchronous task.
#[derive(Clone, Debug)]
pub struct Simulations {
    pool: PgPool,
    runtime: Handle,
}

impl Simulations {
    /// Over the pool of a database; to be made within the runtime that drives it.
    #[must_use]
    pub fn new(database: &Database) -> Self {
        Self {
            pool: database.pool().clone(),
            runtime: Handle::current(),
        }
    }
}

impl SimulationStore for Simulations {
    fn load(&self, settings: &str) -> Option<Vec<NullDistribution>> {
        let read = async { read(&mut *self.pool.acquire().await?, settings).await };
        match self.runtime.block_on(read) {
            Ok(kept) => (!kept.is_empty()).then_some(kept),
            Err(error) => {
                tracing::warn!(%error, "a kept simulation cannot be read");
                None
            }
        }
    }

    fn keep(&self, settings: &str, distributions: &[NullDistribution]) {
        let insert =
            async { insert(&mut *self.pool.acquire().await?, settings, distributions).await };
        if let Err(error) = self.runtime.block_on(insert) {
            tracing::warn!(%error, "a simulation cannot be kept");
        }
    }
}
