//! Tests that go with an equation, and what they show.

use super::super::options::usual_lags;
use super::super::outcome::{EquationTest, TestGroup};
use super::{Request, finite};
use crate::estimate::{
    Deterministic, Distribution, HALF_LIFE, LagCriterion, Lags, Ols, Regressor, TestResult, adf,
    arch, breusch_godfrey, breusch_pagan, breusch_pagan_studentised, jarque_bera, ljung_box,
    mackinnon_critical, mackinnon_p, reset, white,
};
use crate::finding::Finding;

/// Below this range a logarithm, or its growth, counts as constant: rounding of logs is 1e-15.
const CONSTANT: f64 = 1e-10;
/// Significance of every test here.
pub(super) const SIGNIFICANCE: f64 = 0.05;

pub(super) fn nearly_constant(values: &[f64]) -> bool {
    let low = values.iter().fold(f64::INFINITY, |m, v| m.min(*v));
    let high = values.iter().fold(f64::NEG_INFINITY, |m, v| m.max(*v));
    high - low <= CONSTANT
}

/// Which diagnostics an equation's residuals allow.
#[derive(Clone, Copy, PartialEq, Eq)]
pub(super) enum Residuals {
    /// Of least squares on regressors that are not lags of the explained series.
    Static,
    /// Of least squares with lagged dependent variables, where the correlogram misleads.
    Dynamic,
    /// Not orthogonal to the regressors, so that auxiliary regressions mislead.
    Oblique,
}

/// All diagnostics that apply.
pub(super) fn diagnostics(
    request: &Request<'_>,
    fit: &Ols,
    residuals: Residuals,
) -> Vec<EquationTest> {
    let per_year = request.document.frequency.periods_per_year();
    let lags = usize::try_from(per_year.unwrap_or(1)).unwrap_or(1).max(2);
    let regression = residuals != Residuals::Oblique;
    let mut tests: Vec<Option<TestResult>> = Vec::new();
    if regression {
        tests.push(breusch_godfrey(fit, lags).ok().map(|t| t.f));
    }
    if residuals != Residuals::Dynamic {
        tests.push(ljung_box(fit, lags).ok());
    }
    tests.push(arch(fit, lags).ok().map(|t| t.f));
    if regression {
        tests.push(breusch_pagan_studentised(fit).ok().map(|t| t.lm));
        tests.push(breusch_pagan(fit).ok());
        tests.push(white(fit).ok().map(|t| t.lm));
        tests.push(reset(fit, 3).ok());
    }
    tests.push(Some(jarque_bera(fit)));
    let known = tests.into_iter().flatten();
    known
        .filter(|t| t.statistic.is_finite())
        .map(|t| told(TestGroup::Diagnostic, &t))
        .collect()
}

/// A notice of the diagnostics that reject at 5 per cent.
pub(super) fn failed(request: &Request<'_>, tests: &[EquationTest]) -> Option<Finding> {
    let rejects = |t: &&EquationTest| {
        let counted = match t.group {
            TestGroup::Diagnostic => true,
            TestGroup::Instruments => t.name.starts_with("Sargan") || t.name.starts_with("Hansen"),
            TestGroup::Cointegration | TestGroup::Exogeneity | TestGroup::System => false,
        };
        counted && t.p.is_some_and(|p| p < SIGNIFICANCE)
    };
    let names: Vec<String> = tests
        .iter()
        .filter(rejects)
        .map(|t| format!("{} (p {:.3})", t.name, t.p.unwrap_or(f64::NAN)))
        .collect();
    (!names.is_empty()).then(|| {
        let message = format!(
            "Demand for {} is rejected at 5 per cent by {}",
            request.side.noun(),
            names.join(", ")
        );
        at(request, Finding::notice("failed_diagnostic", message))
    })
}

/// A test as results carry it.
pub(super) fn told(group: TestGroup, test: &TestResult) -> EquationTest {
    let distribution = match test.distribution {
        Distribution::Normal => "normal".to_owned(),
        Distribution::T { df } => format!("t({df})"),
        Distribution::ChiSquared { df } => format!("chi-squared({df})"),
        Distribution::F {
            numerator,
            denominator,
        } => format!("F({numerator}, {denominator})"),
        Distribution::Other { name } => name.to_owned(),
    };
    EquationTest {
        group,
        name: test.name.clone(),
        statistic: finite(test.statistic),
        distribution,
        p: finite(test.p_value),
        critical: None,
        lower_critical: None,
        sentence: test.sentence.clone(),
    }
}

/// Residual-based test of no cointegration: Dickey and Fuller's of the deviations from a level relation among
/// `series` series, with a constant and, on request, a trend.
///
/// Critical value of `MacKinnon` 2010 at n − 1. A relation without error needs no test.
pub(super) fn residual_test(
    request: &Request<'_>,
    deviations: &[f64],
    trend: bool,
    series: usize,
) -> (Vec<EquationTest>, Vec<Finding>) {
    if nearly_constant(deviations) {
        return (Vec::new(), Vec::new());
    }
    let deterministic = if trend {
        Deterministic::Trend
    } else {
        Deterministic::Constant
    };
    let most = usize::try_from(usual_lags(request.document.frequency)).unwrap_or(2);
    let lags = Lags::Chosen {
        by: LagCriterion::Aic,
        max: Some(most),
    };
    let regressor = Regressor::new("deviations", deviations.to_vec());
    let found = adf(&regressor, Deterministic::None, lags).ok();
    let critical = mackinnon_critical(deterministic, series, deviations.len() - 1);
    let (Some(found), Some(critical)) = (found, critical) else {
        let message = format!(
            "Whether {} have a level relation cannot be tested with so few observations",
            request.side.noun()
        );
        let finding = Finding::error("no_cointegration", message);
        return (Vec::new(), vec![at(request, finding)]);
    };
    let rejected = found.statistic < critical.five;
    let verdict = if rejected { "is" } else { "is not" };
    let test = EquationTest {
        group: TestGroup::Cointegration,
        name: "Dickey–Fuller of the deviations".to_owned(),
        statistic: finite(found.statistic),
        distribution: format!("response surface, {series} series, {} lags", found.lags),
        p: mackinnon_p(found.statistic, deterministic, series).and_then(finite),
        critical: Some(critical.five),
        lower_critical: None,
        sentence: format!(
            "No level relation {verdict} rejected at the 5 % level (t = {:.2}, critical value {:.2}).",
            found.statistic, critical.five
        ),
    };
    let finding = (!rejected).then(|| {
        let message = format!(
            "No level relation of {} is found: t of the deviations {:.2} against a critical value of {:.2} \
             at 5 per cent",
            request.side.noun(),
            found.statistic,
            critical.five
        );
        at(request, Finding::error("no_cointegration", message))
    });
    (vec![test], finding.into_iter().collect())
}

/// Home income in import demand is correlated with the error, as imports are a part of it.
pub(super) fn income_endogenous(request: &Request<'_>) -> Option<Finding> {
    let home = request.side == super::Side::Imports
        && request.demand.activity == request.document.activity;
    home.then(|| {
        let message = "Imports are a part of what home income measures, so that its coefficient is biased by \
                       least squares";
        at(request, Finding::notice("income_endogenous", message))
            .remedy("Compare two_stage_differences, ardl or dols")
    })
}

/// A speed of adjustment outside its range, or a slow one.
pub(super) fn judge_adjustment(
    request: &Request<'_>,
    speed: f64,
    half_life_years: Option<f64>,
) -> Option<Finding> {
    let noun = request.side.noun();
    let annual = request.document.frequency.periods_per_year() == Some(1);
    // Within a year a deviation may overshoot; above 2 it grows.
    let lowest = if annual { -1.0 } else { -2.0 };
    let finding = if speed.is_nan() || speed >= 0.0 || speed <= lowest {
        let message = format!(
            "The adjustment of {noun}, {speed:.3} a period, lies outside {lowest} to 0: nothing draws them back to a \
             level relation"
        );
        Finding::error("adjustment_outside_range", message)
    } else {
        let years = half_life_years.filter(|years| *years > HALF_LIFE.0)?;
        let message = format!(
            "Half of a deviation of {noun} from the level relation lasts {years:.1} years, more than \
             {}",
            HALF_LIFE.0
        );
        if years > HALF_LIFE.1 {
            Finding::error("adjustment_outside_range", message)
        } else {
            Finding::notice("adjustment_outside_range", message)
        }
    };
    Some(at(request, finding))
}

/// Years that half of a deviation lasts.
pub(super) fn half_life_years(request: &Request<'_>, speed: f64) -> Option<f64> {
    let per_year = request
        .document
        .frequency
        .periods_per_year()
        .map_or(1.0, f64::from);
    (speed > -1.0 && speed < 0.0).then(|| 0.5_f64.ln() / (1.0 + speed).ln() / per_year)
}

pub(super) fn at(request: &Request<'_>, finding: Finding) -> Finding {
    finding.at_pointer(request.side.pointer())
}

/// Number of series in the level relation of an equation.
pub(super) fn series(request: &Request<'_>) -> usize {
    1 + request.demand.regressors().len()
}
