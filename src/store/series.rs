//! Series and segments.

use std::collections::HashSet;

use sqlx::PgConnection;
use sqlx::types::Json;

use super::Error;
use crate::series::{SeriesKey, Unit};
use crate::time::Frequency;

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

/// Series looked up in one statement.
const BATCH: usize = 10_000;

/// The places of keys, a column each.
fn columns<'a>(keys: impl Iterator<Item = &'a SeriesKey>) -> [Vec<String>; 8] {
    let mut columns: [Vec<String>; 8] = Default::default();
    for key in keys {
        columns[0].push(key.frequency().code().to_owned());
        for (column, place) in columns[1..].iter_mut().zip(key.places()) {
            column.push(place.clone());
        }
    }
    columns
}

/// Series of these places, each with its number in the question, from 1.
async fn look_up(
    connection: &mut PgConnection,
    columns: &[Vec<String>; 8],
) -> Result<Vec<(usize, i64)>, Error> {
    let [
        frequency,
        area,
        measure,
        partner,
        product,
        currency,
        source,
        adjustment,
    ] = columns;
    let rows = sqlx::query!(
        r#"SELECT q.i AS "i!", s.id FROM unnest($1::text[], $2::text[], $3::text[], $4::text[], $5::text[],
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
    .fetch_all(connection)
    .await?;
    let number = |i| usize::try_from(i).map_err(|e| Error::corrupt("the number of a series", e));
    rows.iter().map(|r| Ok((number(r.i)?, r.id))).collect()
}

/// Those of these series that exist, each with its place in the question.
///
/// # Errors
/// [`Error::Database`].
pub async fn find(
    connection: &mut PgConnection,
    keys: &[&SeriesKey],
) -> Result<Vec<(usize, i64)>, Error> {
    let found = look_up(connection, &columns(keys.iter().copied())).await?;
    Ok(found.into_iter().map(|(i, id)| (i - 1, id)).collect())
}

/// Finds or creates these series. Answers in the order of the question.
///
/// # Errors
/// [`Error::Database`].
pub async fn ensure(connection: &mut PgConnection, keys: &[&SeriesKey]) -> Result<Vec<i64>, Error> {
    // Everybody creates in the order of keys and before locking anything: two uploads that create the
    // same series wait for each other one way only.
    let mut order: Vec<usize> = (0..keys.len()).collect();
    order.sort_unstable_by_key(|i| keys[*i]);
    let mut ids = vec![0; keys.len()];
    for batch in order.chunks(BATCH) {
        let columns = columns(batch.iter().map(|i| keys[*i]));
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
        sqlx::query!(
            "INSERT INTO series (frequency, area, measure, partner, product, currency, source, adjustment)
             SELECT a, b, c, d, e, f, g, h FROM unnest($1::text[], $2::text[], $3::text[], $4::text[],
                 $5::text[], $6::text[], $7::text[], $8::text[]) WITH ORDINALITY
                 AS q(a, b, c, d, e, f, g, h, i)
             ORDER BY i
             ON CONFLICT DO NOTHING",
            frequency, area, measure, partner, product, currency, source, adjustment
        )
        .execute(&mut *connection)
        .await?;
        let found = look_up(connection, &columns).await?;
        if found.len() != batch.len() {
            return Err(Error::corrupt("a series", "not found after it was made"));
        }
        for (i, (_, id)) in batch.iter().zip(found) {
            ids[*i] = id;
        }
    }
    Ok(ids)
}

/// Locks these series, in the order of their ids, until the transaction ends.
///
/// # Errors
/// [`Error::Database`].
pub async fn lock(connection: &mut PgConnection, series: &[i64]) -> Result<(), Error> {
    sqlx::query_scalar!(
        "SELECT count(*)
         FROM (SELECT id FROM series WHERE id = ANY($1) ORDER BY id FOR UPDATE) locked",
        series
    )
    .fetch_one(connection)
    .await?;
    Ok(())
}

/// Finds or creates the segments of these locked series with these units. Answers in the order of the
/// question.
///
/// # Errors
/// [`Error::Database`].
pub async fn ensure_segments(
    connection: &mut PgConnection,
    wanted: &[(i64, &Unit)],
) -> Result<Vec<SegmentRow>, Error> {
    let ids: Vec<i64> = wanted.iter().map(|(id, _)| *id).collect();
    let units: Vec<serde_json::Value> = wanted
        .iter()
        .map(|(id, unit)| serde_json::to_value(unit).map_err(|e| Error::corrupt(id, e)))
        .collect::<Result<_, _>>()?;
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
    if rows.len() == wanted.len() {
        Ok(rows)
    } else {
        Err(Error::corrupt("a segment", "not found after it was made"))
    }
}

/// Locks the series that an upload speaks of, as [`lock`] does.
///
/// # Errors
/// [`Error::Database`].
pub async fn lock_of_upload(connection: &mut PgConnection, upload: i64) -> Result<(), Error> {
    sqlx::query_scalar!(
        "SELECT count(*)
         FROM (SELECT id FROM series
               WHERE id IN (SELECT g.series_id FROM fragment f JOIN segment g ON g.id = f.segment_id
                            WHERE f.upload_id = $1)
               ORDER BY id FOR UPDATE) locked",
        upload
    )
    .fetch_one(connection)
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
