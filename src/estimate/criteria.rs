//! Information criteria, with their convention.

use super::ols::as_f64;

/// Information criteria of a Gaussian likelihood, smaller is better.
///
/// Convention: whole sample, not per observation; `parameters` are those the caller counts. [`super::Ols`]
/// counts regressors and not the variance; counting it adds one penalty to every model and changes no
/// comparison but that of the corrected criterion.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Criteria {
    /// Akaike 1974: `−2 L + 2 p`.
    pub aic: f64,
    /// Hurvich & Tsai 1989: `AIC + 2 p (p + 1)/(n − p − 1)`; infinite where n ≤ p + 1.
    pub aicc: f64,
    /// Schwarz 1978: `−2 L + p ln n`.
    pub bic: f64,
    /// Hannan & Quinn 1979: `−2 L + 2 p ln ln n`.
    pub hannan_quinn: f64,
}

/// Criteria from a log-likelihood, a number of parameters and of observations.
#[must_use]
pub fn criteria(log_likelihood: f64, parameters: usize, observations: usize) -> Criteria {
    let (p, n) = (as_f64(parameters), as_f64(observations));
    let aic = -2.0 * log_likelihood + 2.0 * p;
    let room = n - p - 1.0;
    let correction = if room > 0.0 {
        2.0 * p * (p + 1.0) / room
    } else {
        f64::INFINITY
    };
    Criteria {
        aic,
        aicc: aic + correction,
        bic: -2.0 * log_likelihood + p * n.ln(),
        hannan_quinn: -2.0 * log_likelihood + 2.0 * p * n.ln().ln(),
    }
}
