//! Many rows, many series, many at once: the same state as one small step after another gives.

use std::collections::BTreeMap;

use futures_util::future::join_all;
use realterms::config::Bytes;
use serde_json::Value;

use crate::support::app::TestApp;
use crate::uploads::{declare, rows, start};

/// A table in the order of periods, each with every series, some missing, some wrong, some twice.
fn table(series: usize, years: std::ops::Range<usize>) -> String {
    let mut file = "area,measure,partner,currency,period,value,status\n".to_owned();
    for year in years {
        for i in 0..series {
            let measure = if i % 2 == 0 { "exports" } else { "imports" };
            let (value, status) = match (year * 31 + i) % 41 {
                0 => (String::new(), "Q"),
                1 => ("?".to_owned(), ""),
                n => (format!("{}.{n}", 1000 + i), "A"),
            };
            file.push_str(&format!("XAA,{measure},P{i},XAD,{year},{value},{status}\n"));
            if (year + i) % 50 == 0 {
                file.push_str(&format!("XAA,{measure},P{i},XAD,{year},77,A\n"));
            }
        }
    }
    file
}

/// Everything that a reader can learn of the series, but for the moment of recording.
async fn told(app: &TestApp) -> Vec<Value> {
    let mut all = Vec::new();
    let listed = app.get("/v1/series?limit=1000").await.expect(200).json();
    for series in listed.as_array().unwrap() {
        let path = format!("/v1/series/{}", series["key"].as_str().unwrap());
        all.push(series.clone());
        for part in ["observations", "lineage", "vintages"] {
            let mut view = app.get(&format!("{path}/{part}")).await.expect(200).json();
            if let Value::Array(vintages) = &mut view {
                for vintage in vintages {
                    vintage["recorded"].take();
                }
            } else {
                view["recorded"].take();
            }
            all.push(view);
        }
    }
    all
}

#[tokio::test]
async fn an_upload_beyond_its_memory_gives_the_same_state() {
    let roomy = start().await;
    let tight = TestApp::start_with(|settings| settings.upload_memory = Bytes(1)).await;
    declare(&tight).await;
    let mut reports = Vec::new();
    for app in [&roomy, &tight] {
        let mut of_app = Vec::new();
        for (released, years, more) in [
            ("2020-01-01", 1900..1960, ""),
            ("2020-02-01", 1950..1990, ""),
            ("2020-01-15", 1940..1970, "&scope=replace"),
            ("2020-02-02", 1980..1981, "&unit_multiplier=3"),
        ] {
            let query = format!("kind=trade&on_reject=skip&released={released}{more}");
            let answer = app.upload(&query, table(24, years.clone())).await;
            assert!(matches!(answer.status, 201 | 202), "{}", answer.text());
            of_app.push((answer.at("/state"), answer.at("/report")));
        }
        // Refused, it is kept all the same.
        let query = "kind=trade&released=2020-03-01";
        let answer = app.upload(query, table(24, 1990..2020)).await.expect(422);
        of_app.push((answer.at("/errors"), answer.at("/upload/report")));
        reports.push(of_app);
    }
    assert_eq!(reports[0], reports[1]);
    assert_eq!(told(&roomy).await, told(&tight).await);
    for app in [&roomy, &tight] {
        app.delete("/v1/uploads/2").await.expect(200);
    }
    assert_eq!(told(&roomy).await, told(&tight).await);
    roomy.stop().await;
    tight.stop().await;
}

#[tokio::test]
async fn uploads_that_race_for_the_same_series_lose_nothing() {
    const SERIES: usize = 1500;
    const UPLOADS: usize = 8;
    let app = start().await;
    let file = |upload: usize| {
        let mut file = "measure,currency,area,partner,period,value\n".to_owned();
        for i in 0..SERIES {
            // Each begins elsewhere, every other runs backwards; 2000 is said by all.
            let i = match upload % 2 {
                0 => (i + upload * 190) % SERIES,
                _ => (SERIES + upload * 190 - i) % SERIES,
            };
            for (year, value) in [(2000, upload), (2001 + upload, i)] {
                file.push_str(&format!("exports,XAD,XAA,P{i},{year},{}\n", value + 1));
            }
        }
        file
    };
    let query = "kind=trade&released=2020-01-01&on_finding=land";
    let answers = join_all((0..UPLOADS).map(|u| app.upload(query, file(u)))).await;
    let mut landed = BTreeMap::new();
    for (upload, answer) in answers.into_iter().enumerate() {
        let answer = answer.expect(201);
        landed.insert(answer.at("/revision").as_i64().unwrap(), upload);
    }
    assert_eq!(landed.len(), UPLOADS);
    let (_, last) = landed.last_key_value().unwrap();
    let database = app.db.open().await;
    // Every series: the last to land speaks for 2000, and each for its own year.
    let complete: i64 = sqlx::query_scalar(
        "SELECT count(*) FROM (
             SELECT partner FROM observation GROUP BY partner
             HAVING count(*) = 1 + $2
                 AND bool_and(value = CASE period WHEN '2000' THEN 1 + $1
                     ELSE 1 + substr(partner, 2)::integer END)
         ) complete",
    )
    .bind(i32::try_from(*last).unwrap())
    .bind(i32::try_from(UPLOADS).unwrap())
    .fetch_one(database.pool())
    .await
    .unwrap();
    assert_eq!(usize::try_from(complete).unwrap(), SERIES);
    let counted = rows(&database).await;
    let series = i64::try_from(SERIES).unwrap();
    assert_eq!(counted[0], series);
    assert_eq!(counted[1], series);

    // Withdrawals that race leave what the one upload that stays says.
    let keep = app.get("/v1/uploads?limit=1").await.expect(200).at("/0/id");
    let keep = keep.as_i64().unwrap();
    let listed = app.get("/v1/uploads").await.expect(200).json();
    let withdrawn = listed
        .as_array()
        .unwrap()
        .iter()
        .map(|u| u["id"].as_i64().unwrap())
        .filter(|id| *id != keep)
        .map(|id| {
            let app = &app;
            async move { app.delete(&format!("/v1/uploads/{id}")).await }
        });
    for answer in join_all(withdrawn).await {
        answer.expect(200);
    }
    let left: i64 = sqlx::query_scalar("SELECT count(*) FROM observation")
        .fetch_one(database.pool())
        .await
        .unwrap();
    assert_eq!(left, 2 * series);
    app.stop().await;
}

#[tokio::test]
async fn the_same_file_sent_many_times_at_once_lands_once() {
    let app = start().await;
    let file = table(5, 1900..1905);
    let query = "kind=trade&released=2020-01-01&on_reject=skip";
    let answers = join_all((0..6).map(|_| app.upload(query, file.clone()))).await;
    let mut statuses: Vec<u16> = answers.iter().map(|a| a.status).collect();
    statuses.sort_unstable();
    assert_eq!(statuses, [200, 200, 200, 200, 200, 201]);
    assert!(answers.iter().all(|a| a.at("/id") == answers[0].at("/id")));
    app.stop().await;
}

#[tokio::test]
async fn a_file_of_twenty_thousand_series_lands() {
    let app = start().await;
    let mut file = "area,measure,product,currency,period,value\n".to_owned();
    for i in 0..20_000 {
        file.push_str(&format!("XAA,exports,H{i},XAD,2019-Q1,{}\n", i + 1));
    }
    let query = "kind=trade&released=2020-01-01";
    let answer = app.upload(query, file).await.expect(201);
    assert_eq!(answer.at("/report/series_created/count"), 20_000);
    assert_eq!(
        answer
            .at("/report/series_created/keys")
            .as_array()
            .unwrap()
            .len(),
        100
    );
    assert_eq!(
        app.values("Q.XAA.exports..H19999", "").await,
        [("2019-Q1".to_owned(), Some(20_000.0))]
    );
    let path = format!("/v1/uploads/{}", answer.at("/id"));
    app.delete(&path).await.expect(200);
    let listed = app.get("/v1/series").await.expect(200);
    assert_eq!(listed.json(), Value::Array(vec![]));
    app.stop().await;
}
