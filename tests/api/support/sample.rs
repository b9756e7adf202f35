//! A small economy in a service: something at every path of the `OpenAPI` document.

use super::app::TestApp;

/// Quarterly nominal exports of XAA, in millions of XAL.
pub(crate) const TRADE: &str = "period,value\n2019-Q1,100\n2019-Q2,104.5\n2019-Q3,\n2019-Q4,110\n2020-Q1,111\n2020-Q2,112\n2020-Q3,114\n2020-Q4,115\n";
/// How [`TRADE`] is to be read.
pub(crate) const TRADE_QUERY: &str = "kind=trade&area=XAA&measure=exports&currency=XAL&own_currency=XAL\
    &unit_multiplier=6&released=2021-03-31&title=Trade&publisher=Office";
/// A preparation of these exports.
pub(crate) const PREPARATION: &str = r#"{"outputs": {"A.XAA.exports": [{"take": "Q.XAA.exports"},
    {"aggregate": {"to": "A", "by": "sum"}}]}}"#;
/// A study of the real series.
pub(crate) const STUDY: &str = r#"{"title": "XAA", "area": "XAA", "frequency": "A",
    "headline": {"form": "strong_form", "estimator": "ols_differences"},
    "forms": ["strong_form", "weak_form"], "estimators": ["ols_differences"],
    "activity": "A.XAA.gdp_real",
    "import_demand": {"volume": "A.XAA.imports_real", "activity": "A.XAA.gdp_real"},
    "export_demand": {"volume": "A.XAA.exports_real", "activity": "A.XBB.gdp_real...USD"}}"#;

/// An estimate from the real series.
pub(crate) const ESTIMATE: &str = r#"{"method": "ordinary_least_squares",
    "dependent": "A.XAA.imports_real", "regressors": ["A.XAA.gdp_real"]}"#;

/// Stores currency, upload (its number is 1), preparation with a run, study with a run, all named `sample`, and
/// an estimate (its number is 1).
/// Answers the path of the study's run.
pub(crate) async fn fill(app: &TestApp) -> String {
    app.put(
        "/v1/currencies/XAL",
        r#"{"name": "Dinar of XAA", "areas": ["XAA"]}"#,
    )
    .await
    .expect(201);
    let upload = app.upload(TRADE_QUERY, TRADE).await.expect(201);
    assert_eq!(upload.header("location"), Some("/v1/uploads/1"));
    app.put("/v1/preparations/sample", PREPARATION)
        .await
        .expect(201);
    app.post("/v1/preparations/sample/runs", "")
        .await
        .expect(201);

    let header = "area,measure,currency,period,value\n";
    let mut files = [("trade", header.to_owned()), ("income", header.to_owned())];
    for t in 0..30_i32 {
        let (year, t) = (1990 + t, f64::from(t));
        let home = 0.03 * t + 0.01 * t.sin();
        let foreign = 0.025 * t + 0.012 * (1.3 * t).cos();
        let imports = 1.6 * home + 0.004 * (2.1 * t).sin();
        let exports = 1.2 * foreign + 0.004 * (2.9 * t).cos();
        let rows = [
            (0, "XAA,imports_real,XAL", imports),
            (0, "XAA,exports_real,XAL", exports),
            (1, "XAA,gdp_real,XAL", home),
            (1, "XBB,gdp_real,USD", foreign),
        ];
        for (file, series, log) in rows {
            let row = format!("{series},{year},{}\n", 100.0 * log.exp());
            files[file].1.push_str(&row);
        }
    }
    for (kind, file) in files {
        let query = format!("kind={kind}&prices=constant&price_reference=2015&released=2021-03-31");
        app.upload(&query, file).await.expect(201);
    }
    app.post("/v1/estimates", ESTIMATE).await.expect(201);
    app.put("/v1/studies/sample", STUDY).await.expect(201);
    let run = app.post("/v1/studies/sample/runs", "").await.expect(201);
    run.header("location").expect("it says where").to_owned()
}
