//! Least squares for replications: one factorisation, no pivoting, no refinement.

use super::product;

/// A column of which less than this fraction is left after projection counts as dependent.
const DEPENDENT: f64 = 1e-10;

/// Least squares of y on k columns of n values, with what covariances need.
///
/// Modified Gram–Schmidt of the columns with y as the last one, which is as stable for the coefficients
/// as Householder's method (Björck 1967). Several times faster than [`super::least_squares`] and several
/// digits short of it on ill-conditioned data: for bootstraps and simulations, whose own error is larger.
#[derive(Clone, Debug)]
pub struct ThinFit {
    rows: usize,
    /// Orthonormal columns, one after the other.
    basis: Vec<f64>,
    /// R⁻¹, upper triangular, by rows.
    inverse_r: Vec<f64>,
    /// The k coefficients.
    pub coefficients: Vec<f64>,
    /// The n residuals.
    pub residuals: Vec<f64>,
    /// Sum of squared residuals.
    pub ssr: f64,
}

impl ThinFit {
    /// Fits y on the columns that stand one after the other in `columns`; none where they depend on each
    /// other, a value is not finite, or no degree of freedom is left.
    #[must_use]
    pub fn new(mut columns: Vec<f64>, mut y: Vec<f64>) -> Option<Self> {
        let n = y.len();
        let k = columns.len().checked_div(n)?;
        if k == 0 || n <= k || columns.len() != n * k {
            return None;
        }
        let mut r = vec![0.0; k * k];
        let mut right = vec![0.0; k];
        let lengths: Vec<f64> = columns.chunks_exact(n).map(|c| product(c, c)).collect();
        for j in 0..k {
            let (done, rest) = columns.split_at_mut((j + 1) * n);
            let unit = &mut done[j * n..];
            let size = product(unit, unit);
            // Written so that a NaN is refused.
            let independent = size > DEPENDENT * DEPENDENT * lengths[j];
            if !independent {
                return None;
            }
            let length = size.sqrt();
            unit.iter_mut().for_each(|v| *v /= length);
            r[j * k + j] = length;
            for (l, other) in rest.chunks_exact_mut(n).enumerate() {
                r[j * k + j + 1 + l] = take_out(unit, other);
            }
            right[j] = take_out(unit, &mut y);
        }
        let mut inverse_r = vec![0.0; k * k];
        for j in (0..k).rev() {
            inverse_r[j * k + j] = 1.0 / r[j * k + j];
            for c in j + 1..k {
                let sum: f64 = (j + 1..=c)
                    .map(|l| r[j * k + l] * inverse_r[l * k + c])
                    .sum();
                inverse_r[j * k + c] = -sum / r[j * k + j];
            }
        }
        let coefficients = (0..k)
            .map(|j| product(&inverse_r[j * k + j..(j + 1) * k], &right[j..]))
            .collect();
        let ssr = product(&y, &y);
        ssr.is_finite().then_some(Self {
            rows: n,
            basis: columns,
            inverse_r,
            coefficients,
            residuals: y,
            ssr,
        })
    }

    /// Residual degrees of freedom, n − k.
    #[must_use]
    pub fn df(&self) -> usize {
        self.rows - self.coefficients.len()
    }

    /// Row j of `(X'X)⁻¹ X'`: what each observation of y adds to coefficient j. Their products over
    /// observations are the elements of `(X'X)⁻¹`, and of `(X'X)⁻¹ X'Z (Z'Z)⁻¹` across two fits on one sample.
    #[must_use]
    pub fn influence(&self, j: usize) -> Vec<f64> {
        let k = self.coefficients.len();
        let mut influence = vec![0.0; self.rows];
        let weights = &self.inverse_r[j * k + j..(j + 1) * k];
        let units = self.basis[j * self.rows..].chunks_exact(self.rows);
        for (weight, unit) in weights.iter().zip(units) {
            for (sum, value) in influence.iter_mut().zip(unit) {
                *sum += weight * value;
            }
        }
        influence
    }

    /// Element (i, j) of `(X'X)⁻¹`.
    #[must_use]
    pub fn inverse_gram(&self, i: usize, j: usize) -> f64 {
        let k = self.coefficients.len();
        let from = i.max(j);
        let row = |i: usize| &self.inverse_r[i * k + from..(i + 1) * k];
        product(row(i), row(j))
    }
}

/// Takes the part along a unit vector out and returns its length.
fn take_out(unit: &[f64], values: &mut [f64]) -> f64 {
    let weight = product(unit, values);
    for (value, unit) in values.iter_mut().zip(unit) {
        *value -= weight * unit;
    }
    weight
}

#[cfg(test)]
mod tests {
    use approx::assert_relative_eq;

    use super::*;
    use crate::linalg::least_squares;

    #[test]
    fn agrees_with_pivoted_qr() {
        let value = |i: usize, j: usize| ((i * 7 + j * 13 + i * i * j) as f64 * 0.37).sin();
        let columns: Vec<Vec<f64>> = (0..5)
            .map(|j| (0..31).map(|i| value(i, j) + 0.1 * i as f64).collect())
            .collect();
        let y: Vec<f64> = (0..31).map(|i| value(i, 9)).collect();
        let slow = least_squares(&columns, &y).unwrap();
        let fast = ThinFit::new(columns.concat(), y.clone()).unwrap();
        for j in 0..5 {
            let (a, b) = (fast.coefficients[j], slow.coefficients[j]);
            assert_relative_eq!(a, b, epsilon = 1e-12, max_relative = 1e-10);
            let influence = fast.influence(j);
            assert_relative_eq!(
                product(&influence, &y),
                b,
                epsilon = 1e-12,
                max_relative = 1e-10
            );
            for l in 0..5 {
                let wanted = slow.inverse_gram.at(j, l);
                assert_relative_eq!(fast.inverse_gram(j, l), wanted, max_relative = 1e-9);
                let by_influence = product(&influence, &fast.influence(l));
                assert_relative_eq!(by_influence, wanted, max_relative = 1e-9);
            }
        }
        let ssr: f64 = slow.residuals.iter().map(|e| e * e).sum();
        assert_relative_eq!(fast.ssr, ssr, max_relative = 1e-11);
        assert_eq!(fast.df(), 26);
    }

    #[test]
    fn what_has_no_answer_gives_none() {
        let one = vec![1.0; 4];
        let twice = [one.clone(), one.clone()].concat();
        let y = vec![1.0, 2.0, 4.0, 3.0];
        assert!(ThinFit::new(twice, y.clone()).is_none());
        assert!(ThinFit::new(vec![], y.clone()).is_none());
        assert!(ThinFit::new(vec![f64::NAN, 1.0, 1.0, 1.0], y).is_none());
        assert!(ThinFit::new(one, vec![1.0, f64::INFINITY, 0.0, 0.0]).is_none());
    }
}
