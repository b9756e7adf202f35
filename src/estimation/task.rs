//! What a method computes from, and what it hands back.

use super::METHOD_VERSION;
use super::fault::Refusal;
use super::report::{
    EstimateSample, EstimateStatistic, EstimateTable, EstimateTest, EstimatedCoefficient,
    EstimatedEquation, Report, finite, small,
};
use super::request::{Equation, Id, Request, Source, Variable};
use super::rows::{Rows, shown};
use super::sample::Data;
use super::terms;
use crate::dist::{normal_sf, normal_upper, t_two_sided, t_upper};
use crate::estimate::{Ols, Regressor, Simulation, SimulationStore};
use crate::finding::Finding;
use crate::linalg::Matrix;
use crate::time::Period;

/// What the machine lends: threads, and a store of simulated distributions. Neither changes a digit.
pub struct Machine<'a> {
    /// Threads of a simulation.
    pub threads: usize,
    /// Where simulated null distributions are kept.
    pub store: &'a dyn SimulationStore,
}

/// What a step of a method gives.
pub(super) type Outcome<T> = Result<T, Box<Finding>>;

/// What a method computes from.
pub(super) struct Task<'a> {
    pub(super) request: &'a Request,
    pub(super) data: Data,
    machine: &'a Machine<'a>,
}

/// What a method found; the rest of the report is the same for all.
#[derive(Default)]
pub(super) struct Draft {
    /// Sentences of the call.
    pub(super) said: Vec<String>,
    pub(super) equations: Vec<EstimatedEquation>,
    pub(super) statistics: Vec<EstimateStatistic>,
    pub(super) tests: Vec<EstimateTest>,
    pub(super) tables: Vec<EstimateTable>,
    pub(super) findings: Vec<Finding>,
    pub(super) rows: Rows,
}

const CAUTION: &str = "These figures are conditional on a model and on the data it was given. They are \
    not a forecast and not advice; official statistics and licensed advice prevail.";

impl<'a> Task<'a> {
    pub(super) fn new(request: &'a Request, data: Data, machine: &'a Machine<'a>) -> Self {
        Self {
            request,
            data,
            machine,
        }
    }

    /// The one equation of all methods but systems.
    pub(super) fn equation(&self) -> &Equation {
        &self.request.equations[0]
    }

    pub(super) fn column(&self, id: Id) -> &Regressor {
        &self.data.columns[id]
    }

    pub(super) fn columns(&self, ids: &[Id]) -> Vec<Regressor> {
        ids.iter().map(|id| self.column(*id).clone()).collect()
    }

    /// The dependent variable.
    pub(super) fn dependent(&self) -> &Regressor {
        self.column(self.equation().dependent)
    }

    /// The regressors that are series.
    pub(super) fn regressors(&self) -> Vec<Regressor> {
        self.columns(&self.equation().regressors)
    }

    /// Dummies of a method that has constant and trend by an option.
    pub(super) fn dummies(&self, centred: bool) -> Outcome<Vec<Regressor>> {
        let equation = self.equation();
        terms::columns(
            &equation.terms,
            &equation.pointer,
            &self.data.periods,
            centred,
        )
    }

    /// All columns of an equation: constant, series, then the other terms.
    pub(super) fn design(&self, equation: &Equation) -> Outcome<Vec<Regressor>> {
        let columns = &self.data.periods;
        let mut columns = terms::columns(&equation.terms, &equation.pointer, columns, false)?;
        let constant = columns.iter().position(|c| c.name == "constant");
        let mut design: Vec<Regressor> = constant.map(|i| columns.remove(i)).into_iter().collect();
        design.extend(self.columns(&equation.regressors));
        design.extend(columns);
        Ok(design)
    }

    /// Observations of the sample.
    pub(super) fn n(&self) -> usize {
        self.data.periods.len()
    }

    pub(super) fn period(&self, i: usize) -> Period {
        self.data.periods[i.min(self.n() - 1)]
    }

    pub(super) fn annual(&self) -> bool {
        self.request.frequency == crate::time::Frequency::Annual
    }

    pub(super) fn simulation(&self, draws: usize, seed: u64) -> Simulation {
        Simulation {
            draws,
            seed,
            threads: self.machine.threads,
        }
    }

    pub(super) fn store(&self) -> &dyn SimulationStore {
        self.machine.store
    }

    /// The finding of an estimator's error.
    pub(super) fn refuse(&self, error: impl Refusal) -> Box<Finding> {
        Box::new(error.finding(self))
    }

    /// The variable whose name a regressor's name is, or is made from (`d.NAME.L1`).
    pub(super) fn variable(&self, name: &str) -> Option<&Variable> {
        let variables = &self.request.variables;
        let exact = variables.iter().find(|v| v.name == name);
        exact.or_else(|| {
            let bare = name.strip_prefix("d.").unwrap_or(name);
            let bare = match bare.rsplit_once('.') {
                Some((bare, lag)) if lag.starts_with(['L', 'F']) => bare,
                _ => bare,
            };
            variables.iter().find(|v| v.name == bare)
        })
    }

    /// Whether a variable is in levels or their logs.
    pub(super) fn in_levels(&self, id: Id) -> bool {
        !self.request.variables[id].transformation.differences()
    }

    /// Whether an earlier value of the dependent variable is among the regressors.
    pub(super) fn lagged_dependent(&self, equation: &Equation) -> bool {
        let variables = &self.request.variables;
        let own = &variables[equation.dependent];
        equation.regressors.iter().any(|id| {
            let other = &variables[*id];
            other.lag > own.lag && other.same_source(own)
        })
    }

    /// Coefficients with their tests; `df` none for the normal distribution.
    pub(super) fn coefficients(
        &self,
        names: &[String],
        estimates: &[f64],
        errors: &[f64],
        df: Option<usize>,
    ) -> Vec<EstimatedCoefficient> {
        let df = df.map(|df| f64::from(small(df)));
        let tail = (1.0 - self.request.level) / 2.0;
        let quantile = df.map_or_else(|| normal_upper(tail), |df| t_upper(tail, df));
        let one = |((name, &estimate), &error): ((&String, &f64), &f64)| {
            let known = error > 0.0;
            let t = estimate / error;
            let p = df.map_or_else(|| 2.0 * normal_sf(t.abs()), |df| t_two_sided(t, df));
            let when = |value: f64| finite(value).filter(|_| known);
            EstimatedCoefficient {
                name: shown(name),
                series: self
                    .variable(name)
                    .and_then(Variable::key)
                    .map(ToString::to_string),
                estimate: finite(estimate),
                std_error: when(error),
                t: when(t),
                p: when(p),
                low: when(estimate - quantile * error),
                high: when(estimate + quantile * error),
            }
        };
        names.iter().zip(estimates).zip(errors).map(one).collect()
    }

    /// An equation from its parts. `rows`: position in the sample of its first row, and number of rows.
    pub(super) fn estimated(
        &self,
        name: &str,
        dependent: &str,
        coefficients: Vec<EstimatedCoefficient>,
        rows: Option<(usize, usize)>,
        df: Option<usize>,
        std_errors: &str,
    ) -> EstimatedEquation {
        EstimatedEquation {
            name: name.to_owned(),
            dependent: dependent.to_owned(),
            series: self
                .variable(dependent)
                .and_then(Variable::key)
                .map(ToString::to_string),
            from: rows.map(|(first, _)| self.period(first).to_string()),
            to: rows.map(|(first, n)| self.period((first + n).saturating_sub(1)).to_string()),
            observations: rows.map(|(_, n)| small(n)),
            degrees_of_freedom: df.map(small),
            std_errors: std_errors.to_owned(),
            coefficients,
        }
    }

    /// An equation fitted by least squares on the rows from `first`, with a covariance and Student's t.
    pub(super) fn fitted(
        &self,
        name: &str,
        dependent: &str,
        fit: &Ols,
        covariance: &Matrix,
        first: usize,
        std_errors: &str,
    ) -> EstimatedEquation {
        let coefficients = self.coefficients(
            &fit.names(),
            &fit.coefficients,
            &standard_errors(covariance),
            Some(fit.df),
        );
        let rows = Some((first, fit.n));
        self.estimated(
            name,
            dependent,
            coefficients,
            rows,
            Some(fit.df),
            std_errors,
        )
    }

    /// The whole report.
    pub(super) fn finish(self, draft: &mut Draft) -> Report {
        let periods = &self.data.periods;
        let rows = &mut draft.rows;
        let count = rows.columns.first().map_or(0, |c| c.values.len());
        rows.periods = periods
            .iter()
            .skip(rows.first)
            .take(count)
            .map(ToString::to_string)
            .collect();
        let (from, to) = (periods[0].to_string(), self.period(self.n()).to_string());
        let mut description = std::mem::take(&mut draft.said);
        description.push(format!(
            "Common sample {from} to {to}, {} observations of frequency {}; lags are taken inside it.",
            self.n(),
            self.request.frequency
        ));
        description.extend(self.request.variables.iter().map(in_words));
        let mut findings = std::mem::take(&mut draft.findings);
        findings.extend(self.data.notices);
        Report {
            method_version: METHOD_VERSION.to_owned(),
            method: self.request.method.name.to_owned(),
            title: self.request.method.title.to_owned(),
            description,
            sample: EstimateSample {
                frequency: self.request.frequency.to_string(),
                from,
                to,
                observations: small(periods.len()),
            },
            level: self.request.level,
            equations: std::mem::take(&mut draft.equations),
            statistics: std::mem::take(&mut draft.statistics),
            tests: std::mem::take(&mut draft.tests),
            tables: std::mem::take(&mut draft.tables),
            findings,
            caution: CAUTION.to_owned(),
        }
    }
}

/// What a variable is, in words.
fn in_words(variable: &Variable) -> String {
    let source = match &variable.source {
        Source::Stored(key) => format!("series {key}"),
        Source::Inline(from, values) => format!("{} numbers from {from}", values.len()),
    };
    let lag = match variable.lag {
        0 => String::new(),
        1 => ", one period before".to_owned(),
        lag => format!(", {lag} periods before"),
    };
    let what = variable.transformation.words();
    format!("{}: {source}, {what}{lag}.", variable.name)
}

/// Square roots of the diagonal; zero where rounding made it negative.
pub(super) fn standard_errors(covariance: &Matrix) -> Vec<f64> {
    (0..covariance.rows())
        .map(|i| covariance.at(i, i).max(0.0).sqrt())
        .collect()
}
