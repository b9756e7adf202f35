//! Preparations: put, plan, run; outputs become series with lineage.

use std::collections::{BTreeMap, BTreeSet};

use serde::{Deserialize, Serialize};
use utoipa::ToSchema;

use super::documents::{self, DocumentKind, timestamp};
use super::retry::retried;
use super::series::{Moment, pin};
use super::views::Pin;
use super::{Fault, blocking, preview};
use crate::finding::Finding;
use crate::preparation::{self, Document, InputInfo, InputRef, Output, Plan};
use crate::series::provenance::Origin;
use crate::series::vintage::{Scope, State, Statement, merge};
use crate::series::{Series, SeriesKey, Status, Unit};
use crate::store::change::{self, Action};
use crate::store::document::RunRow;
use crate::store::vintage::{AsOf, NewVintage, ReadVintage, VintageRow};
use crate::store::{self, Connection, Database};
use crate::time::Date;

/// A run of a preparation.
#[derive(Clone, Debug, Serialize, ToSchema)]
pub struct PreparationRun {
    /// Number.
    pub id: i64,
    /// Name of the preparation.
    pub preparation: String,
    /// Version of its document.
    pub version: i32,
    /// Version of the method.
    pub method_version: String,
    /// Who started it.
    pub author: String,
    /// When.
    pub recorded: String,
    /// Revision that wrote the outputs; null where nothing changed.
    pub revision: Option<i64>,
    /// The vintages that it read.
    pub pins: Vec<Pin>,
    /// What it made.
    pub outputs: Vec<OutputView>,
}

/// An output of a run.
#[derive(Clone, Debug, Serialize, Deserialize, ToSchema)]
pub struct OutputView {
    /// Key of the series.
    pub series: String,
    /// Unit in words.
    pub unit_text: String,
    /// First period; null where the result is empty.
    pub first: Option<String>,
    /// Last period.
    pub last: Option<String>,
    /// Periods from first to last.
    pub observations: usize,
    /// Whether a new vintage was written; false where the result is what was there.
    pub changed: bool,
    /// The steps in words.
    pub steps: Vec<String>,
    /// Series that the steps name.
    pub inputs: Vec<String>,
    /// Coverage, link factors, periods left off.
    pub notes: Vec<Finding>,
}

#[derive(Serialize, Deserialize)]
struct StoredResult {
    revision: Option<i64>,
    outputs: Vec<OutputView>,
}

const KIND: DocumentKind = DocumentKind::Preparation;

fn parse(body: &str) -> Result<Document, Fault> {
    Document::parse(body).map_err(|errors| documents::refused("bad_preparation", errors))
}

/// Checks the text of a preparation. Where its inputs are stored already, units are checked too; an output may
/// not be a series that uploads feed.
pub(super) async fn check(database: &Database, body: &str) -> Result<(), Fault> {
    let document = parse(body)?;
    let mut connection = database.connection().await?;
    let keys: Vec<&SeriesKey> = document.outputs().map(|(key, _)| key).collect();
    let found = store::series::find(&mut connection, &keys).await?;
    let (keys, ids): (Vec<_>, Vec<_>) = found.into_iter().map(|(i, id)| (keys[i], id)).unzip();
    refuse_fed(&mut connection, &keys, &ids).await?;
    drop(connection);
    check_plan(database, document).await.map(|_| ())
}

/// A series that uploads feed is no output.
async fn refuse_fed(
    connection: &mut Connection,
    keys: &[&SeriesKey],
    ids: &[i64],
) -> Result<(), Fault> {
    let fed = store::fragment::fed_by_uploads(connection, ids).await?;
    let Some(i) = ids.iter().position(|id| fed.contains(id)) else {
        return Ok(());
    };
    Err(Fault::Conflict {
        code: "series_of_uploads",
        detail: format!(
            "{} is fed by uploads and cannot be an output; name the output otherwise, for example \
             by a source of your own",
            keys[i]
        ),
    })
}

/// A series that the current document of another preparation makes is no output: either run would undo the
/// other's.
async fn refuse_owned(
    connection: &mut Connection,
    name: &str,
    keys: &[&SeriesKey],
    ids: &[i64],
) -> Result<(), Fault> {
    let owners = store::vintage::owners(connection, ids).await?;
    let mut documents: BTreeMap<String, Option<Document>> = BTreeMap::new();
    for (id, owner) in owners.into_iter().filter(|(_, owner)| owner != name) {
        if !documents.contains_key(&owner) {
            let row = store::document::newest(connection, KIND.as_str(), &owner).await?;
            documents.insert(owner.clone(), row.and_then(|row| parse(&row.body).ok()));
        }
        let document = documents.get(&owner).and_then(Option::as_ref);
        let key = ids.iter().position(|i| *i == id).map(|i| keys[i]);
        if let Some((document, key)) = document.zip(key)
            && document.makes(key)
        {
            return Err(Fault::Conflict {
                code: "series_of_preparation",
                detail: format!(
                    "{key} is an output of the preparation '{owner}', and one series has one preparation; \
                     name the output otherwise, or take it out of '{owner}'"
                ),
            });
        }
    }
    Ok(())
}

/// What a preparation would do with the series stored now.
///
/// # Errors
/// [`Fault::NotFound`]; [`Fault::Invalid`] with JSON pointers; [`Fault::Store`].
pub async fn plan(database: &Database, name: &str) -> Result<Plan, Fault> {
    let row = documents::row(database, KIND, name, None).await?;
    check_plan(database, parse(&row.body)?).await
}

async fn check_plan(database: &Database, document: Document) -> Result<Plan, Fault> {
    let mut infos = BTreeMap::new();
    for (input, vintage) in read_inputs(database, &document.inputs(), &Moment::default()).await? {
        let series = preview::series(vintage);
        let last = series.len().checked_sub(1).and_then(|i| series.period(i));
        if let Some(last) = last {
            infos.insert(
                input,
                InputInfo {
                    unit: series.unit,
                    first: series.start,
                    last,
                },
            );
        }
    }
    blocking(move || preparation::plan(&document, &infos))
        .await?
        .map_err(|errors| Fault::invalid("bad_preparation", errors))
}

/// Reads the inputs that exist.
async fn read_inputs(
    database: &Database,
    inputs: &[InputRef],
    moment: &Moment,
) -> Result<Vec<(InputRef, ReadVintage)>, Fault> {
    let mut connection = database.connection().await?;
    let pinned = moment.pinned(&mut connection).await?;
    let mut found = Vec::new();
    for input in inputs {
        let as_of = AsOf {
            segment: input.segment,
            ..pinned
        };
        if let Some(vintage) = store::vintage::read(&mut connection, &input.key, as_of).await? {
            found.push((input.clone(), vintage));
        }
    }
    Ok(found)
}

/// Runs a version of a preparation, the newest unless one is named, and stores its outputs.
///
/// # Errors
/// [`Fault::NotFound`]; [`Fault::Invalid`] where an input is missing or a step has no result;
/// [`Fault::Conflict`] where an output is fed by uploads or by another preparation; [`Fault::Store`].
pub async fn run(
    database: &Database,
    name: &str,
    version: Option<i64>,
    moment: &Moment,
    author: &str,
) -> Result<PreparationRun, Fault> {
    let row = documents::row(database, KIND, name, version).await?;
    let document = parse(&row.body)?;
    let found = read_inputs(database, &document.inputs(), moment).await?;
    let pins: Vec<Pin> = found.iter().map(|(input, v)| pin(&input.key, v)).collect();
    let released = found.iter().map(|(_, v)| v.visible_from).max();
    let inputs: BTreeMap<InputRef, Series> = found
        .into_iter()
        .map(|(input, v)| (input, preview::series(v)))
        .collect();
    let outputs = blocking(move || preparation::evaluate(&document, &inputs))
        .await?
        .map_err(|errors| Fault::invalid("preparation_failed", errors))?;
    let released = released
        .ok_or_else(|| Fault::Internal("a preparation without inputs has outputs".to_owned()))?;

    let id = retried(async || {
        let mut transaction = database.begin().await?;
        let pins_json = serde_json::json!(pins);
        let id = store::document::insert_run(
            &mut transaction,
            KIND.as_str(),
            name,
            row.version,
            preparation::METHOD_VERSION,
            author,
            &pins_json,
            &serde_json::Value::Null,
        )
        .await?;
        let written = write(
            &mut transaction,
            (name, id),
            released,
            moment.is_now(),
            &outputs,
            author,
        );
        let (revision, changed) = written.await?;
        let result = StoredResult {
            revision,
            outputs: outputs
                .iter()
                .map(|o| output_view(o, changed.contains(&o.key)))
                .collect(),
        };
        store::document::set_run_result(&mut transaction, id, &serde_json::json!(result)).await?;
        store::commit(transaction).await?;
        Ok(id)
    })
    .await?;
    get_run(database, name, id).await
}

/// Writes outputs whose values or status differ from what is visible as of their release date. A run on the
/// present replaces what is there now, even where that came of a newer release than its own inputs.
async fn write(
    connection: &mut Connection,
    (name, run): (&str, i64),
    mut released: Date,
    now: bool,
    outputs: &[Output],
    author: &str,
) -> Result<(Option<i64>, BTreeSet<SeriesKey>), Fault> {
    let keys: Vec<&SeriesKey> = outputs.iter().map(|o| &o.key).collect();
    let ids = store::series::ensure(connection, &keys).await?;
    store::series::lock(connection, &ids).await?;
    let units = outputs.iter().map(|o| &o.series.unit);
    let wanted: Vec<(i64, &Unit)> = ids.iter().copied().zip(units).collect();
    let segments = store::series::ensure_segments(connection, &wanted).await?;
    refuse_fed(connection, &keys, &ids).await?;
    refuse_owned(connection, name, &keys, &ids).await?;
    let siblings = store::series::segments_of_series(connection, &ids).await?;
    let all: Vec<i64> = siblings.iter().map(|(_, segment)| *segment).collect();
    let day_after = Date::from_days(released.days() + 1).filter(|_| !now);
    let rows =
        store::vintage::visible_before(connection, &all, day_after.unwrap_or(Date::LAST)).await?;
    for row in &rows {
        released = released.max(store::date(row.released)?);
    }
    let mut visible: BTreeMap<i64, VintageRow> =
        rows.into_iter().map(|row| (row.segment_id, row)).collect();
    let mut vintages = Vec::new();
    let mut changed = BTreeSet::new();
    for (output, segment) in outputs.iter().zip(&segments) {
        let before = visible
            .remove(&segment.id)
            .map(|row| row.state(output.key.frequency()))
            .transpose()?;
        let (state, changes) = merge(before.as_ref(), &statement(run, &output.series));
        if changes.any() {
            changed.insert(output.key.clone());
            vintages.push(NewVintage::new(
                segment.id, released, released, &state, changes,
            ));
        }
        // A run gives the whole series: what stood under another unit is over.
        for (series, sibling) in &siblings {
            if *series == segment.series_id
                && *sibling != segment.id
                && let Some(row) = visible.remove(sibling)
                && !row.values.is_empty()
            {
                let old = row.state(output.key.frequency())?;
                let state = State::empty(old.start);
                let changes = crate::series::vintage::difference(&old, &state);
                vintages.push(NewVintage::new(
                    *sibling, released, released, &state, changes,
                ));
            }
        }
    }
    if vintages.is_empty() {
        return Ok((None, changed));
    }
    let revision = change::draw(connection, Action::Run, None, Some(run), author).await?;
    store::vintage::insert(connection, revision.number, &vintages).await?;
    Ok((Some(revision.number), changed))
}

fn statement(run: i64, series: &Series) -> Statement {
    Statement {
        start: series.start,
        values: series.values.clone(),
        status: series.status.clone(),
        origins: series
            .status
            .iter()
            .map(|s| {
                if *s == Status::Absent {
                    Origin::Absent
                } else {
                    Origin::Run { id: run }
                }
            })
            .collect(),
        scope: Scope::Replace,
    }
}

fn output_view(output: &Output, changed: bool) -> OutputView {
    let series = &output.series;
    let last = series.len().checked_sub(1).and_then(|i| series.period(i));
    OutputView {
        series: output.key.to_string(),
        unit_text: series.unit.to_string(),
        first: last.map(|_| series.start.to_string()),
        last: last.map(|p| p.to_string()),
        observations: series.len(),
        changed,
        steps: output.steps.clone(),
        inputs: output.inputs.iter().map(|i| i.key.to_string()).collect(),
        notes: output.notes.clone(),
    }
}

/// One run.
///
/// # Errors
/// [`Fault::NotFound`]; [`Fault::Store`].
pub async fn get_run(database: &Database, name: &str, id: i64) -> Result<PreparationRun, Fault> {
    let mut connection = database.connection().await?;
    let row = store::document::run(&mut connection, KIND.as_str(), name, id)
        .await?
        .ok_or_else(|| Fault::not_found(format!("run {id} of preparation '{name}'")))?;
    run_view(row)
}

fn run_view(row: RunRow) -> Result<PreparationRun, Fault> {
    let unreadable =
        |e: serde_json::Error| Fault::Internal(format!("run {} cannot be read: {e}", row.id));
    let result: StoredResult = serde_json::from_value(row.result.0).map_err(unreadable)?;
    Ok(PreparationRun {
        id: row.id,
        preparation: row.name,
        version: row.version,
        method_version: row.method_version,
        author: row.author,
        recorded: timestamp(row.recorded),
        revision: result.revision,
        pins: serde_json::from_value(row.pins.0).map_err(unreadable)?,
        outputs: result.outputs,
    })
}

/// What wrote an output: its steps, and the stored vintages that they rest on, through other outputs of the
/// same run too.
pub(super) struct Making {
    pub(super) preparation: String,
    pub(super) version: i32,
    pub(super) method_version: String,
    pub(super) steps: Vec<String>,
    pub(super) inputs: Vec<Pin>,
}

pub(super) async fn making(
    database: &Database,
    run: i64,
    key: &SeriesKey,
) -> Result<Making, Fault> {
    let mut connection = database.connection().await?;
    let row = store::document::run_by_id(&mut connection, run)
        .await?
        .ok_or_else(|| Fault::Internal(format!("run {run} of a stored observation is gone")))?;
    let run = run_view(row)?;
    let by_key: BTreeMap<&str, &OutputView> =
        run.outputs.iter().map(|o| (o.series.as_str(), o)).collect();
    let text = key.to_string();
    let mut open = vec![text.as_str()];
    let mut seen = BTreeSet::new();
    while let Some(series) = open.pop() {
        if seen.insert(series)
            && let Some(output) = by_key.get(series)
        {
            open.extend(output.inputs.iter().map(String::as_str));
        }
    }
    Ok(Making {
        steps: by_key
            .get(text.as_str())
            .map_or_else(Vec::new, |o| o.steps.clone()),
        inputs: run
            .pins
            .iter()
            .filter(|p| seen.contains(p.series.as_str()))
            .cloned()
            .collect(),
        preparation: run.preparation.clone(),
        version: run.version,
        method_version: run.method_version.clone(),
    })
}
