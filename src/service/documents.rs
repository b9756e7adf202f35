//! Documents with versions: what preparations and studies have in common.

use chrono::SecondsFormat;
use serde::de::DeserializeOwned;

use super::views::{DocumentView, Page, RunLine};
use super::{Fault, preparations, studies};
use crate::finding::Finding;
use crate::preparation;
use crate::store::document::DocumentRow;
use crate::store::{self, Database};

/// The two kinds of documents.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum DocumentKind {
    /// Steps that make series.
    Preparation,
    /// What to estimate, and how.
    Study,
}

impl DocumentKind {
    pub(super) fn as_str(self) -> &'static str {
        match self {
            Self::Preparation => "preparation",
            Self::Study => "study",
        }
    }
}

/// Condition that a client sets on the present version.
#[derive(Clone, Debug, Default)]
pub struct Precondition {
    /// `If-Match`: versions of which one must be current.
    pub matches: Option<Vec<i32>>,
    /// `If-Match: *`: something must be there.
    pub present: bool,
    /// `If-None-Match: *`: nothing may be there.
    pub absent: bool,
}

impl Precondition {
    fn check(&self, current: Option<&DocumentRow>) -> Result<(), Fault> {
        let failed = |detail: String| Err(Fault::PreconditionFailed { detail });
        match (current, &self.matches) {
            (Some(row), _) if self.absent => failed(format!(
                "If-None-Match: * asks that nothing be there, but version {} is",
                row.version
            )),
            (None, _) if self.present || self.matches.is_some() => {
                failed("If-Match asks for a version, but nothing is there".to_owned())
            }
            (Some(row), Some(versions)) if !versions.contains(&row.version) => failed(format!(
                "the current version is {}, which If-Match does not name; read it and try again",
                row.version
            )),
            _ => Ok(()),
        }
    }
}

/// Checks a document's name: it is one segment of a URL.
fn check_name(name: &str) -> Result<(), Fault> {
    let good = !name.is_empty()
        && name.len() <= 64
        && name
            .bytes()
            .all(|b| b.is_ascii_alphanumeric() || b == b'-' || b == b'_');
    if good {
        return Ok(());
    }
    Err(Fault::BadRequest {
        detail: format!("'{name}' cannot name a document"),
        errors: vec![
            Finding::error("bad_name", "the name cannot stand in a path")
                .found(name)
                .expected("1 to 64 letters, digits, - and _"),
        ],
    })
}

/// Reads JSON into a type that refuses unknown fields; `known` are listed where one is met.
///
/// # Errors
/// As `refused` says: [`Fault::BadRequest`] for a text that is no JSON, [`Fault::Invalid`] for another
/// shape.
pub fn parse_json<T: DeserializeOwned>(body: &str, known: &[&str]) -> Result<T, Fault> {
    serde_json::from_str(body).map_err(|e| {
        let mut finding = preparation::json_finding(body, "", &e);
        if finding.expected.is_none() {
            let fields = known.join(", ");
            finding = finding.expected(format!("a JSON object with the fields {fields}"));
        }
        refused("bad_document", vec![finding])
    })
}

/// What is wrong with a document: [`Fault::BadRequest`] where it is no JSON, else [`Fault::Invalid`].
pub(super) fn refused(code: &'static str, errors: Vec<Finding>) -> Fault {
    match errors.as_slice() {
        [only] if only.code == "invalid_json" => Fault::BadRequest {
            detail: only.message.clone(),
            errors,
        },
        _ => Fault::invalid(code, errors),
    }
}

/// Stores a document as a new version after checking it; the same text again stays the version it is.
///
/// # Errors
/// [`Fault::Invalid`] with JSON pointers; [`Fault::PreconditionFailed`]; [`Fault::Store`].
pub async fn put(
    database: &Database,
    kind: DocumentKind,
    name: &str,
    body: &str,
    precondition: &Precondition,
    author: &str,
) -> Result<(DocumentView, bool), Fault> {
    check_name(name)?;
    match kind {
        DocumentKind::Preparation => preparations::check(database, body).await?,
        DocumentKind::Study => studies::check(body)?,
    }
    let mut transaction = database.begin().await?;
    let highest = store::document::lock(&mut transaction, kind.as_str(), name).await?;
    let current = store::document::newest(&mut transaction, kind.as_str(), name).await?;
    precondition.check(current.as_ref())?;
    let created = current.is_none();
    if let Some(row) = current
        && row.body == body
    {
        return Ok((view(row), false));
    }
    store::document::insert(
        &mut transaction,
        kind.as_str(),
        name,
        highest + 1,
        Some(body),
        author,
    )
    .await?;
    let row = store::document::newest(&mut transaction, kind.as_str(), name)
        .await?
        .ok_or_else(|| Fault::Internal("a document vanished inside its transaction".to_owned()))?;
    store::commit(transaction).await?;
    Ok((view(row), created))
}

/// The newest version of a document, or a given one.
///
/// # Errors
/// [`Fault::NotFound`]; [`Fault::Store`].
pub async fn get(
    database: &Database,
    kind: DocumentKind,
    name: &str,
    version: Option<i64>,
) -> Result<DocumentView, Fault> {
    row(database, kind, name, version).await.map(view)
}

pub(super) async fn row(
    database: &Database,
    kind: DocumentKind,
    name: &str,
    version: Option<i64>,
) -> Result<DocumentRow, Fault> {
    let mut connection = database.connection().await?;
    let row = match version {
        None => store::document::newest(&mut connection, kind.as_str(), name).await?,
        Some(version) => {
            let version = i32::try_from(version).unwrap_or(0);
            store::document::version(&mut connection, kind.as_str(), name, version).await?
        }
    };
    row.ok_or_else(|| {
        let version = version.map_or_else(String::new, |v| format!(" with a version {v}"));
        Fault::not_found(format!("{} named '{name}'{version}", kind.as_str()))
    })
}

/// Documents of a kind by name.
///
/// # Errors
/// [`Fault::Store`].
pub async fn list(
    database: &Database,
    kind: DocumentKind,
    after: Option<&str>,
    limit: i64,
) -> Result<Page<DocumentView>, Fault> {
    let mut connection = database.connection().await?;
    let rows = store::document::list(
        &mut connection,
        kind.as_str(),
        after.unwrap_or(""),
        limit + 1,
    )
    .await?;
    let items: Vec<DocumentView> = rows.into_iter().map(view).collect();
    Ok(Page::cut(items, limit, |d| d.name.clone()))
}

/// Deletes a document; its versions and runs stay readable in the store.
///
/// # Errors
/// [`Fault::NotFound`]; [`Fault::PreconditionFailed`]; [`Fault::Store`].
pub async fn delete(
    database: &Database,
    kind: DocumentKind,
    name: &str,
    precondition: &Precondition,
    author: &str,
) -> Result<(), Fault> {
    let mut transaction = database.begin().await?;
    let highest = store::document::lock(&mut transaction, kind.as_str(), name).await?;
    let current = store::document::newest(&mut transaction, kind.as_str(), name).await?;
    if current.is_none() {
        return Err(Fault::not_found(format!(
            "{} named '{name}'",
            kind.as_str()
        )));
    }
    precondition.check(current.as_ref())?;
    store::document::insert(
        &mut transaction,
        kind.as_str(),
        name,
        highest + 1,
        None,
        author,
    )
    .await?;
    store::commit(transaction).await?;
    Ok(())
}

/// Runs of a document, newest first; they outlive it.
///
/// # Errors
/// [`Fault::NotFound`] where no version was ever stored; [`Fault::Store`].
pub async fn runs(
    database: &Database,
    kind: DocumentKind,
    name: &str,
    after: Option<&str>,
    limit: i64,
) -> Result<Page<RunLine>, Fault> {
    row(database, kind, name, Some(1)).await?;
    let before = after.map_or(Ok(i64::MAX), cursor)?;
    let mut connection = database.connection().await?;
    let rows =
        store::document::list_runs(&mut connection, kind.as_str(), name, before, limit + 1).await?;
    let items = rows
        .into_iter()
        .map(|r| RunLine {
            id: r.id,
            version: r.version,
            method_version: r.method_version,
            author: r.author,
            recorded: timestamp(r.recorded),
        })
        .collect();
    Ok(Page::cut(items, limit, |r: &RunLine| r.id.to_string()))
}

/// Reads a cursor that is a number.
pub(super) fn cursor(text: &str) -> Result<i64, Fault> {
    text.parse().map_err(|_| bad_cursor(text))
}

/// The answer to a cursor that no page can have given out.
pub(super) fn bad_cursor(text: &str) -> Fault {
    Fault::BadRequest {
        detail: format!("'{text}' is no cursor of this list"),
        errors: vec![
            Finding::error("bad_cursor", "the cursor was not given out by this list")
                .at_parameter("after")
                .found(text)
                .remedy("take it from the header Link of the page before"),
        ],
    }
}

/// RFC 3339 in UTC, to the microsecond that the database keeps.
pub(super) fn timestamp(moment: chrono::DateTime<chrono::Utc>) -> String {
    moment.to_rfc3339_opts(SecondsFormat::Micros, true)
}

fn view(row: DocumentRow) -> DocumentView {
    DocumentView {
        document: serde_json::from_str(&row.body).unwrap_or(serde_json::Value::Null),
        name: row.name,
        version: row.version,
        author: row.author,
        recorded: timestamp(row.recorded),
    }
}
