//! Where observations come from: upload and line, or run and steps, and so on for what the steps read.

use std::collections::{HashMap, HashSet};

use serde::Serialize;
use utoipa::ToSchema;

use super::series::{Moment, vintage};
use super::views::Pin;
use super::{Fault, preparations};
use crate::finding::Finding;
use crate::series::SeriesKey;
use crate::series::provenance::{self, Origin, OriginRun};
use crate::store::upload::Publication;
use crate::store::{self, Database};
use crate::time::{Date, Period};

/// Lineage of a series as of some moment.
#[derive(Clone, Debug, Serialize, ToSchema)]
pub struct LineageView {
    /// Key.
    pub series: String,
    /// Segment.
    pub segment: i32,
    /// Revision of the vintage.
    pub revision: i64,
    /// Runs of observations with one origin, oldest first.
    pub spans: Vec<LineageSpan>,
}

/// Consecutive observations with one origin.
#[derive(Clone, Debug, Serialize, ToSchema)]
pub struct LineageSpan {
    /// First period.
    pub from: String,
    /// Last period.
    pub to: String,
    /// Where they come from.
    #[serde(flatten)]
    pub origin: OriginView,
}

/// Where observations come from.
#[derive(Clone, Debug, Serialize, ToSchema)]
#[serde(tag = "origin", rename_all = "snake_case")]
pub enum OriginView {
    /// Lines of an upload.
    Upload {
        /// Number of the upload; its bytes are under `/v1/uploads/{id}/raw`.
        upload: i64,
        /// Its title.
        title: String,
        /// Its publisher.
        publisher: String,
        /// Date of release.
        released: String,
        /// Line of the first observation.
        line: u32,
        /// Lines from one observation to the next.
        line_step: i64,
    },
    /// A run of a preparation.
    Run {
        /// Number of the run.
        run: i64,
        /// Name of the preparation.
        preparation: String,
        /// Version of its document.
        version: i32,
        /// Version of the method.
        method_version: String,
        /// The steps, in words.
        steps: Vec<String>,
        /// The vintages that the steps read.
        inputs: Vec<InputView>,
    },
}

/// A vintage that steps read, and where its observations come from in turn.
#[derive(Clone, Debug, Serialize, ToSchema)]
pub struct InputView {
    /// Which vintage.
    #[serde(flatten)]
    pub vintage: Pin,
    /// All its observations, whatever period was asked for: which of them matter is for the steps to say.
    /// Absent where the vintage has its spans elsewhere in this answer, or lies more than 16 preparations deep.
    #[serde(skip_serializing_if = "Option::is_none")]
    #[schema(no_recursion)]
    pub spans: Option<Vec<LineageSpan>>,
}

/// How many preparations on top of one another are followed.
const DEPTH: usize = 16;

/// Where the observations of a series come from; of one period if asked.
///
/// # Errors
/// [`Fault::NotFound`]; [`Fault::BadRequest`] for a wrong moment or period; [`Fault::Store`].
pub async fn lineage(
    database: &Database,
    key: &SeriesKey,
    moment: &Moment,
    period: Option<&str>,
) -> Result<LineageView, Fault> {
    let only = match period {
        None => None,
        Some(text) => {
            Some(
                Period::parse_as(text, key.frequency()).map_err(|e| Fault::BadRequest {
                    detail: e.to_string(),
                    errors: vec![
                        Finding::error("bad_parameter", e.to_string())
                            .at_parameter("period")
                            .found(text)
                            .expected(e.expected),
                    ],
                })?,
            )
        }
    };
    let vintage = vintage(database, key, moment).await?;
    let mut walk = Walk {
        database,
        seen: HashSet::new(),
    };
    let spans = walk
        .spans(key, vintage.start, &vintage.provenance, only, 0)
        .await?;
    Ok(LineageView {
        series: key.to_string(),
        segment: vintage.segment,
        revision: vintage.revision,
        spans,
    })
}

/// The way down from a series to the uploads under it.
struct Walk<'a> {
    database: &'a Database,
    /// Vintages whose spans are told: series, segment, release, revision.
    seen: HashSet<(String, i32, String, i64)>,
}

impl Walk<'_> {
    /// Spans of a vintage that begins in `start`; of one period where `only` says so.
    async fn spans(
        &mut self,
        key: &SeriesKey,
        start: Period,
        packed: &[u8],
        only: Option<Period>,
        depth: usize,
    ) -> Result<Vec<LineageSpan>, Fault> {
        let runs = provenance::decode(packed).ok_or_else(|| {
            Fault::Internal(format!(
                "the provenance of a vintage of {key} cannot be read"
            ))
        })?;
        let publications = publications(self.database, &runs).await?;
        let mut spans = Vec::new();
        let mut offset = 0_i32;
        for run in runs {
            let length = i32::try_from(run.length).unwrap_or(i32::MAX);
            let ends = (start.plus(offset), start.plus(offset + length - 1));
            let (Some(mut from), Some(mut to)) = ends else {
                break;
            };
            let mut skipped = 0;
            offset += length;
            if let Some(only) = only {
                if only < from || only > to {
                    continue;
                }
                skipped = only.ordinal() - from.ordinal();
                (from, to) = (only, only);
            }
            let origin = match run.first {
                Origin::Absent => continue,
                Origin::Upload { id, line } => {
                    let publication = publications.get(&id).ok_or_else(|| {
                        Fault::Internal(format!("upload {id} of a stored observation is gone"))
                    })?;
                    let first = i64::from(line) + run.line_step * i64::from(skipped);
                    OriginView::Upload {
                        upload: id,
                        title: publication.title.clone(),
                        publisher: publication.publisher.clone(),
                        released: store::date(publication.released)?.to_string(),
                        line: u32::try_from(first).unwrap_or(line),
                        line_step: run.line_step,
                    }
                }
                Origin::Run { id } => self.run(id, key, depth).await?,
            };
            spans.push(LineageSpan {
                from: from.to_string(),
                to: to.to_string(),
                origin,
            });
        }
        Ok(spans)
    }

    /// A run that wrote observations of a series, with what it read.
    async fn run(&mut self, run: i64, key: &SeriesKey, depth: usize) -> Result<OriginView, Fault> {
        let making = preparations::making(self.database, run, key).await?;
        let mut inputs = Vec::with_capacity(making.inputs.len());
        for pin in making.inputs {
            // A future that holds itself needs a place of its own.
            let spans = Box::pin(self.input(&pin, depth + 1)).await?;
            inputs.push(InputView {
                vintage: pin,
                spans,
            });
        }
        Ok(OriginView::Run {
            run,
            preparation: making.preparation,
            version: making.version,
            method_version: making.method_version,
            steps: making.steps,
            inputs,
        })
    }

    /// Spans of a vintage that a run read, the first time that it is met.
    async fn input(&mut self, pin: &Pin, depth: usize) -> Result<Option<Vec<LineageSpan>>, Fault> {
        let identity = (
            pin.series.clone(),
            pin.segment,
            pin.released.clone(),
            pin.revision,
        );
        if depth > DEPTH || !self.seen.insert(identity) {
            return Ok(None);
        }
        let unreadable = || Fault::Internal(format!("the pin of {} cannot be read", pin.series));
        let key: SeriesKey = pin.series.parse().map_err(|_| unreadable())?;
        let said: Date = pin.released.parse().map_err(|_| unreadable())?;
        let which = (pin.segment, said, pin.revision);
        let found = {
            let mut connection = self.database.connection().await?;
            store::vintage::provenance_of(&mut connection, &key, which).await?
        };
        let (start, packed) = found.ok_or_else(unreadable)?;
        self.spans(&key, start, &packed, None, depth)
            .await
            .map(Some)
    }
}

/// The publications that observations come from, by number of the upload.
async fn publications(
    database: &Database,
    runs: &[OriginRun],
) -> Result<HashMap<i64, Publication>, Fault> {
    let upload = |run: &OriginRun| match run.first {
        Origin::Upload { id, .. } => Some(id),
        Origin::Absent | Origin::Run { .. } => None,
    };
    let mut ids: Vec<i64> = runs.iter().filter_map(upload).collect();
    ids.sort_unstable();
    ids.dedup();
    let mut connection = database.connection().await?;
    let found = store::upload::publications(&mut connection, &ids).await?;
    Ok(found.into_iter().map(|p| (p.id, p)).collect())
}
