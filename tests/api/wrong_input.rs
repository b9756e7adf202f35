//! Wrong input of each sort: answered with line and remedy, early where it can be, and without effect.

use std::io::{Read as _, Write as _};
use std::net::TcpStream;
use std::time::Duration;

use realterms::config::Bytes;
use reqwest::Method;
use reqwest::header::{HeaderMap, HeaderName, HeaderValue};
use serde_json::{Value, json};

use crate::support::app::{Answer, TestApp};
use crate::support::contract;
use crate::uploads::{fixture, gzip, rows, start};

/// Sends bytes as they are, goes on to say nothing, and reads the answer.
pub(crate) async fn speak(app: &TestApp, request: impl Into<Vec<u8>>) -> Answer {
    let address = app.base.strip_prefix("http://").unwrap().to_owned();
    let request = request.into();
    tokio::task::spawn_blocking(move || {
        let mut stream = TcpStream::connect(address).unwrap();
        stream
            .set_read_timeout(Some(Duration::from_secs(30)))
            .unwrap();
        stream.write_all(&request).unwrap();
        answer(&mut stream)
    })
    .await
    .unwrap()
}

/// Reads one answer from a connection.
pub(crate) fn answer(stream: &mut TcpStream) -> Answer {
    let mut bytes = Vec::new();
    let mut piece = [0; 4096];
    loop {
        let end = bytes.windows(4).position(|w| w == b"\r\n\r\n");
        if let Some(end) = end {
            let head = String::from_utf8(bytes[..end].to_vec()).unwrap();
            let mut lines = head.lines();
            let status = lines.next().unwrap()[9..12].parse().unwrap();
            let headers: HeaderMap = lines
                .map(|line| line.split_once(": ").unwrap())
                .map(|(name, value)| {
                    let name = HeaderName::from_bytes(name.as_bytes()).unwrap();
                    (name, HeaderValue::from_str(value).unwrap())
                })
                .collect();
            let length: usize = headers["content-length"].to_str().unwrap().parse().unwrap();
            if bytes.len() >= end + 4 + length {
                return Answer {
                    status,
                    headers,
                    bytes: bytes[end + 4..end + 4 + length].to_vec(),
                };
            }
        }
        let n = stream.read(&mut piece).expect("an answer comes in time");
        assert!(
            n > 0,
            "the connection ended without an answer: {}",
            String::from_utf8_lossy(&bytes)
        );
        bytes.extend_from_slice(&piece[..n]);
    }
}

/// The head of an upload, the body of which is announced by this header.
pub(crate) fn head(query: &str, body: &str) -> String {
    format!(
        "POST /v1/uploads?{query} HTTP/1.1\r\nHost: localhost\r\nContent-Type: text/csv\r\n{body}\r\n\r\n"
    )
}

fn says_what_to_do(finding: &Value) -> bool {
    finding["remedy"].is_string() || finding["expected"].is_string()
}

#[tokio::test]
async fn files_that_cannot_be_read_are_answered_and_leave_nothing() {
    let app = start().await;
    let database = app.db.open().await;
    let before = rows(&database).await;
    for (name, code, line) in [
        ("no_header.csv", "no_header", json!(1)),
        ("unknown_column.csv", "unknown_column", json!(1)),
        ("missing_column.csv", "missing_column", json!(1)),
        ("empty.csv", "empty_body", Value::Null),
        ("no_rows.csv", "no_rows", json!(1)),
        ("invalid_utf8.csv", "invalid_utf8", json!(3)),
        ("truncated.csv.gz", "truncated_gzip", json!(1)),
    ] {
        let answer = app
            .upload("kind=trade", fixture(&format!("bad/{name}")))
            .await;
        let answer = answer.expect(422);
        assert_eq!(answer.at("/code"), "unreadable_file", "{name}");
        assert_eq!(answer.at("/errors/0/code"), code, "{name}");
        assert_eq!(answer.at("/errors/0/line"), line, "{name}");
        assert!(says_what_to_do(&answer.at("/errors/0")), "{name}");
        assert_eq!(answer.at("/upload"), Value::Null);
    }
    let path = "/v1/uploads?kind=trade";
    for (coding, body, status, code) in [
        ("gzip", fixture("trade.csv"), 422, "unreadable_file"),
        (
            "gzip",
            fixture("bad/truncated.csv.gz"),
            422,
            "unreadable_file",
        ),
        ("br", fixture("trade.csv"), 415, "unknown_coding"),
    ] {
        let headers = [("Content-Type", "text/csv"), ("Content-Encoding", coding)];
        let answer = app.send(Method::POST, path, &headers, Some(body)).await;
        assert_eq!(answer.expect(status).at("/code"), code);
    }
    assert_eq!(rows(&database).await, before);
    app.stop().await;
}

#[tokio::test]
async fn wrong_rows_refuse_the_file_with_line_column_and_remedy() {
    let app = start().await;
    let database = app.db.open().await;
    let before = rows(&database).await;
    for (kind, name, found) in [
        (
            "trade",
            "wrong_period.csv",
            vec![("wrong_period", 3, Some("period"))],
        ),
        (
            "trade",
            "text_in_number.csv",
            vec![
                ("not_a_number", 3, Some("value")),
                ("not_a_number", 4, Some("value")),
            ],
        ),
        (
            "trade",
            "unknown_currency.csv",
            vec![("unknown_currency", 2, Some("currency"))],
        ),
        (
            "price_index",
            "negative_index.csv",
            vec![("not_positive", 3, Some("value"))],
        ),
        (
            "trade",
            "duplicate_key.csv",
            vec![("duplicate_key", 4, None)],
        ),
    ] {
        let query = format!("kind={kind}");
        let answer = app.upload(&query, fixture(&format!("bad/{name}"))).await;
        let answer = answer.expect(422);
        assert_eq!(answer.at("/code"), "upload_refused", "{name}");
        let errors = answer.at("/errors");
        let errors = errors.as_array().unwrap();
        let told: Vec<_> = errors
            .iter()
            .map(|e| {
                let code = e["code"].as_str().unwrap();
                (code, e["line"].as_i64().unwrap(), e["column"].as_str())
            })
            .collect();
        assert_eq!(told, found, "{name}");
        assert!(errors.iter().all(says_what_to_do), "{name}");
        assert!(errors.iter().all(|e| e["found"].is_string()), "{name}");
    }
    let after = rows(&database).await;
    assert_eq!(
        after[..5],
        before[..5],
        "series, vintages or changes came to be"
    );
    assert_eq!(after[5], before[5] + 5, "each is kept as refused");
    app.stop().await;
}

#[tokio::test]
async fn wrong_parameters_are_refused_before_the_body() {
    let app = start().await;
    let database = app.db.open().await;
    let before = rows(&database).await;
    for (query, parameter, expected) in [
        ("", "kind", "trade, price_index"),
        ("kind=trades", "kind", "trade"),
        ("kind=trade&partners=XAB", "partners", "partner"),
        ("kind=trade&reference=2015", "reference", "currency"),
        ("kind=trade&measure=export", "measure", "exports"),
        (
            "kind=trade&unit_multiplier=million",
            "unit_multiplier",
            "power of ten",
        ),
        (
            "kind=trade&unit_multiplier=99",
            "unit_multiplier",
            "power of ten",
        ),
        ("kind=trade&currency=UDS", "currency", "USD"),
        ("kind=trade&frequency=quarterly", "frequency", "Q"),
        ("kind=trade&kind=trade", "kind", ""),
        ("kind=trade&on_reject=ignore", "on_reject", "fail, skip"),
        ("kind=trade&dry_run=yes", "dry_run", "true or false"),
        ("kind=trade&released=soon", "released", "a date"),
        (
            "kind=price_index&reference_value=0",
            "reference_value",
            "above zero",
        ),
    ] {
        // The body is announced and never sent.
        let answer = speak(&app, head(query, "Content-Length: 100000")).await;
        contract::check(&Method::POST, "/v1/uploads", &[], None, &answer);
        assert_eq!(answer.status, 400, "{query}: {}", answer.text());
        let finding = answer.at("/errors/0");
        assert_eq!(finding["parameter"], parameter, "{query}");
        let told = finding["expected"].as_str().unwrap_or_default();
        assert!(told.contains(expected), "{query}: {finding}");
    }
    assert_eq!(rows(&database).await, before);
    app.stop().await;
}

#[tokio::test]
async fn what_is_known_early_is_answered_before_the_body_has_come() {
    let app = start().await;
    let database = app.db.open().await;
    let before = rows(&database).await;
    let chunk = |text: &str| format!("{:x}\r\n{text}\r\n", text.len());
    let column = "area,measure,currency,period,vlaue\n";
    let good = "area,measure,currency,period,value\nXAA,exports,XAD,2019,1\n";
    let with = |body: &str, sent: &[u8]| {
        let mut request = head("kind=trade", body).into_bytes();
        request.extend_from_slice(sent);
        request
    };
    let mut encoding = good.as_bytes().to_vec();
    encoding.extend_from_slice(b"XAA,exports,XAD,2020,\xff\n");
    let mut spoilt = gzip(good.as_bytes());
    // The first block claims the reserved type.
    spoilt[10..].fill(0xff);
    for (request, status, code, line) in [
        (
            with("Content-Length: 5368709120", b""),
            413,
            "too_large",
            Value::Null,
        ),
        (
            with("Content-Length: 1000000", column.as_bytes()),
            422,
            "unknown_column",
            json!(1),
        ),
        (
            with("Transfer-Encoding: chunked", chunk(column).as_bytes()),
            422,
            "unknown_column",
            json!(1),
        ),
        (
            with("Content-Length: 1000000", &encoding),
            422,
            "invalid_utf8",
            json!(3),
        ),
        (
            with("Content-Length: 1000000", &spoilt),
            422,
            "damaged_gzip",
            json!(1),
        ),
        (
            with("Content-Length: 1000000", &[b'x'; 100_000]),
            422,
            "row_too_long",
            json!(1),
        ),
    ] {
        let answer = speak(&app, request).await;
        contract::check(&Method::POST, "/v1/uploads", &[], None, &answer);
        assert_eq!(answer.status, status, "{code}: {}", answer.text());
        if line.is_null() {
            assert_eq!(answer.at("/code"), code);
        } else {
            assert_eq!(answer.at("/errors/0/code"), code);
            assert_eq!(answer.at("/errors/0/line"), line);
        }
    }
    assert_eq!(rows(&database).await, before);
    app.stop().await;
}

#[tokio::test]
async fn a_body_that_grows_beyond_the_limit_or_stops_coming_is_given_up() {
    let app = TestApp::start_with(|settings| {
        settings.max_upload_bytes = Bytes(10_000);
        settings.body_patience = 1;
    })
    .await;
    let database = app.db.open().await;
    let before = rows(&database).await;
    let mut file = "area,measure,currency,period,value\n".to_owned();
    while file.len() <= 10_000 {
        file.push_str("XAA,exports,USD,2019,1\n");
    }
    // Without a length the limit is met on the way.
    let chunked = format!("{:x}\r\n{file}\r\n", file.len());
    let request = head("kind=trade", "Transfer-Encoding: chunked") + &chunked;
    let answer = speak(&app, request).await;
    contract::check(&Method::POST, "/v1/uploads", &[], None, &answer);
    assert_eq!(answer.status, 413, "{}", answer.text());
    assert!(answer.text().contains("10000 bytes"));

    let request = head("kind=trade", "Content-Length: 9000") + &file[..50];
    let answer = speak(&app, request).await;
    contract::check(&Method::POST, "/v1/uploads", &[], None, &answer);
    assert_eq!(answer.status, 408, "{}", answer.text());
    assert_eq!(answer.header("connection"), Some("close"));
    assert_eq!(rows(&database).await, before);
    app.stop().await;
}

#[tokio::test]
async fn deflating_with_an_index_in_another_currency_is_refused() {
    let app = start().await;
    let released = "released=2020-07-01";
    app.upload(&format!("kind=trade&{released}"), fixture("trade.csv"))
        .await
        .expect(201);
    let index = String::from_utf8(fixture("price_index.csv")).unwrap();
    app.upload(
        &format!("kind=price_index&{released}"),
        index.replace("XAA", "XAB"),
    )
    .await
    .expect(201);
    let database = app.db.open().await;
    let before = rows(&database).await;
    let document = r#"{"outputs": {"Q.XAA.exports_real": [
        {"take": "Q.XAA.exports"},
        {"deflate": {"by": "Q.XAB.export_price", "reference": "2019-Q1"}}]}}"#;
    let refused = app
        .put("/v1/preparations/wrong", document)
        .await
        .expect(422);
    let finding = refused.at("/errors/0");
    let pointer = finding["pointer"].as_str().unwrap();
    assert!(
        pointer.starts_with("/outputs/Q.XAA.exports_real/1"),
        "{pointer}"
    );
    // Both sides are named.
    for currency in ["XAD", "XBD"] {
        assert!(finding.to_string().contains(currency), "{finding}");
    }
    app.get("/v1/preparations/wrong").await.expect(404);
    assert_eq!(rows(&database).await, before);
    app.stop().await;
}
