//! Finding series by the places of their keys and by words.

use sqlx::PgConnection;
use sqlx::types::Json;

use super::Error;
use super::series::key_of;
use crate::series::{SeriesKey, Unit};
use crate::time::Date;

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
    let [
        frequency,
        area,
        measure,
        partner,
        product,
        currency,
        source,
        adjustment,
    ] = &search.places;
    let rows = sqlx::query_as!(
        SearchRow,
        r#"SELECT s.id, s.frequency, s.area, s.measure, s.partner, s.product, s.currency, s.source,
             s.adjustment, c.number AS "number!", c.segments AS "segments!",
             c.unit AS "unit!: Json<Unit>", c.released AS "released!", c.revision AS "revision!",
             c.start_period AS "start_period!", c.observation_count AS "observation_count!"
           FROM series s
           JOIN LATERAL (
               SELECT g.number, g.unit, v.said AS released, v.revision, v.start_period, v.observation_count,
                   count(*) OVER () AS segments
               FROM segment g
               JOIN LATERAL (
                   SELECT w.said, w.revision, w.start_period, w.observation_count FROM vintage w
                   WHERE w.segment_id = g.id ORDER BY w.released DESC, w.revision DESC LIMIT 1
               ) v ON v.observation_count > 0
               WHERE g.series_id = s.id
               ORDER BY v.said DESC, g.number DESC LIMIT 1
           ) c ON true
           WHERE s.id > $1
             AND (cardinality($2::text[]) = 0 OR s.frequency = ANY($2))
             AND (cardinality($3::text[]) = 0 OR s.area = ANY($3))
             AND (cardinality($4::text[]) = 0 OR s.measure = ANY($4))
             AND (cardinality($5::text[]) = 0 OR s.partner = ANY($5))
             AND (cardinality($6::text[]) = 0 OR s.product = ANY($6))
             AND (cardinality($7::text[]) = 0 OR s.currency = ANY($7))
             AND (cardinality($8::text[]) = 0 OR s.source = ANY($8))
             AND (cardinality($9::text[]) = 0 OR s.adjustment = ANY($9))
             AND NOT EXISTS (SELECT FROM unnest($10::text[]) AS w(word) WHERE strpos(lower(concat_ws('.',
                 s.frequency, s.area, s.measure, s.partner, s.product, s.currency, s.source,
                 s.adjustment) || ' ' || c.unit::text), lower(w.word)) = 0)
           ORDER BY s.id LIMIT $11"#,
        search.after,
        frequency,
        area,
        measure,
        partner,
        product,
        currency,
        source,
        adjustment,
        &search.words,
        search.limit
    )
    .fetch_all(connection)
    .await?;
    rows.into_iter().map(ListedSeries::try_from).collect()
}

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
