//! Tests for a break in the coefficients, at a known date or at an unknown one.

use super::ols::as_f64;
use super::outcome::{Distribution, TestResult};
use super::recursive::part;
use super::{EstimateError, Ols};
use crate::dist::chi2_sf;
use crate::random::Draws;

/// Chow's (1960) test that coefficients are the same before observation `at` (from 0) and from it on.
///
/// `F = [(ssr − ssr₁ − ssr₂)/k] / [(ssr₁ + ssr₂)/(n − 2k)]`, F(k, n − 2k); where the later part has no more
/// than k observations, his predictive form `[(ssr − ssr₁)/n₂] / [ssr₁/(n₁ − k)]`, F(n₂, n₁ − k). One
/// variance in both parts; the date is known beforehand.
///
/// # Errors
/// [`EstimateError::TooShort`] where the part before has no more than k observations or the one after
/// has none; collinear regressors within a part.
pub fn chow(fit: &Ols, at: usize) -> Result<TestResult, EstimateError> {
    let (n, k) = (fit.n, fit.k);
    if at <= k || at >= n {
        return Err(EstimateError::TooShort {
            what: format!("a Chow test at observation {}", at + 1),
            needed: k + 2,
            found: at.min(n),
        });
    }
    let null = format!("Constancy of the coefficients at observation {}", at + 1);
    let before = part(fit, 0, at)?.ssr;
    let (statistic, numerator, denominator) = if n - at > k {
        let parts = before + part(fit, at, n)?.ssr;
        let (q, df) = (as_f64(k), as_f64(n - 2 * k));
        ((fit.ssr - parts) / q / (parts / df), q, df)
    } else {
        let (q, df) = (as_f64(n - at), as_f64(at - k));
        ((fit.ssr - before) / q / (before / df), q, df)
    };
    let distribution = Distribution::F {
        numerator,
        denominator,
    };
    Ok(TestResult::new("Chow", &null, statistic, distribution))
}

/// Tests for one break of all coefficients at an unknown date.
#[derive(Clone, Debug)]
pub struct UnknownBreak {
    /// First candidate: number of observations before the break.
    pub first: usize,
    /// `W_t = (ssr − ssr₁ − ssr₂) / ((ssr₁ + ssr₂)/(n − 2k))`, k times Chow's F, one a candidate.
    pub path: Vec<f64>,
    /// Observation (from 0) at which the second regime begins under the largest W.
    pub at: usize,
    /// Largest W (Quandt 1960; Andrews 1993); p-value by Hansen 1997.
    pub sup: TestResult,
    /// Mean of W (Andrews & Ploberger 1994); simulated p-value.
    pub average: TestResult,
    /// `ln mean e^(W/2)` (Andrews & Ploberger 1994); simulated p-value.
    pub exponential: TestResult,
}

/// Candidates from `⌊trim n⌋` observations to `n − ⌊trim n⌋`, for **stationary** regressors: in levels with
/// I(1) regressors use [`super::hansen_1992()`].
///
/// Divided by k, the sup statistic is on the scale of Andrews' printed table. The average and
/// exponential statistics take p-values from 4,000 draws of the limit with a fixed seed (standard error
/// 0.0034 at 5 %). Sources: Andrews 1993, Econometrica 61(4); Andrews & Ploberger 1994,
/// Econometrica 62(6); Hansen 1997, Journal of Business & Economic Statistics 15(1).
///
/// # Errors
/// [`EstimateError::Setting`] for a trimming outside 0.01 to 0.49; [`EstimateError::TooShort`] where it
/// leaves a regime no more than k observations; more than 40 coefficients; collinear regressors within
/// a regime.
pub fn unknown_break(fit: &Ols, trim: f64) -> Result<UnknownBreak, EstimateError> {
    let (n, k) = (fit.n, fit.k);
    if !(0.01..=0.49).contains(&trim) {
        return Err(EstimateError::Setting {
            setting: "trimming",
            allowed: "between 0.01 and 0.49",
        });
    }
    let first = (0..n)
        .take_while(|t| as_f64(t + 1) <= trim * as_f64(n))
        .count();
    if first <= k {
        return Err(EstimateError::TooShort {
            what: format!("a break with trimming {trim} and {k} coefficients"),
            needed: (n..)
                .find(|m| trim * as_f64(*m) >= as_f64(k + 1))
                .unwrap_or(n),
            found: n,
        });
    }
    let path: Vec<f64> = (first..=n - first)
        .map(|t| {
            let parts = part(fit, 0, t)?.ssr + part(fit, t, n)?.ssr;
            Ok((fit.ssr - parts) / (parts / as_f64(n - 2 * k)))
        })
        .collect::<Result<_, EstimateError>>()?;
    let (place, sup) = path
        .iter()
        .enumerate()
        .fold((0, f64::NEG_INFINITY), |best, (i, w)| {
            if *w > best.1 { (i, *w) } else { best }
        });
    let (average, exponential) = mean_and_exponential(&path);
    let p_sup = sup_p_value(sup, k, trim).ok_or(EstimateError::Setting {
        setting: "the number of coefficients of a break test",
        allowed: "at most 40",
    })?;
    let limit = Limit::simulate(k, trim, 4000);
    let null = "Constancy of the coefficients, against one break,";
    let outcome = |name: &str, source, statistic, p| {
        TestResult::with_p(
            name,
            null,
            statistic,
            Distribution::Other { name: source },
            p,
        )
    };
    let simulated = "simulated limit of Andrews and Ploberger 1994";
    Ok(UnknownBreak {
        first,
        at: first + place,
        path,
        sup: outcome(
            "Quandt–Andrews sup",
            "p-value function of Hansen 1997",
            sup,
            p_sup,
        ),
        average: outcome(
            "Andrews–Ploberger average",
            simulated,
            average,
            share(&limit.average, average),
        ),
        exponential: outcome(
            "Andrews–Ploberger exponential",
            simulated,
            exponential,
            share(&limit.exponential, exponential),
        ),
    })
}

/// Mean, and log of the mean of `e^(W/2)` without overflow.
fn mean_and_exponential(path: &[f64]) -> (f64, f64) {
    let n = as_f64(path.len());
    let largest = path.iter().fold(f64::NEG_INFINITY, |m, w| m.max(*w));
    let sum: f64 = path.iter().map(|w| ((w - largest) / 2.0).exp()).sum();
    (path.iter().sum::<f64>() / n, largest / 2.0 + (sum / n).ln())
}

/// p-value of the sup statistic on the χ² scale: `P(χ²(η) > θ₀ + θ₁ x)` with the constants of Hansen
/// 1997, interpolated between trimmings 0.49, 0.47, …, 0.01; none beyond 40 coefficients. Constants as
/// carried in program sources, checked against Andrews' table.
fn sup_p_value(x: f64, k: usize, trim: f64) -> Option<f64> {
    let rows: Vec<f64> = include_str!("hansen_1997.csv")
        .lines()
        .skip((k - 1) * 25)
        .take(25)
        .map(|line| {
            let c: Vec<f64> = line.split(',').filter_map(|v| v.parse().ok()).collect();
            chi2_sf((c[0] + c[1] * x).max(0.0), c[2])
        })
        .collect();
    // Row i (from 0) is at trimming 0.49 − i/50.
    let place = ((0.49 - trim) * 50.0).max(0.0);
    let below = (0..23).take_while(|i| as_f64(i + 1) <= place).count();
    let weight = (place - as_f64(below)).min(1.0);
    Some(rows.get(below)? * (1.0 - weight) + rows.get(below + 1)? * weight)
}

/// Draws of the limit `(B(π) − π B(1))'(B(π) − π B(1)) / (π (1 − π))` of W over the candidate dates.
struct Limit {
    average: Vec<f64>,
    exponential: Vec<f64>,
    #[cfg(test)]
    sup: Vec<f64>,
}

impl Limit {
    /// Brownian motions on 500 steps; one stream of draws a replication.
    fn simulate(k: usize, trim: f64, replications: u32) -> Self {
        const STEPS: usize = 500;
        const SEED: u64 = 1994;
        let mut limit = Self {
            average: Vec::new(),
            exponential: Vec::new(),
            #[cfg(test)]
            sup: Vec::new(),
        };
        for replication in 0..replications {
            let mut draws = Draws::new(SEED, u64::from(replication));
            let mut path = vec![0.0; STEPS];
            for _ in 0..k {
                let mut sum = 0.0;
                let walk: Vec<f64> = (0..STEPS)
                    .map(|_| {
                        sum += draws.normal();
                        sum
                    })
                    .collect();
                for (i, w) in walk.iter().enumerate().take(STEPS - 1) {
                    let share = as_f64(i + 1) / as_f64(STEPS);
                    let bridge = (w - share * sum).powi(2) / as_f64(STEPS);
                    path[i] += bridge / (share * (1.0 - share));
                }
            }
            let inside = |i: &usize| (trim..=1.0 - trim).contains(&(as_f64(i + 1) / as_f64(STEPS)));
            let path: Vec<f64> = (0..STEPS - 1).filter(inside).map(|i| path[i]).collect();
            let (average, exponential) = mean_and_exponential(&path);
            limit.average.push(average);
            limit.exponential.push(exponential);
            #[cfg(test)]
            limit.sup.push(path.iter().fold(0.0_f64, |m, w| m.max(*w)));
        }
        limit
    }
}

/// Share of draws at or above a value, the value itself counted as one of them.
pub(super) fn share(draws: &[f64], value: f64) -> f64 {
    as_f64(draws.iter().filter(|d| **d >= value).count() + 1) / as_f64(draws.len() + 1)
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Andrews' critical values at 15 % give the size they are printed for, up to what 10,000 repetitions
    /// tell apart (three standard errors): both sides are fitted to simulations.
    #[test]
    fn hansen_p_values_meet_andrews_table() {
        let text = include_str!("../../fixtures/reference/andrews-supF-15pct.csv");
        for line in text.lines().skip(1) {
            let row: Vec<f64> = line
                .split(',')
                .take(4)
                .map(|v| v.parse().unwrap())
                .collect();
            let k = (1..=40).find(|k| as_f64(*k) >= row[0]).unwrap();
            for (size, f) in [0.1, 0.05, 0.01].into_iter().zip(&row[1..]) {
                let p = sup_p_value(f * row[0], k, 0.15).unwrap();
                let error = (size * (1.0 - size) / 10_000.0_f64).sqrt();
                assert!((p - size).abs() < 3.0 * error, "{k} {size}: {p}");
            }
        }
        assert!(sup_p_value(10.0, 41, 0.15).is_none());
        // The narrowest trimming of the table has a value too; more dates, larger suprema.
        let [narrow, next] = [0.01, 0.02].map(|trim| sup_p_value(10.0, 1, trim).unwrap());
        assert!(narrow > next && narrow < 0.1, "{narrow} {next}");
    }

    /// The simulated limit, by its sup. Discrete steps miss peaks, so its quantile lies a little lower;
    /// four standard errors of a share of 4,000 draws are 0.014.
    #[test]
    fn simulated_limit_meets_andrews_table() {
        let limit = Limit::simulate(2, 0.15, 4000);
        let p = share(&limit.sup, 2.0 * 5.86);
        assert!((p - 0.046).abs() < 0.014, "{p}");
    }
}
