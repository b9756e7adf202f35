//! Covariance of coefficients, within one equation and across equations.

use super::kernel::{Kernel, long_run};
use super::ols::{as_f64, dot};
use super::{EstimateError, Ols};
use crate::linalg::Matrix;

/// How the covariance of coefficients is estimated.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum CovarianceKind {
    /// Independent errors of one variance (and one contemporaneous covariance across equations).
    Classical,
    /// Robust to heteroskedasticity.
    Robust(Hc),
    /// Newey & West (1987): robust to heteroskedasticity and to autocorrelation up to `lags`, with
    /// Bartlett weights `1 − j/(lags + 1)`; no prewhitening.
    NeweyWest {
        /// Number of lags; 0 is robust to heteroskedasticity alone.
        lags: usize,
        /// Whether to multiply by `n/(n − k)`, as the classical variance does.
        small_sample: bool,
    },
    /// The same with weights `k(j / bandwidth)` of any kernel.
    Kernel {
        /// The kernel.
        kernel: Kernel,
        /// Bandwidth; Bartlett weights with L lags are those at L + 1.
        bandwidth: f64,
        /// Whether to multiply by `n/(n − k)`.
        small_sample: bool,
    },
}

/// Weight of squared residuals in a covariance robust to heteroskedasticity (`MacKinnon` & White 1985).
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Hc {
    /// `e²` (White 1980).
    Hc0,
    /// `e² n/(n − k)`.
    Hc1,
    /// `e²/(1 − h)`, h the leverage.
    Hc2,
    /// `e²/(1 − h)²`.
    Hc3,
}

/// Joint covariance of the stacked coefficients of equations estimated one by one on one sample.
///
/// The block of equations i and j is `A_i⁻¹ Ω_ij A_j⁻¹` with `A_i = X_i'X_i`:
/// classical `Ω_ij = σ_ij X_i'X_j`, `σ_ij = e_i'e_j / √((n − k_i)(n − k_j))`;
/// Newey–West `Ω_ij = Γ_0 + Σ_j w_j (Γ_j + Γ_j')` of the stacked scores `x_t e_t`, with the factor
/// `n / √((n − k_i)(n − k_j))` on request; robust `Ω_ij = Γ_0` of scores weighted as [`Hc`] says, each
/// equation by its own leverage. The result is symmetric and positive semi-definite; its
/// diagonal blocks are the equations' own covariances.
///
/// # Errors
/// [`EstimateError::SampleDiffers`], [`EstimateError::TooManyLags`], and [`EstimateError::Setting`] for a
/// bandwidth that is none.
pub fn covariance(equations: &[&Ols], kind: CovarianceKind) -> Result<Matrix, EstimateError> {
    let n = equations.first().map_or(0, |e| e.n);
    if let Some(other) = equations.iter().find(|e| e.n != n) {
        return Err(EstimateError::SampleDiffers {
            first: n,
            second: other.n,
        });
    }
    // Equation and place within it of each stacked coefficient.
    let places: Vec<(usize, usize)> = (0..equations.len())
        .flat_map(|e| (0..equations[e].k).map(move |j| (e, j)))
        .collect();
    let k = places.len();
    let middle = match kind {
        CovarianceKind::Classical => Matrix::from_fn(k, k, |r, c| {
            let ((i, a), (j, b)) = (places[r], places[c]);
            let (first, second) = (equations[i], equations[j]);
            let sigma = dot(&first.residuals, &second.residuals) / mean_df(first, second);
            sigma * dot(&first.regressors[a].values, &second.regressors[b].values)
        }),
        CovarianceKind::Robust(hc) => {
            let scores = scores(equations, &places, |fit| weighted_residuals(fit, hc));
            let factor = |a, b| small_sample_factor(hc == Hc::Hc1, a, b);
            Matrix::from_fn(k, k, |r, c| {
                factor(equations[places[r].0], equations[places[c].0]) * dot(&scores[r], &scores[c])
            })
        }
        CovarianceKind::NeweyWest { lags, .. } if lags >= n => {
            return Err(EstimateError::TooManyLags {
                lags,
                observations: n,
            });
        }
        CovarianceKind::NeweyWest { lags, small_sample } => {
            let scores = scores(equations, &places, |fit| fit.residuals.clone());
            Matrix::from_fn(k, k, |r, c| {
                let (first, second) = (equations[places[r].0], equations[places[c].0]);
                let sum = long_run(&scores[r], &scores[c], Kernel::Bartlett, as_f64(lags + 1));
                small_sample_factor(small_sample, first, second) * sum
            })
        }
        CovarianceKind::Kernel { bandwidth, .. } if !(0.0..1e6).contains(&bandwidth) => {
            return Err(EstimateError::Setting {
                setting: "bandwidth",
                allowed: "a number of at least 0 and below a million",
            });
        }
        CovarianceKind::Kernel {
            kernel,
            bandwidth,
            small_sample,
        } => {
            let scores = scores(equations, &places, |fit| fit.residuals.clone());
            Matrix::from_fn(k, k, |r, c| {
                let (first, second) = (equations[places[r].0], equations[places[c].0]);
                let sum = long_run(&scores[r], &scores[c], kernel, bandwidth);
                small_sample_factor(small_sample, first, second) * sum
            })
        }
    };
    let bread = Matrix::from_fn(k, k, |r, c| {
        let ((i, a), (j, b)) = (places[r], places[c]);
        if i == j {
            equations[i].inverse_gram.at(a, b)
        } else {
            0.0
        }
    });
    let product = bread.times(&middle).times(&bread);
    // Products are symmetric up to rounding; the average is symmetric to the last digit.
    Ok(Matrix::from_fn(k, k, |r, c| {
        f64::midpoint(product.at(r, c), product.at(c, r))
    }))
}

/// Geometric mean of two equations' degrees of freedom; exactly `n − k` for an equation with itself.
fn mean_df(first: &Ols, second: &Ols) -> f64 {
    if first.df == second.df {
        as_f64(first.df)
    } else {
        (as_f64(first.df) * as_f64(second.df)).sqrt()
    }
}

/// `n / mean_df` on request, else 1.
fn small_sample_factor(wanted: bool, first: &Ols, second: &Ols) -> f64 {
    if wanted {
        as_f64(first.n) / mean_df(first, second)
    } else {
        1.0
    }
}

/// The products `x_t u_t` of each stacked coefficient, u made from each equation's residuals.
fn scores(
    equations: &[&Ols],
    places: &[(usize, usize)],
    residuals: impl Fn(&Ols) -> Vec<f64>,
) -> Vec<Vec<f64>> {
    let residuals: Vec<Vec<f64>> = equations.iter().map(|fit| residuals(fit)).collect();
    let score = |&(e, j): &(usize, usize)| {
        let x = &equations[e].regressors[j].values;
        x.iter().zip(&residuals[e]).map(|(x, e)| x * e).collect()
    };
    places.iter().map(score).collect()
}

fn weighted_residuals(fit: &Ols, hc: Hc) -> Vec<f64> {
    let by = |weight: fn(f64) -> f64| {
        let pairs = fit.residuals.iter().zip(fit.leverages());
        pairs.map(|(e, h)| e * weight(1.0 - h)).collect()
    };
    match hc {
        Hc::Hc0 | Hc::Hc1 => fit.residuals.clone(),
        Hc::Hc2 => by(|rest| rest.sqrt().recip()),
        Hc::Hc3 => by(f64::recip),
    }
}

#[cfg(test)]
mod tests {
    use approx::assert_relative_eq;

    use super::*;
    use crate::estimate::Regressor;

    fn equation(seed: u64, n: usize, extra: bool) -> Ols {
        let mut state = seed;
        let mut draw = || {
            state = state
                .wrapping_mul(6_364_136_223_846_793_005)
                .wrapping_add(1_442_695_040_888_963_407);
            f64::from(u32::try_from(state >> 40).unwrap()) / f64::from(1_u32 << 24) - 0.5
        };
        let y: Vec<f64> = (0..n).map(|_| draw()).collect();
        let mut regressors = vec![Regressor::constant(n)];
        regressors.push(Regressor::new("a", (0..n).map(|_| draw()).collect()));
        if extra {
            regressors.push(Regressor::new("b", (0..n).map(|_| draw()).collect()));
        }
        Ols::fit(&y, regressors).unwrap()
    }

    #[test]
    fn joint_blocks_are_the_own_covariances_and_transpose_each_other() {
        let (first, second) = (equation(1, 30, false), equation(2, 30, true));
        for kind in [
            CovarianceKind::Classical,
            CovarianceKind::NeweyWest {
                lags: 3,
                small_sample: true,
            },
        ] {
            let joint = covariance(&[&first, &second], kind).unwrap();
            let swapped = covariance(&[&second, &first], kind).unwrap();
            let own = covariance(&[&second], kind).unwrap();
            for (r, c) in [(0, 0), (1, 2), (2, 2)] {
                assert_relative_eq!(joint.at(2 + r, 2 + c), own.at(r, c), max_relative = 1e-12);
            }
            assert_relative_eq!(joint.at(0, 4), swapped.at(2, 3), max_relative = 1e-9);
            assert_relative_eq!(joint.at(1, 3), swapped.at(1, 4), max_relative = 1e-9);
            assert!(joint.at(0, 3).abs() > 0.0);
        }
    }

    /// An equation stacked on itself: every block is its own covariance.
    #[test]
    fn an_equation_covaries_fully_with_itself() {
        let first = equation(3, 25, true);
        for lags in [0, 4] {
            let kind = CovarianceKind::NeweyWest {
                lags,
                small_sample: false,
            };
            let joint = covariance(&[&first, &first], kind).unwrap();
            assert_relative_eq!(joint.at(1, 4), joint.at(1, 1), max_relative = 1e-12);
            assert_relative_eq!(joint.at(4, 2), joint.at(1, 2), max_relative = 1e-9);
        }
    }

    #[test]
    fn refuses_unequal_samples_and_too_many_lags() {
        let (first, second) = (equation(1, 30, false), equation(2, 29, true));
        assert!(covariance(&[&first, &second], CovarianceKind::Classical).is_err());
        let kind = CovarianceKind::NeweyWest {
            lags: 30,
            small_sample: false,
        };
        assert!(covariance(&[&first], kind).is_err());
        let kind = CovarianceKind::Kernel {
            kernel: Kernel::Parzen,
            bandwidth: f64::NAN,
            small_sample: false,
        };
        assert!(covariance(&[&first], kind).is_err());
    }
}
