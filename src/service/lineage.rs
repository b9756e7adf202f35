//! Where observations come from: upload and line, or run, steps and inputs.

use std::collections::HashMap;

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
use crate::time::Period;

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
        inputs: Vec<Pin>,
    },
}

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
    let runs = provenance::decode(&vintage.provenance).ok_or_else(|| {
        let revision = vintage.revision;
        Fault::Internal(format!(
            "the provenance of {key} at revision {revision} cannot be read"
        ))
    })?;
    let publications = publications(database, &runs).await?;
    let mut spans = Vec::new();
    let mut origins: HashMap<i64, OriginView> = HashMap::new();
    let mut offset = 0_i32;
    for run in runs {
        let length = i32::try_from(run.length).unwrap_or(i32::MAX);
        let ends = (
            vintage.start.plus(offset),
            vintage.start.plus(offset + length - 1),
        );
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
            Origin::Run { id } => match origins.get(&id) {
                Some(known) => known.clone(),
                None => {
                    let view = preparations::origin(database, id, key).await?;
                    origins.insert(id, view.clone());
                    view
                }
            },
        };
        spans.push(LineageSpan {
            from: from.to_string(),
            to: to.to_string(),
            origin,
        });
    }
    Ok(LineageView {
        series: key.to_string(),
        segment: vintage.segment,
        revision: vintage.revision,
        spans,
    })
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
