//! The Zivot–Andrews test.

use super::super::long_run::floor_count;
use super::super::ols::as_f64;
use super::super::series_error::{check, differences};
use super::super::{Deterministic, Regressor, SeriesError};
use super::{Lags, adf::choose};
use crate::linalg::{Projector, product};

/// What breaks once under the alternative.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash)]
pub enum Break {
    /// The mean (model A).
    Mean,
    /// The slope of the trend (model B).
    Trend,
    /// Both (model C).
    Both,
}

/// A Zivot–Andrews test.
#[derive(Clone, Debug, PartialEq)]
pub struct ZivotAndrews {
    /// The smallest t statistic over the breaks tried.
    pub statistic: f64,
    /// Observation, from 1, that is the last before the break of that statistic.
    pub break_after: usize,
    /// Lagged differences.
    pub lags: usize,
    /// Rows of each regression.
    pub observations: usize,
}

/// Test of a unit root against trend stationarity with one break at an unknown date:
///
/// `Δy_t = μ + β t + θ 1[t > b] + γ (t − b) 1[t > b] + ρ y_{t−1} + Σ c_i Δy_{t−i} + e_t`,
///
/// θ for a break of the mean, γ for one of the trend; the statistic is the smallest t of ρ over the
/// break dates b that leave the share `trim` of the observations at either end. Lags are given or
/// chosen without a break (with constant and trend). p-values:
/// [`crate::estimate::simulate_unit_root`] at the exact size.
///
/// Zivot & Andrews 1992, Journal of Business & Economic Statistics 10(3), eqs 1' to 3'. Reference
/// value: Danish log real money, both, 1 lag, trim 0.15: −2.6136545960 (arch 8.0.0 and urca 1.3.3).
///
/// # Errors
/// [`SeriesError`]; `trim` is a share between 0 and ⅓.
pub fn zivot_andrews(
    y: &Regressor,
    kind: Break,
    lags: Lags,
    trim: f64,
) -> Result<ZivotAndrews, SeriesError> {
    check(&[y])?;
    if !(0.0..=1.0 / 3.0).contains(&trim) {
        return Err(SeriesError::Option {
            method: "Zivot–Andrews",
            fault: format!("the share trimmed at each end is {trim}; it lies between 0 and 1/3"),
        });
    }
    let n = y.values.len();
    let (lags, _) = choose(y, Deterministic::Trend, lags)?;
    let terms = 5 + lags;
    let too_short = SeriesError::TooShort {
        series: y.name.clone(),
        observations: n,
        needed: 2 * lags + terms + 4,
    };
    if n < 2 * lags + terms + 4 {
        return Err(too_short);
    }
    let change = differences(&y.values);
    let rows = n - 1 - lags;
    let constant = || SeriesError::Constant {
        series: y.name.clone(),
    };
    let mut projector = Projector::new(rows);
    let one = vec![1.0; rows];
    // Centred: the trend then asks nothing of the constant, and lags and level less of both.
    let trend: Vec<f64> = (0..rows).map(|t| as_f64(t) - as_f64(rows) / 2.0).collect();
    projector.push(&one).ok_or_else(constant)?;
    projector.push(&trend).ok_or_else(constant)?;
    for i in 1..=lags {
        projector
            .push(&change[lags - i..lags - i + rows])
            .ok_or_else(constant)?;
    }
    let base = projector.len();
    let trimmed = floor_count(as_f64(n) * trim, n);
    let mut best: Option<(f64, usize)> = None;
    // Row r explains observation lags + 1 + r (from 0); a break after b of them.
    for b in (trimmed + 1)..=(n - trimmed) {
        let Some(first) = b.checked_sub(lags + 1).filter(|f| *f > 0 && *f < rows) else {
            continue;
        };
        projector.truncate(base);
        let step: Vec<f64> = (0..rows)
            .map(|r| if r < first { 0.0 } else { 1.0 })
            .collect();
        let slope: Vec<f64> = (0..rows)
            .map(|r| {
                if r < first {
                    0.0
                } else {
                    as_f64(r - first + 1)
                }
            })
            .collect();
        let pushed = match kind {
            Break::Mean => projector.push(&step),
            Break::Trend => projector.push(&slope),
            Break::Both => projector.push(&step).and_then(|_| projector.push(&slope)),
        };
        if pushed.is_none() {
            continue;
        }
        if let Some(t) = last_t(
            &projector,
            &y.values[lags..n - 1],
            &change[lags..],
            rows - projector.len() - 1,
        ) && best.is_none_or(|(least, _)| t < least)
        {
            best = Some((t, b));
        }
    }
    let (statistic, break_after) = best.ok_or(too_short)?;
    Ok(ZivotAndrews {
        statistic,
        break_after,
        lags,
        observations: rows,
    })
}

/// t statistic of `x` in the regression of `y` on the columns held and `x`.
pub(in super::super) fn last_t(
    projector: &Projector,
    x: &[f64],
    y: &[f64],
    df: usize,
) -> Option<f64> {
    let (mut x, mut y) = (x.to_vec(), y.to_vec());
    let before = product(&x, &x);
    projector.residuals(&mut x);
    projector.residuals(&mut y);
    let xx = product(&x, &x);
    if xx.is_nan() || xx <= 1e-20 * before {
        return None;
    }
    let slope = product(&x, &y) / xx;
    y.iter_mut().zip(&x).for_each(|(y, x)| *y -= slope * x);
    let variance = product(&y, &y) / as_f64(df);
    (variance > 0.0).then(|| slope / (variance / xx).sqrt())
}
