//! Estimation of an ARDL equation in error-correction form.

use super::super::ols::as_f64;
use super::super::series_error::{differences, regress};
use super::super::{Ols, SeriesError};
use super::{ArdlData, ArdlOrders, BoundsCase};
use crate::dist::t_two_sided;
use crate::linalg::Matrix;

/// A long-run coefficient with its standard error by the delta method.
#[derive(Clone, Debug, PartialEq)]
pub struct LongRunCoefficient {
    /// Name of the regressor, `const` or `trend`.
    pub name: String,
    /// `θ = −b/φ`.
    pub value: f64,
    /// Standard error.
    pub standard_error: f64,
    /// `θ / se`.
    pub t: f64,
    /// Two-sided p-value of t at the residual degrees of freedom.
    pub p_value: f64,
}

/// An ARDL equation estimated in error-correction form.
#[derive(Clone, Debug)]
pub struct Ardl {
    /// Orders.
    pub orders: ArdlOrders,
    /// Deterministic case.
    pub case: BoundsCase,
    /// Error-correction form `Δy_t = d_t'δ + φ y_{t−1} + Σ b_j x_{j,t−1} + Σ γ_i Δy_{t−i} + Σ ω_ji Δx_{j,t−i} + e_t`;
    /// a regressor of order 0 enters by its present level. Coefficients by name.
    pub ecm: Ols,
    /// Classical covariance of the coefficients of `ecm`.
    pub covariance: Matrix,
    /// Speed of adjustment φ.
    pub adjustment: f64,
    /// Its standard error.
    pub adjustment_error: f64,
    /// `ln ½ / ln(1 + φ)` periods; none outside −1 < φ < 0.
    pub half_life: Option<f64>,
    /// Long-run coefficients: deterministic terms of the equation, then regressors.
    pub long_run: Vec<LongRunCoefficient>,
    /// Their covariance, in that order.
    pub long_run_covariance: Matrix,
    /// Coefficients of the equation in levels: y lags 1 to p, then per regressor lags 0 to q.
    pub levels: Vec<f64>,
    /// Their covariance.
    pub levels_covariance: Matrix,
    /// Position of φ among the coefficients of `ecm`.
    pub(super) at: usize,
    /// Number of regressors.
    pub(super) regressors: usize,
}

impl Ardl {
    /// Estimates an ARDL equation by least squares on all rows that its orders leave.
    ///
    /// Long-run coefficients `θ_j = −b_j/φ` with covariance `G V G'`, `∂θ/∂b = −1/φ`, `∂θ/∂φ = b/φ²` (delta
    /// method); V classical, `ssr/(n − k)`. The equation in levels is a linear map of the error-correction
    /// form: `φ_1 = 1 + φ + γ_1`, `φ_i = γ_i − γ_{i−1}`, `β_0 = ω_0`, `β_1 = b + ω_1 − ω_0`, …. Missing values are
    /// an error.
    ///
    /// Pesaran & Shin 1999; Pesaran, Shin & Smith 2001, Journal of Applied Econometrics 16(3).
    /// Reference value: Danish money demand, ARDL(3, 1, 3, 2), constant: φ = −0.4168523989, θ of income
    /// 0.9964676357 (0.1239310022), statsmodels 0.15.0.
    ///
    /// # Errors
    /// [`SeriesError`]; orders need p ≥ 1 and one q a regressor.
    pub fn fit(
        data: &ArdlData<'_>,
        orders: ArdlOrders,
        case: BoundsCase,
    ) -> Result<Self, SeriesError> {
        data.check()?;
        if orders.p == 0 || orders.q.len() != data.x.len() {
            return Err(SeriesError::Option {
                method: "ARDL",
                fault: format!(
                    "orders are p of at least 1 and one q for each of {} regressors",
                    data.x.len()
                ),
            });
        }
        let (n, skip) = (data.y.values.len(), orders.longest());
        let terms = case.deterministic().terms();
        let k = terms + data.fixed.len() + orders.p + data.x.len() + orders.q.iter().sum::<usize>();
        if n < skip + k + 1 {
            return Err(SeriesError::TooShort {
                series: data.y.name.clone(),
                observations: n,
                needed: skip + k + 1,
            });
        }
        let columns = data.columns(case.deterministic(), &orders, skip);
        let change = differences(&data.y.values[skip - 1..]);
        let ecm = regress(&data.y.name, &change, columns)?;
        Ok(Self::from_ecm(ecm, data, orders, case))
    }

    fn from_ecm(ecm: Ols, data: &ArdlData<'_>, orders: ArdlOrders, case: BoundsCase) -> Self {
        let terms = case.deterministic().terms();
        let (at, regressors) = (terms + data.fixed.len(), data.x.len());
        let v = Matrix::from_fn(ecm.k, ecm.k, |i, j| ecm.s2 * ecm.inverse_gram.at(i, j));
        let phi = ecm.coefficients[at];
        // Long-run relation: deterministic terms and lagged regressor levels over −φ.
        let places: Vec<usize> = (0..terms).chain(at + 1..=at + regressors).collect();
        let gradient = Matrix::from_fn(places.len(), ecm.k, |i, j| {
            if j == at {
                ecm.coefficients[places[i]] / (phi * phi)
            } else if j == places[i] {
                -1.0 / phi
            } else {
                0.0
            }
        });
        let long_run_covariance = sandwich(&gradient, &v);
        let long_run = places
            .iter()
            .enumerate()
            .map(|(i, &place)| {
                let value = -ecm.coefficients[place] / phi;
                let standard_error = long_run_covariance.at(i, i).sqrt();
                let name = if place < terms {
                    ecm.regressors[place].name.clone()
                } else {
                    data.x[place - at - 1].name.clone()
                };
                LongRunCoefficient {
                    name,
                    value,
                    standard_error,
                    t: value / standard_error,
                    p_value: t_two_sided(value / standard_error, as_f64(ecm.df)),
                }
            })
            .collect();
        let map = levels_map(&orders, at, ecm.k);
        let levels = in_levels(&map, &ecm.coefficients);
        Self {
            levels_covariance: sandwich(&map, &v),
            levels,
            adjustment: phi,
            adjustment_error: v.at(at, at).sqrt(),
            half_life: (phi > -1.0 && phi < 0.0).then(|| 0.5_f64.ln() / (1.0 + phi).ln()),
            long_run,
            long_run_covariance,
            covariance: v,
            orders,
            case,
            ecm,
            at,
            regressors,
        }
    }

    /// Long-run coefficient of a regressor, `const` or `trend`, by name.
    #[must_use]
    pub fn long_run(&self, name: &str) -> Option<&LongRunCoefficient> {
        self.long_run.iter().find(|c| c.name == name)
    }
}

/// `G V G'`, made symmetric to the last digit.
fn sandwich(g: &Matrix, v: &Matrix) -> Matrix {
    let product = g.times(v).times(&g.transposed());
    Matrix::from_fn(g.rows(), g.rows(), |i, j| {
        f64::midpoint(product.at(i, j), product.at(j, i))
    })
}

/// Coefficients in levels of an equation whose error-correction form has these coefficients.
pub(super) fn in_levels(map: &Matrix, coefficients: &[f64]) -> Vec<f64> {
    let row = |i: usize| -> f64 {
        let products = coefficients.iter().enumerate();
        products.map(|(j, c)| map.at(i, j) * c).sum()
    };
    let mut levels: Vec<f64> = (0..map.rows()).map(row).collect();
    levels[0] += 1.0;
    levels
}

/// Rows: coefficients in levels; columns: coefficients of the error-correction form. The 1 that
/// belongs to the first lag of y is not in it.
pub(super) fn levels_map(orders: &ArdlOrders, at: usize, k: usize) -> Matrix {
    let count = orders.p + orders.q.iter().map(|q| q + 1).sum::<usize>();
    let mut rows = vec![vec![0.0; k]; count];
    let (mut row, mut change) = (0, at + 1 + orders.q.len());
    let mut block = |level: usize, first_level: usize, lags: usize, steps: usize| {
        // Lag i gains +γ_i and −γ_{i−1}; the level's coefficient sits at one lag.
        rows[row + first_level][level] = 1.0;
        for step in 0..steps {
            rows[row + step][change + step] += 1.0;
            rows[row + step + 1][change + step] -= 1.0;
        }
        row += lags;
        change += steps;
    };
    block(at, 0, orders.p, orders.p - 1);
    for (j, &q) in orders.q.iter().enumerate() {
        block(at + 1 + j, usize::from(q > 0), q + 1, q);
    }
    Matrix::from_fn(count, k, |i, j| rows[i][j])
}
