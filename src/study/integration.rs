//! Series that differences do not make stationary.

use std::collections::BTreeSet;

use super::document::Document;
use super::equation::differences;
use super::options::usual_lags;
use super::sample::Logs;
use crate::estimate::{Deterministic, KpssLags, LagCriterion, Lags, Regressor, adf, kpss};
use crate::finding::Finding;
use crate::series::SeriesKey;

const SIGNIFICANCE: f64 = 0.05;

/// A notice for each series of the demand equations whose growth seems to have a unit root: where Dickey and Fuller's
/// test does not reject one and the test of Kwiatkowski and others rejects stationarity, both at 5 per cent.
///
/// Either test alone errs too often in samples of a few decades.
pub(super) fn orders_of_integration(document: &Document, logs: &Logs) -> Vec<Finding> {
    let demands = [&document.import_demand, &document.export_demand];
    let keys: BTreeSet<&SeriesKey> = demands
        .iter()
        .flat_map(|d| {
            let regressors = d.regressors().into_iter().map(|(_, key)| key);
            std::iter::once(&d.volume).chain(regressors)
        })
        .collect();
    let most = usize::try_from(usual_lags(document.frequency)).unwrap_or(2);
    let lags = Lags::Chosen {
        by: LagCriterion::Aic,
        max: Some(most),
    };
    keys.into_iter()
        .filter_map(|key| {
            let growth = Regressor::new(&key.to_string(), differences(logs.of(key)));
            let root = adf(&growth, Deterministic::Constant, lags).ok()?;
            let still = kpss(&growth, Deterministic::Constant, KpssLags::Automatic).ok()?;
            let twice = root.p_value >= SIGNIFICANCE && still.p_value < SIGNIFICANCE;
            twice.then(|| {
                let message = format!(
                    "Growth of {key} seems to have a unit root (ADF p {:.2}, KPSS p {:.2}): the methods here take \
                     series that growth rates make stationary",
                    root.p_value, still.p_value
                );
                Finding::notice("i2_variable", message).at_series(key)
            })
        })
        .collect()
}
