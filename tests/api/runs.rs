//! Runs of documents: which version they run, what they replace.

use serde_json::json;

use crate::support::app::TestApp;
use crate::support::sample;
use crate::uploads::start;

async fn send(app: &TestApp, measure: &str, released: &str, values: &str) {
    let query = format!("kind=trade&area=XAA&measure={measure}&currency=XAD&released={released}");
    let file = format!("period,value\n{values}");
    app.upload(&query, file).await.expect(201);
}

async fn run(app: &TestApp, query: &str) {
    let path = format!("/v1/preparations/sum/runs?{query}");
    app.post(&path, "").await.expect(201);
}

/// An output that rested on a newer release than what it rests on now is replaced all the same.
#[tokio::test]
async fn a_run_on_the_present_replaces_what_is_there() {
    let app = start().await;
    send(&app, "exports", "2020-01-31", "2018,10\n2019,11\n").await;
    send(&app, "imports", "2020-03-31", "2018,1\n2019,2\n").await;
    let both =
        r#"{"outputs": {"A.XAA.trade": [{"take": "A.XAA.exports"}, {"add": ["A.XAA.imports"]}]}}"#;
    app.put("/v1/preparations/sum", both).await.expect(201);
    run(&app, "").await;
    let values = |v: [f64; 2]| {
        vec![
            ("2018".to_owned(), Some(v[0])),
            ("2019".to_owned(), Some(v[1])),
        ]
    };
    assert_eq!(app.values("A.XAA.trade", "").await, values([11.0, 13.0]));

    let one = r#"{"outputs": {"A.XAA.trade": [{"take": "A.XAA.exports"}]}}"#;
    app.put("/v1/preparations/sum", one).await.expect(200);
    run(&app, "").await;
    assert_eq!(app.values("A.XAA.trade", "").await, values([10.0, 11.0]));
    // A run on the past says what was known then, and leaves the present alone.
    run(&app, "as_of=2020-02-01").await;
    assert_eq!(app.values("A.XAA.trade", "").await, values([10.0, 11.0]));

    run(&app, "version=1").await;
    assert_eq!(app.values("A.XAA.trade", "").await, values([11.0, 13.0]));
    app.post("/v1/preparations/sum/runs?version=3", "")
        .await
        .expect(404);
    app.stop().await;
}

#[tokio::test]
async fn a_study_runs_again_in_an_earlier_version() {
    let app = TestApp::start().await;
    sample::fill(&app).await;
    let first = app.get("/v1/studies/sample/runs/2").await.expect(200);
    let renamed = sample::STUDY.replace(r#""title": "XAA""#, r#""title": "XAA again""#);
    app.put("/v1/studies/sample", &renamed).await.expect(200);
    let newest = app.post("/v1/studies/sample/runs", "").await.expect(201);
    assert_eq!(
        (newest.at("/version"), newest.at("/result/title")),
        (json!(2), json!("XAA again"))
    );
    let again = app
        .post("/v1/studies/sample/runs?version=1", "")
        .await
        .expect(201);
    assert_eq!(again.at("/version"), 1);
    assert_eq!(again.at("/result"), first.at("/result"));
    assert_eq!(again.at("/pins"), first.at("/pins"));
    app.stop().await;
}

/// Two preparations of one series would undo each other's runs.
#[tokio::test]
async fn a_series_has_one_preparation() {
    let app = start().await;
    send(&app, "exports", "2020-01-31", "2018,10\n2019,11\n").await;
    let once = r#"{"outputs": {"A.XAA.trade": [{"take": "A.XAA.exports"}]}}"#;
    let twice =
        r#"{"outputs": {"A.XAA.trade": [{"take": "A.XAA.exports"}, {"add": ["A.XAA.exports"]}]}}"#;
    let other = r#"{"outputs": {"A.XAA.other": [{"take": "A.XAA.exports"}]}}"#;
    app.put("/v1/preparations/sum", once).await.expect(201);
    run(&app, "").await;
    app.put("/v1/preparations/double", twice).await.expect(201);
    let refused = app.post("/v1/preparations/double/runs", "").await;
    let refused = refused.expect(409);
    assert_eq!(refused.at("/code"), "series_of_preparation");
    let detail = refused.at("/detail").to_string();
    assert!(
        detail.contains("'sum'") && detail.contains("A.XAA.trade"),
        "{detail}"
    );
    assert_eq!(app.values("A.XAA.trade", "").await[0].1, Some(10.0));
    let runs = app.get("/v1/preparations/double/runs").await.expect(200);
    assert_eq!(runs.json(), json!([]));

    // Its owner gives it up, the other takes it, and the owner's old version is refused in turn.
    app.put("/v1/preparations/sum", other).await.expect(200);
    app.post("/v1/preparations/double/runs", "")
        .await
        .expect(201);
    assert_eq!(app.values("A.XAA.trade", "").await[0].1, Some(20.0));
    app.post("/v1/preparations/sum/runs?version=1", "")
        .await
        .expect(409);
    app.delete("/v1/preparations/double").await.expect(204);
    run(&app, "version=1").await;
    assert_eq!(app.values("A.XAA.trade", "").await[0].1, Some(10.0));

    // A series of uploads is refused as soon as the document is put.
    let taken = r#"{"outputs": {"A.XAA.exports": [{"take": "A.XAA.trade"}]}}"#;
    let refused = app.put("/v1/preparations/taken", taken).await.expect(409);
    assert_eq!(refused.at("/code"), "series_of_uploads");
    app.get("/v1/preparations/taken").await.expect(404);
    app.stop().await;
}

#[tokio::test]
async fn the_lineage_of_a_prepared_series_ends_in_uploads() {
    let app = start().await;
    send(
        &app,
        "exports",
        "2020-01-31&title=Trade",
        "2018,10\n2019,11\n",
    )
    .await;
    let one = r#"{"outputs": {"A.XAA.half": [{"take": "A.XAA.exports"}]}}"#;
    let two =
        r#"{"outputs": {"A.XAA.whole": [{"take": "A.XAA.half"}, {"add": ["A.XAA.exports"]}]}}"#;
    for (name, document) in [("one", one), ("two", two)] {
        let path = format!("/v1/preparations/{name}");
        app.put(&path, document).await.expect(201);
        app.post(&format!("{path}/runs"), "").await.expect(201);
    }
    // What the runs read stays what it was.
    send(&app, "exports", "2020-03-31", "2019,12\n").await;
    for query in ["", "?period=2019"] {
        let path = format!("/v1/series/A.XAA.whole/lineage{query}");
        let lineage = app.get(&path).await.expect(200);
        assert_eq!(lineage.at("/spans").as_array().unwrap().len(), 1);
        let span = lineage.at("/spans/0");
        assert_eq!(
            (&span["origin"], &span["preparation"]),
            (&json!("run"), &json!("two"))
        );
        let inputs = &span["inputs"];
        assert_eq!(inputs.as_array().unwrap().len(), 2, "{inputs}");
        assert_eq!(inputs[0]["series"], "A.XAA.exports");
        let spans = &inputs[0]["spans"];
        assert_eq!(spans.as_array().unwrap().len(), 1, "{spans}");
        assert_eq!(
            spans[0],
            json!({"from": "2018", "to": "2019", "origin": "upload", "upload": 1, "title": "Trade",
                "publisher": "", "released": "2020-01-31", "line": 2, "line_step": 1})
        );
        // What lies under the other input is the same vintage, told once.
        assert_eq!(inputs[1]["series"], "A.XAA.half");
        let under = &inputs[1]["spans"][0];
        assert_eq!(under["preparation"], "one");
        assert_eq!(under["inputs"][0]["series"], "A.XAA.exports");
        assert_eq!(under["inputs"][0]["revision"], inputs[0]["revision"]);
        assert!(under["inputs"][0].get("spans").is_none(), "{under}");
    }
    app.stop().await;
}

/// An index whose reference is a span averages its value there.
#[tokio::test]
async fn an_index_may_refer_to_several_years() {
    let app = start().await;
    let years = |values: [f64; 4]| {
        let rows: String = (1982..)
            .zip(values)
            .map(|(y, v)| format!("{y},{v}\n"))
            .collect();
        format!("period,value\n{rows}")
    };
    let index = "kind=price_index&area=XAA&currency=XAD&reference=1982/1984&measure=";
    for (measure, values) in [
        ("export_price", [96.0, 100.0, 104.0, 110.0]),
        ("import_price", [90.0, 100.0, 110.0, 132.0]),
    ] {
        let file = years(values);
        app.upload(&format!("{index}{measure}"), file)
            .await
            .expect(201);
    }
    let unit = app.get("/v1/series/A.XAA.export_price").await.expect(200);
    assert_eq!(unit.at("/unit/reference"), "1982/1984");
    let query = "kind=trade&area=XAA&measure=exports&currency=XAD";
    let nominal = [50.0, 60.0, 70.0, 80.0];
    app.upload(query, years(nominal)).await.expect(201);
    // As a column, and of prices.
    let file = "measure,price_reference,period,value\nimports_real,1982/1984,1985,7\n";
    let query = "kind=trade&area=XAA&currency=XAD&prices=constant";
    app.upload(query, file).await.expect(201);
    let unit = app.get("/v1/series/A.XAA.imports_real").await.expect(200);
    assert_eq!(unit.at("/unit/prices/price_reference"), "1982/1984");
    for wrong in [
        "1984/1982",
        "1982/",
        "1982/1984-Q1",
        "1982-1984",
        "1400/1984",
    ] {
        let refused = app
            .upload(&index.replace("1982/1984", wrong), "period,value\n")
            .await
            .expect(400);
        assert_eq!(refused.at("/errors/0/code"), "wrong_period", "{wrong}");
    }

    let document = r#"{"outputs": {
        "A.XAA.exports_real": [{"take": "A.XAA.exports"},
            {"deflate": {"by": "A.XAA.export_price", "reference": "1982/1984"}}],
        "A.XAA.rebased": [{"take": "A.XAA.export_price"}, {"rebase": {"reference": "1985"}}],
        "A.XAA.back": [{"take": "A.XAA.rebased"}, {"rebase": {"reference": "1982/1984"}}],
        "A.XAA.mean": [{"geometric_mean": {"of": ["A.XAA.export_price", "A.XAA.import_price"]}}]}}"#;
    app.put("/v1/preparations/span", document).await.expect(201);
    app.post("/v1/preparations/span/runs", "").await.expect(201);
    let of = async |key: &str| -> Vec<f64> {
        let values = app.values(key, "").await;
        values.iter().map(|(_, v)| v.unwrap()).collect()
    };
    let close = |found: &[f64], expected: &[f64]| {
        assert_eq!(found.len(), expected.len());
        for (a, b) in found.iter().zip(expected) {
            assert!((a - b).abs() < 1e-12 * b, "{found:?} {expected:?}");
        }
    };
    let index = [96.0, 100.0, 104.0, 110.0];
    let real: Vec<f64> = nominal
        .iter()
        .zip(index)
        .map(|(v, p)| v / (p / 100.0))
        .collect();
    close(&of("A.XAA.exports_real").await, &real);
    close(&of("A.XAA.rebased").await, &index.map(|p| p / 1.1));
    close(&of("A.XAA.back").await, &index);
    let mean = of("A.XAA.mean").await;
    close(&[mean[..3].iter().sum::<f64>() / 3.0], &[100.0]);
    let unit = app.get("/v1/series/A.XAA.mean").await.expect(200);
    assert_eq!(unit.at("/unit/reference"), "1982/1984");
    app.stop().await;
}
