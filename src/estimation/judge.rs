//! What speaks against relying on an estimate. Limits are common practice.
//!
//! A finding of severity error makes the estimate unreliable; notices do not.

use super::report::{EstimateTest, small};
use super::request::Id;
use super::task::Task;
use crate::estimate::{
    Deterministic, HALF_LIFE, LagCriterion, Lags, Ols, Regressor, Shortage, adf, arch,
    breusch_godfrey, breusch_pagan, breusch_pagan_studentised, durbin_watson, jarque_bera,
    ljung_box, reset, shortage, white,
};
use crate::finding::Finding;

/// Above this many observations the exact distribution of Durbin and Watson's d takes too long.
const MOST_EXACT: usize = 400;
/// Above this many, ranks of roots are not looked for beside the method itself.
const MOST_PRETESTED: usize = 2000;

/// Whether there are enough observations for the coefficients of an equation.
pub(super) fn observations(task: &Task<'_>, n: usize, k: usize) -> Option<Finding> {
    let finding = match shortage(n, k, task.annual())? {
        Shortage::Needed(least) => Finding::error(
            "few_observations",
            format!("{n} observations for {k} coefficients; at least {least} are needed"),
        ),
        Shortage::Better(enough) => Finding::notice(
            "few_observations",
            format!("{n} observations; {enough} are better"),
        ),
    };
    Some(finding.at_pointer("/sample"))
}

/// The diagnostics of a fit, autocorrelation up to `lags`; those that do not exist for it are left out.
pub(super) fn diagnostics(fit: &Ols, lags: usize, lagged_dependent: bool) -> Vec<EstimateTest> {
    let mut tests: Vec<EstimateTest> = Vec::new();
    if !lagged_dependent
        && fit.n <= MOST_EXACT
        && let Ok(test) = durbin_watson(fit, false)
    {
        let mut entry = EstimateTest::new(
            "Durbin–Watson",
            test.statistic,
            "exact for these regressors and normal errors",
        );
        entry.p_value = super::report::finite(test.p_positive);
        entry.sentence = test.sentence;
        if let Some(bounds) = test.bounds {
            entry = entry.against([(0.05, bounds.lower), (0.05, bounds.upper)]);
            for (value, bound) in entry.critical_values.iter_mut().zip(["lower", "upper"]) {
                value.bound = Some(bound.to_owned());
            }
        }
        tests.push(entry);
    }
    let mut both = |name: &str, test: crate::estimate::AuxiliaryTest| {
        tests.push(EstimateTest::from(test.lm).named(&format!("{name}, LM")));
        tests.push(EstimateTest::from(test.f).named(&format!("{name}, F")));
    };
    if let Ok(test) = breusch_godfrey(fit, lags) {
        both("Breusch–Godfrey", test);
    }
    if let Ok(test) = arch(fit, lags) {
        both("ARCH", test);
    }
    if let Ok(test) = breusch_pagan_studentised(fit) {
        both("Breusch–Pagan, studentised", test);
    }
    if let Ok(test) = white(fit) {
        both("White", test);
    }
    if !lagged_dependent && let Ok(test) = ljung_box(fit, lags) {
        tests.push(test.into());
    }
    tests.extend(breusch_pagan(fit).ok().map(EstimateTest::from));
    tests.push(jarque_bera(fit).into());
    tests.extend(reset(fit, 3).ok().map(EstimateTest::from));
    tests
}

/// Lags of the diagnostics unless given: one year, two where data are annual.
pub(super) fn diagnostic_lags(task: &Task<'_>) -> usize {
    let year = task.request.frequency.periods_per_year().unwrap_or(5);
    usize::try_from(year).unwrap_or(1).max(2)
}

/// The diagnostics that reject at 5 %, in one notice.
pub(super) fn failed(tests: &[EstimateTest]) -> Option<Finding> {
    let names: Vec<&str> = tests
        .iter()
        .filter(|t| t.rejects())
        .map(|t| t.name.as_str())
        .collect();
    (!names.is_empty()).then(|| {
        let message = format!("Rejected at 5 per cent: {}", names.join("; "));
        Finding::notice("failed_diagnostic", message)
    })
}

/// Levels with Durbin–Watson below R² (Granger & Newbold 1974).
pub(super) fn spurious(task: &Task<'_>, dependent: Id, fit: &Ols) -> Option<Finding> {
    (task.in_levels(dependent) && fit.durbin_watson < fit.r2).then(|| {
        let message = format!(
            "The equation in levels may be spurious: Durbin-Watson {:.2} lies below R2 {:.2}",
            fit.durbin_watson, fit.r2
        );
        Finding::error("possibly_spurious", message).remedy("Test for cointegration")
    })
}

/// p-value of a unit root with a constant, lags by AIC.
fn unit_root_p(series: &Regressor) -> Option<f64> {
    let lags = Lags::Chosen {
        by: LagCriterion::Aic,
        max: None,
    };
    let test = adf(series, Deterministic::Constant, lags).ok()?;
    Some(test.p_value)
}

/// A notice where dependent and a regressor, both in levels, keep a unit root: t statistics have no
/// t distribution then.
pub(super) fn levels_inference(
    task: &Task<'_>,
    dependent: Id,
    regressors: &[Id],
) -> Option<Finding> {
    if task.n() > MOST_PRETESTED {
        return None;
    }
    let integrated =
        |id: &Id| task.in_levels(*id) && unit_root_p(task.column(*id)).is_some_and(|p| p > 0.05);
    let with = integrated(&dependent).then(|| regressors.iter().find(|id| integrated(id)))??;
    let message = format!(
        "{} and {} keep a unit root at 5 per cent (augmented Dickey-Fuller, constant, lags by AIC): \
         standard errors and p-values of least squares in levels do not hold",
        task.dependent_name(dependent),
        task.column(*with).name
    );
    Some(
        Finding::notice("levels_inference_invalid", message)
            .remedy("Use dynamic or fully modified least squares, or an error-correction form"),
    )
}

/// Notices for series whose first difference keeps a unit root: the method takes at most I(1).
pub(super) fn twice_integrated(task: &Task<'_>, ids: &[Id]) -> Vec<Finding> {
    if task.n() > MOST_PRETESTED {
        return Vec::new();
    }
    let one = |id: &Id| {
        let column = task.column(*id);
        let changes = column.values.windows(2).map(|w| w[1] - w[0]).collect();
        let p = unit_root_p(&Regressor::new(&column.name, changes))?;
        (p > 0.05).then(|| {
            let message = format!(
                "The first difference of {} keeps a unit root at 5 per cent (augmented Dickey-Fuller, \
                 constant, lags by AIC, p = {p:.3}): it may be I(2)",
                column.name
            );
            let finding = Finding::notice("i2_variable", message);
            task.request.variables[*id].place(finding)
        })
    };
    ids.iter().filter_map(one).collect()
}

/// Whether a speed of adjustment is plausible.
pub(super) fn adjustment(task: &Task<'_>, speed: f64, half_life: Option<f64>) -> Option<Finding> {
    let Some(half_life) = half_life else {
        let message = format!("The adjustment {speed:.3} lies outside -1 to 0");
        return Some(Finding::error("adjustment_outside_range", message));
    };
    let per_year = task.request.frequency.periods_per_year().unwrap_or(1);
    let years = half_life / f64::from(per_year);
    let message = format!("Half of a deviation is gone after {years:.1} years only");
    if years > HALF_LIFE.1 {
        Some(Finding::error("adjustment_outside_range", message))
    } else if years > HALF_LIFE.0 {
        Some(Finding::notice("adjustment_outside_range", message))
    } else {
        None
    }
}

/// No cointegration: an estimate in levels is not to be relied on.
pub(super) fn no_cointegration(message: String) -> Finding {
    Finding::error("no_cointegration", message).remedy("Estimate in differences")
}

impl Task<'_> {
    fn dependent_name(&self, id: Id) -> &str {
        &self.column(id).name
    }

    /// Number of rows as a double.
    pub(super) fn float(count: usize) -> f64 {
        f64::from(small(count))
    }
}
