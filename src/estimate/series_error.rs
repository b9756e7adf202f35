//! Why a method on time series has no answer, naming the series and what would help.

use super::{EstimateError, Ols, Regressor};

/// Why a method on time series has no answer.
#[derive(Clone, Debug, PartialEq, thiserror::Error)]
pub enum SeriesError {
    /// A missing or infinite value.
    #[error(
        "{series} is missing or infinite at observation {observation}; choose a sample without the gap"
    )]
    Missing {
        /// Name of the series.
        series: String,
        /// Observation, from 1.
        observation: usize,
    },
    /// A series that does not vary, or is a deterministic trend throughout.
    #[error(
        "{series} does not vary beyond its deterministic terms; choose a longer sample or leave it out"
    )]
    Constant {
        /// Name of the series.
        series: String,
    },
    /// Too few observations for the lags and terms asked for.
    #[error(
        "{series} has {observations} observations where {needed} are needed; take a longer sample or \
         fewer lags, leads or deterministic terms"
    )]
    TooShort {
        /// Name of the series.
        series: String,
        /// Observations at hand.
        observations: usize,
        /// Observations needed.
        needed: usize,
    },
    /// Series of different lengths.
    #[error(
        "{series} has {found} observations where {expected} are expected; bring all to one sample"
    )]
    LengthDiffers {
        /// Name of the series.
        series: String,
        /// Its observations.
        found: usize,
        /// Observations of the first series.
        expected: usize,
    },
    /// Terms that are linear combinations of each other.
    #[error(
        "in the equation of {series} the terms {} are linearly dependent; leave one out, or take fewer lags",
        terms.join(", ")
    )]
    Collinear {
        /// Name of the explained series.
        series: String,
        /// The terms that take part in the dependence.
        terms: Vec<String>,
    },
    /// Another fault of the equation.
    #[error("in the equation of {series}: {fault}")]
    Equation {
        /// Name of the explained series.
        series: String,
        /// The fault.
        fault: EstimateError,
    },
    /// An option that the method does not have.
    #[error("{method}: {fault}")]
    Option {
        /// The method.
        method: &'static str,
        /// What is wrong, and what would be right.
        fault: String,
    },
}

/// Refuses series of unequal length, with gaps, or without variation.
pub(super) fn check(series: &[&Regressor]) -> Result<(), SeriesError> {
    let expected = series.first().map_or(0, |s| s.values.len());
    for Regressor { name, values } in series {
        let series = name.clone();
        if values.len() != expected {
            return Err(SeriesError::LengthDiffers {
                series,
                found: values.len(),
                expected,
            });
        }
        if let Some(i) = values.iter().position(|v| !v.is_finite()) {
            return Err(SeriesError::Missing {
                series,
                observation: i + 1,
            });
        }
        if values.windows(2).all(|w| w[0].to_bits() == w[1].to_bits()) {
            return Err(SeriesError::Constant { series });
        }
    }
    Ok(())
}

/// Least squares of the equation of `series`, faults told in its terms.
pub(super) fn regress(
    series: &str,
    y: &[f64],
    regressors: Vec<Regressor>,
) -> Result<Ols, SeriesError> {
    let (observations, needed) = (y.len(), regressors.len() + 1);
    let series = series.to_owned();
    Ols::fit(y, regressors).map_err(|error| match error {
        EstimateError::Collinear { names } => SeriesError::Collinear {
            series,
            terms: names,
        },
        EstimateError::NotFinite => SeriesError::Missing {
            series,
            observation: y.iter().position(|v| !v.is_finite()).unwrap_or(0) + 1,
        },
        EstimateError::TooFewObservations { .. }
        | EstimateError::SampleDiffers { .. }
        | EstimateError::TooManyLags { .. } => SeriesError::TooShort {
            series,
            observations,
            needed,
        },
        EstimateError::Missing { name, observation } => SeriesError::Missing {
            series: name,
            observation,
        },
        EstimateError::Constant { name } => SeriesError::Constant { series: name },
        fault @ (EstimateError::TooShort { .. }
        | EstimateError::Explosive { .. }
        | EstimateError::Underidentified { .. }
        | EstimateError::UnknownRegressor { .. }
        | EstimateError::RedundantRestriction { .. }
        | EstimateError::Setting { .. }
        | EstimateError::SingularCovariance { .. }
        | EstimateError::NoConvergence { .. }) => SeriesError::Equation { series, fault },
    })
}

/// First differences, one fewer than the values.
pub(super) fn differences(values: &[f64]) -> Vec<f64> {
    values.windows(2).map(|w| w[1] - w[0]).collect()
}
