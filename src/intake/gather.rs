//! Rows gathered by series.

use std::collections::HashMap;

use super::describe::{Bound, Described};
use crate::finding::Finding;
use crate::series::{Piece, SeriesKey, Status, Unit};
use crate::time::{Frequency, Period};

/// What the rows with one combination of descriptive cells have in common: as much as every row
/// needs, side by side in memory; the rest stands in [`Described`].
#[derive(Debug)]
struct Slot {
    cells: Box<[u8]>,
    /// The series of each frequency met so far.
    series: [u32; 6],
    terms: Terms,
}

/// How the observation cells of a row are to be read.
#[derive(Clone, Copy, Debug)]
pub(super) struct Terms {
    pub frequency: Option<Frequency>,
    pub multiplier: i32,
    pub bound: Bound,
}

/// No series yet.
const NONE: u32 = u32::MAX;

#[derive(Debug)]
struct Entry {
    key: SeriesKey,
    unit: Unit,
}

/// One row, in the order of the file. Rows are told apart by series only when they are given away:
/// where the series change from row to row, appending to each in turn would wait for memory.
#[derive(Clone, Copy, Debug)]
struct Row {
    value: f64,
    series: u32,
    period: i32,
    line: u32,
    status: Status,
}

/// Rows of one block of memory.
const BLOCK: usize = 1 << 14;
/// Bytes of one row held, of its place in the order by series, and of its copy in a [`Piece`].
const ROW_BYTES: usize = size_of::<Row>() + 4 + 17;

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
    described: Vec<Described>,
    by_cells: HashMap<Box<[u8]>, u32>,
    series: Vec<Entry>,
    by_key: HashMap<SeriesKey, Vec<u32>>,
    /// Full blocks but for the last.
    blocks: Vec<Vec<Row>>,
}

impl Gather {
    /// The slot of these raw descriptive cells, if they were met before. The slot made after the
    /// `current` one is tried first: in a file sorted by period the series keep their order.
    pub(super) fn find(&self, cells: &[u8], current: Option<u32>) -> Option<u32> {
        let next = current.map_or(0, |slot| slot as usize + 1);
        let next = if next < self.slots.len() { next } else { 0 };
        match self.slots.get(next) {
            Some(slot) if *slot.cells == *cells => Some(index(next)),
            _ => self.by_cells.get(cells).copied(),
        }
    }

    pub(super) fn add(&mut self, cells: &[u8], described: Described) -> u32 {
        let slot = index(self.slots.len());
        self.slots.push(Slot {
            cells: cells.into(),
            series: [NONE; 6],
            terms: Terms {
                frequency: described.frequency,
                multiplier: described.multiplier,
                bound: described.bound,
            },
        });
        self.described.push(described);
        self.by_cells.insert(cells.into(), slot);
        slot
    }

    pub(super) fn slots(&self) -> usize {
        self.slots.len()
    }

    pub(super) fn terms(&self, slot: u32) -> Terms {
        self.slots[slot as usize].terms
    }

    /// Adds a row to the series that its slot and its period's frequency name.
    pub(super) fn push(&mut self, slot: u32, row: Observation) -> Result<(), Box<Finding>> {
        let frequency = row.period.frequency() as usize;
        let series = match self.slots[slot as usize].series[frequency] {
            NONE => self.open(slot, row.period)?,
            series => series,
        };
        if self.blocks.last().is_none_or(|block| block.len() == BLOCK) {
            self.blocks.push(Vec::with_capacity(BLOCK));
        }
        if let Some(block) = self.blocks.last_mut() {
            block.push(Row {
                value: row.value,
                series,
                period: row.period.ordinal(),
                line: row.line,
                status: row.status,
            });
        }
        Ok(())
    }

    /// The series of a slot at a frequency: two slots may differ in their cells and mean one.
    fn open(&mut self, slot: u32, period: Period) -> Result<u32, Box<Finding>> {
        let described = &self.described[slot as usize];
        let places = described.places.each_ref().map(String::as_str);
        let key = SeriesKey::new(period.frequency(), places).map_err(|e| {
            let finding = Finding::error("not_a_key", e.to_string());
            Box::new(finding.remedy("shorten or correct the codes of the row"))
        })?;
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
                });
                i
            }
        };
        self.slots[slot as usize].series[period.frequency() as usize] = found;
        Ok(found)
    }

    /// Memory that the rows held need until they are given away, [`Self::take`] included.
    pub(super) fn pending_bytes(&self) -> usize {
        self.blocks.len() * BLOCK * ROW_BYTES
    }

    /// Gives away the rows held so far, each series in the order of the file.
    pub(super) fn take(&mut self) -> Vec<Piece> {
        let blocks = std::mem::take(&mut self.blocks);
        let rows = || blocks.iter().flatten();
        // Counting sort by series: ends[s] counts, then points at, the places of series s.
        let mut ends = vec![0_usize; self.series.len()];
        for row in rows() {
            ends[row.series as usize] += 1;
        }
        let counts = ends.clone();
        let mut total = 0;
        for end in &mut ends {
            total += std::mem::replace(end, total);
        }
        let mut order = vec![0_u32; total];
        for (i, row) in rows().enumerate() {
            let place = &mut ends[row.series as usize];
            order[*place] = index(i);
            *place += 1;
        }
        let row = |i: &u32| blocks[*i as usize / BLOCK][*i as usize % BLOCK];
        let mut pieces = Vec::new();
        for (entry, (count, end)) in self.series.iter().zip(counts.into_iter().zip(ends)) {
            if count == 0 {
                continue;
            }
            let mut piece = Piece {
                key: entry.key.clone(),
                unit: entry.unit.clone(),
                periods: Vec::with_capacity(count),
                values: Vec::with_capacity(count),
                status: Vec::with_capacity(count),
                lines: Vec::with_capacity(count),
            };
            for row in order[end - count..end].iter().map(row) {
                piece.periods.push(row.period);
                piece.values.push(row.value);
                piece.status.push(row.status);
                piece.lines.push(row.line);
            }
            pieces.push(piece);
        }
        pieces
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
    u32::try_from(n).expect("lines are limited to 2^32, and a series or row takes one")
}
