//! `MacKinnon`'s response surfaces: critical values and p-values of Dickey–Fuller and Engle–Granger t
//! statistics.

use std::sync::LazyLock;

use super::super::Deterministic;
use super::super::ols::as_f64;
use crate::dist::normal_sf;

/// Critical values of a lower-tailed test at 1, 5 and 10 %.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct CriticalValues {
    /// At 1 %.
    pub one: f64,
    /// At 5 %.
    pub five: f64,
    /// At 10 %.
    pub ten: f64,
}

/// Rows `trend,N,numbers…` of a table beside this file.
fn rows(text: &'static str, numbers: usize) -> Vec<(&'static str, usize, Vec<f64>)> {
    text.lines()
        .skip(1)
        .filter_map(|line| {
            let mut cells = line.split(',');
            let (trend, n) = (cells.next()?, cells.next()?.parse().ok()?);
            let values = cells
                .take(numbers)
                .map(str::parse)
                .collect::<Result<_, _>>();
            Some((trend, n, values.ok()?))
        })
        .collect()
}

type Table = LazyLock<Vec<(&'static str, usize, Vec<f64>)>>;

/// Level in per cent, then the coefficients of 1, 1/T, 1/T², 1/T³.
static SURFACES_2010: Table = LazyLock::new(|| rows(include_str!("mackinnon-2010.csv"), 5));

/// τ*, τ min, τ max, the three coefficients of the left-tail polynomial, the four of the other.
static POLYNOMIALS_1994: Table = LazyLock::new(|| rows(include_str!("mackinnon-1994.csv"), 10));

fn code(deterministic: Deterministic) -> &'static str {
    match deterministic {
        Deterministic::None => "n",
        Deterministic::Constant => "c",
        Deterministic::Trend => "ct",
        Deterministic::QuadraticTrend => "ctt",
    }
}

/// Critical values at sample size T of the t statistic of a Dickey–Fuller test (`series` 1) or of an
/// Engle–Granger test among `series` I(1) series: `β∞ + β₁/T + β₂/T² + β₃/T³`.
///
/// `None` where there is no surface: more than 12 series, or no deterministic term and more than one.
///
/// `MacKinnon` 2010, Critical Values for Cointegration Tests, Queen's Economics Department Working Paper
/// 1227. The 10 % row with a constant and 7 series repeats the higher terms of the row
/// for 6 in the copy that this table was read from.
#[must_use]
pub fn mackinnon_critical(
    deterministic: Deterministic,
    series: usize,
    observations: usize,
) -> Option<CriticalValues> {
    let t = as_f64(observations);
    let at = |level: f64| {
        let (_, _, row) = SURFACES_2010.iter().find(|(trend, n, row)| {
            *trend == code(deterministic) && *n == series && (row[0] - level).abs() < 0.5
        })?;
        Some(row[1] + row[2] / t + row[3] / t.powi(2) + row[4] / t.powi(3))
    };
    Some(CriticalValues {
        one: at(1.0)?,
        five: at(5.0)?,
        ten: at(10.0)?,
    })
}

/// Approximate asymptotic p-value of a Dickey–Fuller or Engle–Granger t statistic.
///
/// Among `series` I(1) series (at most 6; `None` above): `Φ(Σ γ_i τ^i)`, with one polynomial up to τ* and
/// another above; 0 and 1 beyond the range of the approximation.
///
/// `MacKinnon` 1994, Journal of Business & Economic Statistics 12(2), tables 3 and 4. Reference value:
/// τ = −1.2630193206 with a constant gives 0.6459167152.
#[must_use]
pub fn mackinnon_p(statistic: f64, deterministic: Deterministic, series: usize) -> Option<f64> {
    let (_, _, row) = POLYNOMIALS_1994
        .iter()
        .find(|(trend, n, _)| *trend == code(deterministic) && *n == series)?;
    Some(if statistic > row[2] {
        1.0
    } else if statistic < row[1] {
        0.0
    } else {
        let coefficients = if statistic <= row[0] {
            &row[3..6]
        } else {
            &row[6..10]
        };
        let z = coefficients
            .iter()
            .rev()
            .fold(0.0, |sum, c| sum * statistic + c);
        normal_sf(-z)
    })
}
