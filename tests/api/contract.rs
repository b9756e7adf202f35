//! The `OpenAPI` document: committed, served, printed, valid, and met whole by real requests.

use std::collections::BTreeSet;
use std::process::Command;

use futures_util::future::join_all;
use realterms::http::openapi;
use realterms::service::tokens::Role;
use reqwest::Method;
use serde_json::Value;

use crate::support::app::TestApp;
use crate::support::contract::{DOCUMENT, Met, operations, validator};
use crate::support::sample::{self, TRADE, TRADE_QUERY};

#[tokio::test]
async fn the_committed_document_is_the_one_that_is_served_and_printed() {
    let made = openapi::document();
    let file = concat!(env!("CARGO_MANIFEST_DIR"), "/api-spec/openapi.json");
    let committed = std::fs::read_to_string(file).unwrap();
    assert!(
        committed == made,
        "it is out of date; write it: cargo run -- openapi > api-spec/openapi.json"
    );
    let app = TestApp::start().await;
    assert_eq!(app.get("/openapi.json").await.expect(200).text(), made);
    app.stop().await;
    let printed = Command::new(env!("CARGO_BIN_EXE_realterms"))
        .arg("openapi")
        .output()
        .unwrap();
    assert_eq!(String::from_utf8(printed.stdout).unwrap(), made);
}

#[test]
fn the_document_is_sound() {
    assert_eq!(DOCUMENT["openapi"], "3.1.0");
    for field in ["title", "version"] {
        assert!(DOCUMENT["info"][field].is_string(), "{field}");
    }
    let mut ids = BTreeSet::new();
    for (path, method, operation) in operations() {
        let at = format!("{method} {path}");
        let id = operation["operationId"].as_str().unwrap();
        assert!(ids.insert(id), "{at}: {id} is there twice");
        assert!(operation["summary"].is_string(), "{at}");
        let mut names = BTreeSet::new();
        for parameter in operation["parameters"].as_array().unwrap() {
            let (name, place) = (&parameter["name"], &parameter["in"]);
            let (name, place) = (name.as_str().unwrap(), place.as_str().unwrap());
            assert!(["path", "query", "header"].contains(&place), "{at}: {name}");
            assert!(names.insert((name, place)), "{at}: {name} twice");
            validator(&parameter["schema"]);
        }
        let declared = names.iter().filter(|(_, place)| *place == "path");
        let declared: BTreeSet<&str> = declared.map(|(name, _)| *name).collect();
        let wanted: BTreeSet<&str> = path
            .split('/')
            .filter_map(|part| part.strip_prefix('{')?.strip_suffix('}'))
            .collect();
        assert_eq!(declared, wanted, "{at}");
        let mut bodies = vec![&operation["requestBody"]];
        for (status, response) in operation["responses"].as_object().unwrap() {
            let number: u16 = status.parse().unwrap();
            assert!((200..600).contains(&number), "{at} {status}");
            assert!(response["description"].is_string(), "{at} {status}");
            for header in response["headers"].as_object().unwrap().values() {
                validator(&header["schema"]);
            }
            bodies.push(response);
        }
        for content in bodies.iter().filter_map(|b| b["content"].as_object()) {
            assert!(!content.is_empty(), "{at}");
            for (media, object) in content {
                assert_eq!(media.split('/').count(), 2, "{at}: {media}");
                validator(&object["schema"]);
            }
        }
    }
    for schema in DOCUMENT["components"]["schemas"]
        .as_object()
        .unwrap()
        .values()
    {
        validator(schema);
    }
    references_resolve(&DOCUMENT);
}

fn references_resolve(value: &Value) {
    match value {
        Value::Object(map) => {
            if let Some(reference) = map.get("$ref") {
                let pointer = reference.as_str().and_then(|r| r.strip_prefix('#'));
                let found = pointer.and_then(|p| DOCUMENT.pointer(p));
                assert!(found.is_some(), "{reference} leads nowhere");
            }
            map.values().for_each(references_resolve);
        }
        Value::Array(list) => list.iter().for_each(references_resolve),
        Value::Null | Value::Bool(_) | Value::Number(_) | Value::String(_) => {}
    }
}

/// Operations that may answer with this status, as (method, path with every name filled in).
fn with_status(status: &str) -> Vec<(Method, String)> {
    operations()
        .filter(|(_, _, operation)| operation["responses"].get(status).is_some())
        .map(|(path, method, _)| {
            let segment = |part: &str| match part.starts_with('{') {
                true => "1".to_owned(),
                false => part.to_owned(),
            };
            let mut path: String = path.split('/').map(segment).collect::<Vec<_>>().join("/");
            if method == "post" && path == "/v1/uploads" {
                path += "?kind=trade";
            }
            (method.to_uppercase().parse().unwrap(), path)
        })
        .collect()
}

#[tokio::test]
async fn every_status_of_every_operation_is_met() {
    let mut left: BTreeSet<Met> = operations()
        .flat_map(|(path, method, operation)| {
            let statuses = operation["responses"].as_object().unwrap().keys();
            statuses.map(move |s| (path.to_owned(), method.to_owned(), s.parse().unwrap()))
        })
        .collect();
    let open = TestApp::start().await;
    let guarded = guarded().await;
    let slow = slow().await;
    let lost = TestApp::start().await;
    lost.db.refuse();
    for (method, path) in with_status("503") {
        lost.send(method, &path, &[], None).await.expect(503);
    }
    for (method, path) in with_status("400") {
        let sign = if path.contains('?') { '&' } else { '?' };
        let path = format!("{path}{sign}no_such_parameter=1");
        open.send(method, &path, &[], None).await.expect(400);
    }
    for (method, path) in with_status("403") {
        let elsewhere = [("Origin", "https://page.example")];
        open.send(method, &path, &elsewhere, None).await.expect(403);
    }
    for (method, path) in with_status("413") {
        let length = [("Content-Length", "5000000000")];
        let wire = open.wire(method, &path, &length).await;
        wire.answer().await.expect(413);
    }
    walk_documents(&open).await;
    walk_uploads(&open).await;
    walk_series(&open).await;
    walk_estimates(&open).await;
    for app in [open, guarded, slow, lost] {
        for met in app.met.lock().unwrap().iter() {
            left.remove(met);
        }
        app.stop().await;
    }
    assert!(
        left.is_empty(),
        "of the document nothing meets {left:#?}; meet it here or take it out of the table of routes"
    );
}

/// A service that asks for tokens: all 401.
async fn guarded() -> TestApp {
    let mut app = TestApp::start().await;
    app.token("reader", Role::Read).await;
    app.use_token(None);
    for (method, path) in with_status("401") {
        app.send(method, &path, &[], None).await.expect(401);
    }
    app
}

/// A service that waits for a body for one second: all 408.
async fn slow() -> TestApp {
    let app = TestApp::start_with(|settings| {
        settings.body_patience = 1;
        settings.upload_connections = 1;
    })
    .await;
    join_all(with_status("408").into_iter().map(|(method, path)| {
        let app = &app;
        async move {
            let length = [("Content-Length", "100")];
            let mut wire = app.wire(method, &path, &length).await;
            wire.send(b"{").await;
            let answer = wire.answer().await.expect(408);
            assert_eq!(answer.header("connection"), Some("close"), "{path}");
        }
    }))
    .await;
    app
}

/// Estimates.
async fn walk_estimates(app: &TestApp) {
    let image = [("Accept", "image/png")];
    let made = app
        .post("/v1/estimates", sample::ESTIMATE)
        .await
        .expect(201);
    let path = made.header("location").unwrap();
    app.post("/v1/estimates", "{}").await.expect(422);
    let body = Some(sample::ESTIMATE.into());
    app.send(Method::POST, "/v1/estimates", &image, body)
        .await
        .expect(406);
    app.get("/v1/estimates").await.expect(200);
    app.get(path).await.expect(200);
    app.send(Method::GET, path, &image, None).await.expect(406);
    let sample = format!("{path}/sample.csv");
    app.get(&sample).await.expect(200);
    app.delete(path).await.expect(204);
    app.delete(path).await.expect(404);
    app.get(path).await.expect(404);
    app.get(&sample).await.expect(404);
}

/// Currencies, preparations and studies.
async fn walk_documents(app: &TestApp) {
    let currency = r#"{"name": "Dinar of XAA", "areas": ["XAA"]}"#;
    sample::fill(app).await;
    app.get("/v1/currencies").await.expect(200);
    app.get("/v1/currencies/XAL").await.expect(200);
    app.get("/v1/currencies/XZZ").await.expect(404);
    app.put("/v1/currencies/XAL", currency).await.expect(200);
    app.put("/v1/currencies/xad", currency).await.expect(422);
    app.put("/v1/currencies/XBL", currency).await.expect(409);
    app.put("/v1/currencies/XBL", r#"{"name": "Other"}"#)
        .await
        .expect(201);
    app.delete("/v1/currencies/XBL").await.expect(204);
    app.delete("/v1/currencies/XBL").await.expect(404);
    app.delete("/v1/currencies/XAL").await.expect(409);

    for (base, document) in [
        ("/v1/preparations", sample::PREPARATION),
        ("/v1/studies", sample::STUDY),
    ] {
        app.get(base).await.expect(200);
        let (path, other) = (format!("{base}/sample"), format!("{base}/other"));
        app.put(&path, document).await.expect(200);
        app.put(&path, "{}").await.expect(422);
        let read = app.get(&path).await.expect(200);
        let etag = read.header("etag").unwrap();
        let has = [("If-None-Match", etag)];
        app.send(Method::GET, &path, &has, None).await.expect(304);
        let old = [("If-Match", "\"v7\"")];
        app.send(Method::PUT, &path, &old, Some(document.into()))
            .await
            .expect(412);
        app.send(Method::DELETE, &path, &old, None)
            .await
            .expect(412);
        app.get(&other).await.expect(404);
        app.get(&format!("{other}/runs")).await.expect(404);
        app.get(&format!("{other}/runs/1")).await.expect(404);
        app.post(&format!("{other}/runs"), "").await.expect(404);
        app.delete(&other).await.expect(404);
        app.get(&format!("{path}/runs")).await.expect(200);
        app.put(&other, document).await.expect(201);
        app.delete(&other).await.expect(204);
    }
    walk_runs(app).await;
}

async fn walk_runs(app: &TestApp) {
    let prepare = "/v1/preparations/sample";
    app.get(&format!("{prepare}/plan")).await.expect(200);
    app.get("/v1/preparations/other/plan").await.expect(404);
    app.get(&format!("{prepare}/runs/1")).await.expect(200);
    app.upload(
        &TRADE_QUERY.replace("measure=exports", "measure=imports"),
        "period,value\n2019-Q1,90\n",
    )
    .await
    .expect(201);
    let document = r#"{"outputs": {"Q.XAA.exports": [{"take": "Q.XAA.imports"}]}}"#;
    app.put("/v1/preparations/taken", document)
        .await
        .expect(409);
    app.put("/v1/preparations/taken", sample::PREPARATION)
        .await
        .expect(201);
    app.post("/v1/preparations/taken/runs", "")
        .await
        .expect(409);
    let ratio = app
        .upload(
            "kind=ratio&area=XAA&measure=current_account_ratio",
            "period,value\n2019-Q1,0.1\n",
        )
        .await
        .expect(201);
    let document = r#"{"outputs": {"Q.XAA.balance": [{"take": "Q.XAA.current_account_ratio"}]}}"#;
    app.put("/v1/preparations/orphan", document)
        .await
        .expect(201);
    app.delete(ratio.header("location").unwrap())
        .await
        .expect(200);
    app.get("/v1/preparations/orphan/plan").await.expect(422);
    app.post("/v1/preparations/orphan/runs", "")
        .await
        .expect(422);

    let csv = [("Accept", "text/csv")];
    let runs = app.get("/v1/studies/sample/runs").await.expect(200);
    let run = format!("/v1/studies/sample/runs/{}", runs.at("/0/id"));
    app.get(&run).await.expect(200);
    app.send(Method::GET, &run, &csv, None).await.expect(406);
    app.send(Method::POST, "/v1/studies/sample/runs", &csv, None)
        .await
        .expect(406);
    app.put(
        "/v1/studies/blind",
        &sample::STUDY.replace("exports_real", "exports_goods_real"),
    )
    .await
    .expect(201);
    app.post("/v1/studies/blind/runs", "").await.expect(422);
}

async fn walk_uploads(app: &TestApp) {
    app.get("/healthz").await.expect(200);
    app.get("/readyz").await.expect(200);
    app.get("/openapi.json").await.expect(200);
    app.get("/v1/kinds").await.expect(200);
    app.get("/v1/kinds/trade").await.expect(200);
    app.get("/v1/kinds/tirade").await.expect(404);
    let text = [("Accept", "text/plain")];
    app.send(Method::GET, "/v1/kinds/trade", &text, None)
        .await
        .expect(406);

    app.get("/v1/uploads").await.expect(200);
    app.upload(TRADE_QUERY, TRADE).await.expect(200);
    let coded = [("Content-Encoding", "br")];
    let path = format!("/v1/uploads?{TRADE_QUERY}");
    app.send(Method::POST, &path, &coded, Some(TRADE.into()))
        .await
        .expect(415);
    let refused = app
        .upload(TRADE_QUERY, "period,value\n2019-Q1,many\n")
        .await
        .expect(422);
    let refused = format!("/v1/uploads/{}", refused.at("/upload/id"));
    app.get(&format!("{refused}/rejects")).await.expect(200);
    app.delete(&refused).await.expect(409);
    app.upload(
        "kind=trade&area=XAA&measure=exports&currency=XAL",
        "period,value\n2019,420\n",
    )
    .await
    .expect(409);
    let held = app
        .upload(&TRADE_QUERY.replace("multiplier=6", "multiplier=3"), TRADE)
        .await
        .expect(202);
    let held = held.header("location").unwrap().to_owned();
    let accept = format!("{held}/accept");
    app.post(&accept, "").await.expect(200);
    app.post(&accept, "").await.expect(409);
    app.get(&held).await.expect(200);
    let raw = app.get(&format!("{held}/raw")).await.expect(200);
    let has = [("If-None-Match", raw.header("etag").unwrap())];
    app.send(Method::GET, &format!("{held}/raw"), &has, None)
        .await
        .expect(304);
    app.delete(&held).await.expect(200);
    for path in ["", "/rejects", "/raw"] {
        app.get(&format!("/v1/uploads/999999{path}"))
            .await
            .expect(404);
    }
    app.delete("/v1/uploads/999999").await.expect(404);
    app.post("/v1/uploads/999999/accept", "").await.expect(404);
}

async fn walk_series(app: &TestApp) {
    app.upload(
        "kind=trade&area=XAA&measure=imports_goods&currency=XAL&flow=year_to_date",
        "period,value\n2019-Q1,1\n2019-Q2,2\n",
    )
    .await
    .expect(201);
    app.get("/v1/series").await.expect(200);
    for path in ["", "/observations", "/vintages", "/lineage"] {
        let at = |key: &str| format!("/v1/series/{key}{path}");
        app.get(&at("Q.XAA.exports")).await.expect(200);
        app.get(&at("Q.XZZ.exports")).await.expect(404);
    }
    let path = "/v1/series/Q.XAA.exports/observations";
    let read = app.get(path).await.expect(200);
    let has = [("If-None-Match", read.header("etag").unwrap())];
    app.send(Method::GET, path, &has, None).await.expect(304);
    let text = [("Accept", "text/plain")];
    app.send(Method::GET, path, &text, None).await.expect(406);
    app.get("/v1/series/Q.XAA.imports_goods/observations?growth=log")
        .await
        .expect(422);
}
