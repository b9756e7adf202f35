//! Vintages and the fragments they are made of.

use sqlx::PgConnection;
use sqlx::types::Json;
use sqlx::types::chrono::{DateTime, NaiveDate, Utc};

use super::copy::CopyBuffer;
use super::{Error, day};
use crate::series::provenance::{self, Origin};
use crate::series::vintage::{Changes, Scope, State, Statement};
use crate::series::{SeriesKey, Status, Unit};
use crate::time::{Date, Frequency, Period};

/// A vintage as stored: the state of a segment as released on a date.
#[derive(Clone, Debug)]
pub struct VintageRow {
    /// The segment.
    pub segment_id: i64,
    /// Release date.
    pub released: NaiveDate,
    /// Revision that wrote it.
    pub revision: i64,
    /// Ordinal of the first period.
    pub start_period: i32,
    /// Values.
    pub values: Vec<f64>,
    /// Status bytes.
    pub status: Vec<u8>,
    /// Packed provenance.
    pub provenance: Vec<u8>,
}

impl VintageRow {
    /// Unpacks the state.
    ///
    /// # Errors
    /// [`Error::Corrupt`].
    pub fn state(self, frequency: Frequency) -> Result<State, Error> {
        let what = format!(
            "vintage of segment {} at revision {}",
            self.segment_id, self.revision
        );
        let origins = provenance::decode(&self.provenance)
            .map(|runs| provenance::expand(&runs))
            .filter(|origins| origins.len() == self.values.len())
            .ok_or_else(|| Error::corrupt(&what, "provenance"))?;
        Ok(State {
            start: first_period(&what, frequency, self.start_period)?,
            values: self.values,
            status: statuses(&what, &self.status)?,
            origins,
        })
    }
}

fn first_period(what: &str, frequency: Frequency, ordinal: i32) -> Result<Period, Error> {
    Period::from_ordinal(frequency, ordinal).ok_or_else(|| Error::corrupt(what, "start period"))
}

fn statuses(what: &str, bytes: &[u8]) -> Result<Vec<Status>, Error> {
    bytes
        .iter()
        .map(|b| Status::from_byte(*b).ok_or_else(|| Error::corrupt(what, "status byte")))
        .collect()
}

/// For each of these segments the state visible strictly before a release date.
///
/// # Errors
/// [`Error::Database`].
pub async fn visible_before(
    connection: &mut PgConnection,
    segments: &[i64],
    date: Date,
) -> Result<Vec<VintageRow>, Error> {
    let rows = sqlx::query_as!(
        VintageRow,
        r#"SELECT v.segment_id, v.released, v.revision, v.start_period, v."values", v.status, v.provenance
           FROM unnest($1::bigint[]) AS q(segment_id)
           JOIN LATERAL (
               SELECT * FROM vintage w WHERE w.segment_id = q.segment_id AND w.released < $2
               ORDER BY w.released DESC, w.revision DESC LIMIT 1
           ) v ON true"#,
        segments,
        day(date)
    )
    .fetch_all(connection)
    .await?;
    Ok(rows)
}

/// For each of these segments the states visible at every release date from this one on, by segment
/// and release date.
///
/// # Errors
/// [`Error::Database`].
pub async fn visible_from(
    connection: &mut PgConnection,
    segments: &[i64],
    date: Date,
) -> Result<Vec<VintageRow>, Error> {
    let rows = sqlx::query_as!(
        VintageRow,
        r#"SELECT DISTINCT ON (segment_id, released)
             segment_id, released, revision, start_period, "values", status, provenance
           FROM vintage WHERE segment_id = ANY($1) AND released >= $2
           ORDER BY segment_id, released, revision DESC"#,
        segments,
        day(date)
    )
    .fetch_all(connection)
    .await?;
    Ok(rows)
}

/// A statement of a landed upload, with the date it was released.
#[derive(Clone, Debug)]
pub struct StatementRow {
    /// The segment it speaks of.
    pub segment_id: i64,
    /// The upload.
    pub upload_id: i64,
    /// Release date.
    pub released: Date,
    /// What it says.
    pub statement: Statement,
}

/// What these uploads say about these segments, in the order in which it merges: by segment, release
/// date and landing.
///
/// # Errors
/// [`Error`].
pub async fn statements(
    connection: &mut PgConnection,
    uploads: &[i64],
    segments: &[i64],
) -> Result<Vec<StatementRow>, Error> {
    let rows = sqlx::query_as!(
        FragmentRow,
        r#"SELECT f.segment_id, f.upload_id, f.start_period, f."values", f.status, f.lines, u.released,
             s.frequency, u.parameters->>'scope' AS scope
           FROM fragment f JOIN upload u ON u.id = f.upload_id
           JOIN segment g ON g.id = f.segment_id JOIN series s ON s.id = g.series_id
           WHERE f.segment_id = ANY($1) AND f.upload_id = ANY($2)
           ORDER BY f.segment_id, u.released, u.landed_revision"#,
        segments,
        uploads
    )
    .fetch_all(connection)
    .await?;
    rows.into_iter().map(StatementRow::try_from).collect()
}

/// A segment that an upload speaks of, and how much working on it takes.
#[derive(Clone, Copy, Debug)]
pub struct Weighed {
    /// The segment.
    pub segment_id: i64,
    /// Periods to hold in memory: those that it spans now or with this upload, once for each state and
    /// statement from the release on.
    pub periods: i64,
}

/// Segments that an upload speaks of, in ascending order, weighed for replaying `later` uploads.
///
/// # Errors
/// [`Error::Database`].
pub async fn segments_of_upload(
    connection: &mut PgConnection,
    upload: i64,
    released: Date,
    later: &[i64],
) -> Result<Vec<Weighed>, Error> {
    let rows = sqlx::query_as!(
        Weighed,
        r#"SELECT f.segment_id,
             (greatest(f.start_period + octet_length(f.status), v.end_period)
                 - least(f.start_period, v.start_period))
             * (2 + (SELECT count(*) FROM vintage w WHERE w.segment_id = f.segment_id AND w.released >= $2)
                 + (SELECT count(*) FROM fragment o
                    WHERE o.segment_id = f.segment_id AND o.upload_id = ANY($3))) AS "periods!"
           FROM fragment f
           LEFT JOIN LATERAL (
               SELECT w.start_period, w.start_period + w.observation_count AS end_period FROM vintage w
               WHERE w.segment_id = f.segment_id ORDER BY w.released DESC, w.revision DESC LIMIT 1
           ) v ON true
           WHERE f.upload_id = $1 ORDER BY f.segment_id"#,
        upload,
        day(released),
        later
    )
    .fetch_all(connection)
    .await?;
    Ok(rows)
}

struct FragmentRow {
    segment_id: i64,
    upload_id: i64,
    start_period: i32,
    values: Vec<f64>,
    status: Vec<u8>,
    lines: Vec<u8>,
    released: NaiveDate,
    frequency: String,
    scope: Option<String>,
}

impl TryFrom<FragmentRow> for StatementRow {
    type Error = Error;

    fn try_from(r: FragmentRow) -> Result<Self, Error> {
        let what = format!("fragment of upload {}", r.upload_id);
        let frequency =
            Frequency::from_code(&r.frequency).ok_or_else(|| Error::corrupt(&what, "frequency"))?;
        let origins = provenance::decode(&r.lines)
            .map(|runs| provenance::expand(&runs))
            .filter(|origins| origins.len() == r.values.len())
            .ok_or_else(|| Error::corrupt(&what, "lines"))?;
        Ok(Self {
            segment_id: r.segment_id,
            upload_id: r.upload_id,
            released: super::date(r.released)?,
            statement: Statement {
                start: first_period(&what, frequency, r.start_period)?,
                values: r.values,
                status: statuses(&what, &r.status)?,
                origins,
                scope: match r.scope.as_deref() {
                    Some("replace") => Scope::Replace,
                    _ => Scope::Merge,
                },
            },
        })
    }
}

fn status_bytes(status: &[Status]) -> Vec<u8> {
    status.iter().map(|s| s.byte()).collect()
}

fn packed(origins: &[Origin]) -> Vec<u8> {
    provenance::encode(&provenance::runs(origins))
}

/// Keeps what an upload says.
///
/// # Errors
/// [`Error::Database`].
pub async fn insert_fragments(
    connection: &mut PgConnection,
    upload: i64,
    statements: &[(i64, Statement)],
) -> Result<(), Error> {
    let mut rows = CopyBuffer::new(6);
    for (segment, s) in statements {
        rows.start_row()
            .bigint(upload)
            .bigint(*segment)
            .integer(s.start.ordinal())
            .doubles(&s.values)
            .bytea(&status_bytes(&s.status))
            .bytea(&packed(&s.origins));
    }
    rows.send(
        connection,
        r#"COPY fragment (upload_id, segment_id, start_period, "values", status, lines)
           FROM STDIN (FORMAT binary)"#,
    )
    .await
}

/// A vintage to write.
#[derive(Clone, Debug)]
pub struct NewVintage {
    /// The segment.
    pub segment_id: i64,
    /// Release date.
    pub released: Date,
    /// The state.
    pub state: State,
    /// What it changed against the state before.
    pub changes: Changes,
}

/// Writes vintages under a revision.
///
/// # Errors
/// [`Error::Database`].
pub async fn insert(
    connection: &mut PgConnection,
    revision: i64,
    vintages: &[NewVintage],
) -> Result<(), Error> {
    let count = |n: usize| i32::try_from(n).unwrap_or(i32::MAX);
    let mut rows = CopyBuffer::new(11);
    for v in vintages {
        rows.start_row()
            .bigint(v.segment_id)
            .date(v.released)
            .bigint(revision)
            .integer(v.state.start.ordinal())
            .integer(count(v.state.values.len()))
            .integer(count(v.changes.new as usize))
            .integer(count(v.changes.revised as usize))
            .integer(count(v.changes.emptied as usize))
            .doubles(&v.state.values)
            .bytea(&status_bytes(&v.state.status))
            .bytea(&packed(&v.state.origins));
    }
    rows.send(
        connection,
        r#"COPY vintage (segment_id, released, revision, start_period, observation_count, new_count,
           revised_count, emptied_count, "values", status, provenance) FROM STDIN (FORMAT binary)"#,
    )
    .await
}

/// Which state of a series to read.
#[derive(Clone, Copy, Debug, Default)]
pub struct AsOf {
    /// Newest release date to consider.
    pub released: Option<Date>,
    /// Newest revision to consider.
    pub revision: Option<i64>,
    /// Segment by number; else the one released last.
    pub segment: Option<i32>,
}

/// A state read from the store, with what it is.
#[derive(Clone, Debug)]
pub struct ReadVintage {
    /// Segment's number within the series.
    pub segment: i32,
    /// Segment's id.
    pub segment_id: i64,
    /// Unit.
    pub unit: Unit,
    /// Release date.
    pub released: Date,
    /// Moment it was recorded.
    pub recorded: DateTime<Utc>,
    /// Revision that wrote it.
    pub revision: i64,
    /// The first period.
    pub start: Period,
    /// Values.
    pub values: Vec<f64>,
    /// Status.
    pub status: Vec<Status>,
    /// Packed provenance.
    pub provenance: Vec<u8>,
}

/// Reads one state of one series, by one indexed lookup. `None` where the series, the segment or a
/// state as of then does not exist.
///
/// # Errors
/// [`Error`].
pub async fn read(
    connection: &mut PgConnection,
    key: &SeriesKey,
    as_of: AsOf,
) -> Result<Option<ReadVintage>, Error> {
    let [
        area,
        measure,
        partner,
        product,
        currency,
        source,
        adjustment,
    ] = key.places();
    let row = sqlx::query!(
        r#"SELECT g.number, g.id, g.unit AS "unit: Json<Unit>", v.released, v.revision,
             (SELECT c.recorded FROM change c WHERE c.revision = v.revision) AS "recorded!",
             v.start_period, v."values", v.status, v.provenance
           FROM series s
           JOIN segment g ON g.series_id = s.id AND ($9::integer IS NULL OR g.number = $9)
           JOIN LATERAL (
               SELECT * FROM vintage w
               WHERE w.segment_id = g.id AND w.released <= $10 AND w.revision <= $11
               ORDER BY w.released DESC, w.revision DESC LIMIT 1
           ) v ON $9::integer IS NOT NULL OR v.observation_count > 0
           WHERE s.area = $1 AND s.measure = $2 AND s.frequency = $3 AND s.partner = $4
             AND s.product = $5 AND s.currency = $6 AND s.source = $7 AND s.adjustment = $8
           ORDER BY v.released DESC, g.number DESC LIMIT 1"#,
        area,
        measure,
        key.frequency().code(),
        partner,
        product,
        currency,
        source,
        adjustment,
        as_of.segment,
        as_of.released.map_or(FAR, day),
        as_of.revision.unwrap_or(i64::MAX)
    )
    .fetch_optional(connection)
    .await?;
    row.map(|r| {
        let what = format!("vintage of {key}");
        Ok(ReadVintage {
            segment: r.number,
            segment_id: r.id,
            unit: r.unit.0,
            released: super::date(r.released)?,
            recorded: r.recorded,
            revision: r.revision,
            start: first_period(&what, key.frequency(), r.start_period)?,
            values: r.values,
            status: statuses(&what, &r.status)?,
            provenance: r.provenance,
        })
    })
    .transpose()
}

/// Later than any release.
const FAR: NaiveDate = match NaiveDate::from_ymd_opt(9999, 12, 31) {
    Some(date) => date,
    None => NaiveDate::MAX,
};

/// One vintage in a list, without its observations.
#[derive(Clone, Debug)]
pub struct ListedVintage {
    /// Segment's number.
    pub segment: i32,
    /// Unit of the segment.
    pub unit: Json<Unit>,
    /// Release date.
    pub released: NaiveDate,
    /// When it was recorded.
    pub recorded: DateTime<Utc>,
    /// Revision.
    pub revision: i64,
    /// What wrote it: `land`, `accept`, `withdraw` or `run`.
    pub action: String,
    /// The upload concerned.
    pub upload_id: Option<i64>,
    /// The run concerned.
    pub run_id: Option<i64>,
    /// Ordinal of the first period.
    pub start_period: i32,
    /// Number of periods.
    pub observation_count: i32,
    /// Observations named for the first time.
    pub new_count: i32,
    /// Observations with another value or status than before.
    pub revised_count: i32,
    /// Observations that lost their value.
    pub emptied_count: i32,
}

/// All vintages of a series, oldest release first.
///
/// # Errors
/// [`Error::Database`].
pub async fn list(
    connection: &mut PgConnection,
    key: &SeriesKey,
) -> Result<Vec<ListedVintage>, Error> {
    let [
        area,
        measure,
        partner,
        product,
        currency,
        source,
        adjustment,
    ] = key.places();
    let rows = sqlx::query_as!(
        ListedVintage,
        r#"SELECT g.number AS segment, g.unit AS "unit: Json<Unit>", v.released, c.recorded, v.revision,
             c.action, c.upload_id, c.run_id, v.start_period, v.observation_count, v.new_count,
             v.revised_count, v.emptied_count
           FROM series s JOIN segment g ON g.series_id = s.id JOIN vintage v ON v.segment_id = g.id
           JOIN change c ON c.revision = v.revision
           WHERE s.area = $1 AND s.measure = $2 AND s.frequency = $3 AND s.partner = $4
             AND s.product = $5 AND s.currency = $6 AND s.source = $7 AND s.adjustment = $8
           ORDER BY v.released, v.revision, g.number"#,
        area,
        measure,
        key.frequency().code(),
        partner,
        product,
        currency,
        source,
        adjustment
    )
    .fetch_all(connection)
    .await?;
    Ok(rows)
}

/// Whether uploads feed the series.
///
/// # Errors
/// [`Error::Database`].
pub async fn fed_by_uploads(
    connection: &mut PgConnection,
    series: &[i64],
) -> Result<Vec<i64>, Error> {
    let rows = sqlx::query_scalar!(
        r#"SELECT DISTINCT g.series_id FROM fragment f JOIN segment g ON g.id = f.segment_id
           JOIN upload u ON u.id = f.upload_id AND u.state IN ('landed', 'held')
           WHERE g.series_id = ANY($1)"#,
        series
    )
    .fetch_all(connection)
    .await?;
    Ok(rows)
}

/// Segment and revision of the state that [`read`] would answer, without its observations.
///
/// # Errors
/// [`Error::Database`].
pub async fn version(
    connection: &mut PgConnection,
    key: &SeriesKey,
    as_of: AsOf,
) -> Result<Option<(i32, i64)>, Error> {
    let [
        area,
        measure,
        partner,
        product,
        currency,
        source,
        adjustment,
    ] = key.places();
    let row = sqlx::query!(
        r#"SELECT g.number, v.revision
           FROM series s
           JOIN segment g ON g.series_id = s.id AND ($9::integer IS NULL OR g.number = $9)
           JOIN LATERAL (
               SELECT w.released, w.revision, w.observation_count FROM vintage w
               WHERE w.segment_id = g.id AND w.released <= $10 AND w.revision <= $11
               ORDER BY w.released DESC, w.revision DESC LIMIT 1
           ) v ON $9::integer IS NOT NULL OR v.observation_count > 0
           WHERE s.area = $1 AND s.measure = $2 AND s.frequency = $3 AND s.partner = $4
             AND s.product = $5 AND s.currency = $6 AND s.source = $7 AND s.adjustment = $8
           ORDER BY v.released DESC, g.number DESC LIMIT 1"#,
        area,
        measure,
        key.frequency().code(),
        partner,
        product,
        currency,
        source,
        adjustment,
        as_of.segment,
        as_of.released.map_or(FAR, day),
        as_of.revision.unwrap_or(i64::MAX)
    )
    .fetch_optional(connection)
    .await?;
    Ok(row.map(|r| (r.number, r.revision)))
}

/// Which of these series are outputs of preparations.
///
/// # Errors
/// [`Error::Database`].
pub async fn fed_by_runs(connection: &mut PgConnection, series: &[i64]) -> Result<Vec<i64>, Error> {
    let rows = sqlx::query_scalar!(
        r#"SELECT DISTINCT g.series_id FROM segment g JOIN vintage v ON v.segment_id = g.id
           JOIN change c ON c.revision = v.revision AND c.action = 'run'
           WHERE g.series_id = ANY($1)"#,
        series
    )
    .fetch_all(connection)
    .await?;
    Ok(rows)
}
