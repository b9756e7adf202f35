//! How errors enter coefficients, and the covariance across equations that follows.

use crate::estimate::{CovarianceKind, EstimateError, Ols, covariance, long_run_covariance};
use crate::linalg::{Matrix, product};

/// How an equation's errors enter its coefficients: to first order `β̂ − β = A⁻¹ Σ_t x_t e_t`.
pub(super) enum Dependence {
    /// Covariance from the scores of a regression.
    Scores(Box<Ols>, CovarianceKind),
    /// Independent errors of one variance.
    Independent(Linear),
    /// Errors correlated over time, independent of the regressors; lags of the Bartlett kernel.
    LongRun(Linear, usize),
}

/// The parts of `A⁻¹ Σ_t x_t e_t`.
pub(super) struct Linear {
    /// Place of the first row among the periods of the sample.
    pub(super) first: usize,
    /// x, one column a coefficient.
    pub(super) regressors: Vec<Vec<f64>>,
    /// e.
    pub(super) errors: Vec<f64>,
    /// `A⁻¹`; times `variance` the covariance of the coefficients.
    pub(super) inverse_gram: Matrix,
    /// Variance of e, over the long run where it is correlated.
    pub(super) variance: f64,
}

impl Linear {
    /// Of a least-squares fit whose first row is at this place.
    pub(super) fn of(fit: &Ols, first: usize, variance: f64) -> Self {
        Self {
            first,
            regressors: fit.regressors.iter().map(|r| r.values.clone()).collect(),
            errors: fit.residuals.clone(),
            inverse_gram: fit.inverse_gram.clone(),
            variance,
        }
    }

    pub(super) fn covariance(&self) -> Matrix {
        let k = self.inverse_gram.rows();
        Matrix::from_fn(k, k, |i, j| self.variance * self.inverse_gram.at(i, j))
    }
}

/// Covariance of the coefficients of one equation (rows) with those of the other (columns).
///
/// From scores `A₁⁻¹ Ω₁₂ A₂⁻¹`; else `r √(v₁ v₂) A₁⁻¹ (Σ x₁ x₂') A₂⁻¹` over the dates that both equations have, r the
/// correlation of the errors there, over the long run where they are correlated over time. A correlation lies
/// within ±1, which keeps the joint covariance semi-definite where the samples differ by their lags.
pub(super) fn cross(first: &Dependence, second: &Dependence) -> Result<Matrix, EstimateError> {
    match (first, second) {
        (Dependence::Scores(a, kind), Dependence::Scores(b, _)) => {
            let joint = covariance(&[a, b], *kind)?;
            Ok(Matrix::from_fn(a.k, b.k, |i, j| joint.at(i, a.k + j)))
        }
        (Dependence::Independent(a), Dependence::Independent(b)) => Ok(between(a, b, |x, y| {
            [product(x, x), product(x, y), product(y, y)]
        })),
        (Dependence::LongRun(a, lags), Dependence::LongRun(b, _)) => Ok(between(a, b, |x, y| {
            let omega = long_run_covariance(&[x.to_vec(), y.to_vec()], *lags).two_sided;
            [omega.at(0, 0), omega.at(0, 1), omega.at(1, 1)]
        })),
        // One estimator gives both equations one kind of dependence.
        _ => Err(EstimateError::Setting {
            setting: "the covariance across equations",
            allowed: "of two equations by one estimator",
        }),
    }
}

fn between(a: &Linear, b: &Linear, moments: impl Fn(&[f64], &[f64]) -> [f64; 3]) -> Matrix {
    let from = a.first.max(b.first);
    let to = (a.first + a.errors.len()).min(b.first + b.errors.len());
    let own = |linear: &Linear| from - linear.first..to.max(from) - linear.first;
    let (rows_a, rows_b) = (own(a), own(b));
    let [aa, ab, bb] = moments(&a.errors[rows_a.clone()], &b.errors[rows_b.clone()]);
    let scale = ab / (aa * bb).sqrt() * (a.variance * b.variance).sqrt();
    // A perfect fit has no errors to be correlated.
    let scale = if scale.is_finite() { scale } else { 0.0 };
    let middle = Matrix::from_fn(a.regressors.len(), b.regressors.len(), |i, j| {
        scale
            * product(
                &a.regressors[i][rows_a.clone()],
                &b.regressors[j][rows_b.clone()],
            )
    });
    a.inverse_gram.times(&middle).times(&b.inverse_gram)
}

#[cfg(test)]
mod tests {
    use approx::assert_relative_eq;

    use super::*;
    use crate::estimate::Regressor;
    use crate::random::Draws;

    fn fit(draws: &mut Draws, shared: &[f64], x: usize) -> Ols {
        let n = shared.len();
        let mut regressors = vec![Regressor::constant(n)];
        for i in 0..x {
            let values = (0..n).map(|_| draws.normal()).collect();
            regressors.push(Regressor::new(&format!("x{i}"), values));
        }
        let y: Vec<f64> = shared.iter().map(|s| s + draws.normal()).collect();
        Ols::fit(&y, regressors).unwrap()
    }

    /// On one sample independent errors give the joint covariance of the estimate room; on samples that differ by
    /// two dates nearly so.
    #[test]
    fn independent_errors_covary_on_the_dates_that_both_have() {
        let mut draws = Draws::new(7, 0);
        let shared: Vec<f64> = (0..40).map(|_| draws.normal()).collect();
        let (a, b) = (fit(&mut draws, &shared, 1), fit(&mut draws, &shared, 2));
        let form = |fit: &Ols, first| Dependence::Independent(Linear::of(fit, first, fit.s2));
        let found = cross(&form(&a, 0), &form(&b, 0)).unwrap();
        let joint = covariance(&[&a, &b], CovarianceKind::Classical).unwrap();
        for i in 0..2 {
            for j in 0..3 {
                assert_relative_eq!(found.at(i, j), joint.at(i, 2 + j), max_relative = 1e-10);
            }
        }
        let short = Linear::of(&a, 0, a.s2);
        let later = Linear {
            first: 2,
            regressors: short.regressors.iter().map(|r| r[2..].to_vec()).collect(),
            errors: short.errors[2..].to_vec(),
            ..short
        };
        let found = cross(&Dependence::Independent(later), &form(&b, 0)).unwrap();
        assert_relative_eq!(found.at(0, 0), joint.at(0, 2), max_relative = 0.2);
        // No lags: the long-run variance is the mean square, and the divisor alone differs.
        let long_run = |fit: &Ols| Dependence::LongRun(Linear::of(fit, 0, fit.s2), 0);
        let found = cross(&long_run(&a), &long_run(&b)).unwrap();
        assert_relative_eq!(found.at(1, 1), joint.at(1, 3), max_relative = 1e-10);
    }

    /// An equation across from itself has its own covariance.
    #[test]
    fn an_equation_covaries_fully_with_itself() {
        let mut draws = Draws::new(8, 0);
        let fit = fit(&mut draws, &[0.5; 30], 1);
        let form = || Linear::of(&fit, 0, 0.37);
        for pair in [
            [
                Dependence::Independent(form()),
                Dependence::Independent(form()),
            ],
            [
                Dependence::LongRun(form(), 3),
                Dependence::LongRun(form(), 3),
            ],
        ] {
            let found = cross(&pair[0], &pair[1]).unwrap();
            assert_relative_eq!(
                found.at(1, 1),
                form().covariance().at(1, 1),
                max_relative = 1e-10
            );
        }
    }
}
