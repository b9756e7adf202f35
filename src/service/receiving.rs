//! Receiving an upload: one transaction from the first byte to the answer.
//!
//! The body streams through a worker thread that hashes, compresses and reads it; raw parts and, past
//! the memory budget, grouped rows go to the database as they come. No series is locked before the
//! body has ended. A killed process, a lost client or a failed database leave nothing behind.

use std::time::Duration;

use bytes::Bytes;
use futures_util::Stream;

use super::groups::Source;
use super::retry::ATTEMPTS;
use super::uploads::{self, ReportParts};
use super::views::UploadView;
use super::{Fault, blocking, body, currencies, landing, preview};
use crate::clock;
use crate::finding::{Finding, counted};
use crate::intake::{self, Reader};
use crate::series::provenance::Origin;
use crate::series::vintage::{Scope, Statement};
use crate::series::{Fragment, Unit};
use crate::store::change::Action;
use crate::store::upload::{NewUpload, Outcome};
use crate::store::{self, Connection, Database, Savepoint};
use crate::time::Date;

/// What becomes of an upload with rejects.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum OnReject {
    /// It is refused whole.
    Fail,
    /// The other rows land.
    Skip,
}

/// What becomes of an upload with a finding of severity error.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum OnFinding {
    /// It is kept and does not count until someone accepts it.
    Hold,
    /// It lands all the same.
    Land,
}

/// Everything about an upload but its body.
#[derive(Clone, Debug)]
pub struct Request {
    /// How to read it.
    pub settings: intake::Settings,
    /// Whether the header says gzip.
    pub gzip_declared: bool,
    /// Release date, if stated.
    pub released: Option<Date>,
    /// Title.
    pub title: String,
    /// Publisher.
    pub publisher: String,
    /// Note.
    pub note: String,
    /// Who sends it.
    pub author: String,
    /// What becomes of it when rows are rejected.
    pub on_reject: OnReject,
    /// What becomes of it when a finding would hold it.
    pub on_finding: OnFinding,
    /// What becomes of periods that it does not name.
    pub scope: Scope,
    /// Whether only to say what would happen.
    pub dry_run: bool,
}

/// Bounds on what one upload may cost.
#[derive(Clone, Copy, Debug)]
pub struct Limits {
    /// Bytes of the body as they come.
    pub max_bytes: u64,
    /// Bytes of grouped rows kept in memory.
    pub memory_budget: usize,
    /// Bytes a second that a body must keep up, over [`Limits::patience`].
    pub min_rate: u64,
    /// How long a body may be slower.
    pub patience: Duration,
    /// Bounds of reading.
    pub intake: intake::Limits,
}

/// The answer to a body above the limit.
#[must_use]
pub fn too_large(limit: u64) -> Fault {
    Fault::TooLarge {
        detail: format!(
            "an upload may have at most {limit} bytes (setting REALTERMS_MAX_UPLOAD_BYTES); split the \
             file or compress it"
        ),
        errors: vec![],
    }
}

/// The date of release: today unless stated, and never later.
fn release_date(stated: Option<Date>) -> Result<Date, Fault> {
    let today = clock::today();
    match stated {
        Some(date) if date > today => {
            let detail = "'released' lies in the future".to_owned();
            let finding = Finding::error("released_in_future", detail.as_str())
                .at_parameter("released")
                .found(date.to_string())
                .expected(format!("a date until today, {today}"))
                .remedy("state the date on which the source released the file");
            Err(Fault::BadRequest {
                detail,
                errors: vec![finding],
            })
        }
        stated => Ok(stated.unwrap_or(today)),
    }
}

/// Receives an upload.
///
/// # Errors
/// [`Fault::Invalid`] where the file cannot be read, [`Fault::Refused`] where rows were rejected and
/// `on_reject` is fail, [`Fault::TooLarge`], [`Fault::TooSlow`], [`Fault::Store`].
pub async fn receive<E: std::fmt::Display>(
    database: &Database,
    limits: &Limits,
    request: Request,
    body: impl Stream<Item = Result<Bytes, E>> + Unpin,
) -> Result<UploadView, Fault> {
    let parameters = uploads::parameters(&request);
    let parameters_json = serde_json::json!(parameters);
    let released = release_date(request.released)?;
    let mut transaction = database.begin_upload().await?;
    let context = currencies::context(&mut transaction).await?;
    let reader = Reader::new(
        request.settings.clone(),
        context,
        limits.intake,
        request.gzip_declared,
    )
    .map_err(|fatal| Fault::BadRequest {
        detail: fatal.to_string(),
        errors: fatal.findings().to_vec(),
    })?;
    let new = NewUpload {
        kind: request.settings.kind(),
        parameters: &parameters_json,
        released,
        title: &request.title,
        publisher: &request.publisher,
        note: &request.note,
        author: &request.author,
    };
    let id = store::upload::begin(&mut transaction, &new).await?;
    let body = body::receive(&mut transaction, id, limits, reader, body).await?;

    let earlier = store::upload::same_bytes(&mut transaction, &body.sha256).await?;
    if let Some(row) = earlier.iter().find(|row| {
        row.kind == request.settings.kind()
            && row.parameters.0 == parameters_json
            && (request.released.is_none() || store::date(row.released).ok() == request.released)
    }) {
        return uploads::recognised(row.clone());
    }
    let mut parts = ReportParts::new(&body.intake);
    if let Some(other) = earlier
        .iter()
        .find(|row| row.kind != request.settings.kind() || row.parameters.0 != parameters_json)
    {
        parts.findings.push(
            Finding::error(
                "same_bytes_other_settings",
                format!(
                    "these bytes came before as upload {} with other settings",
                    other.id
                ),
            )
            .found(uploads::settings_text(&parameters, request.settings.kind()))
            .expected(uploads::stored_settings_text(other))
            .remedy("withdraw the one that is wrong, or accept this one if both are right"),
        );
    }

    let mut attempt = 0;
    let (state, landed) = loop {
        attempt += 1;
        store::savepoint(&mut transaction, Savepoint::Upload).await?;
        match store_and_land(
            &mut transaction,
            id,
            released,
            &request,
            &body.source,
            &mut parts,
        )
        .await
        {
            Err(Fault::Store(e)) if e.is_transient() && attempt < ATTEMPTS => {
                store::rollback_to(&mut transaction, Savepoint::Upload).await?;
            }
            other => break other?,
        }
    };
    let report = parts.report(landed.as_ref());
    let report_json = serde_json::to_value(&report)
        .map_err(|e| Fault::Internal(format!("a report cannot be written: {e}")))?;
    let byte_count = i64::try_from(body.byte_count).unwrap_or(i64::MAX);
    let outcome = Outcome {
        state,
        sha256: &body.sha256,
        byte_count,
        compression: body.intake.understood.compression.as_str(),
        landed_revision: landed
            .as_ref()
            .filter(|_| state == "landed")
            .and_then(|l| l.revision),
        report: &report_json,
    };
    store::upload::finish(&mut transaction, id, &outcome).await?;
    let rejects: Vec<serde_json::Value> = parts
        .rejects
        .iter()
        .filter_map(|r| serde_json::to_value(r).ok())
        .collect();
    store::upload::insert_rejects(&mut transaction, id, &rejects).await?;
    let row = store::upload::get(&mut transaction, id)
        .await?
        .ok_or_else(|| Fault::Internal(format!("upload {id} vanished")))?;
    let mut view = uploads::view(row)?;
    if request.dry_run {
        view.dry_run = true;
        view.id = None;
        view.recorded = None;
        view.revision = None;
        store::rollback(transaction).await?;
    } else {
        store::commit(transaction).await?;
    }
    if state == "refused" {
        let errors: Vec<Finding> = report.rejects.iter().map(|r| r.finding.clone()).collect();
        let detail = format!(
            "{} rejected, so nothing of the file counts; mend what is wrong, or send it with \
             on_reject=skip",
            counted(report.understood.rows_rejected, "row")
        );
        return Err(Fault::Refused {
            detail,
            errors,
            upload: Box::new(view),
        });
    }
    Ok(view)
}

/// Stores what the upload says and makes it current, unless it is refused or held.
async fn store_and_land(
    connection: &mut Connection,
    id: i64,
    released: Date,
    request: &Request,
    source: &Source,
    parts: &mut ReportParts,
) -> Result<(&'static str, Option<landing::Landing>), Fault> {
    parts.forget_merge();
    let keys = source.keys();
    let series = store::series::ensure(connection, &keys).await?;
    store::series::lock(connection, &series).await?;
    refuse_derived(connection, source, &series).await?;
    for batch in source.batches() {
        let pieces = source.fetch(connection, batch.clone()).await?;
        let settled: Vec<_> =
            blocking(move || pieces.iter().map(|p| Fragment::settle(p)).collect()).await?;
        let mut fragments = Vec::with_capacity(batch.len());
        let mut ids = Vec::with_capacity(batch.len());
        for (i, (fragment, duplicates)) in batch.zip(settled) {
            parts.add_duplicates(keys[i], &duplicates);
            if let Some(fragment) = fragment {
                fragments.push(fragment);
                ids.push(series[i]);
            }
        }
        let units = fragments.iter().map(|f| &f.unit);
        let wanted: Vec<(i64, &Unit)> = ids.into_iter().zip(units).collect();
        let segments = store::series::ensure_segments(connection, &wanted).await?;
        let statements: Vec<(i64, Statement)> = segments
            .iter()
            .zip(fragments)
            .map(|(segment, fragment)| (segment.id, statement(id, request.scope, fragment)))
            .collect();
        store::fragment::insert(connection, id, &statements).await?;
    }
    if parts.rejected() && request.on_reject == OnReject::Fail {
        store::rollback_to(connection, Savepoint::Upload).await?;
        return Ok(("refused", None));
    }
    store::savepoint(connection, Savepoint::Landing).await?;
    let landed = landing::land(connection, id, released, Action::Land, &request.author).await?;
    let opened = preview::opened_segments(connection, &landed.opened).await?;
    parts.add_landing(&landed, opened);
    if parts.holds() && request.on_finding == OnFinding::Hold {
        store::rollback_to(connection, Savepoint::Landing).await?;
        return Ok(("held", Some(landed)));
    }
    Ok(("landed", Some(landed)))
}

/// An output of a preparation takes no uploads.
async fn refuse_derived(
    connection: &mut Connection,
    source: &Source,
    series: &[i64],
) -> Result<(), Fault> {
    let derived = store::vintage::fed_by_runs(connection, series).await?;
    let Some(i) = series.iter().position(|id| derived.contains(id)) else {
        return Ok(());
    };
    Err(Fault::Conflict {
        code: "derived_series",
        detail: format!(
            "{} is the output of a preparation and takes no uploads; send the data under another source",
            source.keys()[i]
        ),
    })
}

fn statement(upload: i64, scope: Scope, fragment: Fragment) -> Statement {
    let origins = fragment
        .lines
        .iter()
        .map(|line| match line {
            0 => Origin::Absent,
            line => Origin::Upload {
                id: upload,
                line: *line,
            },
        })
        .collect();
    Statement {
        start: fragment.start,
        values: fragment.values,
        status: fragment.status,
        origins,
        scope,
    }
}
