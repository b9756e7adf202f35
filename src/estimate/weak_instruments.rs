//! Strength of instruments, and inference that does not need it; one endogenous regressor.

use super::instrumental::join;
use super::ols::{as_f64, dot};
use super::{
    CovarianceKind, EstimateError, InstrumentedEquation, Ols, Region, Regressor, covariance,
};
use crate::dist::{f_upper, noncentral_chi2_upper};
use crate::linalg::Matrix;

/// The effective F statistic of Montiel Olea & Pflueger (2013).
#[derive(Clone, Debug, PartialEq)]
pub struct EffectiveF {
    /// `π' Q π / tr(V Q)`.
    pub statistic: f64,
    /// Above it, the bias of 2SLS beyond 10 % of the worst case is rejected at 5 %.
    pub critical_10: f64,
    /// The same for 30 %.
    pub critical_30: f64,
    /// One plain sentence.
    pub sentence: String,
}

/// Effective F of the instruments of the one endogenous regressor (Montiel Olea & Pflueger 2013, Journal of
/// Business & Economic Statistics 31(3), section 4, simplified critical values).
///
/// π and V: first-stage coefficients of the outside instruments and their covariance of the given kind
/// (HC1 where heteroskedasticity is all, a kernel for autocorrelation); Q: their cross products with the
/// exogenous regressors partialled out. Classical V gives the first-stage F. Critical value at τ, x = 1/τ:
/// the 95 % point of noncentral χ² with
/// `K = tr(W)² (1 + 2x) / (tr(W'W) + 2x tr(W) λ_max(W))` and noncentrality `K x`, over K, `W = Q^½ V
/// Q^½`. For one instrument it is 23.1 at τ = 10 %, as printed there.
///
/// # Errors
/// [`EstimateError::Setting`] unless there is one endogenous regressor; else as [`Ols::fit`].
pub fn effective_f(
    equation: &InstrumentedEquation,
    kind: CovarianceKind,
) -> Result<EffectiveF, EstimateError> {
    let endogenous = the_one(equation)?;
    let z = join(&equation.exogenous, &equation.instruments);
    let first = Ols::fit(&endogenous.values, z)?;
    let v = covariance(&[&first], kind)?;
    let (own, count) = (equation.exogenous.len(), equation.instruments.len());
    let block = |m: &Matrix| Matrix::from_fn(count, count, |i, j| m.at(own + i, own + j));
    let singular = || EstimateError::SingularCovariance {
        what: format!("the instruments of {}", endogenous.name),
    };
    let q = block(&first.inverse_gram)
        .inverse_positive_definite()
        .ok_or_else(singular)?;
    let root = q.cholesky().ok_or_else(singular)?;
    let w = root.transposed().times(&block(&v)).times(&root);
    let values = w.symmetric_eigenvalues();
    let trace: f64 = values.iter().sum();
    let pi = Matrix::from_fn(count, 1, |i, _| first.coefficients[own + i]);
    let statistic = pi.transposed().times(&q).times(&pi).at(0, 0) / trace;
    let critical = |x: f64| {
        let top = values.last().copied().unwrap_or(f64::NAN);
        let k = trace * trace * (1.0 + 2.0 * x) / (dot(&values, &values) + 2.0 * x * trace * top);
        noncentral_chi2_upper(0.05, k, k * x) / k
    };
    let (critical_10, critical_30) = (critical(10.0), critical(10.0 / 3.0));
    let sentence = if statistic > critical_10 {
        "Weak instruments, with a bias above 10 % of the worst case, are rejected at the 5 % level."
    } else if statistic > critical_30 {
        "Weak instruments are rejected at the 5 % level for a bias of 30 % of the worst case, not of 10 %."
    } else {
        "Weak instruments are not rejected: read the Anderson–Rubin set instead of the standard error."
    };
    Ok(EffectiveF {
        statistic,
        critical_10,
        critical_30,
        sentence: sentence.to_owned(),
    })
}

/// The set of `b` that Anderson & Rubin's (1949) test does not reject at `level` (0.95).
///
/// It holds whatever the strength of the instruments: F(instruments, n − exogenous − instruments) of the instruments in the
/// regression of `y − b Y` on all exogenous variables, homoskedastic errors. Solved as a quadratic
/// inequality, so it may be unbounded; none where it is empty: the overidentifying restrictions themselves
/// are rejected.
///
/// # Errors
/// [`EstimateError::Setting`] unless there is one endogenous regressor; else as [`Ols::fit`].
pub fn anderson_rubin(
    equation: &InstrumentedEquation,
    level: f64,
) -> Result<Option<Region>, EstimateError> {
    let endogenous = the_one(equation)?;
    let z = join(&equation.exogenous, &equation.instruments);
    let pair = |regressors: &[Regressor]| -> Result<[Vec<f64>; 2], EstimateError> {
        if regressors.is_empty() {
            return Ok([equation.y.clone(), endogenous.values.clone()]);
        }
        let residuals = |v: &[f64]| Ok(Ols::fit(v, regressors.to_vec())?.residuals);
        Ok([residuals(&equation.y)?, residuals(&endogenous.values)?])
    };
    let (partial, error) = (pair(&equation.exogenous)?, pair(&z)?);
    let count = as_f64(equation.instruments.len());
    let df = as_f64(equation.y.len() - z.len());
    let ratio = 1.0 + f_upper(1.0 - level, count, df) * count / df;
    let form =
        |i: usize, j: usize| dot(&partial[i], &partial[j]) - ratio * dot(&error[i], &error[j]);
    let (a, h, c) = (form(1, 1), form(0, 1), form(0, 0));
    Ok(Region::where_not_positive(a, h, c))
}

fn the_one(equation: &InstrumentedEquation) -> Result<&Regressor, EstimateError> {
    if equation.instruments.is_empty() {
        return Err(EstimateError::Underidentified {
            instruments: 0,
            endogenous: equation.endogenous.iter().map(|r| r.name.clone()).collect(),
        });
    }
    match equation.endogenous.as_slice() {
        [one] => Ok(one),
        _ => Err(EstimateError::Setting {
            setting: "the number of endogenous regressors of a weak-instrument test",
            allowed: "one",
        }),
    }
}
