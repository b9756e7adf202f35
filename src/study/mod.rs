//! Studies: a document and prepared series in, estimates and constrained growth out.
//!
//! Start reading at [`Document`] (what is asked), [`run()`] and [`Outcome`] (what was found);
//! [`text::render`] prints an outcome for a reader. The same inputs give the same digits.

mod document;
mod equation;
mod integration;
mod options;
mod outcome;
mod reader;
mod reliability;
mod run;
mod sample;
mod terms;
pub mod text;

#[cfg(test)]
mod estimators_tests;
#[cfg(test)]
mod reference_tests;
#[cfg(test)]
mod tests;

pub use document::{
    Covariance, CrossCovariance, Demand, Document, Endogenous, Estimator, Headline, Interval,
    SampleBounds,
};
pub use options::{
    ArdlCase, ArdlOptions, AutoregressiveOptions, DolsOptions, FirstRow, JohansenOptions,
    JohansenTerms, LagChoice, SimulationOptions, SystemOptions,
};
pub use outcome::{
    AdjustmentResult, CoefficientResult, CovarianceUsed, DynamicsResult, EquationResult,
    EquationTest, Estimate, EstimatorResult, FormNumbers, FormResult, GrowthRates,
    IntervalSettings, LongRunResult, MeanGrowth, NearIdentity, Outcome, RelativePriceEffect,
    Sample, TestGroup, Unreliable,
};
pub use run::{METHOD_VERSION, run, run_with};
pub use terms::{At, Term};
