//! Probability distributions: p-values and quantiles. Hides the library behind it.
//!
//! Only upper tails are offered, each computed as such: `1 − cdf` loses all digits where a p-value
//! matters. Arguments that make no distribution (degrees of freedom not positive and finite) and NaN
//! give NaN.

use statrs::distribution::{ChiSquared, ContinuousCDF, FisherSnedecor, StudentsT};

/// `P(Z > x)` of the standard normal, as `erfc(x/√2)/2`.
#[must_use]
pub fn normal_sf(x: f64) -> f64 {
    0.5 * libm::erfc(x * std::f64::consts::FRAC_1_SQRT_2)
}

/// `P(T > x)` of Student's t with `df` degrees of freedom, which need not be whole.
#[must_use]
pub fn t_sf(x: f64, df: f64) -> f64 {
    if x.is_nan() || x.is_infinite() {
        return tail_at_infinity(x, df);
    }
    StudentsT::new(0.0, 1.0, df).map_or(f64::NAN, |d| d.sf(x))
}

/// `P(|T| > |x|)`: the two-sided p-value of a t statistic.
#[must_use]
pub fn t_two_sided(x: f64, df: f64) -> f64 {
    2.0 * t_sf(x.abs(), df)
}

/// `P(F > x)` of the F distribution.
#[must_use]
pub fn f_sf(x: f64, df_numerator: f64, df_denominator: f64) -> f64 {
    if x.is_nan() || x.is_infinite() {
        return tail_at_infinity(x, df_numerator.min(df_denominator));
    }
    FisherSnedecor::new(df_numerator, df_denominator).map_or(f64::NAN, |d| d.sf(x))
}

/// `P(χ² > x)` of the chi-squared distribution.
#[must_use]
pub fn chi2_sf(x: f64, df: f64) -> f64 {
    if x.is_nan() || x.is_infinite() {
        return tail_at_infinity(x, df);
    }
    ChiSquared::new(df).map_or(f64::NAN, |d| d.sf(x))
}

/// `P(χ² > x)` of the noncentral chi-squared distribution: the Poisson mixture of central tails, summed to
/// where its weights vanish.
#[must_use]
pub fn noncentral_chi2_sf(x: f64, df: f64, noncentrality: f64) -> f64 {
    let half = noncentrality / 2.0;
    if half.is_nan() || half < 0.0 {
        return f64::NAN;
    }
    if half == 0.0 {
        return chi2_sf(x, df);
    }
    let (mut sum, mut j, mut log_weight) = (0.0, 0.0, -half);
    loop {
        sum += log_weight.exp() * chi2_sf(x, df + 2.0 * j);
        j += 1.0;
        log_weight += (half / j).ln();
        if sum.is_nan() || (j > half && log_weight < -40.0) {
            return sum;
        }
    }
}

fn tail_at_infinity(x: f64, df: f64) -> f64 {
    if x.is_nan() || df.is_nan() || df <= 0.0 {
        f64::NAN
    } else if x > 0.0 {
        0.0
    } else {
        1.0
    }
}

/// The x with `P(Z > x) = p`, for p between 0 and 1 (NaN elsewhere).
#[must_use]
pub fn normal_upper(p: f64) -> f64 {
    symmetric_upper(p, normal_sf)
}

/// The x with `P(T > x) = p`, for p between 0 and 1 (NaN elsewhere).
#[must_use]
pub fn t_upper(p: f64, df: f64) -> f64 {
    symmetric_upper(p, |x| t_sf(x, df))
}

/// The x with `P(F > x) = p`, for p between 0 and 1 (NaN elsewhere).
#[must_use]
pub fn f_upper(p: f64, df_numerator: f64, df_denominator: f64) -> f64 {
    positive_upper(p, |x| f_sf(x, df_numerator, df_denominator))
}

/// The x with `P(χ² > x) = p`, for p between 0 and 1 (NaN elsewhere).
#[must_use]
pub fn chi2_upper(p: f64, df: f64) -> f64 {
    positive_upper(p, |x| chi2_sf(x, df))
}

/// The x with `P(χ² > x) = p` of the noncentral chi-squared distribution, for p between 0 and 1 (NaN
/// elsewhere).
#[must_use]
pub fn noncentral_chi2_upper(p: f64, df: f64, noncentrality: f64) -> f64 {
    positive_upper(p, |x| noncentral_chi2_sf(x, df, noncentrality))
}

fn symmetric_upper(p: f64, sf: impl Fn(f64) -> f64) -> f64 {
    // 1 − p is exact for p in (1/2, 1).
    if p > 0.5 {
        -positive_upper(1.0 - p, sf)
    } else if p < 0.5 {
        positive_upper(p, sf)
    } else {
        // One half, or NaN.
        p - 0.5
    }
}

/// Inverts a falling tail on the positive half-line: doubling or halving to a bracket, then
/// bisection to neighbouring doubles. Slower than Newton's method and never wrong.
fn positive_upper(p: f64, sf: impl Fn(f64) -> f64) -> f64 {
    if !(p > 0.0 && p < 1.0) || sf(1.0).is_nan() {
        return f64::NAN;
    }
    let (mut low, mut high) = (1.0_f64, 1.0_f64);
    while sf(high) > p && high < f64::MAX / 2.0 {
        high *= 2.0;
    }
    while sf(low) < p && low > f64::MIN_POSITIVE {
        low /= 2.0;
    }
    loop {
        let middle = low + (high - low) / 2.0;
        if middle <= low || middle >= high {
            return high;
        }
        if sf(middle) > p {
            low = middle;
        } else {
            high = middle;
        }
    }
}

#[cfg(test)]
mod tests {
    use approx::assert_relative_eq;
    use proptest::prelude::*;

    use super::*;

    /// Closed forms: t with 1 and 2 degrees of freedom, χ² with 2, F(2, d), and erfc at 8/√2.
    #[test]
    fn tails_match_closed_forms_far_out() {
        for x in [0.1_f64, 1.0, 3.0, 30.0, 300.0] {
            let cauchy = 1.0_f64.atan2(x) / std::f64::consts::PI;
            assert_relative_eq!(t_sf(x, 1.0), cauchy, max_relative = 1e-12);
            let s = (2.0 + x * x).sqrt();
            // (1 − x/s)/2 without the cancellation.
            assert_relative_eq!(t_sf(x, 2.0), 1.0 / (s * (s + x)), max_relative = 1e-12);
            assert_relative_eq!(chi2_sf(x, 2.0), (-x / 2.0).exp(), max_relative = 1e-12);
            let f = (1.0 + 2.0 * x / 7.0).powf(-3.5);
            assert_relative_eq!(f_sf(x, 2.0, 7.0), f, max_relative = 1e-12);
        }
        // 40-digit value of the normal tail at 8.
        assert_relative_eq!(
            normal_sf(8.0),
            6.220_960_574_271_784e-16,
            max_relative = 1e-13
        );
        assert_relative_eq!(normal_sf(-8.0), 1.0, max_relative = 1e-15);
    }

    /// Table values known to many digits (Abramowitz & Stegun 1964, tables 26.1, 26.8, 26.10).
    #[test]
    fn quantiles_match_published_tables() {
        assert_relative_eq!(
            normal_upper(0.025),
            1.959_963_984_540_054,
            max_relative = 1e-13
        );
        assert_relative_eq!(t_upper(0.025, 10.0), 2.228_138_852, max_relative = 1e-9);
        assert_relative_eq!(t_upper(0.05, 30.0), 1.697_260_887, max_relative = 1e-9);
        assert_relative_eq!(chi2_upper(0.05, 1.0), 3.841_458_821, max_relative = 1e-9);
        assert_relative_eq!(chi2_upper(0.01, 10.0), 23.209_251_16, max_relative = 1e-9);
        assert_relative_eq!(f_upper(0.05, 2.0, 10.0), 4.102_821_0, max_relative = 1e-7);
    }

    #[test]
    fn nonsense_gives_nan() {
        assert!(t_sf(1.0, 0.0).is_nan() && t_sf(f64::NAN, 3.0).is_nan());
        assert!(t_upper(0.0, 3.0).is_nan() && t_upper(1.0, 3.0).is_nan());
        assert!(f_upper(0.05, -1.0, 3.0).is_nan() && chi2_sf(1.0, f64::NAN).is_nan());
        assert_eq!(t_sf(f64::INFINITY, 3.0).to_bits(), 0);
    }

    proptest! {
        #[test]
        fn quantiles_invert_tails(p in 1e-12..0.999_f64, df in 1.0..200.0_f64) {
            prop_assert!((normal_sf(normal_upper(p)) / p - 1.0).abs() < 1e-11);
            // Near the median the tail of t rests on an incomplete beta function at an argument near
            // 1, where the library's digits are fewer.
            prop_assert!((t_sf(t_upper(p, df), df) / p - 1.0).abs() < 1e-9);
            prop_assert!((f_sf(f_upper(p, 3.0, df), 3.0, df) / p - 1.0).abs() < 1e-11);
            prop_assert!((chi2_sf(chi2_upper(p, df), df) / p - 1.0).abs() < 1e-11);
        }
    }
}
