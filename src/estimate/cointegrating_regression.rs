//! Cointegrating regressions by single equation: dynamic and fully modified least squares.

use super::long_run::{long_run_covariance, long_run_variance};
use super::ols::as_f64;
use super::series_error::{check, differences, regress};
use super::{
    CointegratingScores, CovarianceKind, Deterministic, Ols, Regressor, SeriesError, covariance,
    rule_of_thumb_lags,
};
use crate::linalg::Matrix;
use crate::linalg::decompose::inverse;

/// How the covariance of dynamic least squares is estimated.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum DolsCovariance {
    /// `ω² (Z'Z)⁻¹`, ω² the long-run variance of the residuals (Bartlett, divisor n; Stock & Watson 1993).
    /// Lags by rule of thumb if not given.
    LongRun {
        /// Lags of the kernel.
        lags: Option<usize>,
    },
    /// Of the scores, as in [`covariance`].
    Scores(CovarianceKind),
}

/// A cointegrating regression by dynamic least squares.
#[derive(Clone, Debug)]
pub struct Dols {
    /// The regression: deterministic terms, x, then leads (`F`), present and lags (`L`) of `Δx`.
    pub regression: Ols,
    /// Covariance of all its coefficients.
    pub covariance: Matrix,
    /// Long-run variance of the residuals at `kernel_lags`.
    pub long_run_variance: f64,
    /// Lags of the kernel for that variance.
    pub kernel_lags: usize,
    /// Leads of `Δx`.
    pub leads: usize,
    /// Lags of `Δx`.
    pub lags: usize,
}

/// Dynamic least squares: `y_t = d_t'δ + x_t'β + Σ_{j=−leads}^{lags} γ_j'Δx_{t−j} + u_t` on the
/// `n − 1 − lags − leads` rows where all terms exist.
///
/// t statistics of β are asymptotically normal with a long-run or HAC covariance, given one relation
/// among I(1) series. Missing values are an error; no small-sample factor unless the kind has one.
///
/// Saikkonen 1991, Econometric Theory 7; Stock & Watson 1993, Econometrica 61(4). Reference value: Danish
/// money, one lead and lag: income 1.2180822611, Newey–West at 3 lags 0.0566974748 (statsmodels 0.15.0),
/// long run 0.1073050452 (arch 8.0.0).
///
/// # Errors
/// [`SeriesError`]; collinear terms are named.
pub fn dols(
    y: &Regressor,
    x: &[Regressor],
    deterministic: Deterministic,
    leads: usize,
    lags: usize,
    kind: DolsCovariance,
) -> Result<Dols, SeriesError> {
    let all: Vec<&Regressor> = [y].into_iter().chain(x).collect();
    check(&all)?;
    let n = y.values.len();
    let k = deterministic.terms() + x.len() * (2 + leads + lags);
    let needed = 2 + leads + lags + k;
    if n < needed {
        return Err(SeriesError::TooShort {
            series: y.name.clone(),
            observations: n,
            needed,
        });
    }
    let (from, to) = (lags + 1, n - leads);
    let mut regressors = from_row(deterministic, n, from, to);
    regressors.extend(
        x.iter()
            .map(|x| Regressor::new(&x.name, x.values[from..to].to_vec())),
    );
    for x in x {
        let change = differences(&x.values);
        // The change at observation t is at t − 1 here.
        for lead in (1..=leads).rev() {
            let values = change[from - 1 + lead..to - 1 + lead].to_vec();
            regressors.push(Regressor::new(&format!("d.{}.F{lead}", x.name), values));
        }
        for lag in 0..=lags {
            let values = change[from - 1 - lag..to - 1 - lag].to_vec();
            regressors.push(Regressor::new(&format!("d.{}.L{lag}", x.name), values));
        }
    }
    let regression = regress(&y.name, &y.values[from..to], regressors)?;
    let kernel_lags = match kind {
        DolsCovariance::LongRun { lags: Some(lags) } => lags.min(regression.n - 1),
        DolsCovariance::LongRun { lags: None } | DolsCovariance::Scores(_) => {
            rule_of_thumb_lags(regression.n)
        }
    };
    let variance = long_run_variance(&regression.residuals, kernel_lags);
    let covariance = match kind {
        DolsCovariance::LongRun { .. } => Matrix::from_fn(regression.k, regression.k, |i, j| {
            variance * regression.inverse_gram.at(i, j)
        }),
        DolsCovariance::Scores(kind) => {
            covariance(&[&regression], kind).map_err(|_| SeriesError::TooShort {
                series: y.name.clone(),
                observations: n,
                needed: n + 1,
            })?
        }
    };
    Ok(Dols {
        regression,
        covariance,
        long_run_variance: variance,
        kernel_lags,
        leads,
        lags,
    })
}

/// A cointegrating regression by fully modified least squares.
#[derive(Clone, Debug)]
pub struct Fmols {
    /// Names: deterministic terms, then x.
    pub names: Vec<String>,
    /// Coefficients.
    pub coefficients: Vec<f64>,
    /// Their covariance `ω_{1·2} (Z'Z)⁻¹`.
    pub covariance: Matrix,
    /// `ω_{1·2} = ω₁₁ − ω₁₂ Ω₂₂⁻¹ ω₂₁`.
    pub conditional_variance: f64,
    /// Residuals `y_t − z_t'θ̂` on the rows from the second observation on.
    pub residuals: Vec<f64>,
    /// Lags of the Bartlett kernel.
    pub kernel_lags: usize,
    /// Regressors and scores `z_t (y⁺_t − z_t'θ̂) − (0, Δ⁺)'`, which sum to zero: for
    /// [`super::hansen_1992()`].
    pub scores: CointegratingScores,
}

/// Fully modified least squares of `y_t = d_t'δ + x_t'β + u_{1t}` with `Δx_t` (x cleared of the deterministic
/// terms first) `= u_{2t}`, on the n − 1 rows from the second observation.
///
/// With `Ω`, `Δ` the two-sided and one-sided long-run covariances of `(û_1, û_2)` (Bartlett, divisor n − 1, about
/// zero): `y⁺_t = y_t − ω₁₂ Ω₂₂⁻¹ û_{2t}`, `Δ⁺ = Δ₂₁ − Δ₂₂ Ω₂₂⁻¹ ω₂₁`, `θ̂ = (Z'Z)⁻¹ (Z'y⁺ − (n − 1)(0, Δ⁺)')`. Lags by rule
/// of thumb at n if not given. No small-sample factor.
///
/// Phillips & Hansen 1990, Review of Economic Studies 57(1). Reference value: Danish
/// money, 3 lags: income 1.2828493164 (0.1206987434), arch 8.0.0.
///
/// # Errors
/// [`SeriesError`]; collinear regressors are named.
pub fn fmols(
    y: &Regressor,
    x: &[Regressor],
    deterministic: Deterministic,
    lags: Option<usize>,
) -> Result<Fmols, SeriesError> {
    let all: Vec<&Regressor> = [y].into_iter().chain(x).collect();
    check(&all)?;
    let (n, k) = (y.values.len(), x.len());
    let needed = deterministic.terms() + 2 * k + 3;
    if k == 0 || n < needed {
        return Err(SeriesError::TooShort {
            series: y.name.clone(),
            observations: n,
            needed,
        });
    }
    let kernel_lags = lags.unwrap_or_else(|| rule_of_thumb_lags(n)).min(n - 2);
    let terms = deterministic.columns(n);
    let mut regressors = terms.clone();
    regressors.extend(x.iter().cloned());
    let first = regress(&y.name, &y.values, regressors)?;
    let mut errors = vec![first.residuals[1..].to_vec()];
    for x in x {
        let cleared = if terms.is_empty() {
            x.values.clone()
        } else {
            regress(&x.name, &x.values, terms.clone())?.residuals
        };
        errors.push(differences(&cleared));
    }
    let long_run = long_run_covariance(&errors, kernel_lags);
    let (omega, delta) = (&long_run.two_sided, &long_run.one_sided);
    let block = Matrix::from_fn(k, k, |i, j| omega.at(i + 1, j + 1));
    let collinear = || SeriesError::Collinear {
        series: y.name.clone(),
        terms: x.iter().map(|x| x.name.clone()).collect(),
    };
    let weights = inverse(&block)
        .ok_or_else(collinear)?
        .times(&Matrix::from_fn(k, 1, |i, _| omega.at(i + 1, 0)));
    let modified: Vec<f64> = (1..n)
        .map(|t| {
            let shift = (0..k).map(|j| weights.at(j, 0) * errors[j + 1][t - 1]);
            y.values[t] - shift.sum::<f64>()
        })
        .collect();
    let mut regressors = from_row(deterministic, n, 1, n);
    regressors.extend(
        x.iter()
            .map(|x| Regressor::new(&x.name, x.values[1..].to_vec())),
    );
    let fit = regress(&y.name, &modified, regressors)?;
    let bias: Vec<f64> = (0..k)
        .map(|i| {
            let from_x = (0..k).map(|j| delta.at(i + 1, j + 1) * weights.at(j, 0));
            delta.at(i + 1, 0) - from_x.sum::<f64>()
        })
        .collect();
    let at = deterministic.terms();
    let coefficients: Vec<f64> = (0..fit.k)
        .map(|i| {
            let shift = (0..k).map(|j| fit.inverse_gram.at(i, at + j) * bias[j]);
            fit.coefficients[i] - as_f64(n - 1) * shift.sum::<f64>()
        })
        .collect();
    let explained: f64 = (0..k).map(|j| omega.at(0, j + 1) * weights.at(j, 0)).sum();
    let conditional_variance = omega.at(0, 0) - explained;
    let residuals = (1..n)
        .map(|t| {
            let fitted = fit.regressors.iter().zip(&coefficients);
            y.values[t] - fitted.map(|(r, c)| r.values[t - 1] * c).sum::<f64>()
        })
        .collect();
    let scores = fit.regressors.iter().enumerate().map(|(i, r)| {
        let error = |t: usize| {
            let fitted = fit.regressors.iter().zip(&coefficients);
            modified[t] - fitted.map(|(r, c)| r.values[t] * c).sum::<f64>()
        };
        let shift = i.checked_sub(at).map_or(0.0, |j| bias[j]);
        (0..fit.n).map(|t| r.values[t] * error(t) - shift).collect()
    });
    let scores = CointegratingScores {
        scores: scores.collect(),
        regressors: fit.regressors.clone(),
        omega: conditional_variance,
    };
    Ok(Fmols {
        scores,
        names: fit.regressors.iter().map(|r| r.name.clone()).collect(),
        coefficients,
        covariance: Matrix::from_fn(fit.k, fit.k, |i, j| {
            conditional_variance * fit.inverse_gram.at(i, j)
        }),
        conditional_variance,
        residuals,
        kernel_lags,
    })
}

/// Deterministic terms over n observations, rows `from` to `to` of them: the trend counts from the
/// first observation.
fn from_row(deterministic: Deterministic, n: usize, from: usize, to: usize) -> Vec<Regressor> {
    deterministic
        .columns(n)
        .into_iter()
        .map(|c| Regressor::new(&c.name, c.values[from..to].to_vec()))
        .collect()
}

#[cfg(test)]
mod tests {
    use serde_json::Value;

    use super::super::test_data::{
        AREAS, close, count, danish, dynamics, more, numbers, penn, us_log, us_trade,
    };
    use super::*;

    fn compare(y: &Regressor, x: &[Regressor], expected: &Value) {
        let count = |key: &str| count(&expected[key]);
        let lags = count("hac_lag");
        let run = |kind| {
            dols(
                y,
                x,
                Deterministic::Constant,
                count("leads"),
                count("lags"),
                kind,
            )
            .unwrap()
        };
        let long_run = run(DolsCovariance::LongRun { lags: Some(lags) });
        assert_eq!(
            (long_run.kernel_lags, long_run.regression.n),
            (lags, count("n"))
        );
        let scores =
            |small_sample| DolsCovariance::Scores(CovarianceKind::NeweyWest { lags, small_sample });
        let (classical, hac, corrected) = (
            run(DolsCovariance::Scores(CovarianceKind::Classical)),
            run(scores(false)),
            run(scores(true)),
        );
        let error = |fit: &Dols, j: usize| fit.covariance.at(j, j).sqrt();
        for (j, name) in expected["names"].as_array().unwrap().iter().enumerate() {
            let name = name.as_str().unwrap();
            let at = |key: &str| numbers(&expected[key])[j];
            assert_eq!(long_run.regression.regressors[j].name, name);
            close(
                name,
                long_run.regression.coefficients[j],
                at("params"),
                1e-8,
            );
            close(name, error(&classical, j), at("bse_classical"), 1e-8);
            close(name, error(&hac, j), at("bse_hac"), 1e-8);
            close(name, error(&corrected, j), at("bse_hac_corr"), 1e-8);
            let wanted = &expected["arch_dols_unadjusted"]["bse"][name];
            if let Some(wanted) = wanted.as_f64() {
                close(name, error(&long_run, j), wanted, 1e-8);
            }
        }
        let wanted = &expected["arch_fmols"];
        if !wanted.is_object() {
            return;
        }
        let found = fmols(y, x, Deterministic::Constant, Some(lags)).unwrap();
        for (j, name) in found.names.iter().enumerate() {
            let at = |key: &str| wanted[key][name].as_f64().unwrap();
            close(name, found.coefficients[j], at("params"), 1e-8);
            close(name, found.covariance.at(j, j).sqrt(), at("bse"), 1e-8);
        }
        let wanted = wanted["long_run_variance"].as_f64().unwrap();
        close("ω₁·₂", found.conditional_variance, wanted, 1e-8);
    }

    #[test]
    fn a_general_purpose_library_agrees() {
        let expected = dynamics();
        let money = ["lry", "ibo", "ide"].map(danish);
        compare(&danish("lrm"), &money, &expected["danish"]["dols"]);
        let demand = ["ln_real_gdp", "ln_pm_over_cpi"].map(us_trade);
        compare(
            &us_trade("ln_imports_real"),
            &demand,
            &expected["us_trade"]["dols"],
        );
        let income = Regressor::new("ln_dpi", us_log("realdpi").values);
        compare(
            &us_log("realcons"),
            &[income],
            &expected["us_macro"]["dols"],
        );
        for area in AREAS {
            let e = &expected["pwt91"][area];
            let imports = ["ln_y", "ln_rpm"].map(|s| penn(area, s));
            let exports = ["ln_z", "ln_rpx"].map(|s| penn(area, s));
            compare(&penn(area, "ln_m"), &imports, &e["import_dols_1_1"]);
            compare(&penn(area, "ln_x"), &exports, &e["export_dols_1_1"]);
        }
    }

    #[test]
    fn other_terms_and_bandwidths() {
        let expected = more();
        let (y, x) = (danish("lrm"), ["lry", "ibo", "ide"].map(danish));
        for (key, terms, lags) in [
            ("fmols_ct_bandwidth5", Deterministic::Trend, 5),
            ("fmols_n_bandwidth2", Deterministic::None, 2),
        ] {
            let found = fmols(&y, &x, terms, Some(lags)).unwrap();
            for (j, name) in found.names.iter().enumerate() {
                let at = |part: &str| expected[key][part][name].as_f64().unwrap();
                // The library counts its trend otherwise, which moves its constant.
                if name != "const" || terms == Deterministic::None {
                    close(name, found.coefficients[j], at("params"), 1e-8);
                    close(name, found.covariance.at(j, j).sqrt(), at("bse"), 1e-8);
                }
            }
            let wanted = expected[key]["long_run_variance"].as_f64().unwrap();
            close("ω₁·₂", found.conditional_variance, wanted, 1e-8);
        }
        let kind = DolsCovariance::LongRun { lags: Some(4) };
        let found = dols(&y, &x, Deterministic::Trend, 2, 1, kind).unwrap();
        let wanted = &expected["dols_ct_leads2_lags1_bandwidth4"];
        for j in 1..5 {
            let name = &found.regression.regressors[j].name;
            let at = |part: &str| wanted[part][name].as_f64().unwrap();
            close(name, found.regression.coefficients[j], at("params"), 1e-8);
            close(name, found.covariance.at(j, j).sqrt(), at("bse"), 1e-8);
        }
    }

    /// On an exact relation both are exact.
    #[test]
    fn an_exact_relation_is_found() {
        let x = danish("lry");
        let values = x.values.iter().enumerate();
        let y = Regressor::new(
            "y",
            values
                .map(|(t, x)| 2.0 + 3.0 * x + as_f64(t) * 0.1)
                .collect(),
        );
        let fit = fmols(&y, std::slice::from_ref(&x), Deterministic::Trend, None).unwrap();
        close("slope", fit.coefficients[2], 3.0, 1e-8);
        close("trend", fit.coefficients[1], 0.1, 1e-8);
        let kind = DolsCovariance::LongRun { lags: Some(2) };
        let fit = dols(
            &y,
            std::slice::from_ref(&x),
            Deterministic::Trend,
            1,
            2,
            kind,
        )
        .unwrap();
        close("slope", fit.regression.coefficients[2], 3.0, 1e-8);
        assert_eq!(fit.regression.regressors[3].name, "d.lry.F1");
    }

    #[test]
    fn faults_name_the_series() {
        let (y, x) = (danish("lrm"), danish("lry"));
        let double = Regressor::new("double", x.values.iter().map(|v| 2.0 * v).collect());
        let both = [x.clone(), double];
        let kind = DolsCovariance::LongRun { lags: None };
        let error = dols(&y, &both, Deterministic::Constant, 1, 1, kind).unwrap_err();
        assert!(matches!(error, SeriesError::Collinear { ref series, .. } if series == "lrm"));
        assert!(fmols(&y, &both, Deterministic::Constant, None).is_err());
        assert!(dols(&y, &both, Deterministic::Constant, 30, 30, kind).is_err());
        assert!(fmols(&y, &[], Deterministic::Constant, None).is_err());
    }
}
