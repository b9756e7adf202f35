//! Uploads after they came: reports, lists, raw bytes, acceptance and withdrawal.

use std::collections::BTreeMap;

use futures_util::stream::BoxStream;
use futures_util::{StreamExt, TryStreamExt};

use super::documents::{cursor, timestamp};
use super::landing::{self, Landing};
use super::receiving::Request;
use super::retry::retried;
use super::views::{ObservationCounts, OpenedSegment, Page, SeriesList, UploadReport, UploadView};
use super::{Fault, blocking, preview};
use crate::clock;
use crate::finding::{Finding, Severity};
use crate::intake::{Intake, Reject, Understood};
use crate::series::vintage::Scope;
use crate::series::{Duplicate, SeriesKey};
use crate::store::change::Action;
use crate::store::upload::UploadRow;
use crate::store::{self, Database};

/// Rejects shown in a report.
const SHOWN_REJECTS: usize = 100;

/// The settings that tell two uploads of the same bytes apart, by name.
pub(super) fn parameters(request: &Request) -> BTreeMap<String, String> {
    let mut parameters = request.settings.constants();
    if request.scope == Scope::Replace {
        parameters.insert("scope".to_owned(), "replace".to_owned());
    }
    parameters
}

pub(super) fn settings_text(parameters: &BTreeMap<String, String>, kind: &str) -> String {
    let mut text = format!("kind={kind}");
    for (name, value) in parameters {
        text.push_str(&format!(" {name}={value}"));
    }
    text
}

fn stored_parameters(row: &UploadRow) -> BTreeMap<String, String> {
    serde_json::from_value(row.parameters.0.clone()).unwrap_or_default()
}

pub(super) fn stored_settings_text(row: &UploadRow) -> String {
    settings_text(&stored_parameters(row), &row.kind)
}

/// The report of an upload while it is put together.
pub(super) struct ReportParts {
    understood: Understood,
    pub(super) rejects: Vec<Reject>,
    pub(super) findings: Vec<Finding>,
    duplicates: Vec<Reject>,
    duplicate_count: u64,
    landing_findings: Vec<Finding>,
    opened: Vec<OpenedSegment>,
}

impl ReportParts {
    pub(super) fn new(intake: &Intake) -> Self {
        Self {
            understood: intake.understood.clone(),
            rejects: intake.rejects.clone(),
            findings: intake.findings.clone(),
            duplicates: Vec::new(),
            duplicate_count: 0,
            landing_findings: Vec::new(),
            opened: Vec::new(),
        }
    }

    /// Forgets what a merge that is tried again has found.
    pub(super) fn forget_merge(&mut self) {
        self.duplicates.clear();
        self.duplicate_count = 0;
        self.landing_findings.clear();
        self.opened.clear();
    }

    pub(super) fn add_duplicates(&mut self, key: &SeriesKey, duplicates: &[Duplicate]) {
        const KEPT: usize = 10_000;
        self.duplicate_count += duplicates.len() as u64;
        let room = KEPT.saturating_sub(self.duplicates.len());
        self.duplicates.extend(
            duplicates
                .iter()
                .take(room)
                .map(|d| Reject::duplicate(key, d)),
        );
    }

    pub(super) fn add_landing(&mut self, landing: &Landing, opened: Vec<OpenedSegment>) {
        self.landing_findings.clone_from(&landing.findings);
        if landing.more_findings > 0 {
            self.landing_findings.push(Finding::error(
                "more_findings",
                format!("such findings in {} more series", landing.more_findings),
            ));
        }
        self.opened = opened;
    }

    pub(super) fn rejected(&self) -> bool {
        self.understood.rows_rejected > 0 || self.duplicate_count > 0
    }

    pub(super) fn holds(&self) -> bool {
        let mut findings = self.findings.iter().chain(&self.landing_findings);
        findings.any(|f| f.severity == Severity::Error)
    }

    /// The report; from here on duplicates count among the rejects.
    pub(super) fn report(&mut self, landing: Option<&Landing>) -> UploadReport {
        self.rejects.append(&mut self.duplicates);
        self.rejects.sort_by_key(|r| r.finding.place.line);
        if self.duplicate_count > 0 {
            *self
                .understood
                .rejects_by_code
                .entry("duplicate_key".to_owned())
                .or_default() += self.duplicate_count;
            self.understood.rows_rejected += self.duplicate_count;
            self.understood.rows_accepted -= self.duplicate_count;
        }
        let mut findings = self.findings.clone();
        findings.extend(self.landing_findings.iter().cloned());
        UploadReport {
            understood: self.understood.clone(),
            rejects: self.rejects.iter().take(SHOWN_REJECTS).cloned().collect(),
            findings,
            observations: landing.map_or_else(ObservationCounts::default, |l| l.observations),
            series_created: landing.map_or_else(SeriesList::default, |l| l.series_created.clone()),
            series_changed: landing.map_or_else(SeriesList::default, |l| l.series_changed.clone()),
            segments_opened: self.opened.clone(),
        }
    }
}

/// The answer to bytes and settings that came before.
pub(super) fn recognised(row: UploadRow) -> Result<UploadView, Fault> {
    Ok(UploadView {
        recognised: true,
        ..view(row)?
    })
}

pub(super) fn view(row: UploadRow) -> Result<UploadView, Fault> {
    let parameters = stored_parameters(&row);
    Ok(UploadView {
        id: Some(row.id),
        kind: row.kind,
        state: row.state,
        sha256: row.sha256.iter().map(|b| format!("{b:02x}")).collect(),
        bytes: row.byte_count,
        compression: row.compression,
        parameters,
        released: store::date(row.released)?.to_string(),
        title: row.title,
        publisher: row.publisher,
        note: row.note,
        author: row.author,
        recorded: Some(timestamp(row.recorded)),
        revision: row.landed_revision,
        withdrawn_revision: row.withdrawn_revision,
        dry_run: false,
        recognised: false,
        report: serde_json::from_value(row.report.0).ok(),
    })
}

fn no_upload(id: i64) -> Fault {
    Fault::not_found(format!("upload {id}"))
}

/// One upload with its report.
///
/// # Errors
/// [`Fault::NotFound`]; [`Fault::Store`].
pub async fn get(database: &Database, id: i64) -> Result<UploadView, Fault> {
    let mut connection = database.connection().await?;
    let row = store::upload::get(&mut connection, id).await?;
    view(row.ok_or_else(|| no_upload(id))?)
}

/// Uploads without their reports, newest first.
///
/// # Errors
/// [`Fault::BadRequest`] for a wrong cursor; [`Fault::Store`].
pub async fn list(
    database: &Database,
    state: Option<&str>,
    kind: Option<&str>,
    after: Option<&str>,
    limit: i64,
) -> Result<Page<UploadView>, Fault> {
    let before = after.map_or(Ok(i64::MAX), cursor)?;
    let mut connection = database.connection().await?;
    let rows = store::upload::list(&mut connection, state, kind, before, limit + 1).await?;
    let views = rows.into_iter().map(view).collect::<Result<_, _>>()?;
    Ok(Page::cut(views, limit, |u: &UploadView| {
        u.id.unwrap_or_default().to_string()
    }))
}

/// Rejects of an upload.
///
/// # Errors
/// [`Fault::NotFound`]; [`Fault::BadRequest`] for a wrong cursor; [`Fault::Store`].
pub async fn rejects(
    database: &Database,
    id: i64,
    after: Option<&str>,
    limit: i64,
) -> Result<Page<Reject>, Fault> {
    let after = after.map_or(Ok(0), cursor)?;
    let mut connection = database.connection().await?;
    store::upload::get(&mut connection, id)
        .await?
        .ok_or_else(|| no_upload(id))?;
    let after = i32::try_from(after).unwrap_or(i32::MAX);
    let rows = store::upload::rejects(&mut connection, id, after, limit + 1).await?;
    let page = Page::cut(rows, limit, |(number, _)| number.to_string());
    Ok(Page {
        items: page
            .items
            .into_iter()
            .filter_map(|(_, reject)| serde_json::from_value(reject).ok())
            .collect(),
        next: page.next,
    })
}

/// The raw bytes as they came, in pieces, with their coding (`none` or `gzip`).
///
/// # Errors
/// [`Fault::NotFound`]; [`Fault::Store`]; inside the stream the same.
pub async fn raw(
    database: &Database,
    id: i64,
) -> Result<(UploadView, BoxStream<'static, Result<Vec<u8>, Fault>>), Fault> {
    let upload = get(database, id).await?;
    let bytes = store::upload::parts(database, id)
        .map_err(Fault::from)
        .and_then(|part| async move {
            blocking(move || zstd::stream::decode_all(part.as_slice()))
                .await?
                .map_err(|e| Fault::Internal(format!("a stored part cannot be unpacked: {e}")))
        })
        .boxed();
    Ok((upload, bytes))
}

/// Makes a held upload current.
///
/// # Errors
/// [`Fault::NotFound`]; [`Fault::Conflict`] where it is not held; [`Fault::Store`].
pub async fn accept(database: &Database, id: i64, author: &str) -> Result<UploadView, Fault> {
    retried(async || try_to_accept(database, id, author).await).await?;
    get(database, id).await
}

async fn try_to_accept(database: &Database, id: i64, author: &str) -> Result<(), Fault> {
    let mut transaction = database.begin().await?;
    let state = store::upload::lock(&mut transaction, id)
        .await?
        .ok_or_else(|| no_upload(id))?;
    if state != "held" {
        return Err(Fault::Conflict {
            code: "not_held",
            detail: format!("upload {id} is {state}; only a held upload can be accepted"),
        });
    }
    let row = store::upload::get(&mut transaction, id)
        .await?
        .ok_or_else(|| no_upload(id))?;
    let released = store::date(row.released)?;
    store::series::lock_of_upload(&mut transaction, id).await?;
    let landed = landing::land(&mut transaction, id, released, Action::Accept, author).await?;
    let report = match serde_json::from_value::<UploadReport>(row.report.0.clone()) {
        Ok(report) => serde_json::to_value(UploadReport {
            observations: landed.observations,
            series_created: landed.series_created.clone(),
            series_changed: landed.series_changed.clone(),
            segments_opened: preview::opened_segments(&mut transaction, &landed.opened).await?,
            ..report
        })
        .map_err(|e| Fault::Internal(format!("a report cannot be written: {e}")))?,
        Err(_) => row.report.0,
    };
    store::upload::set_state(
        &mut transaction,
        id,
        "landed",
        landed.revision,
        None,
        &report,
    )
    .await?;
    Ok(store::commit(transaction).await?)
}

/// Withdraws an upload: what it said no longer counts, as if it had never come.
///
/// # Errors
/// [`Fault::NotFound`]; [`Fault::Conflict`] where it neither landed nor is held; [`Fault::Store`].
pub async fn withdraw(database: &Database, id: i64, author: &str) -> Result<UploadView, Fault> {
    retried(async || try_to_withdraw(database, id, author).await).await?;
    get(database, id).await
}

async fn try_to_withdraw(database: &Database, id: i64, author: &str) -> Result<(), Fault> {
    let mut transaction = database.begin().await?;
    let state = store::upload::lock(&mut transaction, id)
        .await?
        .ok_or_else(|| no_upload(id))?;
    if state != "held" && state != "landed" {
        return Err(Fault::Conflict {
            code: "not_current",
            detail: format!("upload {id} is {state}; there is nothing to withdraw"),
        });
    }
    let row = store::upload::get(&mut transaction, id)
        .await?
        .ok_or_else(|| no_upload(id))?;
    let report = row.report.0;
    let withdrawn = "withdrawn";
    // What is replayed is what has landed, so the state comes first and the revision after.
    store::upload::set_state(&mut transaction, id, withdrawn, None, None, &report).await?;
    if state == "landed" {
        let released = store::date(row.released)?;
        let revision = landing::unland(&mut transaction, id, released, author).await?;
        let revision = Some(revision.number);
        store::upload::set_state(&mut transaction, id, withdrawn, None, revision, &report).await?;
    }
    Ok(store::commit(transaction).await?)
}

/// Erases refused uploads recorded more than so many days ago.
///
/// # Errors
/// [`Fault::Store`].
pub async fn erase_old_refused(database: &Database, days: u32) -> Result<u64, Fault> {
    let days = chrono::Days::new(u64::from(days));
    let Some(before) = clock::now().checked_sub_days(days) else {
        return Ok(0);
    };
    let mut connection = database.connection().await?;
    Ok(store::upload::delete_refused_before(&mut connection, before).await?)
}
