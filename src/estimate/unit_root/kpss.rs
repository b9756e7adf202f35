//! The KPSS test.

use super::super::long_run::{automatic_lags, long_run_variance};
use super::super::ols::as_f64;
use super::super::series_error::{check, regress};
use super::super::{Deterministic, Regressor, SeriesError};

/// Lags of the long-run variance in the KPSS test.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash)]
pub enum KpssLags {
    /// As given.
    Fixed(usize),
    /// Chosen from the residuals (Hobijn, Franses & Ooms 1998).
    Automatic,
}

/// What a p-value read from a table of a few levels says.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash)]
pub enum PBound {
    /// Interpolated between two levels.
    Interpolated,
    /// The statistic lies beyond the table: p is at most this.
    AtMost,
    /// The statistic lies before the table: p is at least this.
    AtLeast,
}

/// A KPSS test.
#[derive(Clone, Debug, PartialEq)]
pub struct Kpss {
    /// η̂.
    pub statistic: f64,
    /// Lags of the Bartlett kernel: the statistic means nothing without them.
    pub lags: usize,
    /// p-value, upper tail, between 0.01 and 0.10.
    pub p_value: f64,
    /// How to read it.
    pub bound: PBound,
    /// Critical values at 10, 5, 2.5 and 1 %.
    pub critical: [f64; 4],
}

const LEVELS: [f64; 4] = [0.10, 0.05, 0.025, 0.01];
const AROUND_MEAN: [f64; 4] = [0.347, 0.463, 0.574, 0.739];
const AROUND_TREND: [f64; 4] = [0.119, 0.146, 0.176, 0.216];

/// Test of stationarity around a mean (constant) or a trend against a unit root.
///
/// `η̂ = Σ S_t² / (n² λ²)`, `S_t` the partial sums of the residuals from the deterministic terms, `λ²` their
/// long-run variance (Bartlett, divisor n). Upper tail; the p-value is interpolated between the
/// published levels and says where it is a bound.
///
/// Kwiatkowski, Phillips, Schmidt & Shin 1992, Journal of Econometrics 54, table 1. Reference
/// value: Danish log real money around its mean, 4 lags: 0.6445125057 (arch 8.0.0).
///
/// # Errors
/// [`SeriesError`]; deterministic terms other than these two are an option that the test does not have.
pub fn kpss(
    y: &Regressor,
    deterministic: Deterministic,
    lags: KpssLags,
) -> Result<Kpss, SeriesError> {
    check(&[y])?;
    let critical = match deterministic {
        Deterministic::Constant => AROUND_MEAN,
        Deterministic::Trend => AROUND_TREND,
        Deterministic::None | Deterministic::QuadraticTrend => {
            return Err(SeriesError::Option {
                method: "KPSS",
                fault: "deterministic terms are a constant, or a constant and a trend".to_owned(),
            });
        }
    };
    let n = y.values.len();
    let fit = regress(&y.name, &y.values, deterministic.columns(n))?;
    let lags = match lags {
        KpssLags::Fixed(lags) => lags,
        KpssLags::Automatic => automatic_lags(&fit.residuals),
    };
    if lags >= n {
        return Err(SeriesError::TooShort {
            series: y.name.clone(),
            observations: n,
            needed: lags + 1,
        });
    }
    let variance = long_run_variance(&fit.residuals, lags);
    let scale: f64 = y.values.iter().map(|v| v * v).sum();
    if !(variance > 0.0 && fit.ssr > 1e-26 * scale) {
        return Err(SeriesError::Constant {
            series: y.name.clone(),
        });
    }
    let mut sum = 0.0;
    let squares: f64 = fit
        .residuals
        .iter()
        .map(|e| {
            sum += e;
            sum * sum
        })
        .sum();
    let statistic = squares / (as_f64(n).powi(2) * variance);
    let (p_value, bound) = p_between(statistic, &critical);
    Ok(Kpss {
        statistic,
        lags,
        p_value,
        bound,
        critical,
    })
}

fn p_between(statistic: f64, critical: &[f64; 4]) -> (f64, PBound) {
    if statistic < critical[0] {
        return (LEVELS[0], PBound::AtLeast);
    }
    let Some(i) = (0..3).find(|i| statistic < critical[i + 1]) else {
        return (LEVELS[3], PBound::AtMost);
    };
    let share = (statistic - critical[i]) / (critical[i + 1] - critical[i]);
    let p = LEVELS[i] + share * (LEVELS[i + 1] - LEVELS[i]);
    (p, PBound::Interpolated)
}
