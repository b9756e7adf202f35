//! Linear restrictions `R β = r`: tests of them, and least squares under them.

use super::ols::{as_f64, columns, dot};
use super::outcome::{Distribution, TestResult};
use super::{EstimateError, Ols};
use crate::linalg::{Matrix, least_squares};

/// One restriction: a weighted sum of coefficients equals a value.
#[derive(Clone, Debug, PartialEq)]
pub struct Restriction {
    /// Names of coefficients and their weights.
    pub terms: Vec<(String, f64)>,
    /// What the sum equals.
    pub value: f64,
}

impl Restriction {
    /// The restriction that `Σ weight · coefficient = value`.
    #[must_use]
    pub fn new(terms: &[(&str, f64)], value: f64) -> Self {
        let terms = terms.iter().map(|(n, w)| ((*n).to_owned(), *w)).collect();
        Self { terms, value }
    }

    /// That a coefficient is zero.
    #[must_use]
    pub fn zero(name: &str) -> Self {
        Self::new(&[(name, 1.0)], 0.0)
    }

    /// `price + 2 income = 1`.
    fn text(&self) -> String {
        let term = |(name, weight): &(String, f64)| {
            if (*weight - 1.0).abs() < f64::EPSILON {
                name.clone()
            } else {
                format!("{weight} {name}")
            }
        };
        let sum: Vec<String> = self.terms.iter().map(term).collect();
        format!("{} = {}", sum.join(" + "), self.value)
    }
}

/// Tests of linear restrictions.
#[derive(Clone, Debug)]
pub struct LinearTest {
    /// `W = (Rb − r)' (R V R')⁻¹ (Rb − r)`, χ²(q).
    pub wald: TestResult,
    /// `W/q`, F(q, df).
    pub f: TestResult,
    /// `(Rb − r)/√(R V R')`, t(df); of a single restriction only.
    pub t: Option<TestResult>,
}

/// Tests restrictions on k estimates with covariance V (k × k) and `df` residual degrees of freedom.
///
/// With the classical V of least squares the F form equals
/// `[(ssr_r − ssr)/q] / [ssr/(n − k)]` exactly; with a robust one F is an approximation.
/// Source: Greene 2012, chapter 5.
///
/// # Errors
/// An unknown name, a redundant restriction, or a singular covariance of `Rb`.
pub fn test_linear(
    names: &[String],
    estimates: &[f64],
    covariance: &Matrix,
    df: f64,
    restrictions: &[Restriction],
) -> Result<LinearTest, EstimateError> {
    Reduction::new(names, restrictions)?;
    let rows = weights(names, restrictions)?;
    let (k, q) = (names.len(), rows.len());
    let gap: Vec<f64> = rows
        .iter()
        .zip(restrictions)
        .map(|(row, r)| dot(row, estimates) - r.value)
        .collect();
    let r = Matrix::from_fn(q, k, |i, j| rows[i][j]);
    let spread = r.times(covariance).times(&r.transposed());
    let singular = || EstimateError::SingularCovariance {
        what: restrictions
            .iter()
            .map(Restriction::text)
            .collect::<Vec<_>>()
            .join("; "),
    };
    let inverse = spread.inverse_positive_definite().ok_or_else(singular)?;
    let statistic: f64 = (0..q)
        .flat_map(|i| (0..q).map(move |j| (i, j)))
        .map(|(i, j)| gap[i] * inverse.at(i, j) * gap[j])
        .sum();
    let null = restrictions
        .iter()
        .map(Restriction::text)
        .collect::<Vec<_>>()
        .join("; ");
    let (numerator, denominator) = (as_f64(q), df);
    Ok(LinearTest {
        wald: TestResult::new(
            "Wald",
            &null,
            statistic,
            Distribution::ChiSquared { df: numerator },
        ),
        f: TestResult::new(
            "F",
            &null,
            statistic / numerator,
            Distribution::F {
                numerator,
                denominator,
            },
        ),
        t: (q == 1).then(|| {
            let t = gap[0] / spread.at(0, 0).sqrt();
            TestResult::new("t", &null, t, Distribution::T { df })
        }),
    })
}

/// Likelihood ratio `2 (L − L_r)`, χ²(q), of a model nested by q restrictions in another.
#[must_use]
pub fn likelihood_ratio(null: &str, free: f64, restricted: f64, restrictions: usize) -> TestResult {
    let df = as_f64(restrictions);
    let statistic = 2.0 * (free - restricted);
    TestResult::new(
        "likelihood ratio",
        null,
        statistic,
        Distribution::ChiSquared { df },
    )
}

/// Least squares under linear restrictions.
#[derive(Clone, Debug)]
pub struct Restricted {
    /// One coefficient a regressor, in the order of the unrestricted fit.
    pub coefficients: Vec<f64>,
    /// Classical covariance `s² F (F'X'X F)⁻¹ F'`, F spanning the directions left free; singular.
    pub covariance: Matrix,
    /// `y − X β`.
    pub residuals: Vec<f64>,
    /// Sum of squared residuals.
    pub ssr: f64,
    /// `n − k + q`.
    pub df: usize,
    /// `ssr / df`.
    pub s2: f64,
    /// Gaussian log-likelihood at the variance `ssr / n`.
    pub log_likelihood: f64,
    /// `[(ssr_r − ssr)/q] / [ssr/(n − k)]`, F(q, n − k).
    pub f: TestResult,
    /// `n ln(ssr_r/ssr)`, χ²(q).
    pub likelihood_ratio: TestResult,
}

/// Refits an equation under restrictions, by elimination of coefficients and QR of what is left.
/// Source: Greene 2012, chapter 5.
///
/// # Errors
/// An unknown name or a redundant restriction.
pub fn restricted(fit: &Ols, restrictions: &[Restriction]) -> Result<Restricted, EstimateError> {
    let reduction = Reduction::new(&fit.names(), restrictions)?;
    let y = fit.dependent();
    let x = columns(&fit.regressors);
    let (target, free) = reduction.apply(&y, &x);
    let (k, n) = (fit.k, as_f64(fit.n));
    let (gamma, residuals, inverse) = if free.is_empty() {
        (Vec::new(), target, Matrix::from_fn(k, k, |_, _| 0.0))
    } else {
        // Columns of a full-rank X combined by a matrix of full rank: never deficient but by rounding.
        let solution = least_squares(&free, &target)
            .map_err(|_| EstimateError::Collinear { names: fit.names() })?;
        let inverse = reduction.spread(&solution.inverse_gram);
        (solution.coefficients, solution.residuals, inverse)
    };
    let ssr = dot(&residuals, &residuals);
    let q = restrictions.len();
    let df = fit.n - k + q;
    let s2 = ssr / as_f64(df);
    let log_likelihood = -n / 2.0 * ((2.0 * std::f64::consts::PI * ssr / n).ln() + 1.0);
    let null = restrictions
        .iter()
        .map(Restriction::text)
        .collect::<Vec<_>>()
        .join("; ");
    let (numerator, denominator) = (as_f64(q), as_f64(fit.df));
    Ok(Restricted {
        coefficients: reduction.expand(&gamma),
        covariance: Matrix::from_fn(k, k, |i, j| s2 * inverse.at(i, j)),
        residuals,
        ssr,
        df,
        s2,
        log_likelihood,
        f: TestResult::new(
            "F",
            &null,
            (ssr - fit.ssr) / numerator / fit.s2,
            Distribution::F {
                numerator,
                denominator,
            },
        ),
        likelihood_ratio: likelihood_ratio(&null, fit.log_likelihood, log_likelihood, q),
    })
}

fn weights(names: &[String], restrictions: &[Restriction]) -> Result<Vec<Vec<f64>>, EstimateError> {
    let row = |restriction: &Restriction| {
        let mut row = vec![0.0; names.len()];
        for (name, weight) in &restriction.terms {
            let Some(j) = names.iter().position(|n| n == name) else {
                let (name, known) = (name.clone(), names.to_vec());
                return Err(EstimateError::UnknownRegressor { name, known });
            };
            row[j] += weight;
        }
        Ok(row)
    };
    restrictions.iter().map(row).collect()
}

/// Solution `β = base + F γ` of `R β = r`, by elimination with complete pivoting within each row.
pub(super) struct Reduction {
    base: Vec<f64>,
    /// One column (k values) a free coefficient.
    free: Vec<Vec<f64>>,
}

impl Reduction {
    /// # Errors
    /// An unknown name, or a restriction that follows from or contradicts those before it.
    pub(super) fn new(
        names: &[String],
        restrictions: &[Restriction],
    ) -> Result<Self, EstimateError> {
        let k = names.len();
        let mut rows = weights(names, restrictions)?;
        for (row, restriction) in rows.iter_mut().zip(restrictions) {
            row.push(restriction.value);
        }
        let mut pivots: Vec<usize> = Vec::new();
        for i in 0..rows.len() {
            let size = |row: &[f64]| row[..k].iter().fold(0.0_f64, |m, v| m.max(v.abs()));
            let original = weights(names, &restrictions[i..=i])?;
            let pivot = (0..k).max_by(|a, b| rows[i][*a].abs().total_cmp(&rows[i][*b].abs()));
            let Some(pivot) = pivot.filter(|_| size(&rows[i]) > 1e-12 * size(&original[0])) else {
                return Err(EstimateError::RedundantRestriction { position: i + 1 });
            };
            let divisor = rows[i][pivot];
            rows[i].iter_mut().for_each(|v| *v /= divisor);
            let done = rows[i].clone();
            for (other, row) in rows.iter_mut().enumerate() {
                let weight = row[pivot];
                if other != i {
                    row.iter_mut()
                        .zip(&done)
                        .for_each(|(v, d)| *v -= weight * d);
                }
            }
            pivots.push(pivot);
        }
        let mut base = vec![0.0; k];
        for (row, &pivot) in rows.iter().zip(&pivots) {
            base[pivot] = row[k];
        }
        let free = (0..k).filter(|j| !pivots.contains(j)).map(|j| {
            let mut column = vec![0.0; k];
            column[j] = 1.0;
            for (row, &pivot) in rows.iter().zip(&pivots) {
                column[pivot] = -row[j];
            }
            column
        });
        Ok(Self {
            base,
            free: free.collect(),
        })
    }

    /// `y − X base` and the columns of `X F`.
    pub(super) fn apply(&self, y: &[f64], x: &[Vec<f64>]) -> (Vec<f64>, Vec<Vec<f64>>) {
        let combine = |weights: &[f64], t: usize| -> f64 {
            weights.iter().zip(x).map(|(w, column)| w * column[t]).sum()
        };
        let target = y
            .iter()
            .enumerate()
            .map(|(t, v)| v - combine(&self.base, t));
        let columns = self
            .free
            .iter()
            .map(|w| (0..y.len()).map(|t| combine(w, t)).collect());
        (target.collect(), columns.collect())
    }

    /// `base + F γ`.
    pub(super) fn expand(&self, gamma: &[f64]) -> Vec<f64> {
        let add = |j: usize| {
            self.free
                .iter()
                .zip(gamma)
                .map(|(f, g)| f[j] * g)
                .sum::<f64>()
        };
        self.base
            .iter()
            .enumerate()
            .map(|(j, b)| b + add(j))
            .collect()
    }

    /// `F V F'`.
    pub(super) fn spread(&self, v: &Matrix) -> Matrix {
        let f = Matrix::from_fn(self.base.len(), self.free.len(), |i, j| self.free[j][i]);
        f.times(v).times(&f.transposed())
    }
}
