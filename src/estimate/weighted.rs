//! Weighted least squares.

use super::{EstimateError, Ols, Regressor};

/// An equation estimated by weighted least squares.
#[derive(Clone, Debug)]
pub struct Weighted {
    /// Least squares of `√w y` on `√w X`: coefficients, degrees of freedom, `s2 = Σ w e²/(n − k)`; give
    /// it to [`super::covariance()`]. Its R² and likelihood are those of the transformed data.
    pub transformed: Ols,
    /// `y − X β`, in the units of y.
    pub residuals: Vec<f64>,
    /// `1 − Σ w e² / Σ w (y − ȳ_w)²`, `ȳ_w` the weighted mean.
    pub r2: f64,
    /// Gaussian log-likelihood of y at variances `(Σ w e²/n)/w_t`.
    pub log_likelihood: f64,
}

/// Fits `y = X β + e`, var `e_t = σ²/w_t`, by least squares of `√w y` on `√w X` (Greene 2012, chapter 9).
///
/// Weights are used as given: their scale moves s² but neither coefficients nor standard
/// errors. Equal weights give ordinary least squares. A missing value is an error.
///
/// # Errors
/// A weight that is not positive and finite; else as [`Ols::fit`].
pub fn weighted(
    y: &[f64],
    regressors: &[Regressor],
    weights: &[f64],
) -> Result<Weighted, EstimateError> {
    if weights.len() != y.len() || !weights.iter().all(|w| w.is_finite() && *w > 0.0) {
        return Err(EstimateError::Setting {
            setting: "weights",
            allowed: "one positive number an observation",
        });
    }
    let scale = |v: &[f64]| {
        v.iter()
            .zip(weights)
            .map(|(v, w)| v * w.sqrt())
            .collect::<Vec<_>>()
    };
    let scaled = regressors
        .iter()
        .map(|r| Regressor::new(&r.name, scale(&r.values)));
    let transformed = Ols::fit(&scale(y), scaled.collect())?;
    let total: f64 = weights.iter().sum();
    let mean = y.iter().zip(weights).map(|(y, w)| w * y).sum::<f64>() / total;
    let tss: f64 = y
        .iter()
        .zip(weights)
        .map(|(y, w)| w * (y - mean).powi(2))
        .sum();
    let logs: f64 = weights.iter().map(|w| w.ln()).sum();
    Ok(Weighted {
        residuals: transformed
            .residuals
            .iter()
            .zip(weights)
            .map(|(e, w)| e / w.sqrt())
            .collect(),
        r2: 1.0 - transformed.ssr / tss,
        log_likelihood: transformed.log_likelihood + logs / 2.0,
        transformed,
    })
}
