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

/// A row that names a period which another row of the same series names differently. Neither counts.
#[derive(Clone, Debug, PartialEq)]
pub struct Duplicate {
    /// The period.
    pub period: Period,
    /// Line of the row.
    pub line: u32,
    /// Its value.
    pub value: f64,
    /// First line that contradicts it.
    pub other_line: u32,
    /// Value on that line.
    pub other_value: f64,
}

/// One row of a series: ordinal of its period, line, value and status.
type Row = (i32, u32, f64, Status);

impl Fragment {
    /// Sorts rows of one series into a fragment. All pieces must share key and unit. A row that
    /// repeats an earlier one to the letter is dropped silently. Of a period whose rows contradict
    /// one another no row counts: each is returned as a [`Duplicate`], by period and line. The
    /// fragment is `None` where no row counts.
    #[must_use]
    pub fn settle(pieces: &[Piece]) -> (Option<Self>, Vec<Duplicate>) {
        let Some(first) = pieces.first() else {
            return (None, Vec::new());
        };
        let frequency: Frequency = first.key.frequency();
        let mut rows: Vec<Row> = pieces
            .iter()
            .flat_map(|p| {
                (0..p.periods.len()).map(|i| (p.periods[i], p.lines[i], p.values[i], p.status[i]))
            })
            .collect();
        if !rows.is_sorted_by_key(|r| (r.0, r.1)) {
            rows.sort_unstable_by_key(|r| (r.0, r.1));
        }
        let mut duplicates = Vec::new();
        let counting: Vec<&Row> = rows
            .chunk_by(|a, b| a.0 == b.0)
            .filter_map(|rows| {
                if rows.iter().all(|row| agree(row, &rows[0])) {
                    return Some(&rows[0]);
                }
                duplicates.extend(rows.iter().filter_map(|row| {
                    let other = rows.iter().find(|other| !agree(row, other))?;
                    Some(Duplicate {
                        period: Period::from_ordinal(frequency, row.0)?,
                        line: row.1,
                        value: row.2,
                        other_line: other.1,
                        other_value: other.2,
                    })
                }));
                None
            })
            .collect();
        (Self::of(first, &counting), duplicates)
    }

    /// The fragment of rows in ascending order of period, of the series of `piece`.
    fn of(piece: &Piece, rows: &[&Row]) -> Option<Self> {
        let (low, high) = (rows.first()?.0, rows.last()?.0);
        let n = usize::try_from(high - low).ok()? + 1;
        let mut fragment = Self {
            key: piece.key.clone(),
            unit: piece.unit.clone(),
            start: Period::from_ordinal(piece.key.frequency(), low)?,
            values: vec![f64::NAN; n],
            status: vec![Status::Absent; n],
            lines: vec![0; n],
        };
        for (ordinal, line, value, status) in rows {
            let i = usize::try_from(ordinal - low).ok()?;
            fragment.values[i] = *value;
            fragment.status[i] = *status;
            fragment.lines[i] = *line;
        }
        Some(fragment)
    }
}

/// Whether two rows say the same.
fn agree(a: &Row, b: &Row) -> bool {
    same(a.2, b.2) && a.3 == b.3
}

/// Whether two stored values are the same: equal, or both missing.
#[must_use]
pub fn same(a: f64, b: f64) -> bool {
    a.to_bits() == b.to_bits() || (a.is_nan() && b.is_nan())
}

#[cfg(test)]
mod tests {
    use proptest::prelude::*;

    use super::*;

    proptest! {
        /// Whatever the order and the cut into pieces, a period counts exactly where all its rows agree, and
        /// every row of another is told.
        #[test]
        fn what_is_given_twice_counts_only_where_it_agrees(
            rows in proptest::collection::vec((2000..2006_i32, 0..3_u8), 1..20),
            cut in 0..20_usize,
        ) {
            let piece = |from: usize, rows: &[(i32, u8)]| Piece {
                key: "A.XAA.gdp".parse().unwrap(),
                unit: Unit::ratio(),
                periods: rows.iter().map(|r| r.0).collect(),
                values: rows.iter().map(|r| if r.1 == 2 { f64::NAN } else { f64::from(r.1) }).collect(),
                status: rows.iter().map(|r| if r.1 == 2 { Status::Missing } else { Status::Normal }).collect(),
                lines: (0..rows.len()).map(|i| u32::try_from(from + i + 2).unwrap()).collect(),
            };
            let cut = cut.min(rows.len());
            let pieces = [piece(cut, &rows[cut..]), piece(0, &rows[..cut])];
            let (fragment, duplicates) = Fragment::settle(&pieces);
            let mut told: Vec<u32> = duplicates.iter().map(|d| d.line).collect();
            told.sort_unstable();
            let mut expected = Vec::new();
            let mut counting = 0;
            for year in 2000..2006 {
                let own = rows.iter().enumerate().filter(|(_, r)| r.0 == year);
                let own: Vec<(u32, u8)> = own.map(|(i, r)| (u32::try_from(i + 2).unwrap(), r.1)).collect();
                let found = fragment.as_ref().and_then(|f| {
                    let i = usize::try_from(year - f.start.ordinal()).ok()?;
                    (*f.lines.get(i)? > 0).then(|| (f.lines[i], f.values[i]))
                });
                match own.first() {
                    Some((line, value)) if own.iter().all(|r| r.1 == *value) => {
                        let (at, stored) = found.unwrap();
                        prop_assert_eq!(at, *line);
                        let value = if *value == 2 { f64::NAN } else { f64::from(*value) };
                        prop_assert!(same(stored, value));
                        counting += 1;
                    }
                    _ => {
                        prop_assert_eq!(found, None);
                        expected.extend(own.iter().map(|r| r.0));
                    }
                }
            }
            expected.sort_unstable();
            prop_assert_eq!(told, expected);
            prop_assert_eq!(fragment.is_some(), counting > 0);
            for d in duplicates {
                prop_assert!(d.line != d.other_line && !same(d.value, d.other_value));
            }
        }
    }
}
