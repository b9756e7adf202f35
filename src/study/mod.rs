//! Studies: a document and prepared series in, estimates and constrained growth out.
//!
//! Start reading at [`Document`] (what is asked), [`run()`] and [`Outcome`] (what was found);
//! [`text::render`] prints an outcome for a reader. The same inputs give the same digits.

mod document;
mod equation;
mod outcome;
mod reader;
mod reliability;
mod run;
mod sample;
pub mod text;

#[cfg(test)]
mod reference_tests;
#[cfg(test)]
mod tests;

pub use document::{
    Covariance, CrossCovariance, Demand, Document, Estimator, Headline, Interval, SampleBounds,
};
pub use outcome::{
    CoefficientResult, EquationResult, Estimate, EstimatorResult, FormNumbers, FormResult,
    IntervalSettings, MeanGrowth, NearIdentity, Outcome, RelativePriceEffect, Sample, Unreliable,
};
pub use run::{METHOD_VERSION, run};
