//! Instability of a cointegrating regression (Hansen 1992).

use super::breaks::share;
use super::ols::{as_f64, columns, dot};
use super::outcome::{Distribution, TestResult};
use super::{Deterministic, EstimateError, Ols, Regressor};
use crate::linalg::Matrix;
use crate::random::Draws;

/// What the tests read of a fully modified regression.
#[derive(Clone, Debug)]
pub struct CointegratingScores {
    /// The k regressors, deterministic ones first; n values each.
    pub regressors: Vec<Regressor>,
    /// Scores `s_t = x_t u⁺_t − (0, λ⁺)'`, one series of n values a regressor. Each sums to zero at the
    /// fully modified estimate, and with strictly exogenous regressors they are those of least squares.
    pub scores: Vec<Vec<f64>>,
    /// Long-run variance of the errors conditional on the innovations of the regressors, `ω₁·₂`.
    pub omega: f64,
}

/// The three statistics.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Instability {
    /// `L_c = tr(M⁻¹ Σ S_t S_t') / (n ω)`: against random-walk coefficients; also a test of
    /// cointegration as the null.
    pub lc: f64,
    /// Mean of `F_t = S_t' (M_t − M_t M⁻¹ M_t)⁻¹ S_t / ω` over the middle 70 % of dates: against
    /// gradual change.
    pub mean_f: f64,
    /// Largest `F_t`: against a swift change at an unknown date.
    pub sup_f: f64,
}

/// Statistics with p-values.
#[derive(Clone, Debug)]
pub struct InstabilityTest {
    /// `L_c`.
    pub lc: TestResult,
    /// `MeanF`.
    pub mean_f: TestResult,
    /// `SupF`.
    pub sup_f: TestResult,
}

/// The statistics of Hansen 1992 (Journal of Business & Economic Statistics 10(3)).
///
/// With `S_t = Σ_{j≤t} s_j`, `M_t = Σ_{j≤t} x_j x_j'`, dates from `⌈0.15 n⌉` to `⌊0.85 n⌋`. Reference: plain
/// numpy on Danish money demand with least-squares scores, `estimation.json`.
///
/// # Errors
/// [`EstimateError::Setting`] where `omega` is not positive or lengths differ;
/// [`EstimateError::SingularCovariance`] where early observations do not determine the coefficients.
pub fn instability(input: &CointegratingScores) -> Result<Instability, EstimateError> {
    let (n, k) = (
        input.scores.first().map_or(0, Vec::len),
        input.regressors.len(),
    );
    let x = columns(&input.regressors);
    let aligned = input.scores.len() == k && x.iter().chain(&input.scores).all(|c| c.len() == n);
    if !aligned || n == 0 || !(input.omega.is_finite() && input.omega > 0.0) {
        return Err(EstimateError::Setting {
            setting: "the scores of a cointegrating regression",
            allowed: "one series a regressor, of its length, with a positive long-run variance",
        });
    }
    let singular = || EstimateError::SingularCovariance {
        what: input
            .regressors
            .iter()
            .map(|r| r.name.clone())
            .collect::<Vec<_>>()
            .join(", "),
    };
    let gram = |t: usize| Matrix::from_fn(k, k, |i, j| dot(&x[i][..t], &x[j][..t]));
    let whole = gram(n);
    let inverse = whole.inverse_positive_definite().ok_or_else(singular)?;
    let quadratic = |m: &Matrix, s: &[f64]| -> f64 {
        (0..k)
            .map(|i| s[i] * (0..k).map(|j| m.at(i, j) * s[j]).sum::<f64>())
            .sum()
    };
    let count = as_f64(n);
    let mut sum = vec![0.0; k];
    let (mut lc, mut f) = (0.0, Vec::new());
    for t in 1..=n {
        sum.iter_mut()
            .zip(&input.scores)
            .for_each(|(s, score)| *s += score[t - 1]);
        lc += quadratic(&inverse, &sum);
        let date = as_f64(t);
        if date >= (0.15 * count).ceil() && date <= (0.85 * count).floor() {
            let part = gram(t);
            let taken = part.times(&inverse).times(&part);
            let v = Matrix::from_fn(k, k, |i, j| part.at(i, j) - taken.at(i, j));
            let v = v.inverse_positive_definite().ok_or_else(singular)?;
            f.push(quadratic(&v, &sum) / input.omega);
        }
    }
    Ok(Instability {
        lc: lc / count / input.omega,
        mean_f: f.iter().sum::<f64>() / as_f64(f.len()),
        sup_f: f.iter().fold(0.0_f64, |m, v| m.max(*v)),
    })
}

/// One draw of the statistics under the null.
///
/// Least squares of white noise on the deterministic part and `integrated` independent random walks, n
/// observations, error variance known. Replication i draws from
/// stream i, whatever the thread.
///
/// # Errors
/// [`EstimateError::TooShort`] where n is below 20 or 5 a coefficient.
pub fn instability_null(
    n: usize,
    deterministic: Deterministic,
    integrated: usize,
    seed: u64,
    replication: u64,
) -> Result<Instability, EstimateError> {
    let mut regressors = deterministic.columns(n);
    let k = regressors.len() + integrated;
    if n < 20.max(5 * k) {
        return Err(EstimateError::TooShort {
            what: "the simulation of a cointegrating regression".to_owned(),
            needed: 20.max(5 * k),
            found: n,
        });
    }
    let mut draws = Draws::new(seed, replication);
    for i in 0..integrated {
        let mut level = 0.0;
        let walk = (0..n).map(|_| {
            level += draws.normal();
            level
        });
        regressors.push(Regressor::new(&format!("walk {}", i + 1), walk.collect()));
    }
    let y: Vec<f64> = (0..n).map(|_| draws.normal()).collect();
    let fit = Ols::fit(&y, regressors)?;
    let scores = fit
        .regressors
        .iter()
        .map(|r| {
            r.values
                .iter()
                .zip(&fit.residuals)
                .map(|(x, e)| x * e)
                .collect()
        })
        .collect();
    instability(&CointegratingScores {
        regressors: fit.regressors,
        scores,
        omega: 1.0,
    })
}

/// The statistics with p-values from draws of [`instability_null`] for the same size, deterministic
/// part and number of integrated regressors.
///
/// # Errors
/// As [`instability`].
pub fn hansen_1992(
    input: &CointegratingScores,
    null: &[Instability],
) -> Result<InstabilityTest, EstimateError> {
    let found = instability(input)?;
    let outcome = |name: &str, pick: fn(&Instability) -> f64| {
        let draws: Vec<f64> = null.iter().map(pick).collect();
        let source = Distribution::Other {
            name: "simulated at the sample's size",
        };
        let claim = "Cointegration with constant coefficients";
        TestResult::with_p(
            name,
            claim,
            pick(&found),
            source,
            share(&draws, pick(&found)),
        )
    };
    Ok(InstabilityTest {
        lc: outcome("Hansen Lc", |i| i.lc),
        mean_f: outcome("Hansen MeanF", |i| i.mean_f),
        sup_f: outcome("Hansen SupF", |i| i.sup_f),
    })
}
