//! Regression with first-order autoregressive errors.

use super::Procedure;
use crate::estimate::{EstimateError, FirstObservation, autoregressive, covariance};
use crate::estimation::covariance::Covariance;
use crate::estimation::judge;
use crate::estimation::options::Options;
use crate::estimation::report::{small, statistic};
use crate::estimation::rows::Rows;
use crate::estimation::task::{Draft, Outcome, Task, standard_errors};

/// The method and its options.
pub(super) struct AutoregressiveErrors {
    first: FirstObservation,
    covariance: Covariance,
    diagnostic_lags: Option<usize>,
}

impl AutoregressiveErrors {
    pub(super) fn read(options: &mut Options<'_>) -> Option<Self> {
        let procedures = [
            ("prais_winsten", FirstObservation::Kept),
            ("cochrane_orcutt", FirstObservation::Dropped),
        ];
        let first = options.choice("procedure", &procedures);
        let covariance = Covariance::read(options);
        let diagnostic_lags = options.maybe_count("diagnostic_lags", 1, 100);
        Some(Self {
            first: first?,
            covariance: covariance?,
            diagnostic_lags: diagnostic_lags?,
        })
    }
}

impl Procedure for AutoregressiveErrors {
    fn run(&self, task: &Task<'_>) -> Outcome<Draft> {
        let y = task.dependent();
        let design = task.design(task.equation())?;
        let no = |e: EstimateError| task.refuse(e);
        let found = autoregressive(&y.values, &design, self.first).map_err(no)?;
        let fit = &found.transformed;
        let (kind, words) = self.covariance.resolve(fit).map_err(no)?;
        let v = covariance(&[fit], kind).map_err(no)?;
        let (name, skip) = match self.first {
            FirstObservation::Kept => ("Prais–Winsten, the first observation times √(1 − ρ²)", 0),
            FirstObservation::Dropped => ("Cochrane–Orcutt, the first observation dropped", 1),
        };
        let names: Vec<&str> = design.iter().map(|r| r.name.as_str()).collect();
        let mut draft = Draft::default();
        draft.said.push(format!(
            "Regression of {} on {} with first-order autoregressive errors, {name}; ρ from the residuals, \
             iterated until it settled after {} rounds.",
            y.name,
            names.join(", "),
            found.rounds
        ));
        draft.said.push(format!(
            "Covariance of the transformed equation, ρ taken as known: {words}."
        ));
        let df = Some(fit.df);
        let coefficients =
            task.coefficients(&fit.names(), &fit.coefficients, &standard_errors(&v), df);
        let rows = Some((skip, fit.n));
        let equation = task.estimated(
            "Dependent variable",
            &y.name,
            coefficients,
            rows,
            df,
            &words,
        );
        draft.equations.push(equation);
        draft.statistics = vec![
            statistic("rho", found.rho, "Σ u_t u_{t−1} / Σ u_{t−1}²"),
            statistic("rounds", f64::from(small(found.rounds)), "until ρ settled"),
            statistic("innovation_std_dev", fit.s2.sqrt(), "√(Σ ε²/(rows − k))"),
            statistic("durbin_watson", fit.durbin_watson, "of the innovations"),
        ];
        let lags = self
            .diagnostic_lags
            .unwrap_or_else(|| judge::diagnostic_lags(task));
        // Innovations of an equation with estimated ρ: Durbin and Watson's test does not hold.
        let tests = judge::diagnostics(fit, lags, true);
        draft
            .findings
            .extend(judge::observations(task, fit.n, fit.k + 1));
        draft.findings.extend(judge::failed(&tests));
        draft.tests = tests;
        draft.rows = Rows::from(0)
            .with("dependent", &y.name, y.values.clone())
            .with_all("regressor", &design);
        Ok(draft)
    }
}
