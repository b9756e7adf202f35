//! Estimates over HTTP: stored, read in every form, repeated from their rows, forgotten after a time; and
//! every fault of a request with its place.

use realterms::estimate::{Ols, Regressor};
use realterms::service::estimates::sweep;
use serde_json::{Value, json};

use crate::support::app::{Answer, TestApp};
use crate::support::sample;

/// A column of a reference file.
pub(crate) fn column(file: &str, name: &str) -> Vec<f64> {
    let path = format!("{}/fixtures/reference/{file}", env!("CARGO_MANIFEST_DIR"));
    let text = std::fs::read_to_string(path).unwrap();
    let mut lines = text.lines();
    let mut names = lines.next().unwrap().split(',');
    let at = names.position(|n| n == name).unwrap();
    lines
        .map(|l| l.split(',').nth(at).unwrap().parse().unwrap())
        .collect()
}

/// A column of a reference file as a series of a request.
pub(crate) fn inline(file: &str, name: &str, from: &str) -> Value {
    json!({ "name": name, "values": column(file, name), "from": from })
}

/// Sends a request that must succeed; gives the result.
pub(crate) async fn estimate(app: &TestApp, request: &Value) -> Value {
    let answer = app.post("/v1/estimates", request.to_string()).await;
    answer.expect(201).at("/result")
}

#[track_caller]
pub(crate) fn close(what: &str, found: &Value, expected: f64, tolerance: f64) {
    let found = found
        .as_f64()
        .unwrap_or_else(|| panic!("{what}: {found} is no number"));
    let error = (found - expected).abs();
    assert!(
        error <= tolerance * expected.abs() || error < 1e-12,
        "{what}: {found} instead of {expected}"
    );
}

fn longley() -> Value {
    let series = |name: &str| inline("longley.csv", name, "1947");
    json!({
        "method": "ordinary_least_squares",
        "dependent": series("totemp"),
        "regressors": (["gnpdefl", "gnp", "unemp", "armed", "pop", "year"].map(series)),
    })
}

/// Coefficients and standard errors as certified by the NIST Statistical Reference Datasets.
const CERTIFIED: [(f64, f64); 7] = [
    (-3_482_258.634_595_82, 890_420.383_607_373),
    (15.061_872_271_373_3, 84.914_925_774_766_9),
    (-0.035_819_179_292_591_0, 0.033_491_007_772_243_2),
    (-2.020_229_803_816_83, 0.488_399_681_651_699),
    (-1.033_226_867_173_59, 0.214_274_163_161_675),
    (-0.051_104_105_653_365_8, 0.226_073_200_069_370),
    (1_829.151_464_613_55, 455.478_499_142_212),
];

#[tokio::test]
async fn least_squares_meets_certified_values_and_can_be_repeated_from_its_rows() {
    let app = TestApp::start().await;
    let request = longley().to_string();
    let made = app.post("/v1/estimates", request.clone()).await.expect(201);
    assert_eq!(made.header("location"), Some("/v1/estimates/1"));
    let found = made.at("/result/equations/0/coefficients");
    for (i, (estimate, error)) in CERTIFIED.into_iter().enumerate() {
        close("estimate", &found[i]["estimate"], estimate, 1e-8);
        close("standard error", &found[i]["std_error"], error, 1e-8);
    }
    assert_eq!(found[0]["name"], "constant");
    assert_eq!(found[6]["name"], "year");
    let statistic = |name: &str| {
        let list = made.at("/result/statistics");
        let entry = list.as_array().unwrap().iter().find(|s| s["name"] == name);
        entry.unwrap()["value"].clone()
    };
    close("R²", &statistic("r_squared"), 0.995_479_004_577_296, 1e-8);
    close(
        "s",
        &statistic("residual_std_dev"),
        304.854_073_561_965,
        1e-8,
    );
    let f = &made.at("/result/tests/0");
    assert_eq!(
        (&f["name"], &f["distribution"]),
        (&json!("F of all slopes"), &json!("F(6, 9)"))
    );
    close("F", &f["statistic"], 330.285_339_234_588, 1e-8);
    assert_eq!(
        made.at("/result/sample"),
        json!({"frequency": "A", "from": "1947", "to": "1962", "observations": 16})
    );
    assert_eq!(
        made.at("/request"),
        serde_json::from_str::<Value>(&request).unwrap()
    );

    // The same again has the same digits; what is read is what was made.
    let again = app.post("/v1/estimates", request).await.expect(201);
    assert_eq!(again.at("/result"), made.at("/result"));
    let read = app.get("/v1/estimates/1").await.expect(200);
    assert_eq!(read.json(), made.json());

    // From the rows alone, the same coefficients.
    let csv = app
        .get("/v1/estimates/1/sample.csv?comments=false")
        .await
        .expect(200);
    assert_eq!(csv.header("content-type"), Some("text/csv; charset=utf-8"));
    let text = csv.text();
    let (names, columns) = parse(&text);
    assert_eq!(
        names,
        [
            "totemp", "constant", "gnpdefl", "gnp", "unemp", "armed", "pop", "year"
        ]
    );
    assert!(text.starts_with("period,totemp,constant,"));
    assert!(text.contains("\n1947,60323,1,83,234289,"));
    repeated(&names, &columns, &found);

    // The comments say how.
    let commented = app
        .get("/v1/estimates/1/sample.csv")
        .await
        .expect(200)
        .text();
    let (comments, rest): (Vec<&str>, Vec<&str>) =
        commented.lines().partition(|l| l.starts_with('#'));
    assert_eq!(rest.join("\n"), text.trim_end());
    assert_eq!(comments[0], "# Ordinary least squares");
    assert!(comments.contains(&"# dependent: totemp"), "{comments:?}");
    assert!(
        comments[1].contains("totemp on constant, gnpdefl, gnp"),
        "{comments:?}"
    );
    app.stop().await;
}

/// Names and columns of a CSV file without its period.
fn parse(text: &str) -> (Vec<String>, Vec<Vec<f64>>) {
    let mut reader = csv::Reader::from_reader(text.as_bytes());
    let names: Vec<String> = reader
        .headers()
        .unwrap()
        .iter()
        .skip(1)
        .map(str::to_owned)
        .collect();
    let mut columns = vec![Vec::new(); names.len()];
    for record in reader.records() {
        for (column, cell) in columns.iter_mut().zip(record.unwrap().iter().skip(1)) {
            column.push(cell.parse().unwrap());
        }
    }
    (names, columns)
}

/// Least squares of the first column on the others gives these coefficients.
#[track_caller]
fn repeated(names: &[String], columns: &[Vec<f64>], coefficients: &Value) {
    let regressors = names[1..].iter().zip(&columns[1..]);
    let regressors = regressors
        .map(|(n, c)| Regressor::new(n, c.clone()))
        .collect();
    let fit = Ols::fit(&columns[0], regressors).unwrap();
    for (i, name) in names[1..].iter().enumerate() {
        assert_eq!(coefficients[i]["name"], name.as_str());
        assert_eq!(
            coefficients[i]["estimate"].as_f64(),
            Some(fit.coefficients[i]),
            "{name}"
        );
    }
}

/// Rows with lags, leads, differences and dummies repeat their estimates too.
#[tokio::test]
async fn rows_of_other_regressions_repeat_them() {
    let app = TestApp::start().await;
    let series = |name: &str| inline("danish_money_demand.csv", name, "1974-Q1");
    let x = ["lry", "ibo", "ide"].map(series);
    for (method, extra) in [
        (
            "ordinary_least_squares",
            json!({"terms": ["constant", "trend", "seasonal", "impulse:1980-Q2", "step:1983-Q1"]}),
        ),
        (
            "autoregressive_distributed_lag",
            json!({"options": {"p": 3, "q": [1, 3, 2], "draws": 0}}),
        ),
        ("dynamic_ols", json!({})),
        (
            "engle_granger",
            json!({"options": {"deterministic": "trend"}}),
        ),
    ] {
        let mut request = json!({"method": method, "dependent": series("lrm"), "regressors": x});
        request
            .as_object_mut()
            .unwrap()
            .extend(extra.as_object().unwrap().clone());
        let made = app
            .post("/v1/estimates", request.to_string())
            .await
            .expect(201);
        let path = format!(
            "{}/sample.csv?comments=false",
            made.header("location").unwrap()
        );
        let text = app.get(&path).await.expect(200).text();
        let (names, columns) = parse(&text);
        repeated(
            &names,
            &columns,
            &made.at("/result/equations/0/coefficients"),
        );
        let first = made.at("/result/equations/0/from");
        assert!(
            text.lines()
                .nth(1)
                .unwrap()
                .starts_with(first.as_str().unwrap()),
            "{method}"
        );
        let rows = made.at("/result/equations/0/observations");
        assert_eq!(rows, columns[0].len(), "{method}");
    }
    for (method, options) in [
        (
            "augmented_dickey_fuller",
            json!({"lags": 2, "deterministic": "trend"}),
        ),
        ("phillips_perron", json!({"draws": 0})),
        ("df_gls", json!({"lags": 1, "draws": 0})),
        ("zivot_andrews", json!({"lags": 1, "draws": 0})),
    ] {
        let request = json!({"method": method, "dependent": series("lrm"), "options": options});
        let made = app
            .post("/v1/estimates", request.to_string())
            .await
            .expect(201);
        let path = format!(
            "{}/sample.csv?comments=false",
            made.header("location").unwrap()
        );
        let text = app.get(&path).await.expect(200).text();
        let (names, columns) = parse(&text);
        let coefficients = made.at("/result/equations/0/coefficients");
        let regressors = names[1..].iter().zip(&columns[1..]);
        let regressors = regressors
            .map(|(n, c)| Regressor::new(n, c.clone()))
            .collect();
        let fit = Ols::fit(&columns[0], regressors).unwrap();
        for (i, c) in fit.coefficients.iter().enumerate() {
            assert_eq!(
                coefficients[i]["estimate"].as_f64(),
                Some(*c),
                "{method} {}",
                names[i + 1]
            );
        }
        // The statistic is the t of the lagged level, but for the semiparametric test.
        if method != "phillips_perron" {
            let level = names
                .iter()
                .position(|n| n.ends_with(".L1") && !n.starts_with("d."))
                .unwrap()
                - 1;
            let t = coefficients[level]["t"].as_f64().unwrap();
            close(method, &made.at("/result/tests/0/statistic"), t, 1e-9);
        }
    }
    app.stop().await;
}

#[tokio::test]
async fn stored_series_are_pinned_and_transformed() {
    let app = TestApp::start().await;
    sample::fill(&app).await;
    let request = json!({
        "method": "ordinary_least_squares",
        "dependent": {"series": "A.XAA.imports_real", "transformation": "log_difference", "name": "imports"},
        "regressors": [
            {"series": "A.XAA.gdp_real", "transformation": "log_difference", "name": "income"},
            {"series": "A.XAA.gdp_real", "transformation": "log_difference", "lag": 1},
            "A.XAA.exports_real",
        ],
        "sample": {"from": "1985", "to": "2015"},
        "options": {"hypotheses": [{"terms": {"income": 1}, "value": 1}]},
    });
    let made = app
        .post("/v1/estimates", request.to_string())
        .await
        .expect(201);
    let pins = made.at("/pins");
    assert_eq!(pins.as_array().unwrap().len(), 3, "{pins}");
    assert_eq!(pins[0]["released"], "2021-03-31");
    // The second lag of growth needs two years more than the series have.
    assert_eq!(
        made.at("/result/sample"),
        json!({"frequency": "A", "from": "1992", "to": "2015", "observations": 24})
    );
    let coefficients = made.at("/result/equations/0/coefficients");
    let names: Vec<&str> = coefficients
        .as_array()
        .unwrap()
        .iter()
        .map(|c| c["name"].as_str().unwrap())
        .collect();
    assert_eq!(
        names,
        [
            "constant",
            "income",
            "d.log A.XAA.gdp_real.L1",
            "A.XAA.exports_real"
        ]
    );
    assert_eq!(coefficients[1]["series"], "A.XAA.gdp_real");
    let shortened = made.at("/result/findings");
    let shortened = shortened
        .as_array()
        .unwrap()
        .iter()
        .find(|f| f["code"] == "sample_shortened");
    assert_eq!(shortened.unwrap()["period"], "1992");
    // 1990 is the first observation; log growth of 1992 by hand.
    let values = app.values("A.XAA.imports_real", "").await;
    let growth = (values[2].1.unwrap() / values[1].1.unwrap()).ln();
    let path = format!(
        "{}/sample.csv?comments=false",
        made.header("location").unwrap()
    );
    let (_, columns) = parse(&app.get(&path).await.expect(200).text());
    assert!((columns[0][0] - growth).abs() < 1e-15);
    let income = app.values("A.XAA.gdp_real", "").await;
    let lagged = (income[1].1.unwrap() / income[0].1.unwrap()).ln();
    assert!((columns[3][0] - lagged).abs() < 1e-15);

    let old = app
        .post("/v1/estimates?as_of=2020-01-01", request.to_string())
        .await
        .expect(422);
    assert_eq!(old.at("/errors/0/code"), "missing_input");
    app.stop().await;
}

#[tokio::test]
async fn pages_read_like_a_journal() {
    let app = TestApp::start().await;
    let request = longley().to_string();
    let as_text = [("Accept", "text/plain")];
    let body = Some(request.clone().into_bytes());
    let made = app
        .send(reqwest::Method::POST, "/v1/estimates", &as_text, body)
        .await
        .expect(201);
    let same_text = app.get("/v1/estimates/1?format=text").await.expect(200);
    assert_eq!(made.text(), same_text.text());
    golden("longley.txt", &made.text());
    let latex = app.get("/v1/estimates/1?format=latex").await.expect(200);
    assert_eq!(
        latex.header("content-type"),
        Some("application/x-latex; charset=utf-8")
    );
    golden("longley.tex", &latex.text());

    let series = |name: &str| inline("danish_money_demand.csv", name, "1974-Q1");
    let request = json!({
        "method": "johansen", "dependent": series("lrm"), "regressors": (["lry", "ibo", "ide"].map(series)),
        "terms": ["seasonal"], "options": {"case": "restricted_constant", "rank": 1, "draws": 200},
    });
    let text = app
        .post("/v1/estimates?format=text", request.to_string())
        .await
        .expect(201)
        .text();
    golden("johansen.txt", &text);
    let latex = app
        .get("/v1/estimates/2?format=latex")
        .await
        .expect(200)
        .text();
    golden("johansen.tex", &latex);
    for page in [&text, &made.text()] {
        let wide = page.lines().find(|l| l.chars().count() > 110);
        assert_eq!(wide, None);
    }
    let refused = app.send(
        reqwest::Method::GET,
        "/v1/estimates/2",
        &[("Accept", "image/png")],
        None,
    );
    refused.await.expect(406);
    app.stop().await;
}

/// Compares a page with the committed one, its number and times apart.
#[track_caller]
fn golden(name: &str, page: &str) {
    let path = format!("{}/fixtures/estimates/{name}", env!("CARGO_MANIFEST_DIR"));
    let kept = page.lines().filter(|l| !l.contains(", kept until "));
    let page: Vec<&str> = kept.collect();
    let page = page.join("\n") + "\n";
    let committed = std::fs::read_to_string(&path).unwrap_or_default();
    if committed != page {
        let seen = std::env::temp_dir().join(name);
        std::fs::write(&seen, &page).unwrap();
        panic!(
            "{path} differs from what is printed, which is in {}",
            seen.display()
        );
    }
}

#[tokio::test]
async fn estimates_are_listed_erased_and_forgotten() {
    let app = TestApp::start_with(|s| s.estimate_retention_days = 7).await;
    let request = longley().to_string();
    let first = app.post("/v1/estimates", request.clone()).await.expect(201);
    for _ in 0..2 {
        app.post("/v1/estimates", request.clone()).await.expect(201);
    }
    let page = app.get("/v1/estimates?limit=2").await.expect(200);
    let ids = |a: &Answer| {
        a.json()
            .as_array()
            .unwrap()
            .iter()
            .map(|e| e["id"].as_i64().unwrap())
            .collect::<Vec<_>>()
    };
    assert_eq!(ids(&page), [3, 2]);
    assert_eq!(page.at("/0/method"), "ordinary_least_squares");
    let next = page
        .header("link")
        .unwrap()
        .split(['<', '>'])
        .nth(1)
        .unwrap();
    let rest = app.get(next).await.expect(200);
    assert_eq!(ids(&rest), [1]);
    assert_eq!(rest.header("link"), None);
    app.get("/v1/estimates?after=x").await.expect(400);

    let time = |v: Value| {
        chrono::DateTime::parse_from_rfc3339(v.as_str().unwrap())
            .unwrap()
            .to_utc()
    };
    let recorded = time(first.at("/recorded"));
    assert_eq!(
        time(first.at("/expires")) - recorded,
        chrono::TimeDelta::days(7)
    );
    app.delete("/v1/estimates/2").await.expect(204);
    app.delete("/v1/estimates/2").await.expect(404);
    app.get("/v1/estimates/2/sample.csv").await.expect(404);
    app.get("/v1/estimates/none").await.expect(404);

    let database = app.db.open().await;
    assert_eq!(sweep(&database, recorded).await.unwrap(), 0);
    let later = recorded + chrono::TimeDelta::microseconds(1);
    assert_eq!(sweep(&database, later).await.unwrap(), 1);
    app.get("/v1/estimates/1").await.expect(404);
    app.get("/v1/estimates/3").await.expect(200);
    app.stop().await;
}
