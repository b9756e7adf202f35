//! A ratio of two estimates, and confidence sets for it.

use serde::{Deserialize, Serialize};
use utoipa::ToSchema;

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

    /// The b with `a b² − 2 h b + c ≤ 0`; none where no number satisfies it.
    ///
    /// For a > 0 an interval or none; for a < 0 two rays or, without real roots, the whole line. a = 0
    /// exactly is reported as the whole line, which holds the ray.
    #[must_use]
    pub fn where_not_positive(a: f64, h: f64, c: f64) -> Option<Self> {
        let discriminant = h * h - a * c;
        if a == 0.0 || discriminant < 0.0 {
            return (a <= 0.0).then_some(Self::WholeLine);
        }
        // Neither root cancels: their product is c/a.
        let far = h + discriminant.sqrt().copysign(h);
        let (one, other) = (far / a, if far == 0.0 { 0.0 } else { c / far });
        let (low, high) = (one.min(other), one.max(other));
        Some(if a > 0.0 {
            Self::Interval { low, high }
        } else if a < 0.0 {
            Self::Complement { low, high }
        } else {
            Self::WholeLine
        })
    }
}

/// A ratio N/D of two estimates with their covariance.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct EstimatedRatio {
    /// N.
    pub numerator: f64,
    /// D.
    pub denominator: f64,
    /// Variance of N.
    pub v_nn: f64,
    /// Covariance of N and D.
    pub v_nd: f64,
    /// Variance of D.
    pub v_dd: f64,
}

impl EstimatedRatio {
    /// `N / D`.
    #[must_use]
    pub fn value(&self) -> f64 {
        self.numerator / self.denominator
    }

    /// Variance of `N − y D`: `v_NN − 2 y v_ND + y² v_DD`, not below 0.
    #[must_use]
    pub fn error_variance(&self, y: f64) -> f64 {
        (self.v_nn - 2.0 * y * self.v_nd + y * y * self.v_dd).max(0.0)
    }

    /// `(N − y D)/se`: the statistic of the hypothesis that the ratio is y, without division by D.
    #[must_use]
    pub fn statistic(&self, y: f64) -> f64 {
        (self.numerator - y * self.denominator) / self.error_variance(y).sqrt()
    }

    /// Variance of `N/D` by the gradient: that of `N − y D` at the estimate y, over D².
    #[must_use]
    pub fn delta_variance(&self) -> f64 {
        self.error_variance(self.value()) / self.denominator.powi(2)
    }

    /// The ratios whose [`EstimatedRatio::statistic`] is at most `t` in absolute value, t above 0.
    ///
    /// Fieller solves `a β² − 2 b β + c ≤ 0` with `a = D² − t² v_DD`, `b = N D − t² v_ND`,
    /// `c = N² − t² v_NN`. For a > 0 that is an interval, for a < 0 the complement of one or, without
    /// real roots, the whole line; a = 0 exactly is reported as the whole line, which holds the ray.
    /// Exact for jointly normal N and D with known variances up to a factor of χ²; t from Student's
    /// distribution, or a bootstrap critical value.
    ///
    /// Fieller 1954, Journal of the Royal Statistical Society B 16(2). Reference value: N = 2, D = 1, variances ¼ and
    /// 1/16, covariance 0, t = 2: `(8 ± √52)/6` by hand.
    #[must_use]
    pub fn fieller(&self, t: f64) -> Region {
        let (n, d, t2) = (self.numerator, self.denominator, t * t);
        let a = d * d - t2 * self.v_dd;
        let b = n * d - t2 * self.v_nd;
        let c = n * n - t2 * self.v_nn;
        // The estimate satisfies the inequality; only rounding can say that nothing does.
        Region::where_not_positive(a, b, c).unwrap_or(Region::Interval {
            low: b / a,
            high: b / a,
        })
    }

    /// `N/D ± t se` with the standard error by the gradient: always bounded, so it cannot cover where
    /// D may be near zero (Gleser & Hwang 1987; Dufour 1997).
    #[must_use]
    pub fn delta(&self, t: f64) -> Region {
        let (centre, half) = (self.value(), t * self.delta_variance().sqrt());
        Region::Interval {
            low: centre - half,
            high: centre + half,
        }
    }
}

#[cfg(test)]
mod tests {
    use approx::assert_relative_eq;
    use proptest::prelude::*;

    use super::*;

    #[test]
    fn a_quadratic_inequality_has_four_shapes() {
        let solve = Region::where_not_positive;
        let (low, high) = (1.0, 3.0);
        assert_eq!(solve(1.0, 2.0, 3.0), Some(Region::Interval { low, high }));
        let rays = Some(Region::Complement { low, high });
        assert_eq!(solve(-1.0, -2.0, -3.0), rays);
        assert_eq!(solve(1.0, 0.0, 1.0), None);
        assert_eq!(solve(-1.0, 0.0, -1.0), Some(Region::WholeLine));
        assert_eq!(solve(0.0, 1.0, 1.0), Some(Region::WholeLine));
        let point = Region::Interval {
            low: 0.0,
            high: 0.0,
        };
        assert_eq!(solve(1.0, 0.0, 0.0), Some(point));
    }

    /// The example of the docstring, by hand: `¾ β² − 4 β + 3 ≤ 0`, halves of `8 ± √28` over 3.
    #[test]
    fn a_worked_case() {
        let ratio = EstimatedRatio {
            numerator: 2.0,
            denominator: 1.0,
            v_nn: 0.25,
            v_nd: 0.0,
            v_dd: 0.0625,
        };
        let Region::Interval { low, high } = ratio.fieller(2.0) else {
            panic!();
        };
        assert_relative_eq!(low, (4.0 - 7.0_f64.sqrt()) / 1.5, max_relative = 1e-14);
        assert_relative_eq!(high, (4.0 + 7.0_f64.sqrt()) / 1.5, max_relative = 1e-14);
        // N and D are four standard errors from zero each: √32 of them from zero together.
        assert!(matches!(ratio.fieller(4.1), Region::Complement { .. }));
        assert_eq!(ratio.fieller(5.7), Region::WholeLine);
        let half = 2.0 * 0.5_f64.sqrt();
        let Region::Interval { low, high } = ratio.delta(2.0) else {
            panic!();
        };
        assert_relative_eq!(low, 2.0 - half, max_relative = 1e-14);
        assert_relative_eq!(high, 2.0 + half, max_relative = 1e-14);
    }

    proptest! {
        /// The set is what the statistic does not reject: another way to say the same.
        #[test]
        fn fieller_inverts_the_statistic(
            n in -2.0..2.0_f64, d in -2.0..2.0_f64, sn in 0.1..1.0_f64, sd in 0.1..1.0_f64,
            rho in -0.9..0.9_f64, t in 0.5..4.0_f64, at in -9.0..9.0_f64,
        ) {
            let (v_nn, v_nd, v_dd) = (sn * sn, rho * sn * sd, sd * sd);
            let ratio = EstimatedRatio { numerator: n, denominator: d, v_nn, v_nd, v_dd };
            let distance = ratio.statistic(at).abs() - t;
            prop_assume!(distance.abs() > 1e-6);
            prop_assert_eq!(ratio.fieller(t).contains(at), distance < 0.0);
            prop_assert!(ratio.fieller(t).contains(ratio.value()));
        }
    }
}
