//! What holds for every resource: problems, parameters, methods, documents, lists.

use reqwest::Method;
use serde_json::Value;

use crate::support::app::{Answer, TestApp};
use crate::support::contract::operations;
use crate::support::sample::{self, TRADE, TRADE_QUERY};

/// A path of the document with things of [`sample::fill`] named.
fn instance(path: &str, study_run: &str) -> String {
    if path.starts_with("/v1/studies/{name}/runs/") {
        return study_run.to_owned();
    }
    path.replace("{kind}", "trade")
        .replace("{id}", "1")
        .replace("{code}", "XAL")
        .replace("{name}", "sample")
        .replace("{key}", "Q.XAA.exports")
}

#[tokio::test]
async fn unknown_paths_and_wrong_methods_are_problems_that_say_what_there_is() {
    let app = TestApp::start().await;
    for path in ["/", "/v1", "/v1/series/", "/v1/serie", "/v1/series/a/b/c"] {
        let answer = app.get(path).await.expect(404);
        assert_eq!(answer.at("/code"), "not_found");
        let detail = answer.at("/detail").to_string();
        assert!(detail.contains("/openapi.json"), "{detail}");
    }
    app.delete("/nothing").await.expect(404);
    for (path, method, allow) in [
        ("/healthz", Method::POST, "GET, HEAD"),
        ("/v1/kinds", Method::DELETE, "GET, HEAD"),
        ("/v1/uploads", Method::PUT, "POST, GET, HEAD"),
        ("/v1/uploads/1", Method::PATCH, "GET, HEAD, DELETE"),
        ("/v1/uploads/1/accept", Method::GET, "POST"),
        ("/v1/uploads/1/accept", Method::HEAD, "POST"),
        ("/v1/studies/x", Method::OPTIONS, "PUT, GET, HEAD, DELETE"),
        ("/v1/studies/x/runs", Method::PUT, "GET, HEAD, POST"),
    ] {
        let answer = app.send(method, path, &[], None).await.expect(405);
        assert_eq!(answer.header("allow"), Some(allow), "{path}");
        if !answer.bytes.is_empty() {
            assert_eq!(answer.at("/code"), "method_not_allowed");
            assert!(answer.at("/detail").to_string().contains(allow));
        }
    }
    app.stop().await;
}

#[tokio::test]
async fn parameters_that_are_unknown_wrong_missing_or_twice_there_are_named_with_what_is_expected()
{
    let app = TestApp::start().await;
    for (path, method, operation) in operations() {
        let method: Method = method.to_uppercase().parse().unwrap();
        let path = instance(path, "/v1/studies/sample/runs/1");
        let parameters = operation["parameters"].as_array().unwrap();
        let query: Vec<&Value> = parameters.iter().filter(|p| p["in"] == "query").collect();
        let answer = app
            .send(method.clone(), &format!("{path}?nonesuch=1"), &[], None)
            .await
            .expect(400);
        let errors = answer.at("/errors");
        assert_eq!(errors[0]["code"], "unknown_parameter");
        assert_eq!(errors[0]["parameter"], "nonesuch");
        let known = errors[0]["expected"].as_str().unwrap().to_owned();
        for parameter in &query {
            let name = parameter["name"].as_str().unwrap();
            assert!(known.split(", ").any(|k| k == name), "{name} in {known}");
        }
        assert_eq!(query.is_empty(), known == "no parameters", "{known}");
        // A value for each parameter that is no text, wrong in a way of its type.
        for parameter in query {
            let name = parameter["name"].as_str().unwrap();
            let schema = &parameter["schema"];
            let wrong: &[&str] = match schema["type"].as_str().unwrap() {
                "integer" => &["0", "many", "1.5", "99999999999999999999", ""],
                "boolean" => &["yes", "TRUE", ""],
                _ if schema["enum"].is_array() => &["nonesuch", ""],
                _ if schema["format"] == "date" => &["2020-02-30", "yesterday", "2020-1-1", ""],
                _ => &[],
            };
            for value in wrong {
                let path = format!("{path}?{name}={value}");
                let answer = app.send(method.clone(), &path, &[], None).await;
                let answer = answer.expect(400);
                let errors = answer.at("/errors");
                let fault = errors.as_array().unwrap().iter();
                let mut fault = fault.filter(|e| e["code"] == "bad_parameter");
                let fault = fault.next().unwrap_or_else(|| panic!("{path}: {errors}"));
                assert_eq!(fault["parameter"], name);
                assert_eq!(fault["found"], *value);
                let expected = fault["expected"].as_str().unwrap();
                for value in schema["enum"].as_array().into_iter().flatten() {
                    assert!(expected.contains(value.as_str().unwrap()), "{expected}");
                }
            }
        }
    }
    let twice = app.get("/v1/series?limit=1&limit=2").await.expect(400);
    assert_eq!(twice.error()["code"], "repeated_parameter");
    let missing = app.upload("area=XAA", TRADE).await.expect(400);
    assert_eq!(missing.error()["code"], "missing_parameter");
    let kinds = missing.error()["expected"].to_string();
    assert!(kinds.contains("trade, price_index, income"), "{kinds}");
    app.stop().await;
}

#[tokio::test]
async fn texts_that_cannot_be_read_or_kept_are_refused_where_they_stand() {
    let app = TestApp::start().await;
    sample::fill(&app).await;
    let at = "/v1/series/Q.XAA.exports/observations";
    for (query, parameter) in [
        ("as_of=2020-13-01", "as_of"),
        ("as_of=revision:x", "as_of"),
        ("recorded_as_of=2020-01-01", "recorded_as_of"),
        ("from=2020-M01", "from"),
        ("to=2020-Q5", "to"),
    ] {
        let answer = app.get(&format!("{at}?{query}")).await.expect(400);
        let fault = answer.error();
        assert_eq!(fault["parameter"], parameter);
        assert!(fault["found"].is_string(), "{fault}");
        assert!(fault["expected"].is_string(), "{fault}");
    }
    let answer = app
        .get("/v1/series/Q.XAA.exports/lineage?period=never")
        .await
        .expect(400);
    assert_eq!(answer.error()["parameter"], "period");
    for list in [
        "/v1/series",
        "/v1/uploads",
        "/v1/uploads/1/rejects",
        "/v1/studies/sample/runs",
        "/v1/series/Q.XAA.exports/vintages",
    ] {
        let answer = app.get(&format!("{list}?after=here")).await.expect(400);
        assert_eq!(answer.error()["code"], "bad_cursor");
    }
    let future = format!(
        "{}&released=2999-01-01",
        TRADE_QUERY.replace("&released=2021-03-31", "")
    );
    let answer = app.upload(&future, TRADE).await.expect(400);
    assert_eq!(answer.error()["code"], "released_in_future");
    // The database keeps no NUL in a text; to a client it is its own mistake, not a failure here.
    for path in [
        "/v1/series?words=%00",
        "/v1/series?area=X%00",
        "/v1/studies?after=%00",
        "/v1/uploads?after=%00",
        "/v1/currencies/X%00D",
        "/v1/studies/a%00b",
        "/v1/preparations/a%00b",
        "/v1/preparations/a%00b/runs",
        "/v1/series/Q.XAA.%00",
    ] {
        let answer = app.get(path).await.expect(400);
        assert_eq!(answer.error()["code"], "nul_character", "{path}");
    }
    let titled = TRADE_QUERY.replace("title=Trade", "title=%00");
    let answer = app.upload(&titled, TRADE).await.expect(400);
    assert_eq!(answer.error()["parameter"], "title");
    assert_eq!(answer.at("/upload"), Value::Null);
    // As an escape it is text of the document.
    let escaped = sample::PREPARATION.replacen('{', r#"{"title": "a\u0000b", "#, 1);
    app.put("/v1/preparations/escaped", &escaped)
        .await
        .expect(201);
    app.get("/v1/series/nonsense").await.expect(400);
    app.get("/v1/uploads/first").await.expect(404);
    app.get("/v1/uploads/99999999999999999999")
        .await
        .expect(404);
    app.stop().await;
}

#[tokio::test]
async fn documents_are_refused_with_a_pointer_and_the_fields_that_are_known() {
    let app = TestApp::start().await;
    for (path, document, pointer, known) in [
        (
            "/v1/currencies/XAL",
            r#"{"name": "x", "aeras": []}"#.to_owned(),
            "/aeras",
            "areas",
        ),
        (
            "/v1/preparations/x",
            sample::PREPARATION.replace("\"by\"", "\"buy\""),
            "/outputs/A.XAA.exports/1/aggregate/buy",
            "by",
        ),
        (
            "/v1/studies/x",
            sample::STUDY.replace("\"area\"", "\"aera\""),
            "/aera",
            "area",
        ),
    ] {
        let answer = app.put(path, &document).await.expect(422);
        let errors = answer.at("/errors");
        let fault = errors.as_array().unwrap().iter();
        let mut fault = fault.filter(|e| e["code"] == "unknown_field");
        let fault = fault.next().unwrap_or_else(|| panic!("{path}: {errors}"));
        assert_eq!(fault["pointer"], pointer);
        let expected = fault["expected"].as_str().unwrap();
        assert!(expected.contains(known), "{expected}");

        let answer = app.put(path, "{\nname: 1}").await.expect(400);
        assert_eq!(answer.error()["code"], "invalid_json", "{path}");
        assert_eq!(answer.error()["line"], 2, "{path}");
        let answer = app.put(path, " ").await.expect(400);
        assert!(answer.at("/detail").to_string().contains("is empty"));
        app.put(path, "[]").await.expect(422);
        app.put(path, "null").await.expect(422);
        let bytes = Some(vec![b'{', 0xff]);
        app.send(Method::PUT, path, &[], bytes).await.expect(400);
    }
    for name in ["", "  ", "a\\u0000b"] {
        let body = format!(r#"{{"name": "{name}"}}"#);
        let answer = app.put("/v1/currencies/XAL", &body).await.expect(422);
        assert_eq!(answer.error()["pointer"], "/name");
    }
    let answer = app.put("/v1/studies/a.b", sample::STUDY).await.expect(400);
    assert_eq!(answer.error()["code"], "bad_name");
    app.stop().await;
}

#[tokio::test]
async fn bodies_that_curl_sends_by_default_are_taken_or_met_with_advice() {
    let app = TestApp::start().await;
    let form = [("Content-Type", "application/x-www-form-urlencoded")];
    let body = Some(br#"{"name": "Dinar of XAA", "areas": ["XAA"]}"#.to_vec());
    app.send(Method::PUT, "/v1/currencies/XAL", &form, body)
        .await
        .expect(201);
    let path = format!("/v1/uploads?{TRADE_QUERY}");
    app.send(Method::POST, &path, &form, Some(TRADE.into()))
        .await
        .expect(201);
    // What -d makes of a file.
    let glued = TRADE.replace('\n', "");
    let answer = app
        .send(Method::POST, &path, &form, Some(glued.into()))
        .await
        .expect(422);
    let advice = answer.at("/errors").to_string();
    assert!(advice.contains("--data-binary"), "{advice}");
    let parts = [("Content-Type", "multipart/form-data; boundary=x")];
    let answer = app
        .send(Method::POST, &path, &parts, Some(TRADE.into()))
        .await
        .expect(415);
    assert_eq!(answer.at("/code"), "multipart_body");
    let answer = app.get("/v1/kinds").await.expect(200);
    assert!(
        answer.text().ends_with("]\n"),
        "a prompt begins on its own line"
    );
    app.stop().await;
}

#[tokio::test]
async fn head_answers_as_get_does_without_a_body() {
    let app = TestApp::start().await;
    let study_run = sample::fill(&app).await;
    for (path, _, _) in operations().filter(|(_, method, _)| *method == "get") {
        let path = instance(path, &study_run);
        let get = app.get(&path).await.expect(200);
        let head = app.send(Method::HEAD, &path, &[], None).await.expect(200);
        let headers = |answer: &Answer| {
            let mut headers = answer.headers.clone();
            for own in ["date", "x-request-id"] {
                assert!(headers.remove(own).is_some(), "{path}: {own}");
            }
            headers
        };
        assert_eq!(headers(&get), headers(&head), "{path}");
    }
    app.send(Method::HEAD, "/v1/kinds/none", &[], None)
        .await
        .expect(404);
    app.stop().await;
}

#[tokio::test]
async fn a_sane_request_id_is_kept_and_any_other_replaced() {
    let app = TestApp::start().await;
    let sane = ["a", "Run_7-of-9", &"x".repeat(64)].map(str::to_owned);
    let other = ["", "a b", "a/b", "a\u{e4}", &"x".repeat(65)].map(str::to_owned);
    let mut seen = std::collections::BTreeSet::new();
    for path in ["/healthz", "/v1/uploads/7", "/nothing"] {
        for id in &sane {
            let sent = [("X-Request-Id", id.as_str())];
            let answer = app.send(Method::GET, path, &sent, None).await;
            assert_eq!(answer.header("x-request-id"), Some(id.as_str()));
        }
        for id in &other {
            let sent = [("X-Request-Id", id.as_str())];
            let answer = app.send(Method::GET, path, &sent, None).await;
            let made = answer.header("x-request-id").unwrap();
            assert!(made != id && made.len() == 36, "{made}");
            assert!(seen.insert(made.to_owned()), "{made} twice");
        }
    }
    app.stop().await;
}

#[tokio::test]
async fn lists_page_to_their_end_and_neither_repeat_nor_lose_an_entry() {
    let app = TestApp::start().await;
    sample::fill(&app).await;
    for name in ["a", "B", "c-1", "_", "gone"] {
        let path = format!("/v1/studies/{name}");
        app.put(&path, sample::STUDY).await.expect(201);
    }
    app.delete("/v1/studies/gone").await.expect(204);
    let name = "/v1/preparations/other";
    app.put(name, sample::PREPARATION).await.expect(201);
    for _ in 0..4 {
        app.post("/v1/preparations/sample/runs", "")
            .await
            .expect(201);
        app.post("/v1/studies/sample/runs", "").await.expect(201);
    }
    // What comes last was released first and names a quarter more: three vintages in one revision.
    for (released, value, more) in [
        ("2022-01-01", "101", ""),
        ("2023-01-01", "102", ""),
        ("2021-06-30", "103", "2021-Q1,116\n"),
    ] {
        let query = TRADE_QUERY.replace("2021-03-31", released);
        let file = TRADE.replace("104.5", value) + more;
        app.upload(&query, file).await.expect(201);
    }
    // From its date on an older release speaks again.
    let landed = app.get("/v1/uploads?state=landed").await.expect(200);
    assert_eq!(landed.at("/2/released"), "2022-01-01");
    app.delete(&format!("/v1/uploads/{}", landed.at("/2/id")))
        .await
        .expect(200);
    let bad = "period,value\n2019-Q1,a\n2019-Q2,b\n2019-Q3,c\n2019-Q4,d\n2020-Q1,e\n";
    let refused = app.upload(TRADE_QUERY, bad).await.expect(422);
    let refused = refused.at("/upload/id");
    for (path, query, count) in [
        ("/v1/series", "area=XAA,XBB&words=XAA%20a", 5),
        ("/v1/series", "", 6),
        ("/v1/uploads", "", 7),
        ("/v1/uploads", "state=landed&kind=trade", 4),
        (&format!("/v1/uploads/{refused}/rejects"), "", 5),
        ("/v1/preparations", "", 2),
        ("/v1/preparations/sample/runs", "", 5),
        ("/v1/studies", "", 5),
        ("/v1/studies/sample/runs", "", 5),
        ("/v1/studies/a/runs", "", 0),
        ("/v1/series/Q.XAA.exports/vintages", "", 7),
    ] {
        let whole = app.pages(&format!("{path}?{query}")).await;
        assert_eq!(whole.len(), count, "{path}?{query}");
        for limit in [1, 2, 3, count.max(1)] {
            let paged = app.pages(&format!("{path}?{query}&limit={limit}")).await;
            assert_eq!(paged, whole, "{path}?{query} by {limit}");
        }
    }
    // What comes between two pages does not move the pages after it.
    let first = app.get("/v1/uploads?limit=2").await.expect(200);
    let more = TRADE_QUERY.replace("measure=exports", "measure=imports");
    app.upload(&more, TRADE).await.expect(202);
    let link = first.header("link").unwrap();
    let second = link.trim_start_matches('<').split('>').next().unwrap();
    let second = app.get(second).await.expect(200);
    let id = |answer: &Answer, i: usize| answer.at(&format!("/{i}/id")).as_i64().unwrap();
    let ids = [id(&first, 0), id(&first, 1), id(&second, 0), id(&second, 1)];
    assert!(ids.is_sorted_by(|a, b| a > b), "{ids:?}");
    app.stop().await;
}
