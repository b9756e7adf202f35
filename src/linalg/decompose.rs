//! Factors of matrices: thin QR, singular values, symmetric eigenvalues, inverses.

use nalgebra::DMatrix;

use super::Matrix;

/// The matrix with these columns, all of one length.
#[must_use]
pub fn from_columns(columns: &[Vec<f64>]) -> Matrix {
    let rows = columns.first().map_or(0, Vec::len);
    Matrix::from_fn(rows, columns.len(), |i, j| columns[j][i])
}

/// A column as values.
#[must_use]
pub fn column(matrix: &Matrix, j: usize) -> Vec<f64> {
    matrix.0.column(j).iter().copied().collect()
}

/// `X'X` of a matrix, or `X'Y`.
#[must_use]
pub fn cross(x: &Matrix, y: &Matrix) -> Matrix {
    Matrix(x.0.tr_mul(&y.0))
}

/// The inverse of a square matrix by LU with partial pivoting; `None` where it is singular.
#[must_use]
pub fn inverse(matrix: &Matrix) -> Option<Matrix> {
    matrix.0.clone().try_inverse().map(Matrix)
}

/// Thin QR of a matrix of full column rank: `Q` (n × k, orthonormal columns) and upper triangular `R`.
#[derive(Clone, Debug)]
pub struct ThinQr {
    /// Orthonormal columns.
    pub q: Matrix,
    /// Upper triangular factor.
    pub r: Matrix,
}

/// Householder QR without pivoting; `None` with fewer rows than columns or where a diagonal element
/// of R is below 1e-13 of the largest (columns scaled to unit length).
#[must_use]
pub fn thin_qr(matrix: &Matrix) -> Option<ThinQr> {
    let (n, k) = matrix.0.shape();
    if n < k || k == 0 {
        return None;
    }
    let qr = matrix.0.clone().qr();
    let r = qr.r();
    let independent = (0..k).all(|j| {
        let length = matrix.0.column(j).norm();
        r[(j, j)].abs() > 1e-13 * length
    });
    independent.then(|| ThinQr {
        q: Matrix(qr.q()),
        r: Matrix(r),
    })
}

/// The upper triangular factor R of a Householder QR without pivoting, rank regardless: as many rows
/// as the smaller side. Least squares among the columns is the same on R as on the matrix.
#[must_use]
pub fn triangular(matrix: &Matrix) -> Matrix {
    Matrix(matrix.0.clone().qr().r())
}

/// Solves `R x = b` for every column of b, R upper triangular.
#[must_use]
pub fn solve_upper(r: &Matrix, b: &Matrix) -> Option<Matrix> {
    r.0.solve_upper_triangular(&b.0).map(Matrix)
}

/// Singular values, largest first, with the right singular vectors as columns.
#[derive(Clone, Debug)]
pub struct Singular {
    /// Singular values, descending; as many as the smaller side of the matrix.
    pub values: Vec<f64>,
    /// Right singular vectors as columns, in the same order.
    pub right: Matrix,
}

/// Singular value decomposition; `None` where it does not converge.
#[must_use]
pub fn singular(matrix: &Matrix) -> Option<Singular> {
    let svd = matrix.0.clone().try_svd(false, true, f64::EPSILON, 0)?;
    let right = svd.v_t?.transpose();
    let mut order: Vec<usize> = (0..svd.singular_values.len()).collect();
    order.sort_by(|a, b| svd.singular_values[*b].total_cmp(&svd.singular_values[*a]));
    Some(Singular {
        values: order.iter().map(|&i| svd.singular_values[i]).collect(),
        right: Matrix(DMatrix::from_fn(right.nrows(), order.len(), |i, j| {
            right[(i, order[j])]
        })),
    })
}

/// The determinant of a square matrix.
#[must_use]
pub fn determinant(matrix: &Matrix) -> f64 {
    matrix.0.determinant()
}

#[cfg(test)]
mod tests {
    use approx::assert_relative_eq;

    use super::*;

    #[test]
    fn factors_reproduce_the_matrix() {
        let a = Matrix::from_fn(5, 3, |i, j| ((i * 3 + j * 5 + i * i * j) as f64).sin());
        let qr = thin_qr(&a).unwrap();
        let back = qr.q.times(&qr.r);
        let svd = singular(&a).unwrap();
        for i in 0..5 {
            for j in 0..3 {
                assert_relative_eq!(back.at(i, j), a.at(i, j), epsilon = 1e-14);
            }
        }
        // A V has columns of the singular values' lengths.
        let image = a.times(&svd.right);
        for j in 0..3 {
            let length: f64 = column(&image, j).iter().map(|v| v * v).sum();
            assert_relative_eq!(length.sqrt(), svd.values[j], max_relative = 1e-12);
        }
        assert!(svd.values.windows(2).all(|w| w[0] >= w[1]));
        let gram = cross(&a, &a);
        let identity = gram.times(&inverse(&gram).unwrap());
        assert_relative_eq!(identity.at(1, 1), 1.0, max_relative = 1e-10);
        let product: f64 = svd.values.iter().map(|v| v * v).product();
        assert_relative_eq!(determinant(&gram), product, max_relative = 1e-10);
    }

    #[test]
    fn a_dependent_column_has_no_thin_qr() {
        let a = Matrix::from_fn(4, 2, |i, j| (i + 1) as f64 * (j + 1) as f64);
        assert!(thin_qr(&a).is_none());
    }
}
