//! How an upload becomes current, and how it stops being so.
//!
//! The visible state as of a release date is the merge of the landed uploads released until then, in
//! the order of release and, among equals, of landing. Landing applies one statement where it belongs
//! in that order and replays the later ones; withdrawing replays all but one. A vintage is written
//! only where values, status or provenance differ, so a later upload that repeated what was there has
//! none; it is replayed all the same.

use std::collections::{BTreeMap, BTreeSet, HashMap};
use std::ops::Range;

use super::views::{ObservationCounts, SeriesList};
use super::{Fault, groups};
use crate::finding::Finding;
use crate::series::screening;
use crate::series::vintage::{Changes, State, difference, merge};
use crate::store::change::{self, Action, Revision};
use crate::store::series::StoredSegment;
use crate::store::vintage::{NewVintage, StatementRow, VintageRow};
use crate::store::{self, Connection};
use crate::time::Date;

/// What landing an upload did, or would do.
#[derive(Debug, Default)]
pub(super) struct Landing {
    pub(super) revision: Option<i64>,
    pub(super) observations: ObservationCounts,
    pub(super) series_created: SeriesList,
    pub(super) series_changed: SeriesList,
    /// Segments that had no observations, in series that had some in another segment.
    pub(super) opened: Vec<StoredSegment>,
    /// The first [`SHOWN_FINDINGS`], and how many more there are.
    pub(super) findings: Vec<Finding>,
    pub(super) more_findings: u64,
}

/// Findings on series that a report shows: a wrong multiplier concerns all series of a file.
const SHOWN_FINDINGS: usize = 100;

/// Applies the stored fragments of an upload to their segments and writes the vintages that result.
/// Findings of severity error are for the caller to act on: it rolls back to hold the upload.
pub(super) async fn land(
    connection: &mut Connection,
    upload: i64,
    released: Date,
    action: Action,
    author: &str,
) -> Result<Landing, Fault> {
    store::series::lock_of_upload(connection, upload).await?;
    let after = next_day(released);
    let later = store::upload::landed_from(connection, after).await?;
    let (segments, batches) = segments(connection, upload, after, &later).await?;
    let populated = store::series::populated_segments(connection, &segments).await?;
    let revision = change::draw(connection, action, Some(upload), None, author).await?;
    let mut landing = Landing {
        revision: Some(revision.number),
        ..Landing::default()
    };
    let mut created: BTreeSet<i64> = BTreeSet::new();
    for batch in batches {
        let batch = &segments[batch];
        let statements = store::vintage::statements(connection, &[upload], batch).await?;
        let stored = by_id(store::series::segments_by_id(connection, batch).await?);
        let mut bases = one_each(
            store::vintage::visible_before(connection, batch, after).await?,
            &stored,
        )?;
        let mut visible = dated(
            store::vintage::visible_from(connection, batch, after).await?,
            &stored,
        )?;
        let replayed = replayed(connection, &later, batch).await?;
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
                if landing.findings.len() < SHOWN_FINDINGS {
                    landing.findings.push(finding.at_series(&segment.key));
                } else {
                    landing.more_findings += 1;
                }
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
                let rest = replayed.get(&row.segment_id).map_or(&[][..], Vec::as_slice);
                let visible = visible.remove(&row.segment_id).unwrap_or_default();
                replay_onto(Some(&state), rest, visible, &mut vintages, row.segment_id);
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
    store::series::lock_of_upload(connection, upload).await?;
    let rest = store::upload::landed_from(connection, released).await?;
    let (segments, batches) = segments(connection, upload, released, &rest).await?;
    let revision = change::draw(connection, Action::Withdraw, Some(upload), None, author).await?;
    for batch in batches {
        let batch = &segments[batch];
        let stored = by_id(store::series::segments_by_id(connection, batch).await?);
        let mut bases = one_each(
            store::vintage::visible_before(connection, batch, released).await?,
            &stored,
        )?;
        let mut visible = dated(
            store::vintage::visible_from(connection, batch, released).await?,
            &stored,
        )?;
        let replayed = replayed(connection, &rest, batch).await?;
        let mut vintages = Vec::new();
        for id in batch {
            let base = bases.remove(id);
            let rest = replayed.get(id).map_or(&[][..], Vec::as_slice);
            let visible = visible.remove(id).unwrap_or_default();
            replay_onto(base.as_ref(), rest, visible, &mut vintages, *id);
        }
        store::vintage::insert(connection, revision.number, &vintages).await?;
    }
    Ok(revision)
}

/// Segments that an upload speaks of, and batches of them that fit into memory.
async fn segments(
    connection: &mut Connection,
    upload: i64,
    from: Date,
    replayed: &[i64],
) -> Result<(Vec<i64>, Vec<Range<usize>>), Fault> {
    let weighed = store::vintage::segments_of_upload(connection, upload, from, replayed).await?;
    let batches = groups::batches(weighed.iter().map(|s| s.periods));
    Ok((weighed.iter().map(|s| s.segment_id).collect(), batches))
}

/// What these uploads say of some segments, by segment, in the order in which it merges.
async fn replayed(
    connection: &mut Connection,
    uploads: &[i64],
    segments: &[i64],
) -> Result<HashMap<i64, Vec<StatementRow>>, Fault> {
    let mut map: HashMap<i64, Vec<StatementRow>> = HashMap::new();
    if uploads.is_empty() {
        return Ok(map);
    }
    for row in store::vintage::statements(connection, uploads, segments).await? {
        map.entry(row.segment_id).or_default().push(row);
    }
    Ok(map)
}

/// Replays statements in their order onto a base that readers see until the first date. Wherever what
/// they see from a date on, by a vintage of that date or the one before, is no longer what the replay
/// gives, adds the vintage that says so.
fn replay_onto(
    base: Option<&State>,
    statements: &[StatementRow],
    mut visible: BTreeMap<Date, State>,
    vintages: &mut Vec<NewVintage>,
    segment_id: i64,
) {
    let mut dates: BTreeSet<Date> = visible.keys().copied().collect();
    dates.extend(statements.iter().map(|s| s.released));
    let nothing = |like: &State| State::empty(like.start);
    let mut state = base.cloned();
    let mut seen = base.cloned();
    let mut statements = statements.iter().peekable();
    for released in dates {
        while let Some(row) = statements.next_if(|row| row.released <= released) {
            state = Some(merge(state.as_ref(), &row.statement).0);
        }
        seen = visible.remove(&released).or(seen);
        let (new, old) = match (&state, &seen) {
            (None, None) => continue,
            (Some(new), None) => (new.clone(), nothing(new)),
            (None, Some(old)) => (nothing(old), old.clone()),
            (Some(new), Some(old)) => (new.clone(), old.clone()),
        };
        if !new.agrees_with(&old) {
            vintages.push(NewVintage {
                segment_id,
                released,
                changes: difference(&old, &new),
                state: new.clone(),
            });
        }
        seen = Some(new);
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
