//! What the tests of methods on time series read.

use serde_json::Value;

use super::Regressor;

pub(super) fn json(text: &str) -> Value {
    serde_json::from_str(text).unwrap()
}

/// Values from `expected.json`, see `fixtures/reference/README.md`.
pub(super) fn dynamics() -> Value {
    json(include_str!("../../fixtures/reference/dynamics.json"))
}

/// The same Danish statistics from independent R packages (urca 1.3.3).
pub(super) fn crosscheck() -> Value {
    json(include_str!(
        "../../fixtures/reference/crosscheck-dynamics.json"
    ))
}

/// What `recompute_dynamics.py` computes with statsmodels 0.15.0 and arch 8.0.0.
pub(super) fn more() -> Value {
    json(include_str!("../../fixtures/reference/dynamics-more.json"))
}

/// A count.
pub(super) fn count(value: &Value) -> usize {
    let count = value.as_u64().unwrap_or_else(|| panic!("{value}"));
    usize::try_from(count).unwrap()
}

pub(super) fn numbers(value: &Value) -> Vec<f64> {
    let values = value.as_array().unwrap_or_else(|| panic!("{value}"));
    values.iter().map(|v| v.as_f64().unwrap()).collect()
}

fn column(text: &str, name: &str) -> Vec<f64> {
    let mut lines = text.lines();
    let at = lines.next().unwrap().split(',').position(|c| c == name);
    lines
        .map(|l| l.split(',').nth(at.unwrap()).unwrap().parse().unwrap())
        .collect()
}

/// A Danish series by name.
pub(super) fn danish(name: &str) -> Regressor {
    let text = include_str!("../../fixtures/reference/danish_money_demand.csv");
    Regressor::new(name, column(text, name))
}

/// The log of a US series by name.
pub(super) fn us_log(name: &str) -> Regressor {
    let text = include_str!("../../fixtures/reference/us_macro_quarterly.csv");
    let logs = column(text, name).iter().map(|v| v.ln()).collect();
    Regressor::new(&format!("ln_{name}"), logs)
}

/// `ln_imports_real`, `ln_real_gdp` or `ln_pm_over_cpi`, US, 1992Q1 to 2016Q1.
pub(super) fn us_trade(name: &str) -> Regressor {
    let file = json(include_str!(
        "../../fixtures/reference/us-trade-quarterly.json"
    ));
    let series = |name: &str| numbers(&file["quarterly"][name]);
    let values = match name {
        "ln_pm_over_cpi" => {
            let (price, cpi) = (series("import_price_index"), series("cpi"));
            price.iter().zip(cpi).map(|(p, c)| (p / c).ln()).collect()
        }
        logged => {
            let level = series(logged.trim_start_matches("ln_"));
            level.iter().map(|v| v.ln()).collect()
        }
    };
    Regressor::new(name, values)
}

/// The countries of the Penn World Table in the fixtures.
pub(super) const AREAS: [&str; 12] = [
    "ARG", "BRA", "DEU", "FRA", "GBR", "IND", "ITA", "JPN", "KOR", "MEX", "TUR", "USA",
];

/// A series of a country of the Penn World Table.
pub(super) fn penn(area: &str, name: &str) -> Regressor {
    let file = json(include_str!("../../fixtures/reference/pwt91-trade.json"));
    Regressor::new(name, numbers(&file[area]["series"][name]))
}

/// Asserts that values agree at a relative tolerance, or at 1e-12 absolutely.
#[track_caller]
pub(super) fn close(what: &str, found: f64, expected: f64, tolerance: f64) {
    let error = (found - expected).abs();
    assert!(
        error <= tolerance * expected.abs() || error < 1e-12,
        "{what}: {found} instead of {expected}, off by {:.1e}",
        error / expected.abs()
    );
}
