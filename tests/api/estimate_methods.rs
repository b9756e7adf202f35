//! Every method over HTTP gives what independent programs gave on open data (`fixtures/reference`).

use serde_json::{Value, json};

use super::estimates::{close, column, estimate, inline};
use crate::support::app::TestApp;

fn reference(name: &str) -> Value {
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
fn money(method: &str, options: Value) -> Value {
    let x = ["lry", "ibo", "ide"].map(danish);
    json!({"method": method, "dependent": danish("lrm"), "regressors": x, "options": options})
}

fn alone(method: &str, options: Value) -> Value {
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
fn of<'a>(list: &'a Value, name: &str) -> &'a Value {
    let items = list.as_array().unwrap();
    let found = items.iter().find(|t| t["name"] == name);
    found.unwrap_or_else(|| panic!("no {name} in {list}"))
}

#[track_caller]
fn coefficients(result: &Value, equation: usize, part: &str, expected: &[f64], tolerance: f64) {
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
fn numbers(value: &Value) -> Vec<f64> {
    let list = value
        .as_array()
        .unwrap_or_else(|| panic!("{value} is no list"));
    list.iter().map(|v| v.as_f64().unwrap()).collect()
}

#[track_caller]
fn carries(result: &Value, code: &str) {
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
async fn unit_roots() {
    let app = TestApp::start().await;
    let expected = reference("dynamics")["danish"]["unit_roots"]["lrm"].clone();
    let more = reference("dynamics-more")["unit_roots"]["lrm"].clone();
    for (terms, code) in [("none", "n"), ("constant", "c"), ("trend", "ct")] {
        for (options, key) in [
            (json!({"max_lags": 10}), format!("adf_{code}_AIC")),
            (
                json!({"max_lags": 10, "lag_selection": "bic"}),
                format!("adf_{code}_BIC"),
            ),
            (json!({"lags": 4}), format!("adf_{code}_lag4")),
        ] {
            let mut options = options;
            options["deterministic"] = json!(terms);
            let found = estimate(&app, &alone("augmented_dickey_fuller", options)).await;
            let (test, wanted) = (&found["tests"][0], &expected[&key]);
            close(
                &key,
                &test["statistic"],
                wanted["stat"].as_f64().unwrap(),
                1e-8,
            );
            close(&key, &test["p_value"], wanted["p"].as_f64().unwrap(), 1e-6);
            let critical = &test["critical_values"][1]["value"];
            close(&key, critical, wanted["crit"]["5%"].as_f64().unwrap(), 1e-8);
            assert_eq!(
                found["equations"][0]["observations"], wanted["nobs"],
                "{key}"
            );
        }
    }
    for (terms, key) in [
        ("constant", "adf_c_tstat"),
        ("trend", "adf_ct_tstat"),
        ("quadratic_trend", "adf_ctt_tstat"),
    ] {
        let options =
            json!({"deterministic": terms, "lag_selection": "t_statistic", "max_lags": 8});
        let found = estimate(&app, &alone("augmented_dickey_fuller", options)).await;
        let (test, wanted) = (&found["tests"][0], &more[key]);
        close(
            key,
            &test["statistic"],
            wanted["stat"].as_f64().unwrap(),
            1e-8,
        );
        close(key, &test["p_value"], wanted["p"].as_f64().unwrap(), 1e-6);
    }
    let found = estimate(
        &app,
        &alone(
            "augmented_dickey_fuller",
            json!({"lag_selection": "modified_aic", "max_lags": 8}),
        ),
    )
    .await;
    close(
        "MAIC",
        &found["tests"][0]["statistic"],
        more["adf_c_maic"]["stat"].as_f64().unwrap(),
        1e-8,
    );

    let found = estimate(
        &app,
        &alone("phillips_perron", json!({"lags": 4, "draws": 300})),
    )
    .await;
    for (i, key) in ["pp_c_tau_lag4", "pp_c_rho_lag4"].iter().enumerate() {
        close(
            key,
            &found["tests"][i]["statistic"],
            expected[key]["stat"].as_f64().unwrap(),
            1e-8,
        );
    }
    // A simulated p-value lies within its error of the other program's.
    let p = found["tests"][1]["p_value"].as_f64().unwrap();
    assert!(
        (p - expected["pp_c_rho_lag4"]["p"].as_f64().unwrap()).abs() < 0.06,
        "{p}"
    );

    for (terms, key, lags) in [("constant", "kpss_c_4", 4), ("trend", "kpss_ct_4", 4)] {
        let found = estimate(
            &app,
            &alone("kpss", json!({"deterministic": terms, "lags": lags})),
        )
        .await;
        let wanted = &expected[key];
        close(
            key,
            &found["tests"][0]["statistic"],
            wanted["stat"].as_f64().unwrap(),
            1e-8,
        );
    }
    let found = estimate(
        &app,
        &alone(
            "df_gls",
            json!({"lag_selection": "bic", "max_lags": 8, "draws": 300}),
        ),
    )
    .await;
    close(
        "DF-GLS",
        &found["tests"][0]["statistic"],
        more["dfgls_c_bic"]["stat"].as_f64().unwrap(),
        1e-8,
    );
    let p = found["tests"][0]["p_value"].as_f64().unwrap();
    assert!((0.1..0.5).contains(&p), "{p}");
    for kind in ["mean", "trend", "both"] {
        let options =
            json!({"break": kind, "lags": 2, "draws": if kind == "mean" { 20 } else { 0 }});
        let found = estimate(&app, &alone("zivot_andrews", options)).await;
        let key = format!("za_{kind}_lag2");
        close(
            &key,
            &found["tests"][0]["statistic"],
            more[&key].as_f64().unwrap(),
            1e-8,
        );
    }
    app.stop().await;
}

#[tokio::test]
async fn cointegration() {
    let app = TestApp::start().await;
    let expected = reference("dynamics")["danish"].clone();
    for (options, key) in [
        (json!({"max_lags": 10}), "eg_c_AIC"),
        (json!({"lags": 1}), "eg_c_lag1"),
    ] {
        let found = estimate(&app, &money("engle_granger", options)).await;
        let (test, wanted) = (&found["tests"][0], &expected["engle_granger"][key]);
        close(
            key,
            &test["statistic"],
            wanted["stat"].as_f64().unwrap(),
            1e-8,
        );
        close(key, &test["p_value"], wanted["p"].as_f64().unwrap(), 1e-6);
        carries(&found, "no_cointegration");
    }
    for (case, key) in [
        ("none", "n"),
        ("restricted_constant", "rc"),
        ("constant", "uc"),
        ("restricted_trend", "rt"),
        ("trend", "ut"),
    ] {
        let mut request = money("johansen", json!({"case": case, "rank": 1, "draws": 0}));
        request["terms"] = json!(["seasonal"]);
        let found = estimate(&app, &request).await;
        let wanted = &expected["johansen_k2_seasonal"][key];
        let table = &found["tables"][0]["rows"];
        for (rank, trace) in numbers(&wanted["trace_r0_up"]).into_iter().enumerate() {
            close(key, &table[rank][2], trace, 1e-8);
        }
        for (rank, value) in numbers(&wanted["eigenvalues"]).into_iter().enumerate() {
            close(key, &table[rank][1], value, 1e-8);
        }
        coefficients(
            &found,
            0,
            "estimate",
            &numbers(&wanted["beta1_normalised_on_first"]),
            1e-7,
        );
        coefficients(&found, 1, "estimate", &numbers(&wanted["alpha1"]), 1e-7);
    }
    let mut request = money(
        "vecm",
        json!({"case": "restricted_constant", "rank": 1, "draws": 0,
        "weakly_exogenous": ["ibo", "ide"], "excluded": ["ide"],
        "relations_within": [{"lrm": 1, "lry": -1}, {"ibo": 1}, {"ide": 1}, {"const": 1}]}),
    );
    request["terms"] = json!(["seasonal"]);
    let found = estimate(&app, &request).await;
    let wanted = &expected["vecm_ci_seasonal_rank1"];
    let firsts = |v: &Value| {
        v.as_array()
            .unwrap()
            .iter()
            .map(|r| r[0].as_f64().unwrap())
            .collect::<Vec<_>>()
    };
    coefficients(&found, 0, "estimate", &firsts(&wanted["beta"]), 1e-7);
    let errors = firsts(&wanted["stderr_beta"]);
    for (i, error) in errors.iter().enumerate().skip(1) {
        close(
            "β",
            &found["equations"][0]["coefficients"][i]["std_error"],
            *error,
            1e-6,
        );
    }
    coefficients(
        &found,
        1,
        "std_error",
        &firsts(&wanted["stderr_alpha"]),
        1e-6,
    );
    close(
        "L",
        &of(&found["statistics"], "log_likelihood")["value"],
        wanted["llf"].as_f64().unwrap(),
        1e-8,
    );
    assert_eq!(found["equations"].as_array().unwrap().len(), 6);
    for name in [
        "Weak exogeneity of ibo, ide",
        "Exclusion of ide from the relations",
        "Relations within the given ones (β = H φ)",
    ] {
        assert!(of(&found["tests"], name)["p_value"].is_number(), "{name}");
    }
    // Simulated rank tests find what the published tables say: no relation at 5 % with 49.14.
    let mut request = money(
        "johansen",
        json!({"case": "restricted_constant", "draws": 300}),
    );
    request["terms"] = json!(["seasonal"]);
    let found = estimate(&app, &request).await;
    assert_eq!(of(&found["statistics"], "rank")["value"], 0.0);
    let critical = found["tables"][0]["rows"][0][3].as_f64().unwrap();
    // Johansen & Juselius 1990 print 53.12 for large samples.
    assert!((critical - 53.12).abs() < 3.5, "{critical}");
    carries(&found, "no_cointegration");
    app.stop().await;
}

#[tokio::test]
async fn distributed_lags() {
    let app = TestApp::start().await;
    let expected = reference("dynamics")["danish"].clone();
    let wanted = &expected["ardl_3132"];
    for (case, number) in [("I", 1), ("II", 2), ("III", 3)] {
        let options = json!({"p": 3, "q": [1, 3, 2], "case": case, "draws": if case == "III" { 400 } else { 0 }});
        let found = estimate(&app, &money("autoregressive_distributed_lag", options)).await;
        let bounds = &wanted["bounds"][format!("case{number}")];
        let (f, t) = (
            of(&found["tests"], "Bounds F"),
            of(&found["tests"], "Bounds t"),
        );
        close(
            "F",
            &f["statistic"],
            bounds["F_by_hand"].as_f64().unwrap(),
            1e-8,
        );
        close(
            "t",
            &t["statistic"],
            bounds["t_y_lag1"].as_f64().unwrap(),
            1e-8,
        );
        if case != "III" {
            continue;
        }
        coefficients(
            &found,
            0,
            "estimate",
            &numbers(&wanted["uecm_params"]),
            1e-7,
        );
        coefficients(&found, 0, "std_error", &numbers(&wanted["uecm_bse"]), 1e-7);
        for c in found["equations"][1]["coefficients"].as_array().unwrap() {
            let name = c["name"].as_str().unwrap().replace("constant", "const");
            close(
                &name,
                &c["estimate"],
                wanted["longrun"][&name]["coef"].as_f64().unwrap(),
                1e-7,
            );
            close(
                &name,
                &c["std_error"],
                wanted["longrun"][&name]["se"].as_f64().unwrap(),
                1e-7,
            );
        }
        let value = |name: &str| of(&found["statistics"], name)["value"].clone();
        close(
            "half-life",
            &value("half_life"),
            wanted["half_life_periods"].as_f64().unwrap(),
            1e-7,
        );
        close("AIC", &value("aic"), wanted["aic"].as_f64().unwrap(), 1e-8);
        // Bounds at 5 %: lower below upper, both simulated.
        let five: Vec<f64> = (2..4)
            .map(|i| f["critical_values"][i]["value"].as_f64().unwrap())
            .collect();
        assert!(
            five[0] < five[1] && (2.5..4.2).contains(&five[0]) && (3.6..5.4).contains(&five[1]),
            "{five:?}"
        );
        let rows = of(&found["tables"], "dynamic_multipliers")["rows"]
            .as_array()
            .unwrap()
            .len();
        assert_eq!(rows, 33);
    }
    let options = json!({"selection": "aic", "max_p": 5, "max_q": 5, "draws": 0});
    let found = estimate(&app, &money("autoregressive_distributed_lag", options)).await;
    let best = &of(&found["tables"], "orders")["rows"][0];
    assert_eq!((&best[0], &best[1]), (&json!(5.0), &json!("0, 3, 5")));
    close("AIC of the grid", &best[2], -254.034_535_778_2, 1e-8);
    app.stop().await;
}

#[tokio::test]
async fn cointegrating_regressions() {
    let app = TestApp::start().await;
    let expected = reference("dynamics")["danish"]["dols"].clone();
    for (options, errors) in [
        (
            json!({"covariance": "classical"}),
            &expected["bse_classical"],
        ),
        (
            json!({"covariance": "newey_west", "lags": 3, "small_sample": false}),
            &expected["bse_hac"],
        ),
        (
            json!({"covariance": "newey_west", "lags": 3}),
            &expected["bse_hac_corr"],
        ),
    ] {
        let found = estimate(&app, &money("dynamic_ols", options)).await;
        coefficients(&found, 0, "estimate", &numbers(&expected["params"]), 1e-8);
        coefficients(&found, 0, "std_error", &numbers(errors), 1e-8);
        carries(&found, "no_cointegration");
    }
    for (method, key) in [
        ("dynamic_ols", "arch_dols_unadjusted"),
        ("fully_modified_ols", "arch_fmols"),
    ] {
        let found = estimate(&app, &money(method, json!({"kernel_lags": 3}))).await;
        for c in found["equations"][0]["coefficients"]
            .as_array()
            .unwrap()
            .iter()
            .take(4)
        {
            let name = c["name"].as_str().unwrap().replace("constant", "const");
            close(
                &name,
                &c["estimate"],
                expected[key]["params"][&name].as_f64().unwrap(),
                1e-8,
            );
            close(
                &name,
                &c["std_error"],
                expected[key]["bse"][&name].as_f64().unwrap(),
                1e-8,
            );
        }
    }
    let found = estimate(
        &app,
        &money("hansen_1992", json!({"kernel_lags": 3, "draws": 60})),
    )
    .await;
    let names: Vec<&str> = found["tests"]
        .as_array()
        .unwrap()
        .iter()
        .map(|t| t["name"].as_str().unwrap())
        .collect();
    assert_eq!(names, ["Hansen Lc", "Hansen MeanF", "Hansen SupF"]);
    for test in found["tests"].as_array().unwrap() {
        assert!(
            test["statistic"].as_f64().unwrap() > 0.0 && test["p_value"].is_number(),
            "{test}"
        );
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
