//! Ordinary least squares.

use std::f64::consts::PI;

use super::EstimateError;
use crate::linalg::{LeastSquaresError, Matrix, condition_number, least_squares, leverages};

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
        let missing = |name: &str, values: &[f64]| {
            let observation = values.iter().position(|v| !v.is_finite())? + 1;
            let name = name.to_owned();
            Some(EstimateError::Missing { name, observation })
        };
        let gap = regressors.iter().find_map(|r| missing(&r.name, &r.values));
        if let Some(error) = gap.or_else(|| missing("the dependent variable", y)) {
            return Err(error);
        }
        let columns = columns(&regressors);
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
        let has_constant = regressors.iter().any(|r| is_constant(&r.values));
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

    /// Leverage of each observation: `h_t = x_t' (X'X)⁻¹ x_t`, summing to k.
    #[must_use]
    pub fn leverages(&self) -> Vec<f64> {
        leverages(&columns(&self.regressors))
    }

    /// Condition number of X with columns of unit length (Belsley, Kuh & Welsch 1980, section 3.2, who
    /// see harm above 30).
    #[must_use]
    pub fn condition_number(&self) -> f64 {
        condition_number(&columns(&self.regressors))
    }

    /// The names of the regressors, in order.
    #[must_use]
    pub fn names(&self) -> Vec<String> {
        self.regressors.iter().map(|r| r.name.clone()).collect()
    }

    /// The dependent variable.
    #[must_use]
    pub fn dependent(&self) -> Vec<f64> {
        let sum = |(f, e): (&f64, &f64)| f + e;
        self.fitted.iter().zip(&self.residuals).map(sum).collect()
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

/// Whether a column holds one value throughout, to the bit.
pub(super) fn is_constant(values: &[f64]) -> bool {
    values.iter().all(|v| v.to_bits() == values[0].to_bits())
}

/// The bare columns of named regressors.
pub(super) fn columns(regressors: &[Regressor]) -> Vec<Vec<f64>> {
    regressors.iter().map(|r| r.values.clone()).collect()
}

/// Sum of products over the shorter length, in order.
pub(super) fn dot(a: &[f64], b: &[f64]) -> f64 {
    a.iter().zip(b).map(|(a, b)| a * b).sum()
}

/// Counts here are far below 2⁵³, so the conversion is exact.
#[expect(
    clippy::cast_precision_loss,
    reason = "numbers of observations and coefficients are small"
)]
pub(super) fn as_f64(count: usize) -> f64 {
    count as f64
}
