//! Recursive residuals, cumulated sums, and estimates over moving and growing windows.

use super::ols::{as_f64, columns, dot};
use super::outcome::{Distribution, TestResult};
use super::{CovarianceKind, EstimateError, Ols, Regressor, covariance};
use crate::dist::{normal_sf, t_upper};
use crate::linalg::{LeastSquaresError, least_squares};

/// One-step forecast errors of an equation fitted on ever longer samples.
#[derive(Clone, Debug)]
pub struct RecursiveResiduals {
    /// Observation (from 0) of the first of them: k, or later where the first k rows do not determine the
    /// coefficients.
    pub first: usize,
    /// `w_t = (y_t − x_t'b_{t−1}) / √(1 + x_t'(X'X)_{t−1}⁻¹x_t)`; independent with the variance of the
    /// errors under the null.
    pub values: Vec<f64>,
}

/// Recursive residuals (Brown, Durbin & Evans 1975, section 2), each from a full fit by QR of the rows
/// before. Reference: statsmodels 0.15.0 (`RecursiveLS`) and explicit refits, `estimation.json`.
///
/// # Errors
/// As [`Ols::fit`]; [`EstimateError::TooShort`] where no row is left.
pub fn recursive_residuals(fit: &Ols) -> Result<RecursiveResiduals, EstimateError> {
    let (y, x) = (fit.dependent(), columns(&fit.regressors));
    let (mut first, mut values) = (fit.k, Vec::new());
    for t in fit.k..fit.n {
        let head: Vec<Vec<f64>> = x.iter().map(|c| c[..t].to_vec()).collect();
        let solution = match least_squares(&head, &y[..t]) {
            Ok(solution) => solution,
            Err(LeastSquaresError::RankDeficient { .. }) if values.is_empty() => {
                first = t + 1;
                continue;
            }
            Err(_) => return Err(EstimateError::NotFinite),
        };
        let row: Vec<f64> = x.iter().map(|c| c[t]).collect();
        let mut spread = 1.0;
        for (i, a) in row.iter().enumerate() {
            for (j, b) in row.iter().enumerate() {
                spread += a * b * solution.inverse_gram.at(i, j);
            }
        }
        values.push((y[t] - dot(&row, &solution.coefficients)) / spread.sqrt());
    }
    if values.len() < 3 {
        return Err(EstimateError::TooShort {
            what: "the recursive residuals".to_owned(),
            needed: fit.n - values.len() + 3,
            found: fit.n,
        });
    }
    Ok(RecursiveResiduals { first, values })
}

/// A cumulated sum and its test.
#[derive(Clone, Debug)]
pub struct Cusum {
    /// Observation (from 0) of the first value of the path.
    pub first: usize,
    /// The path.
    pub path: Vec<f64>,
    /// Distance of the 5 % boundary from the path's expected value, one a value of the path.
    pub boundary: Vec<f64>,
    /// Largest excursion, and its p-value.
    pub test: TestResult,
}

/// CUSUM of **recursive** residuals (Brown, Durbin & Evans 1975, section 2.3).
///
/// Path `W_r = Σ_{j≤r} w_j/σ`, `σ² = Σ w²/m` over the m recursive residuals; boundary `0.948 √m (1 + 2
/// r/m)`; statistic `max |W_r| / (√m (1 + 2 r/m))`; p-value of a Brownian motion and linear boundary,
/// accurate below 0.3: `2 (Φ̄(3x) + e^(−4x²)(Φ(x) + Φ(5x) − 1) − e^(−16x²) Φ̄(x))`. For stationary
/// regressors.
///
/// # Errors
/// As [`recursive_residuals`].
pub fn cusum_recursive(fit: &Ols) -> Result<Cusum, EstimateError> {
    let RecursiveResiduals { first, values } = recursive_residuals(fit)?;
    let m = as_f64(values.len());
    let sigma = (dot(&values, &values) / m).sqrt();
    let path = cumulate(values.iter().map(|w| w / sigma));
    let line = |r: usize| m.sqrt() * (1.0 + 2.0 * as_f64(r + 1) / m);
    let x = path
        .iter()
        .enumerate()
        .fold(0.0_f64, |x, (r, w)| x.max(w.abs() / line(r)));
    let p = if x < 0.3 {
        1.0 - 0.1464 * x
    } else {
        let phi = |z: f64| normal_sf(-z);
        2.0 * (normal_sf(3.0 * x) + (-4.0 * x * x).exp() * (phi(x) + phi(5.0 * x) - 1.0)
            - (-16.0 * x * x).exp() * normal_sf(x))
    };
    let name = "largest crossing of a linear boundary by a Brownian motion";
    Ok(Cusum {
        first,
        boundary: (0..path.len()).map(|r| 0.948 * line(r)).collect(),
        path,
        test: TestResult::with_p(
            "CUSUM of recursive residuals",
            STABLE,
            x,
            Distribution::Other { name },
            p,
        ),
    })
}

/// CUSUM of squares of **recursive** residuals (Brown, Durbin & Evans 1975, section 2.4).
///
/// Path `S_r = Σ_{j≤r} w_j² / Σ w_j²`, expected `r/m`; statistic `max |S_r − r/m|`; boundary at 5 % by
/// Edgerton & Wells (1994), `1.3581015/√h − 0.6701218/h − 0.8858694/h^1.5`, `h = m/2 − 1`; p-value of
/// its limit, the Kolmogorov distribution at `√(m/2) max |S_r − r/m|`, for normal errors; a little
/// large in small samples.
///
/// # Errors
/// As [`recursive_residuals`].
pub fn cusum_of_squares(fit: &Ols) -> Result<Cusum, EstimateError> {
    let RecursiveResiduals { first, values } = recursive_residuals(fit)?;
    let m = as_f64(values.len());
    let total = dot(&values, &values);
    let path = cumulate(values.iter().map(|w| w * w / total));
    let gap = |(r, s): (usize, &f64)| (s - as_f64(r + 1) / m).abs();
    let statistic = path.iter().enumerate().map(gap).fold(0.0_f64, f64::max);
    let h = m / 2.0 - 1.0;
    let boundary = 1.358_101_5 / h.sqrt() - 0.670_121_8 / h - 0.885_869_4 / h.powf(1.5);
    let name = "supremum of a Brownian bridge (Kolmogorov)";
    Ok(Cusum {
        first,
        boundary: vec![boundary; path.len()],
        path,
        test: TestResult::with_p(
            "CUSUM of squares of recursive residuals",
            "Constancy of coefficients and error variance",
            statistic,
            Distribution::Other { name },
            kolmogorov_sf((m / 2.0).sqrt() * statistic),
        ),
    })
}

/// CUSUM of **OLS** residuals (Ploberger & Krämer 1992, Econometrica 60(2)).
///
/// Path `Σ_{j≤t} e_j / (s √n)`, `s² = ssr/(n − k)`; statistic its largest absolute value, Kolmogorov
/// distribution; boundary 1.3581 throughout. Reference: Danish money demand, 0.8047231, p = 0.5364774.
#[must_use]
pub fn cusum_ols(fit: &Ols) -> Cusum {
    let scale = (fit.s2 * as_f64(fit.n)).sqrt();
    let path = cumulate(fit.residuals.iter().map(|e| e / scale));
    let statistic = path.iter().fold(0.0_f64, |m, v| m.max(v.abs()));
    let name = "supremum of a Brownian bridge (Kolmogorov)";
    Cusum {
        first: 0,
        boundary: vec![1.358_1; path.len()],
        path,
        test: TestResult::with_p(
            "CUSUM of OLS residuals",
            STABLE,
            statistic,
            Distribution::Other { name },
            kolmogorov_sf(statistic),
        ),
    }
}

const STABLE: &str = "Constancy of the coefficients";

fn cumulate(values: impl Iterator<Item = f64>) -> Vec<f64> {
    let mut sum = 0.0;
    values
        .map(|v| {
            sum += v;
            sum
        })
        .collect()
}

/// `P(sup |B| > x)` of a Brownian bridge: `2 Σ (−1)^(j−1) e^(−2j²x²)`, or below 1 the equivalent theta
/// series.
fn kolmogorov_sf(x: f64) -> f64 {
    if x <= 0.0 {
        return 1.0;
    }
    if x < 1.0 {
        let term =
            |j: i32| (-(f64::from(2 * j - 1) * std::f64::consts::PI / x).powi(2) / 8.0).exp();
        return 1.0 - (2.0 * std::f64::consts::PI).sqrt() / x * (1..=20).map(term).sum::<f64>();
    }
    let term = |j: i32| (-2.0 * (f64::from(j) * x).powi(2)).exp();
    2.0 * (1..=20)
        .map(|j| if j % 2 == 1 { term(j) } else { -term(j) })
        .sum::<f64>()
}

/// Estimates over one window.
#[derive(Clone, Debug)]
pub struct Window {
    /// First observation, from 0.
    pub from: usize,
    /// One past the last.
    pub to: usize,
    /// One coefficient a regressor; NaN throughout where the window does not determine them.
    pub coefficients: Vec<f64>,
    /// Their standard errors, of the kind asked for.
    pub std_errors: Vec<f64>,
    /// Lower ends of the bands `b ± t(n − k) · s.e.`.
    pub low: Vec<f64>,
    /// Upper ends.
    pub high: Vec<f64>,
}

/// Estimates over all windows of one width, first to last, with bands at `level` (0.95).
///
/// # Errors
/// [`EstimateError::TooShort`] where `width` is not between k + 1 and n; covariance as [`covariance()`].
pub fn rolling(
    fit: &Ols,
    width: usize,
    kind: CovarianceKind,
    level: f64,
) -> Result<Vec<Window>, EstimateError> {
    check_width(fit, width)?;
    (0..=fit.n - width)
        .map(|from| window(fit, from, from + width, kind, level))
        .collect()
}

/// Estimates from the first observation to each later one, the shortest of `shortest` observations.
///
/// # Errors
/// As [`rolling`].
pub fn recursive(
    fit: &Ols,
    shortest: usize,
    kind: CovarianceKind,
    level: f64,
) -> Result<Vec<Window>, EstimateError> {
    check_width(fit, shortest)?;
    (shortest..=fit.n)
        .map(|to| window(fit, 0, to, kind, level))
        .collect()
}

fn check_width(fit: &Ols, width: usize) -> Result<(), EstimateError> {
    if width > fit.k && width <= fit.n {
        return Ok(());
    }
    Err(EstimateError::TooShort {
        what: format!(
            "a window of {width} observations and {} coefficients",
            fit.k
        ),
        needed: width.max(fit.k + 1),
        found: fit.n.min(width),
    })
}

fn window(
    fit: &Ols,
    from: usize,
    to: usize,
    kind: CovarianceKind,
    level: f64,
) -> Result<Window, EstimateError> {
    let (coefficients, std_errors) = match part(fit, from, to) {
        Ok(part) => {
            let v = covariance(&[&part], kind)?;
            let errors = (0..part.k).map(|i| v.at(i, i).max(0.0).sqrt()).collect();
            (part.coefficients, errors)
        }
        // A dummy that is zero throughout the window, say.
        Err(EstimateError::Collinear { .. }) => (vec![f64::NAN; fit.k], vec![f64::NAN; fit.k]),
        Err(error) => return Err(error),
    };
    let t = t_upper((1.0 - level) / 2.0, as_f64(to - from - fit.k));
    let band = |sign: f64| -> Vec<f64> {
        coefficients
            .iter()
            .zip(&std_errors)
            .map(|(b, s)| b + sign * t * s)
            .collect()
    };
    Ok(Window {
        from,
        to,
        low: band(-1.0),
        high: band(1.0),
        coefficients,
        std_errors,
    })
}

/// The equation fitted on observations `from` to `to − 1`.
pub(super) fn part(fit: &Ols, from: usize, to: usize) -> Result<Ols, EstimateError> {
    let cut = |r: &Regressor| Regressor::new(&r.name, r.values[from..to].to_vec());
    let y = fit.dependent();
    Ols::fit(&y[from..to], fit.regressors.iter().map(cut).collect())
}

#[cfg(test)]
mod tests {
    use super::*;

    /// 1.3581 is the published 5 % point (Smirnov 1948); the two series meet at 1.
    #[test]
    fn kolmogorov_distribution() {
        assert!((kolmogorov_sf(1.358_1) - 0.05).abs() < 1e-5);
        assert!((kolmogorov_sf(1.0 - 1e-12) - kolmogorov_sf(1.0)).abs() < 1e-10);
        assert!((kolmogorov_sf(0.3) - 0.999_990_6).abs() < 1e-6);
    }
}
