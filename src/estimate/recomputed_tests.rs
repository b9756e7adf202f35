//! Against `estimation.json`, which `fixtures/reference/recompute_estimation.py` makes with
//! general-purpose statistics libraries from the open data in that folder, and against a second
//! program's figures on Danish money demand.

use serde_json::Value;

use super::reference_tests::{csv, json, logs, numbers};
use super::*;

pub(super) const DANISH: &str = include_str!("../../fixtures/reference/danish_money_demand.csv");
pub(super) const MACRO: &str = include_str!("../../fixtures/reference/us_macro_quarterly.csv");

/// One part of the recomputed file.
pub(super) fn recomputed(part: &str) -> Value {
    json(include_str!("../../fixtures/reference/estimation.json"))[part].take()
}

/// Relative, 1e-12 absolute near zero.
pub(super) fn close(found: f64, wanted: &Value, tolerance: f64, what: &str) {
    let wanted = wanted.as_f64().unwrap();
    let error = (found - wanted).abs();
    assert!(
        error <= tolerance * wanted.abs() + 1e-12,
        "{what}: {found} for {wanted}"
    );
}

pub(super) fn close_all(found: &[f64], wanted: &Value, tolerance: f64, what: &str) {
    let wanted = wanted.as_array().unwrap();
    assert!(found.len() >= wanted.len(), "{what}");
    for (found, wanted) in found.iter().zip(wanted) {
        close(*found, wanted, tolerance, what);
    }
}

/// Log p-values to 1e-6.
pub(super) fn close_p(found: f64, wanted: &Value, what: &str) {
    let wanted = wanted.as_f64().unwrap();
    let error = (found.ln() - wanted.ln()).abs();
    assert!(
        error <= 1e-6 * wanted.ln().abs().max(1e-3),
        "{what}: p {found} for {wanted}"
    );
}

pub(super) fn close_matrix(
    found: &crate::linalg::Matrix,
    wanted: &Value,
    tolerance: f64,
    what: &str,
) {
    for (i, row) in wanted.as_array().unwrap().iter().enumerate() {
        let found: Vec<f64> = (0..found.columns()).map(|j| found.at(i, j)).collect();
        close_all(&found, row, tolerance, what);
    }
}

pub(super) fn std_errors(covariance: &crate::linalg::Matrix) -> Vec<f64> {
    (0..covariance.rows())
        .map(|j| covariance.at(j, j).sqrt())
        .collect()
}

pub(super) fn danish() -> Ols {
    let y = csv(DANISH, "lrm");
    let mut regressors = vec![Regressor::constant(y.len())];
    regressors.extend(["lry", "ibo", "ide"].map(|c| Regressor::new(c, csv(DANISH, c))));
    Ols::fit(&y, regressors).unwrap()
}

/// Growth of a column of the US national accounts.
pub(super) fn growth(column: &str) -> Vec<f64> {
    logs(&csv(MACRO, column))
        .windows(2)
        .map(|w| w[1] - w[0])
        .collect()
}

#[test]
fn leverage_condition_and_criteria() {
    let (fit, wanted) = (danish(), recomputed("least_squares"));
    close_all(&fit.leverages(), &wanted["leverage"], 1e-10, "leverage");
    close(
        fit.condition_number(),
        &wanted["condition_number"],
        1e-9,
        "condition number",
    );
    let found = criteria(fit.log_likelihood, fit.k, fit.n);
    close(found.aicc, &wanted["aicc"], 1e-10, "AICc");
    close(
        found.hannan_quinn,
        &wanted["hannan_quinn"],
        1e-10,
        "Hannan–Quinn",
    );
    assert!((found.aic - fit.aic).abs() + (found.bic - fit.bic).abs() < 1e-10);
}

/// Standard errors at fixed bandwidths against linearmodels 7.1 and, at automatic ones, the published
/// formulas in numpy. 1e-8: normal equations of a matrix with condition 200 lose about four digits.
#[test]
fn kernels_and_bandwidths() {
    let (fit, wanted) = (danish(), recomputed("least_squares"));
    for (kernel, key) in [
        (Kernel::Bartlett, "bartlett"),
        (Kernel::Parzen, "parzen"),
        (Kernel::QuadraticSpectral, "quadratic_spectral"),
    ] {
        let wanted = &wanted["kernels"][key];
        let errors = |bandwidth, small_sample| {
            let kind = CovarianceKind::Kernel {
                kernel,
                bandwidth,
                small_sample,
            };
            std_errors(&covariance(&[&fit], kind).unwrap())
        };
        let fixed = wanted["bandwidth"].as_f64().unwrap();
        close_all(&errors(fixed, false), &wanted["bse"], 1e-8, key);
        close_all(&errors(fixed, true), &wanted["bse_small_sample"], 1e-8, key);
        let newey_west = bandwidth(&fit, kernel, BandwidthRule::NeweyWest1994).unwrap();
        close(newey_west, &wanted["newey_west_1994"], 1e-8, key);
        let andrews = bandwidth(&fit, kernel, BandwidthRule::Andrews1991).unwrap();
        close(andrews, &wanted["andrews_1991"], 1e-8, key);
        close_all(
            &errors(andrews, false),
            &wanted["bse_andrews_1991"],
            1e-8,
            key,
        );
        // White's covariance is the limit without lags.
        let white = covariance(&[&fit], CovarianceKind::Robust(Hc::Hc0)).unwrap();
        for (found, wanted) in errors(1e-9, false).iter().zip(std_errors(&white)) {
            assert!((found / wanted - 1.0).abs() < 1e-12, "{key}");
        }
    }
    let rule = bandwidth(&fit, Kernel::Bartlett, BandwidthRule::RuleOfThumb).unwrap();
    assert!((rule - 4.0).abs() < f64::EPSILON);
}

#[test]
fn weighted_least_squares() {
    let (fit, wanted) = (danish(), recomputed("least_squares"));
    let wanted = &wanted["weighted"];
    let weights: Vec<f64> = (0..55).map(|t| 1.0 + f64::from(t) / 10.0).collect();
    let found = weighted(&fit.dependent(), &fit.regressors, &weights).unwrap();
    let errors = |kind| std_errors(&covariance(&[&found.transformed], kind).unwrap());
    close_all(
        &found.transformed.coefficients,
        &wanted["params"],
        1e-9,
        "coefficients",
    );
    close_all(
        &errors(CovarianceKind::Classical),
        &wanted["bse"],
        1e-9,
        "errors",
    );
    close_all(
        &errors(CovarianceKind::Robust(Hc::Hc1)),
        &wanted["hc1"],
        1e-9,
        "HC1",
    );
    close(found.log_likelihood, &wanted["llf"], 1e-9, "likelihood");
    close(found.r2, &wanted["r2"], 1e-9, "R²");
    close_all(&found.residuals, &wanted["resid"], 1e-8, "residuals");
    // Equal weights of any size are ordinary least squares.
    let equal = weighted(&fit.dependent(), &fit.regressors, &[7.0; 55]).unwrap();
    for (a, b) in equal.transformed.coefficients.iter().zip(&fit.coefficients) {
        assert!((a / b - 1.0).abs() < 1e-11, "{a} {b}");
    }
    assert!((equal.log_likelihood / fit.log_likelihood - 1.0).abs() < 1e-12);
    assert!(weighted(&fit.dependent(), &fit.regressors, &[0.0; 55]).is_err());
}

#[test]
fn restrictions_and_their_tests() {
    let (fit, all) = (danish(), recomputed("least_squares"));
    let wanted = &all["restricted"];
    let both = [
        Restriction::new(&[("lry", 1.0)], 1.0),
        Restriction::new(&[("ibo", 1.0), ("ide", 1.0)], -2.0),
    ];
    let found = restricted(&fit, &both).unwrap();
    close_all(&found.coefficients, &wanted["params"], 1e-9, "coefficients");
    close_matrix(&found.covariance, &wanted["cov"], 1e-8, "covariance");
    close(found.ssr, &wanted["ssr"], 1e-10, "ssr");
    close(found.log_likelihood, &wanted["llf"], 1e-10, "likelihood");
    close(found.f.statistic, &wanted["f"], 1e-8, "F");
    close_p(found.f.p_value, &wanted["f_p"], "F");
    close(found.likelihood_ratio.statistic, &wanted["lr"], 1e-8, "LR");
    close_p(found.likelihood_ratio.p_value, &wanted["lr_p"], "LR");
    let test = |kind, restrictions: &[Restriction]| {
        let v = covariance(&[&fit], kind).unwrap();
        test_linear(&fit.names(), &fit.coefficients, &v, 51.0, restrictions).unwrap()
    };
    let classical = test(CovarianceKind::Classical, &both);
    close(
        classical.f.statistic,
        &wanted["f"],
        1e-8,
        "F from the covariance",
    );
    let robust = test(CovarianceKind::Robust(Hc::Hc1), &both);
    close(robust.wald.statistic, &wanted["wald_hc1"], 1e-8, "Wald");
    close_p(robust.wald.p_value, &wanted["wald_hc1_p"], "Wald");
    let t = test(CovarianceKind::Classical, &both[..1]).t.unwrap();
    close(t.statistic, &all["t"]["t"], 1e-8, "t");
    close_p(t.p_value, &all["t"]["p"], "t");
    assert_eq!(
        t.sentence,
        "lry = 1 is rejected at the 5 % level (p = 0.0028)."
    );
}

/// A restriction that the estimates meet already changes nothing; one that repeats another, or names
/// what is not there, is refused.
#[test]
fn true_redundant_and_unknown_restrictions() {
    let fit = danish();
    let held = Restriction::new(&[("lry", 1.0)], fit.coefficient("lry").unwrap());
    let found = restricted(&fit, std::slice::from_ref(&held)).unwrap();
    for (a, b) in found.coefficients.iter().zip(&fit.coefficients) {
        assert!((a / b - 1.0).abs() < 1e-9, "{a} {b}");
    }
    assert!(found.f.statistic.abs() < 1e-9);
    let twice = Restriction::new(&[("lry", 2.0)], 3.0);
    let error = restricted(&fit, &[held, twice]).unwrap_err();
    assert_eq!(error, EstimateError::RedundantRestriction { position: 2 });
    let error = restricted(&fit, &[Restriction::zero("income")]).unwrap_err();
    assert!(
        error.to_string().contains("known are const, lry, ibo, ide"),
        "{error}"
    );
}

/// A second program's figures (see README.md of the fixtures) on Danish money demand.
#[test]
fn a_second_program_agrees() {
    let wanted = json(include_str!(
        "../../fixtures/reference/danish-ols-second-program.json"
    ));
    let fit = danish();
    // That program forms X'X, and prints 15 digits: 1e-8.
    let value = |key: &str, found: f64| close(found, &wanted[key], 1e-8, key);
    value("bg1", breusch_godfrey(&fit, 1).unwrap().lm.statistic);
    value("bg4", breusch_godfrey(&fit, 4).unwrap().lm.statistic);
    value("bg4_F", breusch_godfrey(&fit, 4).unwrap().f.statistic);
    value(
        "bp_koenker",
        breusch_pagan_studentised(&fit).unwrap().lm.statistic,
    );
    value("bp_orig", breusch_pagan(&fit).unwrap().statistic);
    value("white", white(&fit).unwrap().lm.statistic);
    value("reset2", reset(&fit, 2).unwrap().statistic);
    value("reset3", reset(&fit, 3).unwrap().statistic);
    value("jb", jarque_bera(&fit).statistic);
    let watson = durbin_watson(&fit, false).unwrap();
    value("dw", watson.statistic);
    close_p(watson.p_positive, &wanted["dw_p_pan"], "Durbin–Watson");
    assert!((watson.p_negative - 1.0).abs() < 1e-7);
    assert!(
        watson.sentence.contains("is rejected"),
        "{}",
        watson.sentence
    );
    for (key, hc) in [("hc1", Hc::Hc1), ("hc3", Hc::Hc3)] {
        let v = covariance(&[&fit], CovarianceKind::Robust(hc)).unwrap();
        close_all(&std_errors(&v), &wanted[key], 1e-8, key);
    }
    assert!(durbin_watson(&fit, true).is_err());
    assert_eq!(numbers(&wanted["coef"]).len(), fit.k);
}

/// What each fault says: what is wrong, which series, what would help.
#[test]
fn faults_name_the_series() {
    let y = vec![1.0, 2.0, 4.0, 3.0];
    let gap = Regressor::new("price", vec![1.0, f64::NAN, 2.0, 5.0]);
    let error = Ols::fit(&y, vec![Regressor::constant(4), gap]).unwrap_err();
    assert_eq!(
        error.to_string(),
        "price has no finite value at observation 2; shorten the sample or fill the gap"
    );
    let flat = Ols::fit(&y, vec![Regressor::constant(4)]).unwrap();
    let error = breusch_pagan(&flat).unwrap_err();
    assert!(
        error.to_string().starts_with("const does not vary"),
        "{error}"
    );
    let error = breusch_godfrey(&flat, 3).unwrap_err();
    assert!(
        error
            .to_string()
            .contains("at least 5 observations and has 4"),
        "{error}"
    );
    assert!(ljung_box(&flat, 0).is_err());
}
