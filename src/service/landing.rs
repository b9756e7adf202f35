//! How an upload becomes current, and how it stops being so.
//!
//! The visible state as of a release date is the merge of the landed uploads released until then, in
//! the order of release and, among equals, of landing. Landing applies one statement where it belongs
//! in that order and replays the later ones; withdrawing replays all but one. A vintage is written
//! only where values, status or provenance differ.

use std::collections::{BTreeMap, BTreeSet, HashMap};

use super::Fault;
use super::views::{ObservationCounts, SeriesList};
use crate::finding::Finding;
use crate::series::screening;
use crate::series::vintage::{Changes, State, Statement, difference, merge};
use crate::store::change::{self, Action, Revision};
use crate::store::series::StoredSegment;
use crate::store::vintage::{NewVintage, StatementRow, VintageRow};
use crate::store::{self, Connection};
use crate::time::Date;

/// Segments worked on at a time.
const BATCH: usize = 1000;

/// What landing an upload did, or would do.
#[derive(Debug, Default)]
pub(super) struct Landing {
    pub(super) revision: Option<i64>,
    pub(super) observations: ObservationCounts,
    pub(super) series_created: SeriesList,
    pub(super) series_changed: SeriesList,
    /// Segments that had no observations, in series that had some in another segment.
    pub(super) opened: Vec<StoredSegment>,
    pub(super) findings: Vec<Finding>,
}

/// Applies the stored fragments of an upload to their segments and writes the vintages that result.
/// Findings of severity error are for the caller to act on: it rolls back to hold the upload.
pub(super) async fn land(
    connection: &mut Connection,
    upload: i64,
    released: Date,
    action: Action,
    author: &str,
) -> Result<Landing, Fault> {
    let segments = store::vintage::segments_of_upload(connection, upload).await?;
    store::series::lock_segments(connection, &segments).await?;
    let populated = store::series::populated_segments(connection, &segments).await?;
    let revision = change::draw(connection, action, Some(upload), None, author).await?;
    let mut landing = Landing {
        revision: Some(revision.number),
        ..Landing::default()
    };
    let after = next_day(released);
    let mut created: BTreeSet<i64> = BTreeSet::new();
    for batch in segments.chunks(BATCH) {
        let statements = store::vintage::statements_of_upload(connection, upload, batch).await?;
        let stored = by_id(store::series::segments_by_id(connection, batch).await?);
        let mut bases = one_each(
            store::vintage::visible_before(connection, batch, after).await?,
            &stored,
        )?;
        let later = store::vintage::visible_from(connection, batch, after).await?;
        let mut later_statements = HashMap::new();
        if !later.is_empty() {
            let ids: Vec<i64> = later.iter().map(|v| v.segment_id).collect();
            later_statements =
                grouped(store::vintage::landed_statements(connection, &ids, after).await?);
        }
        let mut later_states = dated(later, &stored)?;
        let mut vintages = Vec::new();
        for row in statements {
            let Some(segment) = stored.get(&row.segment_id) else {
                return Err(Fault::Internal(format!(
                    "segment {} vanished",
                    row.segment_id
                )));
            };
            let base = bases.remove(&row.segment_id);
            if let Some(base) = &base
                && let Some(finding) = screening::level_ratio(base, &row.statement)
            {
                landing.findings.push(finding.at_series(&segment.key));
            }
            let (state, changes) = merge(base.as_ref(), &row.statement);
            landing.count(changes);
            if !populated.segments.contains(&row.segment_id) {
                if populated.series.contains(&segment.series_id) {
                    landing.opened.push(segment.clone());
                } else if created.insert(segment.series_id) {
                    landing.series_created.add(&segment.key);
                }
            }
            if changes.any() {
                landing.series_changed.add(&segment.key);
                let rest = later_statements.remove(&row.segment_id).unwrap_or_default();
                let visible = later_states.remove(&row.segment_id).unwrap_or_default();
                let statements = rest.iter().map(|s| (s.released, &s.statement));
                replay_onto(
                    Some(state.clone()),
                    statements,
                    visible,
                    &mut vintages,
                    row.segment_id,
                );
                vintages.push(NewVintage {
                    segment_id: row.segment_id,
                    released,
                    state,
                    changes,
                });
            }
        }
        store::vintage::insert(connection, revision.number, &vintages).await?;
    }
    Ok(landing)
}

impl Landing {
    fn count(&mut self, changes: Changes) {
        let counts = &mut self.observations;
        counts.new += u64::from(changes.new);
        counts.revised += u64::from(changes.revised);
        counts.unchanged += u64::from(changes.unchanged);
        counts.emptied += u64::from(changes.emptied);
    }
}

/// Takes back a landed upload: its state must already say so, so that replay leaves it out.
pub(super) async fn unland(
    connection: &mut Connection,
    upload: i64,
    released: Date,
    author: &str,
) -> Result<Revision, Fault> {
    let segments = store::vintage::segments_of_upload(connection, upload).await?;
    store::series::lock_segments(connection, &segments).await?;
    let revision = change::draw(connection, Action::Withdraw, Some(upload), None, author).await?;
    for batch in segments.chunks(BATCH) {
        let stored = by_id(store::series::segments_by_id(connection, batch).await?);
        let mut bases = one_each(
            store::vintage::visible_before(connection, batch, released).await?,
            &stored,
        )?;
        let mut visible = dated(
            store::vintage::visible_from(connection, batch, released).await?,
            &stored,
        )?;
        let statements =
            grouped(store::vintage::landed_statements(connection, batch, released).await?);
        let mut vintages = Vec::new();
        for id in batch {
            let base = bases.remove(id);
            let rest = statements.get(id).map_or(&[][..], Vec::as_slice);
            let visible = visible.remove(id).unwrap_or_default();
            let statements = rest.iter().map(|s| (s.released, &s.statement));
            replay_onto(base, statements, visible, &mut vintages, *id);
        }
        store::vintage::insert(connection, revision.number, &vintages).await?;
    }
    Ok(revision)
}

/// Replays statements in their order onto a base, and for every release date that has a visible state
/// adds the vintage that replaces it, where it differs.
fn replay_onto<'a>(
    base: Option<State>,
    statements: impl Iterator<Item = (Date, &'a Statement)>,
    visible: BTreeMap<Date, State>,
    vintages: &mut Vec<NewVintage>,
    segment_id: i64,
) {
    let mut state = base;
    let mut statements = statements.peekable();
    for (released, old) in visible {
        while let Some((_, statement)) = statements.next_if(|(date, _)| *date <= released) {
            state = Some(merge(state.as_ref(), statement).0);
        }
        let new = state.clone().unwrap_or_else(|| State::empty(old.start));
        if !new.agrees_with(&old) {
            vintages.push(NewVintage {
                segment_id,
                released,
                changes: difference(&old, &new),
                state: new,
            });
        }
    }
}

fn next_day(date: Date) -> Date {
    Date::from_days(date.days() + 1).unwrap_or(date)
}

fn by_id(segments: Vec<StoredSegment>) -> HashMap<i64, StoredSegment> {
    segments.into_iter().map(|s| (s.id, s)).collect()
}

fn state_of(row: VintageRow, stored: &HashMap<i64, StoredSegment>) -> Result<State, Fault> {
    let segment = stored
        .get(&row.segment_id)
        .ok_or_else(|| Fault::Internal(format!("segment {} vanished", row.segment_id)))?;
    Ok(row.state(segment.key.frequency())?)
}

fn one_each(
    rows: Vec<VintageRow>,
    stored: &HashMap<i64, StoredSegment>,
) -> Result<HashMap<i64, State>, Fault> {
    rows.into_iter()
        .map(|row| Ok((row.segment_id, state_of(row, stored)?)))
        .collect()
}

fn dated(
    rows: Vec<VintageRow>,
    stored: &HashMap<i64, StoredSegment>,
) -> Result<HashMap<i64, BTreeMap<Date, State>>, Fault> {
    let mut map: HashMap<i64, BTreeMap<Date, State>> = HashMap::new();
    for row in rows {
        let (id, released) = (row.segment_id, store::date(row.released)?);
        map.entry(id)
            .or_default()
            .insert(released, state_of(row, stored)?);
    }
    Ok(map)
}

fn grouped(rows: Vec<StatementRow>) -> HashMap<i64, Vec<StatementRow>> {
    let mut map: HashMap<i64, Vec<StatementRow>> = HashMap::new();
    for row in rows {
        map.entry(row.segment_id).or_default().push(row);
    }
    map
}
