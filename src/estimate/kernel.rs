//! Long-run covariance: kernels and bandwidths.

use std::f64::consts::PI;

use super::ols::{as_f64, dot, is_constant};
use super::{EstimateError, Ols};

/// Weights of autocovariances, `k(x)` at `x = lag / bandwidth`.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Kernel {
    /// `1 − x` below 1 (Newey & West 1987).
    Bartlett,
    /// `1 − 6x² + 6x³` up to 1/2, `2 (1 − x)³` up to 1 (Gallant 1987).
    Parzen,
    /// `3/z² (sin z / z − cos z)`, `z = 6πx/5`; never cut off (Andrews 1991, equation 2.7).
    QuadraticSpectral,
}

impl Kernel {
    /// The weight `k(x)`, x not negative.
    #[must_use]
    pub fn weight(self, x: f64) -> f64 {
        match self {
            Self::Bartlett => (1.0 - x).max(0.0),
            Self::Parzen if x <= 0.5 => 1.0 - 6.0 * x * x * (1.0 - x),
            Self::Parzen => 2.0 * (1.0 - x).max(0.0).powi(3),
            Self::QuadraticSpectral => {
                let z = 1.2 * PI * x;
                if z < 1e-3 {
                    // Series, where the closed form cancels.
                    1.0 - z * z / 10.0
                } else {
                    3.0 / (z * z) * (z.sin() / z - z.cos())
                }
            }
        }
    }

    /// Characteristic exponent q of the kernel and the constant of its optimal bandwidth (Andrews
    /// 1991, equation 5.2).
    fn exponent(self) -> (i32, f64) {
        match self {
            Self::Bartlett => (1, 1.1447),
            Self::Parzen => (2, 2.6614),
            Self::QuadraticSpectral => (2, 1.3221),
        }
    }
}

/// How a bandwidth is chosen. Fixed ones need no rule: they are numbers.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum BandwidthRule {
    /// [`rule_of_thumb_lags`] plus one.
    RuleOfThumb,
    /// Newey & West (1994): nonparametric plug-in.
    NeweyWest1994,
    /// Andrews (1991, section 6): plug-in from AR(1) models of the scores.
    Andrews1991,
}

/// Rule of thumb `⌊4 (n/100)^(2/9)⌋` for the number of lags (Newey & West 1994).
#[must_use]
pub fn rule_of_thumb_lags(n: usize) -> usize {
    pilot_lags(n, 2.0 / 9.0)
}

/// `⌊4 (n/100)^power⌋`.
fn pilot_lags(n: usize, power: f64) -> usize {
    let bound = 4.0 * (as_f64(n) / 100.0).powf(power);
    (0..n).take_while(|lags| as_f64(lags + 1) <= bound).count()
}

/// Bandwidth for the scores `x_t e_t` of an equation, without prewhitening.
///
/// With `σ_j = n⁻¹ Σ_t h_t h_{t−j}`, h the sum of the scores of all regressors but the constant:
/// * Newey & West (1994, section 3): `s_q = 2 Σ_{j≤m} j^q σ_j`, `s_0 = σ_0 + 2 Σ_{j≤m} σ_j`,
///   `m = ⌊4 (n/100)^a⌋`, a = 2/9, 4/25, 2/25; `γ = c ((s_q/s_0)²)^(1/(2q+1))`; then `⌊γ n^(1/(2q+1))⌋`
///   lags, so a bandwidth of one more, for Bartlett and Parzen, `γ n^(1/5)` for the quadratic spectral.
/// * Andrews (1991, equations 5.2, 6.4): `c (α(q) n)^(1/(2q+1))`, α from least squares of each score on its
///   own lag, unit weights on all regressors but the constant; a coefficient beyond ±0.97 counts as
///   ±0.97 (Andrews & Monahan 1992).
///
/// An equation with the constant alone uses the score of the constant.
///
/// # Errors
/// [`EstimateError::TooShort`] below 8 observations.
pub fn bandwidth(fit: &Ols, kernel: Kernel, rule: BandwidthRule) -> Result<f64, EstimateError> {
    if fit.n < 8 {
        return Err(EstimateError::TooShort {
            what: "an automatic bandwidth".to_owned(),
            needed: 8,
            found: fit.n,
        });
    }
    let varying: Vec<_> = fit
        .regressors
        .iter()
        .filter(|r| !is_constant(&r.values))
        .collect();
    let chosen = if varying.is_empty() {
        fit.regressors.iter().collect()
    } else {
        varying
    };
    let scores: Vec<Vec<f64>> = chosen
        .iter()
        .map(|r| {
            r.values
                .iter()
                .zip(&fit.residuals)
                .map(|(x, e)| x * e)
                .collect()
        })
        .collect();
    Ok(match rule {
        BandwidthRule::RuleOfThumb => as_f64(rule_of_thumb_lags(fit.n) + 1),
        BandwidthRule::NeweyWest1994 => {
            let sums: Vec<f64> = (0..fit.n)
                .map(|t| scores.iter().map(|s| s[t]).sum())
                .collect();
            newey_west_1994(&sums, kernel)
        }
        BandwidthRule::Andrews1991 => andrews_1991(&scores, kernel),
    })
}

/// The rule of Newey & West (1994) for one series of mean zero; see [`bandwidth`].
pub(super) fn newey_west_1994(series: &[f64], kernel: Kernel) -> f64 {
    let n = as_f64(series.len());
    let (q, c) = kernel.exponent();
    let power = match kernel {
        Kernel::Bartlett => 2.0 / 9.0,
        Kernel::Parzen => 4.0 / 25.0,
        Kernel::QuadraticSpectral => 2.0 / 25.0,
    };
    let (mut s0, mut sq) = (dot(series, series) / n, 0.0);
    for j in 1..=pilot_lags(series.len(), power) {
        let covariance = 2.0 * dot(&series[j..], series) / n;
        s0 += covariance;
        sq += as_f64(j).powi(q) * covariance;
    }
    let rate = 1.0 / f64::from(2 * q + 1);
    let optimal = c * (sq / s0).powi(2).powf(rate) * n.powf(rate);
    match kernel {
        Kernel::Bartlett | Kernel::Parzen => optimal.floor() + 1.0,
        Kernel::QuadraticSpectral => optimal,
    }
}

/// The rule of Andrews (1991) for series of mean zero; see [`bandwidth`].
pub(super) fn andrews_1991(series: &[Vec<f64>], kernel: Kernel) -> f64 {
    let n = as_f64(series.first().map_or(0, Vec::len));
    let (q, c) = kernel.exponent();
    let (mut numerator, mut denominator) = (0.0, 0.0);
    for s in series {
        let (lag, now) = (&s[..s.len() - 1], &s[1..]);
        let rho = (dot(now, lag) / dot(lag, lag)).clamp(-0.97, 0.97);
        let errors: f64 = now
            .iter()
            .zip(lag)
            .map(|(y, x)| (y - rho * x).powi(2))
            .sum();
        let size = 4.0 * rho * rho * (errors * errors);
        numerator += match q {
            1 => size / ((1.0 - rho).powi(6) * (1.0 + rho).powi(2)),
            _ => size / (1.0 - rho).powi(8),
        };
        denominator += errors * errors / (1.0 - rho).powi(4);
    }
    c * (numerator / denominator * n).powf(1.0 / f64::from(2 * q + 1))
}

/// `Σ_t u_t v_t + Σ_j k(j/S) Σ_t (u_t v_{t−j} + u_{t−j} v_t)`; sums, not means, not centred. A
/// bandwidth S of 0 leaves the first term alone.
pub(super) fn long_run(u: &[f64], v: &[f64], kernel: Kernel, bandwidth: f64) -> f64 {
    let mut sum = dot(u, v);
    if bandwidth > 0.0 {
        for j in 1..u.len() {
            let x = as_f64(j) / bandwidth;
            if x >= 1.0 && kernel != Kernel::QuadraticSpectral {
                break;
            }
            sum += kernel.weight(x) * (dot(&u[j..], v) + dot(u, &v[j..]));
        }
    }
    sum
}

#[cfg(test)]
mod tests {
    use approx::assert_relative_eq;

    use super::*;

    /// ⌊4 (n/100)^(2/9)⌋ by hand: 2.83 at 21, 3.53 at 57, 4 at 100, 4.67 at 200, 6.67 at 1000.
    #[test]
    fn rule_of_thumb() {
        for (n, lags) in [(21, 2), (57, 3), (100, 4), (200, 4), (1000, 6), (10, 2)] {
            assert_eq!(rule_of_thumb_lags(n), lags, "{n}");
        }
    }

    /// Every kernel is 1 at 0, continuous, and the quadratic spectral one meets its own series.
    #[test]
    fn kernels_join_their_pieces() {
        for kernel in [Kernel::Bartlett, Kernel::Parzen, Kernel::QuadraticSpectral] {
            assert_relative_eq!(kernel.weight(0.0), 1.0);
        }
        assert_relative_eq!(Kernel::Parzen.weight(0.5), 0.25);
        assert_relative_eq!(Kernel::Parzen.weight(0.5 + 1e-9), 0.25, max_relative = 1e-7);
        let x = 1e-3 / (1.2 * PI);
        let (below, above) = (x * (1.0 - 1e-9), x * (1.0 + 1e-9));
        let qs = |x| Kernel::QuadraticSpectral.weight(x);
        assert_relative_eq!(qs(below), qs(above), max_relative = 1e-9);
    }
}
