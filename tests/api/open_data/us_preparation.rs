//! US trade, prices and income from the months: deflation, rebasing, growth, and aggregation with incomplete ends.
//!
//! Data: nowcasting example data of the Federal Reserve Bank of New York, as carried in statsmodels 0.15.0;
//! © 2018 Federal Reserve Bank of New York, BSD-3-Clause. Figures: pandas 3.1.1 and numpy 2.4.6 on the same
//! data (`fixtures/reference/README.md`, `fixtures/reference/us/README.md`).

use serde_json::{Value, json};

use super::{JULY, JUNE, close, number, numbers, prepare_us, reference, send_us};
use crate::support::app::{Answer, TestApp};

/// Deflation, rebasing, aggregation and growth of one vintage.
fn figures(released: &str) -> Value {
    if released == JUNE {
        reference("us/preparation.json")
    } else {
        reference("us-trade-2016-07-29.json")
    }
}

#[tokio::test]
async fn both_vintages_are_prepared_as_a_statistics_library_does() {
    let app = TestApp::start().await;
    let mut revisions = Vec::new();
    for released in [JUNE, JULY] {
        send_us(&app, released).await;
        let run = prepare_us(&app).await;
        check_ends(&app, &run, released).await;
        check_prepared(&app, "", &figures(released)).await;
        revisions.push(run.at("/revision"));
    }
    // What was prepared from June stays readable as of then.
    for moment in [
        "as_of=2016-06-29&".to_owned(),
        "as_of=2016-07-28&".to_owned(),
        format!("as_of=revision:{}&", revisions[0]),
    ] {
        check_prepared(&app, &moment, &figures(JUNE)).await;
    }
    // Preparing the old vintage again gives what is there: nothing is written.
    let again = "/v1/preparations/us/runs?as_of=2016-06-29";
    let again = app.post(again, "").await.expect(201);
    assert_eq!(again.at("/revision"), Value::Null);
    for output in again.at("/outputs").as_array().expect("a list") {
        assert_eq!(output["changed"], false, "{output}");
    }
    app.stop().await;
}

/// Compares every prepared series as of a moment.
async fn check_prepared(app: &TestApp, moment: &str, figures: &Value) {
    const MILLION: f64 = 1e6;
    let month = |pointer: &str| figures["monthly_real"][pointer].as_str().unwrap()[..7].to_owned();
    let (first, last) = (month("first"), month("last"));
    let monthly = |name: &str| numbers(&figures["monthly_real"][name]);
    let span = format!("{moment}from={first}&to={last}");
    let ends = [first.as_str(), last.as_str()];
    for (key, scale, name) in [
        ("M.USA.exports_real.....S", MILLION, "exports_real"),
        ("M.USA.imports_real.....S", MILLION, "imports_real"),
        // Per cent in the figures.
        ("M.USA.terms_of_trade", 0.01, "terms_of_trade"),
        ("M.USA.balance.....S", MILLION, "balance_nominal"),
    ] {
        check(app, key, &span, ends, scale, &monthly(name)).await;
    }
    // A fraction a period, over the year, at annual rate; the last in log per cent in the figures.
    for (key, growth, from, scale, name) in [
        (
            "M.USA.exports_real.....S",
            "log",
            "1992-02",
            1.0,
            "exports_real_dlog",
        ),
        (
            "M.USA.imports_real.....S",
            "ratio",
            "1992-02",
            1.0,
            "imports_real_pct",
        ),
        (
            "M.USA.imports_real.....S",
            "log_over_year",
            "1993-01",
            1.0,
            "imports_real_yoy_log",
        ),
        (
            "M.USA.imports_real.....S",
            "log_annualised",
            "1992-02",
            0.01,
            "imports_real_annualised_log_pct",
        ),
    ] {
        let query = format!("{moment}growth={growth}");
        check(
            app,
            key,
            &query,
            [from, last.as_str()],
            scale,
            &monthly(name),
        )
        .await;
    }
    for (key, name) in [
        ("M.USA.export_price_2010", "export_price_index"),
        ("M.USA.import_price_2010", "import_price_index"),
    ] {
        let pairs = figures["rebase_2010_avg_100"][name].as_array().unwrap();
        // Quarterly before.
        let months = pairs.iter().filter(|p| p[0].as_str().unwrap() >= "1989");
        let values: Vec<f64> = months.map(|p| number(p, "/1")).collect();
        let last = &pairs[pairs.len() - 1][0].as_str().unwrap()[..7];
        check(app, key, moment, ["1989-01", last], 1.0, &values).await;
    }

    let quarters = figures["quarterly"]["period"].as_array().unwrap();
    let quarter = |i: usize| quarters[i].as_str().unwrap().replace('Q', "-Q");
    let (first, last) = (quarter(0), quarter(quarters.len() - 1));
    let span = format!("{moment}from={first}&to={last}");
    let ends = [first.as_str(), last.as_str()];
    for (key, scale, name) in [
        ("Q.USA.exports.....S", MILLION, "exports_nominal"),
        ("Q.USA.imports.....S", MILLION, "imports_nominal"),
        ("Q.USA.export_price_of_months", 1.0, "export_price_index"),
        ("Q.USA.import_price_of_months", 1.0, "import_price_index"),
        ("Q.USA.consumer_price.....S", 1.0, "cpi"),
        ("Q.USA.gdp_real.....S", 1000.0 * MILLION, "real_gdp"),
        ("Q.USA.exports_real.....S", MILLION, "exports_real"),
        ("Q.USA.imports_real.....S", MILLION, "imports_real"),
        (
            "Q.USA.imports_real_of_months.....S",
            MILLION,
            "imports_real_sum_of_monthly",
        ),
    ] {
        check(
            app,
            key,
            &span,
            ends,
            scale,
            &numbers(&figures["quarterly"][name]),
        )
        .await;
    }

    let years = figures["annual"]["year"].as_array().unwrap();
    let (first, last) = (years[0].to_string(), years[years.len() - 1].to_string());
    let span = format!("{moment}from={first}&to={last}");
    let ends = [first.as_str(), last.as_str()];
    for (key, scale, name) in [
        ("A.USA.exports.....S", MILLION, "exports_nominal"),
        ("A.USA.imports.....S", MILLION, "imports_nominal"),
        ("A.USA.import_price", 1.0, "import_price_index"),
        (
            "A.USA.gdp_real.....S",
            1000.0 * MILLION,
            "real_gdp_mean_of_saar",
        ),
    ] {
        check(
            app,
            key,
            &span,
            ends,
            scale,
            &numbers(&figures["annual"][name]),
        )
        .await;
    }
}

/// Compares what a read gives with figures in units of `scale`, period for period.
async fn check(app: &TestApp, key: &str, query: &str, ends: [&str; 2], scale: f64, wanted: &[f64]) {
    let found = app.values(key, query).await;
    let what = format!("{key} {query}");
    let periods = [&found[0].0, &found[found.len() - 1].0];
    assert_eq!(periods, ends, "{what}");
    assert_eq!(found.len(), wanted.len(), "{what}");
    for ((period, value), wanted) in found.iter().zip(wanted) {
        let value = value.unwrap_or_else(|| panic!("{what} {period} is missing"));
        close(value / scale, *wanted, &format!("{what} {period}"));
    }
}

/// Incomplete years are left off with a note, or stay and are missing, as the step says.
async fn check_ends(app: &TestApp, run: &Answer, released: &str) {
    let dropped = figures(released)["annual"]["incomplete_years_dropped"].clone();
    assert_eq!(dropped, json!([2016]));
    let outputs = run.at("/outputs");
    let output = |key: &str| {
        let mut outputs = outputs.as_array().expect("a list").iter();
        outputs
            .find(|o| o["series"] == key)
            .expect("an output")
            .clone()
    };
    for key in [
        "A.USA.exports.....S",
        "A.USA.imports.....S",
        "A.USA.gdp_real.....S",
    ] {
        let output = output(key);
        assert_eq!(output["last"], "2015", "{output}");
        assert_eq!(
            output["notes"][0]["code"], "incomplete_periods_dropped",
            "{output}"
        );
        assert_eq!(output["notes"][0]["period"], "2016", "{output}");
    }
    let kept = output("A.USA.imports_with_ends.....S");
    assert_eq!(kept["last"], "2016", "{kept}");
    assert_eq!(
        kept["notes"][0]["code"], "incomplete_periods_missing",
        "{kept}"
    );
    let values = app
        .values("A.USA.imports_with_ends.....S", "from=2015")
        .await;
    assert_eq!(values[1], ("2016".to_owned(), None));
    assert!(values[0].1.is_some());
}
