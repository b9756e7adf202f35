//! The methods: one row of the table each.

mod least_squares;

use super::options::Options;
use super::task::{Draft, Outcome, Task};

/// A method that has read its options.
pub(super) trait Procedure: Send + Sync {
    /// Computes.
    fn run(&self, task: &Task<'_>) -> Outcome<Draft>;
}

/// What a method takes.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(super) enum Takes {
    /// A dependent variable and at least one regressor or term.
    Maybe,
    /// A dependent variable and at least one regressor.
    Regressors,
    /// One series.
    Series,
    /// Several equations.
    Equations,
}

/// A method.
pub(super) struct Method {
    pub(super) name: &'static str,
    pub(super) title: &'static str,
    pub(super) takes: Takes,
    /// Whether constant and trend come by an option instead of `terms`.
    pub(super) own_terms: bool,
    pub(super) read: fn(&mut Options<'_>) -> Option<Box<dyn Procedure>>,
}

/// A boxed procedure, if it could be read.
fn boxed<P: Procedure + 'static>(procedure: Option<P>) -> Option<Box<dyn Procedure>> {
    Some(Box::new(procedure?))
}

/// All methods.
pub(super) const METHODS: &[Method] = &[Method {
    name: "ordinary_least_squares",
    title: "Ordinary least squares",
    takes: Takes::Maybe,
    own_terms: false,
    read: |o| boxed(least_squares::LeastSquares::read(o)),
}];
