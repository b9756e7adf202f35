//! Estimators: plain vectors and matrices in, structs out.
//!
//! Start reading at [`Ols::fit`]; [`covariance()`] gives standard errors, within one equation and
//! across equations that share a sample, and [`diagnose`] what can be wrong with a fit. Estimators beside
//! it: [`weighted()`], [`restricted`], [`autoregressive()`], [`two_stage`], [`seemingly_unrelated`].
//! Stability: [`recursive_residuals`] and the sums of them, [`chow`], [`unknown_break`],
//! [`hansen_1992()`], [`rolling`].

mod ardl;
mod autoregressive;
mod blocks;
mod bootstrap_equation;
mod bootstrap_interval;
mod bounds_null;
mod breaks;
mod cointegrating_regression;
mod cointegration;
mod covariance;
mod criteria;
mod deterministic;
mod diagnostics;
mod dummies;
mod durbin_watson;
mod hansen_1992;
mod instrumental;
mod kernel;
mod limits;
mod long_run;
mod ols;
mod outcome;
mod product_form;
mod ratio;
mod recursive;
mod restriction;
mod series_error;
mod simulation;
mod system;
mod system_bootstrap;
mod unit_root;
mod weak_instruments;
mod weighted;

#[cfg(test)]
mod recomputed_tests;
#[cfg(test)]
mod reference_tests;
#[cfg(test)]
mod simulation_tests;
#[cfg(test)]
mod systems_tests;
#[cfg(test)]
mod test_data;

pub use ardl::{
    Ardl, ArdlData, ArdlOrders, BootstrapBounds, BootstrapBoundsP, BoundsCase, BoundsStatistics,
    Candidate, InformationCriterion, LevelRelation, LongRunCoefficient, Multipliers, QuickArdl,
    Selection, bootstrap_bounds, select_orders,
};
pub use autoregressive::{Autoregressive, FirstObservation, autoregressive};
pub use blocks::{BlockLength, Blocks, Drawn, automatic_block_length};
pub use bootstrap_equation::BootstrapEquation;
pub use bootstrap_interval::{BcaCorrection, RatioBootstrap, delete_one_block};
pub use bounds_null::{BoundsDesign, BoundsNull, simulate_unit_root};
pub use breaks::{UnknownBreak, chow, unknown_break};
pub use cointegrating_regression::{Dols, DolsCovariance, Fmols, dols, fmols};
pub use cointegration::{
    EngleGranger, Johansen, JohansenCase, JohansenRows, LikelihoodRatio, RankDesign, RankNull,
    RankTest, RelationErrors, Vecm, engle_granger, johansen, simulate_rank,
};
pub use covariance::{CovarianceKind, Hc, covariance};
pub use criteria::{Criteria, criteria};
pub use deterministic::Deterministic;
pub use diagnostics::{
    AuxiliaryTest, Diagnostics, arch, breusch_godfrey, breusch_pagan, breusch_pagan_studentised,
    diagnose, jarque_bera, ljung_box, reset, white,
};
pub use durbin_watson::{DurbinWatson, DurbinWatsonBounds, durbin_watson, durbin_watson_bounds};
pub use hansen_1992::{
    CointegratingScores, Instability, InstabilityTest, hansen_1992, instability, instability_null,
};
pub use instrumental::{InstrumentedEquation, Overidentification, TwoStage, two_stage};
pub use kernel::{BandwidthRule, Kernel, bandwidth, rule_of_thumb_lags};
pub use limits::{HALF_LIFE, Shortage, shortage};
pub use long_run::{LongRunCovariance, automatic_lags, long_run_covariance, long_run_variance};
pub use ols::{Ols, Regressor};
pub use outcome::{Distribution, TestResult};
pub use product_form::{ProductCoefficients, ProductForm, ProductGrowth, ProductRatio};
pub use ratio::{EstimatedRatio, Region};
pub use recursive::{
    Cusum, RecursiveResiduals, Window, cusum_of_squares, cusum_ols, cusum_recursive, recursive,
    recursive_residuals, rolling,
};
pub use restriction::{
    LinearTest, Restricted, Restriction, likelihood_ratio, restricted, test_linear,
};
pub use series_error::SeriesError;
pub use simulation::{
    Machine, NoStore, NullDistribution, Simulation, SimulationStore, in_parallel, replicate,
    simulate,
};
pub use system::{System, SystemEquation, seemingly_unrelated};
pub use system_bootstrap::{Replicate, SystemBootstrap};
pub use unit_root::*;
pub use weak_instruments::{EffectiveF, anderson_rubin, effective_f};
pub use weighted::{Weighted, weighted};

/// Why an equation cannot be estimated.
#[derive(Clone, Debug, PartialEq, thiserror::Error)]
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
    /// A missing or infinite value in a named series.
    #[error(
        "{name} has no finite value at observation {observation}; shorten the sample or fill the gap"
    )]
    Missing {
        /// Name of the series.
        name: String,
        /// Observation, from 1.
        observation: usize,
    },
    /// A series that does not vary where variation is needed.
    #[error("{name} does not vary over the sample; leave it out or lengthen the sample")]
    Constant {
        /// Name of the series.
        name: String,
    },
    /// A sample too short for what is asked.
    #[error(
        "{what} needs at least {needed} observations and has {found}; lengthen the sample, or ask for \
         fewer lags or regressors"
    )]
    TooShort {
        /// What was asked.
        what: String,
        /// Observations that it takes.
        needed: usize,
        /// Observations at hand.
        found: usize,
    },
    /// An autoregressive coefficient of one or more.
    #[error(
        "{name} are not stationary: their autoregressive coefficient is {coefficient:.3}; estimate in \
         differences or test for cointegration"
    )]
    Explosive {
        /// What does not return to its mean.
        name: String,
        /// The coefficient.
        coefficient: f64,
    },
    /// Fewer instruments than regressors that need one.
    #[error(
        "{instruments} instruments cannot identify the coefficients of {}; name at least one for each",
        endogenous.join(", ")
    )]
    Underidentified {
        /// Instruments outside the equation.
        instruments: usize,
        /// Endogenous regressors.
        endogenous: Vec<String>,
    },
    /// A name that no regressor has.
    #[error("there is no regressor {name}; known are {}", known.join(", "))]
    UnknownRegressor {
        /// The name asked for.
        name: String,
        /// The names there are.
        known: Vec<String>,
    },
    /// A linear restriction that repeats or contradicts the ones before it.
    #[error("restriction {position} repeats or contradicts those before it; leave it out")]
    RedundantRestriction {
        /// Place in the list, from 1.
        position: usize,
    },
    /// A value outside the range of a setting.
    #[error("{setting} must be {allowed}")]
    Setting {
        /// The setting.
        setting: &'static str,
        /// What it may be.
        allowed: &'static str,
    },
    /// A covariance matrix without inverse.
    #[error("the covariance of {what} is singular; use fewer of them or another covariance")]
    SingularCovariance {
        /// Whose covariance.
        what: String,
    },
    /// An iteration that did not settle.
    #[error("{what} did not settle within {rounds} rounds")]
    NoConvergence {
        /// What was iterated.
        what: &'static str,
        /// Rounds done.
        rounds: usize,
    },
}
