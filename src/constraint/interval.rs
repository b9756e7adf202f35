//! Confidence sets for a ratio of two numbers that are affine in estimated coefficients.

use serde::{Deserialize, Serialize};
use utoipa::ToSchema;

use super::Ratio;
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

/// A confidence set, reported as what it is.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize, ToSchema)]
#[serde(tag = "shape", rename_all = "snake_case")]
pub enum Region {
    /// From `low` to `high`.
    Interval {
        /// Lower end.
        low: f64,
        /// Upper end.
        high: f64,
    },
    /// Everything up to `low` and everything from `high` on: two rays.
    Complement {
        /// End of the lower ray.
        low: f64,
        /// Begin of the upper ray.
        high: f64,
    },
    /// Every number: the data say nothing.
    WholeLine,
}

impl Region {
    /// Whether a number lies in it.
    #[must_use]
    pub fn contains(self, value: f64) -> bool {
        match self {
            Self::Interval { low, high } => low <= value && value <= high,
            Self::Complement { low, high } => value <= low || high <= value,
            Self::WholeLine => true,
        }
    }

    /// The set of `f(v)` for every v in it; f must rise.
    #[must_use]
    pub fn map(self, f: impl Fn(f64) -> f64) -> Self {
        match self {
            Self::Interval { low, high } => Self::Interval {
                low: f(low),
                high: f(high),
            },
            Self::Complement { low, high } => Self::Complement {
                low: f(low),
                high: f(high),
            },
            Self::WholeLine => Self::WholeLine,
        }
    }
}

impl Ratio {
    /// Variance of `N/D` by the gradient: `(v_NN − 2 y v_ND + y² v_DD)/D²`.
    #[must_use]
    pub fn delta_variance(&self, joint: &Matrix) -> f64 {
        // The gradient of N/D is that of N − y D, over D, at the estimate y.
        let error = self.numerator.clone() - self.denominator.clone() * self.value();
        error.variance(joint) / self.denominator.value.powi(2)
    }

    /// Confidence set for `N/D`, given the joint covariance of the stacked coefficients and the
    /// quantile `t` (two-sided, above 0).
    ///
    /// Fieller solves `a β² − 2 b β + c ≤ 0` with `a = D² − t² v_DD`, `b = N D − t² v_ND`,
    /// `c = N² − t² v_NN`. For a > 0 that is an interval, for a < 0 the complement of one or, without
    /// real roots, the whole line; a = 0 exactly is reported as the whole line, which holds the ray.
    #[must_use]
    pub fn interval(&self, joint: &Matrix, t: f64, method: IntervalMethod) -> Region {
        let (n, d) = (&self.numerator, &self.denominator);
        if method == IntervalMethod::Delta {
            let half = t * self.delta_variance(joint).sqrt();
            let centre = self.value();
            return Region::Interval {
                low: centre - half,
                high: centre + half,
            };
        }
        let t2 = t * t;
        let a = d.value.powi(2) - t2 * d.variance(joint);
        let b = n.value * d.value - t2 * n.covariance(d, joint);
        let c = n.value.powi(2) - t2 * n.variance(joint);
        if a > 0.0 {
            // The estimate satisfies the inequality, so the roots are real.
            let root = (b * b - a * c).max(0.0).sqrt();
            Region::Interval {
                low: (b - root) / a,
                high: (b + root) / a,
            }
        } else if a < 0.0 && b * b > a * c {
            let root = (b * b - a * c).sqrt();
            Region::Complement {
                low: (b + root) / a,
                high: (b - root) / a,
            }
        } else {
            Region::WholeLine
        }
    }
}
