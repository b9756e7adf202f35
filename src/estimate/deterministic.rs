//! Deterministic terms of an equation.

use super::Regressor;
use super::ols::as_f64;

/// Deterministic terms of a test or an equation.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord, Hash)]
pub enum Deterministic {
    /// None (n).
    None,
    /// A constant (c).
    Constant,
    /// A constant and a linear trend (ct).
    Trend,
    /// A constant, a linear and a quadratic trend (ctt).
    QuadraticTrend,
}

impl Deterministic {
    /// Number of terms.
    #[must_use]
    pub fn terms(self) -> usize {
        match self {
            Self::None => 0,
            Self::Constant => 1,
            Self::Trend => 2,
            Self::QuadraticTrend => 3,
        }
    }

    /// The terms named `const`, `trend`, `trend²` over n rows; the trend counts 1 to n.
    #[must_use]
    pub fn columns(self, n: usize) -> Vec<Regressor> {
        let power = |p: i32| (1..=n).map(|t| as_f64(t).powi(p)).collect();
        let all = [("const", 0), ("trend", 1), ("trend²", 2)];
        all[..self.terms()]
            .iter()
            .map(|(name, p)| Regressor::new(name, power(*p)))
            .collect()
    }
}
