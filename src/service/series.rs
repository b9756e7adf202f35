//! Reading series: search, observations as of any moment, vintages.

use std::collections::BTreeMap;

use chrono::NaiveDate;

use super::Fault;
use super::documents::{bad_cursor, cursor, timestamp};
use super::preview::series;
use super::views::{ObservationView, ObservationsView, Page, Pin, SeriesView, VintageView};
use crate::finding::Finding;
use crate::series::algebra::{Over, Span, growth};
use crate::series::{GrowthKind, Series, SeriesKey, Status};
use crate::store::search::{ListedSeries, Search};
use crate::store::vintage::{AsOf, ListedVintage, ReadVintage};
use crate::store::{self, Connection, Database};
use crate::time::{Date, Frequency, Period};

/// Which state of a series a client asks for.
#[derive(Clone, Debug, Default)]
pub struct Moment {
    /// `as_of`: a release date, or `revision:N`.
    pub as_of: Option<String>,
    /// `recorded_as_of`: an RFC 3339 time.
    pub recorded_as_of: Option<String>,
    /// `segment`.
    pub segment: Option<i64>,
}

impl Moment {
    /// Resolves the moment against the store.
    pub(super) async fn resolve(&self, connection: &mut Connection) -> Result<AsOf, Fault> {
        let mut as_of = AsOf {
            segment: self.segment.map(|n| i32::try_from(n).unwrap_or(i32::MAX)),
            ..AsOf::default()
        };
        if let Some(text) = &self.as_of {
            if let Some(number) = text.strip_prefix("revision:") {
                as_of.revision = Some(number.parse().map_err(|_| bad_moment("as_of", text))?);
            } else {
                as_of.released = Some(
                    text.parse::<Date>()
                        .map_err(|_| bad_moment("as_of", text))?,
                );
            }
        }
        if let Some(text) = &self.recorded_as_of {
            let moment = chrono::DateTime::parse_from_rfc3339(text)
                .map_err(|_| bad_moment("recorded_as_of", text))?;
            let known = store::change::revision_at(connection, moment.to_utc()).await?;
            as_of.revision = Some(as_of.revision.map_or(known, |n| n.min(known)));
        }
        Ok(as_of)
    }

    /// As [`Moment::resolve`], with the newest revision where none was asked for: whatever is read after
    /// one another belongs to one state of the store.
    pub(super) async fn pinned(&self, connection: &mut Connection) -> Result<AsOf, Fault> {
        let mut as_of = self.resolve(connection).await?;
        if as_of.revision.is_none() {
            as_of.revision = Some(store::change::newest(connection).await?);
        }
        Ok(as_of)
    }

    /// Whether it is the present.
    pub(super) fn is_now(&self) -> bool {
        self.as_of.is_none() && self.recorded_as_of.is_none()
    }
}

/// Names the vintage of a series that was read.
pub(super) fn pin(key: &SeriesKey, vintage: &ReadVintage) -> Pin {
    Pin {
        series: key.to_string(),
        segment: vintage.segment,
        released: vintage.released.to_string(),
        revision: vintage.revision,
    }
}

/// The series among these that exist, as of one state of the store, and what names it.
pub(super) async fn pinned(
    database: &Database,
    keys: Vec<SeriesKey>,
    moment: &Moment,
) -> Result<(Vec<Pin>, BTreeMap<SeriesKey, Series>), Fault> {
    let mut connection = database.connection().await?;
    let as_of = moment.pinned(&mut connection).await?;
    let (mut pins, mut inputs) = (Vec::new(), BTreeMap::new());
    for key in keys {
        if let Some(vintage) = store::vintage::read(&mut connection, &key, as_of).await? {
            pins.push(pin(&key, &vintage));
            inputs.insert(key, series(vintage));
        }
    }
    Ok((pins, inputs))
}

fn bad_moment(parameter: &str, text: &str) -> Fault {
    let expected = match parameter {
        "as_of" => "a release date such as 2024-06-30, or revision:17",
        _ => "a time such as 2024-06-30T12:00:00Z",
    };
    Fault::BadRequest {
        detail: format!("'{text}' is no value for the parameter '{parameter}'"),
        errors: vec![
            Finding::error("bad_parameter", "the moment cannot be read")
                .at_parameter(parameter)
                .found(text)
                .expected(expected),
        ],
    }
}

/// Reads a key from a path.
///
/// # Errors
/// [`Fault::BadRequest`] saying what a key looks like.
pub fn parse_key(text: &str) -> Result<SeriesKey, Fault> {
    text.parse::<SeriesKey>().map_err(|e| Fault::BadRequest {
        detail: e.to_string(),
        errors: vec![
            Finding::error("bad_series_key", e.reason)
                .found(text)
                .expected(SeriesKey::PLACES.join(".").to_uppercase() + ", such as Q.XAA.exports"),
        ],
    })
}

fn no_series(key: &SeriesKey) -> Fault {
    Fault::not_found(format!("series {key} with observations as asked for"))
}

/// What to look for in the list of series.
#[derive(Clone, Debug, Default)]
pub struct Query {
    /// Alternatives per place of the key, in key order.
    pub places: [Vec<String>; 8],
    /// Words that must occur.
    pub words: Vec<String>,
}

/// Lists series.
///
/// # Errors
/// [`Fault::BadRequest`] for a wrong cursor; [`Fault::Store`].
pub async fn list(
    database: &Database,
    query: Query,
    after: Option<&str>,
    limit: i64,
) -> Result<Page<SeriesView>, Fault> {
    let search = Search {
        places: query.places,
        words: query.words,
        after: after.map_or(Ok(0), cursor)?,
        limit: limit + 1,
    };
    let mut connection = database.connection().await?;
    let rows = store::search::search(&mut connection, &search).await?;
    let page = Page::cut(rows, limit, |r: &ListedSeries| r.id.to_string());
    Ok(Page {
        items: page
            .items
            .into_iter()
            .map(listed)
            .collect::<Result<_, _>>()?,
        next: page.next,
    })
}

fn listed(row: ListedSeries) -> Result<SeriesView, Fault> {
    let (first, last) =
        ends(row.key.frequency(), row.start_period, row.observation_count).unwrap_or_default();
    Ok(SeriesView {
        dimensions: dimensions(&row.key),
        key: row.key.to_string(),
        segment: row.segment,
        segments: row.segments,
        unit_text: row.unit.to_string(),
        unit: row.unit,
        released: row.released.to_string(),
        revision: row.revision,
        first,
        last,
        observations: row.observation_count,
    })
}

fn dimensions(key: &SeriesKey) -> BTreeMap<String, String> {
    let frequency = key.frequency().code();
    std::iter::once(frequency)
        .chain(key.places().iter().map(String::as_str))
        .zip(SeriesKey::PLACES)
        .map(|(value, place)| (place.to_owned(), value.to_owned()))
        .collect()
}

fn ends(frequency: Frequency, start: i32, count: i32) -> Option<(String, String)> {
    let first = Period::from_ordinal(frequency, start)?;
    let last = first.plus(count - 1)?;
    (count > 0).then(|| (first.to_string(), last.to_string()))
}

/// One series, described as in lists.
///
/// # Errors
/// [`Fault::NotFound`]; [`Fault::Store`].
pub async fn get(database: &Database, key: &SeriesKey) -> Result<SeriesView, Fault> {
    let mut places: [Vec<String>; 8] = Default::default();
    places[0].push(key.frequency().code().to_owned());
    for (place, value) in places[1..].iter_mut().zip(key.places()) {
        place.push(value.clone());
    }
    let query = Query {
        places,
        words: vec![],
    };
    let page = list(database, query, None, 1).await?;
    page.items.into_iter().next().ok_or_else(|| no_series(key))
}

/// Reads the vintage that a client asks for.
pub(super) async fn vintage(
    database: &Database,
    key: &SeriesKey,
    moment: &Moment,
) -> Result<ReadVintage, Fault> {
    let mut connection = database.connection().await?;
    let as_of = moment.resolve(&mut connection).await?;
    store::vintage::read(&mut connection, key, as_of)
        .await?
        .ok_or_else(|| no_series(key))
}

/// Transformation on reading, by its name in the query.
fn growth_of(name: &str) -> Option<(GrowthKind, Over, bool)> {
    GROWTHS
        .iter()
        .find(|(n, ..)| *n == name)
        .map(|(_, k, o, a)| (*k, *o, *a))
}

/// Names of growth transformations: kind, distance, annualised.
const GROWTHS: [(&str, GrowthKind, Over, bool); 6] = [
    ("log", GrowthKind::Log, Over::Period, false),
    ("ratio", GrowthKind::Ratio, Over::Period, false),
    ("log_over_year", GrowthKind::Log, Over::Year, false),
    ("ratio_over_year", GrowthKind::Ratio, Over::Year, false),
    ("log_annualised", GrowthKind::Log, Over::Period, true),
    ("ratio_annualised", GrowthKind::Ratio, Over::Period, true),
];

/// The names that `growth=` knows.
#[must_use]
pub fn growth_names() -> Vec<&'static str> {
    GROWTHS.iter().map(|(name, ..)| *name).collect()
}

/// Observations of a series.
///
/// # Errors
/// [`Fault::NotFound`]; [`Fault::BadRequest`] for a wrong moment or period; [`Fault::Invalid`] where
/// growth has no meaning for the series; [`Fault::Store`].
pub async fn observations(
    database: &Database,
    key: &SeriesKey,
    moment: &Moment,
    from: Option<&str>,
    to: Option<&str>,
    growth_name: Option<&str>,
) -> Result<ObservationsView, Fault> {
    let first = from.map(|text| bound("from", text, key.frequency()));
    let last = to.map(|text| bound("to", text, key.frequency()));
    let from = first.transpose()?.map(|(first, _)| first);
    let to = last.transpose()?.map(|(_, last)| last);
    if let (Some(from), Some(to)) = (from, to)
        && from > to
    {
        let finding = Finding::error("bad_parameter", "'from' lies after 'to'")
            .at_parameter("from")
            .found(from.to_string())
            .expected(format!("a period until {to}"))
            .remedy("exchange the two");
        return Err(Fault::BadRequest {
            detail: finding.message.clone(),
            errors: vec![finding],
        });
    }
    let vintage = vintage(database, key, moment).await?;
    let (segment, released, recorded, revision) = (
        vintage.segment,
        vintage.released,
        vintage.recorded,
        vintage.revision,
    );
    let mut series = series(vintage);
    if let Some((kind, over, annualised)) = growth_name.and_then(growth_of) {
        series = growth(&series, kind, over, annualised)
            .map_err(|e| Fault::invalid(e.code(), vec![Finding::from(e).at_series(key)]))?;
    }
    let observations = (0..series.len())
        .filter_map(|i| {
            let period = series.period(i)?;
            let inside = from.is_none_or(|f| period >= f) && to.is_none_or(|t| period <= t);
            (inside && series.status[i] != Status::Absent).then(|| ObservationView {
                period: period.to_string(),
                value: series.values[i].is_finite().then_some(series.values[i]),
                status: series.status[i],
            })
        })
        .collect();
    Ok(ObservationsView {
        series: key.to_string(),
        segment,
        unit_text: series.unit.to_string(),
        unit: series.unit,
        released: released.to_string(),
        recorded: timestamp(recorded),
        revision,
        growth: growth_name.map(str::to_owned),
        observations,
    })
}

/// The first and last period of a series' frequency that a bound names: one, or all in a longer period.
fn bound(name: &str, text: &str, frequency: Frequency) -> Result<(Period, Period), Fault> {
    let longer = || {
        let period: Period = text.parse().ok()?;
        Span::new(period, period)?.at(frequency)
    };
    Period::parse_as(text, frequency)
        .map(|period| (period, period))
        .or_else(|e| longer().ok_or(e))
        .map_err(|e| {
            let finding = Finding::error("bad_parameter", e.to_string())
                .at_parameter(name)
                .found(text)
                .expected(format!("{}, or a longer period", e.expected));
            Fault::BadRequest {
                detail: e.to_string(),
                errors: vec![finding],
            }
        })
}

/// What identifies the vintage that a client would read, without its observations: segment, release
/// date, revision.
///
/// # Errors
/// As [`observations`].
pub async fn version(
    database: &Database,
    key: &SeriesKey,
    moment: &Moment,
) -> Result<Option<(i32, i64)>, Fault> {
    let mut connection = database.connection().await?;
    let as_of = moment.resolve(&mut connection).await?;
    Ok(store::vintage::version(&mut connection, key, as_of).await?)
}

/// Vintages of a series by the release that speaks, oldest first.
///
/// # Errors
/// [`Fault::NotFound`]; [`Fault::BadRequest`] for a wrong cursor; [`Fault::Store`].
pub async fn vintages(
    database: &Database,
    key: &SeriesKey,
    after: Option<&str>,
    limit: i64,
) -> Result<Page<VintageView>, Fault> {
    let after = after
        .map(|text| place(text).ok_or_else(|| bad_cursor(text)))
        .transpose()?;
    let mut connection = database.connection().await?;
    let mut rows = store::vintage::list(&mut connection, key).await?;
    if rows.is_empty() {
        return Err(no_series(key));
    }
    // An older release may come between two pages: the cursor names a vintage, not how many came before.
    rows.retain(|r| after.is_none_or(|after| (r.released, r.revision, r.segment) > after));
    let page = Page::cut(rows, limit, |r| {
        format!("{}_{}_{}", r.released, r.revision, r.segment)
    });
    let view = |r: ListedVintage| {
        let ends = ends(key.frequency(), r.start_period, r.observation_count);
        let (first, last) = ends.map_or((None, None), |(f, l)| (Some(f), Some(l)));
        Ok::<_, Fault>(VintageView {
            segment: r.segment,
            unit_text: r.unit.0.to_string(),
            released: store::date(r.released)?.to_string(),
            recorded: timestamp(r.recorded),
            revision: r.revision,
            action: r.action,
            upload: r.upload_id,
            run: r.run_id,
            first,
            last,
            observations: r.observation_count,
            new: r.new_count,
            revised: r.revised_count,
            emptied: r.emptied_count,
        })
    };
    Ok(Page {
        items: page.items.into_iter().map(view).collect::<Result<_, _>>()?,
        next: page.next,
    })
}

/// What orders the list of vintages: the release that speaks, its revision and its segment.
fn place(cursor: &str) -> Option<(NaiveDate, i64, i32)> {
    let (released, rest) = cursor.split_once('_')?;
    let (revision, segment) = rest.split_once('_')?;
    Some((
        released.parse().ok()?,
        revision.parse().ok()?,
        segment.parse().ok()?,
    ))
}
