//! How an upload becomes current, and how it stops being so.
//!
//! The visible state as of a release date is the merge of the landed uploads released until then, in
//! the order of release and, among equals, of landing. Landing applies one statement where it belongs
//! in that order and replays the later ones; withdrawing replays all but one. A vintage is written
//! only where values, status or provenance differ, so a later upload that repeated what was there has
//! none; it is replayed all the same.

use std::collections::{BTreeMap, BTreeSet, HashMap};
use std::ops::Range;
use std::sync::Arc;

use super::views::{ObservationCounts, SeriesList};
use super::{Fault, blocking, groups};
use crate::finding::Finding;
use crate::series::screening;
use crate::series::vintage::{Changes, State, difference, merge};
use crate::store::change::{self, Action, Revision};
use crate::store::fragment::StatementRow;
use crate::store::series::{Populated, StoredSegment};
use crate::store::vintage::{NewVintage, Said, VintageRow};
use crate::store::{self, Connection};
use crate::time::Date;

/// Periods of vintages that wait to be written, some 10 bytes each.
const PENDING_PERIODS: usize = 8_000_000;

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
/// Findings of severity error are for the caller to act on: it rolls back to hold the upload. The caller
/// has locked the series.
pub(super) async fn land(
    connection: &mut Connection,
    upload: i64,
    released: Date,
    action: Action,
    author: &str,
) -> Result<Landing, Fault> {
    let after = next_day(released);
    let later = store::upload::landed_from(connection, after).await?;
    let (segments, batches) = segments(connection, upload, after, &later).await?;
    let populated = Arc::new(store::series::populated_segments(connection, &segments).await?);
    let mut writer = Writer::new(action, upload, author);
    let mut landing = Landing::default();
    let mut created: BTreeSet<i64> = BTreeSet::new();
    for batch in batches {
        let batch = &segments[batch];
        let statements = store::fragment::statements(connection, &[upload], batch).await?;
        let material = Material::load(connection, batch, after, &later).await?;
        let populated = Arc::clone(&populated);
        let vintages;
        (landing, created, vintages) = blocking(move || {
            let (mut landing, mut created) = (landing, created);
            let vintages =
                landing.apply(released, statements, material, &populated, &mut created)?;
            Ok::<_, Fault>((landing, created, vintages))
        })
        .await??;
        writer.add(connection, vintages).await?;
    }
    landing.revision = Some(writer.finish(connection).await?.number);
    Ok(landing)
}

impl Landing {
    /// Merges statements released on a date into what their segments hold.
    fn apply(
        &mut self,
        released: Date,
        statements: Vec<StatementRow>,
        mut material: Material,
        populated: &Populated,
        created: &mut BTreeSet<i64>,
    ) -> Result<Vec<NewVintage>, Fault> {
        let mut vintages = Vec::new();
        for row in statements {
            let id = row.segment_id;
            let segment = material
                .stored
                .remove(&id)
                .ok_or_else(|| Fault::Internal(format!("segment {id} vanished")))?;
            let base = material.bases.remove(&id);
            let visible = material.visible.remove(&id).unwrap_or_default();
            // An older release loaded late is judged by the oldest state that follows it.
            let known = base.as_ref().or_else(|| visible.values().next());
            if let Some(known) = known
                && let Some(finding) = screening::level_ratio(&known.state, &row.statement)
            {
                if self.findings.len() < SHOWN_FINDINGS {
                    self.findings.push(finding.at_series(&segment.key));
                } else {
                    self.more_findings += 1;
                }
            }
            let (state, changes) = merge(base.as_ref().map(|b| &b.state), &row.statement);
            self.count(changes);
            if changes.any() {
                self.series_changed.add(&segment.key);
                let rest = material.replayed.get(&id).map_or(&[][..], Vec::as_slice);
                let said = Said {
                    date: released,
                    state,
                };
                vintages.push(NewVintage::new(
                    id,
                    released,
                    released,
                    &said.state,
                    changes,
                ));
                replay_onto(Some(said), rest, visible, &mut vintages, id);
            }
            if !populated.segments.contains(&id) {
                if populated.series.contains(&segment.series_id) {
                    self.opened.push(segment);
                } else if created.insert(segment.series_id) {
                    self.series_created.add(&segment.key);
                }
            }
        }
        Ok(vintages)
    }

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
    let mut writer = Writer::new(Action::Withdraw, upload, author);
    for batch in batches {
        let batch = segments[batch].to_vec();
        let mut material = Material::load(connection, &batch, released, &rest).await?;
        let vintages = blocking(move || {
            let mut vintages = Vec::new();
            for id in batch {
                let base = material.bases.remove(&id);
                let rest = material.replayed.get(&id).map_or(&[][..], Vec::as_slice);
                let visible = material.visible.remove(&id).unwrap_or_default();
                replay_onto(base, rest, visible, &mut vintages, id);
            }
            vintages
        })
        .await?;
        writer.add(connection, vintages).await?;
    }
    writer.finish(connection).await
}

/// Vintages on their way into the store. The revision is drawn when the first are written: from then to the
/// end of the transaction no other change can commit.
struct Writer<'a> {
    action: Action,
    upload: i64,
    author: &'a str,
    revision: Option<Revision>,
    pending: Vec<NewVintage>,
    periods: usize,
}

impl<'a> Writer<'a> {
    fn new(action: Action, upload: i64, author: &'a str) -> Self {
        Self {
            action,
            upload,
            author,
            revision: None,
            pending: Vec::new(),
            periods: 0,
        }
    }

    async fn add(
        &mut self,
        connection: &mut Connection,
        vintages: Vec<NewVintage>,
    ) -> Result<(), Fault> {
        self.periods += vintages.iter().map(NewVintage::periods).sum::<usize>();
        self.pending.extend(vintages);
        if self.periods > PENDING_PERIODS {
            self.write(connection).await?;
        }
        Ok(())
    }

    async fn write(&mut self, connection: &mut Connection) -> Result<Revision, Fault> {
        let revision = match self.revision {
            Some(revision) => revision,
            None => {
                let upload = Some(self.upload);
                change::draw(connection, self.action, upload, None, self.author).await?
            }
        };
        self.revision = Some(revision);
        store::vintage::insert(connection, revision.number, &self.pending).await?;
        self.pending.clear();
        self.periods = 0;
        Ok(revision)
    }

    /// Writes the rest. A revision is drawn even where nothing changed: replays order uploads by it.
    async fn finish(mut self, connection: &mut Connection) -> Result<Revision, Fault> {
        self.write(connection).await
    }
}

/// What some segments hold around a release date.
struct Material {
    stored: HashMap<i64, StoredSegment>,
    /// What was visible before the date.
    bases: HashMap<i64, Said>,
    /// What is visible from the date on.
    visible: HashMap<i64, BTreeMap<Date, Said>>,
    /// What other uploads say from the date on, in the order in which it merges.
    replayed: HashMap<i64, Vec<StatementRow>>,
}

impl Material {
    async fn load(
        connection: &mut Connection,
        segments: &[i64],
        date: Date,
        uploads: &[i64],
    ) -> Result<Self, Fault> {
        let stored: HashMap<i64, StoredSegment> =
            store::series::segments_by_id(connection, segments)
                .await?
                .into_iter()
                .map(|s| (s.id, s))
                .collect();
        let said = |row: VintageRow| {
            let segment = stored
                .get(&row.segment_id)
                .ok_or_else(|| Fault::Internal(format!("segment {} vanished", row.segment_id)))?;
            Ok::<_, Fault>(row.said(segment.key.frequency())?)
        };
        let mut bases = HashMap::new();
        for row in store::vintage::visible_before(connection, segments, date).await? {
            bases.insert(row.segment_id, said(row)?);
        }
        let mut visible: HashMap<i64, BTreeMap<Date, Said>> = HashMap::new();
        for row in store::vintage::visible_from(connection, segments, date).await? {
            let (id, released) = (row.segment_id, store::date(row.released)?);
            visible.entry(id).or_default().insert(released, said(row)?);
        }
        let mut replayed: HashMap<i64, Vec<StatementRow>> = HashMap::new();
        if !uploads.is_empty() {
            for row in store::fragment::statements(connection, uploads, segments).await? {
                replayed.entry(row.segment_id).or_default().push(row);
            }
        }
        Ok(Self {
            stored,
            bases,
            visible,
            replayed,
        })
    }
}

/// Segments that an upload speaks of, and batches of them that fit into memory.
async fn segments(
    connection: &mut Connection,
    upload: i64,
    from: Date,
    replayed: &[i64],
) -> Result<(Vec<i64>, Vec<Range<usize>>), Fault> {
    let weighed = store::fragment::segments_of_upload(connection, upload, from, replayed).await?;
    let batches = groups::batches(weighed.iter().map(|s| s.periods));
    Ok((weighed.iter().map(|s| s.segment_id).collect(), batches))
}

/// Replays statements in their order onto a base that readers see until the first date. Wherever what
/// they see from a date on, by a vintage of that date or the one before, is no longer what the replay
/// gives, adds the vintage that says so.
fn replay_onto(
    base: Option<Said>,
    statements: &[StatementRow],
    mut visible: BTreeMap<Date, Said>,
    vintages: &mut Vec<NewVintage>,
    segment_id: i64,
) {
    let mut dates: BTreeSet<Date> = visible.keys().copied().collect();
    dates.extend(statements.iter().map(|s| s.released));
    let mut now = base.clone();
    let mut seen = base;
    let mut statements = statements.iter().peekable();
    for released in dates {
        while let Some(row) = statements.next_if(|row| row.released <= released) {
            let (state, changes) = merge(now.as_ref().map(|n| &n.state), &row.statement);
            if changes.any() {
                let date = row.released;
                now = Some(Said { date, state });
            }
        }
        seen = visible.remove(&released).or(seen);
        let nothing = |like: &Said| Said {
            date: like.date,
            state: State::empty(like.state.start),
        };
        let (new, old) = match (&now, &seen) {
            (None, None) => continue,
            (Some(new), None) => (new.clone(), nothing(new)),
            (None, Some(old)) => (nothing(old), old.clone()),
            (Some(new), Some(old)) => (new.clone(), old.clone()),
        };
        if new.date != old.date || !new.state.agrees_with(&old.state) {
            let changes = difference(&old.state, &new.state);
            vintages.push(NewVintage::new(
                segment_id, released, new.date, &new.state, changes,
            ));
        }
        seen = Some(new);
    }
}

fn next_day(date: Date) -> Date {
    Date::from_days(date.days() + 1).unwrap_or(date)
}
