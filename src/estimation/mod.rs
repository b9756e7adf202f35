//! One estimation without a study: a request and its series in, a report out.
//!
//! Start reading at [`Request`] (what is asked), [`run()`] and [`Report`] (what was found);
//! [`text::render`] and [`latex::render`] print a report, [`Rows`] are the rows it was computed from.
//! A method is a row of the table in `methods`: its name, what it takes, and the procedure that reads
//! its options and computes. The same inputs give the same digits.

mod covariance;
mod fault;
mod judge;
pub mod latex;
mod methods;
mod options;
mod print;
mod report;
mod request;
mod rows;
mod sample;
mod task;
mod terms;
pub mod text;

use std::collections::BTreeMap;

pub use report::{
    Cell, CriticalValue, EstimateSample, EstimateStatistic, EstimateTable, EstimateTest,
    EstimatedCoefficient, EstimatedEquation, Report,
};
pub use request::Request;
pub use rows::{RowColumn, Rows};
pub use task::Machine;

use crate::finding::Finding;
use crate::series::{Series, SeriesKey};

/// Version of the methods: it changes whenever the same inputs may give other digits.
pub const METHOD_VERSION: &str = "estimation/1";

/// Estimates what a request asks for.
///
/// # Errors
/// Findings that forbid it, each with JSON pointer and, where it has one, series and period:
/// `missing_input`, `no_common_sample`, `gap_in_sample`, `not_positive`, and the faults of the
/// methods (`too_few_observations`, `collinear`, `constant_series`, …).
pub fn run(
    request: &Request,
    inputs: &BTreeMap<SeriesKey, Series>,
    machine: &Machine<'_>,
) -> Result<(Report, Rows), Vec<Finding>> {
    let data = sample::gather(request, inputs)?;
    let task = task::Task::new(request, data, machine);
    let mut draft = request.procedure.run(&task).map_err(|f| vec![*f])?;
    let report = task.finish(&mut draft);
    Ok((report, draft.rows))
}
