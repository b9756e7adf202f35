//! Cointegrating regressions: dynamic and fully modified least squares, and their stability.

use super::engle_granger::beside;
use super::unit_roots::{check_draws, read_simulation, thumb};
use super::{Procedure, at_most};
use crate::estimate::{
    Deterministic, DolsCovariance, Fmols, Instability, SeriesError, dols, fmols, hansen_1992,
    instability_null,
};
use crate::estimation::covariance::Covariance;
use crate::estimation::judge;
use crate::estimation::options::{Options, deterministic_words};
use crate::estimation::report::{small, statistic};
use crate::estimation::rows::Rows;
use crate::estimation::task::{Draft, Outcome, Task, standard_errors};

const TERMS: [Deterministic; 4] = [
    Deterministic::Constant,
    Deterministic::None,
    Deterministic::Trend,
    Deterministic::QuadraticTrend,
];

/// Findings and the test of cointegration that both estimators share.
fn judge_levels(
    task: &Task<'_>,
    deterministic: Deterministic,
    n: usize,
    k: usize,
    draft: &mut Draft,
) {
    let equation = task.equation();
    beside(task.dependent(), &task.regressors(), deterministic, draft);
    draft.findings.extend(judge::observations(task, n, k));
    let ids: Vec<usize> = [equation.dependent]
        .into_iter()
        .chain(equation.regressors.clone())
        .collect();
    draft.findings.extend(judge::twice_integrated(task, &ids));
}

/// Dynamic least squares.
pub(super) struct Dynamic {
    deterministic: Deterministic,
    leads: usize,
    lags: usize,
    kernel_lags: Option<usize>,
    covariance: Option<Covariance>,
}

impl Dynamic {
    pub(super) fn read(options: &mut Options<'_>) -> Option<Self> {
        let deterministic = options.deterministic(&TERMS);
        let leads = options.count("leads", 1, 0, 24);
        let lagged = options.count("lagged", 1, 0, 24);
        let covariance = Covariance::read_if_given(options, "long_run")?;
        let kernel_lags = if covariance.is_none() {
            options.maybe_count("kernel_lags", 0, 5000)
        } else {
            options.useless(&["kernel_lags"], "it belongs to the covariance long_run");
            Some(None)
        };
        Some(Self {
            deterministic: deterministic?,
            leads: leads?,
            lags: lagged?,
            kernel_lags: kernel_lags?,
            covariance,
        })
    }
}

impl Procedure for Dynamic {
    fn run(&self, task: &Task<'_>) -> Outcome<Draft> {
        let (y, x) = (task.dependent(), task.regressors());
        let no = |e: SeriesError| task.refuse(e);
        let fit = |kind| dols(y, &x, self.deterministic, self.leads, self.lags, kind);
        let long_run = DolsCovariance::LongRun {
            lags: self.kernel_lags,
        };
        let mut found = fit(long_run).map_err(no)?;
        let words = match self.covariance {
            None => format!(
                "long-run variance of the residuals (Bartlett, {} lags, divisor n) times (Z'Z)⁻¹",
                found.kernel_lags
            ),
            Some(asked) => {
                let (kind, words) = asked
                    .resolve(&found.regression)
                    .map_err(|e| task.refuse(e))?;
                found = fit(DolsCovariance::Scores(kind)).map_err(no)?;
                words
            }
        };
        let names: Vec<&str> = x.iter().map(|r| r.name.as_str()).collect();
        let mut draft = Draft::default();
        draft.said.push(format!(
            "Dynamic least squares (Saikkonen 1991; Stock and Watson 1993) of {} on {}, {}, and {} leads and {} lags of \
             the regressors' first differences, the present one included. Standard errors: {words}; normal distribution.",
            y.name,
            deterministic_words(self.deterministic),
            names.join(", "),
            self.leads,
            self.lags
        ));
        let regression = &found.regression;
        let errors = standard_errors(&found.covariance);
        let coefficients =
            task.coefficients(&regression.names(), &regression.coefficients, &errors, None);
        let first = self.lags + 1;
        let rows = Some((first, regression.n));
        draft.equations.push(task.estimated(
            "Dependent variable",
            &y.name,
            coefficients,
            rows,
            None,
            &words,
        ));
        draft.statistics = vec![
            statistic("r_squared", regression.r2, "1 − ssr/tss"),
            statistic("residual_std_dev", regression.s2.sqrt(), "√(ssr/(n − k))"),
            statistic(
                "long_run_variance",
                found.long_run_variance,
                "of the residuals, Bartlett, divisor n",
            ),
            statistic(
                "kernel_lags",
                f64::from(small(found.kernel_lags)),
                "of that variance",
            ),
            statistic(
                "durbin_watson",
                regression.durbin_watson,
                "Σ (e_t − e_{t−1})² / Σ e²",
            ),
        ];
        judge_levels(
            task,
            self.deterministic,
            regression.n,
            regression.k,
            &mut draft,
        );
        draft.rows = Rows::of_fit(
            &y.name,
            &y.values[first..first + regression.n],
            regression,
            first,
        );
        Ok(draft)
    }
}

/// Fully modified least squares.
pub(super) struct FullyModified {
    deterministic: Deterministic,
    lags: Option<usize>,
}

impl FullyModified {
    pub(super) fn read(options: &mut Options<'_>) -> Option<Self> {
        let deterministic = options.deterministic(&TERMS);
        let lags = options.maybe_count("kernel_lags", 0, 5000);
        Some(Self {
            deterministic: deterministic?,
            lags: lags?,
        })
    }

    fn fit(&self, task: &Task<'_>, draft: &mut Draft) -> Outcome<Fmols> {
        let (y, x) = (task.dependent(), task.regressors());
        let found = fmols(y, &x, self.deterministic, self.lags).map_err(|e| task.refuse(e))?;
        let names: Vec<&str> = x.iter().map(|r| r.name.as_str()).collect();
        draft.said.push(format!(
            "Fully modified least squares (Phillips and Hansen 1990) of {} on {} and {}, on the rows from the second \
             observation; long-run covariances by the Bartlett kernel, {}, divisor n − 1, no prewhitening, no \
             small-sample factor; normal distribution.",
            y.name,
            deterministic_words(self.deterministic),
            names.join(", "),
            thumb(self.lags, task.n())
        ));
        let errors = standard_errors(&found.covariance);
        let coefficients = task.coefficients(&found.names, &found.coefficients, &errors, None);
        let n = found.residuals.len();
        let words = "long-run variance conditional on the regressors' innovations times (Z'Z)⁻¹";
        let rows = Some((1, n));
        draft.equations.push(task.estimated(
            "Dependent variable",
            &y.name,
            coefficients,
            rows,
            None,
            words,
        ));
        draft.statistics = vec![
            statistic(
                "conditional_long_run_variance",
                found.conditional_variance,
                "ω₁₁ − ω₁₂ Ω₂₂⁻¹ ω₂₁",
            ),
            statistic(
                "kernel_lags",
                f64::from(small(found.kernel_lags)),
                "of the Bartlett kernel",
            ),
        ];
        draft.rows = Rows::from(1)
            .with("dependent", &y.name, y.values[1..].to_vec())
            .with_all("regressor", &found.scores.regressors);
        Ok(found)
    }
}

impl Procedure for FullyModified {
    fn run(&self, task: &Task<'_>) -> Outcome<Draft> {
        let mut draft = Draft::default();
        let found = self.fit(task, &mut draft)?;
        judge_levels(
            task,
            self.deterministic,
            found.residuals.len(),
            found.names.len(),
            &mut draft,
        );
        Ok(draft)
    }
}

/// Hansen's (1992) tests of a fully modified regression.
pub(super) struct Hansen {
    regression: FullyModified,
    simulation: (usize, u64),
}

impl Hansen {
    pub(super) fn read(options: &mut Options<'_>) -> Option<Self> {
        let deterministic = options.deterministic(&TERMS[..3]);
        let lags = options.maybe_count("kernel_lags", 0, 5000);
        let simulation = read_simulation(options, 2000);
        let deterministic = deterministic?;
        if deterministic == Deterministic::None {
            options.refuse(
                "deterministic",
                "The tests need a constant",
                "constant or trend",
            );
            return None;
        }
        Some(Self {
            regression: FullyModified {
                deterministic,
                lags: lags?,
            },
            simulation: simulation?,
        })
    }
}

impl Procedure for Hansen {
    fn run(&self, task: &Task<'_>) -> Outcome<Draft> {
        at_most(task, 1000)?;
        let mut draft = Draft::default();
        let found = self.regression.fit(task, &mut draft)?;
        let (draws, seed) = self.simulation;
        let n = found.residuals.len();
        check_draws(draws, n * 10)?;
        let deterministic = self.regression.deterministic;
        let integrated = task.equation().regressors.len();
        let draw = |r| instability_null(n, deterministic, integrated, seed, r);
        let null: Result<Vec<Instability>, _> = (0..draws as u64).map(draw).collect();
        let null = null.map_err(|e| task.refuse(e))?;
        let tests = hansen_1992(&found.scores, &null).map_err(|e| task.refuse(e))?;
        draft.said.push(format!(
            "Hansen's (1992) tests of constant coefficients against random walks (Lc), gradual change (MeanF) and \
             one swift change (SupF), over the middle 70 % of dates; p-values from {draws} draws at {n} rows, seed {seed}."
        ));
        draft.tests = vec![tests.lc.into(), tests.mean_f.into(), tests.sup_f.into()];
        draft.findings.extend(judge::failed(&draft.tests));
        draft
            .findings
            .extend(judge::observations(task, n, found.names.len()));
        Ok(draft)
    }
}
