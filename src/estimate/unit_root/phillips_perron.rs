//! The Phillips–Perron test.

use super::super::long_run::long_run_variance;
use super::super::ols::as_f64;
use super::super::series_error::{check, regress};
use super::super::{Deterministic, Regressor, SeriesError, rule_of_thumb_lags};
use super::{CriticalValues, mackinnon_critical, mackinnon_p};

/// A Phillips–Perron test.
#[derive(Clone, Debug, PartialEq)]
pub struct PhillipsPerron {
    /// `Z_t`.
    pub z_t: f64,
    /// `Z_α`, the statistic of `T (α̂ − 1)`.
    pub z_alpha: f64,
    /// Lags of the Bartlett kernel.
    pub lags: usize,
    /// Rows T of the regression, n − 1.
    pub observations: usize,
    /// Asymptotic p-value of `Z_t` (`MacKinnon` 1994), lower tail.
    pub p_value: f64,
    /// Critical values of `Z_t` at T rows (`MacKinnon` 2010).
    pub critical: CriticalValues,
}

/// Phillips & Perron's test of a unit root, robust to serial correlation without lagged differences.
///
/// `y_t = d_t'δ + α y_{t−1} + u_t` on T = n − 1 rows, with `s² = ssr/(T − k)`, `γ_0 = ssr/T` and
/// `λ² = γ_0 + 2 Σ_{j≤L} (1 − j/(L+1)) γ_j`:
///
/// `Z_t = √(γ_0/λ²) t_α − (λ² − γ_0)/(2λ) · T se(α̂)/s`,
/// `Z_α = T (α̂ − 1) − ½ T² se(α̂)²/s² · (λ² − γ_0)`.
///
/// Hamilton 1994, Time Series Analysis, eqs 17.6.8 and 17.6.12 (one of the scalings in use; programs that
/// take `s² = ssr/T` differ by a few per cent). Lags default to `⌊4 (T/100)^(2/9)⌋`. Not for
/// `QuadraticTrend`. Reference value: Danish log real money, constant, 4 lags: −0.4605245683 (arch 8.0.0).
///
/// # Errors
/// [`SeriesError`], as for the augmented Dickey–Fuller test.
pub fn phillips_perron(
    y: &Regressor,
    deterministic: Deterministic,
    lags: Option<usize>,
) -> Result<PhillipsPerron, SeriesError> {
    check(&[y])?;
    if deterministic == Deterministic::QuadraticTrend {
        return Err(SeriesError::Option {
            method: "Phillips–Perron",
            fault: "deterministic terms are none, a constant, or a constant and a trend".to_owned(),
        });
    }
    let n = y.values.len();
    let rows = n - 1;
    let mut regressors = deterministic.columns(rows);
    let level = format!("{}.L1", y.name);
    regressors.push(Regressor::new(&level, y.values[..rows].to_vec()));
    let fit = regress(&y.name, &y.values[1..], regressors)?;
    let lags = lags.unwrap_or_else(|| rule_of_thumb_lags(rows));
    if lags >= rows {
        return Err(SeriesError::TooShort {
            series: y.name.clone(),
            observations: n,
            needed: lags + 2,
        });
    }
    let at = deterministic.terms();
    let t = as_f64(rows);
    let excess = fit.coefficients[at] - 1.0;
    let variance = fit.inverse_gram.at(at, at);
    let error = (fit.s2 * variance).sqrt();
    let gamma = fit.ssr / t;
    let lambda2 = long_run_variance(&fit.residuals, lags);
    let constant = || SeriesError::Constant {
        series: y.name.clone(),
    };
    // Also catches NaN.
    if !(lambda2 > 0.0 && gamma > 0.0) {
        return Err(constant());
    }
    let z_t = (gamma / lambda2).sqrt() * excess / error
        - 0.5 * (lambda2 - gamma) / lambda2.sqrt() * t * variance.sqrt();
    Ok(PhillipsPerron {
        z_t,
        z_alpha: t * excess - 0.5 * t * t * variance * (lambda2 - gamma),
        lags,
        observations: rows,
        p_value: mackinnon_p(z_t, deterministic, 1).ok_or_else(constant)?,
        critical: mackinnon_critical(deterministic, 1, rows).ok_or_else(constant)?,
    })
}
