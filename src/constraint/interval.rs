//! Confidence sets for a ratio of two numbers that are affine in estimated coefficients.

use serde::{Deserialize, Serialize};
use utoipa::ToSchema;

use super::Ratio;
use crate::estimate::{EstimatedRatio, Region};
use crate::linalg::Matrix;

/// How a confidence set for a ratio is made.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq, Serialize, Deserialize, ToSchema)]
#[serde(rename_all = "snake_case")]
pub enum IntervalMethod {
    /// Fieller (1954): the ratios that a t test does not reject. It can be unbounded, as any set must
    /// be that covers when the denominator may be near zero (Gleser & Hwang 1987; Dufour 1997).
    #[default]
    Fieller,
    /// By the gradient: symmetric and always bounded, too short where the denominator is uncertain.
    Delta,
}

impl Ratio {
    /// N and D with their covariance, given the joint covariance of the stacked coefficients.
    #[must_use]
    pub fn estimated(&self, joint: &Matrix) -> EstimatedRatio {
        let (n, d) = (&self.numerator, &self.denominator);
        EstimatedRatio {
            numerator: n.value,
            denominator: d.value,
            v_nn: n.variance(joint),
            v_nd: n.covariance(d, joint),
            v_dd: d.variance(joint),
        }
    }

    /// Variance of `N/D` by the gradient: `(v_NN − 2 y v_ND + y² v_DD)/D²`.
    #[must_use]
    pub fn delta_variance(&self, joint: &Matrix) -> f64 {
        self.estimated(joint).delta_variance()
    }

    /// Confidence set for `N/D`, given the joint covariance of the stacked coefficients and the
    /// quantile `t` (two-sided, above 0): see [`EstimatedRatio::fieller`] and [`EstimatedRatio::delta`].
    #[must_use]
    pub fn interval(&self, joint: &Matrix, t: f64, method: IntervalMethod) -> Region {
        let ratio = self.estimated(joint);
        match method {
            IntervalMethod::Fieller => ratio.fieller(t),
            IntervalMethod::Delta => ratio.delta(t),
        }
    }
}
