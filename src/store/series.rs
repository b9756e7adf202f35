//! Series and segments.

use std::collections::HashSet;

use sqlx::PgConnection;
use sqlx::types::Json;

use super::{AssertSqlSafe, Error};
use crate::series::{SeriesKey, Unit};
use crate::time::{Date, Frequency};

/// A segment that exists in the store.
#[derive(Clone, Debug)]
pub struct SegmentRow {
    /// Its number in the store.
    pub id: i64,
    /// The series it belongs to.
    pub series_id: i64,
    /// Its number within the series, from 1.
    pub number: i32,
}

/// Finds or creates the segments of these series with these units, and locks the series in the
/// order of their ids until the transaction ends. Answers in the order of the question.
///
/// # Errors
/// [`Error::Database`].
pub async fn ensure_segments(
    connection: &mut PgConnection,
    wanted: &[(&SeriesKey, &Unit)],
) -> Result<Vec<SegmentRow>, Error> {
    let mut columns: [Vec<String>; 8] = Default::default();
    let mut units: Vec<serde_json::Value> = Vec::with_capacity(wanted.len());
    for (key, unit) in wanted {
        columns[0].push(key.frequency().code().to_owned());
        for (column, place) in columns[1..].iter_mut().zip(key.places()) {
            column.push(place.clone());
        }
        units.push(serde_json::to_value(unit).map_err(|e| Error::corrupt(key, e))?);
    }
    let [
        frequency,
        area,
        measure,
        partner,
        product,
        currency,
        source,
        adjustment,
    ] = &columns;
    // In key order, so that two uploads that create the same series wait for each other in one order.
    sqlx::query!(
        "INSERT INTO series (frequency, area, measure, partner, product, currency, source, adjustment)
         SELECT DISTINCT * FROM unnest($1::text[], $2::text[], $3::text[], $4::text[], $5::text[],
             $6::text[], $7::text[], $8::text[]) AS q(a, b, c, d, e, f, g, h)
         ORDER BY b, c, a, d, e, f, g, h
         ON CONFLICT DO NOTHING",
        frequency, area, measure, partner, product, currency, source, adjustment
    )
    .execute(&mut *connection)
    .await?;
    let ids: Vec<i64> = sqlx::query_scalar!(
        r#"SELECT s.id FROM unnest($1::text[], $2::text[], $3::text[], $4::text[], $5::text[],
             $6::text[], $7::text[], $8::text[]) WITH ORDINALITY AS q(a, b, c, d, e, f, g, h, i)
           JOIN series s ON (s.area, s.measure, s.frequency, s.partner, s.product, s.currency,
             s.source, s.adjustment) = (q.b, q.c, q.a, q.d, q.e, q.f, q.g, q.h)
           ORDER BY q.i"#,
        frequency,
        area,
        measure,
        partner,
        product,
        currency,
        source,
        adjustment
    )
    .fetch_all(&mut *connection)
    .await?;
    sqlx::query_scalar!(
        "SELECT id FROM series WHERE id = ANY($1) ORDER BY id FOR UPDATE",
        &ids
    )
    .fetch_all(&mut *connection)
    .await?;
    sqlx::query!(
        "INSERT INTO segment (series_id, number, unit)
         SELECT q.series_id,
             coalesce((SELECT max(number) FROM segment g WHERE g.series_id = q.series_id), 0)
                 + row_number() OVER (PARTITION BY q.series_id ORDER BY q.i),
             q.unit
         FROM (SELECT series_id, unit, min(i) AS i
               FROM unnest($1::bigint[], $2::jsonb[]) WITH ORDINALITY AS u(series_id, unit, i)
               GROUP BY series_id, unit) q
         WHERE NOT EXISTS (SELECT FROM segment g WHERE g.series_id = q.series_id AND g.unit = q.unit)",
        &ids, &units
    )
    .execute(&mut *connection)
    .await?;
    let rows = sqlx::query_as!(
        SegmentRow,
        r#"SELECT g.id, g.series_id, g.number
           FROM unnest($1::bigint[], $2::jsonb[]) WITH ORDINALITY AS q(series_id, unit, i)
           JOIN segment g ON g.series_id = q.series_id AND g.unit = q.unit
           ORDER BY q.i"#,
        &ids,
        &units
    )
    .fetch_all(connection)
    .await?;
    Ok(rows)
}

/// Locks the series of these segments in the order of their ids.
///
/// # Errors
/// [`Error::Database`].
pub async fn lock_segments(connection: &mut PgConnection, segments: &[i64]) -> Result<(), Error> {
    sqlx::query_scalar!(
        "SELECT id FROM series
         WHERE id IN (SELECT series_id FROM segment WHERE id = ANY($1)) ORDER BY id FOR UPDATE",
        segments
    )
    .fetch_all(connection)
    .await?;
    Ok(())
}

/// Segments that have observations, among all segments of the series that these belong to.
#[derive(Debug, Default)]
pub struct Populated {
    /// Segments with observations.
    pub segments: HashSet<i64>,
    /// Series with observations in any segment.
    pub series: HashSet<i64>,
}

/// Which segments of the series of these segments have observations in their newest vintage.
///
/// # Errors
/// [`Error::Database`].
pub async fn populated_segments(
    connection: &mut PgConnection,
    segments: &[i64],
) -> Result<Populated, Error> {
    let rows = sqlx::query!(
        r#"SELECT g.id, g.series_id FROM segment g
           JOIN LATERAL (
               SELECT w.observation_count FROM vintage w WHERE w.segment_id = g.id
               ORDER BY w.released DESC, w.revision DESC LIMIT 1
           ) v ON v.observation_count > 0
           WHERE g.series_id IN (SELECT series_id FROM segment WHERE id = ANY($1))"#,
        segments
    )
    .fetch_all(connection)
    .await?;
    Ok(Populated {
        segments: rows.iter().map(|r| r.id).collect(),
        series: rows.iter().map(|r| r.series_id).collect(),
    })
}

/// A stored segment with what it belongs to.
#[derive(Clone, Debug)]
pub struct StoredSegment {
    /// Its number in the store.
    pub id: i64,
    /// The series' number in the store.
    pub series_id: i64,
    /// Its number within the series.
    pub number: i32,
    /// The series.
    pub key: SeriesKey,
    /// What its numbers are.
    pub unit: Unit,
}

/// The segments with these numbers in the store, in ascending order of id.
///
/// # Errors
/// [`Error`].
pub async fn segments_by_id(
    connection: &mut PgConnection,
    ids: &[i64],
) -> Result<Vec<StoredSegment>, Error> {
    let rows = sqlx::query!(
        r#"SELECT g.id, g.series_id, g.number, g.unit AS "unit: Json<Unit>", s.frequency, s.area, s.measure,
             s.partner, s.product, s.currency, s.source, s.adjustment
           FROM segment g JOIN series s ON s.id = g.series_id
           WHERE g.id = ANY($1) ORDER BY g.id"#,
        ids
    )
    .fetch_all(connection)
    .await?;
    rows.into_iter()
        .map(|r| {
            let places = [
                &r.area,
                &r.measure,
                &r.partner,
                &r.product,
                &r.currency,
                &r.source,
                &r.adjustment,
            ];
            Ok(StoredSegment {
                id: r.id,
                series_id: r.series_id,
                number: r.number,
                key: key_of(&r.frequency, places.map(String::as_str))?,
                unit: r.unit.0,
            })
        })
        .collect()
}

/// Puts a stored key together.
pub(super) fn key_of(frequency: &str, places: [&str; 7]) -> Result<SeriesKey, Error> {
    let what = || format!("series {frequency}.{}", places.join("."));
    let frequency = Frequency::from_code(frequency)
        .ok_or_else(|| Error::corrupt(what(), "unknown frequency"))?;
    SeriesKey::new(frequency, places).map_err(|e| Error::corrupt(what(), e))
}

/// What to look for in a list of series. Empty filters match everything.
#[derive(Clone, Debug, Default)]
pub struct Search {
    /// Codes wanted per place of the key, in key order; several are alternatives.
    pub places: [Vec<String>; 8],
    /// Words that must occur in the printed key or unit, in any case.
    pub words: Vec<String>,
    /// Continue after this series id.
    pub after: i64,
    /// At most this many.
    pub limit: i64,
}

/// One line of a list of series: its newest segment and what that holds now.
#[derive(Clone, Debug)]
pub struct ListedSeries {
    /// Number in the store, the cursor of lists.
    pub id: i64,
    /// The series.
    pub key: SeriesKey,
    /// Segment that reads answer from.
    pub segment: i32,
    /// Number of segments with observations.
    pub segments: i64,
    /// Unit of that segment.
    pub unit: Unit,
    /// Release date of the current vintage.
    pub released: Date,
    /// Its revision.
    pub revision: i64,
    /// First period's ordinal.
    pub start_period: i32,
    /// Periods from first to last.
    pub observation_count: i32,
}

/// Lists series that have observations, by id.
///
/// # Errors
/// [`Error`].
pub async fn search(
    connection: &mut PgConnection,
    search: &Search,
) -> Result<Vec<ListedSeries>, Error> {
    let mut sql = String::from(
        "SELECT s.id, s.frequency, s.area, s.measure, s.partner, s.product, s.currency, s.source,
             s.adjustment, c.number, c.segments, c.unit, c.released, c.revision, c.start_period,
             c.observation_count
         FROM series s
         JOIN LATERAL (
             SELECT g.number, g.unit, v.released, v.revision, v.start_period, v.observation_count,
                 count(*) OVER () AS segments
             FROM segment g
             JOIN LATERAL (
                 SELECT w.released, w.revision, w.start_period, w.observation_count FROM vintage w
                 WHERE w.segment_id = g.id ORDER BY w.released DESC, w.revision DESC LIMIT 1
             ) v ON v.observation_count > 0
             WHERE g.series_id = s.id
             ORDER BY v.released DESC, g.number DESC LIMIT 1
         ) c ON true
         WHERE s.id > $1",
    );
    // Only names from our own list enter the text; values are bound.
    for (i, place) in SeriesKey::PLACES.iter().enumerate() {
        sql.push_str(&format!(
            " AND (cardinality(${n}) = 0 OR s.{place} = ANY(${n}))",
            n = i + 2
        ));
    }
    sql.push_str(
        " AND NOT EXISTS (SELECT FROM unnest($10::text[]) AS w(word) WHERE strpos(lower(concat_ws('.',
             s.frequency, s.area, s.measure, s.partner, s.product, s.currency, s.source,
             s.adjustment) || ' ' || c.unit::text), lower(w.word)) = 0)
          ORDER BY s.id LIMIT $11",
    );
    let mut query = sqlx::query_as::<_, SearchRow>(AssertSqlSafe(sql)).bind(search.after);
    for place in &search.places {
        query = query.bind(place);
    }
    let rows = query
        .bind(&search.words)
        .bind(search.limit)
        .fetch_all(connection)
        .await?;
    rows.into_iter().map(ListedSeries::try_from).collect()
}

#[derive(sqlx::FromRow)]
struct SearchRow {
    id: i64,
    frequency: String,
    area: String,
    measure: String,
    partner: String,
    product: String,
    currency: String,
    source: String,
    adjustment: String,
    number: i32,
    segments: i64,
    unit: Json<Unit>,
    released: sqlx::types::chrono::NaiveDate,
    revision: i64,
    start_period: i32,
    observation_count: i32,
}

impl TryFrom<SearchRow> for ListedSeries {
    type Error = Error;

    fn try_from(r: SearchRow) -> Result<Self, Error> {
        let places = [
            &r.area,
            &r.measure,
            &r.partner,
            &r.product,
            &r.currency,
            &r.source,
            &r.adjustment,
        ];
        Ok(Self {
            id: r.id,
            key: key_of(&r.frequency, places.map(String::as_str))?,
            segment: r.number,
            segments: r.segments,
            unit: r.unit.0,
            released: super::date(r.released)?,
            revision: r.revision,
            start_period: r.start_period,
            observation_count: r.observation_count,
        })
    }
}

/// Series and segment numbers of all segments of these series.
///
/// # Errors
/// [`Error::Database`].
pub async fn segments_of_series(
    connection: &mut PgConnection,
    series: &[i64],
) -> Result<Vec<(i64, i64)>, Error> {
    let rows = sqlx::query!(
        "SELECT series_id, id FROM segment WHERE series_id = ANY($1) ORDER BY series_id, number",
        series
    )
    .fetch_all(connection)
    .await?;
    Ok(rows.into_iter().map(|r| (r.series_id, r.id)).collect())
}
