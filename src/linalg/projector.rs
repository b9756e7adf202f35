//! Least squares by growing and shrinking a set of columns: the kernel of searches and simulations,
//! where one regression after another differs by a column.

/// A column of which less than this fraction is left after projection counts as dependent.
const DEPENDENT: f64 = 1e-10;

/// An orthonormal basis of the columns pushed so far, each of `rows` values.
///
/// Modified Gram–Schmidt with every projection done twice, which keeps the basis orthogonal to
/// working precision (Giraud, Langou & Rozložník 2005); columns come and go as on a stack.
#[derive(Clone, Debug)]
pub struct Projector {
    rows: usize,
    basis: Vec<f64>,
}

impl Projector {
    /// An empty basis for columns of `rows` values.
    #[must_use]
    pub fn new(rows: usize) -> Self {
        Self {
            rows,
            basis: Vec::new(),
        }
    }

    /// Number of columns held.
    #[must_use]
    pub fn len(&self) -> usize {
        self.basis.len() / self.rows.max(1)
    }

    /// Whether no column is held.
    #[must_use]
    pub fn is_empty(&self) -> bool {
        self.basis.is_empty()
    }

    /// Forgets all but the first `len` columns.
    pub fn truncate(&mut self, len: usize) {
        self.basis.truncate(len * self.rows);
    }

    /// Adds a column and returns the length of what it adds to the basis; `None`, and nothing is
    /// added, where it is a combination of the columns held.
    pub fn push(&mut self, column: &[f64]) -> Option<f64> {
        let start = self.basis.len();
        self.basis.extend_from_slice(&column[..self.rows]);
        let (held, added) = self.basis.split_at_mut(start);
        let before = norm(added);
        project(held, added);
        let after = norm(added);
        if after.is_nan() || after <= DEPENDENT * before {
            self.basis.truncate(start);
            return None;
        }
        added.iter_mut().for_each(|v| *v /= after);
        Some(after)
    }

    /// The unit vector that the last column added.
    #[must_use]
    pub fn last(&self) -> &[f64] {
        &self.basis[self.basis.len().saturating_sub(self.rows)..]
    }

    /// Replaces `values` by what the columns held do not explain: the residuals of a regression.
    pub fn residuals(&self, values: &mut [f64]) {
        project(&self.basis, values);
    }

    /// Takes the last unit vector out of `values`; enough where the others were out already.
    pub fn remove_last(&self, values: &mut [f64]) {
        if !self.is_empty() {
            step(self.last(), values);
        }
    }
}

fn project(basis: &[f64], values: &mut [f64]) {
    for _ in 0..2 {
        for unit in basis.chunks_exact(values.len().max(1)) {
            step(unit, values);
        }
    }
}

fn step(unit: &[f64], values: &mut [f64]) {
    let weight = product(unit, values);
    values
        .iter_mut()
        .zip(unit)
        .for_each(|(v, u)| *v -= weight * u);
}

/// Sum of products, in four interleaved parts so that the compiler can use wide registers; the order
/// is fixed, so the digits are too.
#[must_use]
pub fn product(a: &[f64], b: &[f64]) -> f64 {
    let mut parts = [0.0_f64; 4];
    let (left, right) = (a.chunks_exact(4), b.chunks_exact(4));
    let tail: f64 = left
        .remainder()
        .iter()
        .zip(right.remainder())
        .map(|(x, y)| x * y)
        .sum();
    for (x, y) in left.zip(right) {
        for i in 0..4 {
            parts[i] += x[i] * y[i];
        }
    }
    (parts[0] + parts[1]) + (parts[2] + parts[3]) + tail
}

fn norm(values: &[f64]) -> f64 {
    product(values, values).sqrt()
}

#[cfg(test)]
mod tests {
    use approx::assert_relative_eq;

    use super::*;
    use crate::linalg::least_squares;

    fn waves(rows: usize, count: usize) -> Vec<Vec<f64>> {
        let value =
            |i: usize, j: usize| ((i * 7 + j * 13 + i * i * j) as f64 * 0.37).sin() + i as f64;
        (0..count)
            .map(|j| (0..rows).map(|i| value(i, j)).collect())
            .collect()
    }

    #[test]
    fn agrees_with_pivoted_qr_after_columns_came_and_went() {
        let columns = waves(23, 6);
        let mut projector = Projector::new(23);
        for column in &columns[..4] {
            projector.push(column).unwrap();
        }
        projector.truncate(2);
        projector.push(&columns[4]).unwrap();
        let mut left = columns[5].clone();
        projector.residuals(&mut left);
        let chosen = [columns[0].clone(), columns[1].clone(), columns[4].clone()];
        let fit = least_squares(&chosen, &columns[5]).unwrap();
        for (a, b) in left.iter().zip(&fit.residuals) {
            assert_relative_eq!(a, b, epsilon = 1e-12, max_relative = 1e-11);
        }
        assert_eq!(projector.len(), 3);
    }

    #[test]
    fn refuses_a_dependent_column() {
        let columns = waves(11, 2);
        let mut projector = Projector::new(11);
        projector.push(&columns[0]).unwrap();
        projector.push(&columns[1]).unwrap();
        let sum: Vec<f64> = columns[0]
            .iter()
            .zip(&columns[1])
            .map(|(a, b)| 3.0 * a - b)
            .collect();
        assert!(projector.push(&sum).is_none());
        assert!(projector.push(&[0.0; 11]).is_none());
        assert_eq!(projector.len(), 2);
    }
}
