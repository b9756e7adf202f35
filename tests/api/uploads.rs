//! Uploads: what lands, what is refused, and what is kept of both.

use std::io::Write as _;

use flate2::Compression;
use flate2::write::GzEncoder;
use realterms::service::uploads::erase_old_refused;
use realterms::store::Database;
use reqwest::Method;
use serde_json::Value;

use crate::support::app::{Answer, TestApp};

/// Starts a service that knows the moneys of two areas.
pub(crate) async fn start() -> TestApp {
    let app = TestApp::start().await;
    declare(&app).await;
    app
}

/// Declares the moneys of XAA and XAB.
pub(crate) async fn declare(app: &TestApp) {
    for (code, area) in [("XAD", "XAA"), ("XBD", "XAB")] {
        let body = format!(r#"{{"name": "Dinar of {area}", "areas": ["{area}"]}}"#);
        app.put(&format!("/v1/currencies/{code}"), &body)
            .await
            .expect(201);
    }
}

/// An example file.
pub(crate) fn fixture(name: &str) -> Vec<u8> {
    let path = format!("{}/fixtures/uploads/{name}", env!("CARGO_MANIFEST_DIR"));
    std::fs::read(path).unwrap()
}

/// Compresses.
pub(crate) fn gzip(bytes: &[u8]) -> Vec<u8> {
    let mut encoder = GzEncoder::new(Vec::new(), Compression::default());
    encoder.write_all(bytes).unwrap();
    encoder.finish().unwrap()
}

/// How many rows each table of what was said has.
pub(crate) async fn rows(database: &Database) -> Vec<i64> {
    sqlx::query_scalar(
        "SELECT array[(SELECT count(*) FROM series), (SELECT count(*) FROM segment),
             (SELECT count(*) FROM fragment), (SELECT count(*) FROM vintage),
             (SELECT count(*) FROM change), (SELECT count(*) FROM upload),
             (SELECT count(*) FROM upload_part), (SELECT count(*) FROM upload_reject)]",
    )
    .fetch_one(database.pool())
    .await
    .unwrap()
}

async fn upload_gzip(app: &TestApp, query: &str, body: &[u8]) -> Answer {
    let headers = [("Content-Type", "text/csv"), ("Content-Encoding", "gzip")];
    let path = format!("/v1/uploads?{query}");
    app.send(Method::POST, &path, &headers, Some(gzip(body)))
        .await
}

#[tokio::test]
async fn the_example_of_every_kind_lands_plain_and_compressed() {
    let app = start().await;
    let kinds = app.get("/v1/kinds").await.expect(200).json();
    let kinds = kinds.as_array().unwrap();
    assert_eq!(kinds.len(), 6);
    for kind in kinds {
        let name = kind["name"].as_str().unwrap();
        let template = app
            .get(&format!("/v1/kinds/{name}?format=csv"))
            .await
            .expect(200)
            .text();
        let columns: Vec<&str> = kind["columns"]
            .as_array()
            .unwrap()
            .iter()
            .map(|c| c["name"].as_str().unwrap())
            .collect();
        assert_eq!(template.trim_end().split(',').collect::<Vec<_>>(), columns);
        assert_eq!(
            app.get(&format!("/v1/kinds/{name}"))
                .await
                .expect(200)
                .json(),
            *kind
        );
        // The template is a header that the kind accepts.
        let empty = app
            .upload(&format!("kind={name}"), template)
            .await
            .expect(422);
        assert_eq!(empty.at("/errors/0/code"), "no_rows", "{name}");

        let raw = fixture(&format!("{name}.csv"));
        let query = format!("kind={name}&released=2020-07-01");
        let plain = app.upload(&query, raw.clone()).await.expect(201);
        assert_eq!(plain.at("/state"), "landed", "{name}");
        assert_eq!(plain.at("/compression"), "none");
        assert_eq!(plain.at("/bytes"), raw.len());
        let again = upload_gzip(&app, &format!("{query}&source=GZIP"), &raw)
            .await
            .expect(201);
        assert_eq!(again.at("/compression"), "gzip", "{name}");
        let counts = plain.at("/report/observations");
        assert_eq!(counts, again.at("/report/observations"), "{name}");
        let lines = String::from_utf8(raw.clone()).unwrap().lines().count() - 1;
        assert_eq!(counts["new"], lines, "{name}");
        let keys = plain.at("/report/series_created/keys");
        for key in keys.as_array().unwrap() {
            let key = key.as_str().unwrap();
            let mut places: Vec<&str> = key.split('.').collect();
            places.resize(8, "");
            places[6] = "GZIP";
            let other = places.join(".").trim_end_matches('.').to_owned();
            let values = app.values(key, "").await;
            assert!(!values.is_empty());
            assert_eq!(values, app.values(&other, "").await, "{key}");
        }
        for (answer, bytes) in [(&plain, raw.clone()), (&again, gzip(&raw))] {
            let path = format!("/v1/uploads/{}/raw", answer.at("/id"));
            let kept = app.get(&path).await.expect(200);
            assert_eq!(kept.bytes, bytes, "{name}");
        }
    }
    app.get("/v1/kinds/trades").await.expect(404);
    app.stop().await;
}

#[tokio::test]
async fn the_report_says_what_was_understood() {
    let app = start().await;
    let query = "kind=trade&released=2020-07-01&source=OFFICE";
    let answer = app.upload(query, fixture("trade.csv")).await.expect(201);
    let report = answer.at("/report");
    let understood = &report["understood"];
    assert_eq!(understood["kind"], "trade");
    assert_eq!(understood["columns"][3]["name"], "currency");
    assert!(
        understood["columns"][3]["meaning"]
            .as_str()
            .unwrap()
            .contains("amounts")
    );
    assert_eq!(
        understood["constants"],
        serde_json::json!({"source": "OFFICE"})
    );
    assert_eq!(understood["delimiter"], "comma");
    assert_eq!(understood["lines"], 17);
    assert_eq!(understood["rows_read"], 16);
    assert_eq!(understood["rows_accepted"], 16);
    assert_eq!(understood["rows_rejected"], 0);
    assert_eq!(
        understood["periods"],
        serde_json::json!([{"frequency": "Q", "first": "2019-Q1", "last": "2020-Q2"}])
    );
    assert_eq!(
        understood["units"],
        serde_json::json!(["XAD, flow, current prices"])
    );
    assert_eq!(understood["series"], 3);
    assert_eq!(report["observations"]["new"], 16);
    assert_eq!(report["series_created"]["count"], 3);
    assert_eq!(report["series_changed"]["count"], 3);

    // The next release: one period more, one revised, one emptied, the others as they were.
    let next = "area,measure,currency,unit_multiplier,period,value\n\
        XAA,exports,XAD,6,2020-Q1,1190.2\n\
        XAA,exports,XAD,6,2020-Q2,1012.9\n\
        XAA,exports,XAD,6,2020-Q3,1100\n\
        XAA,imports,XAD,6,2020-Q1,\n";
    let query = "kind=trade&released=2020-10-01&source=OFFICE";
    let answer = app.upload(query, next).await.expect(201);
    assert_eq!(
        answer.at("/report/observations"),
        serde_json::json!({"new": 1, "revised": 1, "unchanged": 1, "emptied": 1})
    );
    assert_eq!(answer.at("/report/series_created/count"), 0);
    assert_eq!(
        answer.at("/report/series_changed/keys"),
        serde_json::json!(["Q.XAA.exports....OFFICE", "Q.XAA.imports....OFFICE"])
    );
    app.stop().await;
}

#[tokio::test]
async fn a_dry_run_changes_nothing_and_reports_what_the_real_one_does() {
    let app = start().await;
    let database = app.db.open().await;
    let first = fixture("trade.csv");
    let second = "area,measure,currency,unit_multiplier,period,value\n\
        XAA,exports,XAD,6,2020-Q2,1012.9\nXAA,exports,XAD,6,2020-Q3,1100\nXAB,exports,XBD,6,2020-Q3,1\n";
    // The last would be held: the multiplier is a thousand too high.
    let third =
        "area,measure,currency,unit_multiplier,period,value\nXAA,exports,XAD,9,2020-Q3,1100\n";
    for (body, state) in [
        (first, "landed"),
        (second.into(), "landed"),
        (third.into(), "held"),
    ] {
        let before = rows(&database).await;
        let query = "kind=trade&released=2020-07-01";
        let dry = app
            .upload(&format!("{query}&dry_run=true"), body.clone())
            .await
            .expect(200);
        assert_eq!(rows(&database).await, before);
        assert_eq!(dry.at("/dry_run"), true);
        assert_eq!(dry.at("/id"), Value::Null);
        let real = app.upload(query, body).await;
        assert_eq!(dry.at("/state"), state);
        assert_eq!(real.at("/state"), state);
        assert!(real.at("/report/observations/new").as_u64().unwrap() > 0 || state == "held");
        assert_eq!(dry.at("/report"), real.at("/report"));
    }
    // A dry run that would be refused says so and keeps nothing either.
    let before = rows(&database).await;
    let answer = app
        .upload("kind=trade&dry_run=true", fixture("bad/wrong_period.csv"))
        .await
        .expect(422);
    assert_eq!(answer.at("/upload/id"), Value::Null);
    assert_eq!(answer.at("/errors/0/line"), 3);
    assert_eq!(rows(&database).await, before);
    app.stop().await;
}

#[tokio::test]
async fn rejects_refuse_the_file_or_are_skipped() {
    let app = start().await;
    let database = app.db.open().await;
    let mut file = "area,measure,currency,period,value\n".to_owned();
    for year in 1801..=2000 {
        let value = if year <= 1850 { "10.5" } else { "n/a" };
        file.push_str(&format!("XAA,exports,XAD,{year},{value}\n"));
    }
    // A key twice with two values is a reject; an identical repeat is none.
    file.push_str("XAA,exports,XAD,1801,11\nXAA,exports,XAD,1802,10.5\n");
    let before = rows(&database).await;
    let refused = app
        .upload("kind=trade&title=Try", file.clone())
        .await
        .expect(422);
    assert_eq!(refused.at("/code"), "upload_refused");
    assert_eq!(refused.at("/errors").as_array().unwrap().len(), 100);
    assert_eq!(refused.at("/errors/0/code"), "duplicate_key");
    assert_eq!(refused.at("/errors/0/line"), 2);
    assert_eq!(refused.at("/errors/1/code"), "not_a_number");
    assert_eq!(refused.at("/errors/1/line"), 52);
    assert_eq!(refused.at("/errors/1/column"), "value");
    assert_eq!(refused.at("/errors/1/found"), "n/a");
    let upload = refused.at("/upload");
    assert_eq!(upload["state"], "refused");
    assert_eq!(
        upload["report"]["understood"]["rejects_by_code"],
        serde_json::json!({"duplicate_key": 2, "not_a_number": 150})
    );
    assert_eq!(upload["report"]["understood"]["rows_accepted"], 50);
    assert_eq!(upload["report"]["observations"]["new"], 0);
    // Kept: the upload, one part and the rejects. No series, no segment, no vintage, no change.
    let mut after = before.clone();
    (after[5], after[6], after[7]) = (before[5] + 1, before[6] + 1, before[7] + 152);
    assert_eq!(rows(&database).await, after);
    let path = format!("/v1/uploads/{}", upload["id"]);
    let mut kept = app.get(&path).await.expect(200).json();
    assert_eq!(kept["title"], "Try");
    kept["recorded"] = upload["recorded"].clone();
    assert_eq!(kept, upload);
    let rejects = app.pages(&format!("{path}/rejects?limit=60")).await;
    assert_eq!(rejects.len(), 152);
    assert_eq!(rejects[150]["line"], 201);
    assert_eq!(rejects[151]["code"], "duplicate_key");
    assert_eq!(rejects[151]["line"], 202);
    assert_eq!(rejects[1]["row"], "XAA,exports,XAD,1851,n/a");
    let raw = app.get(&format!("{path}/raw")).await.expect(200);
    assert_eq!(raw.text(), file);
    let listed = app.pages("/v1/uploads?state=refused").await;
    assert_eq!(listed.len(), 1);
    app.get("/v1/series/A.XAA.exports").await.expect(404);
    assert!(app.pages("/v1/series").await.is_empty());
    assert_eq!(
        app.delete(&path).await.expect(409).at("/code"),
        "not_current"
    );

    // A refused upload is not recognised; the same bytes may be sent with other wishes.
    app.upload("kind=trade", file.clone()).await.expect(422);
    let skipped = app
        .upload("kind=trade&on_reject=skip", file)
        .await
        .expect(201);
    assert_eq!(skipped.at("/report/observations/new"), 49);
    assert_eq!(skipped.at("/report/understood/rows_rejected"), 152);
    let values = app.values("A.XAA.exports", "").await;
    assert_eq!(values.len(), 49);
    // Of the contradicting rows none is kept.
    assert_eq!(values[0], ("1802".to_owned(), Some(10.5)));
    let path = format!("/v1/uploads/{}/rejects", skipped.at("/id"));
    assert_eq!(app.pages(&path).await.len(), 152);
    // A series of nothing else does not come to be.
    let file =
        "area,measure,currency,period,value\nXAB,exports,XBD,2001,1\nXAB,exports,XBD,2001,2\n";
    let skipped = app.upload("kind=trade&on_reject=skip", file).await;
    let skipped = skipped.expect(201);
    assert_eq!(skipped.at("/report/understood/rows_accepted"), 0);
    assert_eq!(skipped.at("/report/series_created/count"), 0);
    let message = skipped.at("/report/rejects/1/message").to_string();
    assert!(message.contains("neither counts"), "{message}");
    app.get("/v1/series/A.XAB.exports").await.expect(404);
    app.stop().await;
}

#[tokio::test]
async fn the_same_bytes_are_recognised_until_they_are_withdrawn() {
    let app = start().await;
    let database = app.db.open().await;
    let query = "kind=trade&released=2020-07-01";
    let body = fixture("trade.csv");
    app.upload(&format!("{query}&dry_run=true"), body.clone())
        .await
        .expect(200);
    let first = app.upload(query, body.clone()).await.expect(201);
    assert_eq!(first.at("/recognised"), false);
    let before = rows(&database).await;
    for again in [query, "kind=trade", "kind=trade&title=Another+title"] {
        let again = app.upload(again, body.clone()).await.expect(200);
        assert_eq!(again.at("/recognised"), true);
        assert_eq!(again.at("/id"), first.at("/id"));
        assert_eq!(again.at("/report"), first.at("/report"));
    }
    assert_eq!(rows(&database).await, before);
    // Another release of the same figures is another upload, which changes nothing.
    let later = app
        .upload("kind=trade&released=2020-10-01", body.clone())
        .await
        .expect(201);
    assert_eq!(later.at("/report/observations/unchanged"), 16);
    assert_eq!(later.at("/report/series_changed/count"), 0);

    for upload in [&first, &later] {
        let path = format!("/v1/uploads/{}", upload.at("/id"));
        let withdrawn = app.delete(&path).await.expect(200);
        assert_eq!(withdrawn.at("/state"), "withdrawn");
        assert!(withdrawn.at("/withdrawn_revision").is_u64());
    }
    app.get("/v1/series/Q.XAA.exports").await.expect(404);
    let anew = app.upload(query, body).await.expect(201);
    assert_eq!(anew.at("/report/observations/new"), 16);
    assert_ne!(anew.at("/id"), first.at("/id"));
    app.stop().await;
}

#[tokio::test]
async fn what_is_said_of_a_publication_is_kept() {
    let app = start().await;
    let query = "kind=ratio&released=2020-02-29&title=Balance+of+payments%2C+r%C3%A9vis%C3%A9e\
        &publisher=Office%20of%20XAA&note=%22a%22%0Ab";
    let answer = app.upload(query, fixture("ratio.csv")).await.expect(201);
    let kept = app
        .get(&format!("/v1/uploads/{}", answer.at("/id")))
        .await
        .expect(200);
    for view in [&answer, &kept] {
        assert_eq!(view.at("/title"), "Balance of payments, révisée");
        assert_eq!(view.at("/publisher"), "Office of XAA");
        assert_eq!(view.at("/note"), "\"a\"\nb");
        assert_eq!(view.at("/released"), "2020-02-29");
        assert_eq!(view.at("/author"), "open");
        let sha256 = view.at("/sha256");
        assert_eq!(sha256.as_str().unwrap().len(), 64);
    }
    let listed = app.pages("/v1/uploads?kind=ratio&limit=1").await;
    assert_eq!(listed.len(), 1);
    assert_eq!(listed[0]["title"], "Balance of payments, révisée");
    let lineage = app
        .get("/v1/series/A.XAA.current_account_ratio/lineage")
        .await
        .expect(200);
    assert_eq!(lineage.at("/spans/0/publisher"), "Office of XAA");
    let tomorrow = realterms::clock::now().date_naive() + chrono::Days::new(2);
    for query in [
        format!("kind=ratio&released={tomorrow}"),
        "kind=ratio&released=2020-02-30".to_owned(),
        "kind=ratio&title=a%00b".to_owned(),
    ] {
        let answer = app.upload(&query, fixture("ratio.csv")).await.expect(400);
        assert_eq!(answer.at("/code"), "bad_request", "{query}");
    }
    app.stop().await;
}

#[tokio::test]
async fn old_refused_uploads_are_swept_and_nothing_else() {
    let app = start().await;
    let database = app.db.open().await;
    let landed = app
        .upload("kind=ratio&released=2020-02-29", fixture("ratio.csv"))
        .await
        .expect(201);
    let clean = rows(&database).await;
    let refused = app
        .upload("kind=trade", fixture("bad/wrong_period.csv"))
        .await
        .expect(422);
    let path = format!("/v1/uploads/{}", refused.at("/upload/id"));
    let age = async |hours: i32| {
        let older = "UPDATE upload SET recorded = clock_timestamp() - make_interval(hours => $1)";
        let older = sqlx::query(older).bind(hours);
        older.execute(database.pool()).await.unwrap();
        erase_old_refused(&database, 30).await.unwrap()
    };
    assert_eq!(age(30 * 24 - 1).await, 0);
    app.get(&path).await.expect(200);
    assert_eq!(age(30 * 24 + 1).await, 1);
    app.get(&path).await.expect(404);
    app.get(&format!("{path}/raw")).await.expect(404);
    app.get(&format!("{path}/rejects")).await.expect(404);
    assert_eq!(rows(&database).await, clean);
    app.get(&format!("/v1/uploads/{}", landed.at("/id")))
        .await
        .expect(200);
    app.stop().await;
}

#[tokio::test]
async fn the_sql_view_shows_what_http_shows() {
    let app = start().await;
    let database = app.db.open().await;
    let file = "area,measure,currency,period,value,status\n\
        XAA,exports,XAD,1999,1.5,\nXAA,exports,XAD,2001,,Q\nXAA,exports,XAD,2002,0.1,E\n\
        XAA,exports,XAD,2020-S2,3,P\nXAA,exports,XAD,2021-S1,,\n\
        XAA,exports,XAD,2019-Q4,1e-300,\nXAA,exports,XAD,2020-Q1,17976931348623157e292,\n\
        XAA,exports,XAD,1999-12,12.25,\nXAA,exports,XAD,2000-01,12.5,B\n\
        XAA,exports,XAD,2020-W53,7,\nXAA,exports,XAD,2021-W01,8,\nXAA,exports,XAD,1582-W41,8,\n\
        XAA,exports,XAD,2020-02-29,1,\nXAA,exports,XAD,2020-03-01,-0,\nXAA,exports,XAD,1500-01-01,5,\n";
    app.upload("kind=trade&released=2021-12-31", file)
        .await
        .expect(201);
    for frequency in ["A", "S", "Q", "M", "W", "D"] {
        let seen: Vec<(String, Option<f64>, String)> = sqlx::query_as(
            "SELECT period, value, status FROM observation
             WHERE frequency = $1 AND area = 'XAA' AND measure = 'exports' ORDER BY period",
        )
        .bind(frequency)
        .fetch_all(database.pool())
        .await
        .unwrap();
        let path = format!("/v1/series/{frequency}.XAA.exports/observations");
        let answer = app.get(&path).await.expect(200).at("/observations");
        let told: Vec<(String, Option<f64>, String)> = answer
            .as_array()
            .unwrap()
            .iter()
            .map(|o| {
                let text = |name: &str| o[name].as_str().unwrap().to_owned();
                (text("period"), o["value"].as_f64(), text("status"))
            })
            .collect();
        assert_eq!(seen, told);
        assert_eq!(
            told.len(),
            file.lines()
                .filter(|l| told.iter().any(|t| l.contains(&format!(",{},", t.0))))
                .count()
        );
        assert!(told.len() >= 2, "{frequency}");
    }
    assert_eq!(
        app.values("A.XAA.exports", "").await[1],
        ("2001".to_owned(), None)
    );
    app.stop().await;
}
