//! Null distributions of the bounds tests and of unit-root tests at the exact size.

use super::ardl::{ArdlOrders, BoundsCase};
use super::ols::as_f64;
use super::simulation::{NullDistribution, Simulation, SimulationStore, simulate};
use super::{Regressor, SeriesError};
use crate::linalg::{Projector, product};
use crate::random::Draws;

/// The equation whose bounds tests are simulated.
#[derive(Clone, Debug, PartialEq, Eq, Hash)]
pub struct BoundsDesign {
    /// Rows of the regression, T.
    pub observations: usize,
    /// Regressors k.
    pub regressors: usize,
    /// Deterministic case.
    pub case: BoundsCase,
    /// Orders of the equation, so that its lagged differences are in the simulated one too; none for
    /// the design of the published tables, which has no differences.
    pub orders: Option<ArdlOrders>,
}

/// Simulated null distributions, each with the regressors I(0) (lower bound) and I(1) (upper bound).
#[derive(Clone, Debug, PartialEq)]
pub struct BoundsNull {
    /// Overall F.
    pub f: [NullDistribution; 2],
    /// t of the lagged dependent variable.
    pub t: [NullDistribution; 2],
    /// F of the lagged regressors; NaN without regressors.
    pub f_regressors: [NullDistribution; 2],
}

impl BoundsDesign {
    /// Simulates the null of no level relation.
    ///
    /// `y_t = y_{t−1} + ε_{0t}`, `x_{jt} = ε_{jt}` (I(0)) or `x_{j,t−1} + ε_{jt}` (I(1)), all ε independent standard
    /// normal, starting from zero; then `Δy_t` on the deterministic terms of the case, `y_{t−1}`, `x_{t−1}` and the
    /// differences of the orders. Both bounds use the same draws.
    ///
    /// Pesaran, Shin & Smith 2001, tables CI and CII (T = 1000, 40,000 replications); Narayan 2005 (the
    /// same at T = 30 to 80). Reference value: case III, k = 3, T = 1000, 5 %: F between 3.23 and 4.35.
    ///
    /// # Errors
    /// [`SeriesError::TooShort`] where the rows leave no degree of freedom, [`SeriesError::Option`] where the
    /// orders are not those of k regressors.
    pub fn simulate(
        &self,
        simulation: Simulation,
        store: &dyn SimulationStore,
    ) -> Result<BoundsNull, SeriesError> {
        if let Some(o) = &self.orders
            && (o.q.len() != self.regressors || o.p == 0)
        {
            return Err(SeriesError::Option {
                method: "bounds tests",
                fault: format!(
                    "orders with p of at least 1 and {} q are needed",
                    self.regressors
                ),
            });
        }
        let differences = self
            .orders
            .as_ref()
            .map_or(0, |o| o.p - 1 + o.q.iter().sum::<usize>());
        let size = self.case.deterministic().terms() + 1 + self.regressors + differences;
        if self.observations <= size + 1 {
            return Err(SeriesError::TooShort {
                series: "the simulated equation".to_owned(),
                observations: self.observations,
                needed: size + 2,
            });
        }
        let terms: Vec<Vec<f64>> = self
            .case
            .deterministic()
            .columns(self.observations)
            .into_iter()
            .map(|c| c.values)
            .collect();
        let settings = format!(
            "bounds;T={};k={};case={:?};orders={:?}",
            self.observations, self.regressors, self.case, self.orders
        );
        let [f0, t0, x0, f1, t1, x1] = simulate(simulation, &settings, store, |draws| {
            self.one(draws, &terms)
        });
        Ok(BoundsNull {
            f: [f0, f1],
            t: [t0, t1],
            f_regressors: [x0, x1],
        })
    }

    fn one(&self, draws: &mut Draws, terms: &[Vec<f64>]) -> [f64; 6] {
        let skip = self.orders.as_ref().map_or(1, ArdlOrders::longest);
        let n = self.observations + skip;
        let walk = |draws: &mut Draws| -> (Vec<f64>, Vec<f64>) {
            let mut level = 0.0;
            let mut levels = Vec::with_capacity(n);
            let mut steps = Vec::with_capacity(n);
            for t in 0..n {
                // The first value is zero, as in the published design.
                let step = if t == 0 { 0.0 } else { draws.normal() };
                level += step;
                steps.push(step);
                levels.push(level);
            }
            (steps, levels)
        };
        let (_, y) = walk(draws);
        let (noise, walks): (Vec<_>, Vec<_>) = (0..self.regressors).map(|_| walk(draws)).unzip();
        let mut result = [f64::NAN; 6];
        for (i, x) in [noise, walks].iter().enumerate() {
            result[3 * i..3 * i + 3].copy_from_slice(&self.statistics(&y, x, skip, terms));
        }
        result
    }

    /// Overall F, t of the lagged dependent variable, F of the lagged regressors, on series of
    /// `skip + observations` values; `terms` are the deterministic ones, then any fixed ones.
    pub(super) fn statistics(
        &self,
        y: &[f64],
        x: &[Vec<f64>],
        skip: usize,
        terms: &[Vec<f64>],
    ) -> [f64; 3] {
        let rows = self.observations;
        let change = |v: &[f64], lag: usize| -> Vec<f64> {
            let from = skip - lag;
            (from..from + rows).map(|t| v[t] - v[t - 1]).collect()
        };
        let restricted = self.case.restricted();
        let mut projector = Projector::new(rows);
        for (i, term) in terms.iter().enumerate() {
            if restricted != Some(i) {
                projector.push(term);
            }
        }
        let mut present = None;
        if let Some(orders) = &self.orders {
            for lag in 1..orders.p {
                projector.push(&change(y, lag));
            }
            for (x, &q) in x.iter().zip(&orders.q) {
                for lag in 0..q {
                    projector.push(&change(x, lag));
                }
            }
            present = Some(&orders.q);
        }
        let free = projector.len();
        let mut target = change(y, 0);
        projector.residuals(&mut target);
        let without_levels = product(&target, &target);
        let y_lag = &y[skip - 1..skip - 1 + rows];

        // Without the lagged regressors.
        let mut rest = target.clone();
        if let Some(i) = restricted {
            projector.push(&terms[i]);
            projector.remove_last(&mut rest);
        }
        projector.push(y_lag);
        projector.remove_last(&mut rest);
        let without_x = product(&rest, &rest);
        projector.truncate(free);

        // The lagged dependent variable last, so that its coefficient stands alone.
        if let Some(i) = restricted {
            projector.push(&terms[i]);
            projector.remove_last(&mut target);
        }
        for (j, x) in x.iter().enumerate() {
            // A regressor of order 0 enters by its present level.
            let lag = present.map_or(1, |q| usize::from(q[j] > 0));
            projector.push(&x[skip - lag..skip - lag + rows]);
            projector.remove_last(&mut target);
        }
        projector.push(y_lag);
        let slope = product(projector.last(), &target);
        projector.remove_last(&mut target);
        let variance = product(&target, &target) / as_f64(rows - projector.len());
        let k = as_f64(self.regressors);
        let restrictions = k + 1.0 + as_f64(usize::from(restricted.is_some()));
        let f = (without_levels / variance - as_f64(rows - projector.len())) / restrictions;
        let f_x = (without_x / variance - as_f64(rows - projector.len())) / k;
        [f, slope / variance.sqrt(), f_x]
    }
}

/// Simulates a statistic of one series under a unit root: `y_t = y_{t−1} + ε_t`, ε independent standard
/// normal, n observations from `y_1 = ε_1`.
///
/// For tests without a response surface at the exact size, lags and terms: pass the test itself.
/// `name` must say them all, as it is the key under which the result is kept. Replications where
/// the test fails are left out.
///
/// Reference value: DF-GLS with a constant, which has the distribution of Dickey–Fuller without one in
/// large samples.
pub fn simulate_unit_root(
    name: &str,
    observations: usize,
    simulation: Simulation,
    store: &dyn SimulationStore,
    statistic: impl Fn(&Regressor) -> Result<f64, SeriesError> + Sync,
) -> NullDistribution {
    let settings = format!("unit root;{name};n={observations}");
    let [mut distribution] = simulate(simulation, &settings, store, |draws| {
        let mut level = 0.0;
        let values = (0..observations)
            .map(|_| {
                level += draws.normal();
                level
            })
            .collect();
        [statistic(&Regressor::new("random walk", values)).unwrap_or(f64::NAN)]
    });
    distribution.quantiles.retain(|q| !q.is_nan());
    distribution
}
