//! The augmented Dickey–Fuller test.

use super::super::long_run::floor_count;
use super::super::ols::as_f64;
use super::super::series_error::{check, differences, regress};
use super::super::{Deterministic, Ols, Regressor, SeriesError};
use super::{CriticalValues, mackinnon_critical, mackinnon_p};

/// What chooses the number of lagged differences.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash)]
pub enum LagCriterion {
    /// Smallest `−2 log L + 2 k`.
    Aic,
    /// Smallest `−2 log L + k ln T`.
    Bic,
    /// From the most lags down, the first whose last lag has |t| ≥ 1.6449 (10 %; Ng & Perron 1995).
    TStatistic,
    /// Smallest `ln σ̂² + 2 (τ_T + p)/T`, `σ̂² = ssr/T`, `τ_T = ρ̂² Σ ỹ²_{t−1}/σ̂²`, ỹ detrended by least
    /// squares on the common sample (Ng & Perron 2001; Perron & Qu 2007).
    ModifiedAic,
}

/// Number of lagged differences.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash)]
pub enum Lags {
    /// As given.
    Fixed(usize),
    /// Chosen among 0 to `max` on the common sample of n − max − 1 rows.
    Chosen {
        /// The criterion.
        by: LagCriterion,
        /// Most lags tried; [`schwert_lags`] if none is given.
        max: Option<usize>,
    },
}

/// `⌊12 (n/100)^¼⌋` (Schwert 1989), bounded so that half of the n observations stay.
#[must_use]
pub fn schwert_lags(n: usize, deterministic: Deterministic) -> usize {
    let bound = (n / 2).saturating_sub(deterministic.terms() + 1);
    floor_count(12.0 * (as_f64(n) / 100.0).powf(0.25), bound)
}

/// An augmented Dickey–Fuller test.
#[derive(Clone, Debug, PartialEq)]
pub struct Adf {
    /// t statistic of ρ.
    pub statistic: f64,
    /// ρ̂, the coefficient of the lagged level.
    pub coefficient: f64,
    /// Lagged differences p.
    pub lags: usize,
    /// Most lags that were tried, where they were chosen.
    pub max_lags: Option<usize>,
    /// Rows of the final regression, n − p − 1.
    pub observations: usize,
    /// Asymptotic p-value (`MacKinnon` 1994), lower tail.
    pub p_value: f64,
    /// Critical values at this number of rows (`MacKinnon` 2010).
    pub critical: CriticalValues,
}

/// Augmented Dickey–Fuller test of a unit root against (trend) stationarity.
///
/// `Δy_t = d_t'δ + ρ y_{t−1} + Σ_{i=1}^{p} γ_i Δy_{t−i} + e_t`; the statistic is the t statistic of ρ with
/// variance `ssr/(T − k)`. Lags are chosen on the common sample n − max − 1 and the equation is then
/// refitted on all n − p − 1 rows. Missing values are an error.
///
/// Said & Dickey 1984, Biometrika 71(3); p-values and critical values: `MacKinnon` 1994, 2010. Reference
/// value: Danish log real money, constant, AIC of at most 10: τ = −1.2630193206 at 2 lags
/// (statsmodels 0.15.0).
///
/// # Errors
/// [`SeriesError`] for a missing value, a series without variation, or too few observations.
pub fn adf(y: &Regressor, deterministic: Deterministic, lags: Lags) -> Result<Adf, SeriesError> {
    check(&[y])?;
    let (lags, max_lags) = choose(y, deterministic, lags)?;
    let fit = regression(y, deterministic, lags, lags)?;
    let at = deterministic.terms();
    let statistic = t_statistic(&fit, at);
    let none = || SeriesError::Constant {
        series: y.name.clone(),
    };
    Ok(Adf {
        statistic,
        coefficient: fit.coefficients[at],
        lags,
        max_lags,
        observations: fit.n,
        p_value: mackinnon_p(statistic, deterministic, 1).ok_or_else(none)?,
        critical: mackinnon_critical(deterministic, 1, fit.n).ok_or_else(none)?,
    })
}

/// The regression behind the test: `Δy` on deterministic terms, the lagged level and `lags` lagged
/// differences, on all rows that the lags leave.
///
/// # Errors
/// As [`adf`].
pub fn dickey_fuller_regression(
    y: &Regressor,
    deterministic: Deterministic,
    lags: usize,
) -> Result<Ols, SeriesError> {
    check(&[y])?;
    regression(y, deterministic, lags, lags)
}

/// The number of lags, and the most that were tried where it was chosen.
pub(super) fn choose(
    y: &Regressor,
    deterministic: Deterministic,
    lags: Lags,
) -> Result<(usize, Option<usize>), SeriesError> {
    let (by, max) = match lags {
        Lags::Fixed(lags) => return Ok((lags, None)),
        Lags::Chosen { by, max } => {
            let max = max.unwrap_or_else(|| schwert_lags(y.values.len(), deterministic));
            (by, max)
        }
    };
    let last_lag = |fit: &Ols| t_statistic(fit, fit.k - 1).abs();
    // 5 % point of the upper tail of the normal distribution, as the rule is stated.
    let threshold = crate::dist::normal_upper(0.05);
    let mut best = (f64::INFINITY, 0);
    for lags in (0..=max).rev() {
        let fit = regression(y, deterministic, lags, max)?;
        let value = match by {
            LagCriterion::Aic => fit.aic,
            LagCriterion::Bic => fit.bic,
            LagCriterion::ModifiedAic => modified_aic(&fit, deterministic, lags)?,
            LagCriterion::TStatistic => {
                if lags > 0 && last_lag(&fit) < threshold {
                    continue;
                }
                return Ok((lags, Some(max)));
            }
        };
        // Equal values go to fewer lags.
        if value <= best.0 {
            best = (value, lags);
        }
    }
    Ok((best.1, Some(max)))
}

fn modified_aic(fit: &Ols, deterministic: Deterministic, lags: usize) -> Result<f64, SeriesError> {
    let at = deterministic.terms();
    let level = &fit.regressors[at];
    let detrended = if at == 0 {
        level.values.clone()
    } else {
        regress(&level.name, &level.values, fit.regressors[..at].to_vec())?.residuals
    };
    let (t, variance) = (as_f64(fit.n), fit.ssr / as_f64(fit.n));
    let sum: f64 = detrended.iter().map(|v| v * v).sum();
    let tau = fit.coefficients[at].powi(2) * sum / variance;
    Ok(variance.ln() + 2.0 * (tau + as_f64(lags)) / t)
}

/// The Dickey–Fuller regression on the rows from `skip` lagged differences on, `skip ≥ lags`:
/// deterministic terms, the lagged level, the lagged differences.
fn regression(
    y: &Regressor,
    deterministic: Deterministic,
    lags: usize,
    skip: usize,
) -> Result<Ols, SeriesError> {
    let (n, k) = (y.values.len(), deterministic.terms() + 1 + lags);
    if n < skip + k + 2 {
        return Err(SeriesError::TooShort {
            series: y.name.clone(),
            observations: n,
            needed: skip + k + 2,
        });
    }
    let change = differences(&y.values);
    let rows = n - 1 - skip;
    let mut regressors = deterministic.columns(rows);
    regressors.push(Regressor::new(
        &format!("{}.L1", y.name),
        y.values[skip..n - 1].to_vec(),
    ));
    regressors.extend((1..=lags).map(|i| {
        let values = change[skip - i..skip - i + rows].to_vec();
        Regressor::new(&format!("d.{}.L{i}", y.name), values)
    }));
    let fit = regress(&y.name, &change[skip..], regressors)?;
    // What is left of an exact line is rounding, and its t statistic noise.
    let scale: f64 = change[skip..].iter().map(|v| v * v).sum();
    if fit.ssr <= 1e-24 * scale {
        return Err(SeriesError::Constant {
            series: y.name.clone(),
        });
    }
    Ok(fit)
}

fn t_statistic(fit: &Ols, at: usize) -> f64 {
    fit.coefficients[at] / (fit.s2 * fit.inverse_gram.at(at, at)).sqrt()
}

/// The test's statistic on a series that has been detrended already, without deterministic terms.
pub(super) fn statistic_without_terms(
    y: &Regressor,
    lags: usize,
) -> Result<(f64, usize), SeriesError> {
    let fit = regression(y, Deterministic::None, lags, lags)?;
    Ok((t_statistic(&fit, 0), fit.n))
}
