//! Wrong input of each sort: answered with line and remedy, early where it can be, and without effect.

use std::time::Duration;

use realterms::config::Bytes;
use reqwest::Method;
use serde_json::{Value, json};

use crate::support::app::TestApp;
use crate::support::wire::Wire;
use crate::uploads::{fixture, gzip, rows, start};

/// The header of a body that comes in chunks.
pub(crate) const CHUNKED: (&str, &str) = ("Transfer-Encoding", "chunked");

/// Begins an upload whose body is announced by this header and sends what of it comes at first.
pub(crate) async fn begin<'a>(
    app: &'a TestApp,
    query: &str,
    announced: (&str, &str),
    sent: &[u8],
) -> Wire<'a> {
    let headers = [("Content-Type", "text/csv"), announced];
    let path = format!("/v1/uploads?{query}");
    let mut wire = app.wire(Method::POST, &path, &headers).await;
    wire.send(sent).await;
    wire
}

/// A piece of a body as a chunk.
fn chunk(text: &str) -> Vec<u8> {
    format!("{:x}\r\n{text}\r\n", text.len()).into_bytes()
}

fn says_what_to_do(finding: &Value) -> bool {
    finding["remedy"].is_string()
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
            vec![("duplicate_key", 2, None), ("duplicate_key", 4, None)],
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
        let wire = begin(&app, query, ("Content-Length", "100000"), b"").await;
        let answer = wire.answer().await.expect(400);
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
    let column = "area,measure,currency,period,vlaue\n";
    let good = "area,measure,currency,period,value\nXAA,exports,XAD,2019,1\n";
    let mut encoding = good.as_bytes().to_vec();
    encoding.extend_from_slice(b"XAA,exports,XAD,2020,\xff\n");
    let mut spoilt = gzip(good.as_bytes());
    // The first block claims the reserved type.
    spoilt[10..].fill(0xff);
    let length = ("Content-Length", "1000000");
    for (announced, sent, code, line) in [
        (length, column.into(), "unknown_column", 1),
        (CHUNKED, chunk(column), "unknown_column", 1),
        (length, encoding, "invalid_utf8", 3),
        (length, spoilt, "damaged_gzip", 1),
        (length, vec![b'x'; 100_000], "row_too_long", 1),
    ] {
        let wire = begin(&app, "kind=trade", announced, &sent).await;
        let answer = wire.answer().await.expect(422);
        assert_eq!(answer.at("/errors/0/code"), code);
        assert_eq!(answer.at("/errors/0/line"), line);
    }
    assert_eq!(rows(&database).await, before);
    app.stop().await;
}

#[tokio::test]
async fn a_client_that_sends_all_before_it_reads_gets_its_answer() {
    let app = start().await;
    // More than the buffers on the way can hold.
    let rows = "XAA,exports,XAD,2019,1\n".repeat(3000);
    let header = "area,measure,currency,period,vlaue\n";
    let count = 24_000_000 / rows.len();
    let whole = header.len() + count * rows.len();
    let length = whole.to_string();
    for announced in [("Content-Length", length.as_str()), CHUNKED] {
        let piece = |text: &str| match announced == CHUNKED {
            true => chunk(text),
            false => text.as_bytes().to_vec(),
        };
        let exchange = async {
            let mut wire = begin(&app, "kind=trade", announced, &piece(header)).await;
            let rows = piece(&rows);
            for _ in 0..count {
                wire.send(&rows).await;
            }
            if announced == CHUNKED {
                wire.send(b"0\r\n\r\n").await;
            }
            wire.answer().await
        };
        let answer = tokio::time::timeout(Duration::from_secs(60), exchange).await;
        let answer = answer.expect("all could be sent").expect(422);
        assert_eq!(answer.at("/errors/0/code"), "unknown_column");
    }
    app.stop().await;
}

#[tokio::test]
async fn a_body_that_stops_coming_is_given_up() {
    let app = TestApp::start_with(|settings| settings.body_patience = 1).await;
    let database = app.db.open().await;
    let before = rows(&database).await;
    let file = b"area,measure,currency,period,value\nXAA,exports,USD,";
    let wire = begin(&app, "kind=trade", ("Content-Length", "9000"), file).await;
    let answer = wire.answer().await.expect(408);
    assert_eq!(answer.header("connection"), Some("close"));
    assert_eq!(rows(&database).await, before);
    app.stop().await;
}

#[tokio::test]
async fn a_slow_database_does_not_count_against_the_client() {
    let app = TestApp::start_with(|settings| {
        settings.body_patience = 2;
        settings.min_body_rate = Bytes(64 << 20);
    })
    .await;
    let database = app.db.open().await;
    sqlx::raw_sql(
        "CREATE FUNCTION rest() RETURNS trigger LANGUAGE plpgsql AS
             'BEGIN PERFORM pg_sleep(3); RETURN NEW; END';
         CREATE TRIGGER rest BEFORE INSERT ON upload_part FOR EACH ROW WHEN (NEW.number = 0)
             EXECUTE FUNCTION rest()",
    )
    .execute(database.pool())
    .await
    .unwrap();
    // At first just enough for the first part to be stored, so that nothing is left to be read while it
    // is; the rows are wrong, which is soon said.
    let mut file = b"area,measure,currency,period,value\n".to_vec();
    while file.len() <= (8 << 20) + 1000 {
        file.resize(file.len() + 60_000, b'x');
        file.push(b'\n');
    }
    let (first, last) = file.split_at((8 << 20) + 100);
    let length = file.len().to_string();
    let announced = ("Content-Length", length.as_str());
    let mut wire = begin(&app, "kind=trade", announced, first).await;
    let resting = "SELECT EXISTS (SELECT FROM pg_stat_activity WHERE wait_event = 'PgSleep'
        AND datname = current_database())";
    while !sqlx::query_scalar::<_, bool>(resting)
        .fetch_one(database.pool())
        .await
        .unwrap()
    {}
    wire.send(last).await;
    let answer = wire.answer().await.expect(422);
    assert_eq!(answer.at("/code"), "upload_refused");
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
