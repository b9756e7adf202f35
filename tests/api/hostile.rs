//! Files and clients that mean no good, or were made by programs that never met a table.

use serde_json::json;

use crate::uploads::{rows, start};
use crate::wrong_input::{CHUNKED, begin};

const LENGTH_5000: (&str, &str) = ("Content-Length", "5000");

#[tokio::test]
async fn quotes_line_breaks_and_odd_spaces_keep_lines_right() {
    let app = start().await;
    // A mark of byte order, CRLF, blank lines, quoted cells, and a line break inside a bad one.
    let file = "\u{feff}\"area\";Measure; currency ;PERIOD;\"value\"\r\n\r\n\
        \"XAA\";exports;XAD;2018;\"1.5\"\r\n\
        \"XA\r\nA;\"\"x\";exports;XAD;2019;2\r\n\
         XAA ;\"exports\";XAD;\"2019\";2.5\r\n\r\n\
        XAA;exports;XAD;2020;\"3.5\"";
    let query = "kind=trade&released=2021-01-01&on_reject=skip";
    let answer = app.upload(query, file).await.expect(201);
    assert_eq!(answer.at("/report/understood/delimiter"), "semicolon");
    assert_eq!(answer.at("/report/understood/rows_read"), 4);
    assert_eq!(answer.at("/report/understood/lines"), 8);
    let reject = answer.at("/report/rejects/0");
    assert_eq!(
        (&reject["line"], &reject["column"]),
        (&json!(4), &json!("area"))
    );
    assert_eq!(reject["found"], "XA\r\nA;\"x");
    let lineage = app
        .get("/v1/series/A.XAA.exports/lineage")
        .await
        .expect(200);
    let spans = lineage.at("/spans");
    let lines: Vec<i64> = spans
        .as_array()
        .unwrap()
        .iter()
        .flat_map(|s| {
            let number = |name: &str| s[name].as_i64().unwrap();
            let year = |name: &str| s[name].as_str().unwrap().parse::<i64>().unwrap();
            let count = year("to") - year("from");
            let (line, step) = (number("line"), number("line_step"));
            (0..=count).map(move |i| line + i * step)
        })
        .collect();
    assert_eq!(lines, [3, 6, 8]);
    app.stop().await;
}

#[tokio::test]
async fn long_cells_and_thousands_of_rejects_are_answered_in_short() {
    let app = start().await;
    let header = "area,measure,currency,period,value\n";
    let cell = "9".repeat(60_000);
    let mut long = header.to_owned();
    for place in 0..5 {
        let mut cells = ["XAA", "exports", "XAD", "2019", "1"];
        cells[place] = &cell;
        long.push_str(&cells.join(","));
        long.push('\n');
    }
    long.push_str("XAA,exports,XAD,2019,\"1\" 2\n");
    let refused = app.upload("kind=trade", long).await.expect(422);
    let told = refused.at("/errors");
    let codes: Vec<&str> = told
        .as_array()
        .unwrap()
        .iter()
        .map(|e| e["code"].as_str().unwrap())
        .collect();
    assert_eq!(
        codes,
        [
            "not_a_code",
            "unknown_measure",
            "unknown_currency",
            "wrong_period",
            "out_of_range",
            "stray_quote"
        ]
    );
    assert!(
        refused.bytes.len() < 30_000,
        "{} bytes",
        refused.bytes.len()
    );
    for wide in [
        format!("{header}XAA,exports,XAD,2019,{}\n", "1".repeat(70_000)),
        format!("{header}XAA,exports,XAD,2019,\"{}", "1\n".repeat(40_000)),
        "area,".repeat(15_000) + "\n",
        "\"".to_owned() + &"a".repeat(70_000),
    ] {
        let refused = app.upload("kind=trade", wide).await.expect(422);
        assert!(refused.at("/errors/0/line").is_u64());
        assert!(
            refused.bytes.len() < 60_000,
            "{} bytes",
            refused.bytes.len()
        );
    }

    let mut many = header.to_owned();
    for i in 0..30_000 {
        many.push_str(&format!("XAA,exports,XAD,{},x{i}\n", 1900 + i % 100));
    }
    let refused = app.upload("kind=trade", many).await.expect(422);
    assert_eq!(refused.at("/errors").as_array().unwrap().len(), 100);
    let understood = refused.at("/upload/report/understood");
    assert_eq!(
        understood["rejects_by_code"],
        json!({"not_a_number": 30_000})
    );
    let path = format!("/v1/uploads/{}/rejects?limit=1", refused.at("/upload/id"));
    let last = app.get(&format!("{path}&after=9999")).await.expect(200);
    assert_eq!(last.at("/0/line"), 10_001);
    assert_eq!(last.header("link"), None);
    app.stop().await;
}

#[tokio::test]
async fn a_body_in_chunks_lands_and_one_that_breaks_off_leaves_nothing() {
    let app = start().await;
    let database = app.db.open().await;
    let file =
        "area,measure,currency,period,value\nXAA,exports,XAD,2018,1\nXAA,exports,XAD,2019,2\n";
    let query = "kind=trade&released=2020-01-01";
    let before = rows(&database).await;
    // More of them than there are connections for uploads: each gives its connection back.
    for cut in [0, 10, 36, 40, 60, 70, 80, file.len(), 10, 60] {
        let mut wire = if cut % 20 == 0 {
            begin(&app, query, LENGTH_5000, &[]).await
        } else {
            let mut wire = begin(&app, query, CHUNKED, &[]).await;
            wire.send(format!("{cut:x}\r\n").as_bytes()).await;
            wire
        };
        wire.send(&file.as_bytes()[..cut]).await;
        if cut == 60 {
            // Half closed: the client still listens.
            wire.half_close().await;
            wire.answer().await.expect(400);
        }
    }
    let mut wire = begin(&app, query, CHUNKED, &[]).await;
    for byte in file.chars() {
        wire.send(format!("1\r\n{byte}\r\n").as_bytes()).await;
    }
    wire.send(b"0\r\n\r\n").await;
    wire.answer().await.expect(201);
    let values = app.values("A.XAA.exports", "").await;
    assert_eq!(
        values,
        [
            ("2018".to_owned(), Some(1.0)),
            ("2019".to_owned(), Some(2.0))
        ]
    );
    let after: Vec<i64> = rows(&database).await;
    let one: Vec<i64> = before.iter().zip(&after).map(|(b, a)| a - b).collect();
    assert_eq!(one, [1, 1, 1, 1, 1, 1, 1, 0]);
    app.stop().await;
}

#[tokio::test]
async fn a_file_with_more_gaps_than_rows_is_refused() {
    let app = start().await;
    let database = app.db.open().await;
    let before = rows(&database).await;
    let mut file = "area,measure,currency,period,value\n".to_owned();
    for i in 0..200 {
        file.push_str(&format!(
            "X{i},exports,USD,1500-01-01,1\nX{i},exports,USD,2200-12-31,1\n"
        ));
    }
    let refused = app.upload("kind=trade", file).await.expect(422);
    let finding = refused.at("/errors/0");
    assert_eq!(finding["code"], "too_sparse");
    assert!(finding["series"].as_str().unwrap().starts_with("D.X"));
    assert!(finding["found"].as_str().unwrap().contains("1500-01-01"));
    assert_eq!(rows(&database).await, before);
    // A long gap alone is nobody's fault.
    let file = "area,measure,currency,period,value\nXAA,exports,USD,1500-01-01,1\nXAA,exports,USD,2020-12-31,1\n";
    let landed = app.upload("kind=trade", file).await.expect(201);
    assert_eq!(landed.at("/report/observations/new"), 2);
    app.stop().await;
}
