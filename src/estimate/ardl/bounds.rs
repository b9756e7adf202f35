//! Bounds tests for a level relation.

use super::super::ols::as_f64;
use super::super::series_error::regress;
use super::super::{BoundsNull, Regressor, SeriesError};
use super::{Ardl, BoundsCase};

/// Statistics of the bounds tests; all large where a level relation exists.
#[derive(Clone, Debug, PartialEq)]
pub struct BoundsStatistics {
    /// F of the lagged levels (and of the restricted constant or trend in cases II and IV).
    pub f: f64,
    /// Number of restrictions of that F.
    pub restrictions: usize,
    /// t of the lagged dependent variable; has a published distribution in cases I, III and V.
    pub t: f64,
    /// F of the lagged levels of the regressors alone; none without regressors.
    pub f_regressors: Option<f64>,
    /// Rows of the regression.
    pub observations: usize,
    /// Residual degrees of freedom.
    pub df: usize,
}

/// What the three tests say together at one level.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash)]
pub enum LevelRelation {
    /// All three beyond their upper bounds.
    Cointegrated,
    /// F and t reject, the F of the regressors does not: y is stationary by itself, the regressors have
    /// no part in a level relation (degenerate).
    DependentStationary,
    /// F and the F of the regressors reject, t does not: nothing draws y back to the relation
    /// (degenerate).
    NoAdjustment,
    /// The overall F lies below its lower bound.
    None,
    /// Some statistic lies between its bounds, or only the overall F rejects: no conclusion.
    Inconclusive,
}

impl Ardl {
    /// Bounds test statistics of this equation.
    ///
    /// `F = ((ssr_r − ssr)/m)/(ssr/(n − k))`: the overall F drops `y_{t−1}`, all `x_{t−1}` and the restricted
    /// deterministic term; the F of the regressors drops all `x_{t−1}`.
    ///
    /// Pesaran, Shin & Smith 2001, Journal of Applied Econometrics 16(3); Sam, `McNown` & Goh 2019, Economic Modelling 80 (F of the
    /// regressors). Reference value: Danish money demand, ARDL(3, 1, 3, 2), case III: F = 6.2058748706,
    /// t = −4.5479388985 (statsmodels 0.15.0).
    ///
    /// # Errors
    /// [`SeriesError`] where an equation with terms left out cannot be estimated.
    pub fn bounds(&self) -> Result<BoundsStatistics, SeriesError> {
        let levels = self.at..=self.at + self.regressors;
        let dropped: Vec<usize> = levels.clone().chain(self.case.restricted()).collect();
        let f = |dropped: &[usize]| -> Result<f64, SeriesError> {
            let left: Vec<Regressor> = (0..self.ecm.k)
                .filter(|j| !dropped.contains(j))
                .map(|j| self.ecm.regressors[j].clone())
                .collect();
            let y = self.ecm.dependent();
            let ssr = if left.is_empty() {
                y.iter().map(|v| v * v).sum()
            } else {
                let name = self.ecm.regressors[self.at].name.trim_end_matches(".L1");
                regress(name, &y, left)?.ssr
            };
            Ok((ssr - self.ecm.ssr) / as_f64(dropped.len()) / self.ecm.s2)
        };
        let regressors: Vec<usize> = levels.skip(1).collect();
        Ok(BoundsStatistics {
            f: f(&dropped)?,
            restrictions: dropped.len(),
            t: self.adjustment / self.adjustment_error,
            f_regressors: if regressors.is_empty() {
                None
            } else {
                Some(f(&regressors)?)
            },
            observations: self.ecm.n,
            df: self.ecm.df,
        })
    }
}

impl BoundsStatistics {
    /// What the tests say at a level (0.05) against simulated null distributions.
    ///
    /// In cases II and IV the t statistic is judged by the simulation too, although no table of it was
    /// published.
    #[must_use]
    pub fn judge(&self, null: &BoundsNull, level: f64) -> LevelRelation {
        let upper = |bounds: &[super::super::NullDistribution; 2], x: f64| {
            (
                x > bounds[0].quantile(1.0 - level),
                x > bounds[1].quantile(1.0 - level),
            )
        };
        let (f_lower, f) = upper(&null.f, self.f);
        let t = self.t < null.t[1].quantile(level);
        let f_x = self
            .f_regressors
            .is_none_or(|x| upper(&null.f_regressors, x).1);
        match (f, t, f_x) {
            (true, true, true) => LevelRelation::Cointegrated,
            (true, true, false) => LevelRelation::DependentStationary,
            (true, false, true) => LevelRelation::NoAdjustment,
            (false, ..) if !f_lower => LevelRelation::None,
            (false, ..) | (true, false, false) => LevelRelation::Inconclusive,
        }
    }
}

impl BoundsCase {
    /// Whether Pesaran, Shin & Smith give bounds for the t statistic in this case.
    #[must_use]
    pub fn has_published_t(self) -> bool {
        self.restricted().is_none()
    }
}
