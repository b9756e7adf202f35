//! What one upload says about one series.

use super::{SeriesKey, Status, Unit};
use crate::time::{Frequency, Period};

/// Rows of one series in the order in which a file gave them; periods may be unsorted or repeated.
#[derive(Clone, Debug, PartialEq)]
pub struct Piece {
    /// Which series.
    pub key: SeriesKey,
    /// What its numbers are.
    pub unit: Unit,
    /// Period ordinals at the key's frequency.
    pub periods: Vec<i32>,
    /// Values in base units, NaN where missing.
    pub values: Vec<f64>,
    /// One status a row.
    pub status: Vec<Status>,
    /// Physical line of each row in the file, from 1.
    pub lines: Vec<u32>,
}

/// What one upload says about one series: consecutive periods, [`Status::Absent`] where the upload
/// does not name the period (its line is 0 there). First and last period are named ones.
#[derive(Clone, Debug, PartialEq)]
pub struct Fragment {
    /// Which series.
    pub key: SeriesKey,
    /// What its numbers are.
    pub unit: Unit,
    /// First period.
    pub start: Period,
    /// Values in base units, NaN where missing or absent.
    pub values: Vec<f64>,
    /// One status a period.
    pub status: Vec<Status>,
    /// Physical line of each observation, 0 where absent.
    pub lines: Vec<u32>,
}

/// One period given twice with different content.
#[derive(Clone, Debug, PartialEq)]
pub struct Duplicate {
    /// The period.
    pub period: Period,
    /// Line that came first and is kept when duplicates are skipped.
    pub first_line: u32,
    /// Line that contradicts it.
    pub line: u32,
    /// Value on the first line.
    pub first_value: f64,
    /// Value on the contradicting line.
    pub value: f64,
}

impl Fragment {
    /// Sorts rows of one series into a fragment. All pieces must share key and unit. A row that
    /// repeats an earlier one to the letter is dropped silently; one that contradicts it is
    /// returned as a [`Duplicate`], the earlier one kept. `None` where there is no row.
    #[must_use]
    pub fn settle(pieces: Vec<Piece>) -> Option<(Self, Vec<Duplicate>)> {
        let first = pieces.first()?;
        let (key, unit) = (first.key.clone(), first.unit.clone());
        let frequency: Frequency = key.frequency();
        let mut rows: Vec<(i32, u32, f64, Status)> = pieces
            .iter()
            .flat_map(|p| {
                (0..p.periods.len()).map(|i| (p.periods[i], p.lines[i], p.values[i], p.status[i]))
            })
            .collect();
        if !rows.is_sorted_by_key(|r| (r.0, r.1)) {
            rows.sort_unstable_by_key(|r| (r.0, r.1));
        }
        let (low, high) = (rows.first()?.0, rows.last()?.0);
        let n = usize::try_from(high - low).ok()? + 1;
        let start = Period::from_ordinal(frequency, low)?;
        let mut fragment = Self {
            key,
            unit,
            start,
            values: vec![f64::NAN; n],
            status: vec![Status::Absent; n],
            lines: vec![0; n],
        };
        let mut duplicates = Vec::new();
        for (ordinal, line, value, status) in rows {
            let i = usize::try_from(ordinal - low).ok()?;
            if fragment.status[i] == Status::Absent {
                fragment.values[i] = value;
                fragment.status[i] = status;
                fragment.lines[i] = line;
            } else if !same(fragment.values[i], value) || fragment.status[i] != status {
                duplicates.push(Duplicate {
                    period: Period::from_ordinal(frequency, ordinal)?,
                    first_line: fragment.lines[i],
                    line,
                    first_value: fragment.values[i],
                    value,
                });
            }
        }
        Some((fragment, duplicates))
    }
}

/// Whether two stored values are the same: equal, or both missing.
#[must_use]
pub fn same(a: f64, b: f64) -> bool {
    a.to_bits() == b.to_bits() || (a.is_nan() && b.is_nan())
}
