//! Cointegration against general-purpose libraries (statsmodels 0.15.0, urca 1.3.3) and by-hand
//! computations of the five deterministic cases.

use serde_json::Value;

use super::super::test_data::{
    AREAS, close, count, crosscheck, danish, dynamics, numbers, penn, us_log, us_trade,
};
use super::super::unit_root::{LagCriterion, Lags};
use super::super::{Deterministic, Regressor, SeriesError};
use super::*;
use crate::linalg::Matrix;
use crate::linalg::decompose::column;

/// Centred dummies of the first three quarters: 1 − ¼ in the quarter, −¼ elsewhere.
fn seasonal(n: usize) -> Vec<Regressor> {
    (0..3)
        .map(|q| {
            let value = |t: usize| if t % 4 == q { 0.75 } else { -0.25 };
            Regressor::new(&format!("season{}", q + 1), (0..n).map(value).collect())
        })
        .collect()
}

const CASES: [(&str, JohansenCase); 5] = [
    ("n", JohansenCase::None),
    ("rc", JohansenCase::RestrictedConstant),
    ("uc", JohansenCase::Constant),
    ("rt", JohansenCase::RestrictedTrend),
    ("ut", JohansenCase::Trend),
];

fn compare(what: &str, found: &Johansen, expected: &Value) {
    assert_eq!(Some(found.observations as u64), expected["n"].as_u64());
    for (i, test) in found.tests.iter().enumerate() {
        let what = format!("{what} {i}");
        close(
            &what,
            found.eigenvalues[i],
            numbers(&expected["eigenvalues"])[i],
            1e-8,
        );
        close(
            &what,
            test.trace,
            numbers(&expected["trace_r0_up"])[i],
            1e-8,
        );
        close(
            &what,
            test.max_eigenvalue,
            numbers(&expected["maxeig_r0_up"])[i],
            1e-8,
        );
    }
    let beta = found.relation(0, 0).unwrap();
    for (i, wanted) in numbers(&expected["beta1_normalised_on_first"])
        .iter()
        .enumerate()
    {
        close(&format!("{what} β {i}"), beta[i], *wanted, 1e-7);
    }
    let model = found.vecm(1).unwrap();
    for (i, wanted) in numbers(&expected["alpha1"]).iter().enumerate() {
        close(
            &format!("{what} α {i}"),
            model.alpha.at(i, 0),
            *wanted,
            1e-7,
        );
    }
}

fn five_cases(
    what: &str,
    series: &[Regressor],
    lags: usize,
    w: &[Regressor],
    expected: &Value,
    prefix: &str,
) {
    for (code, case) in CASES {
        let found = johansen(series, lags, case, w).unwrap();
        compare(
            &format!("{what} {code}"),
            &found,
            &expected[format!("{prefix}{code}")],
        );
    }
}

#[test]
fn five_deterministic_cases() {
    let expected = dynamics();
    let money = ["lrm", "lry", "ibo", "ide"].map(danish);
    let d = &expected["danish"];
    five_cases("Denmark", &money, 2, &[], &d["johansen_k2"], "by_hand_");
    five_cases("Denmark", &money, 3, &[], &d["johansen_k3"], "by_hand_");
    five_cases(
        "seasonal",
        &money,
        2,
        &seasonal(55),
        &d["johansen_k2_seasonal"],
        "",
    );
    let us = ["ln_imports_real", "ln_real_gdp", "ln_pm_over_cpi"].map(us_trade);
    five_cases(
        "US",
        &us,
        2,
        &[],
        &expected["us_trade"]["johansen_k2"],
        "by_hand_",
    );
    let spent = ["realcons", "realdpi"].map(us_log);
    five_cases(
        "spending",
        &spent,
        3,
        &[],
        &expected["us_macro"]["johansen_k3"],
        "by_hand_",
    );
    for area in AREAS {
        let series = ["ln_m", "ln_y", "ln_rpm"].map(|s| penn(area, s));
        let e = &expected["pwt91"][area]["johansen_import_k2"];
        five_cases(area, &series, 2, &[], e, "by_hand_");
    }
}

#[test]
fn an_independent_program_agrees() {
    let r = crosscheck();
    let money = ["lrm", "lry", "ibo", "ide"].map(danish);
    for (key, case, w) in [
        (
            "danish_johansen_rc_seasonal",
            JohansenCase::RestrictedConstant,
            seasonal(55),
        ),
        ("danish_johansen_uc", JohansenCase::Constant, vec![]),
        ("danish_johansen_rt", JohansenCase::RestrictedTrend, vec![]),
    ] {
        let found = johansen(&money, 2, case, &w).unwrap();
        let (trace, max) = (
            numbers(&r[key]["trace_high_r_first"]),
            numbers(&r[key]["maxeig_high_r_first"]),
        );
        for i in 0..4 {
            close(
                key,
                found.eigenvalues[i],
                numbers(&r[key]["lambda"])[i],
                1e-8,
            );
            close(key, found.tests[i].trace, trace[3 - i], 1e-8);
            close(key, found.tests[i].max_eigenvalue, max[3 - i], 1e-8);
        }
        let (beta, model) = (found.relation(0, 0).unwrap(), found.vecm(1).unwrap());
        for (i, wanted) in numbers(&r[key]["beta1"]).iter().enumerate() {
            // This program's own rounding in β: 2e-8 between its two parametrisations.
            let tolerance = if key.ends_with("rt") { 1e-5 } else { 1e-6 };
            close(key, beta[i], *wanted, tolerance);
        }
        for (i, wanted) in numbers(&r[key]["alpha1"]).iter().enumerate() {
            close(key, model.alpha.at(i, 0), *wanted, 1e-6);
        }
    }
}

#[test]
fn vector_error_correction() {
    let expected = &dynamics()["danish"]["vecm_ci_seasonal_rank1"];
    let money = ["lrm", "lry", "ibo", "ide"].map(danish);
    let case = JohansenCase::RestrictedConstant;
    let system = johansen(&money, 2, case, &seasonal(55)).unwrap();
    let found = system.vecm(1).unwrap();
    for i in 0..4 {
        let at = |key: &str| expected[key][i][0].as_f64().unwrap();
        close("β", found.beta.at(i, 0), at("beta"), 1e-8);
        close("α", found.alpha.at(i, 0), at("alpha"), 1e-7);
        close(
            "se α",
            found.alpha_errors.at(i, 0),
            at("stderr_alpha"),
            1e-6,
        );
        close("se β", found.beta_errors.at(i, 0), at("stderr_beta"), 1e-6);
        for (j, wanted) in numbers(&expected["gamma"][i]).into_iter().enumerate() {
            let equation = &found.equations[i];
            let name = format!("d.{}.L1", money[j].name);
            close("Γ", equation.coefficient(&name).unwrap(), wanted, 1e-7);
        }
    }
    close(
        "llf",
        found.log_likelihood,
        expected["llf"].as_f64().unwrap(),
        1e-8,
    );
    // The likelihood of the equations themselves.
    let omega = crate::linalg::decompose::determinant(&found.residual_covariance);
    let direct = -0.5 * 53.0 * (4.0 * (2.0 * std::f64::consts::PI).ln() + 4.0 + omega.ln());
    close("llf", found.log_likelihood, direct, 1e-10);
    let two = system.vecm(2).unwrap();
    assert!(two.log_likelihood > found.log_likelihood && two.beta_errors.at(2, 1) > 0.0);
    assert!(system.vecm(0).is_err() && system.vecm(4).is_err());
}

/// Johansen & Juselius 1990, section 5.1: equal and opposite coefficients of money and income, and of the
/// two rates, are not rejected. The statistics are checked against models fitted by themselves.
#[test]
fn restrictions_on_relations_and_loadings() {
    let money = ["lrm", "lry", "ibo", "ide"].map(danish);
    let case = JohansenCase::RestrictedConstant;
    let system = johansen(&money, 2, case, &seasonal(55)).unwrap();
    let h = Matrix::from_fn(5, 3, |i, j| match (i, j) {
        (0, 0) | (2, 1) | (4, 2) => 1.0,
        (1, 0) | (3, 1) => -1.0,
        _ => 0.0,
    });
    let both = system.restrict_beta(1, &h).unwrap();
    assert_eq!(both.df, 2);
    close(
        "β₁ + β₂",
        both.beta.at(0, 0) + both.beta.at(1, 0),
        0.0,
        1e-12,
    );
    assert!(both.p_value > 0.05 && both.statistic > 0.0, "{both:?}");
    // Leaving out the last row is the same as a system without it: no constant at all.
    let dropped = system
        .restrict_beta(1, &system.without(&["const"]))
        .unwrap();
    let smaller = johansen(&money, 2, JohansenCase::None, &seasonal(55)).unwrap();
    let direct = 2.0 * (system.log_likelihood(1) - smaller.log_likelihood(1));
    close("no constant", dropped.statistic, direct, 1e-8);
    // The rank tests are likelihood ratios too.
    let ratio = 2.0 * (system.log_likelihood(4) - system.log_likelihood(0));
    close("trace", system.tests[0].trace, ratio, 1e-8);
    // Nothing restricted, nothing lost.
    let all = system.restrict_beta(2, &system.without(&[])).unwrap();
    assert!(all.df == 0 && all.statistic < 1e-9);

    // Weak exogeneity of two series against the likelihood by alternating maximisation.
    let exogenous = system.weakly_exogenous(1, &[1, 2]).unwrap();
    assert_eq!(exogenous.df, 2);
    let direct = 2.0 * (system.log_likelihood(1) - switching(&system, &[0, 3]));
    close("weak exogeneity", exogenous.statistic, direct, 1e-6);
    assert!(system.weakly_exogenous(1, &[0, 0]).is_err());
    assert!(system.weakly_exogenous(3, &[0, 1]).is_err());
    assert!(
        system
            .restrict_beta(1, &Matrix::from_fn(5, 2, |_, _| 1.0))
            .is_err()
    );
}

/// Log-likelihood at rank 1 with loadings free in some equations only: generalised least squares for α
/// given β, then for β given α, until nothing changes. Slow and independent of the eigenvalue problem.
fn switching(system: &Johansen, free: &[usize]) -> f64 {
    use crate::linalg::decompose::{cross, determinant, inverse};
    let (p, n) = (system.series, system.observations as f64);
    let mut beta = Matrix::from_fn(system.vectors.rows(), 1, |i, _| system.vectors.at(i, 0));
    let mut alpha = Matrix::from_fn(p, 1, |i, _| if free.contains(&i) { 0.1 } else { 0.0 });
    let mut likelihood = f64::NEG_INFINITY;
    for _ in 0..5000 {
        let z = system.r1.times(&beta);
        let fitted = z.times(&alpha.transposed());
        let e = Matrix::from_fn(z.rows(), p, |t, i| system.r0.at(t, i) - fitted.at(t, i));
        let ee = cross(&e, &e);
        let omega = Matrix::from_fn(p, p, |i, j| ee.at(i, j) / n);
        let now = -0.5
            * n
            * (p as f64 * ((2.0 * std::f64::consts::PI).ln() + 1.0) + determinant(&omega).ln());
        if (now - likelihood).abs() < 1e-13 * now.abs() {
            return now;
        }
        likelihood = now;
        let weight = inverse(&omega).unwrap();
        // α: minimise tr Ω⁻¹ (R0 − zα')'(R0 − zα') over the free rows.
        let zz = cross(&z, &z).at(0, 0);
        let target = weight.times(&cross(&system.r0, &z));
        let head = Matrix::from_fn(free.len(), free.len(), |i, j| {
            zz * weight.at(free[i], free[j])
        });
        let side = Matrix::from_fn(free.len(), 1, |i, _| target.at(free[i], 0));
        let solved = inverse(&head).unwrap().times(&side);
        alpha = Matrix::from_fn(p, 1, |i, _| {
            free.iter()
                .position(|f| *f == i)
                .map_or(0.0, |f| solved.at(f, 0))
        });
        // β: regression of R0 Ω⁻¹ α / (α'Ω⁻¹α) on R1.
        let scale = alpha.transposed().times(&weight).times(&alpha).at(0, 0);
        let y = system.r0.times(&weight).times(&alpha);
        let gram = inverse(&cross(&system.r1, &system.r1)).unwrap();
        let b = gram.times(&cross(&system.r1, &y));
        beta = Matrix::from_fn(b.rows(), 1, |i, _| b.at(i, 0) / scale);
    }
    likelihood
}

#[test]
fn engle_granger_tests() {
    let expected = dynamics();
    let mut cases = vec![
        (
            danish("lrm"),
            ["lry", "ibo", "ide"].map(danish).to_vec(),
            expected["danish"]["engle_granger"].clone(),
        ),
        (
            us_trade("ln_imports_real"),
            ["ln_real_gdp", "ln_pm_over_cpi"].map(us_trade).to_vec(),
            expected["us_trade"]["engle_granger"].clone(),
        ),
        (
            us_log("realcons"),
            vec![us_log("realdpi")],
            expected["us_macro"]["engle_granger"].clone(),
        ),
    ];
    for area in AREAS {
        for (y, x, key) in [
            ("ln_m", ["ln_y", "ln_rpm"], "import_eg"),
            ("ln_x", ["ln_z", "ln_rpx"], "export_eg"),
        ] {
            let x = x.map(|s| penn(area, s)).to_vec();
            cases.push((penn(area, y), x, expected["pwt91"][area][key].clone()));
        }
    }
    let mut compared = 0;
    for (y, x, expected) in cases {
        for (code, terms) in [("c", Deterministic::Constant), ("ct", Deterministic::Trend)] {
            for choice in ["AIC", "lag1"] {
                let wanted = &expected[format!("eg_{code}_{choice}")];
                let Some(stat) = wanted["stat"].as_f64() else {
                    continue;
                };
                let lags = if wanted["maxlag"].is_null() {
                    Lags::Fixed(1)
                } else {
                    let max = Some(count(&wanted["maxlag"]));
                    Lags::Chosen {
                        by: LagCriterion::Aic,
                        max,
                    }
                };
                let found = engle_granger(&y, &x, terms, lags).unwrap();
                close(&y.name, found.statistic, stat, 1e-8);
                let p = wanted["p"].as_f64().unwrap();
                close(&y.name, found.p_value.unwrap().ln(), p.ln(), 1e-6);
                let critical = found.critical.unwrap();
                let values = numbers(&wanted["crit_1_5_10"]);
                for (found, wanted) in [critical.one, critical.five, critical.ten]
                    .iter()
                    .zip(values)
                {
                    close(&y.name, *found, wanted, 1e-8);
                }
                compared += 1;
            }
        }
    }
    assert!(compared >= 20, "{compared}");
}

/// Osterwald-Lenum 1992 (T = 400, 6,000 replications), as carried in urca 1.3.3: the null of no relation
/// among random walks, trace and maximum eigenvalue, at p − r = 2.
#[test]
fn rank_tests_under_the_null() {
    use super::super::{NoStore, Simulation, simulate};
    let text = include_str!("../../../fixtures/reference/johansen-osterwald-lenum-1992.csv");
    for (name, case) in [
        ("const", JohansenCase::RestrictedConstant),
        ("trend", JohansenCase::RestrictedTrend),
    ] {
        let simulation = Simulation {
            draws: 800,
            seed: 4,
            threads: 2,
        };
        let null = simulate(simulation, name, &NoStore, |draws| {
            let walks: Vec<Regressor> = (0..2)
                .map(|i| {
                    let mut level = 0.0;
                    let values = (0..400).map(|_| {
                        level += draws.normal();
                        level
                    });
                    Regressor::new(&format!("walk{i}"), values.collect())
                })
                .collect();
            let found = johansen(&walks, 1, case, &[]).unwrap();
            [found.tests[0].trace, found.tests[0].max_eigenvalue]
        });
        for (statistic, null) in [("trace", &null[0]), ("lambda_max", &null[1])] {
            let row = text
                .lines()
                .find(|l| l.starts_with(&format!("{name},{statistic},2,")));
            let wanted: Vec<f64> = row
                .unwrap()
                .split(',')
                .skip(3)
                .map(|c| c.parse().unwrap())
                .collect();
            for (p, wanted) in [0.90, 0.95, 0.99].into_iter().zip(wanted) {
                let error = null.quantile_error(p) * (1.0_f64 + 800.0 / 6000.0).sqrt();
                let found = null.quantile(p);
                assert!(
                    (found - wanted).abs() < 3.0 * error + 0.005,
                    "{name} {statistic} {p}: {found} instead of {wanted}"
                );
            }
        }
    }
}

#[test]
fn faults_are_told() {
    let money = ["lrm", "lry"].map(danish);
    let sum = Regressor::new(
        "sum",
        money[0]
            .values
            .iter()
            .zip(&money[1].values)
            .map(|(a, b)| a + b)
            .collect(),
    );
    let three = [money[0].clone(), money[1].clone(), sum];
    let error = johansen(&three, 2, JohansenCase::Constant, &[]).unwrap_err();
    assert!(matches!(error, SeriesError::Collinear { .. }), "{error}");
    let error = johansen(&money, 25, JohansenCase::Constant, &[]).unwrap_err();
    assert!(matches!(error, SeriesError::TooShort { .. }), "{error}");
    assert!(johansen(&money[..1], 1, JohansenCase::None, &[]).is_err());
    let short = Regressor::new("w", vec![1.0; 5]);
    let error = johansen(&money, 1, JohansenCase::None, &[short]).unwrap_err();
    assert!(matches!(error, SeriesError::LengthDiffers { ref series, .. } if series == "w"));
    let error =
        engle_granger(&three[2], &money, Deterministic::Constant, Lags::Fixed(0)).unwrap_err();
    assert!(matches!(error, SeriesError::Collinear { ref series, .. } if series == "sum"));
    let system = johansen(&money, 1, JohansenCase::None, &[]).unwrap();
    assert!(system.relation(0, 2).is_none());
    assert_eq!(column(&system.vectors, 0).len(), 2);
}
