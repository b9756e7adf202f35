//! Plans: what a document would do, told from the units and periods of its inputs alone.

use std::collections::BTreeMap;

use serde::Serialize;
use utoipa::ToSchema;

use super::METHOD_VERSION;
use super::document::Document;
use super::evaluation::run;
use super::step::InputRef;
use crate::finding::Finding;
use crate::series::{Series, SeriesKey, Status, Unit};
use crate::time::{Frequency, Period};

/// What is known of an input before its numbers are read.
#[derive(Clone, Debug, PartialEq)]
pub struct InputInfo {
    /// What its numbers are.
    pub unit: Unit,
    /// First period held.
    pub first: Period,
    /// Last period held, of the same frequency.
    pub last: Period,
}

/// What a document will do.
#[derive(Clone, Debug, PartialEq, Serialize, ToSchema)]
pub struct Plan {
    /// Version of the methods.
    pub method_version: String,
    /// Outputs in the order of evaluation.
    pub outputs: Vec<PlannedOutput>,
}

/// One output of a plan.
#[derive(Clone, Debug, PartialEq, Serialize, ToSchema)]
pub struct PlannedOutput {
    /// Key of the result.
    #[schema(value_type = String)]
    pub key: SeriesKey,
    /// Series that its steps name, from the store or made by the same document.
    pub inputs: Vec<InputRef>,
    /// Its steps.
    pub steps: Vec<PlannedStep>,
}

/// One step of a plan and what it gives.
#[derive(Clone, Debug, PartialEq, Serialize, ToSchema)]
pub struct PlannedStep {
    /// The step in words.
    pub words: String,
    /// Unit of its result.
    pub unit: Unit,
    /// Frequency of its result.
    #[schema(value_type = String)]
    pub frequency: Frequency,
    /// First period that the result can have.
    #[schema(value_type = Option<String>)]
    #[serde(skip_serializing_if = "Option::is_none")]
    pub first: Option<Period>,
    /// Last period that the result can have.
    #[schema(value_type = Option<String>)]
    #[serde(skip_serializing_if = "Option::is_none")]
    pub last: Option<Period>,
}

/// Plans a document: every step in words with unit, frequency and periods of its result.
///
/// It is the evaluation itself, on inputs whose every period holds the number 1: whatever is refused
/// there for its units, frequencies or periods is refused here, by the same rule.
///
/// # Errors
/// Unknown inputs, unit clashes, references not covered and keys that disagree with the result, each
/// with its JSON pointer.
pub fn plan(
    document: &Document,
    inputs: &BTreeMap<InputRef, InputInfo>,
) -> Result<Plan, Vec<Finding>> {
    let stand_ins = inputs
        .iter()
        .map(|(input, info)| (input.clone(), stand_in(info)))
        .collect();
    let outputs = run(document, &stand_ins, settled)?
        .into_iter()
        .map(|output| PlannedOutput {
            key: output.key,
            inputs: output.inputs,
            steps: output
                .steps
                .into_iter()
                .map(|step| PlannedStep {
                    words: step.words,
                    frequency: step.series.frequency(),
                    first: step.series.end().map(|_| step.series.start),
                    last: step.series.end(),
                    unit: step.series.unit,
                })
                .collect(),
        })
        .collect();
    Ok(Plan {
        method_version: METHOD_VERSION.to_owned(),
        outputs,
    })
}

fn stand_in(info: &InputInfo) -> Series {
    let n = usize::try_from(info.last.ordinal() - info.first.ordinal() + 1).unwrap_or(0);
    Series::new(info.unit.clone(), info.first, vec![1.0; n])
}

/// Ones again wherever a result may have a number, so that no later step fails on a number that
/// only the stand-ins brought about.
fn settled(series: Series) -> Series {
    let (values, status) = series
        .status
        .iter()
        .map(|status| {
            let undefined = *status == Status::CannotExist;
            (1.0, if undefined { Status::Normal } else { *status })
        })
        .unzip();
    Series::with_status(series.unit, series.start, values, status)
}
