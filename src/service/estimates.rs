//! Estimations without a study: made, read, forgotten after a time.

use std::collections::BTreeMap;

use chrono::{DateTime, Days, Utc};
use serde::Serialize;
use utoipa::ToSchema;

use super::documents::{cursor, refused, timestamp};
use super::preparations::pin;
use super::series::Moment;
use super::views::{Page, Pin};
use super::{Fault, blocking, preview};
use crate::clock;
use crate::estimate::NoStore;
use crate::estimation::{self, METHOD_VERSION, Machine, Report, Request, Rows};
use crate::store::estimate::{EstimateRow, NewEstimate};
use crate::store::{self, Database};

/// An estimation.
#[derive(Clone, Debug, Serialize, ToSchema)]
pub struct EstimateView {
    /// Number.
    pub id: i64,
    /// Who asked for it.
    pub author: String,
    /// When.
    pub recorded: String,
    /// When it may be erased.
    pub expires: String,
    /// The vintages that it read.
    pub pins: Vec<Pin>,
    /// The request as it came.
    #[schema(value_type = Object)]
    pub request: serde_json::Value,
    /// What came out.
    pub result: Report,
}

/// A line of the list of estimations.
#[derive(Clone, Debug, Serialize, ToSchema)]
pub struct EstimateLine {
    /// Number.
    pub id: i64,
    /// Name of the method.
    pub method: String,
    /// Version of the methods.
    pub method_version: String,
    /// Who asked for it.
    pub author: String,
    /// When.
    pub recorded: String,
    /// When it may be erased.
    pub expires: String,
}

/// Estimates on the series as of some moment and stores what comes out, to be kept `days`.
///
/// # Errors
/// [`Fault::BadRequest`] for a body that is no JSON; [`Fault::Invalid`] with JSON pointers for a request
/// that cannot be understood, or series that cannot answer it; [`Fault::Store`].
pub async fn create(
    database: &Database,
    body: &str,
    moment: &Moment,
    author: &str,
    days: u32,
) -> Result<EstimateView, Fault> {
    let request = Request::parse(body).map_err(|errors| refused("bad_estimate", errors))?;
    let mut pins = Vec::new();
    let mut inputs = BTreeMap::new();
    let mut connection = database.connection().await?;
    let as_of = moment.resolve(&mut connection).await?;
    for key in request.inputs() {
        if let Some(vintage) = store::vintage::read(&mut connection, &key, as_of).await? {
            pins.push(pin(&key, &vintage));
            inputs.insert(key, preview::series(vintage));
        }
    }
    drop(connection);
    let method = request.method();
    let outcome = blocking(move || {
        let threads = std::thread::available_parallelism().map_or(1, usize::from);
        let store = &NoStore;
        estimation::run(&request, &inputs, &Machine { threads, store })
    });
    let (report, rows) = outcome
        .await?
        .map_err(|errors| Fault::invalid("estimate_failed", errors))?;
    let mut connection = database.connection().await?;
    let new = NewEstimate {
        method,
        method_version: METHOD_VERSION,
        author,
        request: body,
        pins: &serde_json::json!(pins),
        report: &serde_json::json!(report),
        sample: &serde_json::json!(rows),
    };
    let id = store::estimate::insert(&mut connection, new).await?;
    drop(connection);
    get(database, id, days).await
}

/// One estimation.
///
/// # Errors
/// [`Fault::NotFound`]; [`Fault::Store`].
pub async fn get(database: &Database, id: i64, days: u32) -> Result<EstimateView, Fault> {
    let mut connection = database.connection().await?;
    let row = store::estimate::get(&mut connection, id).await?;
    view(row.ok_or_else(|| nothing(id))?, days)
}

fn nothing(id: i64) -> Fault {
    Fault::not_found(format!("estimate {id}; estimates are kept for a time only"))
}

fn unreadable(id: i64) -> impl Fn(serde_json::Error) -> Fault {
    move |e| Fault::Internal(format!("estimate {id} cannot be read: {e}"))
}

fn view(row: EstimateRow, days: u32) -> Result<EstimateView, Fault> {
    Ok(EstimateView {
        id: row.id,
        author: row.author,
        recorded: timestamp(row.recorded),
        expires: expires(row.recorded, days),
        pins: serde_json::from_value(row.pins.0).map_err(unreadable(row.id))?,
        request: serde_json::from_str(&row.request).map_err(unreadable(row.id))?,
        result: serde_json::from_value(row.report.0).map_err(unreadable(row.id))?,
    })
}

fn expires(recorded: DateTime<Utc>, days: u32) -> String {
    let end = recorded.checked_add_days(Days::new(u64::from(days)));
    timestamp(end.unwrap_or(DateTime::<Utc>::MAX_UTC))
}

/// Estimations, newest first.
///
/// # Errors
/// [`Fault::BadRequest`] for a foreign cursor; [`Fault::Store`].
pub async fn list(
    database: &Database,
    after: Option<&str>,
    limit: i64,
    days: u32,
) -> Result<Page<EstimateLine>, Fault> {
    let before = after.map_or(Ok(i64::MAX), cursor)?;
    let mut connection = database.connection().await?;
    let rows = store::estimate::list(&mut connection, before, limit + 1).await?;
    let items = rows
        .into_iter()
        .map(|r| EstimateLine {
            id: r.id,
            method: r.method,
            method_version: r.method_version,
            author: r.author,
            recorded: timestamp(r.recorded),
            expires: expires(r.recorded, days),
        })
        .collect();
    Ok(Page::cut(items, limit, |e: &EstimateLine| e.id.to_string()))
}

/// The rows that an estimation was computed from, as a CSV file; with `comments`, the call in words
/// stands before them.
///
/// # Errors
/// [`Fault::NotFound`]; [`Fault::Store`].
pub async fn sample(database: &Database, id: i64, comments: bool) -> Result<String, Fault> {
    let mut connection = database.connection().await?;
    let row = store::estimate::sample(&mut connection, id).await?;
    let row = row.ok_or_else(|| nothing(id))?;
    let report: Report = serde_json::from_value(row.report.0).map_err(unreadable(id))?;
    let rows: Rows = serde_json::from_value(row.sample.0).map_err(unreadable(id))?;
    Ok(rows.csv(&report, comments))
}

/// Erases an estimation before its time.
///
/// # Errors
/// [`Fault::NotFound`]; [`Fault::Store`].
pub async fn delete(database: &Database, id: i64) -> Result<(), Fault> {
    let mut connection = database.connection().await?;
    if store::estimate::delete(&mut connection, id).await? {
        Ok(())
    } else {
        Err(nothing(id))
    }
}

/// Erases estimations recorded more than so many days ago.
///
/// # Errors
/// [`Fault::Store`].
pub async fn erase_old(database: &Database, days: u32) -> Result<u64, Fault> {
    match clock::now().checked_sub_days(Days::new(u64::from(days))) {
        Some(before) => sweep(database, before).await,
        None => Ok(0),
    }
}

/// Erases estimations recorded before a moment.
///
/// # Errors
/// [`Fault::Store`].
pub async fn sweep(database: &Database, before: DateTime<Utc>) -> Result<u64, Fault> {
    let mut connection = database.connection().await?;
    Ok(store::estimate::delete_before(&mut connection, before).await?)
}

fn header(view: &EstimateView) -> Vec<String> {
    let newest = view.pins.iter().map(|p| p.released.as_str()).max();
    let mut lines = vec![format!(
        "Estimate {} ({}, by {}), kept until {}",
        view.id, view.recorded, view.author, view.expires
    )];
    if let Some(newest) = newest {
        lines.push(format!(
            "{} series as released until {newest}",
            view.pins.len()
        ));
    }
    lines
}

/// The estimation as a text for a person.
#[must_use]
pub fn text(view: &EstimateView) -> String {
    estimation::text::render(&view.result, &header(view))
}

/// The estimation as tables for a paper.
#[must_use]
pub fn latex(view: &EstimateView) -> String {
    estimation::latex::render(&view.result, &header(view))
}
