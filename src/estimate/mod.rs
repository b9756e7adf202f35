//! Estimators: plain vectors and matrices in, structs out.
//!
//! Start reading at [`Ols::fit`]; [`covariance`] gives standard errors, within one equation and
//! across equations that share a sample.

mod ardl;
mod blocks;
mod bounds_null;
mod cointegrating_regression;
mod cointegration;
mod covariance;
mod deterministic;
mod long_run;
mod ols;
mod product_form;
mod series_error;
mod simulation;
mod system_bootstrap;
mod unit_root;

#[cfg(test)]
mod reference_tests;
#[cfg(test)]
mod simulation_tests;
#[cfg(test)]
mod test_data;

pub use ardl::{
    Ardl, ArdlData, ArdlOrders, BoundsCase, BoundsStatistics, Candidate, InformationCriterion,
    LevelRelation, LongRunCoefficient, Multipliers, Selection, select_orders,
};
pub use blocks::{BlockLength, Blocks, automatic_block_length};
pub use bounds_null::{BoundsDesign, BoundsNull, simulate_unit_root};
pub use cointegrating_regression::{Dols, DolsCovariance, Fmols, dols, fmols};
pub use cointegration::{
    EngleGranger, Johansen, JohansenCase, LikelihoodRatio, RankTest, Vecm, engle_granger, johansen,
};
pub use covariance::{CovarianceKind, covariance, rule_of_thumb_lags};
pub use deterministic::Deterministic;
pub use long_run::{LongRunCovariance, automatic_lags, long_run_covariance, long_run_variance};
pub use ols::{Ols, Regressor};
pub use product_form::{ProductCoefficients, ProductForm, ProductGrowth, ProductRatio};
pub use series_error::SeriesError;
pub use simulation::{NoStore, NullDistribution, Simulation, SimulationStore, replicate, simulate};
pub use system_bootstrap::{Replicate, SystemBootstrap};
pub use unit_root::*;

/// Why an equation cannot be estimated.
#[derive(Clone, Debug, PartialEq, Eq, thiserror::Error)]
pub enum EstimateError {
    /// No degree of freedom is left, or lengths differ.
    #[error("{observations} observations cannot estimate {coefficients} coefficients")]
    TooFewObservations {
        /// Number of observations.
        observations: usize,
        /// Number of coefficients.
        coefficients: usize,
    },
    /// A missing or infinite value among the data.
    #[error("a value is missing or infinite")]
    NotFinite,
    /// Regressors are linear combinations of each other.
    #[error("the regressors {} are linearly dependent", names.join(", "))]
    Collinear {
        /// Names of the regressors that take part in the dependence.
        names: Vec<String>,
    },
    /// Equations without a common sample have no joint covariance.
    #[error("equations with {first} and {second} observations have no common sample")]
    SampleDiffers {
        /// Observations of the first equation.
        first: usize,
        /// Observations of the other one.
        second: usize,
    },
    /// As many lags as observations, or more.
    #[error("{lags} lags need more than {observations} observations")]
    TooManyLags {
        /// Number of lags.
        lags: usize,
        /// Number of observations.
        observations: usize,
    },
}
