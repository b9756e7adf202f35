//! The cost of a read, as the database counts it.

use std::fmt::Write as _;

use crate::support::app::TestApp;

const SERIES: usize = 400;
const READS: i64 = 40;

/// Reading one series is one indexed row read and at most two queries.
///
/// Counted by the server's own statistics (`pg_stat_database`, `pg_stat_user_tables`), which a
/// connection hands in when it closes: so the service is stopped before they are read.
#[tokio::test]
async fn reading_a_series_is_one_indexed_row_and_at_most_two_queries() {
    let app = TestApp::start().await;
    let mut file = String::from("area,period,value\n");
    for series in 0..SERIES {
        for i in 0..if series == 0 { 500 } else { 12 } {
            let _ = writeln!(
                file,
                "X{series},{}-{:02},{}",
                1970 + i / 12,
                i % 12 + 1,
                100 + i
            );
        }
    }
    let query = "kind=trade&measure=exports&currency=USD&released=2020-03-31";
    app.upload(query, file).await.expect(201);
    let path = "/v1/series/M.X0.exports...USD/observations";
    let answer = app.get(path).await.expect(200);
    assert_eq!(answer.at("/observations").as_array().unwrap().len(), 500);

    let TestApp { base, db, .. } = &app;
    let database = db.open().await;
    sqlx::raw_sql("ANALYZE")
        .execute(database.pool())
        .await
        .unwrap();
    database.close().await;
    let (database, handle) = (
        db.options(),
        reqwest::Client::builder().no_proxy().build().unwrap(),
    );
    // A second service, so that the counts hold its reads alone.
    let settings = realterms::config::Settings {
        listen: ([127, 0, 0, 1], 0).into(),
        workers: std::num::NonZeroUsize::new(1),
        ..Default::default()
    };
    let before = counts(&app).await;
    let opened = realterms::store::Database::open_without_migrating(&database)
        .await
        .unwrap();
    let reader = realterms::http::Application::build(settings.serving(), opened)
        .await
        .unwrap();
    let (address, stop) = (reader.address(), reader.handle());
    let running = tokio::spawn(reader.run_until_stopped());
    for _ in 0..READS {
        let answer = handle
            .get(format!("http://{address}{path}"))
            .send()
            .await
            .unwrap();
        assert_eq!(answer.status(), 200, "{base}");
        answer.bytes().await.unwrap();
    }
    stop.stop(true).await;
    running.await.unwrap().unwrap();
    let after = counts(&app).await;

    // Opening, the check for tokens (remembered for a second) and the counting itself come on top.
    let queries = after.queries - before.queries;
    assert!(
        queries <= 2 * READS + 20,
        "{queries} queries for {READS} reads"
    );
    let rows = after.rows - before.rows;
    assert!(
        (READS..=READS + 2).contains(&rows),
        "{rows} rows of vintages for {READS} reads"
    );
    assert_eq!(
        after.scanned, before.scanned,
        "the table of vintages was scanned"
    );
    app.stop().await;
}

struct Counts {
    queries: i64,
    rows: i64,
    scanned: i64,
}

async fn counts(app: &TestApp) -> Counts {
    let database = app.db.open().await;
    let (queries, rows, scanned): (i64, i64, i64) = sqlx::query_as(
        "SELECT d.xact_commit, coalesce(t.idx_tup_fetch, 0), t.seq_tup_read
         FROM pg_stat_database d, pg_stat_user_tables t
         WHERE d.datname = current_database() AND t.relname = 'vintage'",
    )
    .fetch_one(database.pool())
    .await
    .unwrap();
    database.close().await;
    Counts {
        queries,
        rows,
        scanned,
    }
}
