//! Vintages.

use sqlx::PgConnection;
use sqlx::types::Json;
use sqlx::types::chrono::{DateTime, NaiveDate, Utc};

use super::copy::CopyBuffer;
use super::{Error, day};
use crate::series::provenance::{self, Origin};
use crate::series::vintage::{Changes, State};
use crate::series::{SeriesKey, Status, Unit};
use crate::time::{Date, Frequency, Period};

/// A vintage as stored: the state of a segment as released on a date.
#[derive(Clone, Debug)]
pub struct VintageRow {
    /// The segment.
    pub segment_id: i64,
    /// Date from which it is visible.
    pub released: NaiveDate,
    /// Date of the release that speaks: `released`, or an older one where a later release was withdrawn.
    pub said: NaiveDate,
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

/// A state and the date of the release that says it.
#[derive(Clone, Debug)]
pub struct Said {
    /// The release that speaks.
    pub date: Date,
    /// The state.
    pub state: State,
}

impl VintageRow {
    /// Unpacks the state, with the date of the release that says it.
    ///
    /// # Errors
    /// [`Error::Corrupt`].
    pub fn said(self, frequency: Frequency) -> Result<Said, Error> {
        Ok(Said {
            date: super::date(self.said)?,
            state: self.state(frequency)?,
        })
    }

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

pub(super) fn first_period(
    what: &str,
    frequency: Frequency,
    ordinal: i32,
) -> Result<Period, Error> {
    Period::from_ordinal(frequency, ordinal).ok_or_else(|| Error::corrupt(what, "start period"))
}

pub(super) fn statuses(what: &str, bytes: &[u8]) -> Result<Vec<Status>, Error> {
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
        r#"SELECT v.segment_id, v.released, v.said, v.revision, v.start_period, v."values", v.status,
             v.provenance
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
             segment_id, released, said, revision, start_period, "values", status, provenance
           FROM vintage WHERE segment_id = ANY($1) AND released >= $2
           ORDER BY segment_id, released, revision DESC"#,
        segments,
        day(date)
    )
    .fetch_all(connection)
    .await?;
    Ok(rows)
}

pub(super) fn status_bytes(status: &[Status]) -> Vec<u8> {
    status.iter().map(|s| s.byte()).collect()
}

pub(super) fn packed(origins: &[Origin]) -> Vec<u8> {
    provenance::encode(&provenance::runs(origins))
}

/// A vintage to write, packed as it is stored.
#[derive(Clone, Debug)]
pub struct NewVintage {
    segment_id: i64,
    released: Date,
    said: Date,
    changes: Changes,
    start_period: i32,
    values: Vec<f64>,
    status: Vec<u8>,
    provenance: Vec<u8>,
}

impl NewVintage {
    /// The state of a segment visible from a date on, said by the release of another, and what it changes
    /// against the state before.
    #[must_use]
    pub fn new(
        segment_id: i64,
        released: Date,
        said: Date,
        state: &State,
        changes: Changes,
    ) -> Self {
        Self {
            segment_id,
            released,
            said,
            changes,
            start_period: state.start.ordinal(),
            values: state.values.clone(),
            status: status_bytes(&state.status),
            provenance: packed(&state.origins),
        }
    }

    /// Periods from first to last.
    #[must_use]
    pub fn periods(&self) -> usize {
        self.values.len()
    }
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
    let mut rows = CopyBuffer::new(12);
    for v in vintages {
        rows.start_row()
            .bigint(v.segment_id)
            .date(v.released)
            .date(v.said)
            .bigint(revision)
            .integer(v.start_period)
            .integer(count(v.values.len()))
            .integer(count(v.changes.new as usize))
            .integer(count(v.changes.revised as usize))
            .integer(count(v.changes.emptied as usize))
            .doubles(&v.values)
            .bytea(&v.status)
            .bytea(&v.provenance);
    }
    rows.send(
        connection,
        r#"COPY vintage (segment_id, released, said, revision, start_period, observation_count, new_count,
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
    /// Date from which it is visible.
    pub visible_from: Date,
    /// Date of the release that says it.
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

/// A checked query on one series: its key is bound to `$1` to `$8`, what more it takes from `$9` on.
macro_rules! of_series {
    ($query:ident!($($row:ty,)? $($from:literal)+, $($end:literal)+), $key:expr $(, $more:expr)* $(,)?) => {{
        let [area, measure, partner, product, currency, source, adjustment] = $key.places();
        sqlx::$query!(
            $($row,)?
            "" $(+ $from)+
                + " WHERE s.area = $1 AND s.measure = $2 AND s.frequency = $3 AND s.partner = $4
                    AND s.product = $5 AND s.currency = $6 AND s.source = $7 AND s.adjustment = $8 "
                $(+ $end)+,
            area, measure, $key.frequency().code(), partner, product, currency, source, adjustment
            $(, $more)*
        )
    }};
}

/// Columns of the state of a series as of a moment: of the segment `g` asked for, else of that whose
/// release spoke last, and its vintage `v`.
macro_rules! visible {
    ($columns:literal, $key:expr, $as_of:expr) => {
        of_series!(
            query!(
                "SELECT " $columns
                " FROM series s
                       JOIN segment g ON g.series_id = s.id AND ($9::integer IS NULL OR g.number = $9)
                       JOIN LATERAL (
                           SELECT * FROM vintage w
                           WHERE w.segment_id = g.id AND w.released <= $10 AND w.revision <= $11
                           ORDER BY w.released DESC, w.revision DESC LIMIT 1
                       ) v ON $9::integer IS NOT NULL OR v.observation_count > 0",
                "ORDER BY v.said DESC, g.number DESC LIMIT 1"
            ),
            $key,
            $as_of.segment,
            $as_of.released.map_or(FAR, day),
            $as_of.revision.unwrap_or(i64::MAX)
        )
    };
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
    let row = visible!(
        r#"g.number, g.id, g.unit AS "unit: Json<Unit>", v.released, v.said, v.revision,
           (SELECT c.recorded FROM change c WHERE c.revision = v.revision) AS "recorded!",
           v.start_period, v."values", v.status, v.provenance"#,
        key,
        as_of
    )
    .fetch_optional(connection)
    .await?;
    row.map(|r| {
        let what = format!("vintage of {key}");
        Ok(ReadVintage {
            segment: r.number,
            segment_id: r.id,
            unit: r.unit.0,
            visible_from: super::date(r.released)?,
            released: super::date(r.said)?,
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
    /// Date of the release that speaks, by which lists are ordered.
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

/// All vintages of a series by the release that speaks, oldest first, then by revision and segment. What one
/// revision says once for several dates stands once, as of the first.
///
/// # Errors
/// [`Error::Database`].
pub async fn list(
    connection: &mut PgConnection,
    key: &SeriesKey,
) -> Result<Vec<ListedVintage>, Error> {
    let rows = of_series!(
        query_as!(
            ListedVintage,
            r#"SELECT DISTINCT ON (v.said, v.revision, g.number) g.number AS segment, g.unit AS "unit: Json<Unit>", v.said AS released, c.recorded,
                 v.revision, c.action, c.upload_id, c.run_id, v.start_period, v.observation_count,
                 v.new_count, v.revised_count, v.emptied_count
               FROM series s JOIN segment g ON g.series_id = s.id
               JOIN vintage v ON v.segment_id = g.id JOIN change c ON c.revision = v.revision"#,
            "ORDER BY v.said, v.revision, g.number, v.released"
        ),
        key
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
    let row = visible!("g.number, v.revision", key, as_of)
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
        r#"SELECT DISTINCT g.series_id FROM segment g
           JOIN LATERAL (
               SELECT w.revision FROM vintage w WHERE w.segment_id = g.id ORDER BY w.revision DESC LIMIT 1
           ) v ON true
           JOIN change c ON c.revision = v.revision AND c.action = 'run'
           WHERE g.series_id = ANY($1)"#,
        series
    )
    .fetch_all(connection)
    .await?;
    Ok(rows)
}

/// Names of the preparations whose runs wrote these series last, where a run did.
///
/// # Errors
/// [`Error::Database`].
pub async fn owners(
    connection: &mut PgConnection,
    series: &[i64],
) -> Result<Vec<(i64, String)>, Error> {
    let rows = sqlx::query!(
        r#"SELECT o.series_id AS "series_id!", r.name
           FROM (SELECT DISTINCT ON (g.series_id) g.series_id, v.revision
                 FROM segment g JOIN vintage v ON v.segment_id = g.id
                 WHERE g.series_id = ANY($1) ORDER BY g.series_id, v.revision DESC) o
           JOIN change c ON c.revision = o.revision JOIN run r ON r.id = c.run_id"#,
        series
    )
    .fetch_all(connection)
    .await?;
    Ok(rows.into_iter().map(|r| (r.series_id, r.name)).collect())
}

/// First period and packed provenance of what a revision wrote in a segment for a release.
///
/// # Errors
/// [`Error`].
pub async fn provenance_of(
    connection: &mut PgConnection,
    key: &SeriesKey,
    (segment, said, revision): (i32, Date, i64),
) -> Result<Option<(Period, Vec<u8>)>, Error> {
    let row = of_series!(
        query!(
            "SELECT v.start_period, v.provenance FROM series s
             JOIN segment g ON g.series_id = s.id AND g.number = $9
             JOIN vintage v ON v.segment_id = g.id AND v.said = $10 AND v.revision = $11",
            "ORDER BY v.released LIMIT 1"
        ),
        key,
        segment,
        day(said),
        revision
    )
    .fetch_optional(connection)
    .await?;
    row.map(|r| {
        let start = first_period(
            &format!("vintage of {key}"),
            key.frequency(),
            r.start_period,
        )?;
        Ok((start, r.provenance))
    })
    .transpose()
}
