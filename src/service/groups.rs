//! Rows of one upload grouped by series and unit, in memory or staged in the database.

use std::collections::{BTreeMap, HashMap};
use std::ops::Range;

use super::Fault;
use crate::finding::{Finding, counted};
use crate::series::{Piece, SeriesKey, Unit};
use crate::store::{self, Connection};
use crate::time::Period;

/// Series worked on at a time.
const BATCH: usize = 1000;

/// Periods worked on at a time, some 30 bytes each.
const BATCH_PERIODS: i64 = 2_000_000;

/// Periods from first to last, summed over the series of an upload, that are taken whatever its rows.
const FREE_PERIODS: i64 = 5_000_000;

/// Further ones for each row. A daily series of which month ends are known takes 31.
const PERIODS_PER_ROW: i64 = 100;

/// Cuts a list into consecutive batches by what each entry weighs in periods.
pub(super) fn batches(weights: impl IntoIterator<Item = i64>) -> Vec<Range<usize>> {
    let mut batches: Vec<Range<usize>> = Vec::new();
    let mut total = 0;
    for (i, weight) in weights.into_iter().enumerate() {
        total += weight;
        match batches.last_mut() {
            Some(last) if last.len() < BATCH && total <= BATCH_PERIODS => last.end = i + 1,
            _ => {
                batches.push(i..i + 1);
                total = weight;
            }
        }
    }
    batches
}

/// One series and unit of an upload.
struct Group {
    key: SeriesKey,
    unit: Unit,
    rows: usize,
    first: i32,
    last: i32,
}

impl Group {
    /// Periods from first to last.
    fn periods(&self) -> i64 {
        i64::from(self.last) - i64::from(self.first) + 1
    }
}

/// Numbers for the pairs of key and unit that occur, in the order in which they do.
#[derive(Default)]
pub(super) struct Groups {
    numbers: HashMap<SeriesKey, Vec<usize>>,
    groups: Vec<Group>,
}

impl Groups {
    /// The number of a piece's group, which now counts the piece.
    pub(super) fn add(&mut self, piece: &Piece) -> usize {
        let numbers = self.numbers.entry(piece.key.clone()).or_default();
        let known = numbers
            .iter()
            .find(|n| self.groups[**n].unit == piece.unit)
            .copied();
        let number = known.unwrap_or_else(|| {
            numbers.push(self.groups.len());
            self.groups.push(Group {
                key: piece.key.clone(),
                unit: piece.unit.clone(),
                rows: 0,
                first: i32::MAX,
                last: i32::MIN,
            });
            self.groups.len() - 1
        });
        let group = &mut self.groups[number];
        group.rows += piece.periods.len();
        for period in &piece.periods {
            group.first = group.first.min(*period);
            group.last = group.last.max(*period);
        }
        number
    }
}

/// Where the grouped rows of an upload are.
pub(super) struct Source {
    groups: Vec<Group>,
    /// By group; `None` where they are staged.
    memory: Option<Vec<Vec<Piece>>>,
}

impl Source {
    /// Groups pieces in memory.
    pub(super) fn in_memory(pieces: Vec<Piece>) -> Self {
        let mut groups = Groups::default();
        let mut grouped: Vec<Vec<Piece>> = Vec::new();
        for piece in pieces {
            let number = groups.add(&piece);
            if number == grouped.len() {
                grouped.push(Vec::new());
            }
            grouped[number].push(piece);
        }
        Self {
            groups: groups.groups,
            memory: Some(grouped),
        }
    }

    /// Makes all that was staged under the numbers of these groups ready to be fetched.
    pub(super) async fn staged(connection: &mut Connection, groups: Groups) -> Result<Self, Fault> {
        store::staging::index(connection).await?;
        Ok(Self {
            groups: groups.groups,
            memory: None,
        })
    }

    /// Refuses an upload that names few of the periods that it spans: what a handful of rows would take in
    /// the store is out of proportion, and a wrong date the likely reason.
    pub(super) fn check(&self) -> Result<(), Fault> {
        let rows: usize = self.groups.iter().map(|g| g.rows).sum();
        let periods: i64 = self.groups.iter().map(Group::periods).sum();
        let rows = i64::try_from(rows).unwrap_or(i64::MAX);
        if periods <= FREE_PERIODS.saturating_add(PERIODS_PER_ROW.saturating_mul(rows)) {
            return Ok(());
        }
        let longest = self.groups.iter().max_by_key(|g| g.periods());
        let findings = longest.map(|g| {
            let shown = |ordinal| {
                Period::from_ordinal(g.key.frequency(), ordinal)
                    .map_or_else(String::new, |p| p.to_string())
            };
            Finding::error(
                "too_sparse",
                "the file names too few of the periods that its series span",
            )
            .at_series(&g.key)
            .found(format!(
                "{} from {} to {}",
                counted(g.rows, "row"),
                shown(g.first),
                shown(g.last)
            ))
            .expected(format!(
                "at least one row for every {PERIODS_PER_ROW} periods"
            ))
            .remedy("look for a wrong date; give annual data as years and monthly data as months")
        });
        Err(Fault::invalid(
            "unreadable_file",
            findings.into_iter().collect(),
        ))
    }

    /// The series of each group.
    pub(super) fn keys(&self) -> Vec<&SeriesKey> {
        self.groups.iter().map(|g| &g.key).collect()
    }

    /// Groups to work on at a time.
    pub(super) fn batches(&self) -> Vec<Range<usize>> {
        batches(self.groups.iter().map(Group::periods))
    }

    /// The pieces of some groups, by group.
    pub(super) async fn fetch(
        &self,
        connection: &mut Connection,
        groups: Range<usize>,
    ) -> Result<Vec<Vec<Piece>>, Fault> {
        if let Some(grouped) = &self.memory {
            return Ok(grouped[groups].to_vec());
        }
        let identity = |number: usize| {
            let group = &self.groups[number];
            Piece {
                key: group.key.clone(),
                unit: group.unit.clone(),
                periods: vec![],
                values: vec![],
                status: vec![],
                lines: vec![],
            }
        };
        let rows = store::staging::fetch(connection, groups, identity).await?;
        let mut grouped: BTreeMap<usize, Vec<Piece>> = BTreeMap::new();
        for (number, piece) in rows {
            grouped.entry(number).or_default().push(piece);
        }
        Ok(grouped.into_values().collect())
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn batches_are_bounded_in_entries_and_in_weight() {
        assert!(batches([]).is_empty());
        assert_eq!(batches([1; 2500]), [0..1000, 1000..2000, 2000..2500]);
        let heavy = BATCH_PERIODS / 2;
        assert_eq!(batches([heavy; 5]), [0..2, 2..4, 4..5]);
        // What is too heavy alone goes alone.
        assert_eq!(batches([1, 5 * heavy, 1, 1]), [0..1, 1..2, 2..4]);
    }
}
