//! Regression with first-order autoregressive errors.

use super::ols::{columns, dot};
use super::{EstimateError, Ols, Regressor};

/// What becomes of the first observation.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum FirstObservation {
    /// Kept, times `√(1 − ρ²)` (Prais & Winsten 1954).
    Kept,
    /// Dropped (Cochrane & Orcutt 1949).
    Dropped,
}

/// An equation with first-order autoregressive errors, `u_t = ρ u_{t−1} + ε_t`.
#[derive(Clone, Debug)]
pub struct Autoregressive {
    /// The autoregressive coefficient.
    pub rho: f64,
    /// Least squares of the transformed data: coefficients (those of the equation itself), the
    /// innovations ε as residuals, `s2 = Σ ε²/(rows − k)`; give it to [`super::covariance()`]. ρ is
    /// taken as known in its standard errors.
    pub transformed: Ols,
    /// `u = y − X β`, all n of them.
    pub residuals: Vec<f64>,
    /// Rounds until ρ settled.
    pub rounds: usize,
}

const MOST_ROUNDS: usize = 2000;

/// Fits `y = X β + u`, `u_t = ρ u_{t−1} + ε_t`.
///
/// Alternates between β by least squares of `y_t − ρ y_{t−1}` on `x_t − ρ x_{t−1}` and
/// `ρ = Σ u_t u_{t−1} / Σ u_{t−1}²` (t from 2), from ρ = 0 until ρ moves by less than 1e-13.
///
/// A missing value is an error: the rows must be consecutive. Source: Greene 2012, chapter 20.
/// Reference: Danish money demand, ρ = 0.9600977 (kept), 0.9739956 (dropped), `estimation.json`.
///
/// # Errors
/// [`EstimateError::Explosive`] where |ρ| reaches 1, [`EstimateError::NoConvergence`], else as
/// [`Ols::fit`].
pub fn autoregressive(
    y: &[f64],
    regressors: &[Regressor],
    first: FirstObservation,
) -> Result<Autoregressive, EstimateError> {
    let mut rho = 0.0_f64;
    for rounds in 1..=MOST_ROUNDS {
        let change = |v: &[f64]| {
            let mut out = Vec::with_capacity(v.len());
            if first == FirstObservation::Kept {
                out.extend(v.first().map(|v| v * (1.0 - rho * rho).sqrt()));
            }
            out.extend(v.windows(2).map(|w| w[1] - rho * w[0]));
            out
        };
        let moved = regressors
            .iter()
            .map(|r| Regressor::new(&r.name, change(&r.values)));
        let transformed = Ols::fit(&change(y), moved.collect())?;
        let x = columns(regressors);
        let fitted = |t: usize| -> f64 {
            x.iter()
                .zip(&transformed.coefficients)
                .map(|(x, b)| x[t] * b)
                .sum()
        };
        let u: Vec<f64> = y.iter().enumerate().map(|(t, y)| y - fitted(t)).collect();
        let before = &u[..u.len() - 1];
        let next = dot(&u[1..], before) / dot(before, before);
        if !next.is_finite() || next.abs() >= 1.0 {
            return Err(EstimateError::Explosive {
                name: "the errors".to_owned(),
                coefficient: next,
            });
        }
        if (next - rho).abs() < 1e-13 {
            return Ok(Autoregressive {
                rho,
                transformed,
                residuals: u,
                rounds,
            });
        }
        rho = next;
    }
    Err(EstimateError::NoConvergence {
        what: "the autoregressive coefficient of the errors",
        rounds: MOST_ROUNDS,
    })
}
