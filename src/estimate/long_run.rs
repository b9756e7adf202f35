//! Long-run variance of a series by the Bartlett kernel, and its automatic lags.

use super::ols::as_f64;
use crate::linalg::{Matrix, product};

/// Autocovariance at lag j, `Σ u_t u_{t−j} / n`, about zero.
fn autocovariance(u: &[f64], j: usize) -> f64 {
    product(&u[j..], &u[..u.len() - j]) / as_f64(u.len())
}

/// `γ_0 + 2 Σ_j (1 − j/(lags + 1)) γ_j` of residuals (about zero; divisor n), `lags` below n.
///
/// Newey & West 1987, Econometrica 55(3), eq. 5, for one series.
#[must_use]
pub fn long_run_variance(u: &[f64], lags: usize) -> f64 {
    let tail: f64 = (1..=lags.min(u.len().saturating_sub(1)))
        .map(|j| (1.0 - as_f64(j) / as_f64(lags + 1)) * autocovariance(u, j))
        .sum();
    autocovariance(u, 0) + 2.0 * tail
}

/// Automatic lags for the Bartlett kernel: `⌊1.1447 ((s₁/s₀)² n)^(1/3)⌋` with
/// `s_q = 1[q = 0] γ_0 + 2 Σ_{j=1}^{⌊n^(2/9)⌋} j^q γ_j`, at most n − 1.
///
/// Hobijn, Franses & Ooms 1998, Generalizations of the KPSS-test for stationarity (after
/// Newey & West 1994). Reference value: 4 for the residuals of Danish log real money about its mean.
#[must_use]
pub fn automatic_lags(u: &[f64]) -> usize {
    let n = as_f64(u.len());
    let pilot = floor_count(n.powf(2.0 / 9.0), u.len());
    let gamma: Vec<f64> = (0..=pilot.min(u.len().saturating_sub(1)))
        .map(|j| autocovariance(u, j))
        .collect();
    let s0 = gamma[0] + 2.0 * gamma[1..].iter().sum::<f64>();
    let s1: f64 = 2.0 * (1..gamma.len()).map(|j| as_f64(j) * gamma[j]).sum::<f64>();
    let lags = 1.1447 * (s1 / s0).powi(2).cbrt() * n.cbrt();
    floor_count(lags, u.len().saturating_sub(1))
}

/// `⌊value⌋`, between 0 and `most`; 0 for NaN.
pub(super) fn floor_count(value: f64, most: usize) -> usize {
    (0..most).take_while(|c| as_f64(c + 1) <= value).count()
}

/// Long-run covariance of several series: two-sided `Ω`, one-sided `Λ = Σ_{j≥0} w_j Γ_j` with
/// `Γ_j = Σ_t u_t u_{t−j}' / n`, Bartlett weights, about zero.
#[derive(Clone, Debug)]
pub struct LongRunCovariance {
    /// `Ω = Λ + Λ' − Γ_0`.
    pub two_sided: Matrix,
    /// `Λ[a, b] = Σ_{j≥0} w_j Σ_t u_{a,t−j} u_{b,t} / n`: the past of a with the present of b.
    pub one_sided: Matrix,
}

/// Long-run covariance of series of equal length by the Bartlett kernel with `lags` lags.
#[must_use]
pub fn long_run_covariance(series: &[Vec<f64>], lags: usize) -> LongRunCovariance {
    let (n, k) = (series[0].len(), series.len());
    let gamma =
        |a: usize, b: usize, j: usize| product(&series[a][..n - j], &series[b][j..]) / as_f64(n);
    let one_sided = Matrix::from_fn(k, k, |a, b| {
        (0..=lags.min(n - 1))
            .map(|j| (1.0 - as_f64(j) / as_f64(lags + 1)) * gamma(a, b, j))
            .sum()
    });
    let two_sided = Matrix::from_fn(k, k, |a, b| {
        one_sided.at(a, b) + one_sided.at(b, a) - gamma(a, b, 0)
    });
    LongRunCovariance {
        two_sided,
        one_sided,
    }
}
