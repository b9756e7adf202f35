//! Every estimator on simulated economies that cointegrate, and the options of documents.

use serde_json::{Value, json};

use super::tests::{
    EPSILON, ETA, ETA_STAR, Inputs, PI, close, codes, document, insert, key, parse,
};
use super::*;
use crate::constraint::{Form, Region};
use crate::random::Draws;

const ALL: [&str; 11] = [
    "ols_levels",
    "ols_differences",
    "autoregressive_errors",
    "two_stage_levels",
    "two_stage_differences",
    "seemingly_unrelated",
    "seemingly_unrelated_differences",
    "ardl",
    "dols",
    "fmols",
    "johansen",
];

/// An economy whose demands hold in levels, with deviations that halve within a year and that the two equations share
/// in part. Capacity abroad and at home drive incomes and serve as instruments.
fn cointegrated(seed: u64, years: usize) -> Inputs {
    let mut draws = Draws::new(seed, 0);
    let mut walk = |drift: f64, sd: f64| -> Vec<f64> {
        let mut level = 0.0;
        (0..years)
            .map(|_| {
                level += drift + sd * draws.normal();
                level
            })
            .collect()
    };
    let (capacity, abroad) = (walk(0.025, 0.025), walk(0.03, 0.02));
    let (rm, rx, tt) = (walk(0.0, 0.04), walk(0.0, 0.04), walk(0.002, 0.03));
    let mut deviations = |before: &[f64]| -> Vec<f64> {
        let mut last = 0.0;
        (0..years)
            .map(|t| {
                last = 0.5 * last + 0.015 * draws.normal() + 0.3 * before.get(t).unwrap_or(&0.0);
                last
            })
            .collect()
    };
    let u = deviations(&[]);
    let v = deviations(&u);
    let (noise, other) = (deviations(&[]), deviations(&[]));
    let y: Vec<f64> = (0..years).map(|t| capacity[t] + 0.3 * noise[t]).collect();
    let z: Vec<f64> = (0..years).map(|t| abroad[t] + 0.3 * other[t]).collect();
    let m = (0..years).map(|t| PI * y[t] + ETA * rm[t] + u[t]).collect();
    let x = (0..years)
        .map(|t| EPSILON * z[t] - ETA_STAR * rx[t] + v[t])
        .collect();
    let mut inputs = Inputs::new();
    for (measure, logs) in [
        ("gdp_real", y),
        ("foreign_income", z),
        ("import_relative_price", rm),
        ("export_relative_price", rx),
        ("terms_of_trade", tt),
        ("imports_real", m),
        ("exports_real", x),
        ("capacity", capacity),
        ("capacity_abroad", abroad),
    ] {
        let levels = logs.into_iter().map(|v: f64| 100.0 * v.exp()).collect();
        insert(&mut inputs, measure, "1970", levels);
    }
    inputs
}

fn everything() -> Value {
    let mut value = document();
    value["estimators"] = json!(ALL);
    value["headline"]["estimator"] = json!("ardl");
    value["import_demand"]["instruments"] = json!(["A.XAA.capacity"]);
    value["export_demand"]["instruments"] = json!(["A.XAA.capacity_abroad"]);
    value["simulation"] = json!({"draws": 400});
    value
}

#[test]
fn every_estimator_recovers_an_economy_that_cointegrates() {
    let outcome = run(&parse(&everything()), &cointegrated(11, 60)).unwrap();
    let page = text::render(&outcome, &[], true);
    println!("{page}");
    assert!(page.lines().all(|l| l.chars().count() <= 100), "{page}");
    assert_eq!(outcome.estimators.len(), ALL.len());
    for (result, name) in outcome.estimators.iter().zip(ALL) {
        assert_eq!(result.estimator.code(), name);
        for (found, truth) in [
            (result.import_income_elasticity, PI),
            (result.export_income_elasticity, EPSILON),
            (result.import_price_elasticity.unwrap(), ETA),
            (result.export_price_elasticity.unwrap(), ETA_STAR),
        ] {
            let error = found.std_error;
            assert!(
                (found.value - truth).abs() < 3.5 * error,
                "{name}: {found:?} {truth}"
            );
            assert!(error > 0.0 && error < 0.3, "{name}: {found:?}");
        }
        let strong = &result.forms[2];
        assert_eq!(strong.unreliable, None, "{name}");
        let Some(Region::Interval { low, high }) = strong.numbers.interval else {
            panic!("{name}: {strong:?}");
        };
        let truth = EPSILON * outcome.growth.foreign_income / PI;
        assert!(
            low < truth + 0.3 && truth - 0.3 < high && high - low < 4.0,
            "{name}: {strong:?} {truth}"
        );
        let free = result.import_autonomous_growth.is_some();
        assert_eq!(free, result.estimator.in_differences(), "{name}");
        for equation in [&result.import_demand, &result.export_demand] {
            let cointegration = |t: &&EquationTest| t.group == TestGroup::Cointegration;
            let tested = equation.tests.iter().any(|t| cointegration(&t));
            assert_ne!(tested, result.estimator.in_differences(), "{name}");
            assert!(
                equation
                    .tests
                    .iter()
                    .any(|t| t.group == TestGroup::Diagnostic),
                "{name}"
            );
        }
    }
    let text = serde_json::to_string(&outcome).unwrap();
    let back: Outcome = serde_json::from_str(&text).unwrap();
    assert_eq!(back, outcome);
}

/// Where there is no relation, nine in ten runs of each estimator in levels come out unreliable.
#[test]
fn without_cointegration_levels_come_out_unreliable() {
    let mut value = document();
    let estimators = ["ols_levels", "ardl", "dols", "fmols", "johansen"];
    value["estimators"] = json!(estimators);
    value["headline"]["estimator"] = json!("ardl");
    value["simulation"] = json!({"draws": 100});
    let document = parse(&value);
    let runs = 20;
    let mut marked = [0; 5];
    for seed in 0..runs {
        let mut inputs = cointegrated(seed, 40);
        let other = cointegrated(seed + 1000, 40);
        for measure in ["imports_real", "exports_real"] {
            inputs.insert(key(measure), other[&key(measure)].clone());
        }
        let outcome = run(&document, &inputs).unwrap();
        for (count, result) in marked.iter_mut().zip(&outcome.estimators) {
            *count += u32::from(result.forms[2].numbers.rate.is_none());
        }
    }
    println!("of {runs}: {marked:?} for {estimators:?}");
    assert!(marked.iter().all(|m| *m >= 18), "{marked:?}");
}

#[test]
fn joint_and_zero_covariance_differ_in_the_interval_alone() {
    for estimator in [
        "ardl",
        "dols",
        "fmols",
        "johansen",
        "ols_levels",
        "seemingly_unrelated",
    ] {
        let mut value = document();
        value["estimators"] = json!([estimator]);
        value["headline"]["estimator"] = json!(estimator);
        if ["ardl", "johansen"].contains(&estimator) {
            value["simulation"] = json!({"draws": 100});
        }
        let inputs = cointegrated(3, 60);
        let joint = run(&parse(&value), &inputs).unwrap();
        value["interval"] = json!({"cross_covariance": "zero"});
        let zero = run(&parse(&value), &inputs).unwrap();
        let numbers = |o: &Outcome| {
            let form = &o.estimators[0].forms[2];
            form.unreliable
                .as_ref()
                .map_or(&form.numbers, |u| &u.numbers)
                .clone()
        };
        let (joint, zero) = (numbers(&joint), numbers(&zero));
        assert_eq!(joint.rate, zero.rate, "{estimator}");
        let ratio = joint.std_error.unwrap() / zero.std_error.unwrap();
        assert!(
            (ratio - 1.0).abs() > 1e-3 && (0.5..1.5).contains(&ratio),
            "{estimator}: {ratio}"
        );
    }
}

/// A trend and a step are autonomous growth and a break: told by name, and the same model in differences.
#[test]
fn terms_enter_by_name() {
    let mut value = everything();
    value["estimators"] = json!(["ols_levels", "ols_differences", "ardl"]);
    for side in ["import_demand", "export_demand"] {
        value[side].as_object_mut().unwrap().remove("instruments");
    }
    value["import_demand"]["terms"] = json!(["trend", {"step": "1990"}, {"impulse": "2001"}]);
    let mut inputs = cointegrated(5, 60);
    let imports = inputs.get_mut(&key("imports_real")).unwrap();
    for (t, value) in imports.values.iter_mut().enumerate() {
        let years = f64::from(u32::try_from(t).unwrap());
        *value *= (0.01 * years + if t >= 20 { 0.3 } else { 0.0 }).exp();
    }
    let outcome = run(&parse(&value), &inputs).unwrap();
    let coefficient = |i: usize, name: &str| {
        let list = &outcome.estimators[i].import_demand.coefficients;
        let found = list.iter().find(|c| c.name == name);
        found
            .unwrap_or_else(|| panic!("{name} is not in {list:?}"))
            .clone()
    };
    let near = |found: CoefficientResult, truth: f64| {
        let error = found.std_error.unwrap();
        assert!(
            (found.estimate - truth).abs() < 4.0 * error,
            "{found:?} {truth}"
        );
    };
    near(coefficient(0, "trend"), 0.01);
    near(coefficient(0, "step 1990"), 0.3);
    near(coefficient(1, "constant"), 0.01);
    near(coefficient(1, "step 1990"), 0.3);
    coefficient(1, "impulse 2001");
    for result in &outcome.estimators {
        let growth = result.import_autonomous_growth.unwrap();
        assert!(
            (growth.value - 1.0).abs() < 4.0 * growth.std_error,
            "{growth:?}"
        );
        let weak = &result.forms[0];
        let numbers = weak
            .unreliable
            .as_ref()
            .map_or(&weak.numbers, |u| &u.numbers);
        assert!(numbers.rate_with_autonomous_growth < numbers.rate);
    }
    let dynamics = outcome.estimators[2]
        .import_demand
        .dynamics
        .as_ref()
        .unwrap();
    assert_eq!(dynamics.case, Some(ArdlCase::V));

    let exports = outcome.estimators[2]
        .export_demand
        .dynamics
        .as_ref()
        .unwrap();
    assert_eq!(exports.case, Some(ArdlCase::III));
    assert!(exports.choice.as_ref().unwrap().starts_with("BIC among"));
}

/// A further regressor with its own response; what it adds at its mean growth counts as autonomous.
#[test]
fn further_regressors_have_responses_of_their_own() {
    let mut inputs = cointegrated(5, 60);
    let extra: Vec<f64> = {
        let mut draws = Draws::new(99, 0);
        let mut level = 0.0;
        (0..60)
            .map(|_| {
                level += 0.02 + 0.05 * draws.normal();
                level
            })
            .collect()
    };
    let imports = inputs.get_mut(&key("imports_real")).unwrap();
    for (value, extra) in imports.values.iter_mut().zip(&extra) {
        *value *= (0.4 * extra).exp();
    }
    insert(
        &mut inputs,
        "credit_price",
        "1970",
        extra.iter().map(|v| v.exp()).collect(),
    );
    let mut value = document();
    value["estimators"] = json!(["ols_differences", "ardl", "dols", "fmols", "johansen"]);
    value["simulation"] = json!({"draws": 100});
    value["import_demand"]["further"] = json!(["A.XAA.credit_price"]);
    let outcome = run(&parse(&value), &inputs).unwrap();
    let mean = (extra[59] - extra[0]) / 59.0;
    for (i, result) in outcome.estimators.iter().enumerate() {
        let equation = &result.import_demand;
        let response = equation
            .long_run
            .iter()
            .find(|c| c.name == "further 1")
            .map(|c| c.estimate)
            .or_else(|| {
                Some(
                    equation
                        .coefficients
                        .iter()
                        .find(|c| c.name == "further 1")?
                        .estimate,
                )
            })
            .unwrap();
        assert!(
            (response - 0.4).abs() < 0.12,
            "{:?} {response}",
            result.estimator
        );
        let added = result.import_autonomous_growth.unwrap().value / 100.0;
        if i > 0 {
            close(added, response * mean, "added growth");
        }
    }
}

#[test]
fn instruments_are_tested() {
    let mut value = everything();
    value["estimators"] = json!(["two_stage_differences"]);
    value["headline"]["estimator"] = json!("two_stage_differences");
    value.as_object_mut().unwrap().remove("simulation");
    value["import_demand"]["instruments"] = json!(["A.XAA.capacity", "A.XAA.capacity_abroad"]);
    let outcome = run(&parse(&value), &cointegrated(11, 60)).unwrap();
    let names = |e: &EquationResult| -> Vec<String> {
        let instruments = e.tests.iter().filter(|t| t.group == TestGroup::Instruments);
        instruments.map(|t| t.name.clone()).collect()
    };
    let result = &outcome.estimators[0];
    assert_eq!(
        names(&result.import_demand),
        [
            "first-stage F",
            "effective F",
            "Anderson–Rubin",
            "Sargan",
            "Hansen J"
        ]
    );
    assert_eq!(
        names(&result.export_demand),
        ["first-stage F", "effective F", "Anderson–Rubin"]
    );
}

/// A result stored by study/1 has none of the later fields.
#[test]
fn results_of_the_first_method_are_still_read() {
    let outcome = run(&parse(&document()), &cointegrated(11, 40)).unwrap();
    let mut value = serde_json::to_value(&outcome).unwrap();
    for estimator in value["estimators"].as_array_mut().unwrap() {
        for side in ["import_demand", "export_demand"] {
            let equation = estimator[side].as_object_mut().unwrap();
            for later in [
                "error_autocorrelation",
                "long_run",
                "adjustment",
                "dynamics",
                "tests",
            ] {
                equation.remove(later).unwrap();
            }
            for coefficient in equation["coefficients"].as_array_mut().unwrap() {
                coefficient
                    .as_object_mut()
                    .unwrap()
                    .remove("std_error")
                    .unwrap();
            }
        }
    }
    let back: Outcome = serde_json::from_value(value).unwrap();
    assert_eq!(back.estimators[0].forms, outcome.estimators[0].forms);
    let page = text::render(&back, &[], false);
    assert!(!page.contains("Tests of the equations"), "{page}");
}

#[test]
fn options_that_do_not_apply_are_refused_where_they_stand() {
    let cases = [
        ("/ardl", json!({"ardl": {"max_lags": 2}})),
        ("/johansen", json!({"johansen": {}})),
        ("/simulation", json!({"simulation": {"draws": 1000}})),
        (
            "/covariance",
            json!({"estimators": ["ardl"], "covariance": "classical"}),
        ),
        ("/lags", json!({"estimators": ["ardl"], "lags": 3})),
        (
            "/ardl/max_lags",
            json!({"estimators": ["ardl"], "ardl": {"max_lags": 0}}),
        ),
        (
            "/ardl/case",
            json!({"estimators": ["ardl"], "ardl": {"case": "VI"}}),
        ),
        (
            "/ardl/cases",
            json!({"estimators": ["ardl"], "ardl": {"cases": "I"}}),
        ),
        (
            "/ardl/import_orders",
            json!({"estimators": ["ardl"], "ardl": {"import_orders": [1, 1]}}),
        ),
        (
            "/ardl/export_orders",
            json!({"estimators": ["ardl"], "ardl": {"export_orders": [0, 1, 1]}}),
        ),
        (
            "/simulation/draws",
            json!({"estimators": ["ardl"], "simulation": {"draws": 1}}),
        ),
        (
            "/import_demand/instruments",
            json!({"estimators": ["two_stage_levels"]}),
        ),
        (
            "/import_demand/instruments",
            json!({"/import_demand/instruments": ["A.XAA.z"]}),
        ),
        (
            "/import_demand/endogenous",
            json!({"/import_demand/endogenous": ["activity"]}),
        ),
        (
            "/import_demand/terms/0",
            json!({"/import_demand/terms": ["seasonal"]}),
        ),
        (
            "/import_demand/terms/0",
            json!({"/import_demand/terms": ["cycle"]}),
        ),
        (
            "/export_demand/terms/1",
            json!({"/export_demand/terms": ["trend", {"step": "1990-Q1"}]}),
        ),
        (
            "/export_demand/terms/1",
            json!({"/export_demand/terms": ["trend", "trend"]}),
        ),
        (
            "/export_demand/terms/0",
            json!({"estimators": ["dols"], "/export_demand/terms": [{"impulse": "1990"}]}),
        ),
        (
            "/ardl/case",
            json!({"estimators": ["ardl"], "ardl": {"case": "III"}, "/export_demand/terms": ["trend"]}),
        ),
        (
            "/import_demand/further/0",
            json!({"/import_demand/further": ["Q.XAA.credit"]}),
        ),
    ];
    for (pointer, change) in cases {
        let mut value = document();
        for (name, part) in change.as_object().unwrap() {
            if let Some((parent, field)) = name.strip_prefix('/').and_then(|n| n.split_once('/')) {
                value[parent][field] = part.clone();
            } else {
                value[name] = part.clone();
            }
        }
        value["headline"]["estimator"] = value["estimators"][0].clone();
        let findings = Document::parse(&value.to_string()).unwrap_err();
        let first = findings[0].place.pointer.as_deref();
        assert_eq!(first, Some(pointer), "{findings:?}");
    }
    let document = parse(&everything());
    let text = serde_json::to_string(&document).unwrap();
    assert_eq!(Document::parse(&text).unwrap(), document);
    assert_eq!(document.forms, Form::ALL);
}

/// Findings that single estimators carry.
#[test]
fn estimators_say_what_speaks_against_them() {
    let outcome = run(&parse(&everything()), &cointegrated(11, 60)).unwrap();
    let all = |i: usize| codes(&outcome.estimators[i].findings);
    assert!(all(0).contains(&"levels_inference_invalid"));
    assert!(all(0).contains(&"income_endogenous"));
    assert!(!all(7).contains(&"levels_inference_invalid"));
    let errors = outcome.estimators.iter().flat_map(|e| &e.findings);
    let errors: Vec<_> = errors
        .filter(|f| f.severity == crate::finding::Severity::Error)
        .collect();
    assert!(errors.is_empty(), "{errors:?}");

    // A walk of growth rates as foreign income.
    let mut inputs = cointegrated(11, 60);
    let income = inputs.get_mut(&key("foreign_income")).unwrap();
    let mut draws = Draws::new(4, 0);
    let (mut growth, mut level) = (0.03, 0.0);
    for value in &mut income.values {
        growth += 0.01 * draws.normal();
        level += growth;
        *value = f64::exp(level);
    }
    let outcome = run(&parse(&document()), &inputs).unwrap();
    let found = outcome
        .findings
        .iter()
        .find(|f| f.code == "i2_variable")
        .unwrap();
    assert_eq!(found.place.series.as_deref(), Some("A.XAA.foreign_income"));
}
