//! Two-stage least squares and its tests.
//!
//! Start reading at [`two_stage`]; the strength of instruments and what holds under weak ones is in
//! [`super::weak_instruments`].

use super::ols::{as_f64, columns, dot};
use super::outcome::{Distribution, TestResult};
use super::{CovarianceKind, EstimateError, Hc, Ols, Regressor, covariance};
use crate::linalg::{Matrix, least_squares};

/// An equation with endogenous regressors.
#[derive(Clone, Debug)]
pub struct InstrumentedEquation {
    /// The dependent variable, n values.
    pub y: Vec<f64>,
    /// Regressors that instrument themselves, the constant included.
    pub exogenous: Vec<Regressor>,
    /// Regressors correlated with the error.
    pub endogenous: Vec<Regressor>,
    /// Instruments outside the equation.
    pub instruments: Vec<Regressor>,
}

/// Two-stage least squares.
#[derive(Clone, Debug)]
pub struct TwoStage {
    /// Coefficients of exogenous, then endogenous regressors. Residuals, s² = ssr/(n − k), R² (which may be
    /// negative) and Durbin–Watson are structural, `y − X β`; `regressors` and `inverse_gram` those of the
    /// second stage. There is no likelihood: it and the criteria are NaN.
    pub fit: Ols,
    /// Covariance of the kind asked for.
    pub covariance: Matrix,
    /// F of the outside instruments in the first stage of each endogenous regressor, classical. With
    /// several endogenous regressors large values do not suffice.
    pub first_stages: Vec<TestResult>,
    /// Durbin–Wu–Hausman: are the endogenous regressors exogenous? None where instruments predict them
    /// without error.
    pub wu_hausman: Option<TestResult>,
    /// Tests of the instruments; only where there are more of them than endogenous regressors.
    pub overidentification: Option<Overidentification>,
}

/// Are the instruments uncorrelated with the error?
#[derive(Clone, Debug)]
pub struct Overidentification {
    /// Sargan 1958: `n R²` of the residuals on all instruments, χ²(instruments − endogenous);
    /// homoskedastic errors.
    pub sargan: TestResult,
    /// Hansen 1982: J of two-step efficient GMM from the 2SLS residuals, weights `Σ e² z z'/n` not centred;
    /// any heteroskedasticity.
    pub hansen_j: TestResult,
}

/// Fits by two-stage least squares: endogenous regressors are replaced by their least-squares fit on all
/// exogenous variables. Covariance `(X̂'X̂)⁻¹ Ω (X̂'X̂)⁻¹` with structural residuals in Ω.
///
/// Durbin–Wu–Hausman in regression form: first-stage residuals added to least squares, F(q, n − k − q).
/// Sources: Wooldridge 2010, sections 5.1, 6.2; Davidson & `MacKinnon` 2004, section 8.7. Reference:
/// linearmodels 7.1, `estimation.json`. With the endogenous regressors as their own instruments the
/// coefficients are those of ordinary least squares.
///
/// # Errors
/// [`EstimateError::Underidentified`]; [`EstimateError::Setting`] for HC2 and HC3, which have no agreed
/// meaning here; else as [`Ols::fit`].
pub fn two_stage(
    equation: &InstrumentedEquation,
    kind: CovarianceKind,
) -> Result<TwoStage, EstimateError> {
    let InstrumentedEquation {
        y,
        exogenous,
        endogenous,
        instruments,
    } = equation;
    if endogenous.is_empty() || instruments.len() < endogenous.len() {
        return Err(EstimateError::Underidentified {
            instruments: instruments.len(),
            endogenous: endogenous.iter().map(|r| r.name.clone()).collect(),
        });
    }
    if matches!(kind, CovarianceKind::Robust(Hc::Hc2 | Hc::Hc3)) {
        return Err(EstimateError::Setting {
            setting: "the covariance of two-stage least squares",
            allowed: "classical, HC0, HC1 or of a kernel",
        });
    }
    let z = join(exogenous, instruments);
    let first: Vec<Ols> = endogenous
        .iter()
        .map(|r| Ols::fit(&r.values, z.clone()))
        .collect::<Result<_, _>>()?;
    let projected = endogenous
        .iter()
        .zip(&first)
        .map(|(r, fit)| Regressor::new(&r.name, fit.fitted.clone()));
    let second = Ols::fit(y, exogenous.iter().cloned().chain(projected).collect())?;
    let x = join(exogenous, endogenous);
    let fit = structural(second, y, &x);
    let (n, k, q) = (fit.n, fit.k, endogenous.len());

    let plain = Ols::fit(y, x.clone())?;
    let errors = endogenous.iter().zip(&first).map(|(r, fit)| {
        Regressor::new(
            &format!("first-stage error of {}", r.name),
            fit.residuals.clone(),
        )
    });
    // Errors that are rounding alone cannot be regressors.
    let mut vary = endogenous.iter().zip(&first);
    let vary = vary.all(|(r, fit)| fit.ssr > 1e-24 * dot(&r.values, &r.values));
    let larger = vary.then(|| x.iter().cloned().chain(errors).collect());
    let augmented = larger.and_then(|larger| Ols::fit(y, larger).ok());
    let names: Vec<&str> = endogenous.iter().map(|r| r.name.as_str()).collect();
    let wu_hausman = augmented.map(|a| {
        let null = format!("Exogeneity of {}", names.join(", "));
        f_test("Durbin–Wu–Hausman", &null, plain.ssr, &a, q)
    });
    let first_stages = first
        .iter()
        .zip(endogenous)
        .map(|(fit, r)| {
            let null = format!("No relation of {} to the instruments", r.name);
            let ssr = residual_sum(&r.values, exogenous)?;
            Ok(f_test("first-stage F", &null, ssr, fit, instruments.len()))
        })
        .collect::<Result<_, EstimateError>>()?;
    let spare = z.len() - k;
    let overidentification = if spare > 0 {
        let null = "Instruments uncorrelated with the error";
        let distribution = Distribution::ChiSquared { df: as_f64(spare) };
        let sargan = as_f64(n) * (1.0 - residual_sum(&fit.residuals, &z)? / fit.ssr);
        let j = hansen_j(y, &x, &z, &fit.residuals)?;
        Some(Overidentification {
            sargan: TestResult::new("Sargan", null, sargan, distribution.clone()),
            hansen_j: TestResult::new("Hansen J", null, j, distribution),
        })
    } else {
        None
    };
    Ok(TwoStage {
        covariance: covariance(&[&fit], kind)?,
        fit,
        first_stages,
        wu_hausman,
        overidentification,
    })
}

/// The second stage with residuals from the regressors themselves.
fn structural(second: Ols, y: &[f64], x: &[Regressor]) -> Ols {
    let x = columns(x);
    let value = |t: usize| -> f64 {
        x.iter()
            .zip(&second.coefficients)
            .map(|(x, b)| x[t] * b)
            .sum()
    };
    let fitted: Vec<f64> = (0..y.len()).map(value).collect();
    let residuals: Vec<f64> = y.iter().zip(&fitted).map(|(y, f)| y - f).collect();
    let ssr = dot(&residuals, &residuals);
    // The sums of squares of y follow from the second stage's own R².
    let ratio = ssr / second.ssr;
    let steps = residuals.windows(2).map(|e| (e[1] - e[0]).powi(2));
    Ols {
        durbin_watson: steps.sum::<f64>() / ssr,
        ssr,
        s2: ssr / as_f64(second.df),
        r2: 1.0 - (1.0 - second.r2) * ratio,
        adjusted_r2: 1.0 - (1.0 - second.adjusted_r2) * ratio,
        log_likelihood: f64::NAN,
        aic: f64::NAN,
        bic: f64::NAN,
        fitted,
        residuals,
        ..second
    }
}

pub(super) fn join(first: &[Regressor], second: &[Regressor]) -> Vec<Regressor> {
    first.iter().chain(second).cloned().collect()
}

/// F of the `q` regressors that `larger` has more.
fn f_test(name: &str, null: &str, ssr: f64, larger: &Ols, q: usize) -> TestResult {
    let (numerator, denominator) = (as_f64(q), as_f64(larger.df));
    let statistic = (ssr - larger.ssr) / numerator / larger.s2;
    let distribution = Distribution::F {
        numerator,
        denominator,
    };
    TestResult::new(name, null, statistic, distribution)
}

/// Sum of squared residuals; that of y itself on no regressor.
fn residual_sum(y: &[f64], regressors: &[Regressor]) -> Result<f64, EstimateError> {
    if regressors.is_empty() {
        return Ok(dot(y, y));
    }
    Ok(Ols::fit(y, regressors.to_vec())?.ssr)
}

/// `n g' S⁻¹ g` at the two-step estimate, as the residual sum of squares of `C⁻¹Z'y` on `C⁻¹Z'X` over
/// n, with `C C' = S = Σ e² z z'/n`.
fn hansen_j(
    y: &[f64],
    x: &[Regressor],
    z: &[Regressor],
    residuals: &[f64],
) -> Result<f64, EstimateError> {
    let n = as_f64(y.len());
    let scores: Vec<Vec<f64>> = z
        .iter()
        .map(|z| z.values.iter().zip(residuals).map(|(z, e)| z * e).collect())
        .collect();
    let s = Matrix::from_fn(z.len(), z.len(), |i, j| dot(&scores[i], &scores[j]) / n);
    let singular = || EstimateError::SingularCovariance {
        what: z
            .iter()
            .map(|z| z.name.clone())
            .collect::<Vec<_>>()
            .join(", "),
    };
    let root = s.cholesky().ok_or_else(singular)?;
    let whiten = |v: &[f64]| {
        let moments: Vec<f64> = z.iter().map(|z| dot(&z.values, v)).collect();
        root.solve_lower(&moments).ok_or_else(singular)
    };
    let target = whiten(y)?;
    let moments = x
        .iter()
        .map(|x| whiten(&x.values))
        .collect::<Result<Vec<_>, _>>()?;
    let fit = least_squares(&moments, &target).map_err(|_| singular())?;
    Ok(dot(&fit.residuals, &fit.residuals) / n)
}
