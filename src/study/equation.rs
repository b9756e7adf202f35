//! One demand equation of a study: built, fitted, and its coefficients told.

use super::document::{Covariance, Demand, Document, Estimator};
use super::outcome::{CoefficientResult, EquationResult};
use super::sample::Logs;
use crate::dist::t_two_sided;
use crate::estimate::{
    CovarianceKind, EstimateError, Ols, Regressor, covariance, rule_of_thumb_lags,
};
use crate::finding::Finding;
use crate::linalg::Matrix;
use crate::series::SeriesKey;

/// Below this range a logarithm, or its growth, counts as constant: rounding of logs is 1e-15.
const CONSTANT: f64 = 1e-10;

/// Place of the constant, the activity and the relative price among the regressors.
pub(super) const CONST: usize = 0;
pub(super) const INCOME: usize = 1;
pub(super) const PRICE: usize = 2;

/// A fitted demand equation.
pub(super) struct Equation<'a> {
    pub(super) demand: &'a Demand,
    pub(super) fit: Ols,
    pub(super) estimator: Estimator,
    /// The covariance behind tests and intervals, and the Newey–West one told beside it.
    pub(super) chosen: CovarianceKind,
    classical: Matrix,
    newey_west: Matrix,
    lags: usize,
    small_sample: bool,
}

impl<'a> Equation<'a> {
    /// Fits an equation; `pointer` is its place in the document.
    ///
    /// # Errors
    /// `constant_series`, `collinear`, `too_few_observations`.
    pub(super) fn fit(
        document: &Document,
        demand: &'a Demand,
        pointer: &str,
        estimator: Estimator,
        logs: &Logs,
    ) -> Result<Self, Vec<Finding>> {
        let column = |key: &SeriesKey| match estimator {
            Estimator::OlsLevels => logs.of(key).to_vec(),
            Estimator::OlsDifferences => differences(logs.of(key)),
        };
        let what = match estimator {
            Estimator::OlsLevels => "does not change",
            Estimator::OlsDifferences => "grows at one constant rate",
        };
        let mut keys = vec![("volume", &demand.volume), ("activity", &demand.activity)];
        keys.extend(demand.relative_price.iter().map(|k| ("relative_price", k)));
        let constant: Vec<Finding> = keys
            .iter()
            .filter(|(_, key)| range(&column(key)) <= CONSTANT)
            .map(|(field, key)| {
                let message = format!(
                    "{key} {what} over the sample, so that {} cannot use it",
                    estimator.code()
                );
                Finding::error("constant_series", message)
                    .at_series(key)
                    .at_pointer(format!("{pointer}/{field}"))
            })
            .collect();
        if !constant.is_empty() {
            return Err(constant);
        }
        let y = column(&demand.volume);
        let mut regressors = vec![
            Regressor::constant(y.len()),
            Regressor::new(&demand.activity.to_string(), column(&demand.activity)),
        ];
        if let Some(key) = &demand.relative_price {
            regressors.push(Regressor::new(&key.to_string(), column(key)));
        }
        let fault = |error: EstimateError| vec![explain(&error, estimator, pointer)];
        let fit = Ols::fit(&y, regressors).map_err(fault)?;
        let lags = match document.lags {
            Some(lags) => usize::try_from(lags).unwrap_or(usize::MAX),
            None => rule_of_thumb_lags(fit.n),
        };
        let small_sample = document.small_sample.unwrap_or(true);
        let robust = CovarianceKind::NeweyWest { lags, small_sample };
        let chosen = match (document.covariance, estimator) {
            (Some(Covariance::Classical), _) | (None, Estimator::OlsDifferences) => {
                CovarianceKind::Classical
            }
            (Some(Covariance::NeweyWest), _) | (None, Estimator::OlsLevels) => robust,
        };
        Ok(Self {
            classical: covariance(&[&fit], CovarianceKind::Classical).map_err(fault)?,
            newey_west: covariance(&[&fit], robust).map_err(fault)?,
            demand,
            fit,
            estimator,
            chosen,
            lags,
            small_sample,
        })
    }

    /// The covariance behind tests and intervals.
    fn covariance(&self) -> &Matrix {
        match self.chosen {
            CovarianceKind::Classical => &self.classical,
            CovarianceKind::NeweyWest { .. }
            | CovarianceKind::Robust(_)
            | CovarianceKind::Kernel { .. } => &self.newey_west,
        }
    }

    pub(super) fn has_price(&self) -> bool {
        self.demand.relative_price.is_some()
    }

    pub(super) fn std_error(&self, i: usize) -> f64 {
        self.covariance().at(i, i).max(0.0).sqrt()
    }

    pub(super) fn df(&self) -> f64 {
        f64::from(small(self.fit.df))
    }

    /// What to tell of the equation; the logs give the sample.
    pub(super) fn result(&self, logs: &Logs) -> EquationResult {
        let first = logs.periods.len() - self.fit.n;
        let names = ["constant", "income", "relative_price"];
        let coefficients = self
            .fit
            .regressors
            .iter()
            .enumerate()
            .map(|(i, regressor)| {
                let t = self.fit.coefficients[i] / self.std_error(i);
                CoefficientResult {
                    name: names[i].to_owned(),
                    series: (i != CONST).then(|| regressor.name.clone()),
                    estimate: self.fit.coefficients[i],
                    std_error_classical: self.classical.at(i, i).max(0.0).sqrt(),
                    std_error_newey_west: self.newey_west.at(i, i).max(0.0).sqrt(),
                    t: finite(t),
                    p: finite(t_two_sided(t, self.df())),
                }
            });
        EquationResult {
            dependent: self.demand.volume.to_string(),
            from: logs.periods[first].to_string(),
            to: logs.periods[logs.periods.len() - 1].to_string(),
            observations: small(self.fit.n),
            degrees_of_freedom: small(self.fit.df),
            coefficients: coefficients.collect(),
            covariance: match self.chosen {
                CovarianceKind::Classical => Covariance::Classical,
                CovarianceKind::NeweyWest { .. }
                | CovarianceKind::Robust(_)
                | CovarianceKind::Kernel { .. } => Covariance::NeweyWest,
            },
            lags: small(self.lags),
            small_sample: self.small_sample,
            r_squared: finite(self.fit.r2),
            adjusted_r_squared: finite(self.fit.adjusted_r2),
            residual_std_dev: self.fit.s2.sqrt(),
            durbin_watson: finite(self.fit.durbin_watson),
        }
    }
}

fn explain(error: &EstimateError, estimator: Estimator, pointer: &str) -> Finding {
    let message = format!("{}: {error}", estimator.code());
    match error {
        EstimateError::Collinear { names } => Finding::error("collinear", message)
            .at_pointer(pointer)
            .found(names.join(", "))
            .remedy("Leave one of them out"),
        EstimateError::TooManyLags { .. } => {
            Finding::error("too_many_lags", message).at_pointer("/lags")
        }
        // Least squares of aligned series fails in no other way.
        EstimateError::TooFewObservations { .. }
        | EstimateError::NotFinite
        | EstimateError::SampleDiffers { .. }
        | EstimateError::Missing { .. }
        | EstimateError::Constant { .. }
        | EstimateError::TooShort { .. }
        | EstimateError::Explosive { .. }
        | EstimateError::Underidentified { .. }
        | EstimateError::UnknownRegressor { .. }
        | EstimateError::RedundantRestriction { .. }
        | EstimateError::Setting { .. }
        | EstimateError::SingularCovariance { .. }
        | EstimateError::NoConvergence { .. } => {
            Finding::error("too_few_observations", message).at_pointer(pointer)
        }
    }
}

pub(super) fn differences(values: &[f64]) -> Vec<f64> {
    values.windows(2).map(|w| w[1] - w[0]).collect()
}

fn range(values: &[f64]) -> f64 {
    let low = values.iter().fold(f64::INFINITY, |m, v| m.min(*v));
    let high = values.iter().fold(f64::NEG_INFINITY, |m, v| m.max(*v));
    high - low
}

pub(super) fn finite(value: f64) -> Option<f64> {
    value.is_finite().then_some(value)
}

/// Counts of observations as JSON carries them.
pub(super) fn small(count: usize) -> u32 {
    u32::try_from(count).unwrap_or(u32::MAX)
}
