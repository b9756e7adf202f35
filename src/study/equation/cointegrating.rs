//! Cointegrating regressions: dynamic and fully modified least squares.

use super::super::outcome::{CovarianceUsed, DynamicsResult};
use super::checks::{Residuals, diagnostics, failed, residual_test, series};
use super::dependence::Linear;
use super::least_squares::linear;
use super::system::replaced;
use super::{Dependence, Equation, Request, explain_series, small};
use crate::estimate::{Deterministic, DolsCovariance, EstimateError, Ols, dols, fmols};
use crate::finding::Finding;
use crate::linalg::Matrix;

type Estimated<'a> = Result<(Equation<'a>, Dependence), Vec<Finding>>;

fn deterministic(request: &Request<'_>) -> Deterministic {
    if request.has_trend() {
        Deterministic::Trend
    } else {
        Deterministic::Constant
    }
}

/// Lags of the kernel as given, fewer than the rows that a regression has without `lost` observations.
fn kernel_lags(request: &Request<'_>, lost: usize) -> Result<Option<usize>, Vec<Finding>> {
    let lags = request.document.lags;
    let lags = lags.map(|l| usize::try_from(l).unwrap_or(usize::MAX));
    let observations = request.logs.periods.len().saturating_sub(lost);
    match lags {
        Some(lags) if lags >= observations => {
            Err(request.fault(&EstimateError::TooManyLags { lags, observations }))
        }
        _ => Ok(lags),
    }
}

/// Dynamic least squares.
pub(super) fn dynamic<'a>(request: &Request<'a>) -> Estimated<'a> {
    let options = request.document.dols.unwrap_or_default();
    let count = |v: Option<u32>| usize::try_from(v.unwrap_or(1)).unwrap_or(usize::MAX);
    let (leads, lags) = (count(options.leads), count(options.lags));
    let kernel = DolsCovariance::LongRun {
        lags: kernel_lags(request, 1 + leads + lags)?,
    };
    let terms = deterministic(request);
    let found = dols(
        &request.volume(),
        &request.regressors(),
        terms,
        leads,
        lags,
        kernel,
    )
    .map_err(|e| explain_series(e, request))?;
    let fit = found.regression;
    let form = Linear::of(&fit, lags + 1, found.long_run_variance);
    let own = form.covariance();
    let mut result = request.told(&fit, form.first, &own, CovarianceUsed::LongRun);
    result.lags = small(found.kernel_lags);
    result.dynamics = Some(DynamicsResult {
        lags: vec![small(lags)],
        leads: Some(small(leads)),
        case: None,
        choice: None,
    });
    result.tests = diagnostics(request, &fit, Residuals::Static);
    let equation = relation(request, &fit, linear(request, &fit, own, result));
    Ok((equation, Dependence::LongRun(form, found.kernel_lags)))
}

/// Fully modified least squares.
pub(super) fn fully_modified<'a>(request: &Request<'a>) -> Estimated<'a> {
    let found = fmols(
        &request.volume(),
        &request.regressors(),
        deterministic(request),
        kernel_lags(request, 1)?,
    )
    .map_err(|e| explain_series(e, request))?;
    let columns = found.scores.regressors;
    let variance = found.conditional_variance;
    let form = Linear {
        first: 1,
        regressors: columns.iter().map(|r| r.values.clone()).collect(),
        // The score of the constant is the error itself.
        errors: found.scores.scores[0].clone(),
        inverse_gram: Matrix::from_fn(columns.len(), columns.len(), |i, j| {
            found.covariance.at(i, j) / variance
        }),
        variance,
    };
    let own = form.covariance();
    let plain = Ols::fit(&request.volume().values[1..], columns).map_err(|e| request.fault(&e))?;
    let fit = replaced(plain, &found.coefficients, &found.residuals);
    let mut result = request.told(&fit, 1, &own, CovarianceUsed::LongRun);
    result.lags = small(found.kernel_lags);
    result.tests = diagnostics(request, &fit, Residuals::Oblique);
    let equation = relation(request, &fit, linear(request, &fit, own, result));
    Ok((equation, Dependence::LongRun(form, found.kernel_lags)))
}

/// Adds the test of the deviations from the relation over all observations.
fn relation<'a>(request: &Request<'_>, fit: &Ols, mut equation: Equation<'a>) -> Equation<'a> {
    let mut deviations = request.volume().values;
    let mut columns = deterministic(request).columns(deviations.len());
    columns.extend(request.regressors());
    for column in columns {
        let slope = fit.coefficient(&column.name).unwrap_or(0.0);
        for (deviation, value) in deviations.iter_mut().zip(&column.values) {
            *deviation -= slope * value;
        }
    }
    let (tests, findings) =
        residual_test(request, &deviations, request.has_trend(), series(request));
    equation.result.tests.splice(0..0, tests);
    equation.findings.extend(findings);
    equation
        .findings
        .extend(failed(request, &equation.result.tests));
    equation
}
