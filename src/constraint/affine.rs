//! Numbers that remember how they depend on estimated coefficients.

use std::collections::BTreeMap;
use std::iter::Sum;
use std::ops::{Add, Mul, Neg, Sub};

use crate::linalg::Matrix;

/// A number that depends on the stacked coefficients β of one or more equations: its value at the
/// estimates and its gradient.
///
/// Variances follow from the joint covariance of β; sums and multiples are exact, products and quotients hold to
/// first order.
#[derive(Clone, Debug, Default, PartialEq)]
pub struct Affine {
    /// Value at the estimates.
    pub value: f64,
    /// Derivative with respect to coefficients, by their place in the stack; absent: 0.
    gradient: BTreeMap<usize, f64>,
}

impl Affine {
    /// The coefficient at this place of the stack, estimated as `value`.
    #[must_use]
    pub fn coefficient(place: usize, value: f64) -> Self {
        Self {
            value,
            gradient: BTreeMap::from([(place, 1.0)]),
        }
    }

    /// The same number where the coefficients stand `places` further down the stack.
    #[must_use]
    pub fn shifted(&self, places: usize) -> Self {
        let moved = self.gradient.iter().map(|(i, slope)| (i + places, *slope));
        Self {
            value: self.value,
            gradient: moved.collect(),
        }
    }

    /// `a b`, gradient `b da + a db`.
    #[must_use]
    pub fn times(&self, other: &Self) -> Self {
        let mut product = self.clone() * other.value + other.clone() * self.value;
        product.value = self.value * other.value;
        product
    }

    /// `a / b`, gradient `(da − (a/b) db)/b`.
    #[must_use]
    pub fn over(&self, other: &Self) -> Self {
        let ratio = self.value / other.value;
        let mut quotient = (self.clone() - other.clone() * ratio) * other.value.recip();
        quotient.value = ratio;
        quotient
    }

    /// Whether no coefficient enters.
    #[must_use]
    pub fn is_fixed(&self) -> bool {
        self.gradient.is_empty()
    }

    /// Covariance with another one, given the joint covariance of the stacked coefficients.
    #[must_use]
    pub fn covariance(&self, other: &Self, joint: &Matrix) -> f64 {
        let mut sum = 0.0;
        for (i, a) in &self.gradient {
            for (j, b) in &other.gradient {
                sum += a * b * joint.at(*i, *j);
            }
        }
        sum
    }

    /// Variance, given the joint covariance; never below 0.
    #[must_use]
    pub fn variance(&self, joint: &Matrix) -> f64 {
        self.covariance(self, joint).max(0.0)
    }
}

impl From<f64> for Affine {
    /// A number known without error.
    fn from(value: f64) -> Self {
        Self {
            value,
            gradient: BTreeMap::new(),
        }
    }
}

impl Add for Affine {
    type Output = Self;

    fn add(mut self, other: Self) -> Self {
        self.value += other.value;
        for (place, slope) in other.gradient {
            *self.gradient.entry(place).or_insert(0.0) += slope;
        }
        self
    }
}

impl Mul<f64> for Affine {
    type Output = Self;

    fn mul(mut self, factor: f64) -> Self {
        self.value *= factor;
        self.gradient
            .values_mut()
            .for_each(|slope| *slope *= factor);
        self
    }
}

impl Neg for Affine {
    type Output = Self;

    fn neg(self) -> Self {
        self * -1.0
    }
}

impl Sub for Affine {
    type Output = Self;

    fn sub(self, other: Self) -> Self {
        self + -other
    }
}

impl Sum for Affine {
    fn sum<I: Iterator<Item = Self>>(items: I) -> Self {
        items.fold(Self::default(), Add::add)
    }
}
