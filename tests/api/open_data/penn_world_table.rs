//! Twelve countries of the Penn World Table: volumes and relative prices prepared from shares, output and
//! price levels; import and export demand; the growth that the balance of payments allows.
//!
//! Data: Penn World Table 9.1 (Feenstra, Inklaar & Timmer 2015, American Economic Review 105(10),
//! www.ggdc.net/pwt), 1960–2017, as packaged in Debian's r-cran-pwt9, CC BY 4.0. World income is summed from it.
//! Figures: statsmodels 0.15.0, numpy 2.4.6 and pandas 3.1.1 on the same data (`fixtures/reference/README.md`).
//!
//! Volumes are shares of output at *current* purchasing-power parities, incomes are at constant prices: an
//! exercise for code, not evidence on growth. The service says so with `current_price_volume`.

use serde_json::{Value, json};

use super::{check_equation, close, number, numbers, put_and_run, reference, result, send};
use crate::support::app::TestApp;

const AREAS: [&str; 12] = [
    "ARG", "BRA", "DEU", "FRA", "GBR", "IND", "ITA", "JPN", "KOR", "MEX", "TUR", "USA",
];
/// The estimators with the names that the figures give them.
const ESTIMATORS: [(&str, &str); 2] = [("ols_levels", "levels"), ("ols_differences", "dlog")];
/// The data are in millions of dollars, the figures too; the service keeps dollars.
const MILLION: f64 = 1e6;

/// Sends all long files.
async fn upload(app: &TestApp) {
    for (file, query) in [
        (
            "pwt_exchange_rates.csv",
            "kind=exchange_rate&currency=USD&quotation=direct",
        ),
        (
            "pwt_income.csv",
            "kind=income&currency=USD&unit_multiplier=6&prices=constant&price_reference=2011",
        ),
        (
            "pwt_output.csv",
            "kind=income&currency=USD&unit_multiplier=6",
        ),
        ("pwt_shares.csv", "kind=ratio"),
        (
            "pwt_price_levels.csv",
            "kind=price_index&currency=USD&reference=2011&reference_value=1",
        ),
        (
            "pwt_world_income.csv",
            "kind=income&area=W111&measure=world_income_real&currency=USD&unit_multiplier=6&prices=constant\
             &price_reference=2011",
        ),
    ] {
        let query = format!(
            "{query}&frequency=A&released=2019-04-15&title=Penn+World+Table+9.1&publisher=GGDC"
        );
        send(app, file, &query).await;
    }
}

/// One document for all countries.
fn preparation() -> Value {
    let mut outputs = serde_json::Map::new();
    for area in AREAS {
        let key = |measure: &str| format!("A.{area}.{measure}");
        let mut output = |measure: &str, steps: Value| outputs.insert(key(measure), steps);
        let (export_price, import_price) = (
            key("export_price_level...USD"),
            key("import_price_level...USD"),
        );
        // Import shares are negative in the source.
        output(
            "imports_volume...USD",
            json!([
                { "take": key("import_share_of_gdp") },
                { "negate": {} },
                { "multiply": [key("gdp_output_side...USD")] }
            ]),
        );
        output(
            "exports_volume...USD",
            json!([{ "multiply": [key("export_share_of_gdp"), key("gdp_output_side...USD")] }]),
        );
        output(
            "foreign_income...USD",
            json!([{ "subtract": ["A.W111.world_income_real...USD", key("gdp_real...USD")] }]),
        );
        output(
            "import_relative_price",
            json!([{ "divide": [key("gdp_price_level...USD"), import_price] }]),
        );
        output(
            "terms_of_trade",
            json!([{ "divide": [export_price, import_price] }]),
        );
        let competitors = AREAS.iter().filter(|a| **a != area);
        let prices: Vec<String> = competitors
            .map(|a| format!("A.{a}.export_price_level...USD"))
            .collect();
        output(
            "competitors_price...USD",
            json!([{ "geometric_mean": { "of": prices } }]),
        );
        output(
            "export_relative_price",
            json!([{ "divide": [export_price, key("competitors_price...USD")] }]),
        );
    }
    json!({ "title": "Trade volumes and relative prices of twelve countries", "outputs": outputs })
}

fn study(area: &str) -> Value {
    let key = |measure: &str| format!("A.{area}.{measure}");
    json!({
        "title": "Trade and growth in the Penn World Table",
        "area": area,
        "frequency": "A",
        "headline": { "form": "strong_form", "estimator": "ols_differences" },
        "forms": ["weak_form", "strong_form", "with_relative_prices"],
        "estimators": ["ols_levels", "ols_differences"],
        "activity": key("gdp_real...USD"),
        "import_demand": {
            "volume": key("imports_volume...USD"),
            "activity": key("gdp_real...USD"),
            "relative_price": key("import_relative_price")
        },
        "export_demand": {
            "volume": key("exports_volume...USD"),
            "activity": key("foreign_income...USD"),
            "relative_price": key("export_relative_price")
        },
        "terms_of_trade": key("terms_of_trade"),
        "covariance": "classical",
        "interval": { "method": "delta", "cross_covariance": "zero" }
    })
}

/// A service with everything prepared.
async fn prepared() -> TestApp {
    let app = TestApp::start().await;
    upload(&app).await;
    let run = put_and_run(&app, "/v1/preparations/trade", &preparation()).await;
    let outputs = run.at("/outputs");
    let outputs = outputs.as_array().expect("a list");
    assert_eq!(outputs.len(), 7 * AREAS.len());
    for output in outputs {
        assert_eq!(output["notes"], json!([]), "{output}");
    }
    app
}

#[tokio::test]
async fn series_of_twelve_countries_are_prepared_as_a_statistics_library_does() {
    let app = prepared().await;
    let figures = reference("pwt91-trade.json");
    for area in AREAS {
        let wanted = &figures[area]["series"];
        // ln rpm is the import over the home price, Rm the inverse; ln rpx is ln Rx: own over competitors' price.
        for (measure, unit, sign, logs) in [
            ("imports_volume...USD", MILLION, 1.0, &wanted["ln_m"]),
            ("gdp_real...USD", MILLION, 1.0, &wanted["ln_y"]),
            ("import_relative_price", 1.0, -1.0, &wanted["ln_rpm"]),
            ("exports_volume...USD", MILLION, 1.0, &wanted["ln_x"]),
            ("foreign_income...USD", MILLION, 1.0, &wanted["ln_z"]),
            ("export_relative_price", 1.0, 1.0, &wanted["ln_rpx"]),
        ] {
            let wanted: Vec<f64> = numbers(logs).iter().map(|l| (sign * l).exp()).collect();
            check_series(&app, area, measure, unit, &wanted).await;
        }
        let wanted = numbers(&figures[area]["terms_of_trade"]);
        check_series(&app, area, "terms_of_trade", 1.0, &wanted).await;
    }
    app.stop().await;
}

async fn check_series(app: &TestApp, area: &str, measure: &str, unit: f64, wanted: &[f64]) {
    let key = format!("A.{area}.{measure}");
    let found = app.values(&key, "from=1960").await;
    assert_eq!(found.len(), wanted.len(), "{key}");
    for ((year, wanted), (period, value)) in (1960..).zip(wanted).zip(&found) {
        assert_eq!(*period, year.to_string(), "{key}");
        let value = value.expect("no gap");
        close(value / unit, *wanted, &format!("{key} {period}"));
    }
}

#[tokio::test]
async fn demand_and_constrained_growth_equal_those_of_a_statistics_library() {
    let app = prepared().await;
    let figures = reference("pwt91-trade.json");
    for area in AREAS {
        let wanted = &figures[area];
        let path = format!("/v1/studies/{area}");
        let run = put_and_run(&app, &path, &study(area)).await;
        let again = app.post(&format!("{path}/runs"), "").await.expect(201);
        assert_eq!(
            result(&run),
            result(&again),
            "{area}: the same digits twice"
        );
        check_study(&run.at("/result"), wanted, area);

        // Newey–West with four lags and without the small-sample factor, behind t and p too.
        let mut document = study(area);
        document["covariance"] = json!("newey_west");
        document["lags"] = json!(4);
        document["small_sample"] = json!(false);
        let run = put_and_run(&app, &path, &document).await;
        assert_eq!(run.at("/version"), 2);
        for (i, (_, name)) in ESTIMATORS.iter().enumerate() {
            for (side, price_sign) in [("import", -1.0), ("export", 1.0)] {
                let found = run.at(&format!("/result/estimators/{i}/{side}_demand"));
                let wanted = &wanted[format!("{side}_{name}")];
                let what = format!("{area} {side}_{name}");
                check_equation(&found, wanted, price_sign, "hac_4", &what);
            }
        }
    }
    app.stop().await;
}

fn check_study(found: &Value, wanted: &Value, area: &str) {
    assert_eq!(
        found["sample"],
        json!({ "frequency": "A", "from": "1960", "to": "2017", "observations": 58 }),
        "{area}"
    );
    let codes = found["findings"].as_array().expect("a list").iter();
    let at_current_prices = codes.filter(|f| f["code"] == "current_price_volume");
    assert_eq!(
        at_current_prices.count(),
        2,
        "{area}: {}",
        found["findings"]
    );

    let bop = &wanted["bop"];
    let terms_of_trade = numbers(&wanted["terms_of_trade"]);
    let tt = (terms_of_trade[57] / terms_of_trade[0]).ln() / 57.0;
    let (rm, rx) = (
        -number(bop, "/ln_rpm_mean_dlog"),
        number(bop, "/ln_rpx_mean_dlog"),
    );
    for (pointer, wanted) in [
        ("/actual_growth", number(bop, "/y_mean_dlog")),
        ("/growth/home_activity", number(bop, "/y_mean_dlog")),
        ("/growth/exports", number(bop, "/x_mean_dlog")),
        ("/growth/foreign_income", number(bop, "/z_mean_dlog")),
        ("/growth/terms_of_trade", tt),
        ("/growth/import_relative_price", rm),
        ("/growth/export_relative_price", rx),
    ] {
        let what = format!("{area}{pointer}");
        close(number(found, pointer) / 100.0, wanted, &what);
    }

    let estimators = found["estimators"].as_array().expect("a list");
    assert_eq!(estimators.len(), 2);
    for (found, (estimator, name)) in estimators.iter().zip(ESTIMATORS) {
        assert_eq!(found["estimator"], estimator);
        let what = format!("{area} {name}");
        let imports = &wanted[format!("import_{name}")];
        let exports = &wanted[format!("export_{name}")];
        for (side, wanted, price_sign) in [
            ("import_demand", imports, -1.0),
            ("export_demand", exports, 1.0),
        ] {
            let what = format!("{what} {side}");
            check_equation(&found[side], wanted, price_sign, "hac_L0_corr", &what);
            if name == "levels" {
                check_constant_in_levels(&found[side], wanted, &what);
            }
        }
        check_rates(found, bop, name, &what);
        let error = relative_prices_std_error(bop, imports, exports, name);
        let form = numbers_of(found, "with_relative_prices");
        close(number(form, "/std_error") / 100.0, error, &what);
    }
}

/// The constant in dollars, `c + (1 − b) ln 10⁶` for the constant c and income elasticity b in millions, with its
/// standard error.
fn check_constant_in_levels(found: &Value, wanted: &Value, what: &str) {
    let shift = MILLION.ln();
    let (params, cov) = (&wanted["params"], &wanted["cov"]);
    let constant = number(params, "/0") + (1.0 - number(params, "/1")) * shift;
    let variance = number(cov, "/0/0") - 2.0 * shift * number(cov, "/0/1")
        + shift * shift * number(cov, "/1/1");
    close(number(found, "/coefficients/0/estimate"), constant, what);
    let error = number(found, "/coefficients/0/std_error_classical");
    close(error, variance.sqrt(), what);
}

/// Elasticities and rates with delta standard errors; numbers not to be relied on stand under `unreliable`.
fn check_rates(found: &Value, bop: &Value, name: &str, what: &str) {
    let wanted = &bop["estimates"][name];
    // psi = −η and eta = −η*: the coefficients of ln rpm and ln rpx.
    for (pointer, wanted) in [
        ("/import_income_elasticity/value", number(wanted, "/pi")),
        (
            "/import_income_elasticity/std_error",
            number(wanted, "/pi_se"),
        ),
        ("/export_income_elasticity/value", number(wanted, "/eps")),
        (
            "/export_income_elasticity/std_error",
            number(wanted, "/eps_se"),
        ),
        ("/import_price_elasticity/value", -number(wanted, "/psi")),
        ("/export_price_elasticity/value", -number(wanted, "/eta")),
    ] {
        close(number(found, pointer), wanted, &format!("{what}{pointer}"));
    }
    for (form, rate, error) in [
        ("weak_form", "/yb_weak", Some("/yb_weak_se_x_fixed")),
        ("strong_form", "/yb_strong", Some("/yb_strong_se_cov0")),
        ("with_relative_prices", "/yb_relative_prices", None),
    ] {
        let what = format!("{what} {form}");
        let found = numbers_of(found, form);
        close(number(found, "/rate") / 100.0, number(wanted, rate), &what);
        if let Some(error) = error {
            let error = number(wanted, error);
            close(number(found, "/std_error") / 100.0, error, &what);
        }
    }
}

/// The numbers of a form, from under `unreliable` where they should not be relied on: there with reasons of
/// severity error, and not outside too.
fn numbers_of<'a>(estimator: &'a Value, form: &str) -> &'a Value {
    let forms = estimator["forms"].as_array().expect("a list");
    let found = forms.iter().find(|f| f["form"] == form).expect("asked for");
    assert_eq!(found["refused"], Value::Null, "{found}");
    let unreliable = &found["unreliable"];
    if unreliable.is_null() {
        return found;
    }
    assert_eq!(found["rate"], Value::Null, "{found}");
    assert_eq!(found["interval"], Value::Null, "{found}");
    let reasons = unreliable["reasons"].as_array().expect("a list");
    assert!(!reasons.is_empty(), "{found}");
    assert!(reasons.iter().all(|r| r["severity"] == "error"), "{found}");
    unreliable
}

/// Delta-method standard error of `[tt − psi Δln rpm + eta Δln rpx + ε z] / π` in the coefficients of the two
/// regressions, from their covariance matrices and with none across them.
fn relative_prices_std_error(bop: &Value, imports: &Value, exports: &Value, name: &str) -> f64 {
    let estimates = &bop["estimates"][name];
    let (rate, pi) = (
        number(estimates, "/yb_relative_prices"),
        number(estimates, "/pi"),
    );
    let imports_gradient = [-rate / pi, -number(bop, "/ln_rpm_mean_dlog") / pi];
    let exports_gradient = [
        number(bop, "/z_mean_dlog") / pi,
        number(bop, "/ln_rpx_mean_dlog") / pi,
    ];
    let quadratic = |gradient: [f64; 2], equation: &Value| {
        let mut sum = 0.0;
        for (i, left) in gradient.iter().enumerate() {
            for (j, right) in gradient.iter().enumerate() {
                let cov = number(&equation["cov"], &format!("/{}/{}", i + 1, j + 1));
                sum += left * cov * right;
            }
        }
        sum
    };
    (quadratic(imports_gradient, imports) + quadratic(exports_gradient, exports)).sqrt()
}

/// India, where nothing holds: in levels demand looks spurious and exports seem to rise with their price; in
/// differences incomes hardly matter, so that the interval of the rate is tens of points wide.
#[tokio::test]
async fn a_page_prints_reasons_in_place_of_unreliable_rates_unless_asked() {
    let app = prepared().await;
    let run = put_and_run(&app, "/v1/studies/india", &study("IND")).await;
    let path = format!("/v1/studies/india/runs/{}", run.at("/id"));
    let page = app.get(&format!("{path}?format=text")).await.expect(200);
    let marked = format!("{path}?format=text&with_unreliable=true");
    let marked = app.get(&marked).await.expect(200);
    assert!(
        page.header("content-type")
            .unwrap()
            .starts_with("text/plain")
    );
    let (page, marked) = (page.text(), marked.text());

    let estimators = run.at("/result/estimators");
    let strong: Vec<&Value> = (0..2)
        .map(|i| numbers_of(&estimators[i], "strong_form"))
        .collect();
    // Line breaks fall anywhere in a paragraph.
    let words = |text: &str| text.split_whitespace().collect::<Vec<_>>().join(" ");
    for (numbers, expected) in strong.iter().zip([
        ["possibly_spurious", "wrong_sign"],
        ["insignificant_income_elasticity", "interval_too_wide"],
    ]) {
        let reasons = numbers["reasons"].as_array().expect("it is unreliable");
        for code in expected {
            assert!(reasons.iter().any(|r| r["code"] == code), "{reasons:?}");
        }
        for reason in reasons {
            let reason = reason["message"].as_str().unwrap();
            assert!(words(&page).contains(&words(reason)), "{reason}\n{page}");
        }
    }
    let row = |page: &str| {
        let row = page.lines().find(|l| l.starts_with("strong form  "));
        row.expect("a row of rates").to_owned()
    };
    let rates = strong
        .iter()
        .map(|s| 100.0 * (number(s, "/rate") / 100.0).exp_m1());
    let (hidden, shown) = (row(&page), row(&marked));
    assert_eq!(hidden.matches("unreliable (").count(), 2, "{hidden}");
    for rate in rates {
        let rate = format!("{rate:.2}");
        assert!(!hidden.contains(&rate), "{hidden}");
        assert!(shown.contains(&rate), "{shown}");
    }
    // Each number is followed by the letters of the reasons against it.
    assert_eq!(shown.matches("] (").count(), 2, "{shown}");
    assert!(
        page.contains("Balance-of-payments limit   unreliable ("),
        "{page}"
    );
    assert!(
        !marked.contains("Balance-of-payments limit   unreliable ("),
        "{marked}"
    );
    app.stop().await;
}

/// A study by every estimator, over HTTP: each gives both equations with its tests, the page holds them all, and the
/// same digits come twice. Instruments are the other side's income, for the exercise alone.
#[tokio::test]
async fn every_estimator_is_taken_by_name() {
    let app = prepared().await;
    let mut document = study("USA");
    let estimators = [
        "ardl",
        "ols_levels",
        "ols_differences",
        "autoregressive_errors",
        "two_stage_levels",
        "two_stage_differences",
        "seemingly_unrelated",
        "seemingly_unrelated_differences",
        "dols",
        "fmols",
        "johansen",
    ];
    document["estimators"] = json!(estimators);
    document["headline"] = json!({ "form": "strong_form", "estimator": "ardl" });
    document["interval"] = json!({ "method": "fieller" });
    document["import_demand"]["instruments"] = json!(["A.USA.foreign_income...USD"]);
    document["import_demand"]["terms"] = json!(["trend"]);
    document["export_demand"]["instruments"] = json!(["A.USA.gdp_real...USD"]);
    document["ardl"] = json!({ "criterion": "aic", "max_lags": 2 });
    document["dols"] = json!({ "leads": 1, "lags": 1 });
    document["autoregressive_errors"] = json!({ "first_observation": "dropped" });
    document["seemingly_unrelated"] = json!({ "iterate": false });
    document["johansen"] = json!({ "lags": 2, "case": "restricted_trend" });
    document["simulation"] = json!({ "draws": 200, "seed": 3 });
    let path = "/v1/studies/everything";
    let run = put_and_run(&app, path, &document).await;
    let again = app.post(&format!("{path}/runs"), "").await.expect(201);
    assert_eq!(result(&run), result(&again));
    let found = run.at("/result/estimators");
    let found = found.as_array().expect("a list");
    for (found, name) in found.iter().zip(estimators) {
        assert_eq!(found["estimator"], name);
        let levels = !name.ends_with("differences");
        for side in ["import_demand", "export_demand"] {
            let tests = found[side]["tests"].as_array().expect("a list");
            let about = |group: &str| tests.iter().filter(|t| t["group"] == group).count();
            assert_eq!(about("cointegration") > 0, levels, "{name} {side}");
            assert!(about("diagnostic") >= 3, "{name} {side}");
            assert_eq!(
                about("instruments") > 0,
                name.starts_with("two_stage"),
                "{name}"
            );
            let dynamic = ["ardl", "johansen"].contains(&name);
            assert_eq!(
                found[side]["adjustment"].is_object(),
                dynamic,
                "{name} {side}"
            );
            assert_eq!(
                !found[side]["dynamics"].is_null(),
                dynamic || name == "dols"
            );
        }
        // The trend of import demand is autonomous growth, in differences the constant.
        assert!(found["import_autonomous_growth"].is_object(), "{name}");
        numbers_of(found, "strong_form");
    }
    let page = format!("{path}/runs/{}?format=text", run.at("/id"));
    let page = app.get(&page).await.expect(200).text();
    for part in [
        "ARDL, long run",
        "VECM, one relation",
        "system, differences",
        "two-stage, levels",
        "case V",
        "bounds F",
        "Tests of the equations",
    ] {
        assert!(page.contains(part), "no '{part}' in\n{page}");
    }
    assert!(page.lines().all(|l| l.chars().count() <= 100), "{page}");

    document["ardl"] = json!({ "criterion": "aic", "lags": 2 });
    let refused = app.put(path, &document.to_string()).await.expect(422);
    assert_eq!(refused.at("/errors/0/pointer"), "/ardl/lags");
    an_equation_without_adjustment_gives_no_rate(&app).await;
    app.stop().await;
}

/// Italy and Japan by ARDL(1,1,1): nothing draws trade back to a level relation, so that no rate is told.
async fn an_equation_without_adjustment_gives_no_rate(app: &TestApp) {
    for area in ["ITA", "JPN"] {
        let mut document = study(area);
        document["estimators"] = json!(["ardl"]);
        document["headline"]["estimator"] = json!("ardl");
        document["ardl"] = json!({ "import_orders": [1, 1, 1], "export_orders": [1, 1, 1] });
        document["simulation"] = json!({ "draws": 1000 });
        document
            .as_object_mut()
            .expect("an object")
            .remove("covariance");
        let run = put_and_run(app, &format!("/v1/studies/{area}"), &document).await;
        let forms = run.at("/result/estimators/0/forms");
        for form in forms.as_array().expect("a list") {
            assert!(form["rate"].is_null(), "{area}: {form}");
            let unreliable = &form["unreliable"];
            if unreliable.is_null() {
                assert!(form["refused"].is_string(), "{area}: {form}");
                continue;
            }
            let reasons = unreliable["reasons"].as_array().expect("a list");
            for code in ["no_cointegration", "adjustment_outside_range"] {
                assert!(reasons.iter().any(|r| r["code"] == code), "{area}: {form}");
            }
        }
        let page = format!("/v1/studies/{area}/runs/{}?format=text", run.at("/id"));
        let page = app.get(&page).await.expect(200).text();
        assert!(page.contains("Balance-of-payments limit   "), "{page}");
        assert!(!page.contains("interval ["), "{page}");
    }
}
