//! Linear algebra for estimation: a dense matrix and least squares. Hides the library behind it.
//!
//! Start reading at [`least_squares`]. `X'X` is never formed or inverted; its inverse, where a
//! covariance needs it, comes from the triangular factor.

use nalgebra::{DMatrix, DVector, RowDVector};

pub mod decompose;
mod projector;
mod thin;

pub use projector::{Projector, product};
pub use thin::ThinFit;

/// A dense matrix of doubles.
#[derive(Clone, Debug, PartialEq)]
pub struct Matrix(DMatrix<f64>);

impl Matrix {
    /// The matrix whose element (row, column) is `f(row, column)`.
    #[must_use]
    pub fn from_fn(rows: usize, columns: usize, f: impl FnMut(usize, usize) -> f64) -> Self {
        Self(DMatrix::from_fn(rows, columns, f))
    }

    /// Number of rows.
    #[must_use]
    pub fn rows(&self) -> usize {
        self.0.nrows()
    }

    /// Number of columns.
    #[must_use]
    pub fn columns(&self) -> usize {
        self.0.ncols()
    }

    /// Element at (row, column), both from 0.
    #[must_use]
    pub fn at(&self, row: usize, column: usize) -> f64 {
        self.0[(row, column)]
    }

    /// The product `self · other`; `self` has as many columns as `other` rows.
    #[must_use]
    pub fn times(&self, other: &Self) -> Self {
        Self(&self.0 * &other.0)
    }

    /// The transpose.
    #[must_use]
    pub fn transposed(&self) -> Self {
        Self(self.0.transpose())
    }

    /// The lower triangular `L` with `L L' = self`; none unless `self` is symmetric and positive
    /// definite (only the lower triangle is read).
    #[must_use]
    pub fn cholesky(&self) -> Option<Self> {
        self.0.clone().cholesky().map(|c| Self(c.l()))
    }

    /// The x with `self · x = b`, `self` lower triangular; none where a diagonal element is zero.
    #[must_use]
    pub fn solve_lower(&self, b: &[f64]) -> Option<Vec<f64>> {
        let solution = self
            .0
            .solve_lower_triangular(&DVector::from_column_slice(b))?;
        Some(solution.as_slice().to_vec())
    }

    /// Inverse of a symmetric positive definite matrix, scaled to a unit diagonal first so that units
    /// do not matter; none where it is singular to working precision.
    #[must_use]
    pub fn inverse_positive_definite(&self) -> Option<Self> {
        let scale: Vec<f64> = self.0.diagonal().iter().map(|d| d.sqrt().recip()).collect();
        if !scale.iter().all(|s| s.is_finite() && *s > 0.0) {
            return None;
        }
        let by_scale = |m: &DMatrix<f64>| {
            DMatrix::from_fn(m.nrows(), m.ncols(), |i, j| m[(i, j)] * scale[i] * scale[j])
        };
        let factor = by_scale(&self.0).cholesky()?;
        let smallest = factor.l_dirty().diagonal().min();
        (smallest * smallest > RANK_TOLERANCE).then(|| Self(by_scale(&factor.inverse())))
    }

    /// Eigenvalues of a symmetric matrix, ascending.
    #[must_use]
    pub fn symmetric_eigenvalues(&self) -> Vec<f64> {
        let mut values = self.0.symmetric_eigenvalues().as_slice().to_vec();
        values.sort_by(f64::total_cmp);
        values
    }
}

/// Diagonal of the hat matrix `X (X'X)⁻¹ X'` as squared row lengths of the orthogonal factor: one value
/// a row, between 0 and 1, summing to the number of columns. `columns` are of full rank.
#[must_use]
pub fn leverages(columns: &[Vec<f64>]) -> Vec<f64> {
    let rows = columns.first().map_or(0, Vec::len);
    let scale: Vec<f64> = columns.iter().map(|c| power_of_two_near(c)).collect();
    let q = DMatrix::from_fn(rows, columns.len(), |i, j| columns[j][i] / scale[j])
        .col_piv_qr()
        .q();
    q.row_iter().map(|row| row.norm_squared()).collect()
}

/// Largest over smallest singular value of the columns, each scaled to unit length first.
#[must_use]
pub fn condition_number(columns: &[Vec<f64>]) -> f64 {
    let rows = columns.first().map_or(0, Vec::len);
    let length = |c: &Vec<f64>| c.iter().map(|v| v * v).sum::<f64>().sqrt();
    let lengths: Vec<f64> = columns.iter().map(length).collect();
    let unit = DMatrix::from_fn(rows, columns.len(), |i, j| columns[j][i] / lengths[j]);
    let values = unit.singular_values();
    values.max() / values.min()
}

/// Least-squares fit of `y` on the columns of `X` (n rows, k columns of full rank).
#[derive(Clone, Debug)]
pub struct LeastSquares {
    /// The k coefficients, in the order of the columns.
    pub coefficients: Vec<f64>,
    /// The n residuals `y − X β`.
    pub residuals: Vec<f64>,
    /// `(X'X)⁻¹`, k × k, computed as `R⁻¹ R⁻ᵀ`.
    pub inverse_gram: Matrix,
}

/// Why a least-squares problem has no answer.
#[derive(Clone, Debug, PartialEq, Eq, thiserror::Error)]
pub enum LeastSquaresError {
    /// Fewer rows than columns, columns of unequal length, or no column.
    #[error("{rows} rows cannot determine {columns} coefficients")]
    Shape {
        /// Length of `y`.
        rows: usize,
        /// Number of columns.
        columns: usize,
    },
    /// A value that is not finite.
    #[error("a value is not finite")]
    NotFinite,
    /// The columns at these positions are linearly dependent.
    #[error("columns {columns:?} are linearly dependent")]
    RankDeficient {
        /// Positions of the columns that take part in the dependence, ascending.
        columns: Vec<usize>,
    },
}

/// A diagonal element of R below this fraction of the largest counts as zero. Columns have unit
/// length then, so that the fraction does not depend on units.
const RANK_TOLERANCE: f64 = 1e-13;

/// Rounds of refinement with residuals in twice the working precision. Without them the set Wampler4 of
/// NIST has 7.8 correct digits, with them 10.3.
const REFINEMENTS: usize = 2;

/// Fits `y = X β + e` by least squares; `columns` are the columns of X, each as long as `y`.
///
/// Householder QR with column pivoting (Businger & Golub 1965) of X with columns scaled by powers of
/// two, then iterative refinement of coefficients and residuals together (Björck 1967) with
/// residuals accumulated in twice the working precision.
///
/// # Errors
/// [`LeastSquaresError`]; a rank deficiency names the columns that take part in it.
pub fn least_squares(columns: &[Vec<f64>], y: &[f64]) -> Result<LeastSquares, LeastSquaresError> {
    let (n, k) = (y.len(), columns.len());
    if k == 0 || n < k || columns.iter().any(|c| c.len() != n) {
        return Err(LeastSquaresError::Shape {
            rows: n,
            columns: k,
        });
    }
    if !columns.iter().flatten().chain(y).all(|v| v.is_finite()) {
        return Err(LeastSquaresError::NotFinite);
    }
    let scale: Vec<f64> = columns.iter().map(|c| power_of_two_near(c)).collect();
    let scaled = DMatrix::from_fn(n, k, |i, j| columns[j][i] / scale[j]);
    let qr = scaled.clone().col_piv_qr();
    let (q, r) = (qr.q(), qr.r());
    let mut order = RowDVector::from_fn(k, |_, j| j);
    qr.p().permute_columns(&mut order);
    check_rank(&r, order.as_slice())?;

    let x = DMatrix::from_fn(n, k, |i, j| scaled[(i, order[j])]);
    // Solves the augmented system r + X β = f, X'r = g.
    let solve = |f: &DVector<f64>, g: DVector<f64>| {
        let u = r.tr_solve_upper_triangular(&g).unwrap_or(g);
        let step = q.tr_mul(f) - u;
        let residuals = f - &q * &step;
        (residuals, r.solve_upper_triangular(&step).unwrap_or(step))
    };
    let (mut residuals, mut beta) = solve(&DVector::from_column_slice(y), DVector::zeros(k));
    for _ in 0..REFINEMENTS {
        let f = DVector::from_fn(n, |i, _| {
            let mut sum = Twofold::new(y[i]);
            sum.add(-residuals[i]);
            (0..k).for_each(|j| sum.add_product(-x[(i, j)], beta[j]));
            sum.value()
        });
        let g = DVector::from_fn(k, |j, _| {
            let mut sum = Twofold::new(0.0);
            (0..n).for_each(|i| sum.add_product(-x[(i, j)], residuals[i]));
            sum.value()
        });
        let (more_residuals, more_beta) = solve(&f, g);
        residuals += more_residuals;
        beta += more_beta;
    }

    let mut inverse_r = DMatrix::<f64>::identity(k, k);
    r.solve_upper_triangular_mut(&mut inverse_r);
    let mut coefficients = vec![0.0; k];
    let mut root = DMatrix::<f64>::zeros(k, k);
    for (j, &column) in order.iter().enumerate() {
        coefficients[column] = beta[j] / scale[column];
        root.set_row(column, &(inverse_r.row(j) / scale[column]));
    }
    Ok(LeastSquares {
        coefficients,
        residuals: residuals.as_slice().to_vec(),
        inverse_gram: Matrix(&root * root.transpose()),
    })
}

/// A power of two near the length of a column; 1 for a column of zeros.
fn power_of_two_near(column: &[f64]) -> f64 {
    let largest = column.iter().fold(0.0_f64, |m, v| m.max(v.abs()));
    if largest == 0.0 {
        return 1.0;
    }
    let sum: f64 = column.iter().map(|v| (v / largest).powi(2)).sum();
    (largest * sum.sqrt()).log2().round().exp2()
}

fn check_rank(r: &DMatrix<f64>, order: &[usize]) -> Result<(), LeastSquaresError> {
    let k = order.len();
    let largest = (0..k).fold(0.0_f64, |m, i| m.max(r[(i, i)].abs()));
    // Written so that a NaN counts as zero.
    let zero = |i: usize| {
        let size = r[(i, i)].abs();
        size.is_nan() || size <= RANK_TOLERANCE * largest
    };
    let Some(rank) = (0..k).find(|i| zero(*i)) else {
        return Ok(());
    };
    // The dependent columns, and those of the leading ones that combine to them.
    let leading = r.view((0, 0), (rank, rank)).into_owned();
    let rest = r.view((0, rank), (rank, k - rank)).into_owned();
    let mut columns: Vec<usize> = order[rank..].to_vec();
    if let Some(weights) = leading.solve_upper_triangular(&rest) {
        columns.extend((0..rank).filter_map(|i| {
            let largest = weights.row(i).iter().fold(0.0_f64, |m, w| m.max(w.abs()));
            (largest > 1e-8).then_some(order[i])
        }));
    }
    columns.sort_unstable();
    Err(LeastSquaresError::RankDeficient { columns })
}

/// A sum in twice the working precision (Ogita, Rump & Oishi 2005, algorithm Dot2).
struct Twofold {
    high: f64,
    low: f64,
}

impl Twofold {
    fn new(start: f64) -> Self {
        Self {
            high: start,
            low: 0.0,
        }
    }

    fn add(&mut self, value: f64) {
        let sum = self.high + value;
        let part = sum - self.high;
        self.low += (self.high - (sum - part)) + (value - part);
        self.high = sum;
    }

    fn add_product(&mut self, a: f64, b: f64) {
        let product = a * b;
        self.low += a.mul_add(b, -product);
        self.add(product);
    }

    fn value(&self) -> f64 {
        self.high + self.low
    }
}

#[cfg(test)]
mod tests {
    use approx::assert_relative_eq;
    use proptest::prelude::*;

    use super::*;

    #[test]
    fn names_every_column_of_a_dependence_and_no_other() {
        let one = vec![1.0; 6];
        let a: Vec<f64> = (0..6).map(|i| f64::from(i * i)).collect();
        let b: Vec<f64> = (0..6).map(|i| f64::from(i % 3) * 1e9).collect();
        let sum: Vec<f64> = a.iter().zip(&one).map(|(a, o)| 3.0 * a - 2.0 * o).collect();
        let y = vec![1.0, 3.0, 2.0, 5.0, 4.0, 7.0];
        let error = least_squares(&[one, a, b, sum], &y).unwrap_err();
        assert_eq!(
            error,
            LeastSquaresError::RankDeficient {
                columns: vec![0, 1, 3]
            }
        );
        let zero = least_squares(&[vec![0.0; 6]], &y).unwrap_err();
        assert_eq!(zero, LeastSquaresError::RankDeficient { columns: vec![0] });
    }

    #[test]
    fn refuses_shapes_and_values_that_have_no_fit() {
        let shape = LeastSquaresError::Shape {
            rows: 1,
            columns: 2,
        };
        let two = [vec![1.0], vec![2.0]];
        assert_eq!(least_squares(&two, &[1.0]).unwrap_err(), shape);
        let nan = least_squares(&[vec![1.0, f64::NAN]], &[1.0, 2.0]).unwrap_err();
        assert_eq!(nan, LeastSquaresError::NotFinite);
    }

    proptest! {
        /// Against the normal equations of a line, solved by hand, which are exact enough here.
        #[test]
        fn agrees_with_the_closed_form_of_a_line(
            points in proptest::collection::vec((-50.0..50.0_f64, -50.0..50.0_f64), 4..30)
        ) {
            let (x, y): (Vec<f64>, Vec<f64>) = points.into_iter().unzip();
            let n = f64::from(u32::try_from(x.len()).unwrap());
            let (mx, my) = (x.iter().sum::<f64>() / n, y.iter().sum::<f64>() / n);
            let sxx: f64 = x.iter().map(|v| (v - mx).powi(2)).sum();
            prop_assume!(sxx > 1.0);
            let sxy: f64 = x.iter().zip(&y).map(|(a, b)| (a - mx) * (b - my)).sum();
            let fit = least_squares(&[vec![1.0; x.len()], x.clone()], &y).unwrap();
            assert_relative_eq!(fit.coefficients[1], sxy / sxx, epsilon = 1e-10, max_relative = 1e-9);
            assert_relative_eq!(fit.inverse_gram.at(1, 1), 1.0 / sxx, max_relative = 1e-9);
            let moment: f64 = fit.residuals.iter().zip(&x).map(|(e, x)| e * x).sum();
            prop_assert!(moment.abs() < 1e-9 * (1.0 + sxx));
        }
    }
}
