//! Simulated null distributions are computed once and read after.

use realterms::estimate::{BoundsCase, BoundsDesign, BoundsNull, NoStore, Simulation};
use realterms::service::Simulations;
use realterms::store::{Database, simulation};

use crate::support::db::TestDb;

const DESIGN: BoundsDesign = BoundsDesign {
    observations: 40,
    regressors: 2,
    case: BoundsCase::III,
    orders: None,
};

/// As an estimator runs: on a blocking thread, with the store of the service.
async fn simulate(database: &Database, threads: usize) -> BoundsNull {
    let store = Simulations::new(database);
    let settings = simulation_of(threads);
    tokio::task::spawn_blocking(move || DESIGN.simulate(settings, &store).unwrap())
        .await
        .unwrap()
}

fn simulation_of(threads: usize) -> Simulation {
    Simulation {
        draws: 600,
        seed: 11,
        threads,
    }
}

async fn settings(database: &Database) -> Vec<String> {
    let mut connection = database.connection().await.unwrap();
    sqlx::query_scalar("SELECT DISTINCT settings FROM simulation ORDER BY 1")
        .fetch_all(&mut *connection)
        .await
        .unwrap()
}

#[tokio::test]
async fn a_simulation_is_kept_to_the_last_digit_and_read_the_second_time() {
    let test = TestDb::create();
    let database = test.open().await;
    let first = simulate(&database, 2).await;
    assert_eq!(first, DESIGN.simulate(simulation_of(1), &NoStore).unwrap());
    let kept = settings(&database).await;
    assert_eq!(kept.len(), 1, "{kept:?}");
    // One thread or two: the same settings.
    assert_eq!(simulate(&database, 1).await, first);
    assert_eq!(settings(&database).await, kept);

    // What is read is what stands there, not a second simulation.
    let mut connection = database.connection().await.unwrap();
    let mut rows = simulation::read(&mut connection, &kept[0]).await.unwrap();
    assert_eq!(rows.len(), 6);
    sqlx::query("UPDATE simulation SET quantiles[1] = -7 WHERE position = 0")
        .execute(&mut *connection)
        .await
        .unwrap();
    rows[0].quantiles[0] = -7.0;
    assert_eq!(simulate(&database, 2).await.f[0], rows[0]);
    // Keeping again changes nothing.
    let mut others = rows.clone();
    others[0].quantiles[0] = 5.0;
    simulation::insert(&mut connection, &kept[0], &others)
        .await
        .unwrap();
    let again = simulation::read(&mut connection, &kept[0]).await.unwrap();
    assert_eq!(again, rows);
    drop(connection);
    database.close().await;
}

/// Without a database the answer is the same; it only takes longer.
#[tokio::test]
async fn a_cache_that_fails_costs_no_result() {
    let test = TestDb::create();
    let database = test.open().await;
    let mut connection = database.connection().await.unwrap();
    sqlx::query("DROP TABLE simulation")
        .execute(&mut *connection)
        .await
        .unwrap();
    drop(connection);
    let found = simulate(&database, 2).await;
    assert_eq!(found, DESIGN.simulate(simulation_of(1), &NoStore).unwrap());
    database.close().await;
}
