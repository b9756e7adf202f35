//! Instruments, systems, autoregressive errors and stability against `estimation.json`.

use super::recomputed_tests::{
    MACRO, close, close_all, close_matrix, close_p, danish, growth, recomputed, std_errors,
};
use super::reference_tests::csv;
use super::*;

/// Both sides iterate ρ to 1e-13 or better; the map contracts by about 0.9, and normal equations take
/// four digits: 1e-8.
#[test]
fn autoregressive_errors() {
    let fit = danish();
    for (first, key) in [
        (FirstObservation::Kept, "prais_winsten"),
        (FirstObservation::Dropped, "cochrane_orcutt"),
    ] {
        let wanted = recomputed(key);
        let found = autoregressive(&fit.dependent(), &fit.regressors, first).unwrap();
        close(found.rho, &wanted["rho"], 1e-8, key);
        close_all(
            &found.transformed.coefficients,
            &wanted["params"],
            1e-8,
            key,
        );
        let errors = covariance(&[&found.transformed], CovarianceKind::Classical).unwrap();
        close_all(&std_errors(&errors), &wanted["bse"], 1e-8, key);
        close(found.transformed.s2, &wanted["s2"], 1e-8, key);
        assert_eq!(found.residuals.len(), fit.n);
    }
    // Errors that double each period.
    let y: Vec<f64> = (0..30)
        .map(|t| f64::from(t % 5) + 2.0_f64.powi(t))
        .collect();
    let error = autoregressive(&y, &[Regressor::constant(30)], FirstObservation::Dropped);
    assert!(
        matches!(error, Err(EstimateError::Explosive { .. })),
        "{error:?}"
    );
}

/// Consumption on income and government spending, growth rates, instruments lagged.
fn consumption(instruments: Vec<Regressor>) -> InstrumentedEquation {
    InstrumentedEquation {
        y: growth("realcons")[2..].to_vec(),
        exogenous: vec![
            Regressor::constant(200),
            Regressor::new("government", growth("realgovt")[2..].to_vec()),
        ],
        endogenous: vec![Regressor::new("income", growth("realdpi")[2..].to_vec())],
        instruments,
    }
}

fn lagged() -> Vec<Regressor> {
    let lag = |column: &str, j: usize| {
        let values = growth(column)[2 - j..202 - j].to_vec();
        Regressor::new(&format!("{column} {j}"), values)
    };
    vec![
        lag("realcons", 1),
        lag("realdpi", 1),
        lag("realinv", 1),
        lag("realcons", 2),
    ]
}

const HC1: CovarianceKind = CovarianceKind::Robust(Hc::Hc1);

#[test]
fn two_stage_least_squares() {
    let (equation, wanted) = (consumption(lagged()), recomputed("instruments"));
    let found = two_stage(&equation, CovarianceKind::Classical).unwrap();
    close_all(
        &found.fit.coefficients,
        &wanted["params"],
        1e-8,
        "coefficients",
    );
    close_matrix(&found.covariance, &wanted["cov"], 1e-8, "covariance");
    close(found.fit.ssr, &wanted["resid_ss"], 1e-9, "ssr");
    for (key, kind) in [
        ("hc0", CovarianceKind::Robust(Hc::Hc0)),
        ("hc1", HC1),
        (
            "parzen_3",
            CovarianceKind::Kernel {
                kernel: Kernel::Parzen,
                bandwidth: 3.0,
                small_sample: false,
            },
        ),
    ] {
        let errors = std_errors(&two_stage(&equation, kind).unwrap().covariance);
        close_all(&errors, &wanted[key], 1e-8, key);
    }
    let pair = |test: &TestResult, key: &str| {
        close(test.statistic, &wanted[key][0], 1e-7, key);
        close_p(test.p_value, &wanted[key][1], key);
    };
    let spare = found.overidentification.unwrap();
    pair(&spare.sargan, "sargan");
    pair(&spare.hansen_j, "hansen_j");
    // A difference of two nearly equal sums of squares: 1e-7.
    pair(&found.wu_hausman.unwrap(), "wu_hausman");
    close(
        found.first_stages[0].statistic,
        &wanted["first_stage_f"],
        1e-8,
        "first stage",
    );
    assert!(two_stage(&equation, CovarianceKind::Robust(Hc::Hc3)).is_err());
}

#[test]
fn weak_instruments() {
    let (equation, wanted) = (consumption(lagged()), recomputed("instruments"));
    let found = effective_f(&equation, HC1).unwrap();
    close(found.statistic, &wanted["effective_f"], 1e-8, "effective F");
    close(found.critical_10, &wanted["critical_tau_10"], 1e-8, "10 %");
    close(found.critical_30, &wanted["critical_tau_30"], 1e-8, "30 %");
    assert!(found.sentence.contains("not rejected"));
    let classical = effective_f(&equation, CovarianceKind::Classical).unwrap();
    close(
        classical.statistic,
        &wanted["first_stage_f"],
        1e-8,
        "classical",
    );
    assert_eq!(anderson_rubin(&equation, 0.95).unwrap(), None, "rejected");

    let output = Regressor::new("output", growth("realgdp")[2..].to_vec());
    let strong = consumption(vec![output]);
    let fit = two_stage(&strong, CovarianceKind::Classical).unwrap();
    close(
        fit.fit.coefficients[2],
        &wanted["strong_params_income"],
        1e-8,
        "strong",
    );
    assert!(fit.overidentification.is_none(), "just identified");
    let Some(Region::Interval { low, high }) = anderson_rubin(&strong, 0.95).unwrap() else {
        panic!("an interval");
    };
    close_all(
        &[low, high],
        &wanted["anderson_rubin_strong"],
        1e-8,
        "Anderson–Rubin",
    );
    // One instrument: (√10 + 1.645)², printed as 23.1.
    let one = effective_f(&strong, HC1).unwrap();
    assert!(
        (one.critical_10 - 23.11).abs() < 0.005,
        "{}",
        one.critical_10
    );
}

#[test]
fn own_instruments_are_least_squares() {
    let mut equation = consumption(Vec::new());
    let error = two_stage(&equation, CovarianceKind::Classical).unwrap_err();
    assert!(
        error.to_string().contains("coefficients of income"),
        "{error}"
    );
    equation.instruments = equation.endogenous.clone();
    let found = two_stage(&equation, CovarianceKind::Classical).unwrap();
    let x = equation
        .exogenous
        .iter()
        .chain(&equation.endogenous)
        .cloned()
        .collect();
    let plain = Ols::fit(&equation.y, x).unwrap();
    for (a, b) in found.fit.coefficients.iter().zip(&plain.coefficients) {
        assert!((a - b).abs() < 1e-12, "{a} {b}");
    }
    assert!((found.fit.r2 - plain.r2).abs() < 1e-12);
    assert!(found.wu_hausman.is_none());
}

fn system() -> Vec<SystemEquation> {
    let income = Regressor::new("income", growth("realdpi"));
    let equation = |name: &str, y: &str, other: Regressor| SystemEquation {
        name: name.to_owned(),
        y: growth(y),
        regressors: vec![Regressor::constant(202), income.clone(), other],
    };
    let rate = Regressor::new("rate", csv(MACRO, "realint")[1..].to_vec());
    let government = Regressor::new("government", growth("realgovt"));
    vec![
        equation("consumption", "realcons", rate),
        equation("investment", "realinv", government),
    ]
}

/// linearmodels stops iterating where coefficients move by 1e-13 in sum of squares: 1e-6 for iterated
/// likelihoods, 1e-8 for two steps.
#[test]
fn seemingly_unrelated_regressions() {
    let wanted = recomputed("system");
    for (key, iterate, tolerance) in [("zellner", false, 1e-8), ("iterated", true, 1e-6)] {
        let found = seemingly_unrelated(&system(), &[], iterate).unwrap();
        close_all(&found.coefficients, &wanted[key]["params"], tolerance, key);
        close_matrix(&found.covariance, &wanted[key]["cov"], tolerance, key);
        close(
            found.breusch_pagan.statistic,
            &wanted["breusch_pagan"][0],
            1e-8,
            "LM",
        );
        close_p(
            found.breusch_pagan.p_value,
            &wanted["breusch_pagan"][1],
            "LM",
        );
        if iterate {
            close_matrix(&found.sigma, &wanted[key]["sigma"], tolerance, key);
            let two_step = seemingly_unrelated(&system(), &[], false).unwrap();
            assert!(found.log_likelihood >= two_step.log_likelihood);
        }
    }
    let across = Restriction::new(
        &[("consumption.income", 1.0), ("investment.income", -0.2)],
        0.0,
    );
    let found = seemingly_unrelated(&system(), &[across], false).unwrap();
    close_all(
        &found.coefficients,
        &wanted["restricted"]["params"],
        1e-8,
        "restricted",
    );
    close_matrix(
        &found.covariance,
        &wanted["restricted"]["cov"],
        1e-8,
        "restricted",
    );
    let wrong = seemingly_unrelated(&system(), &[Restriction::zero("income")], false);
    assert!(matches!(wrong, Err(EstimateError::UnknownRegressor { .. })));
}

#[test]
fn equal_regressors_make_a_system_least_squares() {
    let mut equations = system();
    equations[1].regressors = equations[0].regressors.clone();
    let found = seemingly_unrelated(&equations, &[], true).unwrap();
    for (i, equation) in equations.iter().enumerate() {
        let plain = Ols::fit(&equation.y, equation.regressors.clone()).unwrap();
        for (a, b) in found.coefficients[3 * i..].iter().zip(&plain.coefficients) {
            assert!((a - b).abs() < 1e-11, "{a} {b}");
        }
    }
    equations[1].y = equations[0].y.clone();
    let error = seemingly_unrelated(&equations, &[], false).unwrap_err();
    assert!(
        matches!(error, EstimateError::SingularCovariance { .. }),
        "{error}"
    );
}

fn consumption_function() -> Ols {
    let income = Regressor::new("income", growth("realdpi"));
    Ols::fit(&growth("realcons"), vec![Regressor::constant(202), income]).unwrap()
}

/// Explicit refits by inverses in numpy: 1e-8.
#[test]
fn recursive_residuals_and_their_sums() {
    let (fit, wanted) = (consumption_function(), recomputed("stability"));
    let found = recursive_residuals(&fit).unwrap();
    assert_eq!((found.first, found.values.len()), (2, 200));
    close_all(&found.values, &wanted["recursive_first"], 1e-8, "first");
    close(found.values[199], &wanted["recursive_last"], 1e-8, "last");
    // Their squares sum to those of least squares.
    let sum: f64 = found.values.iter().map(|w| w * w).sum();
    assert!((sum / fit.ssr - 1.0).abs() < 1e-10);
    let cusum = cusum_recursive(&fit).unwrap();
    close(cusum.test.statistic, &wanted["cusum"], 1e-8, "CUSUM");
    close(cusum.path[199], &wanted["cusum_last"], 1e-8, "CUSUM");
    let squares = cusum_of_squares(&fit).unwrap();
    close(
        squares.test.statistic,
        &wanted["cusum_squares"],
        1e-8,
        "squares",
    );
    // statsmodels carries the constants of Edgerton & Wells with seven digits.
    close(
        squares.boundary[0],
        &wanted["cusum_squares_bound_5"],
        1e-6,
        "boundary",
    );
    assert!(squares.test.p_value < 0.07, "{}", squares.test.p_value);
}

#[test]
fn breaks_at_known_and_unknown_dates() {
    let (fit, wanted) = (consumption_function(), recomputed("stability"));
    let pair = |test: &TestResult, key: &str| {
        close(test.statistic, &wanted[key][0], 1e-8, key);
        close_p(test.p_value, &wanted[key][1], key);
    };
    pair(&chow(&fit, 100).unwrap(), "chow_100");
    pair(&chow(&fit, 201).unwrap(), "chow_predictive");
    assert!(chow(&fit, 2).is_err());
    let found = unknown_break(&fit, 0.15).unwrap();
    close(found.sup.statistic, &wanted["sup"], 1e-8, "sup");
    assert_eq!(
        Some(found.at),
        wanted["at"].as_u64().and_then(|v| usize::try_from(v).ok())
    );
    close(found.average.statistic, &wanted["average"], 1e-8, "average");
    close(
        found.exponential.statistic,
        &wanted["exponential"],
        1e-8,
        "exponential",
    );
    // Andrews: 14.09/2 lies between the 5 % (5.86) and 1 % (7.78) points.
    assert!(
        found.sup.p_value > 0.01 && found.sup.p_value < 0.05,
        "{}",
        found.sup.p_value
    );
    assert!(found.average.p_value < 0.02 && found.exponential.p_value < 0.03);
    assert!(unknown_break(&fit, 0.6).is_err() && unknown_break(&fit, 0.01).is_err());
}

#[test]
fn windows() {
    let (fit, wanted) = (consumption_function(), recomputed("stability"));
    let found = rolling(&fit, 40, CovarianceKind::Classical, 0.95).unwrap();
    assert_eq!(found.len(), 163);
    let one = &found[50];
    assert_eq!((one.from, one.to), (50, 90));
    close_all(
        &one.coefficients,
        &wanted["window_50_90"]["params"],
        1e-9,
        "window",
    );
    close_all(
        &one.std_errors,
        &wanted["window_50_90"]["bse"],
        1e-9,
        "window",
    );
    let t = (one.high[1] - one.coefficients[1]) / one.std_errors[1];
    assert!((t - 2.024_394).abs() < 1e-5, "{t}");
    let growing = recursive(&fit, 20, CovarianceKind::Classical, 0.95).unwrap();
    assert_eq!(growing.len(), 183);
    assert!((growing[182].coefficients[1] - fit.coefficients[1]).abs() < 1e-12);
    assert!(rolling(&fit, 2, CovarianceKind::Classical, 0.95).is_err());
}

#[test]
fn instability_of_a_cointegrating_regression() {
    let (fit, wanted) = (danish(), recomputed("hansen_1992"));
    let omega = wanted["omega"].as_f64().unwrap();
    let score = |r: &Regressor| {
        r.values
            .iter()
            .zip(&fit.residuals)
            .map(|(x, e)| x * e)
            .collect()
    };
    let input = CointegratingScores {
        scores: fit.regressors.iter().map(score).collect(),
        regressors: fit.regressors.clone(),
        omega,
    };
    let null: Vec<Instability> = (0..200)
        .map(|i| instability_null(55, Deterministic::Constant, 3, 1, i).unwrap())
        .collect();
    let found = hansen_1992(&input, &null).unwrap();
    // M has condition 200², and its part less what the whole takes cancels: 1e-7.
    close(found.lc.statistic, &wanted["lc"], 1e-7, "Lc");
    close(found.mean_f.statistic, &wanted["mean_f"], 1e-7, "MeanF");
    close(found.sup_f.statistic, &wanted["sup_f"], 1e-7, "SupF");
    // A random walk in the place of the errors is found out.
    let mut walk = crate::random::Draws::new(5, 0);
    let mut level = 0.0;
    let y: Vec<f64> = (0..55)
        .map(|_| {
            level += walk.normal();
            level
        })
        .collect();
    let spurious = Ols::fit(&y, fit.regressors.clone()).unwrap();
    let score = |r: &Regressor| {
        r.values
            .iter()
            .zip(&spurious.residuals)
            .map(|(x, e)| x * e)
            .collect()
    };
    let input = CointegratingScores {
        scores: spurious.regressors.iter().map(score).collect(),
        regressors: spurious.regressors.clone(),
        omega: spurious.s2,
    };
    let found = hansen_1992(&input, &null).unwrap();
    assert!(found.lc.p_value < 0.05, "{:?}", found.lc);
}
