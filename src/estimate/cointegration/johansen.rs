//! Johansen's reduced-rank regression and rank tests.

use super::super::ols::as_f64;
use super::super::series_error::{check, differences};
use super::super::{Regressor, SeriesError};
use crate::linalg::decompose::{
    ThinQr, column, cross, from_columns, singular, solve_upper, thin_qr,
};
use crate::linalg::{Matrix, Projector};

/// Johansen's five deterministic cases.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord, Hash)]
pub enum JohansenCase {
    /// No deterministic terms.
    None,
    /// Constant restricted to the cointegrating relations.
    RestrictedConstant,
    /// Constant unrestricted.
    Constant,
    /// Trend restricted to the cointegrating relations, constant unrestricted.
    RestrictedTrend,
    /// Constant and trend unrestricted.
    Trend,
}

/// A rank test at one null.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct RankTest {
    /// The null: at most this rank.
    pub rank: usize,
    /// Trace statistic, against any higher rank.
    pub trace: f64,
    /// Maximum eigenvalue statistic, against one more.
    pub max_eigenvalue: f64,
    /// Trace with `n − p k` for n (Reinsel & Ahn 1992).
    pub trace_small_sample: f64,
    /// Maximum eigenvalue likewise.
    pub max_eigenvalue_small_sample: f64,
}

/// A reduced-rank regression.
#[derive(Clone, Debug)]
pub struct Johansen {
    /// Names of the p series, then `const` or `trend` where restricted to the relations: the rows of β.
    pub names: Vec<String>,
    /// Number of series p.
    pub series: usize,
    /// Lags k of the levels.
    pub lags: usize,
    /// Deterministic case.
    pub case: JohansenCase,
    /// Rows n.
    pub observations: usize,
    /// p eigenvalues, largest first.
    pub eigenvalues: Vec<f64>,
    /// All p eigenvectors as columns, `β'S₁₁β = I`; the first r span the relations of rank r.
    pub vectors: Matrix,
    /// Tests of rank 0, 1, …, p − 1.
    pub tests: Vec<RankTest>,
    /// `Δy_t` (n × p) without what the short-run terms explain.
    pub(super) r0: Matrix,
    /// Lagged levels (n × p or p + 1) likewise.
    pub(super) r1: Matrix,
    /// `Δy_t` and lagged levels as they are, and the short-run terms with their names.
    pub raw: JohansenRows,
}

/// The rows of a reduced-rank regression.
#[derive(Clone, Debug)]
pub struct JohansenRows {
    /// `Δy_t`, one column a series.
    pub changes: Vec<Vec<f64>>,
    /// Lagged levels, one column a name of the system.
    pub levels: Vec<Vec<f64>>,
    /// Short-run terms.
    pub short_run: Vec<Regressor>,
}

/// Johansen's reduced-rank regression of p series with k lags in levels:
///
/// `Δy_t = α β'(y_{t−1}, d^r_t) + Σ_{i=1}^{k−1} Γ_i Δy_{t−i} + Φ d_t + Ψ w_t + e_t`,
///
/// w any I(0) terms that enter unrestricted (centred seasonal dummies, impulses), given over all
/// observations. Eigenvalues are the squared canonical correlations between the residuals of `Δy_t` and
/// of the lagged levels, as singular values of `Q₀'Q₁` (no cross product is formed).
/// `trace(r) = −n Σ_{i>r} ln(1 − λ_i)`, `max(r) = −n ln(1 − λ_{r+1})`; the trend counts 1 to n over the rows. Null
/// distributions depend on p − r and the case alone, not with dummies other than centred ones.
///
/// Johansen 1988, Journal of Economic Dynamics and Control 12; 1991, Econometrica 59(6); 1995. Small
/// samples: Reinsel & Ahn 1992. Reference value: Danish money, k = 2, restricted constant, centred
/// seasonal dummies: λ₁ = 0.4331654195, trace(0) = 49.1443651819 (Johansen & Juselius 1990: 0.4332, 49.14).
///
/// # Errors
/// [`SeriesError`]; k is at least 1, and dependent terms are named.
pub fn johansen(
    series: &[Regressor],
    lags: usize,
    case: JohansenCase,
    exogenous: &[Regressor],
) -> Result<Johansen, SeriesError> {
    let all: Vec<&Regressor> = series.iter().chain(exogenous).collect();
    check(&all)?;
    let (p, total) = (series.len(), series.first().map_or(0, |s| s.values.len()));
    if p < 2 || lags == 0 {
        return Err(SeriesError::Option {
            method: "Johansen",
            fault: "at least two series and one lag are needed".to_owned(),
        });
    }
    let restricted = usize::from(matches!(
        case,
        JohansenCase::RestrictedConstant | JohansenCase::RestrictedTrend
    ));
    let size = p * lags + 2 + exogenous.len() + restricted;
    if total < lags + size + p {
        return Err(SeriesError::TooShort {
            series: series[0].name.clone(),
            observations: total,
            needed: lags + size + p,
        });
    }
    let n = total - lags;
    let one = vec![1.0; n];
    let trend: Vec<f64> = (1..=n).map(as_f64).collect();
    let changes: Vec<Vec<f64>> = series
        .iter()
        .map(|s| differences(&s.values[lags - 1..]))
        .collect();
    let mut levels: Vec<Vec<f64>> = series
        .iter()
        .map(|s| s.values[lags - 1..total - 1].to_vec())
        .collect();
    let mut names: Vec<String> = series.iter().map(|s| s.name.clone()).collect();
    let mut short_run = Vec::new();
    match case {
        JohansenCase::None => {}
        JohansenCase::RestrictedConstant => {
            levels.push(one);
            names.push("const".to_owned());
        }
        JohansenCase::Constant => short_run.push(Regressor::new("const", one)),
        JohansenCase::RestrictedTrend => {
            short_run.push(Regressor::new("const", one));
            levels.push(trend);
            names.push("trend".to_owned());
        }
        JohansenCase::Trend => {
            short_run.push(Regressor::new("const", one));
            short_run.push(Regressor::new("trend", trend));
        }
    }
    short_run.extend(
        exogenous
            .iter()
            .map(|w| Regressor::new(&w.name, w.values[lags..].to_vec())),
    );
    for lag in 1..lags {
        short_run.extend(series.iter().map(|s| {
            let values = differences(&s.values[lags - 1 - lag..total - lag]);
            Regressor::new(&format!("d.{}.L{lag}", s.name), values)
        }));
    }
    let collinear = |terms: Vec<String>| SeriesError::Collinear {
        series: series[0].name.clone(),
        terms,
    };
    let mut projector = Projector::new(n);
    for term in &short_run {
        projector
            .push(&term.values)
            .ok_or_else(|| collinear(vec![term.name.clone()]))?;
    }
    let residuals = |columns: &[Vec<f64>]| {
        let mut left = columns.to_vec();
        left.iter_mut().for_each(|c| projector.residuals(c));
        from_columns(&left)
    };
    let (r0, r1) = (residuals(&changes), residuals(&levels));
    let left = independent(&r0, &changes).ok_or_else(|| collinear(names.clone()))?;
    let right = independent(&r1, &levels).ok_or_else(|| collinear(names.clone()))?;
    let svd = singular(&cross(&left.q, &right.q)).ok_or_else(|| collinear(names.clone()))?;
    // R₁ v scaled so that β'S₁₁β = I with S₁₁ = R₁'R₁/n.
    let scaled = solve_upper(&right.r, &svd.right).ok_or_else(|| collinear(names.clone()))?;
    let vectors = Matrix::from_fn(scaled.rows(), p, |i, j| scaled.at(i, j) * as_f64(n).sqrt());
    // Rounding can carry a correlation of one above it.
    let eigenvalues: Vec<f64> = svd.values.iter().map(|s| (s * s).min(1.0)).collect();
    let corrected = as_f64(n) - as_f64(p * lags);
    let log = |i: usize| -(-eigenvalues[i]).ln_1p();
    let tests = (0..p)
        .map(|rank| {
            let sum: f64 = (rank..p).map(log).sum();
            RankTest {
                rank,
                trace: as_f64(n) * sum,
                max_eigenvalue: as_f64(n) * log(rank),
                trace_small_sample: corrected * sum,
                max_eigenvalue_small_sample: corrected * log(rank),
            }
        })
        .collect();
    Ok(Johansen {
        names,
        series: p,
        lags,
        case,
        observations: n,
        eigenvalues,
        vectors,
        tests,
        r0,
        r1,
        raw: JohansenRows {
            changes,
            levels,
            short_run,
        },
    })
}

/// QR of residual columns; `None` where they depend on each other or the projection took all.
fn independent(residuals: &Matrix, whole: &[Vec<f64>]) -> Option<ThinQr> {
    let varies = (0..residuals.columns()).all(|j| {
        let size = |v: &[f64]| v.iter().map(|v| v * v).sum::<f64>();
        size(&column(residuals, j)) > 1e-24 * size(&whole[j])
    });
    if varies { thin_qr(residuals) } else { None }
}

impl Johansen {
    /// Relation `i` (from 0) scaled so that the coefficient of series `on` is 1.
    ///
    /// `None` for a relation or series that does not exist.
    #[must_use]
    pub fn relation(&self, i: usize, on: usize) -> Option<Vec<f64>> {
        if i >= self.series || on >= self.series {
            return None;
        }
        let vector = column(&self.vectors, i);
        Some(vector.iter().map(|v| v / vector[on]).collect())
    }

    /// `−n/2 (p ln 2π + p + ln|S₀₀| + Σ_{i≤r} ln(1 − λ_i))`: the maximised log-likelihood at rank r.
    #[must_use]
    pub fn log_likelihood(&self, rank: usize) -> f64 {
        let (n, p) = (as_f64(self.observations), as_f64(self.series));
        let s00 = cross(&self.r0, &self.r0);
        let s00 = Matrix::from_fn(self.series, self.series, |i, j| s00.at(i, j) / n);
        let reduced: f64 = self.eigenvalues[..rank.min(self.series)]
            .iter()
            .map(|l| (-l).ln_1p())
            .sum();
        let log_determinant = crate::linalg::decompose::determinant(&s00).ln();
        -0.5 * n * (p * (2.0 * std::f64::consts::PI).ln() + p + log_determinant + reduced)
    }
}
