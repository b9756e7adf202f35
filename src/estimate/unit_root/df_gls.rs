//! The Dickey–Fuller test after detrending by generalised least squares.

use super::super::ols::as_f64;
use super::super::series_error::{check, regress};
use super::super::{Deterministic, Regressor, SeriesError};
use super::adf::{choose, statistic_without_terms};
use super::{Lags, schwert_lags};

/// A DF-GLS test.
#[derive(Clone, Debug, PartialEq)]
pub struct DfGls {
    /// t statistic of the lagged level of the detrended series.
    pub statistic: f64,
    /// Lagged differences.
    pub lags: usize,
    /// Rows of the regression.
    pub observations: usize,
    /// The series after detrending, n values.
    pub detrended: Vec<f64>,
}

/// Test of a unit root with more power near one than the Dickey–Fuller test.
///
/// y is detrended by least squares on quasi-differences
/// `(1 − ᾱ L)`, `ᾱ = 1 − 7/n` (constant) or `1 − 13.5/n` (trend), first observations kept; then the
/// Dickey–Fuller regression without deterministic terms.
///
/// Lags are chosen on y detrended by ordinary least squares (Perron & Qu 2007, Economics Letters 94).
/// p-values: [`crate::estimate::simulate_unit_root`] at the exact size.
///
/// Elliott, Rothenberg & Stock 1996, Econometrica 64(4), section 3. Reference value: Danish log real
/// money, constant, 4 lags: −1.6009666168 (arch 8.0.0 and urca 1.3.3).
///
/// # Errors
/// [`SeriesError`]; deterministic terms are a constant, or a constant and a trend.
pub fn df_gls(
    y: &Regressor,
    deterministic: Deterministic,
    lags: Lags,
) -> Result<DfGls, SeriesError> {
    check(&[y])?;
    let n = y.values.len();
    let distance = match deterministic {
        Deterministic::Constant => 7.0,
        Deterministic::Trend => 13.5,
        Deterministic::None | Deterministic::QuadraticTrend => {
            return Err(SeriesError::Option {
                method: "DF-GLS",
                fault: "deterministic terms are a constant, or a constant and a trend".to_owned(),
            });
        }
    };
    let alpha = 1.0 - distance / as_f64(n);
    let quasi = |v: &[f64]| -> Vec<f64> {
        (0..n)
            .map(|t| v[t] - if t == 0 { 0.0 } else { alpha * v[t - 1] })
            .collect()
    };
    let terms = deterministic.columns(n);
    let transformed = terms
        .iter()
        .map(|r| Regressor::new(&r.name, quasi(&r.values)))
        .collect();
    let fit = regress(&y.name, &quasi(&y.values), transformed)?;
    let detrended = (0..n)
        .map(|t| {
            let trend = terms.iter().zip(&fit.coefficients);
            y.values[t] - trend.map(|(r, c)| r.values[t] * c).sum::<f64>()
        })
        .collect();
    let lags = match lags {
        Lags::Fixed(lags) => lags,
        Lags::Chosen { by, max } => {
            let residuals = regress(&y.name, &y.values, terms.clone())?.residuals;
            let max = max.or_else(|| Some(schwert_lags(n, deterministic)));
            let chosen = Lags::Chosen { by, max };
            choose(
                &Regressor::new(&y.name, residuals),
                Deterministic::None,
                chosen,
            )?
            .0
        }
    };
    let detrended = Regressor::new(&y.name, detrended);
    let (statistic, observations) = statistic_without_terms(&detrended, lags)?;
    Ok(DfGls {
        statistic,
        lags,
        observations,
        detrended: detrended.values,
    })
}
