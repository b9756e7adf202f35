//! ARDL equations against a general-purpose library (statsmodels 0.15.0).

use approx::assert_relative_eq;
use serde_json::Value;

use super::super::test_data::{AREAS, close, count, danish, dynamics, numbers, penn, us_trade};
use super::super::{Deterministic, Ols, Regressor, SeriesError};
use super::*;

fn orders(value: &Value) -> ArdlOrders {
    let all: Vec<usize> = value.as_array().unwrap().iter().map(count).collect();
    ArdlOrders {
        p: all[0],
        q: all[1..].to_vec(),
    }
}

const CASES: [(&str, BoundsCase); 5] = [
    ("case1", BoundsCase::I),
    ("case2", BoundsCase::II),
    ("case3", BoundsCase::III),
    ("case4", BoundsCase::IV),
    ("case5", BoundsCase::V),
];

fn check(what: &str, y: &Regressor, x: &[Regressor], expected: &Value) {
    let data = ArdlData { y, x, fixed: &[] };
    let case = if expected["det"] == "c" {
        BoundsCase::III
    } else {
        BoundsCase::V
    };
    let orders = orders(&expected["order"]);
    let fit = Ardl::fit(&data, orders.clone(), case).unwrap();
    let number = |key: &str| expected[key].as_f64().unwrap();
    for (key, found) in [
        ("ect_coef", fit.adjustment),
        ("ect_bse", fit.adjustment_error),
        ("ssr", fit.ecm.ssr),
        ("s2", fit.ecm.s2),
        ("llf", fit.ecm.log_likelihood),
        ("aic", fit.ecm.aic),
        ("bic", fit.ecm.bic),
    ] {
        close(&format!("{what} {key}"), found, number(key), 1e-8);
    }
    match (fit.half_life, expected["half_life_periods"].as_f64()) {
        (Some(found), Some(wanted)) => close(what, found, wanted, 1e-8),
        (found, wanted) => assert_eq!(found, wanted, "{what}"),
    }
    for c in &fit.long_run {
        let wanted = &expected["longrun"][&c.name];
        let what = format!("{what} long run {}", c.name);
        close(&what, c.value, wanted["coef"].as_f64().unwrap(), 1e-8);
        close(
            &what,
            c.standard_error,
            wanted["se"].as_f64().unwrap(),
            1e-8,
        );
        let p = wanted["p_t_df_resid"].as_f64().unwrap();
        close(&what, c.p_value.ln(), p.ln(), 1e-6);
    }
    assert_eq!(
        fit.long_run.len(),
        expected["longrun"].as_object().unwrap().len()
    );
    // The library's own order of terms is the same where no regressor has order 0.
    if orders.q.iter().all(|q| *q > 0) && expected["uecm_params"].is_array() {
        for (j, wanted) in numbers(&expected["uecm_params"]).into_iter().enumerate() {
            close(
                &format!("{what} ecm {j}"),
                fit.ecm.coefficients[j],
                wanted,
                1e-8,
            );
        }
    }
    if expected["ardl"].is_object() {
        let terms = case.deterministic().terms();
        let wanted = numbers(&expected["ardl"]["params"]);
        let errors = numbers(&expected["ardl"]["bse"]);
        assert_eq!(fit.levels.len(), wanted.len() - terms);
        for (j, found) in fit.levels.iter().enumerate() {
            let what = format!("{what} levels {j}");
            close(&what, *found, wanted[terms + j], 1e-8);
            let error = fit.levels_covariance.at(j, j).sqrt();
            close(&what, error, errors[terms + j], 1e-8);
        }
    }
    for (key, case) in CASES {
        let wanted = &expected["bounds"][key];
        if !wanted.is_object() {
            continue;
        }
        let fit = Ardl::fit(&data, orders.clone(), case).unwrap();
        let found = fit.bounds().unwrap();
        let what = format!("{what} {key}");
        close(&what, found.f, wanted["F_by_hand"].as_f64().unwrap(), 1e-8);
        close(&what, found.t, wanted["t_y_lag1"].as_f64().unwrap(), 1e-8);
        assert_eq!(
            Some(found.restrictions as u64),
            wanted["restrictions"].as_u64()
        );
        assert_eq!(Some(found.observations as u64), wanted["n"].as_u64());
    }
}

fn check_selection(y: &Regressor, x: &[Regressor], expected: &Value) {
    let data = ArdlData { y, x, fixed: &[] };
    let most = |key: &str| count(&expected[key]);
    let max_q = vec![most("maxorder"); x.len()];
    for (key, criterion) in [
        ("aic", InformationCriterion::Aic),
        ("bic", InformationCriterion::Bic),
    ] {
        let terms = Deterministic::Constant;
        let found = select_orders(&data, most("maxlag"), &max_q, terms, criterion).unwrap();
        assert_eq!(found.observations, most("common_n"));
        assert_eq!(found.compared + found.too_large, most("models"));
        assert_eq!(found.too_large, 0);
        for (found, wanted) in found.best.iter().zip(expected[key].as_array().unwrap()) {
            assert_eq!(found.orders, orders(&wanted["order"]));
            close(
                key,
                found.criterion,
                wanted["ic_ols"].as_f64().unwrap(),
                1e-8,
            );
        }
    }
}

#[test]
fn danish_money_demand() {
    let expected = &dynamics()["danish"];
    let (y, x) = (danish("lrm"), ["lry", "ibo", "ide"].map(danish));
    check("Denmark", &y, &x, &expected["ardl_3132"]);
    check("Denmark", &y, &x, &expected["ardl_3132_trend"]);
    check_selection(&y, &x, &expected["ardl_selection_5_5"]);
}

#[test]
fn us_import_demand() {
    let expected = &dynamics()["us_trade"]["ardl"];
    let y = us_trade("ln_imports_real");
    let x = ["ln_real_gdp", "ln_pm_over_cpi"].map(us_trade);
    check("US", &y, &x, &expected["best_aic"]);
    check("US", &y, &x, &expected["best_bic"]);
    check_selection(&y, &x, &expected["selection"]);
}

#[test]
fn demand_of_four_countries() {
    let expected = dynamics();
    for area in AREAS {
        let e = &expected["pwt91"][area];
        let (m, x) = (penn(area, "ln_m"), penn(area, "ln_x"));
        let imports = ["ln_y", "ln_rpm"].map(|s| penn(area, s));
        let exports = ["ln_z", "ln_rpx"].map(|s| penn(area, s));
        check(area, &m, &imports, &e["import_ardl_111"]);
        check(area, &x, &exports, &e["export_ardl_111"]);
        check(area, &m, &imports, &e["import_ardl"]["best_aic"]);
        check_selection(&m, &imports, &e["import_ardl"]["selection"]);
    }
}

/// A second, slow and obvious search: every equation fitted by itself.
#[test]
fn the_walk_finds_what_fitting_every_equation_finds() {
    let (y, x) = (danish("lrm"), ["lry", "ibo"].map(danish));
    let season = Regressor::new(
        "q1",
        (0..55).map(|t| f64::from(u8::from(t % 4 == 0))).collect(),
    );
    let data = ArdlData {
        y: &y,
        x: &x,
        fixed: &[season],
    };
    let terms = Deterministic::Trend;
    let criterion = InformationCriterion::Bic;
    let found = select_orders(&data, 3, &[2, 3], terms, criterion).unwrap();
    let mut slow = Vec::new();
    for (p, q, r) in
        (1..=3).flat_map(|p| (0..=2).flat_map(move |q| (0..=3).map(move |r| (p, q, r))))
    {
        let orders = ArdlOrders { p, q: vec![q, r] };
        let columns = data.columns(terms, &orders, 3);
        let change = super::super::series_error::differences(&y.values[2..]);
        slow.push((Ols::fit(&change, columns).unwrap().bic, orders));
    }
    slow.sort_by(|a, b| a.0.total_cmp(&b.0));
    assert_eq!(found.compared, slow.len());
    for (candidate, (bic, orders)) in found.best.iter().zip(&slow) {
        assert_eq!(candidate.orders, *orders);
        assert_relative_eq!(candidate.criterion, *bic, max_relative = 1e-10);
    }
}

#[test]
fn equations_that_leave_too_few_degrees_of_freedom_are_no_candidates() {
    let cut = |name: &str| Regressor::new(name, danish(name).values[..24].to_vec());
    let (y, x) = (cut("lrm"), ["lry", "ibo", "ide"].map(cut));
    let data = ArdlData {
        y: &y,
        x: &x,
        fixed: &[],
    };
    let terms = Deterministic::Constant;
    let found = select_orders(&data, 4, &[4, 4, 4], terms, InformationCriterion::Aic).unwrap();
    // n = 20: at most 10 coefficients, of them the constant, p and one a regressor at least.
    let allowed = (1..=4_usize)
        .flat_map(|p| (0..125_usize).map(move |c| p + c % 5 + c / 5 % 5 + c / 25))
        .filter(|sum| sum + 4 <= 10)
        .count();
    assert_eq!(found.compared, allowed);
    assert_eq!(found.compared + found.too_large, 500);
    let most = |c: &Candidate| c.orders.p + c.orders.q.iter().sum::<usize>();
    assert!(found.best.iter().all(|c| most(c) + 4 <= 10));

    // n = 12 and no regressor: at most 2 coefficients, the constant and one lag.
    let data = ArdlData {
        y: &y,
        x: &[],
        fixed: &[],
    };
    let found = select_orders(&data, 12, &[], terms, InformationCriterion::Aic).unwrap();
    assert_eq!((found.compared, found.too_large), (1, 11));
}

#[test]
fn multipliers_tend_to_the_long_run_and_begin_at_the_impact() {
    let (y, x) = (danish("lrm"), ["lry", "ibo", "ide"].map(danish));
    let data = ArdlData {
        y: &y,
        x: &x,
        fixed: &[],
    };
    let orders = ArdlOrders {
        p: 3,
        q: vec![1, 3, 2],
    };
    let fit = Ardl::fit(&data, orders, BoundsCase::III).unwrap();
    for (j, x) in x.iter().enumerate() {
        let m = fit.multipliers(j, 400, 0.05).unwrap();
        let long_run = fit.long_run(&x.name).unwrap();
        assert_relative_eq!(m.response[400], long_run.value, max_relative = 1e-9);
        assert_relative_eq!(
            m.standard_error[400],
            long_run.standard_error,
            max_relative = 1e-6
        );
        let impact = fit.ecm.coefficient(&format!("d.{}.L0", x.name)).unwrap();
        assert_relative_eq!(m.response[0], impact, max_relative = 1e-12);
    }
    assert!(fit.multipliers(3, 4, 0.05).is_none());
}

#[test]
fn faults_are_told() {
    let (y, lry) = (danish("lrm"), danish("lry"));
    let twin = Regressor::new("twin", lry.values.iter().map(|v| 2.0 * v + 1.0).collect());
    let x = [lry.clone(), twin];
    let data = ArdlData {
        y: &y,
        x: &x,
        fixed: &[],
    };
    let fit =
        |q: Vec<usize>| Ardl::fit(&data, ArdlOrders { p: 1, q }, BoundsCase::III).unwrap_err();
    let SeriesError::Collinear { series, terms } = fit(vec![1, 1]) else {
        panic!();
    };
    assert!(series == "lrm" && terms.contains(&"twin.L1".to_owned()));
    assert!(matches!(fit(vec![1]), SeriesError::Option { .. }));
    assert!(matches!(fit(vec![20, 20]), SeriesError::TooShort { .. }));
    let found = select_orders(
        &data,
        2,
        &[1, 1],
        Deterministic::Constant,
        InformationCriterion::Aic,
    );
    // Every equation holds both twins.
    assert!(matches!(found, Err(SeriesError::TooShort { .. })));
}
