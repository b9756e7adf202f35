//! The vector error-correction model at a given rank.

use super::super::ols::as_f64;
use super::super::series_error::regress;
use super::super::{Ols, Regressor, SeriesError};
use super::Johansen;
use crate::linalg::Matrix;
use crate::linalg::decompose::{cross, inverse};

/// A vector error-correction model by maximum likelihood at rank r.
#[derive(Clone, Debug)]
pub struct Vecm {
    /// Rank r.
    pub rank: usize,
    /// β (series and restricted terms × r), its first r rows the identity.
    pub beta: Matrix,
    /// Asymptotic standard errors of β; zero in the rows that are fixed.
    pub beta_errors: Matrix,
    /// α (series × r).
    pub alpha: Matrix,
    /// Standard errors of α, residual covariance with divisor n.
    pub alpha_errors: Matrix,
    /// One equation a series on the relations (`ec1` …) and the short-run terms, by least squares.
    pub equations: Vec<Ols>,
    /// Residual covariance `e'e/n`, maximum likelihood.
    pub residual_covariance: Matrix,
    /// Log-likelihood.
    pub log_likelihood: f64,
    /// How errors enter the first relation.
    pub relation: RelationErrors,
}

/// To first order the free coefficients of the first relation are `β̂ − β = A⁻¹ Σ_t x_t w_t` with
/// `w_t = (α'Ω⁻¹α)⁻¹ α'Ω⁻¹ e_t`.
#[derive(Clone, Debug)]
pub struct RelationErrors {
    /// x (n × free coefficients): lagged levels without what the short-run terms explain.
    pub regressors: Matrix,
    /// w, n values.
    pub errors: Vec<f64>,
    /// `A⁻¹`.
    pub inverse_gram: Matrix,
    /// Variance of w, the first element of `(α'Ω⁻¹α)⁻¹`.
    pub variance: f64,
}

impl Johansen {
    /// The vector error-correction model at rank r, 1 ≤ r < p.
    ///
    /// β of the reduced-rank regression with its first r rows turned into the identity (the order of the
    /// series matters: the first r must take part in the relations); given β, every equation by least
    /// squares. `Var(vec β_free) = (α'Ω⁻¹α)⁻¹ ⊗ (R₁'R₁)⁻¹` over the free rows of R₁; `Var(α) = Ω ⊗ (Z'Z)⁻¹`.
    ///
    /// Johansen 1995, Likelihood-Based Inference in Cointegrated Vector Autoregressive Models, chapter 13;
    /// Lütkepohl 2005, New Introduction to Multiple Time Series Analysis, section 7.2. Reference value: Danish money, k = 2, restricted constant, seasonal, r = 1: β = (1, −1.0329, 5.2069,
    /// −4.2159, −6.0599), standard error of income 0.1280515245 (statsmodels 0.15.0).
    ///
    /// # Errors
    /// [`SeriesError`]; an option error for other ranks and where the first r series cannot carry the
    /// normalisation.
    pub fn vecm(&self, rank: usize) -> Result<Vecm, SeriesError> {
        let (p, rows) = (self.series, self.vectors.rows());
        if rank == 0 || rank >= p {
            return Err(SeriesError::Option {
                method: "VECM",
                fault: format!(
                    "the rank is between 1 and {}, one less than the series",
                    p - 1
                ),
            });
        }
        let no_normalisation = || SeriesError::Option {
            method: "VECM",
            fault: format!(
                "{} do not take part in the relations alone: put other series first",
                self.names[..rank].join(", ")
            ),
        };
        let raw = Matrix::from_fn(rows, rank, |i, j| self.vectors.at(i, j));
        let head = Matrix::from_fn(rank, rank, |i, j| raw.at(i, j));
        let turned = raw.times(&inverse(&head).ok_or_else(no_normalisation)?);
        // Rounding in the fixed rows would be mistaken for information.
        let beta = Matrix::from_fn(rows, rank, |i, j| {
            if i < rank {
                f64::from(u8::from(i == j))
            } else {
                turned.at(i, j)
            }
        });
        let mut regressors: Vec<Regressor> = (0..rank)
            .map(|j| {
                let values = (0..self.observations)
                    .map(|t| {
                        (0..rows)
                            .map(|i| self.raw.levels[i][t] * beta.at(i, j))
                            .sum()
                    })
                    .collect();
                Regressor::new(&format!("ec{}", j + 1), values)
            })
            .collect();
        regressors.extend(self.raw.short_run.iter().cloned());
        let equations = self
            .raw
            .changes
            .iter()
            .zip(&self.names)
            .map(|(y, name)| regress(name, y, regressors.clone()))
            .collect::<Result<Vec<Ols>, _>>()?;
        let n = as_f64(self.observations);
        let omega = Matrix::from_fn(p, p, |i, j| {
            crate::linalg::product(&equations[i].residuals, &equations[j].residuals) / n
        });
        let alpha = Matrix::from_fn(p, rank, |i, j| equations[i].coefficients[j]);
        let alpha_errors = Matrix::from_fn(p, rank, |i, j| {
            (omega.at(i, i) * equations[i].inverse_gram.at(j, j)).sqrt()
        });
        let precise = inverse(&omega).ok_or_else(no_normalisation)?;
        let loadings = alpha.transposed().times(&precise);
        let weight = inverse(&loadings.times(&alpha)).ok_or_else(no_normalisation)?;
        let combination = weight.times(&loadings);
        let errors = (0..self.observations)
            .map(|t| {
                let parts = equations.iter().enumerate();
                parts
                    .map(|(i, e)| combination.at(0, i) * e.residuals[t])
                    .sum()
            })
            .collect();
        let free = Matrix::from_fn(self.observations, rows - rank, |t, j| {
            self.r1.at(t, rank + j)
        });
        let gram = inverse(&cross(&free, &free)).ok_or_else(no_normalisation)?;
        let beta_errors = Matrix::from_fn(rows, rank, |i, j| {
            if i < rank {
                0.0
            } else {
                (weight.at(j, j) * gram.at(i - rank, i - rank)).sqrt()
            }
        });
        Ok(Vecm {
            rank,
            beta,
            beta_errors,
            alpha,
            alpha_errors,
            equations,
            residual_covariance: omega,
            log_likelihood: self.log_likelihood(rank),
            relation: RelationErrors {
                regressors: free,
                errors,
                inverse_gram: gram,
                variance: weight.at(0, 0),
            },
        })
    }
}

#[cfg(test)]
mod tests {
    use super::super::{JohansenCase, johansen};
    use crate::estimate::test_data::{close, danish};
    use crate::linalg::decompose::column;

    /// The errors' variance and gram give the standard errors of β, and at the maximum of the likelihood the errors
    /// do not correlate with the lagged levels.
    #[test]
    fn errors_of_the_relation_are_those_of_its_coefficients() {
        let series = ["lrm", "lry", "ibo", "ide"].map(danish);
        for case in [JohansenCase::Constant, JohansenCase::RestrictedTrend] {
            let model = johansen(&series, 2, case, &[]).unwrap().vecm(1).unwrap();
            let relation = &model.relation;
            for j in 0..relation.regressors.columns() {
                let error = (relation.variance * relation.inverse_gram.at(j, j)).sqrt();
                close("error", error, model.beta_errors.at(j + 1, 0), 1e-10);
                let x = column(&relation.regressors, j);
                let products: Vec<f64> =
                    x.iter().zip(&relation.errors).map(|(x, w)| x * w).collect();
                let size: f64 = products.iter().map(|p| p.abs()).sum();
                assert!(products.iter().sum::<f64>().abs() < 1e-9 * size);
            }
        }
    }
}
