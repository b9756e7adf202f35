//! The Engle–Granger test, by itself and beside estimators in levels.

use super::Procedure;
use super::unit_roots::{lags_words, mackinnon, read_lags};
use crate::estimate::{Deterministic, LagCriterion, Lags, Regressor, covariance, engle_granger};
use crate::estimation::judge;
use crate::estimation::options::{Options, deterministic_words};
use crate::estimation::report::{EstimateTest, small, statistic};
use crate::estimation::rows::Rows;
use crate::estimation::task::{Draft, Outcome, Task};

/// The test and its options.
pub(super) struct EngleGranger {
    deterministic: Deterministic,
    lags: Lags,
}

impl EngleGranger {
    pub(super) fn read(options: &mut Options<'_>) -> Option<Self> {
        let deterministic = options.deterministic(&[
            Deterministic::Constant,
            Deterministic::None,
            Deterministic::Trend,
            Deterministic::QuadraticTrend,
        ]);
        let lags = read_lags(options);
        Some(Self {
            deterministic: deterministic?,
            lags: lags?,
        })
    }
}

const LAW: &str = "Engle–Granger, lower tail (MacKinnon 1994, 2010)";
const NULL: &str = "No cointegration";

impl Procedure for EngleGranger {
    fn run(&self, task: &Task<'_>) -> Outcome<Draft> {
        let (y, x) = (task.dependent(), task.regressors());
        let found =
            engle_granger(y, &x, self.deterministic, self.lags).map_err(|e| task.refuse(e))?;
        let names: Vec<&str> = x.iter().map(|r| r.name.as_str()).collect();
        let mut draft = Draft::default();
        draft.said.push(format!(
            "Engle–Granger test: least squares of {} on {} and {}; then the Dickey–Fuller regression of the \
             residuals without deterministic terms, {}. p-value: MacKinnon 1994; critical values: MacKinnon \
             2010 at n − 1.",
            y.name,
            deterministic_words(self.deterministic),
            names.join(", "),
            lags_words(self.lags, found.lags, None)
        ));
        let p = found.p_value.unwrap_or(f64::NAN);
        let mut test = EstimateTest::new("Engle–Granger", found.statistic, LAW).judged(NULL, p);
        if let Some(critical) = found.critical {
            test = test.against(mackinnon(critical));
        }
        if p >= 0.05 {
            let message =
                format!("The Engle-Granger test does not reject no cointegration (p = {p:.3})");
            draft.findings.push(judge::no_cointegration(message));
        }
        draft.tests.push(test);
        let fit = &found.regression;
        let v = covariance(&[fit], super::least_squares::CLASSICAL).map_err(|e| task.refuse(e))?;
        let words = "classical; among I(1) series they do not hold";
        let mut equation = task.fitted("Static regression", &y.name, fit, &v, 0, words);
        for c in &mut equation.coefficients {
            (c.t, c.p, c.low, c.high) = (None, None, None, None);
        }
        draft.equations.push(equation);
        draft.statistics = vec![
            statistic("r_squared", fit.r2, "1 − ssr/tss"),
            statistic(
                "durbin_watson",
                fit.durbin_watson,
                "Σ (e_t − e_{t−1})² / Σ e²",
            ),
            statistic(
                "lags",
                f64::from(small(found.lags)),
                "lagged differences of the residuals",
            ),
        ];
        draft
            .findings
            .extend(judge::observations(task, fit.n, fit.k));
        let equation = task.equation();
        let ids: Vec<usize> = [equation.dependent]
            .into_iter()
            .chain(equation.regressors.clone())
            .collect();
        draft.findings.extend(judge::twice_integrated(task, &ids));
        draft.rows = Rows::of_fit(&y.name, &y.values, fit, 0);
        Ok(draft)
    }
}

/// The test beside an estimator in levels, lags by AIC: its entry, and the finding where it does not
/// reject. None where it cannot be made.
pub(super) fn beside(
    y: &Regressor,
    x: &[Regressor],
    deterministic: Deterministic,
    draft: &mut Draft,
) {
    // There is no response surface without a constant.
    let deterministic = deterministic.max(Deterministic::Constant);
    let lags = Lags::Chosen {
        by: LagCriterion::Aic,
        max: None,
    };
    let Ok(found) = engle_granger(y, x, deterministic, lags) else {
        return;
    };
    let Some(p) = found.p_value else { return };
    let mut test = EstimateTest::new("Engle–Granger", found.statistic, LAW).judged(NULL, p);
    if let Some(critical) = found.critical {
        test = test.against(mackinnon(critical));
    }
    draft.tests.push(test);
    if p >= 0.05 {
        let message = format!(
            "The Engle-Granger test (lags by AIC) does not reject no cointegration (p = {p:.3})"
        );
        draft.findings.push(judge::no_cointegration(message));
    }
}
