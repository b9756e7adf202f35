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
