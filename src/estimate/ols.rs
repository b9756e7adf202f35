//! Ordinary least squares.

use std::f64::consts::PI;

use super::EstimateError;
use crate::linalg::{LeastSquaresError, Matrix, least_squares};

/// A named column of regressors.
#[derive(Clone, Debug, PartialEq)]
pub struct Regressor {
    /// Name, as it comes back with the coefficient.
    pub name: String,
    /// One value an observation.
    pub values: Vec<f64>,
}

impl Regressor {
    /// A named column.
    #[must_use]
    pub fn new(name: &str, values: Vec<f64>) -> Self {
        Self {
            name: name.to_owned(),
            values,
        }
    }

    /// The constant: a column of n ones named `const`.
    #[must_use]
    pub fn constant(n: usize) -> Self {
        Self::new("const", vec![1.0; n])
    }
}

/// An equation `y = X β + e` estimated by ordinary least squares.
#[derive(Clone, Debug)]
pub struct Ols {
    /// Regressors, in the order in which they were given.
    pub regressors: Vec<Regressor>,
    /// One coefficient a regressor.
    pub coefficients: Vec<f64>,
    /// `y − X β`.
    pub residuals: Vec<f64>,
    /// `X β`.
    pub fitted: Vec<f64>,
    /// Observations.
    pub n: usize,
    /// Coefficients, the constant included.
    pub k: usize,
    /// Residual degrees of freedom, `n − k`.
    pub df: usize,
    /// Sum of squared residuals.
    pub ssr: f64,
    /// Residual variance `ssr / (n − k)`.
    pub s2: f64,
    /// `1 − ssr / tss`; tss about the mean where a regressor is constant, else about zero. NaN where
    /// y does not vary.
    pub r2: f64,
    /// `1 − (1 − R²)(n − c)/(n − k)`, c = 1 with a constant, else 0.
    pub adjusted_r2: f64,
    /// Durbin & Watson's (1950) `Σ (e_t − e_{t−1})² / Σ e_t²`.
    pub durbin_watson: f64,
    /// Gaussian log-likelihood at the variance `ssr / n`.
    pub log_likelihood: f64,
    /// `−2 log-likelihood + 2 k`; the variance is not counted as a parameter.
    pub aic: f64,
    /// `−2 log-likelihood + k ln n`; the variance is not counted as a parameter.
    pub bic: f64,
    /// `(X'X)⁻¹`.
    pub inverse_gram: Matrix,
}

impl Ols {
    /// Fits y (n values) on the regressors (n values each; no constant is added).
    ///
    /// # Errors
    /// [`EstimateError`] where no degree of freedom is left, a value is missing, or regressors are
    /// collinear (they are named).
    pub fn fit(y: &[f64], regressors: Vec<Regressor>) -> Result<Self, EstimateError> {
        let (n, k) = (y.len(), regressors.len());
        let too_few = EstimateError::TooFewObservations {
            observations: n,
            coefficients: k,
        };
        if n <= k {
            return Err(too_few);
        }
        let columns: Vec<Vec<f64>> = regressors.iter().map(|r| r.values.clone()).collect();
        let fit = least_squares(&columns, y).map_err(|error| match error {
            LeastSquaresError::Shape { .. } => too_few,
            LeastSquaresError::NotFinite => EstimateError::NotFinite,
            LeastSquaresError::RankDeficient { columns } => EstimateError::Collinear {
                names: columns
                    .iter()
                    .map(|&j| regressors[j].name.clone())
                    .collect(),
            },
        })?;

        let (count, coefficients, df) = (as_f64(n), as_f64(k), n - k);
        let ssr: f64 = fit.residuals.iter().map(|e| e * e).sum();
        let has_constant = regressors.iter().any(|r| {
            r.values
                .iter()
                .all(|v| v.to_bits() == r.values[0].to_bits())
        });
        let centre = if has_constant {
            y.iter().sum::<f64>() / count
        } else {
            0.0
        };
        let tss: f64 = y.iter().map(|v| (v - centre).powi(2)).sum();
        let r2 = if tss > 0.0 { 1.0 - ssr / tss } else { f64::NAN };
        let base = if has_constant { count - 1.0 } else { count };
        let steps = fit.residuals.windows(2).map(|e| (e[1] - e[0]).powi(2));
        let log_likelihood = -count / 2.0 * ((2.0 * PI * ssr / count).ln() + 1.0);
        Ok(Self {
            fitted: y.iter().zip(&fit.residuals).map(|(y, e)| y - e).collect(),
            n,
            k,
            df,
            ssr,
            s2: ssr / as_f64(df),
            r2,
            adjusted_r2: 1.0 - (1.0 - r2) * base / as_f64(df),
            durbin_watson: steps.sum::<f64>() / ssr,
            log_likelihood,
            aic: -2.0 * log_likelihood + 2.0 * coefficients,
            bic: -2.0 * log_likelihood + coefficients * count.ln(),
            regressors,
            coefficients: fit.coefficients,
            residuals: fit.residuals,
            inverse_gram: fit.inverse_gram,
        })
    }

    /// Position of a regressor by name.
    #[must_use]
    pub fn position(&self, name: &str) -> Option<usize> {
        self.regressors.iter().position(|r| r.name == name)
    }

    /// Coefficient of a regressor by name.
    #[must_use]
    pub fn coefficient(&self, name: &str) -> Option<f64> {
        self.position(name).map(|i| self.coefficients[i])
    }
}

/// Counts here are far below 2⁵³, so the conversion is exact.
#[expect(
    clippy::cast_precision_loss,
    reason = "numbers of observations and coefficients are small"
)]
pub(super) fn as_f64(count: usize) -> f64 {
    count as f64
}
