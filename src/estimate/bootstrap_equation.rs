//! Equations that a bootstrap can run forward.

use super::{Ardl, ArdlData, Deterministic, Regressor};
use crate::linalg::product;

/// An equation as a recursion in levels: `y_t = c_t + Σ_i φ_i y_{t−i} + Σ_j Σ_l β_jl x_{j,t−l} + e_t`, c its deterministic and
/// fixed terms. Residuals are what it leaves of the sample.
#[derive(Clone, Debug)]
pub struct BootstrapEquation<'a> {
    pub(super) y: &'a Regressor,
    pub(super) x: &'a [Regressor],
    /// φ, the longest lag first.
    own: Vec<f64>,
    /// β a regressor, the longest lag first.
    slopes: Vec<Vec<f64>>,
    exogenous: Vec<f64>,
}

impl<'a> BootstrapEquation<'a> {
    /// `exogenous` over all observations; coefficients by lag, own ones from lag 1 and slopes from lag 0.
    pub(super) fn new(
        y: &'a Regressor,
        x: &'a [Regressor],
        own: &[f64],
        slopes: &[Vec<f64>],
        exogenous: Vec<f64>,
    ) -> Self {
        let backwards = |lags: &[f64]| lags.iter().rev().copied().collect();
        Self {
            y,
            x,
            own: backwards(own),
            slopes: slopes.iter().map(|s| backwards(s)).collect(),
            exogenous,
        }
    }

    /// An ARDL equation, from the data that it was estimated from.
    #[must_use]
    pub fn ardl(fit: &Ardl, data: &ArdlData<'a>) -> Self {
        let n = data.y.values.len();
        let terms = fit.case.deterministic().columns(n);
        let terms = terms.iter().chain(data.fixed);
        let exogenous = weigh(n, terms.zip(&fit.ecm.coefficients));
        Self::of_levels(data, &fit.orders, &fit.levels, exogenous)
    }

    /// From coefficients in levels: y lags 1 to p, then per regressor lags 0 to q.
    pub(super) fn of_levels(
        data: &ArdlData<'a>,
        orders: &super::ArdlOrders,
        levels: &[f64],
        exogenous: Vec<f64>,
    ) -> Self {
        let (own, mut rest) = levels.split_at(orders.p);
        let mut slopes = Vec::new();
        for &q in &orders.q {
            let (mine, others) = rest.split_at(q + 1);
            slopes.push(mine.to_vec());
            rest = others;
        }
        Self::new(data.y, data.x, own, &slopes, exogenous)
    }

    /// A static relation of levels, `y_t = d_t'δ + x_t'β + u_t` (least squares, DOLS, FMOLS), its autocorrelated u
    /// to be drawn in blocks; or one with first-order autoregressive errors, `u_t = ρ u_{t−1} + e_t`, for ρ
    /// other than 0. Coefficients: deterministic terms, then x.
    #[must_use]
    pub fn levels(
        y: &'a Regressor,
        x: &'a [Regressor],
        deterministic: Deterministic,
        coefficients: &[f64],
        rho: f64,
    ) -> Self {
        let n = y.values.len();
        let slopes = coefficients[deterministic.terms()..].iter();
        let whole = weigh(n, deterministic.columns(n).iter().zip(coefficients));
        if rho == 0.0 {
            let slopes: Vec<Vec<f64>> = slopes.map(|b| vec![*b]).collect();
            return Self::new(y, x, &[], &slopes, whole);
        }
        let before = |t: usize| whole[t.saturating_sub(1)];
        let exogenous = (0..n).map(|t| whole[t] - rho * before(t)).collect();
        let slopes: Vec<Vec<f64>> = slopes.map(|b| vec![*b, -rho * b]).collect();
        Self::new(y, x, &[rho], &slopes, exogenous)
    }

    /// A relation of first differences, `Δy_t = c + Δx_t'β + e_t`.
    #[must_use]
    pub fn differences(
        y: &'a Regressor,
        x: &'a [Regressor],
        constant: f64,
        slopes: &[f64],
    ) -> Self {
        let slopes: Vec<Vec<f64>> = slopes.iter().map(|b| vec![*b, -b]).collect();
        Self::new(y, x, &[1.0], &slopes, vec![constant; y.values.len()])
    }

    /// Observations that the longest lag needs before the first it explains.
    #[must_use]
    pub fn longest(&self) -> usize {
        let lags = self.slopes.iter().map(|s| s.len() - 1);
        lags.fold(self.own.len(), usize::max)
    }

    /// What it gives for observation t without its residual; `x` of series j by number.
    pub(super) fn next<'x>(&self, t: usize, y: &[f64], x: impl Fn(usize) -> &'x [f64]) -> f64 {
        let mut value = self.exogenous[t] + product(&self.own, &y[t - self.own.len()..t]);
        for (j, slopes) in self.slopes.iter().enumerate() {
            value += product(slopes, &x(j)[t + 1 - slopes.len()..=t]);
        }
        value
    }

    /// Residuals of the sample from observation `start` on, less their mean.
    pub(super) fn shocks(&self, start: usize) -> Vec<f64> {
        let (y, n) = (&self.y.values, self.y.values.len());
        let residual = |t: usize| y[t] - self.next(t, y, |j| &self.x[j].values);
        centred((start..n).map(residual).collect())
    }
}

/// Values less their mean.
pub(super) fn centred(mut values: Vec<f64>) -> Vec<f64> {
    let mean = values.iter().sum::<f64>() / super::ols::as_f64(values.len());
    values.iter_mut().for_each(|v| *v -= mean);
    values
}

/// `Σ coefficient · term` over n observations.
pub(super) fn weigh<'t>(
    n: usize,
    terms: impl Iterator<Item = (&'t Regressor, &'t f64)>,
) -> Vec<f64> {
    let mut sum = vec![0.0; n];
    for (term, coefficient) in terms {
        for (sum, value) in sum.iter_mut().zip(&term.values) {
            *sum += coefficient * value;
        }
    }
    sum
}

#[cfg(test)]
mod tests {
    use super::super::series_error::differences;
    use super::super::test_data::penn;
    use super::super::{FirstObservation, Ols, autoregressive};
    use super::*;

    /// What the recursion leaves of the sample are the residuals of the estimator; all have a constant, so
    /// centring changes nothing.
    #[test]
    fn shocks_are_the_residuals_of_the_estimator() {
        let (y, x) = (
            penn("BRA", "ln_m"),
            ["ln_y", "ln_rpm"].map(|s| penn("BRA", s)),
        );
        let n = y.values.len();
        let with_constant = |x: &[Regressor]| {
            let rows = x[0].values.len();
            [&[Regressor::constant(rows)], x].concat()
        };
        let compare = |what: &str, found: Vec<f64>, wanted: &[f64]| {
            assert_eq!(found.len(), wanted.len(), "{what}");
            for (found, wanted) in found.iter().zip(wanted) {
                assert!((found - wanted).abs() < 1e-11, "{what}: {found} {wanted}");
            }
        };
        let constant = Deterministic::Constant;

        let static_fit = Ols::fit(&y.values, with_constant(&x)).unwrap();
        let equation = BootstrapEquation::levels(&y, &x, constant, &static_fit.coefficients, 0.0);
        assert_eq!(equation.longest(), 0);
        compare("levels", equation.shocks(0), &static_fit.residuals);

        let regressors = with_constant(&x);
        let fit = autoregressive(&y.values, &regressors, FirstObservation::Dropped).unwrap();
        let b = &fit.transformed.coefficients;
        let equation = BootstrapEquation::levels(&y, &x, constant, b, fit.rho);
        assert_eq!(equation.longest(), 1);
        compare(
            "autoregressive",
            equation.shocks(1),
            &fit.transformed.residuals,
        );

        let changes = x
            .each_ref()
            .map(|x| Regressor::new(&x.name, differences(&x.values)));
        let fit = Ols::fit(&differences(&y.values), with_constant(&changes)).unwrap();
        let b = &fit.coefficients;
        let equation = BootstrapEquation::differences(&y, &x, b[0], &b[1..]);
        compare("differences", equation.shocks(1), &fit.residuals);
        assert_eq!(fit.n, n - 1);
    }
}
