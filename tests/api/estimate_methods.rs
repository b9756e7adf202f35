//! Every method over HTTP gives what independent programs gave on open data (`fixtures/reference`).

use serde_json::{Value, json};

use super::estimates::{close, column, estimate, inline};
use crate::support::app::TestApp;

pub(crate) fn reference(name: &str) -> Value {
    let path = format!(
        "{}/fixtures/reference/{name}.json",
        env!("CARGO_MANIFEST_DIR")
    );
    serde_json::from_str(&std::fs::read_to_string(path).unwrap()).unwrap()
}

fn danish(name: &str) -> Value {
    inline("danish_money_demand.csv", name, "1974-Q1")
}

/// Danish money demand: log real money on log income, bond rate, deposit rate.
pub(crate) fn money(method: &str, options: Value) -> Value {
    let x = ["lry", "ibo", "ide"].map(danish);
    json!({"method": method, "dependent": danish("lrm"), "regressors": x, "options": options})
}

pub(crate) fn alone(method: &str, options: Value) -> Value {
    json!({"method": method, "dependent": danish("lrm"), "options": options})
}

/// A US series, transformed.
fn macro_series(series: &str, name: &str, transformation: &str, lag: u32) -> Value {
    json!({
        "name": name, "values": column("us_macro_quarterly.csv", series), "from": "1959-Q1",
        "transformation": transformation, "lag": lag,
    })
}

#[track_caller]
pub(crate) fn of<'a>(list: &'a Value, name: &str) -> &'a Value {
    let items = list.as_array().unwrap();
    let found = items.iter().find(|t| t["name"] == name);
    found.unwrap_or_else(|| panic!("no {name} in {list}"))
}

#[track_caller]
pub(crate) fn coefficients(
    result: &Value,
    equation: usize,
    part: &str,
    expected: &[f64],
    tolerance: f64,
) {
    let found = &result["equations"][equation]["coefficients"];
    for (i, expected) in expected.iter().enumerate() {
        close(
            &format!("{part} {i}"),
            &found[i][part],
            *expected,
            tolerance,
        );
    }
}

#[track_caller]
pub(crate) fn numbers(value: &Value) -> Vec<f64> {
    let list = value
        .as_array()
        .unwrap_or_else(|| panic!("{value} is no list"));
    list.iter().map(|v| v.as_f64().unwrap()).collect()
}

#[track_caller]
pub(crate) fn carries(result: &Value, code: &str) {
    let findings = result["findings"].as_array().unwrap();
    assert!(
        findings.iter().any(|f| f["code"] == code),
        "no {code} in {findings:?}"
    );
}

#[tokio::test]
async fn least_squares_with_every_covariance() {
    let app = TestApp::start().await;
    let (other, more) = (reference("ols-other"), reference("estimation"));
    let expected = &other["danish_levels"];
    for (options, errors) in [
        (json!({}), &expected["bse"]),
        (json!({"covariance": "hc0"}), &expected["HC0"]["bse"]),
        (json!({"covariance": "hc1"}), &expected["HC1"]["bse"]),
        (json!({"covariance": "hc2"}), &expected["HC2"]["bse"]),
        (json!({"covariance": "hc3"}), &expected["HC3"]["bse"]),
        (
            json!({"covariance": "newey_west"}),
            &expected["hac_L0_corr"]["bse"],
        ),
        (
            json!({"covariance": "newey_west", "lags": 4, "small_sample": false}),
            &expected["hac_4"]["bse"],
        ),
        (
            json!({"covariance": "kernel", "bandwidth": 5}),
            &expected["hac_4_corr"]["bse"],
        ),
    ] {
        let found = estimate(&app, &money("ordinary_least_squares", options)).await;
        coefficients(&found, 0, "estimate", &numbers(&expected["params"]), 1e-8);
        coefficients(&found, 0, "std_error", &numbers(errors), 1e-8);
    }
    let found = estimate(
        &app,
        &money("ordinary_least_squares", json!({"diagnostic_lags": 1})),
    )
    .await;
    for (name, value, p) in [
        (
            "Breusch–Godfrey, LM",
            &expected["breusch_godfrey_1"]["lm"],
            &expected["breusch_godfrey_1"]["lm_p"],
        ),
        (
            "Breusch–Pagan, studentised, LM",
            &expected["breusch_pagan_koenker"]["lm"],
            &expected["breusch_pagan_koenker"]["lm_p"],
        ),
        (
            "White, F",
            &expected["white"]["f"],
            &expected["white"]["f_p"],
        ),
        (
            "Jarque–Bera",
            &expected["jarque_bera"]["jb"],
            &expected["jarque_bera"]["p"],
        ),
        (
            "RESET",
            &expected["reset_fitted_3"]["f"],
            &expected["reset_fitted_3"]["p"],
        ),
        (
            "Ljung–Box",
            &expected["ljung_box_1"]["q"],
            &expected["ljung_box_1"]["p"],
        ),
        (
            "ARCH, LM",
            &expected["arch_lm_1"]["lm"],
            &expected["arch_lm_1"]["lm_p"],
        ),
        (
            "F of all slopes",
            &expected["fvalue"],
            &expected["f_pvalue"],
        ),
    ] {
        let test = of(&found["tests"], name);
        close(name, &test["statistic"], value.as_f64().unwrap(), 1e-7);
        close(name, &test["p_value"], p.as_f64().unwrap(), 1e-6);
        assert!(
            test["sentence"]
                .as_str()
                .unwrap()
                .contains("rejected at the 5 % level"),
            "{test}"
        );
    }
    carries(&found, "possibly_spurious");
    carries(&found, "levels_inference_invalid");
    carries(&found, "failed_diagnostic");
    carries(&found, "few_observations");

    let expected = &more["least_squares"];
    let weights: Vec<f64> = (0..55).map(|t| 1.0 + f64::from(t) / 10.0).collect();
    let weights = json!({"name": "w", "values": weights, "from": "1974-Q1"});
    let found = estimate(
        &app,
        &money("ordinary_least_squares", json!({"weights": weights})),
    )
    .await;
    coefficients(
        &found,
        0,
        "estimate",
        &numbers(&expected["weighted"]["params"]),
        1e-8,
    );
    coefficients(
        &found,
        0,
        "std_error",
        &numbers(&expected["weighted"]["bse"]),
        1e-8,
    );
    for (name, key) in [("r_squared", "r2"), ("log_likelihood", "llf")] {
        let value = &of(&found["statistics"], name)["value"];
        close(
            name,
            value,
            expected["weighted"][key].as_f64().unwrap(),
            1e-8,
        );
    }
    let restrictions =
        json!([{"terms": {"lry": 1}, "value": 1}, {"terms": {"ibo": 1, "ide": 1}, "value": -2}]);
    let found = estimate(
        &app,
        &money(
            "ordinary_least_squares",
            json!({"restrictions": restrictions}),
        ),
    )
    .await;
    let wanted = &expected["restricted"];
    coefficients(&found, 0, "estimate", &numbers(&wanted["params"]), 1e-7);
    let f = of(&found["tests"], "F of the restrictions");
    close("F", &f["statistic"], wanted["f"].as_f64().unwrap(), 1e-7);
    close("p", &f["p_value"], wanted["f_p"].as_f64().unwrap(), 1e-6);
    let ratio = of(&found["tests"], "Likelihood ratio of the restrictions");
    close(
        "LR",
        &ratio["statistic"],
        wanted["lr"].as_f64().unwrap(),
        1e-7,
    );
    let options = json!({"hypotheses": restrictions, "covariance": "hc1"});
    let found = estimate(&app, &money("ordinary_least_squares", options)).await;
    let wald = of(&found["tests"], "Wald");
    close(
        "Wald",
        &wald["statistic"],
        wanted["wald_hc1"].as_f64().unwrap(),
        1e-7,
    );
    let kernels = more["least_squares"]["kernels"].as_object().unwrap();
    for (kernel, expected) in kernels {
        for rule in ["newey_west_1994", "andrews_1991"] {
            let options = json!({"covariance": "kernel", "kernel": kernel, "bandwidth": rule});
            let found = estimate(&app, &money("ordinary_least_squares", options)).await;
            let words = found["equations"][0]["std_errors"].as_str().unwrap();
            let said: f64 = words
                .split("bandwidth ")
                .nth(1)
                .unwrap()
                .split(' ')
                .next()
                .unwrap()
                .parse()
                .unwrap();
            close(rule, &json!(said), expected[rule].as_f64().unwrap(), 1e-8);
        }
    }
    app.stop().await;
}

#[tokio::test]
async fn autoregressive_errors_and_instruments() {
    let app = TestApp::start().await;
    let more = reference("estimation");
    for procedure in ["prais_winsten", "cochrane_orcutt"] {
        let found = estimate(
            &app,
            &money("autoregressive_errors", json!({"procedure": procedure})),
        )
        .await;
        let expected = &more[procedure];
        close(
            "ρ",
            &of(&found["statistics"], "rho")["value"],
            expected["rho"].as_f64().unwrap(),
            1e-8,
        );
        coefficients(&found, 0, "estimate", &numbers(&expected["params"]), 1e-7);
        coefficients(&found, 0, "std_error", &numbers(&expected["bse"]), 1e-7);
    }
    let expected = &more["instruments"];
    let growth = |series, name| macro_series(series, name, "log_difference", 0);
    let lagged = |series, name, lag| macro_series(series, name, "log_difference", lag);
    let request = |covariance: &str| {
        json!({
            "method": "two_stage_least_squares", "dependent": growth("realcons", "consumption"),
            "regressors": [growth("realgovt", "government"), growth("realdpi", "income")],
            "options": {
                "endogenous": ["income"], "covariance": covariance,
                "instruments": [
                    lagged("realcons", "consumption 1", 1), lagged("realdpi", "income 1", 1),
                    lagged("realinv", "investment 1", 1), lagged("realcons", "consumption 2", 2),
                ],
            },
        })
    };
    let found = estimate(&app, &request("classical")).await;
    coefficients(&found, 0, "estimate", &numbers(&expected["params"]), 1e-7);
    let first = |name: &str| expected[name][0].as_f64().unwrap();
    for (name, value) in [
        ("Sargan", first("sargan")),
        ("Durbin–Wu–Hausman", first("wu_hausman")),
        ("Hansen J", first("hansen_j")),
        (
            "First-stage F of income",
            expected["first_stage_f"].as_f64().unwrap(),
        ),
        ("Effective F", expected["first_stage_f"].as_f64().unwrap()),
    ] {
        close(name, &of(&found["tests"], name)["statistic"], value, 1e-6);
    }
    assert_eq!(
        found["tables"][0]["rows"][0][0],
        "empty: the instruments are rejected"
    );
    carries(&found, "weak_instruments");
    let robust = estimate(&app, &request("hc1")).await;
    coefficients(&robust, 0, "std_error", &numbers(&expected["hc1"]), 1e-7);
    let effective = of(&robust["tests"], "Effective F");
    close(
        "effective F",
        &effective["statistic"],
        expected["effective_f"].as_f64().unwrap(),
        1e-7,
    );
    let critical = &effective["critical_values"][0]["value"];
    close(
        "critical value",
        critical,
        expected["critical_tau_10"].as_f64().unwrap(),
        1e-6,
    );
    app.stop().await;
}

#[tokio::test]
async fn systems() {
    let app = TestApp::start().await;
    let expected = reference("estimation")["system"].clone();
    let growth = |series, name| macro_series(series, name, "log_difference", 0);
    let rate = macro_series("realint", "rate", "level", 0);
    let request = |options: Value| {
        json!({
            "method": "seemingly_unrelated", "options": options,
            "equations": [
                {"name": "consumption", "dependent": growth("realcons", "c"), "regressors": [growth("realdpi", "income"), rate]},
                {"name": "investment", "dependent": growth("realinv", "i"),
                 "regressors": [growth("realdpi", "income"), growth("realgovt", "government")]},
            ],
        })
    };
    let across =
        json!({"restrictions": [{"terms": {"consumption.income": 1, "investment.income": -0.2}}]});
    for (name, options, tolerance) in [
        ("zellner", json!({}), 1e-8),
        ("iterated", json!({"iterate": true}), 1e-6),
        ("restricted", across, 1e-8),
    ] {
        let found = estimate(&app, &request(options)).await;
        let params = numbers(&expected[name]["params"]);
        coefficients(&found, 0, "estimate", &params[..3], tolerance);
        coefficients(&found, 1, "estimate", &params[3..], tolerance);
        let error = |i: usize| expected[name]["cov"][i][i].as_f64().unwrap().sqrt();
        let errors: Vec<f64> = (0..6).map(error).collect();
        coefficients(&found, 0, "std_error", &errors[..3], tolerance);
        coefficients(&found, 1, "std_error", &errors[3..], tolerance);
        let test = of(&found["tests"], "Breusch–Pagan, across equations");
        close(
            "Breusch–Pagan",
            &test["statistic"],
            expected["breusch_pagan"][0].as_f64().unwrap(),
            1e-7,
        );
        assert_eq!(found["tables"][0]["name"], "error_covariance");
    }
    app.stop().await;
}

#[tokio::test]
async fn stability() {
    let app = TestApp::start().await;
    let expected = reference("estimation")["stability"].clone();
    let growth = |series, name| macro_series(series, name, "log_difference", 0);
    let request = |method: &str, options: Value| json!({"method": method, "dependent": growth("realcons", "c"), "regressors": [growth("realdpi", "y")], "options": options});
    let number = |name: &str| expected[name].as_f64().unwrap();
    let found = estimate(&app, &request("recursive_residuals", json!({}))).await;
    let rows = &found["tables"][0]["rows"];
    for (i, value) in numbers(&expected["recursive_first"])
        .into_iter()
        .enumerate()
    {
        close("recursive residual", &rows[i][1], value, 1e-7);
    }
    // Growth begins in 1959-Q2, the first two rows determine the coefficients.
    assert_eq!(rows[0][0], "1959-Q4");
    let found = estimate(&app, &request("cusum", json!({}))).await;
    close(
        "CUSUM",
        &found["tests"][0]["statistic"],
        number("cusum"),
        1e-7,
    );
    let found = estimate(&app, &money("cusum", json!({"residuals": "ols"}))).await;
    close(
        "OLS CUSUM",
        &found["tests"][0]["statistic"],
        0.804_723_080_222_518_9,
        1e-8,
    );
    let found = estimate(&app, &request("cusum_of_squares", json!({}))).await;
    close(
        "CUSUM of squares",
        &found["tests"][0]["statistic"],
        number("cusum_squares"),
        1e-7,
    );
    // Observation 101 of growth is 1984-Q2.
    let found = estimate(&app, &request("chow", json!({"at": "1984-Q2"}))).await;
    let test = &found["tests"][0];
    close(
        "Chow",
        &test["statistic"],
        expected["chow_100"][0].as_f64().unwrap(),
        1e-7,
    );
    close(
        "Chow p",
        &test["p_value"],
        expected["chow_100"][1].as_f64().unwrap(),
        1e-6,
    );
    assert!(
        test["sentence"].as_str().unwrap().contains("1984-Q2"),
        "{test}"
    );
    let found = estimate(&app, &request("unknown_break", json!({}))).await;
    for (i, name) in ["sup", "average", "exponential"].into_iter().enumerate() {
        close(name, &found["tests"][i]["statistic"], number(name), 1e-7);
    }
    let window = &expected["window_50_90"];
    let found = estimate(&app, &request("rolling", json!({"width": 40}))).await;
    let rows = &found["tables"][0]["rows"];
    for j in 0..2 {
        close(
            "window",
            &rows[100 + j][3],
            numbers(&window["params"])[j],
            1e-7,
        );
        close(
            "window",
            &rows[100 + j][4],
            numbers(&window["bse"])[j],
            1e-7,
        );
    }
    let found = estimate(&app, &request("recursive", json!({"shortest": 40}))).await;
    let rows = found["tables"][0]["rows"].as_array().unwrap();
    assert_eq!(rows.len(), 2 * (202 - 40 + 1));
    let whole = &found["equations"][0]["coefficients"][1]["estimate"];
    close(
        "last window",
        &rows[rows.len() - 1][3],
        whole.as_f64().unwrap(),
        1e-12,
    );
    app.stop().await;
}
