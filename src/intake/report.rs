//! What was understood of a file.

use std::collections::BTreeMap;

use serde::{Deserialize, Serialize};
use utoipa::ToSchema;

use super::fault::Reject;
use crate::finding::Finding;
use crate::series::Piece;

/// What a whole file came to.
#[derive(Clone, Debug, PartialEq)]
pub struct Intake {
    /// Rows by series that [`super::Reader::take_pieces`] has not given away before.
    pub pieces: Vec<Piece>,
    /// What was understood.
    pub understood: Understood,
    /// Rows that were not accepted, up to the limit.
    pub rejects: Vec<Reject>,
    /// What is to be said of the file as a whole; severity error holds the upload.
    pub findings: Vec<Finding>,
}

/// What was understood of a file, for its report.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize, ToSchema)]
pub struct Understood {
    /// Kind of upload.
    pub kind: String,
    /// Columns in file order.
    pub columns: Vec<UnderstoodColumn>,
    /// Columns stated once for the whole file.
    pub constants: BTreeMap<String, String>,
    /// `comma`, `semicolon` or `tab`.
    pub delimiter: String,
    /// `none` or `gzip`.
    pub compression: String,
    /// Physical lines, header and blank ones included.
    pub lines: u64,
    /// Rows below the header.
    pub rows_read: u64,
    /// Rows that became observations.
    pub rows_accepted: u64,
    /// Rows that did not.
    pub rows_rejected: u64,
    /// Rejected rows by code.
    pub rejects_by_code: BTreeMap<String, u64>,
    /// First and last period at each frequency.
    pub periods: Vec<UnderstoodPeriods>,
    /// The different units, in words.
    pub units: Vec<String>,
    /// Number of different series.
    pub series: u64,
}

/// A column as it was understood.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize, ToSchema)]
pub struct UnderstoodColumn {
    /// Name in the file.
    pub name: String,
    /// What it is taken for.
    pub meaning: String,
}

/// The periods met at one frequency.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize, ToSchema)]
pub struct UnderstoodPeriods {
    /// Frequency: A, S, Q, M, W or D.
    pub frequency: String,
    /// First period.
    pub first: String,
    /// Last period.
    pub last: String,
}
