//! The Engle–Granger test.

use super::super::series_error::{check, regress};
use super::super::unit_root::{CriticalValues, Lags, adf, mackinnon_critical, mackinnon_p};
use super::super::{Deterministic, Ols, Regressor, SeriesError};

/// An Engle–Granger test of cointegration.
#[derive(Clone, Debug)]
pub struct EngleGranger {
    /// t statistic of the Dickey–Fuller regression of the residuals, without deterministic terms.
    pub statistic: f64,
    /// Lagged differences.
    pub lags: usize,
    /// Asymptotic p-value (`MacKinnon` 1994), lower tail; none for more than 6 series.
    pub p_value: Option<f64>,
    /// Critical values (`MacKinnon` 2010) at n − 1; none for more than 12 series or without constant.
    pub critical: Option<CriticalValues>,
    /// The static regression of y on deterministic terms and x.
    pub regression: Ols,
}

/// Residual-based test of no cointegration: Dickey–Fuller on the residuals of `y_t = d_t'δ + x_t'β + u_t`.
///
/// All series I(1); missing values are an error. Critical values are taken at n − 1 observations
/// whatever the lags.
///
/// Engle & Granger 1987, Econometrica 55(2); `MacKinnon` 1994, 2010. Reference value: Danish money on
/// income and two rates, constant, 1 lag: −2.4181860516, p = 0.7135259185 (statsmodels 0.15.0).
///
/// # Errors
/// [`SeriesError`]; collinear regressors are named.
pub fn engle_granger(
    y: &Regressor,
    x: &[Regressor],
    deterministic: Deterministic,
    lags: Lags,
) -> Result<EngleGranger, SeriesError> {
    let all: Vec<&Regressor> = [y].into_iter().chain(x).collect();
    check(&all)?;
    let n = y.values.len();
    let mut regressors = deterministic.columns(n);
    regressors.extend(x.iter().cloned());
    if regressors.is_empty() {
        return Err(SeriesError::Option {
            method: "Engle–Granger",
            fault: "at least one regressor is needed".to_owned(),
        });
    }
    let regression = regress(&y.name, &y.values, regressors)?;
    let scale: f64 = y.values.iter().map(|v| v * v).sum();
    if regression.ssr <= 1e-24 * scale {
        return Err(SeriesError::Collinear {
            series: y.name.clone(),
            terms: all.iter().map(|s| s.name.clone()).collect(),
        });
    }
    let residuals = Regressor::new(
        &format!("residuals of {}", y.name),
        regression.residuals.clone(),
    );
    let test = adf(&residuals, Deterministic::None, lags)?;
    let series = x.len() + 1;
    Ok(EngleGranger {
        statistic: test.statistic,
        lags: test.lags,
        p_value: mackinnon_p(test.statistic, deterministic, series),
        critical: mackinnon_critical(deterministic, series, n - 1),
        regression,
    })
}
