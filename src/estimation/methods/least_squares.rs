//! Ordinary, weighted and restricted least squares.

use super::Procedure;
use crate::dist::f_sf;
use crate::estimate::{
    CovarianceKind, EstimateError, Ols, Regressor, Restriction, covariance, criteria, restricted,
    test_linear, weighted,
};
use crate::estimation::covariance::Covariance;
use crate::estimation::fault::option;
use crate::estimation::judge;
use crate::estimation::options::Options;
use crate::estimation::report::{EstimateStatistic, EstimateTest, small, statistic};
use crate::estimation::request::Id;
use crate::estimation::rows::Rows;
use crate::estimation::task::{Draft, Outcome, Task, standard_errors};
use crate::linalg::Matrix;

/// Least squares and its options.
pub(super) struct LeastSquares {
    covariance: Covariance,
    weights: Option<Id>,
    restrictions: Vec<Restriction>,
    hypotheses: Vec<Restriction>,
    diagnostic_lags: Option<usize>,
}

impl LeastSquares {
    pub(super) fn read(options: &mut Options<'_>) -> Option<Self> {
        let covariance = Covariance::read(options);
        let weights = options.variable("weights");
        let restrictions = options.restrictions("restrictions");
        let hypotheses = options.restrictions("hypotheses");
        let diagnostic_lags = options.maybe_count("diagnostic_lags", 1, 100);
        let restrictions = restrictions?;
        if !restrictions.is_empty() && !matches!(covariance?, Covariance::Classical) {
            let message = "Least squares under restrictions has the classical covariance";
            options.refuse("covariance", message, "classical");
            return None;
        }
        let hypotheses = hypotheses?;
        if !restrictions.is_empty() && !hypotheses.is_empty() {
            let message = "Hypotheses are tested on the equation without restrictions";
            options.refuse(
                "hypotheses",
                message,
                "restrictions or hypotheses, not both",
            );
            return None;
        }
        Some(Self {
            covariance: covariance?,
            weights: weights?,
            restrictions,
            hypotheses,
            diagnostic_lags: diagnostic_lags?,
        })
    }
}

impl Procedure for LeastSquares {
    fn run(&self, task: &Task<'_>) -> Outcome<Draft> {
        let equation = task.equation();
        let y = task.dependent();
        let design = task.design(equation)?;
        let no = |e: EstimateError| task.refuse(e);
        let mut draft = Draft::default();
        let names: Vec<&str> = design.iter().map(|r| r.name.as_str()).collect();
        let (fit, r2, log_likelihood) = match self.weights {
            None => {
                let fit = Ols::fit(&y.values, design.clone()).map_err(no)?;
                let (r2, l) = (fit.r2, fit.log_likelihood);
                (fit, r2, l)
            }
            Some(id) => {
                let weights = task.column(id);
                if weights.values.iter().any(|w| *w <= 0.0) {
                    let message = format!("{} is not positive throughout", weights.name);
                    return Err(option("weights", message, "positive weights"));
                }
                let found = weighted(&y.values, &design, &weights.values).map_err(no)?;
                draft.said.push(format!(
                    "Weighted by {}: the variance of the error is inversely proportional to it; R² and \
                     likelihood are those of the dependent variable, diagnostics those of the weighted rows.",
                    weights.name
                ));
                (found.transformed, found.r2, found.log_likelihood)
            }
        };
        let what = if self.weights.is_some() {
            "Weighted least squares"
        } else {
            "Ordinary least squares"
        };
        let call = format!("{what} of {} on {}.", y.name, names.join(", "));
        draft.said.insert(0, call);
        draft.rows = Rows::from(0)
            .with("dependent", &y.name, y.values.clone())
            .with_all("regressor", &design);
        if let Some(id) = self.weights {
            let weights = task.column(id);
            draft.rows = draft
                .rows
                .with("weight", &weights.name, weights.values.clone());
        }
        let (kind, words) = self.covariance.resolve(&fit).map_err(no)?;
        draft.said.push(format!(
            "Covariance: {words}; t with n − k degrees of freedom."
        ));
        let v = covariance(&[&fit], kind).map_err(no)?;
        if self.restrictions.is_empty() {
            draft
                .equations
                .push(task.fitted("Dependent variable", &y.name, &fit, &v, 0, &words));
            draft.statistics = fit_statistics(&fit, r2, log_likelihood);
            draft.tests.extend(all_slopes(&fit, kind, &v));
        } else {
            self.under_restrictions(task, &fit, &mut draft)?;
        }
        if !self.hypotheses.is_empty() {
            let df = Task::float(fit.df);
            let found = test_linear(&fit.names(), &fit.coefficients, &v, df, &self.hypotheses);
            let found = found.map_err(no)?;
            draft.tests.extend(found.t.map(EstimateTest::from));
            draft.tests.push(found.f.into());
            draft.tests.push(found.wald.into());
        }
        judge_fit(task, &fit, self.diagnostic_lags, &mut draft);
        Ok(draft)
    }
}

impl LeastSquares {
    fn under_restrictions(&self, task: &Task<'_>, fit: &Ols, draft: &mut Draft) -> Outcome<()> {
        let found = restricted(fit, &self.restrictions).map_err(|e| task.refuse(e))?;
        let list: Vec<String> = self.restrictions.iter().map(in_words).collect();
        draft.said.push(format!(
            "Under the restrictions {}. Diagnostics are of the equation without them.",
            list.join("; ")
        ));
        let df = Some(found.df);
        let errors = standard_errors(&found.covariance);
        let coefficients = task.coefficients(&fit.names(), &found.coefficients, &errors, df);
        let words = "classical under the restrictions, residual variance ssr/(n − k + q)";
        let rows = Some((0, fit.n));
        let name = &task.dependent().name;
        let equation = task.estimated("Dependent variable", name, coefficients, rows, df, words);
        draft.equations.push(equation);
        draft.statistics = vec![
            statistic("sum_of_squared_residuals", found.ssr, "Σ e²"),
            statistic("residual_std_dev", found.s2.sqrt(), "√(ssr/(n − k + q))"),
            statistic(
                "log_likelihood",
                found.log_likelihood,
                "Gaussian, at variance ssr/n",
            ),
        ];
        draft
            .tests
            .push(EstimateTest::from(found.f).named("F of the restrictions"));
        draft.tests.push(
            EstimateTest::from(found.likelihood_ratio)
                .named("Likelihood ratio of the restrictions"),
        );
        Ok(())
    }
}

/// A restriction in words.
pub(super) fn in_words(restriction: &Restriction) -> String {
    let terms: Vec<String> = restriction
        .terms
        .iter()
        .map(|(name, weight)| format!("{weight} · {name}"))
        .collect();
    format!("{} = {}", terms.join(" + "), restriction.value)
}

/// Diagnostics and findings of a fit of the task's equation.
pub(super) fn judge_fit(task: &Task<'_>, fit: &Ols, lags: Option<usize>, draft: &mut Draft) {
    let equation = task.equation();
    let lags = lags.unwrap_or_else(|| judge::diagnostic_lags(task));
    let tests = judge::diagnostics(fit, lags, task.lagged_dependent(equation));
    draft
        .findings
        .extend(judge::observations(task, fit.n, fit.k));
    draft
        .findings
        .extend(judge::spurious(task, equation.dependent, fit));
    draft.findings.extend(judge::levels_inference(
        task,
        equation.dependent,
        &equation.regressors,
    ));
    draft.findings.extend(judge::failed(&tests));
    draft.tests.extend(tests);
}

/// The numbers of a least-squares fit.
pub(super) fn fit_statistics(fit: &Ols, r2: f64, log_likelihood: f64) -> Vec<EstimateStatistic> {
    let criteria = criteria(log_likelihood, fit.k, fit.n);
    let leverage = fit.leverages().into_iter().fold(0.0_f64, f64::max);
    let with_constant = u8::from(fit.regressors.iter().any(constant));
    let base = f64::from(small(fit.n)) - f64::from(with_constant);
    let adjusted = 1.0 - (1.0 - r2) * base / f64::from(small(fit.df));
    let k = "k counts the regressors and not the variance";
    let list = [
        (
            "r_squared",
            r2,
            "1 − ssr/tss, about the mean with a constant",
        ),
        (
            "adjusted_r_squared",
            adjusted,
            "1 − (1 − R²)(n − 1)/(n − k) with a constant",
        ),
        ("sum_of_squared_residuals", fit.ssr, "Σ e²"),
        ("residual_std_dev", fit.s2.sqrt(), "√(ssr/(n − k))"),
        (
            "durbin_watson",
            fit.durbin_watson,
            "Σ (e_t − e_{t−1})² / Σ e²",
        ),
        (
            "log_likelihood",
            log_likelihood,
            "Gaussian, at variance ssr/n",
        ),
        ("aic", criteria.aic, k),
        ("corrected_aic", criteria.aicc, k),
        ("bic", criteria.bic, k),
        ("hannan_quinn", criteria.hannan_quinn, k),
        (
            "condition_number",
            fit.condition_number(),
            "of the columns at unit length",
        ),
        ("largest_leverage", leverage, "x'(X'X)⁻¹x"),
    ];
    list.iter()
        .map(|(name, value, note)| statistic(name, *value, note))
        .collect()
}

fn constant(regressor: &Regressor) -> bool {
    regressor
        .values
        .windows(2)
        .all(|w| w[0].to_bits() == w[1].to_bits())
}

/// F of all coefficients but the constant, by a covariance.
fn all_slopes(fit: &Ols, kind: CovarianceKind, covariance: &Matrix) -> Option<EstimateTest> {
    let slopes = fit.regressors.iter().filter(|r| !constant(r));
    let zero: Vec<Restriction> = slopes.map(|r| Restriction::zero(&r.name)).collect();
    if zero.is_empty() || zero.len() == fit.k {
        return None;
    }
    let (q, df) = (f64::from(small(zero.len())), f64::from(small(fit.df)));
    let null = "That all coefficients but the constant are zero";
    let (statistic, p) = if kind == CLASSICAL {
        // The same number, without the digits that an inverse costs.
        let f = fit.r2 / (1.0 - fit.r2) * df / q;
        (f, f_sf(f, q, df))
    } else {
        let found = test_linear(&fit.names(), &fit.coefficients, covariance, df, &zero).ok()?;
        (found.f.statistic, found.f.p_value)
    };
    let law = format!("F({q}, {df})");
    Some(EstimateTest::new("F of all slopes", statistic, &law).judged(null, p))
}

/// The kind of covariance that needs nothing from the data.
pub(super) const CLASSICAL: CovarianceKind = CovarianceKind::Classical;
