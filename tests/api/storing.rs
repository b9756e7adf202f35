//! What storing costs the database.

use crate::support::db::TestDb;
use realterms::series::SeriesKey;
use realterms::store::series::ensure;
use realterms::time::Frequency;

/// Within one transaction nothing is known of what it wrote itself, and a wrong index makes finding the series of
/// a large upload quadratic.
#[tokio::test]
async fn finding_series_takes_as_many_lookups_as_there_are_series() {
    const BATCH: usize = 500;
    const BATCHES: usize = 8;
    let database = TestDb::create();
    let database = (database.open().await, database);
    let mut transaction = database.0.begin().await.unwrap();
    for batch in 0..BATCHES {
        let keys: Vec<SeriesKey> = (0..BATCH)
            .map(|i| {
                let product = format!("P{}", batch * BATCH + i);
                let places = ["XAA", "exports", "", product.as_str(), "", "", ""];
                SeriesKey::new(Frequency::Annual, places).unwrap()
            })
            .collect();
        let keys: Vec<&SeriesKey> = keys.iter().collect();
        let ids = ensure(&mut transaction, &keys).await.unwrap();
        assert!(ids.iter().all(|id| *id > 0), "{ids:?}");
    }
    let fetched: i64 = sqlx::query_scalar(
        "SELECT idx_tup_fetch FROM pg_stat_xact_user_tables WHERE relname = 'series'",
    )
    .fetch_one(&mut *transaction)
    .await
    .unwrap();
    let series = i64::try_from(BATCH * BATCHES).unwrap();
    assert!(fetched <= 4 * series, "{fetched} rows for {series} series");
}
