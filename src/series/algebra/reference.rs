//! Against figures from outside: `fixtures/reference/us` and `fixtures/reference/india`.

use approx::assert_relative_eq;
use serde_json::Value;

use super::samples::*;
use super::*;
use crate::series::{Adjustment, GrowthKind, IndexKind, Timing};
use crate::time::Frequency;

const US: &str = include_str!("../../../fixtures/reference/us/us_trade_monthly_2016-06-29.csv");
const US_FIGURES: &str = include_str!("../../../fixtures/reference/us/preparation.json");
const INDIA: &str = include_str!("../../../fixtures/reference/india/splice-india-cpi-iw.csv");

fn column(text: &str, name: &str, unit: Unit, start: &str) -> Series {
    let mut reader = csv::Reader::from_reader(text.as_bytes());
    let at = reader
        .headers()
        .unwrap()
        .iter()
        .position(|h| h == name)
        .unwrap();
    let values: Vec<f64> = reader
        .records()
        .map(|r| r.unwrap()[at].parse().unwrap_or(f64::NAN))
        .collect();
    series(unit, start, &values)
}

fn us(name: &str) -> Series {
    let unit = match name {
        "exports_nominal" | "imports_nominal" => Unit {
            adjustment: Adjustment::SeasonallyAdjusted("BEA".to_owned()),
            ..money("USD")
        },
        "real_gdp" => Unit {
            timing: Timing::FlowAnnualRate,
            ..real_money("USD", "2009")
        },
        "export_price_index" | "import_price_index" => {
            index(IndexKind::Price, Some("USD"), Some("2000"))
        }
        _ => price_index("USD"),
    };
    column(US, name, unit, "1985-01")
}

fn figures() -> Value {
    serde_json::from_str(US_FIGURES).unwrap()
}

fn numbers(value: &Value) -> Vec<f64> {
    value
        .as_array()
        .unwrap()
        .iter()
        .map(|v| v.as_f64().unwrap())
        .collect()
}

/// Compares from `start` on, at 1e-8 relative (1e-12 absolute near zero).
fn compare(result: &Series, start: &str, expected: &Value, scale: f64) {
    let from = result.position(start.parse().unwrap()).unwrap();
    let expected = numbers(expected);
    assert!(!expected.is_empty() && result.len() >= from + expected.len());
    for (i, expected) in expected.iter().enumerate() {
        let value = result.values[from + i] * scale;
        assert_relative_eq!(value, *expected, max_relative = 1e-8, epsilon = 1e-12);
    }
}

fn lower(series: &Series, to: Frequency, by: Option<Method>) -> Series {
    aggregate(series, to, by, None, Ends::Drop).unwrap().series
}

#[test]
fn rebases_us_price_indices() {
    for name in ["import_price_index", "export_price_index"] {
        let rebased = rebase(&us(name), span("2010"), 100.0).unwrap();
        let expected = &figures()["rebase_2010_avg_100"][name];
        let rows = expected.as_array().unwrap();
        assert_eq!(
            rows.len(),
            rebased.values.iter().filter(|v| v.is_finite()).count()
        );
        for row in rows {
            let period = Period::parse_as(row[0].as_str().unwrap(), Frequency::Monthly).unwrap();
            let value = rebased.at(period).unwrap();
            assert_relative_eq!(value, row[1].as_f64().unwrap(), max_relative = 1e-8);
        }
    }
}

#[test]
fn prepares_us_months() {
    let figures = &figures()["monthly_real"];
    let check = |series: &Series, start: &str, name: &str, scale: f64| {
        compare(series, start, &figures[name], scale);
    };
    let px = us("export_price_index");
    let pm = us("import_price_index");
    let x = deflate(&us("exports_nominal"), &px, "M.USA.px", span("2000")).unwrap();
    let m = deflate(&us("imports_nominal"), &pm, "M.USA.pm", span("2000")).unwrap();
    assert_eq!(figures["last"], "2016-04-01");
    assert!(x.at("2016-05".parse().unwrap()).is_none());
    check(&x, "1992-01", "exports_real", 1.0);
    check(&m, "1992-01", "imports_real", 1.0);
    check(
        &divide(&px, &pm).unwrap(),
        "1992-01",
        "terms_of_trade",
        100.0,
    );
    let balance = subtract(&us("exports_nominal"), &us("imports_nominal")).unwrap();
    check(&balance, "1992-01", "balance_nominal", 1.0);
    let log = |s: &Series, over, annualised| growth(s, GrowthKind::Log, over, annualised).unwrap();
    check(
        &log(&x, Over::Period, false),
        "1992-02",
        "exports_real_dlog",
        1.0,
    );
    check(
        &log(&m, Over::Year, false),
        "1993-01",
        "imports_real_yoy_log",
        1.0,
    );
    check(
        &log(&m, Over::Period, true),
        "1992-02",
        "imports_real_annualised_log_pct",
        100.0,
    );
    let ratio = growth(&m, GrowthKind::Ratio, Over::Period, false).unwrap();
    check(&ratio, "1992-02", "imports_real_pct", 1.0);
}

#[test]
fn aggregates_us_months_to_quarters_and_years() {
    let quarterly = &figures()["quarterly"];
    let quarter = |name: &str, by| {
        let series = lower(&us(name), Frequency::Quarterly, by);
        compare(&series, "1992-Q1", &quarterly[name], 1.0);
        series
    };
    let x = quarter("exports_nominal", None);
    let m = quarter("imports_nominal", None);
    let px = quarter("export_price_index", None);
    let pm = quarter("import_price_index", None);
    quarter("cpi", None);
    let gdp = quarter("real_gdp", Some(Method::Last));
    for series in [&x, &m] {
        assert_eq!(series.start.to_string(), "1992-Q1");
        assert_eq!(series.end().unwrap().to_string(), "2016-Q1");
    }
    let real = deflate(&x, &px, "Q.USA.px", span("2000")).unwrap();
    compare(&real, "1992-Q1", &quarterly["exports_real"], 1.0);
    let real = deflate(&m, &pm, "Q.USA.pm", span("2000")).unwrap();
    compare(&real, "1992-Q1", &quarterly["imports_real"], 1.0);
    let months = deflate(
        &us("imports_nominal"),
        &us("import_price_index"),
        "pm",
        span("2000"),
    );
    let sums = lower(&months.unwrap(), Frequency::Quarterly, None);
    compare(
        &sums,
        "1992-Q1",
        &quarterly["imports_real_sum_of_monthly"],
        1.0,
    );

    let annual = &figures()["annual"];
    for name in ["exports_nominal", "imports_nominal", "import_price_index"] {
        let years = lower(&us(name), Frequency::Annual, None);
        compare(&years, "1992", &annual[name], 1.0);
        assert_eq!(years.end().unwrap().to_string(), "2015");
    }
    compare(
        &lower(&gdp, Frequency::Annual, None),
        "1992",
        &annual["real_gdp_mean_of_saar"],
        1.0,
    );
    let months = us("exports_nominal");
    let years = aggregate(&months, Frequency::Annual, None, None, Ends::Drop).unwrap();
    let dropped: Vec<f64> = years
        .dropped
        .iter()
        .map(|d| f64::from(d.period.ordinal()))
        .collect();
    assert_eq!(dropped, numbers(&annual["incomplete_years_dropped"]));
    assert_eq!((years.dropped[0].held, years.dropped[0].of), (4, 12));
}

/// CPI-IW: base 1960 to base 1982, official linking factor 4.93.
#[test]
fn links_indian_consumer_prices_by_the_official_factor() {
    let unit = |reference| index(IndexKind::Price, Some("INR"), Some(reference));
    let old = column(INDIA, "base_1960", unit("1960"), "1983");
    let new = column(INDIA, "base_1982", unit("1982"), "1983");
    let linked = link(&old, &new, None).unwrap();
    assert_eq!(format!("{:.2}", linked.factor), "4.93");
    assert_eq!(linked.periods, 5);
    // Yearly factors run from 4.920 to 4.940.
    let spread = (736.0 / 149.0) / (674.0 / 137.0) - 1.0;
    assert_relative_eq!(linked.spread, spread, epsilon = 1e-12);
}
