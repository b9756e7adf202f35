//! Seemingly unrelated regressions.

use super::ols::{as_f64, dot};
use super::outcome::{Distribution, TestResult};
use super::restriction::Reduction;
use super::{EstimateError, Ols, Regressor, Restriction};
use crate::linalg::{LeastSquares, LeastSquaresError, Matrix, least_squares};

/// One equation of a system.
#[derive(Clone, Debug)]
pub struct SystemEquation {
    /// Its name.
    pub name: String,
    /// Dependent variable, n values.
    pub y: Vec<f64>,
    /// Regressors, n values each.
    pub regressors: Vec<Regressor>,
}

/// A system of seemingly unrelated regressions.
#[derive(Clone, Debug)]
pub struct System {
    /// `equation.regressor`, stacked by equation.
    pub names: Vec<String>,
    /// One coefficient a name.
    pub coefficients: Vec<f64>,
    /// `(X'(Σ⁻¹ ⊗ I)X)⁻¹`, on the restricted directions where there are restrictions.
    pub covariance: Matrix,
    /// Covariance of the errors behind the estimate, `e_i'e_j / n` of the round before; where iterated, the
    /// one of its own residuals.
    pub sigma: Matrix,
    /// `y − X β` by equation.
    pub residuals: Vec<Vec<f64>>,
    /// Gaussian log-likelihood at the covariance of these residuals.
    pub log_likelihood: f64,
    /// Breusch & Pagan (1980): `n Σ r_ij²` of the equations' least-squares residuals, χ²(M(M − 1)/2).
    pub breusch_pagan: TestResult,
    /// Rounds of generalised least squares.
    pub rounds: usize,
}

const MOST_ROUNDS: usize = 1000;

/// Fits a system by Zellner's (1962) two steps, or iterated to the maximum of the likelihood.
///
/// Least squares (under the restrictions, errors of one variance) gives residuals, they give
/// `Σ_ij = e_i'e_j/n` (no correction for degrees of freedom), and generalised least squares under Σ the
/// estimates; `iterate` repeats until no coefficient moves by 1e-12 of its standard error. Computed as
/// QR of the stacked data, whitened by the Cholesky factor of Σ. Restrictions name coefficients as
/// `equation.regressor` and may cross equations. A missing value in any equation is an error.
///
/// Equal regressors in all equations give least squares, whatever Σ. Source: Zellner 1962; Greene 2012,
/// chapter 10. Reference: linearmodels 7.1, `estimation.json`.
///
/// # Errors
/// [`EstimateError::SampleDiffers`], [`EstimateError::SingularCovariance`] where residuals of equations
/// are collinear, restrictions as in [`super::restricted`]; else as [`Ols::fit`].
pub fn seemingly_unrelated(
    equations: &[SystemEquation],
    restrictions: &[Restriction],
    iterate: bool,
) -> Result<System, EstimateError> {
    let n = equations.first().map_or(0, |e| e.y.len());
    if let Some(other) = equations.iter().find(|e| e.y.len() != n) {
        return Err(EstimateError::SampleDiffers {
            first: n,
            second: other.y.len(),
        });
    }
    // Each on its own first: names what is collinear, missing or too short.
    let single: Vec<Ols> = equations
        .iter()
        .map(|e| Ols::fit(&e.y, e.regressors.clone()))
        .collect::<Result<_, _>>()?;
    let names: Vec<String> = equations
        .iter()
        .flat_map(|e| {
            e.regressors
                .iter()
                .map(|r| format!("{}.{}", e.name, r.name))
        })
        .collect();
    let reduction = Reduction::new(&names, restrictions)?;
    let count = equations.len();
    let identity = Matrix::from_fn(count, count, |i, j| f64::from(u8::from(i == j)));
    let mut step = generalised(equations, &names, &reduction, &identity)?;
    let mut rounds = 0;
    loop {
        let sigma = moments(&step.residuals);
        let next = generalised(equations, &names, &reduction, &sigma)?;
        let moved = |i: usize| {
            let scale = next.covariance.at(i, i).sqrt();
            (next.coefficients[i] - step.coefficients[i]).abs() > 1e-12 * scale
        };
        let settled = !(0..names.len()).any(moved);
        rounds += 1;
        step = next;
        if !iterate || settled {
            let own = moments(&step.residuals);
            return Ok(System {
                log_likelihood: log_likelihood(&own, n).ok_or_else(|| singular(equations))?,
                sigma: if iterate { own } else { sigma },
                breusch_pagan: breusch_pagan(&single),
                names,
                coefficients: step.coefficients,
                covariance: step.covariance,
                residuals: step.residuals,
                rounds,
            });
        }
        if rounds == MOST_ROUNDS {
            return Err(EstimateError::NoConvergence {
                what: "the system of equations",
                rounds,
            });
        }
    }
}

struct Step {
    coefficients: Vec<f64>,
    covariance: Matrix,
    residuals: Vec<Vec<f64>>,
}

/// Generalised least squares under a given covariance of the errors.
fn generalised(
    equations: &[SystemEquation],
    names: &[String],
    reduction: &Reduction,
    sigma: &Matrix,
) -> Result<Step, EstimateError> {
    let n = equations[0].y.len();
    // Rounding can give a singular matrix a factor; the scaled inverse tells.
    if sigma.inverse_positive_definite().is_none() {
        return Err(singular(equations));
    }
    let root = sigma.cholesky().ok_or_else(|| singular(equations))?;
    // Column j of the inverse of the root: how equation j enters each whitened equation.
    let unit = |j: usize| {
        (0..equations.len())
            .map(|i| f64::from(u8::from(i == j)))
            .collect::<Vec<_>>()
    };
    let weights: Vec<Vec<f64>> = (0..equations.len())
        .map(|j| {
            root.solve_lower(&unit(j))
                .ok_or_else(|| singular(equations))
        })
        .collect::<Result<_, _>>()?;
    let mut y = vec![0.0; n * equations.len()];
    let mut x: Vec<Vec<f64>> = Vec::new();
    for (equation, weights) in equations.iter().zip(&weights) {
        let spread = |v: &[f64]| -> Vec<f64> {
            weights
                .iter()
                .flat_map(|w| v.iter().map(move |v| w * v))
                .collect()
        };
        y.iter_mut()
            .zip(spread(&equation.y))
            .for_each(|(a, b)| *a += b);
        x.extend(equation.regressors.iter().map(|r| spread(&r.values)));
    }
    let (target, free) = reduction.apply(&y, &x);
    let collinear = |error: LeastSquaresError| match error {
        LeastSquaresError::RankDeficient { columns } => EstimateError::Collinear {
            names: columns.iter().map(|&j| names[j].clone()).collect(),
        },
        LeastSquaresError::Shape { rows, columns } => EstimateError::TooFewObservations {
            observations: rows,
            coefficients: columns,
        },
        LeastSquaresError::NotFinite => EstimateError::NotFinite,
    };
    let LeastSquares {
        coefficients,
        inverse_gram,
        ..
    } = least_squares(&free, &target).map_err(collinear)?;
    let coefficients = reduction.expand(&coefficients);
    let mut place = 0;
    let mut residuals = Vec::new();
    for equation in equations {
        let own = &coefficients[place..place + equation.regressors.len()];
        place += own.len();
        let fitted = |t: usize| -> f64 {
            equation
                .regressors
                .iter()
                .zip(own)
                .map(|(r, b)| r.values[t] * b)
                .sum()
        };
        residuals.push(
            equation
                .y
                .iter()
                .enumerate()
                .map(|(t, y)| y - fitted(t))
                .collect(),
        );
    }
    Ok(Step {
        coefficients,
        covariance: reduction.spread(&inverse_gram),
        residuals,
    })
}

/// `e_i'e_j / n`.
fn moments(residuals: &[Vec<f64>]) -> Matrix {
    let n = as_f64(residuals[0].len());
    Matrix::from_fn(residuals.len(), residuals.len(), |i, j| {
        dot(&residuals[i], &residuals[j]) / n
    })
}

/// `−n/2 (M ln 2π + ln|Σ| + M)`.
fn log_likelihood(sigma: &Matrix, n: usize) -> Option<f64> {
    let root = sigma.cholesky()?;
    let m = sigma.rows();
    let log_determinant: f64 = (0..m).map(|i| 2.0 * root.at(i, i).ln()).sum();
    let each = (2.0 * std::f64::consts::PI).ln() + 1.0;
    Some(-as_f64(n) / 2.0 * (as_f64(m) * each + log_determinant))
}

fn breusch_pagan(single: &[Ols]) -> TestResult {
    let mut sum = 0.0;
    for (i, a) in single.iter().enumerate() {
        for b in &single[..i] {
            sum += dot(&a.residuals, &b.residuals).powi(2) / (a.ssr * b.ssr);
        }
    }
    let m = as_f64(single.len());
    let df = m * (m - 1.0) / 2.0;
    let statistic = as_f64(single.first().map_or(0, |e| e.n)) * sum;
    let null = "No correlation of errors across equations";
    TestResult::new(
        "Breusch–Pagan",
        null,
        statistic,
        Distribution::ChiSquared { df },
    )
}

fn singular(equations: &[SystemEquation]) -> EstimateError {
    let names: Vec<&str> = equations.iter().map(|e| e.name.as_str()).collect();
    EstimateError::SingularCovariance {
        what: format!("the errors of {}", names.join(", ")),
    }
}
