//! Durbin and Watson's test: exact p-value, and the bounds that hold for any regressors.

use std::f64::consts::PI;

use super::ols::{as_f64, is_constant};
use super::{EstimateError, Ols};
use crate::dist::chi2_upper;
use crate::linalg::Matrix;

/// Durbin and Watson's test of no first-order autocorrelation.
#[derive(Clone, Debug)]
pub struct DurbinWatson {
    /// `d = Σ (e_t − e_{t−1})² / Σ e_t²`, between 0 and 4.
    pub statistic: f64,
    /// Exact `P(D < d)` for these regressors and normal errors: small against positive autocorrelation.
    pub p_positive: f64,
    /// Its complement `P(D > d)`: small against negative autocorrelation.
    pub p_negative: f64,
    /// Bounds at 5 % against positive autocorrelation; none without a constant.
    pub bounds: Option<DurbinWatsonBounds>,
    /// One plain sentence by the bounds, or by the exact p-value where they do not decide.
    pub sentence: String,
}

/// Bounds between which the critical value lies whatever the regressors beside a constant.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct DurbinWatsonBounds {
    /// Below it, no autocorrelation is rejected.
    pub lower: f64,
    /// Above it, it is not.
    pub upper: f64,
}

/// Durbin & Watson (1950, 1951) on the residuals of an equation.
///
/// Under the null d is a ratio of quadratic forms in normal errors whose weights are the n − k
/// eigenvalues of `M A M` that M leaves (M the residual maker, A the matrix of squared differences);
/// its distribution comes from the characteristic function (Davies 1980) with all digits of a double,
/// absolute. Reference: 0.745003 and p = 7.07336e-9 on Danish money demand (a second program, by the
/// algorithm of Pan 1968).
///
/// # Errors
/// [`EstimateError::Setting`] with a lagged dependent variable, which biases d towards 2;
/// [`EstimateError::TooFewObservations`] below 6 degrees of freedom, where the sum over the characteristic
/// function does not settle; [`EstimateError::NotFinite`] where the residuals are beyond the range of numbers.
pub fn durbin_watson(fit: &Ols, lagged_dependent: bool) -> Result<DurbinWatson, EstimateError> {
    if lagged_dependent {
        return Err(EstimateError::Setting {
            setting: "the equation of a Durbin–Watson test",
            allowed: "without lagged dependent variables; use the Breusch–Godfrey test",
        });
    }
    if fit.df < 6 {
        return Err(EstimateError::TooFewObservations {
            observations: fit.n,
            coefficients: fit.k,
        });
    }
    if !fit.durbin_watson.is_finite() {
        return Err(EstimateError::NotFinite);
    }
    let weights = eigenvalues(fit);
    let d = fit.durbin_watson;
    let shifted = |sign: f64| weights.iter().map(|w| sign * (w - d)).collect::<Vec<_>>();
    let p_positive = below_zero(&shifted(1.0), 1e-16);
    let has_constant = fit.regressors.iter().any(|r| is_constant(&r.values));
    let bounds = has_constant.then(|| durbin_watson_bounds(fit.n, fit.k - 1, 0.05));
    let null = "No first-order autocorrelation, against positive autocorrelation,";
    let sentence = match bounds {
        Some(b) if d < b.lower => {
            format!(
                "{null} is rejected at the 5 % level (below the lower bound {:.3}).",
                b.lower
            )
        }
        Some(b) if d > b.upper => {
            format!(
                "{null} is not rejected at the 5 % level (above the upper bound {:.3}).",
                b.upper
            )
        }
        _ => {
            let verdict = if p_positive < 0.05 {
                "is rejected"
            } else {
                "is not rejected"
            };
            format!(
                "{null} {verdict} at the 5 % level (p = {p_positive:.4}; bounds do not decide)."
            )
        }
    };
    Ok(DurbinWatson {
        statistic: d,
        p_positive,
        p_negative: below_zero(&shifted(-1.0), 1e-16),
        bounds,
        sentence,
    })
}

/// Bounds at level `alpha` for n observations, a constant and k further regressors.
///
/// The same quantile with the n − k − 1 smallest, and with the largest, of `2 (1 − cos(πi/n))`, i = 1 … n − 1 (Durbin & Watson
/// 1950, theorem 3). To 1e-9. Reference: fixtures/reference/durbin-watson-computed.csv, met to its four
/// digits.
#[must_use]
pub fn durbin_watson_bounds(n: usize, k: usize, alpha: f64) -> DurbinWatsonBounds {
    let values: Vec<f64> = (1..n)
        .map(|i| 2.0 * (1.0 - (PI * as_f64(i) / as_f64(n)).cos()))
        .collect();
    let kept = values.len().saturating_sub(k);
    let quantile = |values: &[f64]| {
        let (mut low, mut high) = (0.0, 4.0);
        while high - low > 1e-9 {
            let middle = f64::midpoint(low, high);
            let shifted: Vec<f64> = values.iter().map(|v| v - middle).collect();
            if below_zero(&shifted, 1e-10) < alpha {
                low = middle;
            } else {
                high = middle;
            }
        }
        f64::midpoint(low, high)
    };
    DurbinWatsonBounds {
        lower: quantile(&values[..kept]),
        upper: quantile(&values[values.len() - kept..]),
    }
}

/// The n − k eigenvalues of `M A M` that are not zero by construction.
fn eigenvalues(fit: &Ols) -> Vec<f64> {
    let n = fit.n;
    let x = Matrix::from_fn(n, fit.k, |i, j| fit.regressors[j].values[i]);
    let hat = x.times(&fit.inverse_gram).times(&x.transposed());
    let m = Matrix::from_fn(n, n, |i, j| f64::from(u8::from(i == j)) - hat.at(i, j));
    let a = Matrix::from_fn(n, n, |i, j| match i.abs_diff(j) {
        0 if i == 0 || i == n - 1 => 1.0,
        0 => 2.0,
        1 => -1.0,
        _ => 0.0,
    });
    m.times(&a).times(&m).symmetric_eigenvalues()[fit.k..].to_vec()
}

/// `P(Σ w_j z_j² < 0)`, z independent standard normal, by Davies' (1980) sum
/// `1/2 − Σ_k Im φ((k + ½)Δ) / (π(k + ½))`. Δ makes the aliasing error smaller than `accuracy`; the sum
/// ends where what is left is.
fn below_zero(weights: &[f64], accuracy: f64) -> f64 {
    let largest = weights.iter().fold(0.0_f64, |m, w| m.max(w.abs()));
    let reach = largest * chi2_upper(accuracy, as_f64(weights.len()));
    let step = 2.0 * PI / reach;
    let mut sum = 0.0;
    for k in 0..2_000_000_u32 {
        let place = f64::from(k) + 0.5;
        let u = place * step;
        let (mut angle, mut log_size) = (0.0, 0.0);
        for w in weights {
            let z = 2.0 * u * w;
            angle += z.atan();
            log_size += (z * z).ln_1p();
        }
        let size = (-log_size / 4.0).exp() / (PI * place);
        sum += (angle / 2.0).sin() * size;
        // The tail is at most this by 2/m, m the number of weights.
        if size * place < accuracy {
            break;
        }
    }
    (0.5 - sum).clamp(0.0, 1.0)
}

#[cfg(test)]
mod tests {
    use approx::assert_relative_eq;

    use super::*;
    use crate::dist::f_sf;

    /// `z_1² + z_2² < c (z_3² + z_4² + z_5²)` is an F event.
    #[test]
    fn quadratic_forms_agree_with_the_f_distribution() {
        for c in [0.05, 0.4, 1.0, 3.0] {
            let found = below_zero(&[1.0, 1.0, -c, -c, -c], 1e-10);
            assert_relative_eq!(found, 1.0 - f_sf(c * 1.5, 2.0, 3.0), max_relative = 1e-7);
        }
    }

    /// Against bounds computed by another program's algorithm, to the four digits that they have.
    #[test]
    fn bounds_meet_the_table() {
        let text = include_str!("../../fixtures/reference/durbin-watson-computed.csv");
        for line in text.lines().skip(1).step_by(19) {
            let row: Vec<f64> = line.split(',').map(|c| c.parse().unwrap()).collect();
            let count = |v: f64| (0..1000).find(|i| as_f64(*i) >= v).unwrap();
            let found = durbin_watson_bounds(count(row[0]), count(row[1]), row[2]);
            assert!((found.lower - row[3]).abs() < 6e-5, "{line} {found:?}");
            assert!((found.upper - row[4]).abs() < 6e-5, "{line} {found:?}");
        }
    }
}
