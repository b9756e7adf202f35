//! Every fault of a request for an estimate: its code, its place, and what its text names.

use serde_json::{Map, Value, json};

use crate::support::app::TestApp;
use crate::support::sample;

/// Method, fields beside `dependent` y and `regressors` [x] (null takes one away), then what the first
/// error says: code, pointer, and a text. `$name` stands for one of the series below.
const FAULTS: &str = r#"
magic | {} | unknown_method | /method | ordinary_least_squares
ordinary_least_squares | {"method": null} | missing_field | /method | method
ordinary_least_squares | {"colour": 1} | unknown_field | /colour | regressors
ordinary_least_squares | {"options": {"colour": 1}} | unknown_field | /options/colour | hypotheses
ordinary_least_squares | {"options": {"covariance": "best"}} | invalid_value | /options/covariance | newey_west
ordinary_least_squares | {"options": {"lags": 3}} | invalid_value | /options/lags | newey_west
ordinary_least_squares | {"options": {"level": 2}} | invalid_value | /options/level | 0.5 to 0.999
ordinary_least_squares | {"options": 3} | invalid_value | /options | object
ordinary_least_squares | {"terms": ["holidays"]} | unknown_term | /terms/0 | seasonal
ordinary_least_squares | {"terms": ["constant", "constant"]} | invalid_value | /terms/1 | twice
ordinary_least_squares | {"terms": ["impulse:soon"]} | invalid_value | /terms/0 | soon
ordinary_least_squares | {"terms": ["constant", "impulse:1900"]} | outside_sample | /terms/1 | 1990
ordinary_least_squares | {"terms": ["seasonal"]} | invalid_value | /terms/0 | seasons
ordinary_least_squares | {"regressors": ["A.XAA.nothing"]} | missing_input | /regressors/0 | A.XAA.nothing
ordinary_least_squares | {"regressors": ["no key"]} | invalid_value | /regressors/0 | no key
ordinary_least_squares | {"regressors": ["Q.XAA.exports"]} | wrong_frequency | /regressors/0 | frequency Q
ordinary_least_squares | {"regressors": [{"series": "A.XAA.gdp_real", "transformation": "cube"}]} | invalid_value | /regressors/0/transformation | log_difference
ordinary_least_squares | {"regressors": [{"values": [1, 2], "from": "1990"}]} | missing_field | /regressors/0/name | name
ordinary_least_squares | {"regressors": [{"name": "z"}]} | invalid_value | /regressors/0 | either series
ordinary_least_squares | {"regressors": [{"series": "A.XAA.gdp_real", "from": "1990"}]} | invalid_value | /regressors/0/from | own periods
ordinary_least_squares | {"regressors": [{"name": "trend", "values": [1, 2], "from": "1990"}]} | invalid_value | /regressors/0/name | name of a term
ordinary_least_squares | {"regressors": [{"name": "a\nb", "values": [1, 2], "from": "1990"}]} | invalid_value | /regressors/0/name | one line
ordinary_least_squares | {"regressors": [$x, $x]} | duplicate_name | /regressors/1 | 'x'
ordinary_least_squares | {"regressors": [$gap]} | gap_in_sample | /regressors/0 | 1997
ordinary_least_squares | {"regressors": [$zero]} | not_positive | /regressors/0 | 1990
ordinary_least_squares | {"regressors": [$flat]} | collinear | /regressors/0 | flat
ordinary_least_squares | {"regressors": [$empty]} | no_common_sample | /regressors/0 | empty
ordinary_least_squares | {"sample": {"from": "2018"}} | too_few_observations | /sample | 2 observations
ordinary_least_squares | {"sample": {"from": "2050"}} | no_common_sample | /sample | no two periods
ordinary_least_squares | {"sample": {"from": "2000-Q1"}} | invalid_value | /sample/from | frequency A
ordinary_least_squares | {"sample": {"begin": "2000"}} | unknown_field | /sample/begin | from
ordinary_least_squares | {"options": {"hypotheses": [{"terms": {"z": 1}}]}} | unknown_regressor | /options | constant, x
ordinary_least_squares | {"options": {"restrictions": [{"terms": {"x": 1}, "value": 1}, {"terms": {"x": 2}, "value": 2}]}} | redundant_restriction | /options/restrictions/1 | restriction 2
ordinary_least_squares | {"options": {"restrictions": [{"terms": {"x": 1}}], "covariance": "hc1"}} | invalid_value | /options/covariance | classical
ordinary_least_squares | {"options": {"restrictions": [{"sum": 1}]}} | unknown_field | /options/restrictions/0/sum | terms
ordinary_least_squares | {"options": {"weights": $x}} | duplicate_name | /options/weights | 'x'
ordinary_least_squares | {"options": {"weights": $wave}} | invalid_option | /options/weights | positive
ordinary_least_squares | {"options": {"covariance": "newey_west", "lags": 60}} | too_many_lags | /options/lags | 60 lags
autoregressive_errors | {"options": {"procedure": "guess"}} | invalid_value | /options/procedure | cochrane_orcutt
two_stage_least_squares | {} | invalid_value | /options/endogenous | names of regressors
two_stage_least_squares | {"options": {"endogenous": ["x"], "instruments": []}} | invalid_value | /options/instruments | identify
two_stage_least_squares | {"options": {"endogenous": ["q"], "instruments": [$wave]}} | invalid_option | /options/endogenous | constant, x
two_stage_least_squares | {"options": {"endogenous": ["x"], "instruments": [$wave], "covariance": "hc3"}} | invalid_option | /options | hc1
augmented_dickey_fuller | {} | unknown_field | /regressors | dependent
augmented_dickey_fuller | {"regressors": null, "options": {"lags": 25}} | too_few_observations | /dependent | at least
augmented_dickey_fuller | {"regressors": null, "options": {"lags": 2, "max_lags": 4}} | invalid_value | /options/max_lags | lags are given
ordinary_least_squares | {"dependent": $flat} | constant_series | /dependent | flat
kpss | {"regressors": null, "dependent": $flat} | constant_series | /dependent | flat
kpss | {"regressors": null, "options": {"deterministic": "none"}} | invalid_value | /options/deterministic | constant, trend
zivot_andrews | {"regressors": null, "options": {"trim": 0.4}} | invalid_value | /options/trim | 0 to 1/3
df_gls | {"regressors": null, "options": {"draws": 200001}} | invalid_value | /options/draws | 200000
engle_granger | {"regressors": []} | invalid_value | /regressors | at least one regressor
johansen | {"terms": ["constant"]} | invalid_value | /terms/0 | options/case
johansen | {"options": {"rank": 2}} | invalid_option | /options/rank | 1 to 1
johansen | {"options": {"lags": 20}} | too_few_observations | /dependent | at least
johansen | {"options": {"draws": 0}} | invalid_option | /options/draws | rank
johansen | {"options": {"rank": 1, "draws": 0, "excluded": ["q"]}} | invalid_option | /options/excluded | y, x
autoregressive_distributed_lag | {"options": {"p": 1}} | invalid_value | /options/q | together
autoregressive_distributed_lag | {"options": {"max_q": 50, "draws": 50}} | invalid_value | /options/max_q | 24
ordinary_least_squares | {"options": {"restrictions": [{"terms": {"x": 1}}], "hypotheses": [{"terms": {"x": 1}}]}} | invalid_value | /options/hypotheses | not both
autoregressive_distributed_lag | {"options": {"p": 1, "q": [1, 1]}} | invalid_option | /options/q | one a regressor
autoregressive_distributed_lag | {"options": {"p": 12, "q": 12}} | too_few_observations | /dependent | at least
dynamic_ols | {"terms": ["seasonal"]} | unknown_field | /terms | regressors
dynamic_ols | {"options": {"leads": 9, "lagged": 9}} | too_few_observations | /dependent | at least
dynamic_ols | {"options": {"covariance": "hc0", "kernel_lags": 2}} | invalid_value | /options/kernel_lags | long_run
chow | {} | invalid_value | /options/at | first period after
chow | {"options": {"at": "1900"}} | invalid_option | /options/at | 1990
chow | {"options": {"at": "1991"}} | too_few_observations | /sample | at least
rolling | {"options": {"width": 40}} | too_few_observations | /sample | 40
unknown_break | {"options": {"trim": 0.05}} | too_few_observations | /sample | trimming
hansen_1992 | {"options": {"deterministic": "none"}} | invalid_value | /options/deterministic | constant
seemingly_unrelated | {"dependent": null, "regressors": null} | missing_field | /equations | equations
seemingly_unrelated | {"dependent": null, "regressors": null, "equations": []} | invalid_value | /equations | empty
seemingly_unrelated | {"regressors": null, "equations": [{"dependent": $y, "regressors": [$x]}]} | unknown_field | /dependent | equations
seemingly_unrelated | {"dependent": null, "regressors": null, "equations": [{"dependent": $y, "regressor": [$x]}]} | unknown_field | /equations/0/regressor | regressors
seemingly_unrelated | {"dependent": null, "regressors": null, "equations": [{"dependent": $y, "regressors": [$x]}, {"name": "other", "dependent": $y, "regressors": [$x]}]} | singular_covariance | /options | singular
seemingly_unrelated | {"dependent": null, "regressors": null, "equations": [{"dependent": $y, "regressors": [$x]}, {"dependent": $y, "regressors": [$x]}]} | duplicate_name | /equations/1 | two equations
"#;

/// Series of 30 years from 1990 that the faults name.
fn series() -> Vec<(&'static str, Value)> {
    let trend: Vec<f64> = (0..30).map(f64::from).collect();
    let of = |f: fn(f64) -> f64| trend.iter().map(|t| f(*t)).collect::<Vec<_>>();
    let wave = of(|t| (1.7 * t).sin());
    let inline =
        |name: &str, values: &[f64]| json!({"name": name, "values": values, "from": "1990"});
    let mut gap = inline("gap", &trend);
    gap["values"][7] = Value::Null;
    let mut zero = inline("zero", &trend);
    zero["transformation"] = json!("log");
    vec![
        ("$y", inline("y", &wave)),
        ("$x", inline("x", &of(|t| t + (0.9 * t).cos()))),
        ("$wave", inline("wave", &of(|t| (2.3 * t).cos()))),
        ("$flat", inline("flat", &[1.5; 30])),
        ("$gap", gap),
        ("$zero", zero),
        (
            "$empty",
            json!({"name": "empty", "values": [null, null], "from": "1990"}),
        ),
    ]
}

fn request(method: &str, fields: &str) -> String {
    let mut fields = fields.to_owned();
    for (name, series) in series() {
        fields = fields.replace(name, &series.to_string());
    }
    let series = series();
    let mut request =
        json!({"method": method, "dependent": series[0].1, "regressors": [series[1].1]});
    let request = request.as_object_mut().unwrap();
    let fields: Map<String, Value> = serde_json::from_str(&fields).unwrap();
    for (name, value) in fields {
        if value.is_null() {
            request.remove(&name);
        } else {
            request.insert(name, value);
        }
    }
    Value::Object(request.clone()).to_string()
}

#[tokio::test]
async fn every_fault_has_code_place_and_remedy() {
    let app = TestApp::start().await;
    sample::fill(&app).await;
    for line in FAULTS.trim().lines() {
        let [method, fields, code, pointer, named] = line.split(" | ").collect::<Vec<_>>()[..]
        else {
            panic!("{line}");
        };
        let answer = app.post("/v1/estimates", request(method, fields)).await;
        assert_eq!(answer.status, 422, "{line}");
        let error = answer.at("/errors/0");
        assert_eq!(error["code"], code, "{error} for {line}");
        assert_eq!(error["pointer"], pointer, "{error} for {line}");
        let text = error.to_string().to_lowercase();
        assert!(
            text.contains(&named.to_lowercase()),
            "no '{named}' in {error}"
        );
    }
    let broken = app.post("/v1/estimates", "{\"method\": ").await.expect(400);
    assert_eq!(broken.error()["code"], "invalid_json");
    // All faults of a request come at once.
    let many =
        r#"{"colour": 1, "terms": ["holidays"], "options": {"covariance": "best", "lines": 2}}"#;
    let answer = app
        .post("/v1/estimates", request("ordinary_least_squares", many))
        .await
        .expect(422);
    let count = answer.at("/errors").as_array().unwrap().len();
    assert_eq!((count, answer.at("/code")), (4, json!("bad_estimate")));
    // Nothing of this was kept.
    let kept = app.get("/v1/estimates").await.expect(200).json();
    assert_eq!(kept.as_array().unwrap().len(), 1, "{kept}");
    app.stop().await;
}
