//! One demand equation of a study, by whatever estimator: what the rest of a study needs of it.
//!
//! Start reading at [`estimate`]. Every estimator hands back the same [`Equation`]: its responses as functions of
//! its coefficients, their covariance, and how its errors enter them, from which the covariance across the two
//! equations follows.

mod ardl;
mod checks;
mod cointegrating;
mod dependence;
mod johansen;
mod least_squares;
mod request;
mod system;

use dependence::{Dependence, cross};
pub(super) use request::{Machine, Request};

use super::document::{CrossCovariance, Demand, Estimator};
use super::outcome::EquationResult;
use super::reliability::Side;
use crate::constraint::Affine;
use crate::estimate::{EstimateError, SeriesError};
use crate::finding::Finding;
use crate::linalg::Matrix;

/// An estimated demand equation.
pub(super) struct Equation<'a> {
    pub(super) demand: &'a Demand,
    pub(super) side: Side,
    /// Covariance of its coefficients, behind tests and intervals.
    pub(super) covariance: Matrix,
    /// Rows, coefficients and residual degrees of freedom of the regression.
    pub(super) rows: usize,
    pub(super) size: usize,
    pub(super) df: usize,
    /// Response to income, in the long run where the equation is dynamic; depends on the coefficients by their
    /// place.
    pub(super) income: Affine,
    /// Response to the relative price, with the sign of the equation.
    pub(super) price: Option<Affine>,
    /// Log growth a period that neither income nor relative price explain.
    pub(super) autonomous: Option<Affine>,
    /// What the responses were divided by, so that intervals may do without the division.
    pub(super) divisor: Option<Affine>,
    /// What to tell of it.
    pub(super) result: EquationResult,
    /// What this estimator alone shows.
    pub(super) findings: Vec<Finding>,
}

impl Equation<'_> {
    pub(super) fn std_error(&self, of: &Affine) -> f64 {
        of.variance(&self.covariance).sqrt()
    }

    pub(super) fn degrees_of_freedom(&self) -> f64 {
        f64::from(small(self.df))
    }

    /// t statistic of a response, of its numerator where it is a ratio: that test does not need a divisor told
    /// from zero.
    pub(super) fn t(&self, of: &Affine) -> f64 {
        let tested = self
            .divisor
            .as_ref()
            .map_or_else(|| of.clone(), |divisor| of.times(divisor));
        (tested.value / self.std_error(&tested))
            .abs()
            .copysign(of.value)
    }
}

/// Both equations with the joint covariance of the coefficients of imports, then exports.
pub(super) struct Both<'a> {
    pub(super) imports: Equation<'a>,
    pub(super) exports: Equation<'a>,
    pub(super) joint: Matrix,
}

/// Estimates both demand equations.
///
/// # Errors
/// The findings of both equations, each with the equation's pointer.
pub(super) fn estimate<'a>(
    imports: &Request<'a>,
    exports: &Request<'a>,
    across: CrossCovariance,
) -> Result<Both<'a>, Vec<Finding>> {
    let constant = [imports.constant_series(), exports.constant_series()].concat();
    if !constant.is_empty() {
        return Err(constant);
    }
    let both = match imports.estimator {
        Estimator::SeeminglyUnrelated | Estimator::SeeminglyUnrelatedDifferences => {
            system::fit(imports, exports)?
        }
        Estimator::OlsLevels
        | Estimator::OlsDifferences
        | Estimator::AutoregressiveErrors
        | Estimator::TwoStageLevels
        | Estimator::TwoStageDifferences
        | Estimator::Ardl
        | Estimator::Dols
        | Estimator::Fmols
        | Estimator::Johansen => match (one(imports), one(exports)) {
            (Ok((imports, from_imports)), Ok((exports, from_exports))) => {
                let between = cross(&from_imports, &from_exports)
                    .map_err(|e| vec![Finding::error("no_joint_covariance", e.to_string())])?;
                let joint = joined(&imports.covariance, &exports.covariance, &between);
                Both {
                    imports,
                    exports,
                    joint,
                }
            }
            (imports, exports) => {
                let faults = [imports.err(), exports.err()];
                return Err(faults.into_iter().flatten().flatten().collect());
            }
        },
    };
    Ok(match across {
        CrossCovariance::Joint => both,
        CrossCovariance::Zero => {
            let k = both.imports.covariance.rows();
            let joint = Matrix::from_fn(both.joint.rows(), both.joint.columns(), |i, j| {
                if (i < k) == (j < k) {
                    both.joint.at(i, j)
                } else {
                    0.0
                }
            });
            Both { joint, ..both }
        }
    })
}

fn one<'a>(request: &Request<'a>) -> Result<(Equation<'a>, Dependence), Vec<Finding>> {
    match request.estimator {
        Estimator::AutoregressiveErrors => least_squares::autoregressive_errors(request),
        Estimator::TwoStageLevels | Estimator::TwoStageDifferences => {
            least_squares::two_stages(request)
        }
        Estimator::Ardl => ardl::fit(request),
        Estimator::Dols => cointegrating::dynamic(request),
        Estimator::Fmols => cointegrating::fully_modified(request),
        Estimator::Johansen => johansen::fit(request),
        Estimator::OlsLevels
        | Estimator::OlsDifferences
        | Estimator::SeeminglyUnrelated
        | Estimator::SeeminglyUnrelatedDifferences => least_squares::ordinary(request),
    }
}

/// The own covariances with what lies between them.
fn joined(imports: &Matrix, exports: &Matrix, between: &Matrix) -> Matrix {
    let k = imports.rows();
    let size = k + exports.rows();
    Matrix::from_fn(size, size, |i, j| match (i < k, j < k) {
        (true, true) => imports.at(i, j),
        (false, false) => exports.at(i - k, j - k),
        (true, false) => between.at(i, j - k),
        (false, true) => between.at(j, i - k),
    })
}

/// A fault of estimation as a finding at an equation.
fn explain(error: &EstimateError, request: &Request<'_>) -> Finding {
    let message = format!("{}: {error}", request.estimator.code());
    let at = |code: &str, field: &str| {
        Finding::error(code, &message).at_pointer(format!("{}{field}", request.side.pointer()))
    };
    match error {
        EstimateError::Collinear { names } => at("collinear", "")
            .found(names.join(", "))
            .remedy("Leave one of them out"),
        EstimateError::TooManyLags { .. } => {
            Finding::error("too_many_lags", message).at_pointer("/lags")
        }
        EstimateError::Explosive { .. } => at("explosive_errors", "")
            .remedy("Leave this estimator out, or estimate in differences"),
        EstimateError::Underidentified { .. } => at("underidentified", "/instruments"),
        EstimateError::NoConvergence { .. } => {
            at("no_convergence", "").remedy("Leave this estimator out")
        }
        EstimateError::Constant { .. } => at("constant_series", ""),
        EstimateError::Setting { .. }
        | EstimateError::UnknownRegressor { .. }
        | EstimateError::RedundantRestriction { .. } => at("invalid_value", ""),
        EstimateError::SingularCovariance { .. } => {
            at("collinear", "").remedy("Leave this estimator out, or name other instruments")
        }
        EstimateError::TooFewObservations { .. }
        | EstimateError::NotFinite
        | EstimateError::SampleDiffers { .. }
        | EstimateError::Missing { .. }
        | EstimateError::TooShort { .. } => at("too_few_observations", ""),
    }
}

/// The same for methods that speak of series.
fn explain_series(error: SeriesError, request: &Request<'_>) -> Vec<Finding> {
    let at = |code: &str, message: String| {
        let message = format!("{}: {message}", request.estimator.code());
        Finding::error(code, message).at_pointer(request.side.pointer())
    };
    let told = error.to_string();
    vec![match error {
        SeriesError::Collinear { terms, .. } => at("collinear", told).found(terms.join(", ")),
        SeriesError::Constant { series } => at("constant_series", told).at_series(series),
        SeriesError::Equation { fault, .. } => explain(&fault, request),
        SeriesError::Option { .. } => at("invalid_value", told),
        SeriesError::Missing { series, .. }
        | SeriesError::TooShort { series, .. }
        | SeriesError::LengthDiffers { series, .. } => {
            at("too_few_observations", told).at_series(series)
        }
    }]
}

pub(super) fn differences(values: &[f64]) -> Vec<f64> {
    values.windows(2).map(|w| w[1] - w[0]).collect()
}

pub(super) fn finite(value: f64) -> Option<f64> {
    value.is_finite().then_some(value)
}

/// Counts of observations as JSON carries them.
pub(super) fn small(count: usize) -> u32 {
    u32::try_from(count).unwrap_or(u32::MAX)
}
