//! An ARDL equation refitted on replicates.

use super::super::EstimatedRatio;
use super::super::ols::as_f64;
use super::super::series_error::differences;
use super::{ArdlData, ArdlOrders, BoundsCase};
use crate::linalg::ThinFit;

/// An ARDL equation in error-correction form by [`ThinFit`]: the coefficients of [`super::Ardl`] without
/// names, checks and diagnostics, for replications.
#[derive(Clone, Debug)]
pub struct QuickArdl {
    /// The regression; columns as in [`super::Ardl::ecm`].
    pub fit: ThinFit,
    /// Residual variance `ssr/(n − k)`.
    pub s2: f64,
    at: usize,
}

impl QuickArdl {
    /// Fits on the observations from `skip` on, at least the longest lag; a later one gives equations with
    /// different orders a common sample. None where columns depend on each other or no degree of
    /// freedom is left.
    #[must_use]
    pub fn fit(
        data: &ArdlData<'_>,
        orders: &ArdlOrders,
        case: BoundsCase,
        skip: usize,
    ) -> Option<Self> {
        let rows: Vec<usize> = (0..data.y.values.len().saturating_sub(skip)).collect();
        Self::fit_rows(data, orders, case, skip, &rows)
    }

    /// The same on these rows alone, counted from observation `skip`: for a jackknife, which leaves rows out
    /// but no lags within them.
    #[must_use]
    pub fn fit_rows(
        data: &ArdlData<'_>,
        orders: &ArdlOrders,
        case: BoundsCase,
        skip: usize,
        rows: &[usize],
    ) -> Option<Self> {
        let n = data.y.values.len();
        if skip < orders.longest() || n < skip + 2 || rows.iter().any(|r| skip + r >= n) {
            return None;
        }
        let all = data.values(case.deterministic(), orders, skip);
        let change = differences(&data.y.values[skip - 1..]);
        let fit = if rows.len() == n - skip {
            ThinFit::new(all, change)?
        } else {
            let pick = |c: &[f64]| rows.iter().map(|r| c[*r]).collect::<Vec<_>>();
            let columns = all.chunks_exact(n - skip).flat_map(pick).collect();
            ThinFit::new(columns, pick(&change))?
        };
        Some(Self {
            s2: fit.ssr / as_f64(fit.df()),
            at: case.deterministic().terms() + data.fixed.len(),
            fit,
        })
    }

    /// Speed of adjustment φ.
    #[must_use]
    pub fn adjustment(&self) -> f64 {
        self.fit.coefficients[self.at]
    }

    /// Coefficient b of the lagged level of regressor j (from 0).
    #[must_use]
    pub fn level(&self, j: usize) -> f64 {
        self.fit.coefficients[self.at + 1 + j]
    }

    /// Rows of `(X'X)⁻¹ X'` that belong to φ and to the lagged levels of the first `count` regressors.
    #[must_use]
    pub fn influences(&self, count: usize) -> Vec<Vec<f64>> {
        let places = self.at..=self.at + count;
        places.map(|j| self.fit.influence(j)).collect()
    }

    /// The long-run coefficient of regressor j, `b_j / −φ`, with the classical covariance.
    #[must_use]
    pub fn long_run(&self, j: usize) -> EstimatedRatio {
        let (at, place) = (self.at, self.at + 1 + j);
        let v = |a: usize, b: usize| self.s2 * self.fit.inverse_gram(a, b);
        EstimatedRatio {
            numerator: self.level(j),
            denominator: -self.adjustment(),
            v_nn: v(place, place),
            v_nd: -v(place, at),
            v_dd: v(at, at),
        }
    }
}

#[cfg(test)]
mod tests {
    use super::super::super::test_data::{close, danish};
    use super::super::Ardl;
    use super::*;

    #[test]
    fn the_quick_fit_is_the_slow_one() {
        let (y, x) = (danish("lrm"), ["lry", "ibo", "ide"].map(danish));
        let orders = ArdlOrders {
            p: 3,
            q: vec![1, 3, 0],
        };
        let data = ArdlData {
            y: &y,
            x: &x,
            fixed: &[],
        };
        let slow = Ardl::fit(&data, orders.clone(), BoundsCase::IV).unwrap();
        let quick = QuickArdl::fit(&data, &orders, BoundsCase::IV, 3).unwrap();
        close("φ", quick.adjustment(), slow.adjustment, 1e-10);
        for (j, x) in x.iter().enumerate() {
            let (found, wanted) = (quick.long_run(j), slow.long_run(&x.name).unwrap());
            close("θ", found.value(), wanted.value, 1e-10);
            let error = found.delta_variance().sqrt();
            close("se", error, wanted.standard_error, 1e-9);
        }
        assert!(QuickArdl::fit(&data, &orders, BoundsCase::IV, 2).is_none());
        let later = QuickArdl::fit(&data, &orders, BoundsCase::IV, 5).unwrap();
        assert_eq!(later.influences(3)[0].len(), y.values.len() - 5);
        // Rows left out at the start are a later start, but for the trend's origin.
        let rows: Vec<usize> = (2..y.values.len() - 3).collect();
        let without = QuickArdl::fit_rows(&data, &orders, BoundsCase::IV, 3, &rows).unwrap();
        close("φ", without.adjustment(), later.adjustment(), 1e-9);
    }
}
