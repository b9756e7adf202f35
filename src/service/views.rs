//! What the service tells: the shapes of JSON answers.

use std::collections::BTreeMap;

use serde::Serialize;
use utoipa::ToSchema;

use crate::finding::Finding;
use crate::intake::{Reject, Understood};
use crate::series::{Status, Unit};

/// One page of a list, with the cursor of the next.
#[derive(Clone, Debug)]
pub struct Page<T> {
    /// The entries.
    pub items: Vec<T>,
    /// Cursor of the next page, if there is one.
    pub next: Option<String>,
}

impl<T> Page<T> {
    /// Cuts a list that was read one entry too far.
    pub(super) fn cut(mut items: Vec<T>, limit: i64, cursor: impl Fn(&T) -> String) -> Self {
        let limit = usize::try_from(limit).unwrap_or(0);
        let more = items.len() > limit;
        items.truncate(limit);
        let next = if more { items.last().map(cursor) } else { None };
        Self { items, next }
    }
}

/// A declared currency.
#[derive(Clone, Debug, Serialize, ToSchema)]
pub struct CurrencyView {
    /// Code of three capital letters.
    pub code: String,
    /// Name.
    pub name: String,
    /// Areas whose own money it is.
    pub areas: Vec<String>,
    /// Whether ISO 4217 lists the code too.
    pub iso_4217: bool,
}

/// An upload with its report.
#[derive(Clone, Debug, Serialize, ToSchema)]
pub struct UploadView {
    /// Number; null for a dry run, which is not kept.
    pub id: Option<i64>,
    /// Kind of data.
    pub kind: String,
    /// `landed`, `held`, `refused` or `withdrawn`; of a dry run, what it would be.
    pub state: String,
    /// SHA-256 of the body as it came, in hexadecimal.
    pub sha256: String,
    /// Bytes of the body as it came.
    pub bytes: i64,
    /// `none` or `gzip`.
    pub compression: String,
    /// Columns and settings given as parameters.
    pub parameters: BTreeMap<String, String>,
    /// Date of release by the source.
    #[schema(format = Date)]
    pub released: String,
    /// Title.
    pub title: String,
    /// Publisher.
    pub publisher: String,
    /// Note.
    pub note: String,
    /// Who sent it.
    pub author: String,
    /// When it was recorded here; null for a dry run.
    pub recorded: Option<String>,
    /// Revision that made it current.
    pub revision: Option<i64>,
    /// Revision that withdrew it.
    pub withdrawn_revision: Option<i64>,
    /// Whether this was a dry run: nothing is kept or changed.
    pub dry_run: bool,
    /// Whether these bytes with these settings had come before; then this is that upload.
    pub recognised: bool,
    /// What was understood, found and changed.
    pub report: Option<UploadReport>,
}

/// What was understood of an upload, what was found and what it changed.
#[derive(Clone, Debug, Serialize, serde::Deserialize, ToSchema)]
pub struct UploadReport {
    /// How the file was read.
    pub understood: Understood,
    /// The first hundred rows that could not be taken; more are under `/rejects`.
    pub rejects: Vec<Reject>,
    /// What else was seen; severity `error` holds the upload.
    pub findings: Vec<Finding>,
    /// What became of the observations.
    pub observations: ObservationCounts,
    /// Series that had no observations before.
    pub series_created: SeriesList,
    /// Series with observations that changed.
    pub series_changed: SeriesList,
    /// Segments opened because the unit (price basis, reference period, own money) is another one.
    pub segments_opened: Vec<OpenedSegment>,
}

/// What became of the observations that an upload names.
#[derive(Clone, Copy, Debug, Default, Serialize, serde::Deserialize, ToSchema)]
pub struct ObservationCounts {
    /// Named for the first time.
    pub new: u64,
    /// Other value or status than before.
    pub revised: u64,
    /// As before.
    pub unchanged: u64,
    /// Had a value and have none now.
    pub emptied: u64,
}

/// A number of series, and the keys of the first hundred.
#[derive(Clone, Debug, Default, Serialize, serde::Deserialize, ToSchema)]
pub struct SeriesList {
    /// How many.
    pub count: u64,
    /// The first hundred keys.
    pub keys: Vec<String>,
}

impl SeriesList {
    pub(super) fn add(&mut self, key: &impl ToString) {
        const KEPT: usize = 100;
        self.count += 1;
        if self.keys.len() < KEPT {
            self.keys.push(key.to_string());
        }
    }
}

/// A segment that an upload opened beside existing ones, and how the two would be linked.
#[derive(Clone, Debug, Serialize, serde::Deserialize, ToSchema)]
pub struct OpenedSegment {
    /// The series.
    pub series: String,
    /// Number of the new segment.
    pub segment: i32,
    /// Unit of the new segment.
    pub unit: String,
    /// Unit of the segment that was current.
    pub before: String,
    /// The link that a preparation could make; absent where the two do not overlap.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub proposed_link: Option<ProposedLink>,
}

/// A link between two segments over their overlap. Nothing is linked unless a preparation does it.
#[derive(Clone, Debug, Serialize, serde::Deserialize, ToSchema)]
pub struct ProposedLink {
    /// Multiplies the older segment to the level of the new one.
    pub factor: f64,
    /// First period of the overlap.
    pub from: String,
    /// Last period of the overlap.
    pub to: String,
    /// Largest over smallest ratio over the overlap, less one.
    pub spread: f64,
    /// What the choice of the linking period can change in the growth at the join, in log per cent.
    pub growth_effect_log_percent: f64,
}

/// A line of a list of series.
#[derive(Clone, Debug, Serialize, ToSchema)]
pub struct SeriesView {
    /// Key.
    pub key: String,
    /// Places of the key by name.
    pub dimensions: BTreeMap<String, String>,
    /// Segment that reads answer from.
    pub segment: i32,
    /// Number of segments with observations.
    pub segments: i64,
    /// Unit.
    pub unit: Unit,
    /// Unit in words.
    pub unit_text: String,
    /// Release date of the current vintage.
    #[schema(format = Date)]
    pub released: String,
    /// Its revision.
    pub revision: i64,
    /// First period.
    pub first: String,
    /// Last period.
    pub last: String,
    /// Periods from first to last.
    pub observations: i32,
}

/// Observations of a series, as of some moment.
#[derive(Clone, Debug, Serialize, ToSchema)]
pub struct ObservationsView {
    /// Key.
    pub series: String,
    /// Segment.
    pub segment: i32,
    /// Unit.
    pub unit: Unit,
    /// Unit in words.
    pub unit_text: String,
    /// Release date of the vintage.
    #[schema(format = Date)]
    pub released: String,
    /// When the vintage was recorded.
    pub recorded: String,
    /// Revision that wrote it.
    pub revision: i64,
    /// Transformation applied on reading, if any.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub growth: Option<String>,
    /// The observations, oldest first.
    pub observations: Vec<ObservationView>,
}

/// One observation.
#[derive(Clone, Debug, Serialize, ToSchema)]
pub struct ObservationView {
    /// Period.
    pub period: String,
    /// Value in base units; null where missing.
    pub value: Option<f64>,
    /// SDMX observation status.
    pub status: Status,
}

/// One vintage.
#[derive(Clone, Debug, Serialize, ToSchema)]
pub struct VintageView {
    /// Segment.
    pub segment: i32,
    /// Unit in words.
    pub unit_text: String,
    /// Date of the release that speaks; an older one speaks again where a later one was withdrawn.
    #[schema(format = Date)]
    pub released: String,
    /// When it was recorded here.
    pub recorded: String,
    /// Revision; `as_of=revision:N` reads what was known then.
    pub revision: i64,
    /// What wrote it: `land`, `accept`, `withdraw` or `run`.
    pub action: String,
    /// The upload concerned.
    pub upload: Option<i64>,
    /// The run concerned.
    pub run: Option<i64>,
    /// First period; null where nothing is left.
    pub first: Option<String>,
    /// Last period.
    pub last: Option<String>,
    /// Periods from first to last.
    pub observations: i32,
    /// Named for the first time.
    pub new: i32,
    /// Other value or status than in the vintage before.
    pub revised: i32,
    /// Lost their value.
    pub emptied: i32,
}

/// A stored document.
#[derive(Clone, Debug, Serialize, ToSchema)]
pub struct DocumentView {
    /// Name.
    pub name: String,
    /// Version, from 1.
    pub version: i32,
    /// Who put it.
    pub author: String,
    /// When.
    pub recorded: String,
    /// The document.
    #[schema(value_type = Object)]
    pub document: serde_json::Value,
}

/// A line of a list of runs.
#[derive(Clone, Debug, Serialize, ToSchema)]
pub struct RunLine {
    /// Number.
    pub id: i64,
    /// Version of the document.
    pub version: i32,
    /// Version of the method.
    pub method_version: String,
    /// Who started it.
    pub author: String,
    /// When.
    pub recorded: String,
}

/// A vintage that a run read.
#[derive(Clone, Debug, Serialize, serde::Deserialize, ToSchema)]
pub struct Pin {
    /// Series.
    pub series: String,
    /// Segment.
    pub segment: i32,
    /// Release date.
    #[schema(format = Date)]
    pub released: String,
    /// Revision.
    pub revision: i64,
}
