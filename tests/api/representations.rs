//! Representations and versions: entity tags, preconditions, history, negotiation.

use reqwest::Method;
use serde_json::{Value, json};

use crate::support::app::{Answer, TestApp};
use crate::support::sample::{self, TRADE, TRADE_QUERY};

#[tokio::test]
async fn entity_tags_tell_versions_representations_and_codings_apart() {
    let app = TestApp::start().await;
    sample::fill(&app).await;
    let long: String = (1800..2020).map(|y| format!("{y},{}\n", y * 3)).collect();
    let query = "kind=trade&area=XAA&measure=imports&currency=XAL&released=2020-01-01";
    let imports = app
        .upload(query, format!("period,value\n{long}"))
        .await
        .expect(201);
    let study = sample::STUDY.replacen("XAA", &"x".repeat(3000), 1);
    app.put("/v1/studies/long", &study).await.expect(201);
    for path in ["/v1/series/A.XAA.imports/observations", "/v1/studies/long"] {
        let mut tags = std::collections::BTreeMap::new();
        for accept in ["application/json", "text/csv"] {
            let mut plain = None;
            for coding in ["identity", "gzip", "br, GZIP;q=0.5", "gzip;q=0.0, br"] {
                let headers = [("Accept", accept), ("Accept-Encoding", coding)];
                let answer = app
                    .send(Method::GET, path, &headers, None)
                    .await
                    .expect(200);
                let gzip = answer.header("content-encoding") == Some("gzip");
                assert_eq!(gzip, !matches!(coding, "identity" | "gzip;q=0.0, br"));
                let plain = plain.get_or_insert(answer.plain());
                assert!(*plain == answer.plain(), "{accept} differs as {coding}");
                assert_eq!(
                    answer.header("vary"),
                    Some("Accept, Accept-Encoding, Authorization")
                );
                let tag = answer.header("etag").unwrap().to_owned();
                assert!(tag.starts_with('"') && tag.ends_with('"'), "{tag}");
                // One tag, one sequence of bytes.
                let known = tags.entry(tag.clone()).or_insert(answer.bytes.clone());
                assert!(*known == answer.bytes, "{tag} for two representations");
                // Whatever else the client has.
                for sent in [tag.clone(), format!("\"0\", W/{tag}"), "*".to_owned()] {
                    let headers = [headers[0], headers[1], ("If-None-Match", sent.as_str())];
                    let again = app
                        .send(Method::GET, path, &headers, None)
                        .await
                        .expect(304);
                    assert_eq!(again.header("etag"), Some(tag.as_str()));
                    assert_eq!(again.header("vary"), answer.header("vary"));
                }
                let headers = [headers[0], headers[1], ("If-None-Match", "\"0\"")];
                app.send(Method::GET, path, &headers, None)
                    .await
                    .expect(200);
            }
        }
    }
    // A revision makes another tag, its withdrawal yet another.
    let path = "/v1/series/A.XAA.imports/observations";
    let tag = |answer: Answer| answer.header("etag").unwrap().to_owned();
    let first = tag(app.get(path).await);
    let has = [("If-None-Match", first.as_str())];
    let revised = app
        .upload(
            query,
            format!("period,value\n{long}").replace("6057", "6058"),
        )
        .await
        .expect(201);
    let second = app.send(Method::GET, path, &has, None).await.expect(200);
    app.delete(&format!("/v1/uploads/{}", revised.at("/id")))
        .await
        .expect(200);
    let third = app.send(Method::GET, path, &has, None).await.expect(200);
    assert!(first != tag(second) && first != tag(third));
    // Pinned, the first is still there.
    let pinned = format!("{path}?as_of=revision:{}", imports.at("/revision"));
    app.send(Method::GET, &pinned, &has, None).await.expect(304);
    // Raw bytes have the tag of their digest.
    let raw = app.get("/v1/uploads/1/raw").await.expect(200);
    let digest = app.get("/v1/uploads/1").await.at("/sha256");
    assert_eq!(raw.header("etag"), Some(digest.to_string().as_str()));
    assert_eq!(raw.text(), TRADE);
    app.stop().await;
}

#[tokio::test]
async fn documents_keep_their_versions_and_obey_preconditions() {
    let app = TestApp::start().await;
    app.upload(TRADE_QUERY, TRADE).await.expect(400);
    app.put(
        "/v1/currencies/XAL",
        r#"{"name": "Lira", "areas": ["XAA"]}"#,
    )
    .await
    .expect(201);
    app.upload(TRADE_QUERY, TRADE).await.expect(201);
    let changed =
        |n: i32| sample::STUDY.replace("\"XAA\", \"area\"", &format!("\"{n}\", \"area\""));
    for (path, texts) in [
        ("/v1/studies/s", [1, 2, 3].map(changed)),
        (
            "/v1/preparations/p",
            [1, 2, 3].map(|n| {
                sample::PREPARATION.replace(
                    "{\"outputs\"",
                    &format!("{{\"title\": \"{n}\", \"outputs\""),
                )
            }),
        ),
    ] {
        let put = async |condition: &[(&str, &str)], n: usize| {
            let body = Some(texts[n].clone().into_bytes());
            app.send(Method::PUT, path, condition, body).await
        };
        put(&[("If-Match", "*")], 0).await.expect(412);
        put(&[("If-Match", "\"v1-json\"")], 0).await.expect(412);
        let first = put(&[("If-None-Match", "*")], 0).await.expect(201);
        assert_eq!(first.at("/version"), 1);
        assert_eq!(first.header("location"), Some(path));
        assert_eq!(
            first.at("/document"),
            serde_json::from_str::<Value>(&texts[0]).unwrap()
        );
        let v1 = first.header("etag").unwrap().to_owned();
        put(&[("If-None-Match", "*")], 1).await.expect(412);
        let bad = put(&[("If-None-Match", &v1)], 1).await.expect(400);
        assert_eq!(bad.error()["parameter"], "If-None-Match");
        // The same text stays the version that it is.
        assert_eq!(put(&[], 0).await.expect(200).at("/version"), 1);
        assert_eq!(
            put(&[("If-Match", "*")], 1)
                .await
                .expect(200)
                .at("/version"),
            2
        );
        put(&[("If-Match", &v1)], 2).await.expect(412);
        let gzip = [("Accept-Encoding", "gzip")];
        let read = app.send(Method::GET, path, &gzip, None).await.expect(200);
        let v2 = format!("\"v0\", {}", read.header("etag").unwrap());
        assert_eq!(
            put(&[("If-Match", &v2)], 2)
                .await
                .expect(200)
                .at("/version"),
            3
        );
        for condition in [v1.as_str(), "\"v2-json\"", "W/\"v3-json\"", "v3"] {
            app.send(Method::DELETE, path, &[("If-Match", condition)], None)
                .await
                .expect(412);
        }
        for n in 1..=3 {
            let old = app.get(&format!("{path}?version={n}")).await.expect(200);
            assert_eq!(old.at("/version"), n);
            let title = old.at("/document/title");
            assert_eq!(title, json!(n.to_string()));
        }
        let v3 = put(&[], 2)
            .await
            .expect(200)
            .header("etag")
            .unwrap()
            .to_owned();
        app.send(Method::DELETE, path, &[("If-Match", &v3)], None)
            .await
            .expect(204);
        // Gone, but not from history.
        app.get(path).await.expect(404);
        app.delete(path).await.expect(404);
        app.get(&format!("{path}?version=2")).await.expect(200);
        app.get(&format!("{path}?version=4")).await.expect(404);
        let list = path.rsplit_once('/').unwrap().0;
        assert_eq!(app.get(list).await.expect(200).json(), json!([]));
        // The numbers go on, for the same text too, and nobody takes it for the old one.
        put(&[("If-Match", &v3)], 2).await.expect(412);
        let again = put(&[("If-None-Match", "*")], 2).await.expect(201);
        assert_eq!(again.at("/version"), 5);
    }
    app.stop().await;
}

#[tokio::test]
async fn runs_outlive_their_document() {
    let app = TestApp::start().await;
    let run = sample::fill(&app).await;
    app.delete("/v1/studies/sample").await.expect(204);
    app.get(&run).await.expect(200);
    let runs = app.get("/v1/studies/sample/runs").await.expect(200);
    assert_eq!(runs.json().as_array().unwrap().len(), 1);
    app.post("/v1/studies/sample/runs", "").await.expect(404);
    app.stop().await;
}

#[tokio::test]
async fn the_client_chooses_the_representation() {
    let app = TestApp::start().await;
    let run = sample::fill(&app).await;
    let (json, csv, text) = ("application/json", "text/csv", "text/plain");
    let observations = "/v1/series/Q.XAA.exports/observations";
    for (path, accept, media) in [
        (observations, "", json),
        (observations, "*/*", json),
        (observations, "text/csv", csv),
        (observations, "TEXT/CSV", csv),
        (observations, "text/*", csv),
        (observations, "text/csv, */*", csv),
        (
            observations,
            "text/html, application/xml;q=0.9, */*;q=0.8",
            json,
        ),
        (observations, "application/json;q=0.5, text/csv;q=0.9", csv),
        (observations, "application/json;q=0.1, */*", csv),
        (observations, "application/json;q=0, */*;q=0.1", csv),
        (observations, "text/csv;q=0, */*", json),
        ("/v1/kinds/trade", "text/csv;charset=utf-8", csv),
        (&run, "text/plain", text),
        (&run, "text/html, text/plain;q=0.9, */*;q=0.1", text),
        (&run, "application/json, text/plain, */*", json),
    ] {
        let answer = app
            .send(Method::GET, path, &[("Accept", accept)], None)
            .await;
        let given = answer
            .expect(200)
            .header("content-type")
            .unwrap()
            .to_owned();
        assert!(given.starts_with(media), "{accept}: {given}");
        if media != json {
            assert!(given.ends_with("; charset=utf-8"), "{given}");
        }
    }
    for (path, accept) in [
        (observations, "text/html"),
        (observations, "text/csv;q=0, application/json;q=0.0"),
        (&run, "text/csv"),
        ("/v1/kinds/trade", "image/*"),
    ] {
        let answer = app
            .send(Method::GET, path, &[("Accept", accept)], None)
            .await;
        let detail = answer.expect(406).at("/detail").to_string();
        assert!(detail.contains("application/json, text/"), "{detail}");
    }
    // The parameter wins, for browsers and the lazy.
    let html = [("Accept", "text/html")];
    let path = format!("{observations}?format=csv");
    let answer = app.send(Method::GET, &path, &html, None).await.expect(200);
    assert!(
        answer
            .text()
            .starts_with("period,value,status\n2019-Q1,100000000,A\n")
    );
    let table = app
        .get(&format!("{run}?format=text"))
        .await
        .expect(200)
        .text();
    for part in ["Study sample version 1", "compound per cent a year"] {
        assert!(table.contains(part), "{part} in {table}");
    }
    let made = app
        .send(
            Method::POST,
            "/v1/studies/sample/runs",
            &[("Accept", "text/plain")],
            None,
        )
        .await
        .expect(201);
    assert!(
        made.text().contains("number 2 of this study"),
        "{}",
        made.text()
    );
    let template = app
        .get("/v1/kinds/trade?format=csv")
        .await
        .expect(200)
        .text();
    assert!(template.starts_with("area,measure,"), "{template}");
    assert_eq!(template.lines().count(), 1);
    app.stop().await;
}

#[tokio::test]
async fn bounds_may_be_longer_than_the_periods_of_the_series() {
    let app = TestApp::start().await;
    sample::fill(&app).await;
    let key = "Q.XAA.exports";
    for (bounds, first, last) in [
        ("from=2020", "2020-Q1", "2020-Q4"),
        ("to=2019", "2019-Q1", "2019-Q4"),
        ("from=2019-S2&to=2019", "2019-Q3", "2019-Q4"),
        ("from=2019-Q4&to=2020-S1", "2019-Q4", "2020-Q2"),
        ("from=2020-01-01&to=2020-03-31", "2020-Q1", "2020-Q1"),
    ] {
        let values = app.values(key, bounds).await;
        let ends = [&values[0].0, &values[values.len() - 1].0];
        assert_eq!(ends, [first, last], "{bounds}");
    }
    let path = format!("/v1/series/{key}/observations");
    for wrong in [
        "from=2020-01",
        "to=2020-02-01",
        "from=2020&to=2019",
        "from=2020-Q2&to=2020-Q1",
    ] {
        let refused = app.get(&format!("{path}?{wrong}")).await.expect(400);
        assert_eq!(refused.error()["code"], "bad_parameter", "{wrong}");
    }
    app.stop().await;
}
