//! What holds an upload, what opens a segment, and what becomes of both.

use reqwest::Method;
use serde_json::{Value, json};

use crate::support::app::{Answer, TestApp};
use crate::uploads::{fixture, rows, start};

/// A table of quarterly exports of XAA from 2019 on, in millions unless told otherwise.
fn exports(multiplier: i32, values: &[f64]) -> String {
    let mut file = "area,measure,currency,unit_multiplier,period,value\n".to_owned();
    for (i, value) in values.iter().enumerate() {
        let (year, quarter) = (2019 + i / 4, i % 4 + 1);
        file.push_str(&format!(
            "XAA,exports,XAD,{multiplier},{year}-Q{quarter},{value}\n"
        ));
    }
    file
}

async fn send(app: &TestApp, released: &str, more: &str, file: impl Into<Vec<u8>>) -> Answer {
    app.upload(&format!("kind=trade&released={released}{more}"), file)
        .await
}

fn path(upload: &Answer) -> String {
    format!("/v1/uploads/{}", upload.at("/id"))
}

#[tokio::test]
async fn a_wrong_multiplier_is_held_until_it_is_accepted_or_withdrawn() {
    let app = start().await;
    let values = [100.0, 101.0, 102.5, 101.5];
    send(&app, "2020-01-01", "", exports(6, &values))
        .await
        .expect(201);
    // A table of ten times the values is odd but nobody's mistake in a unit.
    for (multiplier, status) in [
        (0, 202),
        (3, 202),
        (4, 201),
        (5, 201),
        (7, 201),
        (8, 201),
        (9, 202),
        (12, 202),
    ] {
        let file = exports(multiplier, &values);
        let answer = send(&app, "2020-02-01", "&dry_run=true", file.clone())
            .await
            .expect(200);
        let held = status == 202;
        assert_eq!(answer.at("/state"), if held { "held" } else { "landed" });
        assert_eq!(
            answer.at("/report/findings/0/code"),
            if held {
                json!("level_ratio")
            } else {
                Value::Null
            }
        );
    }
    // It need not overlap with what is stored.
    let behind = "area,measure,currency,period,value\nXAA,exports,XAD,2020-Q1,103\n";
    let behind = send(&app, "2020-02-01", "&dry_run=true", behind).await;
    assert_eq!(behind.at("/state"), "held");

    let before = app.values("Q.XAA.exports", "").await;
    let wrong = exports(9, &[100.0, 101.0, 102.5, 101.5, 103.0]);
    let held = send(&app, "2020-02-01", "", wrong.clone())
        .await
        .expect(202);
    assert_eq!(held.header("location"), Some(path(&held).as_str()));
    let finding = held.at("/report/findings/0");
    assert_eq!(finding["series"], "Q.XAA.exports");
    assert_eq!(finding["period"], "2019-Q1");
    assert!(
        finding["remedy"]
            .as_str()
            .unwrap()
            .contains("unit_multiplier")
    );
    assert_eq!(held.at("/report/observations/revised"), 4);
    assert_eq!(held.at("/revision"), Value::Null);
    // It feeds nothing, and it is recognised as what it is.
    assert_eq!(app.values("Q.XAA.exports", "").await, before);
    let vintages = app.get("/v1/series/Q.XAA.exports/vintages").await;
    assert_eq!(vintages.json().as_array().unwrap().len(), 1);
    let again = send(&app, "2020-02-01", "", wrong.clone())
        .await
        .expect(200);
    assert_eq!(again.at("/id"), held.at("/id"));
    assert_eq!(again.at("/state"), "held");
    let listed = app.get("/v1/uploads?state=held").await.expect(200);
    assert_eq!(listed.at("/0/id"), held.at("/id"));

    let withdrawn = app.delete(&path(&held)).await.expect(200);
    assert_eq!(withdrawn.at("/state"), "withdrawn");
    assert_eq!(withdrawn.at("/withdrawn_revision"), Value::Null);
    for refused in [
        app.delete(&path(&held)).await,
        app.post(&format!("{}/accept", path(&held)), "").await,
    ] {
        refused.expect(409);
    }
    assert_eq!(app.values("Q.XAA.exports", "").await, before);

    // The same bytes may come again; accepted, they are current.
    let held = send(&app, "2020-02-01", "", wrong.clone())
        .await
        .expect(202);
    let accept = format!("{}/accept", path(&held));
    let accepted = app.post(&accept, "").await.expect(200);
    assert_eq!(accepted.at("/state"), "landed");
    assert!(accepted.at("/revision").is_u64());
    assert_eq!(accepted.at("/report/findings/0/code"), "level_ratio");
    assert_eq!(
        app.values("Q.XAA.exports", "from=2020-Q1").await,
        [("2020-Q1".to_owned(), Some(103e9))]
    );
    let code = app.post(&accept, "").await.expect(409).at("/code");
    assert_eq!(code, "not_held");
    app.delete(&path(&held)).await.expect(200);
    assert_eq!(app.values("Q.XAA.exports", "").await, before);

    // Who knows better says so at once.
    let landed = send(&app, "2020-02-01", "&on_finding=land", wrong).await;
    let landed = landed.expect(201);
    assert_eq!(landed.at("/report/findings/0/code"), "level_ratio");
    assert_eq!(app.values("Q.XAA.exports", "").await.len(), 5);
    for missing in ["/v1/uploads/999", "/v1/uploads/x"] {
        app.delete(missing).await.expect(404);
        app.post(&format!("{missing}/accept"), "").await.expect(404);
    }
    app.stop().await;
}

/// There is nothing before it to compare it with; what follows it tells as much.
#[tokio::test]
async fn an_older_release_with_a_wrong_multiplier_is_held_too() {
    let app = start().await;
    let values = [100.0, 101.0, 103.0];
    send(&app, "2020-06-30", "", exports(6, &values))
        .await
        .expect(201);
    let late = send(&app, "2020-03-31", "", exports(3, &values))
        .await
        .expect(202);
    assert_eq!(late.at("/state"), "held");
    assert_eq!(late.at("/report/findings/0/code"), "level_ratio");
    app.stop().await;
}

#[tokio::test]
async fn the_same_bytes_under_other_settings_are_held() {
    let app = start().await;
    let file = exports(6, &[100.0, 101.0]);
    send(&app, "2020-01-01", "", file.clone()).await.expect(201);
    let held = send(&app, "2020-01-01", "&adjustment=S", file.clone())
        .await
        .expect(202);
    let finding = held.at("/report/findings/0");
    assert_eq!(finding["code"], "same_bytes_other_settings");
    assert_eq!(finding["found"], "kind=trade adjustment=S");
    assert_eq!(finding["expected"], "kind=trade");
    // A series of a held upload alone does not exist for anybody.
    app.get("/v1/series/Q.XAA.exports.....S").await.expect(404);
    let listed = app.get("/v1/series").await.expect(200);
    assert_eq!(listed.json().as_array().unwrap().len(), 1);
    let database = app.db.open().await;
    let seen: i64 = sqlx::query_scalar("SELECT count(*) FROM observation WHERE adjustment = 'S'")
        .fetch_one(database.pool())
        .await
        .unwrap();
    assert_eq!(seen, 0);
    let scoped = send(&app, "2020-01-01", "&scope=replace", file).await;
    scoped.expect(202);
    app.post(&format!("{}/accept", path(&held)), "")
        .await
        .expect(200);
    assert_eq!(
        app.values("Q.XAA.exports.....S", "").await,
        app.values("Q.XAA.exports", "").await
    );
    app.stop().await;
}

#[tokio::test]
async fn a_currency_that_contradicts_the_known_one_is_held() {
    let app = start().await;
    let file = "period,value\n2019,10\n";
    let query =
        "kind=trade&area=XAA&measure=exports&currency=XBD&own_currency=XBD&released=2020-01-01";
    let held = app.upload(query, file).await.expect(202);
    let finding = held.at("/report/findings/0");
    assert_eq!(finding["code"], "currency_contradicted");
    assert_eq!(finding["found"], "XBD");
    assert_eq!(finding["expected"], "XAD");
    app.get("/v1/series/A.XAA.exports").await.expect(404);
    app.stop().await;
}

#[tokio::test]
async fn a_money_is_unknown_until_declared_and_stays_while_it_is_used() {
    let app = TestApp::start().await;
    let file = "area,measure,currency,own_currency,period,value\nXAA,exports,XAX,XAX,2019,5\n";
    let query = "kind=trade&released=2020-01-01";
    let refused = app.upload(query, file).await.expect(422);
    let finding = refused.at("/errors/0");
    assert_eq!(finding["code"], "unknown_currency");
    assert_eq!(
        (&finding["line"], &finding["column"]),
        (&json!(2), &json!("currency"))
    );
    // Nearest by letters, from ISO 4217.
    assert!(
        finding["expected"].as_str().unwrap().contains("XAF"),
        "{finding}"
    );
    assert!(
        finding["remedy"]
            .as_str()
            .unwrap()
            .contains("PUT /v1/currencies/XAX")
    );
    let constant = app
        .upload(
            "kind=trade&measure=exports&area=XAA&currency=UDS",
            "period,value\n2019,5\n",
        )
        .await
        .expect(400);
    assert_eq!(constant.at("/errors/0/parameter"), "currency");
    assert!(
        constant
            .at("/errors/0/expected")
            .as_str()
            .unwrap()
            .contains("USD")
    );

    app.put("/v1/currencies/XAX", r#"{"name": "Crown"}"#)
        .await
        .expect(201);
    app.put("/v1/currencies/XAY", r#"{"name": "Mark"}"#)
        .await
        .expect(201);
    app.upload(query, file).await.expect(201);
    assert_eq!(app.values("A.XAA.exports", "").await.len(), 1);
    let refused = app.delete("/v1/currencies/XAX").await.expect(409);
    assert_eq!(refused.at("/code"), "currency_in_use");
    app.delete("/v1/currencies/XAY").await.expect(204);
    app.delete("/v1/currencies/XAY").await.expect(404);
    app.get("/v1/currencies/XAX").await.expect(200);

    // A listed currency needs no declaration, but that of an area's own money explains the area's keys.
    for (code, area) in [("USD", "XBB"), ("EUR", "XCC")] {
        let body = format!(r#"{{"name": "Money", "areas": ["{area}"]}}"#);
        let path = format!("/v1/currencies/{code}");
        app.put(&path, &body).await.expect(201);
    }
    let file =
        "area,measure,currency,period,value\nXBB,exports,USD,2019,5\nXBB,exports,EUR,2019,4\n";
    app.upload(query, file).await.expect(201);
    let refused = app.delete("/v1/currencies/USD").await.expect(409);
    assert_eq!(refused.at("/code"), "currency_in_use");
    app.delete("/v1/currencies/EUR").await.expect(204);
    app.stop().await;
}

#[tokio::test]
async fn another_reference_period_opens_a_segment_and_proposes_a_link() {
    let app = start().await;
    let index = |reference: &str, values: &[(i32, f64)]| {
        let mut file = "area,measure,reference,period,value\n".to_owned();
        for (year, value) in values {
            file.push_str(&format!("XAA,export_price,{reference},{year},{value}\n"));
        }
        file
    };
    let send = async |released: &str, file: String| {
        app.upload(&format!("kind=price_index&released={released}"), file)
            .await
            .expect(201)
    };
    let old = [(2014, 96.0), (2015, 100.0), (2016, 102.0), (2017, 104.0)];
    let first = send("2018-01-01", index("2015", &old)).await;
    assert_eq!(first.at("/report/segments_opened"), json!([]));
    // Over 2016 and 2017 the new one stands at 100/104 of the old; in 2016 rounding is off.
    let new = [(2016, 98.0), (2017, 100.0), (2018, 103.0)];
    let second = send("2019-01-01", index("2017", &new)).await;
    assert_eq!(second.at("/state"), "landed");
    assert_eq!(second.at("/report/series_created/count"), 0);
    assert_eq!(second.at("/report/observations/new"), 3);
    let opened = second.at("/report/segments_opened/0");
    assert_eq!(opened["series"], "A.XAA.export_price");
    assert_eq!(opened["segment"], 2);
    assert_eq!(
        opened["before"],
        "price index, 2015 = 100, of prices in XAD"
    );
    assert_eq!(opened["unit"], "price index, 2017 = 100, of prices in XAD");
    let link = &opened["proposed_link"];
    assert_eq!(
        (&link["from"], &link["to"]),
        (&json!("2016"), &json!("2017"))
    );
    let factor = link["factor"].as_f64().unwrap();
    let (low, high) = (98.0 / 102.0, 100.0 / 104.0);
    assert!((low..=high).contains(&factor), "{factor}");
    let spread = link["spread"].as_f64().unwrap();
    assert!((spread - (high / low - 1.0)).abs() < 1e-12, "{spread}");
    let effect = link["growth_effect_log_percent"].as_f64().unwrap();
    assert!((effect - 100.0 * spread.ln_1p()).abs() < 1e-12, "{effect}");

    // Nothing is spliced: reads say which segment they are of.
    let key = "/v1/series/A.XAA.export_price";
    let read = app.get(&format!("{key}/observations")).await.expect(200);
    assert_eq!(read.at("/segment"), 2);
    assert_eq!(read.at("/observations").as_array().unwrap().len(), 3);
    let read = app
        .get(&format!("{key}/observations?segment=1"))
        .await
        .expect(200);
    assert_eq!(read.at("/segment"), 1);
    assert_eq!(read.at("/unit/reference"), "2015");
    assert_eq!(read.at("/observations").as_array().unwrap().len(), 4);
    app.get(&format!("{key}/observations?segment=3"))
        .await
        .expect(404);
    let series = app.get(key).await.expect(200);
    assert_eq!(
        (series.at("/segment"), series.at("/segments")),
        (json!(2), json!(2))
    );
    let lineage = app
        .get(&format!("{key}/lineage?segment=1&period=2016"))
        .await
        .expect(200);
    assert_eq!(lineage.at("/spans/0/upload"), first.at("/id"));
    let read = app
        .get(&format!("{key}/observations?as_of=2018-06-01"))
        .await
        .expect(200);
    assert_eq!(read.at("/segment"), 1);

    // A third without overlap has no link to propose.
    let third = send("2020-01-01", index("2019", &[(2019, 100.0)])).await;
    assert_eq!(third.at("/report/segments_opened/0/segment"), 3);
    assert_eq!(
        third.at("/report/segments_opened/0/proposed_link"),
        Value::Null
    );
    // Withdrawn, the one before speaks again.
    app.delete(&path(&third)).await.expect(200);
    let series = app.get(key).await.expect(200);
    assert_eq!(
        (series.at("/segment"), series.at("/segments")),
        (json!(2), json!(2))
    );
    app.stop().await;
}

#[tokio::test]
async fn another_price_basis_opens_a_segment() {
    let app = start().await;
    let real = |prices: &str, value: f64| {
        let query = format!(
            "kind=income&area=XAA&measure=gdp_real&currency=XAD&prices={prices}&released=2020-01-01"
        );
        let file = format!("period,value\n2018,{value}\n2019,{}\n", value * 1.02);
        let app = &app;
        async move { app.upload(&query, file).await.expect(201) }
    };
    real("chained&price_reference=2010", 100.0).await;
    let rebased = real("chained&price_reference=2015", 125.0).await;
    let opened = rebased.at("/report/segments_opened/0");
    assert_eq!(
        opened["before"],
        "XAD, flow, chained volumes in prices of 2010"
    );
    let factor = opened["proposed_link"]["factor"].as_f64().unwrap();
    assert!((factor - 1.25).abs() < 1e-12, "{factor}");
    let constant = real("constant&price_reference=2015", 126.0).await;
    assert_eq!(constant.at("/report/segments_opened/0/segment"), 3);
    // What stands on a basis that is there already goes to its segment.
    let again = real("chained&price_reference=2010", 101.0).await;
    assert_eq!(again.at("/report/segments_opened"), json!([]));
    let read = app
        .get("/v1/series/A.XAA.gdp_real/observations?segment=1")
        .await
        .expect(200);
    assert_eq!(read.at("/observations/0/value"), 101.0);
    app.stop().await;
}

#[tokio::test]
async fn a_replacing_upload_ends_what_it_does_not_name() {
    let app = start().await;
    send(&app, "2020-01-01", "", fixture("trade.csv"))
        .await
        .expect(201);
    let short = "area,measure,currency,unit_multiplier,period,value\n\
        XAA,exports,XAD,6,2019-Q3,1250\nXAA,exports,XAD,6,2019-Q4,1330.9\n";
    let merged = send(&app, "2020-02-01", "&dry_run=true", short).await;
    assert_eq!(
        merged.at("/report/observations"),
        json!({"new": 0, "revised": 1, "unchanged": 1, "emptied": 0})
    );
    let replaced = send(&app, "2020-02-01", "&scope=replace", short)
        .await
        .expect(201);
    assert_eq!(
        replaced.at("/report/observations"),
        json!({"new": 0, "revised": 1, "unchanged": 1, "emptied": 4})
    );
    assert_eq!(
        app.values("Q.XAA.exports", "").await,
        [
            ("2019-Q3".to_owned(), Some(1250e6)),
            ("2019-Q4".to_owned(), Some(1330.9e6))
        ]
    );
    // Series that the file does not name stay, and so does the past.
    assert_eq!(app.values("Q.XAA.imports", "").await.len(), 6);
    let past = app.values("Q.XAA.exports", "as_of=2020-01-31").await;
    assert_eq!(past.len(), 6);
    app.delete(&path(&replaced)).await.expect(200);
    assert_eq!(app.values("Q.XAA.exports", "").await, past);
    app.stop().await;
}

#[tokio::test]
async fn a_held_upload_leaves_no_vintage_and_no_change() {
    let app = start().await;
    let database = app.db.open().await;
    send(&app, "2020-01-01", "", exports(6, &[100.0, 101.0]))
        .await
        .expect(201);
    let before = rows(&database).await;
    let held = send(&app, "2020-01-01", "", exports(9, &[100.0, 101.0]))
        .await
        .expect(202);
    let mut after = before.clone();
    // What it says is kept, with the upload and its bytes.
    (after[2], after[5], after[6]) = (before[2] + 1, before[5] + 1, before[6] + 1);
    assert_eq!(rows(&database).await, after);
    app.delete(&path(&held)).await.expect(200);
    assert_eq!(rows(&database).await, after);
    app.stop().await;
}

#[tokio::test]
async fn a_report_shows_a_hundred_findings_and_counts_the_others() {
    let app = start().await;
    let table = |value: f64| {
        let mut file = "period,value,product\n".to_owned();
        for i in 0..130 {
            file.push_str(&format!("2019,{value},H{i}\n"));
        }
        file
    };
    let more = "&area=XAA&measure=exports&currency=XAD";
    send(&app, "2020-01-01", more, table(5.0)).await.expect(201);
    let held = send(&app, "2020-01-01", more, table(5e6)).await.expect(202);
    let findings = held.at("/report/findings");
    let findings = findings.as_array().unwrap();
    assert_eq!(findings.len(), 101);
    assert_eq!(findings[100]["message"], "such findings in 30 more series");
    app.stop().await;
}

#[tokio::test]
async fn what_the_database_gives_up_for_the_sake_of_another_is_done_all_the_same() {
    let app = start().await;
    let database = app.db.open().await;
    let values = [100.0, 101.0, 102.5, 101.5];
    send(&app, "2020-01-01", "", exports(6, &values))
        .await
        .expect(201);
    let held = send(&app, "2020-02-01", "", exports(9, &values))
        .await
        .expect(202);
    // Every first try fails: what a sequence counts outlives the transaction.
    sqlx::raw_sql(
        "CREATE SEQUENCE tries;
         CREATE FUNCTION give_up() RETURNS trigger LANGUAGE plpgsql AS $$ BEGIN
             IF nextval('tries') % 2 = 1 THEN
                 RAISE 'try again' USING ERRCODE = 'serialization_failure';
             END IF;
             RETURN NEW;
         END $$;
         CREATE TRIGGER give_up BEFORE UPDATE ON upload FOR EACH ROW
             WHEN (OLD.state <> NEW.state) EXECUTE FUNCTION give_up()",
    )
    .execute(database.pool())
    .await
    .unwrap();
    let accept = format!("{}/accept", path(&held));
    let accepted = app.post(&accept, "").await.expect(200);
    assert_eq!(accepted.at("/state"), "landed");
    let withdrawn = app.delete(&path(&held)).await.expect(200);
    assert_eq!(withdrawn.at("/state"), "withdrawn");
    let tries: i64 = sqlx::query_scalar("SELECT last_value FROM tries")
        .fetch_one(database.pool())
        .await
        .unwrap();
    assert_eq!(tries, 4);
    app.stop().await;
}

#[tokio::test]
async fn slow_uploads_lock_nobody_out_but_uploads() {
    let app = start().await;
    let values = [100.0, 101.0, 102.5, 101.5];
    send(&app, "2020-01-01", "", exports(6, &values))
        .await
        .expect(201);
    let held = send(&app, "2020-02-01", "", exports(9, &values))
        .await
        .expect(202);
    let headers = [("Content-Length", "100"), ("Expect", "100-continue")];
    let mut slow = Vec::new();
    for _ in 0..app.db.options().upload_connections {
        let mut wire = app
            .wire(Method::POST, "/v1/uploads?kind=trade", &headers)
            .await;
        // Now it has its connection.
        assert_eq!(wire.head().await.0, 100);
        slow.push(wire);
    }
    let one_more = app.upload("kind=trade", exports(6, &values));
    let others = async {
        let accept = format!("{}/accept", path(&held));
        app.post(&accept, "").await.expect(200);
        app.delete(&path(&held)).await.expect(200);
    };
    let (refused, ()) = tokio::join!(one_more, others);
    let refused = refused.expect(503);
    assert_eq!(refused.at("/code"), "busy");
    assert_eq!(refused.header("retry-after"), Some("10"));
    drop(slow);
    app.stop().await;
}
