//! Both demand equations as one system of seemingly unrelated regressions.

use super::super::outcome::{CovarianceUsed, TestGroup};
use super::checks::{Residuals, diagnostics, income_endogenous, told};
use super::least_squares::{design, finish, in_levels, linear, possibly_spurious};
use super::{Both, Equation, Request};
use crate::estimate::{Ols, System, SystemEquation, seemingly_unrelated};
use crate::finding::Finding;
use crate::linalg::{Matrix, product};

/// Fits the system; its covariance is the joint one.
pub(super) fn fit<'a>(
    imports: &Request<'a>,
    exports: &Request<'a>,
) -> Result<Both<'a>, Vec<Finding>> {
    let equation = |request: &Request<'_>| SystemEquation {
        name: request.side.noun().to_owned(),
        y: request.volume().values,
        regressors: design(request),
    };
    let iterate = imports
        .document
        .seemingly_unrelated
        .and_then(|o| o.iterate)
        .unwrap_or(true);
    // Each on its own first, so that a fault is told at its own equation.
    let alone = |request: &Request<'_>| {
        Ols::fit(&request.volume().values, design(request)).map_err(|e| request.fault(&e))
    };
    let single = [alone(imports)?, alone(exports)?];
    let system = seemingly_unrelated(&[equation(imports), equation(exports)], &[], iterate)
        .map_err(|e| imports.fault(&e))?;
    let k = single[0].k;
    let [first, second] = single;
    Ok(Both {
        imports: part(imports, &system, first, 0),
        exports: part(exports, &system, second, k),
        joint: system.covariance,
    })
}

/// One equation of the system, `start` its first coefficient.
fn part<'a>(request: &Request<'a>, system: &System, single: Ols, start: usize) -> Equation<'a> {
    let own = Matrix::from_fn(single.k, single.k, |i, j| {
        system.covariance.at(start + i, start + j)
    });
    let residuals = &system.residuals[usize::from(start > 0)];
    let fit = replaced(
        single.clone(),
        &system.coefficients[start..start + single.k],
        residuals,
    );
    let result = request.told(&fit, request.first(), &own, CovarianceUsed::Classical);
    let mut equation = linear(request, &fit, own, result);
    let mut tests = vec![told(TestGroup::System, &system.breusch_pagan)];
    tests.extend(diagnostics(request, &fit, Residuals::Oblique));
    equation.result.tests = tests;
    if !request.estimator.in_differences() {
        in_levels(request, &mut equation, residuals);
        equation.findings.extend(possibly_spurious(request, &fit));
    }
    equation.findings.extend(income_endogenous(request));
    finish(request, &mut equation);
    equation
}

/// A fit with other coefficients, and what follows from their residuals. Its likelihood is lost.
pub(super) fn replaced(fit: Ols, coefficients: &[f64], residuals: &[f64]) -> Ols {
    let ssr = product(residuals, residuals);
    let ratio = ssr / fit.ssr;
    let steps: f64 = residuals.windows(2).map(|e| (e[1] - e[0]).powi(2)).sum();
    let y = fit.dependent();
    Ols {
        coefficients: coefficients.to_vec(),
        residuals: residuals.to_vec(),
        fitted: y.iter().zip(residuals).map(|(y, e)| y - e).collect(),
        ssr,
        s2: fit.s2 * ratio,
        r2: 1.0 - (1.0 - fit.r2) * ratio,
        adjusted_r2: 1.0 - (1.0 - fit.adjusted_r2) * ratio,
        durbin_watson: steps / ssr,
        log_likelihood: f64::NAN,
        aic: f64::NAN,
        bic: f64::NAN,
        ..fit
    }
}
