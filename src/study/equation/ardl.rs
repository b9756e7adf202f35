//! Autoregressive distributed lags in error-correction form.

use super::super::options::{ArdlCase, usual_lags};
use super::super::outcome::{
    AdjustmentResult, CovarianceUsed, DynamicsResult, EquationTest, LongRunResult, TestGroup,
};
use super::checks::{
    Residuals, SIGNIFICANCE, at, diagnostics, failed, half_life_years, judge_adjustment,
};
use super::dependence::Linear;
use super::johansen::weak_exogeneity;
use super::{Dependence, Equation, Request, explain_series, finite, small};
use crate::constraint::Affine;
use crate::estimate::{
    Ardl, ArdlData, ArdlOrders, BoundsCase, BoundsDesign, BoundsNull, BoundsStatistics,
    LevelRelation, NullDistribution, select_orders,
};
use crate::finding::Finding;
use crate::series::SeriesKey;

/// Fits the equation, with bounds tests at the exact size.
pub(super) fn fit<'a>(request: &Request<'a>) -> Result<(Equation<'a>, Dependence), Vec<Finding>> {
    let fault = |e| explain_series(e, request);
    let (y, x, fixed) = (request.volume(), request.regressors(), request.dummies());
    let data = ArdlData {
        y: &y,
        x: &x,
        fixed: &fixed,
    };
    let case = deterministic_case(request);
    let (orders, choice) = orders(request, &data, case.into())?;
    let first = orders.longest();
    let model = Ardl::fit(&data, orders.clone(), case.into()).map_err(fault)?;
    let statistics = model.bounds().map_err(fault)?;
    let design = BoundsDesign {
        observations: model.ecm.n,
        regressors: x.len(),
        case: case.into(),
        orders: Some(orders.clone()),
    };
    let null = design
        .simulate(request.simulation(), request.machine.store)
        .map_err(fault)?;

    let mut result = request.told(
        &model.ecm,
        first,
        &model.covariance,
        CovarianceUsed::Classical,
    );
    for coefficient in &mut result.coefficients {
        coefficient.std_error_classical = coefficient.std_error;
    }
    // Biased towards 2 by the lagged dependent variable.
    result.durbin_watson = None;
    result.long_run = model
        .long_run
        .iter()
        .map(|c| {
            let (name, series) = request.label(&c.name);
            LongRunResult {
                name,
                series,
                estimate: c.value,
                std_error: c.standard_error,
            }
        })
        .collect();
    let half_life = half_life_years(request, model.adjustment);
    result.adjustment = Some(AdjustmentResult {
        speed: model.adjustment,
        std_error: model.adjustment_error,
        half_life_years: half_life,
    });
    result.dynamics = Some(DynamicsResult {
        lags: [&[orders.p], &orders.q[..]]
            .concat()
            .into_iter()
            .map(small)
            .collect(),
        leads: None,
        case: Some(case),
        choice,
    });
    result.tests = bounds_tests(&statistics, &null, case.into());
    let mut findings: Vec<Finding> = no_level_relation(request, &statistics, &null)
        .into_iter()
        .collect();
    findings.extend(judge_adjustment(request, model.adjustment, half_life));
    if let Some((test, finding)) = weak_exogeneity(request, orders.longest()) {
        result.tests.push(test);
        findings.extend(finding);
    }
    result
        .tests
        .extend(diagnostics(request, &model.ecm, Residuals::Dynamic));
    findings.extend(failed(request, &result.tests));

    let named = |name: &str| {
        let place = model.ecm.position(name)?;
        Some(Affine::coefficient(place, model.ecm.coefficients[place]))
    };
    // Long-run coefficients are −b/φ.
    let divisor = -named(&format!("{}.L1", y.name)).unwrap_or_default();
    let response = |key: &SeriesKey| {
        let level = named(&format!("{key}.L1")).or_else(|| named(&format!("{key}.L0")));
        level.unwrap_or_default().over(&divisor)
    };
    let trend = named("trend").map(|trend| trend.over(&divisor));
    let equation = Equation {
        demand: request.demand,
        side: request.side,
        rows: model.ecm.n,
        size: model.ecm.k,
        df: model.ecm.df,
        income: response(&request.demand.activity),
        price: request.demand.relative_price.as_ref().map(response),
        autonomous: request.autonomous(trend, response),
        divisor: Some(divisor.clone()),
        covariance: model.covariance.clone(),
        result,
        findings,
    };
    let linear = Linear::of(&model.ecm, first, model.ecm.s2);
    Ok((equation, Dependence::Independent(linear)))
}

fn deterministic_case(request: &Request<'_>) -> ArdlCase {
    let given = request.document.ardl.as_ref().and_then(|o| o.case);
    given.unwrap_or(if request.has_trend() {
        ArdlCase::V
    } else {
        ArdlCase::III
    })
}

/// Orders as given, or chosen over the full grid with the choice in words.
fn orders(
    request: &Request<'_>,
    data: &ArdlData<'_>,
    case: BoundsCase,
) -> Result<(ArdlOrders, Option<String>), Vec<Finding>> {
    let count = |v: u32| usize::try_from(v).unwrap_or(usize::MAX);
    let options = request.document.ardl.clone().unwrap_or_default();
    let given = match request.side {
        super::Side::Imports => options.import_orders,
        super::Side::Exports => options.export_orders,
    };
    if let Some(given) = given {
        let mut given = given.into_iter().map(count);
        let p = given.next().unwrap_or(1);
        let orders = ArdlOrders {
            p,
            q: given.collect(),
        };
        return Ok((orders, None));
    }
    let lags = options
        .max_lags
        .unwrap_or_else(|| usual_lags(request.document.frequency));
    let most = vec![count(lags); data.x.len()];
    let criterion = options.criterion.unwrap_or_default();
    let found = select_orders(
        data,
        count(lags),
        &most,
        case.deterministic(),
        criterion.into(),
    )
    .map_err(|e| explain_series(e, request))?;
    let name = match criterion {
        super::super::options::LagChoice::Aic => "AIC",
        super::super::options::LagChoice::Bic => "BIC",
    };
    let choice = format!(
        "{name} among {} equations with at most {lags} lags on {} common rows; {} left out as too large, {} as \
         collinear",
        found.compared, found.observations, found.too_large, found.collinear
    );
    let Some(best) = found.best.into_iter().next() else {
        let message = "No equation of the grid can be estimated";
        return Err(vec![at(
            request,
            Finding::error("too_few_observations", message),
        )]);
    };
    Ok((best.orders, Some(choice)))
}

fn bounds_tests(
    found: &BoundsStatistics,
    null: &BoundsNull,
    case: BoundsCase,
) -> Vec<EquationTest> {
    let test =
        |name: &str, what: &str, statistic: f64, null: &[NullDistribution; 2], upper: bool| {
            let at = |d: &NullDistribution| {
                if upper {
                    (d.quantile(1.0 - SIGNIFICANCE), d.upper_tail(statistic))
                } else {
                    (d.quantile(SIGNIFICANCE), d.lower_tail(statistic))
                }
            };
            let ((lower, _), (critical, p)) = (at(&null[0]), at(&null[1]));
            let beyond = |bound: f64| {
                if upper {
                    statistic > bound
                } else {
                    statistic < bound
                }
            };
            let verdict = if beyond(critical) {
                "is rejected"
            } else if beyond(lower) {
                "is neither rejected nor not"
            } else {
                "is not rejected"
            };
            EquationTest {
                group: TestGroup::Cointegration,
                name: name.to_owned(),
                statistic: finite(statistic),
                distribution: format!(
                    "simulated at {} rows, {} draws",
                    found.observations, null[1].draws
                ),
                p: finite(p),
                critical: finite(critical),
                lower_critical: finite(lower),
                sentence: format!(
                    "{what} {verdict} at the 5 % level (bounds {lower:.2} and {critical:.2})."
                ),
            }
        };
    let mut tests = vec![
        test("bounds F", "No level relation", found.f, &null.f, true),
        test(
            if case.has_published_t() {
                "bounds t"
            } else {
                "bounds t (simulated only)"
            },
            "No return to a level relation",
            found.t,
            &null.t,
            false,
        ),
    ];
    if let Some(f) = found.f_regressors {
        let what = "A level relation without the regressors";
        tests.push(test(
            "F of lagged regressors",
            what,
            f,
            &null.f_regressors,
            true,
        ));
    }
    tests
}

/// Why there is no level relation to speak of.
fn no_level_relation(
    request: &Request<'_>,
    found: &BoundsStatistics,
    null: &BoundsNull,
) -> Option<Finding> {
    let how = match found.judge(null, SIGNIFICANCE) {
        LevelRelation::Cointegrated => return None,
        LevelRelation::DependentStationary => {
            "the regressors have no part in it (degenerate: the F of their lagged levels does not reject)"
        }
        LevelRelation::NoAdjustment => {
            "nothing returns to it (degenerate: the bounds t does not reject)"
        }
        LevelRelation::None => "the bounds F lies below its lower bound",
        LevelRelation::Inconclusive => "the bounds tests do not reject that there is none",
    };
    let message = format!(
        "No level relation of {} is established at 5 per cent: {how}; F {:.2} (upper bound {:.2}), t {:.2} ({:.2})",
        request.side.noun(),
        found.f,
        null.f[1].quantile(1.0 - SIGNIFICANCE),
        found.t,
        null.t[1].quantile(SIGNIFICANCE)
    );
    Some(at(request, Finding::error("no_cointegration", message)))
}
