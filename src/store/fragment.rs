//! Fragments: what each upload says of a segment, kept as it was said.

use sqlx::PgConnection;
use sqlx::types::chrono::NaiveDate;

use super::copy::CopyBuffer;
use super::vintage::{first_period, packed, status_bytes, statuses};
use super::{Error, day};
use crate::series::provenance;
use crate::series::vintage::{Scope, Statement};
use crate::time::{Date, Frequency};

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

/// Keeps what an upload says.
///
/// # Errors
/// [`Error::Database`].
pub async fn insert(
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
