//! Autoregressive distributed lags, their error-correction form and tests of a level relation.
//!
//! Start reading at [`ArdlData`], then [`Ardl::fit`] and [`select_orders`]; [`Ardl::bounds`] tests for
//! a level relation with critical values from [`super::BoundsNull`].

mod bootstrap_bounds;
mod bounds;
mod model;
mod multipliers;
mod quick;
mod selection;

#[cfg(test)]
mod tests;

pub use bootstrap_bounds::{BootstrapBounds, BootstrapBoundsP, bootstrap_bounds};
pub use bounds::{BoundsStatistics, LevelRelation};
pub use model::{Ardl, LongRunCoefficient};
pub use multipliers::Multipliers;
pub use quick::QuickArdl;
pub use selection::{Candidate, InformationCriterion, Selection, select_orders};

use super::series_error::check;
use super::{Deterministic, Regressor, SeriesError};

/// The five deterministic cases of Pesaran, Shin & Smith (2001).
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord, Hash)]
pub enum BoundsCase {
    /// No constant, no trend.
    I,
    /// Constant restricted to the level relation, no trend.
    II,
    /// Constant unrestricted, no trend.
    III,
    /// Constant unrestricted, trend restricted to the level relation.
    IV,
    /// Constant and trend unrestricted.
    V,
}

impl BoundsCase {
    /// Deterministic terms of the equation. Cases II and III share one equation, IV and V another.
    #[must_use]
    pub fn deterministic(self) -> Deterministic {
        match self {
            Self::I => Deterministic::None,
            Self::II | Self::III => Deterministic::Constant,
            Self::IV | Self::V => Deterministic::Trend,
        }
    }

    /// Position of the deterministic term that the F test restricts together with the levels.
    #[must_use]
    pub fn restricted(self) -> Option<usize> {
        match self {
            Self::II => Some(0),
            Self::IV => Some(1),
            Self::I | Self::III | Self::V => None,
        }
    }
}

/// Orders of an `ARDL(p, q₁, …, q_k)`: the highest lag of the *level* of each series.
#[derive(Clone, Debug, PartialEq, Eq, Hash)]
pub struct ArdlOrders {
    /// Lags of the dependent variable, at least 1.
    pub p: usize,
    /// Highest lag of each regressor; 0 is the present value alone.
    pub q: Vec<usize>,
}

impl ArdlOrders {
    /// Observations lost at the start.
    #[must_use]
    pub fn longest(&self) -> usize {
        self.q.iter().copied().fold(self.p, usize::max)
    }
}

/// What an ARDL equation is estimated from.
#[derive(Clone, Debug)]
pub struct ArdlData<'a> {
    /// Dependent variable.
    pub y: &'a Regressor,
    /// Regressors whose lags enter.
    pub x: &'a [Regressor],
    /// Regressors that enter as they are (dummies, seasonal terms), over the same observations.
    pub fixed: &'a [Regressor],
}

impl ArdlData<'_> {
    fn check(&self) -> Result<(), SeriesError> {
        let series: Vec<&Regressor> = [self.y].into_iter().chain(self.x).collect();
        check(&series)?;
        let n = self.y.values.len();
        match self.fixed.iter().find(|f| f.values.len() != n) {
            Some(fixed) => Err(SeriesError::LengthDiffers {
                series: fixed.name.clone(),
                found: fixed.values.len(),
                expected: n,
            }),
            None => Ok(()),
        }
    }

    /// Columns of the error-correction form on the observations from `skip` on: deterministic and
    /// fixed terms, `y.L1`, `x.L1` (`x.L0` where q = 0), `d.y.L1 … L(p−1)`, `d.x.L0 … L(q−1)`.
    fn columns(
        &self,
        deterministic: Deterministic,
        orders: &ArdlOrders,
        skip: usize,
    ) -> Vec<Regressor> {
        let terms = deterministic.columns(0).into_iter();
        let mut names: Vec<String> = terms.map(|t| t.name).collect();
        names.extend(self.fixed.iter().map(|f| f.name.clone()));
        names.push(format!("{}.L1", self.y.name));
        for (x, &q) in self.x.iter().zip(&orders.q) {
            names.push(format!("{}.L{}", x.name, usize::from(q > 0)));
        }
        names.extend((1..orders.p).map(|lag| format!("d.{}.L{lag}", self.y.name)));
        for (x, &q) in self.x.iter().zip(&orders.q) {
            names.extend((0..q).map(|lag| format!("d.{}.L{lag}", x.name)));
        }
        let values = self.values(deterministic, orders, skip);
        let columns = values.chunks_exact(self.y.values.len() - skip);
        let named = names.into_iter().zip(columns);
        named
            .map(|(name, values)| Regressor {
                name,
                values: values.to_vec(),
            })
            .collect()
    }

    /// The values of these columns, one after the other.
    fn values(&self, deterministic: Deterministic, orders: &ArdlOrders, skip: usize) -> Vec<f64> {
        let n = self.y.values.len();
        let rows = n - skip;
        let mut all = Vec::new();
        let level = |all: &mut Vec<f64>, series: &Regressor, lag: usize| {
            all.extend_from_slice(&series.values[skip - lag..n - lag]);
        };
        let change = |all: &mut Vec<f64>, series: &Regressor, lag: usize| {
            let values = &series.values[skip - lag - 1..n - lag];
            all.extend(values.windows(2).map(|w| w[1] - w[0]));
        };
        // The trend counts from the first observation, whatever the lags.
        for term in deterministic.columns(n) {
            all.extend_from_slice(&term.values[skip..]);
        }
        for fixed in self.fixed {
            all.extend_from_slice(&fixed.values[skip..]);
        }
        level(&mut all, self.y, 1);
        for (x, &q) in self.x.iter().zip(&orders.q) {
            level(&mut all, x, usize::from(q > 0));
        }
        for lag in 1..orders.p {
            change(&mut all, self.y, lag);
        }
        for (x, &q) in self.x.iter().zip(&orders.q) {
            for lag in 0..q {
                change(&mut all, x, lag);
            }
        }
        debug_assert_eq!(all.len() % rows, 0);
        all
    }
}
