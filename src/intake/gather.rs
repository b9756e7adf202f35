//! Rows gathered by series.

use std::collections::HashMap;

use super::describe::{Bound, Described};
use crate::finding::Finding;
use crate::series::{Piece, SeriesKey, Status, Unit};
use crate::time::Period;

/// What the rows with one combination of descriptive cells have in common.
#[derive(Debug)]
pub(super) struct Slot {
    pub described: Described,
    /// The series of each frequency met so far.
    series: [Option<u32>; 6],
}

#[derive(Debug)]
struct Entry {
    key: SeriesKey,
    unit: Unit,
    rows: Rows,
}

#[derive(Debug, Default)]
struct Rows {
    periods: Vec<i32>,
    values: Vec<f64>,
    status: Vec<Status>,
    lines: Vec<u32>,
}

/// Bytes of one row in [`Rows`].
const ROW_BYTES: usize = 17;

/// One observation of a row.
#[derive(Clone, Copy, Debug)]
pub(super) struct Observation {
    pub period: Period,
    pub value: f64,
    pub status: Status,
    pub line: u32,
}

#[derive(Debug, Default)]
pub(super) struct Gather {
    slots: Vec<Slot>,
    by_cells: HashMap<Box<[u8]>, u32>,
    series: Vec<Entry>,
    by_key: HashMap<SeriesKey, Vec<u32>>,
    pending_bytes: usize,
}

impl Gather {
    /// The slot of these raw descriptive cells, if they were met before.
    pub(super) fn find(&self, cells: &[u8]) -> Option<u32> {
        self.by_cells.get(cells).copied()
    }

    pub(super) fn add(&mut self, cells: &[u8], described: Described) -> u32 {
        let slot = index(self.slots.len());
        self.slots.push(Slot {
            described,
            series: [None; 6],
        });
        self.by_cells.insert(cells.into(), slot);
        slot
    }

    pub(super) fn slots(&self) -> usize {
        self.slots.len()
    }

    pub(super) fn described(&self, slot: u32) -> &Described {
        &self.slots[slot as usize].described
    }

    /// Adds a row to the series that its slot and its period's frequency name.
    pub(super) fn push(&mut self, slot: u32, row: Observation) -> Result<(), Box<Finding>> {
        let frequency = row.period.frequency() as usize;
        let series = match self.slots[slot as usize].series[frequency] {
            Some(series) => series,
            None => self.open(slot, row.period)?,
        };
        let rows = &mut self.series[series as usize].rows;
        if rows.lines.len() == rows.lines.capacity() {
            let more = (rows.lines.len() / 2).max(8);
            rows.periods.reserve_exact(more);
            rows.values.reserve_exact(more);
            rows.status.reserve_exact(more);
            rows.lines.reserve_exact(more);
            self.pending_bytes += more * ROW_BYTES;
        }
        rows.periods.push(row.period.ordinal());
        rows.values.push(row.value);
        rows.status.push(row.status);
        rows.lines.push(row.line);
        Ok(())
    }

    /// The series of a slot at a frequency: two slots may differ in their cells and mean one.
    fn open(&mut self, slot: u32, period: Period) -> Result<u32, Box<Finding>> {
        let Slot { described, series } = &mut self.slots[slot as usize];
        let places = described.places.each_ref().map(String::as_str);
        let key = SeriesKey::new(period.frequency(), places)
            .map_err(|e| Box::new(Finding::error("not_a_key", e.to_string())))?;
        let same_key = self.by_key.entry(key.clone()).or_default();
        let known = same_key
            .iter()
            .find(|i| self.series[**i as usize].unit == described.unit);
        let found = match known {
            Some(i) => *i,
            None => {
                let i = index(self.series.len());
                same_key.push(i);
                self.series.push(Entry {
                    key,
                    unit: described.unit.clone(),
                    rows: Rows::default(),
                });
                i
            }
        };
        series[period.frequency() as usize] = Some(found);
        Ok(found)
    }

    /// Memory of the rows held: what [`Self::take`] gives away.
    pub(super) fn pending_bytes(&self) -> usize {
        self.pending_bytes
    }

    /// Gives away the rows held so far.
    pub(super) fn take(&mut self) -> Vec<Piece> {
        self.pending_bytes = 0;
        self.series
            .iter_mut()
            .filter(|entry| !entry.rows.lines.is_empty())
            .map(|entry| {
                let rows = std::mem::take(&mut entry.rows);
                Piece {
                    key: entry.key.clone(),
                    unit: entry.unit.clone(),
                    periods: rows.periods,
                    values: rows.values,
                    status: rows.status,
                    lines: rows.lines,
                }
            })
            .collect()
    }

    /// Number of different series so far.
    pub(super) fn series(&self) -> usize {
        self.series.len()
    }

    /// The different units so far, in words, sorted.
    pub(super) fn units(&self) -> Vec<String> {
        let units: std::collections::BTreeSet<String> =
            self.series.iter().map(|e| e.unit.to_string()).collect();
        units.into_iter().collect()
    }
}

impl Bound {
    pub(super) fn allows(self, value: f64) -> bool {
        match self {
            Self::Any => true,
            Self::NotNegative => value >= 0.0,
            Self::Positive => value > 0.0,
        }
    }
}

fn index(n: usize) -> u32 {
    u32::try_from(n).expect("the limit on series lies far below 2^32")
}
