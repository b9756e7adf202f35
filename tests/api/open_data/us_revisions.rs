//! Two vintages of US trade, prices and income, a month apart: revisions, reading as of a moment, lineage, and a
//! study that gives the same digits again.
//!
//! Data: nowcasting example data of the Federal Reserve Bank of New York, as carried in statsmodels 0.15.0;
//! © 2018 Federal Reserve Bank of New York, BSD-3-Clause. Regressions: statsmodels 0.15.0 on the same
//! data (`fixtures/reference/README.md`).

use std::collections::BTreeMap;

use serde_json::{Value, json};

use super::{
    JULY, JUNE, check_equation, close, fixture, prepare_us, put_and_run, reference, result, send_us,
};
use crate::support::app::{Answer, TestApp};

/// A published series: its column in the source, the power of ten of its values, and the dates at which the source
/// gives it at this frequency.
struct Published {
    key: &'static str,
    column: &'static str,
    multiplier: &'static str,
    dates: std::ops::Range<&'static str>,
}

const ALWAYS: std::ops::Range<&str> = "1985".."2017";

/// Trade prices are quarterly until 1988.
const PUBLISHED: [Published; 8] = [
    published("M.USA.exports.....S", "exports_nominal", "e6", ALWAYS),
    published("M.USA.imports.....S", "imports_nominal", "e6", ALWAYS),
    published("M.USA.consumer_price.....S", "cpi", "", ALWAYS),
    published("Q.USA.gdp_real.....S", "real_gdp", "e9", ALWAYS),
    published(
        "Q.USA.export_price",
        "export_price_index",
        "",
        "1985".."1989",
    ),
    published(
        "M.USA.export_price",
        "export_price_index",
        "",
        "1989".."2017",
    ),
    published(
        "Q.USA.import_price",
        "import_price_index",
        "",
        "1985".."1989",
    ),
    published(
        "M.USA.import_price",
        "import_price_index",
        "",
        "1989".."2017",
    ),
];

const fn published(
    key: &'static str,
    column: &'static str,
    multiplier: &'static str,
    dates: std::ops::Range<&'static str>,
) -> Published {
    Published {
        key,
        column,
        multiplier,
        dates,
    }
}

impl Published {
    /// What the wide source file of a vintage says, by period.
    fn values(&self, released: &str) -> BTreeMap<String, f64> {
        let text = fixture(&format!("open-data/source/us_trade_monthly_{released}.csv"));
        let text = String::from_utf8(text).unwrap();
        let mut lines = text.lines();
        let mut columns = lines.next().unwrap().split(',');
        let column = columns.position(|c| c == self.column).unwrap();
        let rows = lines.map(|line| line.split(',').collect::<Vec<_>>());
        rows.filter(|row| self.dates.contains(&row[0]) && !row[column].is_empty())
            .map(|row| {
                let (year, month) = (&row[0][..4], &row[0][5..7]);
                let period = if self.key.starts_with('Q') {
                    format!("{year}-Q{}", month.parse::<u32>().unwrap() / 3)
                } else {
                    format!("{year}-{month}")
                };
                let value = format!("{}{}", row[column], self.multiplier);
                (period, value.parse().unwrap())
            })
            .collect()
    }
}

/// Fails unless the service reads exactly these values.
async fn check_read(app: &TestApp, key: &str, moment: &str, wanted: &BTreeMap<String, f64>) {
    let found = app.values(key, moment).await;
    assert_eq!(found.len(), wanted.len(), "{key} {moment}");
    for ((period, value), wanted) in found.iter().zip(wanted) {
        assert_eq!(
            (period, *value),
            (wanted.0, Some(*wanted.1)),
            "{key} {moment}"
        );
    }
}

#[tokio::test]
async fn revisions_are_what_the_two_source_files_differ_by() {
    let app = TestApp::start().await;
    send_us(&app, JUNE).await;
    send_us(&app, JULY).await;
    let mut revised_series = 0;
    for series in &PUBLISHED {
        let key = series.key;
        let (june, july) = (series.values(JUNE), series.values(JULY));
        assert!(
            june.keys().all(|p| july.contains_key(p)),
            "{key} lost periods"
        );
        let new = july.keys().filter(|p| !june.contains_key(*p)).count();
        let revised = june
            .iter()
            .filter(|(p, v)| july.get(*p) != Some(*v))
            .count();
        revised_series += usize::from(revised > 0);

        let vintages = app
            .get(&format!("/v1/series/{key}/vintages"))
            .await
            .expect(200);
        let vintages = vintages.json();
        let counts = |vintage: &Value| {
            json!([
                vintage["released"],
                vintage["new"],
                vintage["revised"],
                vintage["emptied"]
            ])
        };
        let found: Vec<Value> = vintages
            .as_array()
            .expect("a list")
            .iter()
            .map(counts)
            .collect();
        let mut wanted = vec![json!([JUNE, june.len(), 0, 0])];
        if new + revised > 0 {
            wanted.push(json!([JULY, new, revised, 0]));
        }
        assert_eq!(found, wanted, "{key}");

        let first = &vintages[0];
        let recorded = first["recorded"].as_str().unwrap();
        for moment in [
            format!("as_of={JUNE}"),
            "as_of=2016-07-28".to_owned(),
            format!("as_of=revision:{}", first["revision"]),
            format!("recorded_as_of={recorded}"),
        ] {
            check_read(&app, key, &moment, &june).await;
        }
        for moment in ["", "as_of=2016-07-29"] {
            check_read(&app, key, moment, &july).await;
        }
        if let Some(second) = vintages.get(1) {
            let moment = format!("as_of=revision:{}", second["revision"]);
            check_read(&app, key, &moment, &july).await;
            let recorded = second["recorded"].as_str().unwrap();
            check_read(&app, key, &format!("recorded_as_of={recorded}"), &july).await;
        }
        let before = format!("/v1/series/{key}/observations?as_of=2016-06-28");
        app.get(&before).await.expect(404);
    }
    assert!(revised_series > 2, "real data are revised");
    app.stop().await;
}

#[tokio::test]
async fn an_older_release_loaded_late_fills_history_and_never_becomes_current() {
    let app = TestApp::start().await;
    send_us(&app, JULY).await;
    send_us(&app, JUNE).await;
    for series in &PUBLISHED {
        check_read(&app, series.key, "", &series.values(JULY)).await;
        check_read(&app, series.key, "as_of=2016-07-28", &series.values(JUNE)).await;
    }
    app.stop().await;
}

#[tokio::test]
async fn a_year_leads_down_to_the_lines_of_the_raw_file() {
    let app = TestApp::start().await;
    send_us(&app, JUNE).await;
    prepare_us(&app).await;
    let year = app.values("A.USA.imports.....S", "from=2015&to=2015").await;
    let lineage = "/v1/series/A.USA.imports.....S/lineage?period=2015";
    let lineage = app.get(lineage).await.expect(200);
    assert_eq!(lineage.at("/spans/0/origin"), "run");
    assert_eq!(lineage.at("/spans/0/preparation"), "us");
    assert_eq!(
        lineage.at("/spans/0/steps"),
        json!(["take Q.USA.imports.....S", "aggregate to A by sum"])
    );
    // Quarters are made on the way; the stored vintage behind both is the monthly one.
    let inputs = lineage.at("/spans/0/inputs");
    assert_eq!(inputs.as_array().map(Vec::len), Some(1), "{inputs}");
    let key = inputs[0]["series"].as_str().unwrap();
    assert_eq!(key, "M.USA.imports.....S");
    assert_eq!(inputs[0]["spans"][0]["origin"], "upload", "{inputs}");

    let mut sum = 0.0;
    let mut raw: Option<Vec<String>> = None;
    for month in 1..=12 {
        let period = format!("2015-{month:02}");
        let path = format!(
            "/v1/series/{key}/lineage?as_of=revision:{}&period={period}",
            inputs[0]["revision"]
        );
        let origin = app.get(&path).await.expect(200).at("/spans/0");
        assert_eq!(origin["origin"], "upload", "{origin}");
        if raw.is_none() {
            let path = format!("/v1/uploads/{}/raw", origin["upload"]);
            let text = app.get(&path).await.expect(200).text();
            raw = Some(text.lines().map(str::to_owned).collect());
        }
        let line = usize::try_from(origin["line"].as_u64().unwrap()).unwrap();
        let row = raw.as_ref().expect("just read")[line - 1].as_str();
        let value = row.strip_prefix(&format!("M,imports,{period},"));
        sum += value
            .unwrap_or_else(|| panic!("line {line} is {row}"))
            .parse::<f64>()
            .unwrap();
    }
    close(year[0].1.unwrap(), 1e6 * sum, "the twelve lines of 2015");
    app.stop().await;
}

/// Demand for imports as in the figures. The source has no foreign income, so that home income stands in for it:
/// demand for exports, and the rates with it, are an exercise and compared with nothing.
fn study() -> Value {
    json!({
        "title": "Demand for imports of the United States",
        "area": "USA",
        "frequency": "Q",
        "headline": { "form": "weak_form", "estimator": "ols_differences" },
        "forms": ["weak_form", "strong_form"],
        "estimators": ["ols_levels", "ols_differences"],
        "activity": "Q.USA.gdp_real.....S",
        "import_demand": {
            "volume": "Q.USA.imports_real.....S",
            "activity": "Q.USA.gdp_real.....S",
            "relative_price": "Q.USA.import_relative_price.....S"
        },
        "export_demand": {
            "volume": "Q.USA.exports_real.....S",
            "activity": "Q.USA.gdp_real.....S"
        },
        "covariance": "classical"
    })
}

fn check_imports(run: &Answer, figures: &Value) {
    let sample =
        json!({ "frequency": "Q", "from": "1992-Q1", "to": "2016-Q1", "observations": 97 });
    assert_eq!(run.at("/result/sample"), sample);
    for (i, name) in ["levels", "dlog"].into_iter().enumerate() {
        let found = run.at(&format!("/result/estimators/{i}/import_demand"));
        let wanted = &figures[format!("import_demand_{name}")];
        // ln(pm/cpi) in the figures, ln(cpi/pm) here.
        check_equation(&found, wanted, -1.0, "hac_L0_corr", name);
    }
}

#[tokio::test]
async fn a_study_gives_the_same_digits_again_whatever_came_later() {
    let app = TestApp::start().await;
    send_us(&app, JUNE).await;
    prepare_us(&app).await;
    let june = put_and_run(&app, "/v1/studies/us", &study()).await;
    check_imports(&june, &reference("us-trade-quarterly.json"));
    let runs = "/v1/studies/us/runs";
    let again = app.post(runs, "").await.expect(201);
    assert_eq!(result(&again), result(&june));
    let stored = app
        .get(&format!("{runs}/{}", june.at("/id")))
        .await
        .expect(200);
    assert_eq!(stored.text(), june.text());

    // The run names the vintages that it read, one a series.
    let pins = june.at("/pins");
    let pinned: Vec<&Value> = pins.as_array().expect("a list").iter().collect();
    assert_eq!(pinned.len(), 4, "{pins}");
    assert!(pinned.iter().all(|p| p["released"] == JUNE), "{pins}");
    let revision = pinned
        .iter()
        .filter_map(|p| p["revision"].as_i64())
        .max()
        .unwrap();

    send_us(&app, JULY).await;
    prepare_us(&app).await;
    let july = app.post(runs, "").await.expect(201);
    check_imports(&july, &reference("us-trade-2016-07-29.json"));
    assert_ne!(
        result(&july),
        result(&june),
        "income of 13 quarters was revised"
    );
    for moment in [
        format!("as_of=revision:{revision}"),
        format!("as_of={JUNE}"),
        "as_of=2016-07-28".to_owned(),
        format!("recorded_as_of={}", june.at("/recorded").as_str().unwrap()),
    ] {
        let then = app.post(&format!("{runs}?{moment}"), "").await.expect(201);
        assert_eq!(result(&then), result(&june), "{moment}");
        assert_eq!(then.at("/pins"), pins, "{moment}");
    }
    app.stop().await;
}
