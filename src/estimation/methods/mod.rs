//! The methods: one row of the table each.

mod ardl;
mod autoregressive_errors;
mod cointegrating;
mod engle_granger;
mod johansen;
mod least_squares;
mod stability;
mod system;
mod two_stage;
mod unit_roots;

use ardl::DistributedLags;
use autoregressive_errors::AutoregressiveErrors;
use cointegrating::{Dynamic, FullyModified, Hansen};
use engle_granger::EngleGranger;
use johansen::ReducedRank;
use least_squares::LeastSquares;
use stability::Stability;
use system::SeeminglyUnrelated;
use two_stage::TwoStage;
use unit_roots::{Adf, DfGls, Kpss, PhillipsPerron, ZivotAndrews};

use super::options::Options;
use super::request::too_many;
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

/// Which terms a method takes.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(super) enum Terms {
    /// Constant, trend and dummies; a constant unless they are given.
    All,
    /// Dummies: constant and trend come by an option.
    Dummies,
    /// None: constant and trend come by an option.
    None,
}

/// A method.
pub(super) struct Method {
    pub(super) name: &'static str,
    pub(super) title: &'static str,
    pub(super) takes: Takes,
    pub(super) terms: Terms,
    pub(super) read: Read,
}

/// Reads a method's options.
type Read = fn(&mut Options<'_>) -> Option<Box<dyn Procedure>>;

/// A boxed procedure, if it could be read.
fn boxed<P: Procedure + 'static>(procedure: Option<P>) -> Option<Box<dyn Procedure>> {
    Some(Box::new(procedure?))
}

/// Refuses samples on which a method would take minutes.
fn at_most(task: &Task<'_>, most: usize) -> Outcome<()> {
    if task.n() > most {
        return Err(too_many("Observations", task.n(), most));
    }
    Ok(())
}

/// A method whose constant and trend are terms.
const fn with_terms(name: &'static str, title: &'static str, read: Read) -> Method {
    Method {
        name,
        title,
        takes: Takes::Maybe,
        terms: Terms::All,
        read,
    }
}

/// A method whose constant and trend come by an option.
const fn with_option(name: &'static str, title: &'static str, takes: Takes, read: Read) -> Method {
    Method {
        name,
        title,
        takes,
        terms: Terms::None,
        read,
    }
}

/// The same with dummies as unrestricted terms.
const fn with_dummies(name: &'static str, title: &'static str, read: Read) -> Method {
    Method {
        name,
        title,
        takes: Takes::Regressors,
        terms: Terms::Dummies,
        read,
    }
}

/// All methods.
pub(super) const METHODS: &[Method] = &[
    with_terms("ordinary_least_squares", "Ordinary least squares", |o| {
        boxed(LeastSquares::read(o))
    }),
    with_terms(
        "autoregressive_errors",
        "Regression with autoregressive errors",
        |o| boxed(AutoregressiveErrors::read(o)),
    ),
    with_terms("two_stage_least_squares", "Two-stage least squares", |o| {
        boxed(TwoStage::read(o))
    }),
    Method {
        name: "seemingly_unrelated",
        title: "Seemingly unrelated regressions",
        takes: Takes::Equations,
        terms: Terms::All,
        read: |o| boxed(SeeminglyUnrelated::read(o)),
    },
    with_option(
        "augmented_dickey_fuller",
        "Augmented Dickey–Fuller test",
        Takes::Series,
        |o| boxed(Adf::read(o)),
    ),
    with_option(
        "phillips_perron",
        "Phillips–Perron test",
        Takes::Series,
        |o| boxed(PhillipsPerron::read(o)),
    ),
    with_option("kpss", "KPSS test", Takes::Series, |o| boxed(Kpss::read(o))),
    with_option("df_gls", "DF-GLS test", Takes::Series, |o| {
        boxed(DfGls::read(o))
    }),
    with_option(
        "zivot_andrews",
        "Zivot–Andrews test",
        Takes::Series,
        |o| boxed(ZivotAndrews::read(o)),
    ),
    with_option(
        "engle_granger",
        "Engle–Granger test",
        Takes::Regressors,
        |o| boxed(EngleGranger::read(o)),
    ),
    with_dummies("johansen", "Johansen's rank tests", |o| {
        boxed(ReducedRank::read(o, false))
    }),
    with_dummies("vecm", "Vector error-correction model", |o| {
        boxed(ReducedRank::read(o, true))
    }),
    with_dummies(
        "autoregressive_distributed_lag",
        "Autoregressive distributed lag",
        |o| boxed(DistributedLags::read(o)),
    ),
    with_option(
        "dynamic_ols",
        "Dynamic least squares",
        Takes::Regressors,
        |o| boxed(Dynamic::read(o)),
    ),
    with_option(
        "fully_modified_ols",
        "Fully modified least squares",
        Takes::Regressors,
        |o| boxed(FullyModified::read(o)),
    ),
    with_terms("recursive_residuals", "Recursive residuals", |_| {
        boxed(Some(Stability::Residuals))
    }),
    with_terms("cusum", "CUSUM test", |o| boxed(Stability::cusum(o))),
    with_terms("cusum_of_squares", "CUSUM of squares test", |_| {
        boxed(Some(Stability::CusumOfSquares))
    }),
    with_terms("chow", "Chow test", |o| boxed(Stability::chow(o))),
    with_terms("unknown_break", "Break at an unknown date", |o| {
        boxed(Stability::unknown_break(o))
    }),
    with_terms("rolling", "Rolling windows", |o| {
        boxed(Stability::rolling(o))
    }),
    with_terms("recursive", "Recursive windows", |o| {
        boxed(Stability::recursive(o))
    }),
    with_option(
        "hansen_1992",
        "Hansen's tests of a cointegrating regression",
        Takes::Regressors,
        |o| boxed(Hansen::read(o)),
    ),
];
