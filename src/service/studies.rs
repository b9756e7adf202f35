//! Studies: put, run, read; a run pins what it read and gives the same digits again.

use serde::Serialize;
use utoipa::ToSchema;

use super::documents::{self, DocumentKind, timestamp};
use super::series::{Moment, pinned};
use super::views::Pin;
use super::{Fault, Simulations, blocking};
use crate::estimate::Machine;
use crate::store::document::RunRow;
use crate::store::{self, Database};
use crate::study::{self, Document, Outcome};

/// A run of a study.
#[derive(Clone, Debug, Serialize, ToSchema)]
pub struct StudyRun {
    /// Number.
    pub id: i64,
    /// Name of the study.
    pub study: String,
    /// Version of its document.
    pub version: i32,
    /// Version of the method.
    pub method_version: String,
    /// Who started it.
    pub author: String,
    /// When.
    pub recorded: String,
    /// Runs of this study up to and with this one: how many times somebody looked.
    pub runs_so_far: i64,
    /// The vintages that it read.
    pub pins: Vec<Pin>,
    /// What came out.
    pub result: Outcome,
}

const KIND: DocumentKind = DocumentKind::Study;

fn parse(body: &str) -> Result<Document, Fault> {
    Document::parse(body).map_err(|errors| documents::refused("bad_study", errors))
}

/// Checks the text of a study.
pub(super) fn check(body: &str) -> Result<(), Fault> {
    parse(body).map(|_| ())
}

/// Runs a version of a study, the newest unless one is named, on the series as of some moment and stores what
/// comes out.
///
/// # Errors
/// [`Fault::NotFound`]; [`Fault::Invalid`] where series are missing or cannot answer;
/// [`Fault::Store`].
pub async fn run(
    database: &Database,
    name: &str,
    version: Option<i64>,
    moment: &Moment,
    author: &str,
) -> Result<StudyRun, Fault> {
    let row = documents::row(database, KIND, name, version).await?;
    let document = parse(&row.body)?;
    let (pins, inputs) = pinned(database, document.inputs(), moment).await?;
    let simulations = Simulations::new(database);
    let outcome =
        blocking(move || study::run_with(&document, &inputs, Machine::with(&simulations)))
            .await?
            .map_err(|errors| Fault::invalid("study_failed", errors))?;
    let mut transaction = database.begin().await?;
    let id = store::document::insert_run(
        &mut transaction,
        KIND.as_str(),
        name,
        row.version,
        study::METHOD_VERSION,
        author,
        &serde_json::json!(pins),
        &serde_json::json!(outcome),
    )
    .await?;
    store::commit(transaction).await?;
    get_run(database, name, id).await
}

/// One run.
///
/// # Errors
/// [`Fault::NotFound`]; [`Fault::Store`].
pub async fn get_run(database: &Database, name: &str, id: i64) -> Result<StudyRun, Fault> {
    let mut connection = database.connection().await?;
    let row = store::document::run(&mut connection, KIND.as_str(), name, id)
        .await?
        .ok_or_else(|| Fault::not_found(format!("run {id} of study '{name}'")))?;
    let runs_so_far =
        store::document::count_runs_until(&mut connection, KIND.as_str(), name, id).await?;
    view(row, runs_so_far)
}

fn view(row: RunRow, runs_so_far: i64) -> Result<StudyRun, Fault> {
    let unreadable =
        |e: serde_json::Error| Fault::Internal(format!("run {} cannot be read: {e}", row.id));
    Ok(StudyRun {
        id: row.id,
        study: row.name,
        version: row.version,
        method_version: row.method_version,
        author: row.author,
        recorded: timestamp(row.recorded),
        runs_so_far,
        pins: serde_json::from_value(row.pins.0).map_err(unreadable)?,
        result: serde_json::from_value(row.result.0).map_err(unreadable)?,
    })
}

/// The run as a text for a person.
#[must_use]
pub fn text(run: &StudyRun, with_unreliable: bool) -> String {
    let newest = run
        .pins
        .iter()
        .map(|p| p.released.as_str())
        .max()
        .unwrap_or("-");
    let header = [
        format!(
            "Study {} version {}, run {} (number {} of this study; {}, by {})",
            run.study, run.version, run.id, run.runs_so_far, run.recorded, run.author
        ),
        format!(
            "{} series as released until {newest}, methods {}",
            run.pins.len(),
            run.method_version
        ),
    ];
    study::text::render(&run.result, &header, with_unreliable)
}
