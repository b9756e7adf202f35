//! Likelihood-ratio tests on β and α of a cointegrated system.

use super::super::SeriesError;
use super::super::ols::as_f64;
use super::Johansen;
use crate::dist::chi2_sf;
use crate::linalg::decompose::{column, cross, from_columns, singular, solve_upper, thin_qr};
use crate::linalg::{Matrix, Projector};

/// A likelihood-ratio test.
#[derive(Clone, Debug, PartialEq)]
pub struct LikelihoodRatio {
    /// `n Σ_{i≤r} ln((1 − λ*_i)/(1 − λ_i))`.
    pub statistic: f64,
    /// Degrees of freedom of its asymptotic χ² distribution.
    pub df: usize,
    /// p-value, upper tail.
    pub p_value: f64,
    /// β under the restriction, scaled so that the first non-zero coefficient of each relation is 1.
    pub beta: Matrix,
}

impl Johansen {
    /// Tests `β = H φ`: the same linear restrictions on all r relations.
    ///
    /// H has a row for each name of the system and s ≥ r columns; χ² with `r (rows − s)` degrees of freedom.
    /// Leaving a series out of the relations is H without its unit vector; a known coefficient pair
    /// (income elasticity 1) is a column with both.
    ///
    /// Johansen & Juselius 1990, Oxford Bulletin of Economics and Statistics 52(2).
    ///
    /// # Errors
    /// [`SeriesError::Option`] for a rank or H of the wrong shape, or dependent columns.
    pub fn restrict_beta(&self, rank: usize, h: &Matrix) -> Result<LikelihoodRatio, SeriesError> {
        let rows = self.vectors.rows();
        let fault = |fault: String| SeriesError::Option {
            method: "restrictions on β",
            fault,
        };
        if rank == 0 || rank >= self.series || h.rows() != rows || h.columns() < rank {
            return Err(fault(format!(
                "a rank from 1 to {} and a matrix of {rows} rows and at least {rank} columns are needed",
                self.series - 1
            )));
        }
        let dependent = || fault("the columns of the matrix are linearly dependent".to_owned());
        thin_qr(h).ok_or_else(dependent)?;
        let (values, phi) = reduced_rank(&self.r0, &self.r1.times(h)).ok_or_else(dependent)?;
        let df = rank * (rows - h.columns());
        Ok(self.ratio(rank, &values, &h.times(&phi), df))
    }

    /// Tests that the series at these positions (from 0) are weakly exogenous: their rows of α are zero.
    ///
    /// The remaining changes and the lagged levels are cleared of the changes of the tested series before the
    /// reduced-rank regression; χ² with `r · m` degrees of freedom, m series tested.
    ///
    /// Johansen & Juselius 1990; Johansen 1992, Journal of Econometrics 52.
    ///
    /// # Errors
    /// [`SeriesError::Option`] for positions that do not exist, or that leave fewer equations than
    /// relations.
    pub fn weakly_exogenous(
        &self,
        rank: usize,
        tested: &[usize],
    ) -> Result<LikelihoodRatio, SeriesError> {
        let fault = || SeriesError::Option {
            method: "weak exogeneity",
            fault: format!(
                "a rank from 1 to {} and distinct series that leave at least as many equations are needed",
                self.series - 1
            ),
        };
        let mut distinct = tested.to_vec();
        distinct.sort_unstable();
        distinct.dedup();
        if rank == 0
            || rank >= self.series
            || distinct.len() != tested.len()
            || tested.is_empty()
            || tested.iter().any(|i| *i >= self.series)
            || self.series - tested.len() < rank
        {
            return Err(fault());
        }
        let mut projector = Projector::new(self.observations);
        for &i in tested {
            projector.push(&column(&self.r0, i)).ok_or_else(fault)?;
        }
        let clear = |matrix: &Matrix, keep: &dyn Fn(usize) -> bool| {
            let columns: Vec<Vec<f64>> = (0..matrix.columns())
                .filter(|j| keep(*j))
                .map(|j| {
                    let mut values = column(matrix, j);
                    projector.residuals(&mut values);
                    values
                })
                .collect();
            from_columns(&columns)
        };
        let r0 = clear(&self.r0, &|j| !tested.contains(&j));
        let r1 = clear(&self.r1, &|_| true);
        let (values, beta) = reduced_rank(&r0, &r1).ok_or_else(fault)?;
        Ok(self.ratio(rank, &values, &beta, rank * tested.len()))
    }

    fn ratio(&self, rank: usize, values: &[f64], beta: &Matrix, df: usize) -> LikelihoodRatio {
        let sum: f64 = (0..rank)
            .map(|i| (-values[i]).ln_1p() - (-self.eigenvalues[i]).ln_1p())
            .sum();
        // Zero up to rounding where nothing is restricted.
        let statistic = (as_f64(self.observations) * sum).max(0.0);
        let lead = |j: usize| {
            let largest = (0..beta.rows()).fold(0.0_f64, |m, i| m.max(beta.at(i, j).abs()));
            let first = (0..beta.rows()).find(|i| beta.at(*i, j).abs() > 1e-10 * largest);
            first.map_or(1.0, |i| beta.at(i, j))
        };
        LikelihoodRatio {
            statistic,
            df,
            p_value: chi2_sf(statistic, as_f64(df)),
            beta: Matrix::from_fn(beta.rows(), rank, |i, j| beta.at(i, j) / lead(j)),
        }
    }
}

/// Squared canonical correlations, largest first, and the vectors of the right side.
fn reduced_rank(r0: &Matrix, r1: &Matrix) -> Option<(Vec<f64>, Matrix)> {
    let (left, right) = (thin_qr(r0)?, thin_qr(r1)?);
    let svd = singular(&cross(&left.q, &right.q))?;
    let vectors = solve_upper(&right.r, &svd.right)?;
    Some((
        svd.values.iter().map(|s| (s * s).min(1.0)).collect(),
        vectors,
    ))
}

impl Johansen {
    /// H for [`Johansen::restrict_beta`] that leaves these names out of all relations.
    #[must_use]
    pub fn without(&self, names: &[&str]) -> Matrix {
        let kept: Vec<usize> = (0..self.names.len())
            .filter(|i| !names.contains(&self.names[*i].as_str()))
            .collect();
        let unit = |i: usize, j: usize| f64::from(u8::from(i == kept[j]));
        Matrix::from_fn(self.names.len(), kept.len(), unit)
    }
}
