//! What an estimator is asked: the data of one demand equation and the document's settings.

use super::super::document::{Demand, Document, Estimator};
use super::super::outcome::{CoefficientResult, CovarianceUsed, EquationResult};
use super::super::reliability::Side;
use super::super::sample::Logs;
use super::super::terms::Term;
use super::checks::nearly_constant;
use super::{differences, explain, finite, small};
use crate::constraint::Affine;
use crate::dist::t_two_sided;
use crate::estimate::{
    EstimateError, Ols, Regressor, Simulation, SimulationStore, rule_of_thumb_lags,
};
use crate::finding::Finding;
use crate::linalg::Matrix;
use crate::series::SeriesKey;

/// Threads for simulations and where their results are kept; neither changes a digit.
#[derive(Clone, Copy)]
pub(in super::super) struct Machine<'a> {
    pub(in super::super) threads: usize,
    pub(in super::super) store: &'a dyn SimulationStore,
}

/// One demand equation to estimate.
#[derive(Clone, Copy)]
pub(in super::super) struct Request<'a> {
    pub(in super::super) document: &'a Document,
    pub(in super::super) demand: &'a Demand,
    pub(in super::super) side: Side,
    pub(in super::super) estimator: Estimator,
    pub(in super::super) logs: &'a Logs,
    pub(in super::super) machine: Machine<'a>,
}

impl<'a> Request<'a> {
    /// The log of a series, in differences where the estimator works on them.
    pub(super) fn series(&self, key: &SeriesKey) -> Regressor {
        let values = self.logs.of(key);
        let values = if self.estimator.in_differences() {
            differences(values)
        } else {
            values.to_vec()
        };
        Regressor::new(&key.to_string(), values)
    }

    pub(super) fn volume(&self) -> Regressor {
        self.series(&self.demand.volume)
    }

    /// Income, relative price, further regressors.
    pub(super) fn regressors(&self) -> Vec<Regressor> {
        let all = self.demand.regressors();
        all.into_iter().map(|(_, key)| self.series(key)).collect()
    }

    pub(super) fn has_trend(&self) -> bool {
        self.demand.terms.contains(&Term::Trend)
    }

    /// Columns of the terms other than the trend.
    pub(super) fn dummies(&self) -> Vec<Regressor> {
        let terms = self.demand.terms.iter().filter(|t| **t != Term::Trend);
        let columns = terms.flat_map(|t| t.columns(&self.logs.periods));
        if self.estimator.in_differences() {
            columns
                .map(|c| Regressor::new(&c.name, differences(&c.values)))
                .collect()
        } else {
            columns.collect()
        }
    }

    /// Constant, trend (in levels) and dummies: what every static equation has beside its regressors.
    pub(super) fn deterministic(&self) -> Vec<Regressor> {
        let n = self.volume().values.len();
        let mut columns = vec![Regressor::constant(n)];
        if self.has_trend() && !self.estimator.in_differences() {
            columns.push(Regressor::trend(n));
        }
        columns.extend(self.dummies());
        columns
    }

    /// Place of the first observation of a static equation in the sample.
    pub(super) fn first(&self) -> usize {
        usize::from(self.estimator.in_differences())
    }

    /// Series without variation, which no estimator can use.
    pub(super) fn constant_series(&self) -> Vec<Finding> {
        let what = if self.estimator.in_differences() {
            "grows at one constant rate"
        } else {
            "does not change"
        };
        let mut all = vec![("volume".to_owned(), &self.demand.volume)];
        all.extend(self.demand.regressors());
        all.into_iter()
            .filter(|(_, key)| nearly_constant(&self.series(key).values))
            .map(|(field, key)| {
                let message = format!(
                    "{key} {what} over the sample, so that {} cannot use it",
                    self.estimator.code()
                );
                Finding::error("constant_series", message)
                    .at_series(key)
                    .at_pointer(format!("{}/{field}", self.side.pointer()))
            })
            .collect()
    }

    /// Lags of the Bartlett kernel over n rows.
    pub(super) fn kernel_lags(&self, n: usize) -> usize {
        self.document.lags.map_or_else(
            || rule_of_thumb_lags(n),
            |lags| usize::try_from(lags).unwrap_or(usize::MAX),
        )
    }

    pub(super) fn simulation(&self) -> Simulation {
        let options = self.document.simulation.unwrap_or_default();
        Simulation {
            draws: usize::try_from(options.draws).unwrap_or(usize::MAX),
            seed: u64::from(options.seed),
            threads: self.machine.threads,
        }
    }

    pub(super) fn fault(&self, error: &EstimateError) -> Vec<Finding> {
        vec![explain(error, self)]
    }

    /// Growth beyond income and relative price: a constant in differences or a trend in levels, and further
    /// regressors at their mean growth. `response` gives the response to a key.
    pub(super) fn autonomous(
        &self,
        constant: Option<Affine>,
        response: impl Fn(&SeriesKey) -> Affine,
    ) -> Option<Affine> {
        let further = &self.demand.further;
        if constant.is_none() && further.is_empty() {
            return None;
        }
        let added = further
            .iter()
            .map(|key| response(key) * self.logs.mean_growth(key));
        Some(constant.unwrap_or_default() + added.sum())
    }

    /// How a regressor is called in results: by its role, with what lags and changes add to the key.
    pub(super) fn label(&self, name: &str) -> (String, Option<String>) {
        let mut roles = vec![("volume".to_owned(), &self.demand.volume)];
        roles.extend(self.demand.regressors().into_iter().map(|(field, key)| {
            let role = match field.split_once('/') {
                Some((_, i)) => format!("further {}", i.parse::<u32>().unwrap_or(0) + 1),
                None if field == "activity" => "income".to_owned(),
                None => field,
            };
            (role, key)
        }));
        let (change, core) = match name.strip_prefix("d.") {
            Some(core) => ("d.", core),
            None => ("", name),
        };
        for (role, key) in roles {
            let key = key.to_string();
            if let Some(rest) = core.strip_prefix(&key)
                && (rest.is_empty() || rest.starts_with(".L") || rest.starts_with(".F"))
            {
                return (format!("{change}{role}{rest}"), Some(key));
            }
        }
        let plain = if name == "const" { "constant" } else { name };
        (plain.to_owned(), None)
    }

    /// What a regression tells, its coefficients with t and p by the given covariance.
    pub(super) fn told(
        &self,
        fit: &Ols,
        first: usize,
        covariance: &Matrix,
        used: CovarianceUsed,
    ) -> EquationResult {
        let df = f64::from(small(fit.df));
        let error = |m: &Matrix, i: usize| m.at(i, i).max(0.0).sqrt();
        let coefficients = fit.regressors.iter().enumerate().map(|(i, regressor)| {
            let (name, series) = self.label(&regressor.name);
            let own = error(covariance, i);
            let t = fit.coefficients[i] / own;
            CoefficientResult {
                name,
                series,
                estimate: fit.coefficients[i],
                std_error: finite(own),
                std_error_classical: None,
                std_error_newey_west: None,
                t: finite(t),
                p: finite(t_two_sided(t, df)),
            }
        });
        EquationResult {
            dependent: self.demand.volume.to_string(),
            from: self.logs.periods[first].to_string(),
            to: self.logs.periods[first + fit.n - 1].to_string(),
            observations: small(fit.n),
            degrees_of_freedom: small(fit.df),
            coefficients: coefficients.collect(),
            covariance: used,
            lags: 0,
            small_sample: false,
            r_squared: finite(fit.r2),
            adjusted_r_squared: finite(fit.adjusted_r2),
            residual_std_dev: fit.s2.sqrt(),
            durbin_watson: finite(fit.durbin_watson),
            error_autocorrelation: None,
            long_run: Vec::new(),
            adjustment: None,
            dynamics: None,
            tests: Vec::new(),
        }
    }
}
