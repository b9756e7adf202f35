//! Static equations: least squares, with autoregressive errors, and in two stages.

use super::super::document::Covariance;
use super::super::outcome::{CovarianceUsed, EquationTest, TestGroup};
use super::checks::{
    Residuals, at, diagnostics, failed, income_endogenous, residual_test, series, told,
};
use super::{Dependence, Equation, Request, finite};
use crate::constraint::Affine;
use crate::estimate::{
    CovarianceKind, InstrumentedEquation, Ols, Region, Regressor, anderson_rubin, autoregressive,
    covariance, effective_f, two_stage,
};
use crate::finding::Finding;
use crate::series::SeriesKey;

type Estimated<'a> = Result<(Equation<'a>, Dependence), Vec<Finding>>;

/// Constant, regressors, trend and dummies, in the order of results.
pub(super) fn design(request: &Request<'_>) -> Vec<Regressor> {
    let mut deterministic = request.deterministic();
    let terms = deterministic.split_off(1);
    deterministic.extend(request.regressors());
    deterministic.extend(terms);
    deterministic
}

/// Ordinary least squares.
pub(super) fn ordinary<'a>(request: &Request<'a>) -> Estimated<'a> {
    let fit = Ols::fit(&request.volume().values, design(request)).map_err(|e| request.fault(&e))?;
    let (mut equation, dependence) = by_scores(request, fit.clone(), request.first())?;
    equation.result.tests = diagnostics(request, &fit, Residuals::Static);
    if !request.estimator.in_differences() {
        in_levels(request, &mut equation, &fit.residuals);
        equation.findings.extend(possibly_spurious(request, &fit));
    }
    equation.findings.extend(income_endogenous(request));
    finish(request, &mut equation);
    Ok((equation, dependence))
}

/// First-order autoregressive errors.
pub(super) fn autoregressive_errors<'a>(request: &Request<'a>) -> Estimated<'a> {
    let options = request.document.autoregressive_errors.unwrap_or_default();
    let rows = options.first_observation.unwrap_or_default().into();
    let y = request.volume().values;
    let found = autoregressive(&y, &design(request), rows).map_err(|e| request.fault(&e))?;
    let first = y.len() - found.transformed.n;
    let (mut equation, dependence) = by_scores(request, found.transformed.clone(), first)?;
    let result = &mut equation.result;
    result.error_autocorrelation = finite(found.rho);
    // R² of transformed data says nothing of the equation.
    (result.r_squared, result.adjusted_r_squared) = (None, None);
    result.tests = diagnostics(request, &found.transformed, Residuals::Static);
    in_levels(request, &mut equation, &found.residuals);
    equation.findings.extend(income_endogenous(request));
    finish(request, &mut equation);
    Ok((equation, dependence))
}

/// Two-stage least squares.
pub(super) fn two_stages<'a>(request: &Request<'a>) -> Estimated<'a> {
    let instrumented = request.demand.instrumented();
    let names: Vec<String> = instrumented.iter().map(ToString::to_string).collect();
    let (endogenous, exogenous): (Vec<Regressor>, Vec<Regressor>) = design(request)
        .into_iter()
        .partition(|r| names.contains(&r.name));
    let equation = InstrumentedEquation {
        y: request.volume().values,
        exogenous,
        endogenous,
        instruments: request
            .demand
            .instruments
            .iter()
            .map(|key| request.series(key))
            .collect(),
    };
    let kind = kind(request, equation.y.len());
    let found = two_stage(&equation, kind).map_err(|e| request.fault(&e))?;
    let mut tests: Vec<EquationTest> = found
        .first_stages
        .iter()
        .map(|t| told(TestGroup::Instruments, t))
        .collect();
    let mut findings = Vec::new();
    if equation.endogenous.len() == 1 {
        if let Ok(strength) = effective_f(&equation, kind) {
            if strength.statistic < strength.critical_10 {
                let finding = Finding::notice("weak_instruments", &strength.sentence);
                findings.push(at(request, finding));
            }
            tests.push(EquationTest {
                group: TestGroup::Instruments,
                name: "effective F".to_owned(),
                statistic: finite(strength.statistic),
                distribution: "Montiel Olea & Pflueger 2013, bias of 10 %".to_owned(),
                p: None,
                critical: finite(strength.critical_10),
                lower_critical: None,
                sentence: strength.sentence,
            });
        }
        if let Ok(set) = anderson_rubin(&equation, 0.95) {
            tests.push(confidence_set(&request.label(&names[0]).0, set));
        }
    }
    if let Some(over) = &found.overidentification {
        tests.push(told(TestGroup::Instruments, &over.sargan));
        tests.push(told(TestGroup::Instruments, &over.hansen_j));
    }
    if let Some(test) = &found.wu_hausman {
        tests.push(told(TestGroup::Exogeneity, test));
        if test.p_value < 0.05 {
            let message = format!(
                "Least squares of demand for {} is biased: exogeneity of its regressors is rejected (p {:.3})",
                request.side.noun(),
                test.p_value
            );
            findings.push(at(request, Finding::notice("income_endogenous", message)));
        }
    }
    let fit = found.fit;
    let (mut equation, dependence) = by_scores(request, fit.clone(), request.first())?;
    tests.extend(diagnostics(request, &fit, Residuals::Oblique));
    equation.result.tests = tests;
    equation.findings = findings;
    if !request.estimator.in_differences() {
        in_levels(request, &mut equation, &fit.residuals);
        equation.findings.extend(possibly_spurious(request, &fit));
    }
    finish(request, &mut equation);
    Ok((equation, dependence))
}

fn confidence_set(name: &str, set: Option<Region>) -> EquationTest {
    let of = match set {
        None => "is empty: the instruments themselves are rejected".to_owned(),
        Some(Region::Interval { low, high }) => format!("is {low:.2} to {high:.2}"),
        Some(Region::Complement { low, high }) => {
            format!("is all below {low:.2} and above {high:.2}")
        }
        Some(Region::WholeLine) => "is unbounded: the data say nothing".to_owned(),
    };
    EquationTest {
        group: TestGroup::Instruments,
        name: "Anderson–Rubin".to_owned(),
        statistic: None,
        distribution: "F, homoskedastic errors".to_owned(),
        p: None,
        critical: None,
        lower_critical: None,
        sentence: format!(
            "The 95 % set of the coefficient of {name} that holds with weak instruments too {of}."
        ),
    }
}

/// The covariance behind tests: as the document says, else classical in differences and Newey–West in levels.
fn kind(request: &Request<'_>, n: usize) -> CovarianceKind {
    let differences = request.estimator.in_differences();
    match (request.document.covariance, differences) {
        (Some(Covariance::Classical), _) | (None, true) => CovarianceKind::Classical,
        (Some(Covariance::NeweyWest), _) | (None, false) => newey_west(request, n),
    }
}

fn newey_west(request: &Request<'_>, n: usize) -> CovarianceKind {
    CovarianceKind::NeweyWest {
        lags: request.kernel_lags(n),
        small_sample: request.document.small_sample.unwrap_or(true),
    }
}

/// An equation whose covariance comes from the scores of one regression.
fn by_scores<'a>(request: &Request<'a>, fit: Ols, first: usize) -> Estimated<'a> {
    let of = |kind| covariance(&[&fit], kind).map_err(|e| request.fault(&e));
    let (chosen, robust) = (kind(request, fit.n), newey_west(request, fit.n));
    let (classical, newey_west) = (of(CovarianceKind::Classical)?, of(robust)?);
    let used = if chosen == CovarianceKind::Classical {
        CovarianceUsed::Classical
    } else {
        CovarianceUsed::NeweyWest
    };
    let own = if used == CovarianceUsed::Classical {
        classical.clone()
    } else {
        newey_west.clone()
    };
    let mut result = request.told(&fit, first, &own, used);
    for (i, coefficient) in result.coefficients.iter_mut().enumerate() {
        let error = |m: &crate::linalg::Matrix| finite(m.at(i, i).max(0.0).sqrt());
        coefficient.std_error_classical = error(&classical);
        coefficient.std_error_newey_west = error(&newey_west);
    }
    if let CovarianceKind::NeweyWest { lags, small_sample } = robust {
        (result.lags, result.small_sample) = (super::small(lags), small_sample);
    }
    let equation = linear(request, &fit, own, result);
    Ok((equation, Dependence::Scores(Box::new(fit), chosen)))
}

/// An equation whose responses are coefficients of a regression on the series themselves.
pub(super) fn linear<'a>(
    request: &Request<'a>,
    fit: &Ols,
    covariance: crate::linalg::Matrix,
    result: super::EquationResult,
) -> Equation<'a> {
    let named = |name: &str| {
        let place = fit.position(name)?;
        Some(Affine::coefficient(place, fit.coefficients[place]))
    };
    let response = |key: &SeriesKey| named(&key.to_string()).unwrap_or_default();
    let constant = if request.estimator.in_differences() {
        named("const")
    } else {
        named("trend")
    };
    Equation {
        demand: request.demand,
        side: request.side,
        covariance,
        rows: fit.n,
        size: fit.k,
        df: fit.df,
        income: response(&request.demand.activity),
        price: request.demand.relative_price.as_ref().map(response),
        autonomous: request.autonomous(constant, response),
        divisor: None,
        result,
        findings: Vec::new(),
    }
}

/// What levels bring with them: a test of cointegration, and the doubt about t statistics.
pub(super) fn in_levels(request: &Request<'_>, equation: &mut Equation<'_>, deviations: &[f64]) {
    let (tests, findings) =
        residual_test(request, deviations, request.has_trend(), series(request));
    equation.result.tests.splice(0..0, tests);
    equation.findings.extend(findings);
    let message = "Standard errors in log levels are not valid where the series have unit roots, even where they \
                   cointegrate";
    let finding = Finding::notice("levels_inference_invalid", message);
    equation
        .findings
        .push(at(request, finding).remedy("Rely on ardl, dols or fmols"));
}

/// Granger and Newbold's sign of a regression between unrelated walks.
pub(super) fn possibly_spurious(request: &Request<'_>, fit: &Ols) -> Option<Finding> {
    (fit.durbin_watson < fit.r2).then(|| {
        let message = format!(
            "Demand for {} in levels may be spurious: Durbin-Watson {:.2} lies below R2 {:.2}",
            request.side.noun(),
            fit.durbin_watson,
            fit.r2
        );
        at(request, Finding::error("possibly_spurious", message))
    })
}

pub(super) fn finish(request: &Request<'_>, equation: &mut Equation<'_>) {
    equation
        .findings
        .extend(failed(request, &equation.result.tests));
}
