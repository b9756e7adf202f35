//! What storing costs the database, and what its failures are taken for.

use crate::support::app::TestApp;
use crate::support::db::TestDb;
use crate::support::sample;
use realterms::series::SeriesKey;
use realterms::service::Fault;
use realterms::service::lineage::lineage;
use realterms::service::series::Moment;
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

#[tokio::test]
async fn what_cannot_be_read_or_asked_is_a_fault_of_the_program_and_no_passing_one() {
    let app = TestApp::start().await;
    sample::fill(&app).await;
    let database = app.db.open().await;
    let key = "Q.XAA.exports".parse().unwrap();
    let moment = Moment::default();
    for (spoil, reason) in [
        ("UPDATE vintage SET provenance = '\\x07'", "provenance"),
        (
            "ALTER TABLE vintage RENAME COLUMN provenance TO origin",
            "does not exist",
        ),
    ] {
        sqlx::raw_sql(spoil).execute(database.pool()).await.unwrap();
        let fault = lineage(&database, &key, &moment, None).await.unwrap_err();
        assert!(
            matches!(&fault, Fault::Internal(r) if r.contains(reason)),
            "{fault:?}"
        );
    }
    app.db.refuse();
    let fault = lineage(&database, &key, &moment, None).await.unwrap_err();
    assert!(matches!(fault, Fault::Store(_)), "{fault:?}");
    app.stop().await;
}
