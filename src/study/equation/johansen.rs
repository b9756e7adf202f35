//! One cointegrating relation in a vector error-correction model.

use super::super::options::{JohansenTerms, usual_lags};
use super::super::outcome::{
    AdjustmentResult, CovarianceUsed, DynamicsResult, EquationTest, LongRunResult, TestGroup,
};
use super::checks::{
    Residuals, SIGNIFICANCE, at, diagnostics, failed, half_life_years, judge_adjustment,
};
use super::dependence::Linear;
use super::{Dependence, Equation, Request, explain_series, finite, small};
use crate::constraint::Affine;
use crate::estimate::{Johansen, JohansenCase, Regressor, johansen, simulate_rank};
use crate::finding::Finding;
use crate::linalg::decompose;
use crate::series::SeriesKey;

/// Fits the system of the volume and its regressors with one relation, normalised on the volume.
pub(super) fn fit<'a>(request: &Request<'a>) -> Result<(Equation<'a>, Dependence), Vec<Finding>> {
    let fault = |e| explain_series(e, request);
    let options = request.document.johansen.unwrap_or_default();
    let lags = options
        .lags
        .unwrap_or_else(|| usual_lags(request.document.frequency));
    let lags = usize::try_from(lags).unwrap_or(usize::MAX);
    let case = options.case.unwrap_or(if request.has_trend() {
        JohansenTerms::RestrictedTrend
    } else {
        JohansenTerms::Constant
    });
    let system = system(request, lags, case.into()).map_err(fault)?;
    let model = system.vecm(1).map_err(fault)?;
    let volume = &model.equations[0];
    let classical = Linear::of(volume, lags, volume.s2).covariance();
    let mut result = request.told(volume, lags, &classical, CovarianceUsed::Classical);
    result.durbin_watson = None;

    let relation = &model.relation;
    let form = Linear {
        first: lags,
        regressors: (0..relation.regressors.columns())
            .map(|j| decompose::column(&relation.regressors, j))
            .collect(),
        errors: relation.errors.clone(),
        inverse_gram: relation.inverse_gram.clone(),
        variance: relation.variance,
    };
    let own = form.covariance();
    // β = (1, −θ).
    let named = |name: &str| {
        let place = system.names.iter().skip(1).position(|n| n == name)?;
        Some(-Affine::coefficient(place, model.beta.at(place + 1, 0)))
    };
    let response = |key: &SeriesKey| named(&key.to_string()).unwrap_or_default();
    result.long_run = system
        .names
        .iter()
        .skip(1)
        .enumerate()
        .map(|(i, name)| {
            let (name, series) = request.label(name);
            LongRunResult {
                name,
                series,
                estimate: -model.beta.at(i + 1, 0),
                std_error: own.at(i, i).max(0.0).sqrt(),
            }
        })
        .collect();
    let speed = model.alpha.at(0, 0);
    let half_life = half_life_years(request, speed);
    result.adjustment = Some(AdjustmentResult {
        speed,
        std_error: model.alpha_errors.at(0, 0),
        half_life_years: half_life,
    });
    result.dynamics = Some(DynamicsResult {
        lags: vec![small(lags)],
        leads: None,
        case: None,
        choice: None,
    });
    let (tests, mut findings) = rank_tests(request, &system)?;
    result.tests = tests;
    findings.extend(judge_adjustment(request, speed, half_life));
    if let Some((test, finding)) = exogeneity(request, &system) {
        result.tests.push(test);
        findings.extend(finding);
    }
    result
        .tests
        .extend(diagnostics(request, volume, Residuals::Dynamic));
    findings.extend(failed(request, &result.tests));
    let equation = Equation {
        demand: request.demand,
        side: request.side,
        rows: volume.n,
        size: volume.k,
        df: volume.df,
        income: response(&request.demand.activity),
        price: request.demand.relative_price.as_ref().map(response),
        autonomous: request.autonomous(named("trend"), response),
        divisor: None,
        covariance: own,
        result,
        findings,
    };
    Ok((equation, Dependence::Independent(form)))
}

fn system(
    request: &Request<'_>,
    lags: usize,
    case: JohansenCase,
) -> Result<Johansen, crate::estimate::SeriesError> {
    let mut series: Vec<Regressor> = vec![request.volume()];
    series.extend(request.regressors());
    johansen(&series, lags, case, &request.dummies())
}

/// Trace tests of no relation and of at most one, with critical values at the exact size.
fn rank_tests(
    request: &Request<'_>,
    system: &Johansen,
) -> Result<(Vec<EquationTest>, Vec<Finding>), Vec<Finding>> {
    let (mut tests, mut findings) = (Vec::new(), Vec::new());
    for (rank, null) in [(0, "No level relation"), (1, "At most one level relation")] {
        let Some(found) = system.tests.get(rank) else {
            continue;
        };
        let null_of_rank = simulate_rank(
            system.design(rank),
            request.simulation(),
            request.machine.store,
        )
        .map_err(|e| explain_series(e, request))?;
        let distribution = null_of_rank.trace;
        let critical = distribution.quantile(1.0 - SIGNIFICANCE);
        let rejected = found.trace > critical;
        let verdict = if rejected { "is" } else { "is not" };
        tests.push(EquationTest {
            group: TestGroup::Cointegration,
            name: format!("trace, rank {rank}"),
            statistic: finite(found.trace),
            distribution: format!(
                "simulated at {} rows with these lags, {} draws",
                system.observations, distribution.draws
            ),
            p: finite(distribution.upper_tail(found.trace)),
            critical: finite(critical),
            lower_critical: None,
            sentence: format!(
                "{null} {verdict} rejected at the 5 % level (critical value {critical:.2})."
            ),
        });
        let noun = request.side.noun();
        let trace = found.trace;
        let finding = match (rank, rejected) {
            (0, false) => Finding::error(
                "no_cointegration",
                format!(
                    "No level relation of {noun} is found: trace {trace:.1} against a critical value of \
                     {critical:.1} at 5 per cent"
                ),
            ),
            (1, true) => Finding::notice(
                "several_cointegrating_vectors",
                format!(
                    "The series of demand for {noun} have more than one level relation: trace {trace:.1} against a \
                     critical value of {critical:.1}; the one taken for demand is the strongest"
                ),
            ),
            _ => continue,
        };
        findings.push(at(request, finding));
    }
    Ok((tests, findings))
}

/// Do income and prices react to deviations from the demand relation?
fn exogeneity(request: &Request<'_>, system: &Johansen) -> Option<(EquationTest, Option<Finding>)> {
    let regressors: Vec<usize> = (1..system.series).collect();
    let found = system.weakly_exogenous(1, &regressors).ok()?;
    let rejected = found.p_value < SIGNIFICANCE;
    let noun = request.side.noun();
    let verdict = if rejected { "is" } else { "is not" };
    let test = EquationTest {
        group: TestGroup::Exogeneity,
        name: "weak exogeneity".to_owned(),
        statistic: finite(found.statistic),
        distribution: format!("chi-squared({})", found.df),
        p: finite(found.p_value),
        critical: None,
        lower_critical: None,
        sentence: format!(
            "Weak exogeneity of all regressors {verdict} rejected at the 5 % level (p = {:.4}).",
            found.p_value
        ),
    };
    let finding = rejected.then(|| {
        let message = format!(
            "Regressors of demand for {noun} react to deviations from it (p {:.3}): one equation alone does not use \
             all that the data say",
            found.p_value
        );
        at(request, Finding::notice("not_weakly_exogenous", message)).remedy("Compare johansen")
    });
    Some((test, finding))
}

/// The same for a single equation, in a system with its lags; none where the system cannot be estimated.
pub(super) fn weak_exogeneity(
    request: &Request<'_>,
    lags: usize,
) -> Option<(EquationTest, Option<Finding>)> {
    let case = if request.has_trend() {
        JohansenCase::RestrictedTrend
    } else {
        JohansenCase::Constant
    };
    exogeneity(request, &system(request, lags.max(1), case).ok()?)
}
