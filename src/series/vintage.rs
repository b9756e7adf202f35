//! Vintages: the state of a segment, and how an upload changes it.
//!
//! The state that a reader sees as of a release date is the merge of all uploads released until
//! then, in the order of release (of landing among equals). Landing and withdrawing both follow
//! from that one rule, so any order of uploads and withdrawals gives what replay gives.

use super::provenance::Origin;
use super::{Status, fragment::same};
use crate::time::Period;

/// Observations of a segment at one moment of its history.
///
/// Invariants: the three lists have one length; first and last are not [`Status::Absent`]; an empty
/// state has no period.
#[derive(Clone, Debug, PartialEq)]
pub struct State {
    /// Period of the first observation.
    pub start: Period,
    /// Values in base units, NaN where missing or absent.
    pub values: Vec<f64>,
    /// One status each.
    pub status: Vec<Status>,
    /// Who set each.
    pub origins: Vec<Origin>,
}

/// What an upload says about a segment, as merging needs it.
#[derive(Clone, Debug, PartialEq)]
pub struct Statement {
    /// First period.
    pub start: Period,
    /// Values in base units.
    pub values: Vec<f64>,
    /// One status each; [`Status::Absent`]: not named.
    pub status: Vec<Status>,
    /// Who says so, per observation.
    pub origins: Vec<Origin>,
    /// What becomes of periods that are not named.
    pub scope: Scope,
}

/// What becomes of stored periods that an upload does not name.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq)]
pub enum Scope {
    /// They stay.
    #[default]
    Merge,
    /// They end: the upload is the whole series.
    Replace,
}

/// How many observations a merge changed, and how.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq)]
pub struct Changes {
    /// Periods named for the first time.
    pub new: u32,
    /// Other value or status than before.
    pub revised: u32,
    /// Named with what was there already.
    pub unchanged: u32,
    /// Had a value and has none now.
    pub emptied: u32,
}

impl Changes {
    /// Whether anything differs from before.
    #[must_use]
    pub fn any(self) -> bool {
        self.new + self.revised + self.emptied > 0
    }

    /// Counts what became of one observation; whether it changed. What is absent before and after does
    /// not count.
    fn count(&mut self, before: (f64, Status), after: (f64, Status)) -> bool {
        let unchanged = same(before.0, after.0) && before.1 == after.1;
        let counter = if before.1 == Status::Absent {
            if after.1 == Status::Absent {
                return false;
            }
            &mut self.new
        } else if unchanged {
            &mut self.unchanged
        } else if after.0.is_nan() && !before.0.is_nan() {
            &mut self.emptied
        } else {
            &mut self.revised
        };
        *counter += 1;
        !unchanged
    }
}

/// Merges a statement into a state. A named period takes the new value and status, a missing mark
/// included; an observation that is restated unchanged keeps its origin.
#[must_use]
pub fn merge(base: Option<&State>, statement: &Statement) -> (State, Changes) {
    let base = base.filter(|b| !b.values.is_empty());
    let frequency = statement.start.frequency();
    let ordinal_after = |start: Period, n: usize| start.ordinal() + i32::try_from(n).unwrap_or(0);
    let mut low = statement.start.ordinal();
    let mut high = ordinal_after(statement.start, statement.values.len());
    if let Some(base) = base {
        low = low.min(base.start.ordinal());
        high = high.max(ordinal_after(base.start, base.values.len()));
    }
    let n = usize::try_from(high - low).unwrap_or(0);
    let offset = |start: Period| usize::try_from(start.ordinal() - low).unwrap_or(0);
    let mut state = State {
        start: Period::from_ordinal(frequency, low).unwrap_or(statement.start),
        values: vec![f64::NAN; n],
        status: vec![Status::Absent; n],
        origins: vec![Origin::Absent; n],
    };
    if let Some(base) = base {
        let at = offset(base.start);
        let range = at..at + base.values.len();
        state.values[range.clone()].copy_from_slice(&base.values);
        state.status[range.clone()].copy_from_slice(&base.status);
        state.origins[range].copy_from_slice(&base.origins);
    }
    let mut changes = Changes::default();
    let at = offset(statement.start);
    for i in 0..n {
        let named = i.checked_sub(at).filter(|j| {
            statement
                .status
                .get(*j)
                .is_some_and(|s| *s != Status::Absent)
        });
        let Some(j) = named else {
            if statement.scope == Scope::Replace && state.status[i] != Status::Absent {
                changes.count(
                    (state.values[i], state.status[i]),
                    (f64::NAN, Status::Absent),
                );
                state.values[i] = f64::NAN;
                state.status[i] = Status::Absent;
                state.origins[i] = Origin::Absent;
            }
            continue;
        };
        let (value, status) = (statement.values[j], statement.status[j]);
        if !changes.count((state.values[i], state.status[i]), (value, status)) {
            continue;
        }
        state.values[i] = value;
        state.status[i] = status;
        state.origins[i] = statement.origins[j];
    }
    state.trim();
    (state, changes)
}

/// How a state differs from the one that it replaces.
#[must_use]
pub fn difference(old: &State, new: &State) -> Changes {
    let at = |state: &State, ordinal: i32| {
        usize::try_from(ordinal - state.start.ordinal())
            .ok()
            .filter(|i| *i < state.values.len())
            .map_or((f64::NAN, Status::Absent), |i| {
                (state.values[i], state.status[i])
            })
    };
    let end =
        |state: &State| state.start.ordinal() + i32::try_from(state.values.len()).unwrap_or(0);
    let low = old.start.ordinal().min(new.start.ordinal());
    let high = end(old).max(end(new));
    let mut changes = Changes::default();
    for ordinal in low..high {
        changes.count(at(old, ordinal), at(new, ordinal));
    }
    changes
}

/// Merges statements in their order, from nothing.
#[must_use]
pub fn replay<'a>(statements: impl IntoIterator<Item = &'a Statement>) -> Option<State> {
    statements
        .into_iter()
        .fold(None, |state, s| Some(merge(state.as_ref(), s).0))
}

impl State {
    /// No observations.
    #[must_use]
    pub fn empty(start: Period) -> Self {
        Self {
            start,
            values: Vec::new(),
            status: Vec::new(),
            origins: Vec::new(),
        }
    }

    /// Whether values, status and origins are the same (NaN equals NaN).
    #[must_use]
    pub fn agrees_with(&self, other: &Self) -> bool {
        self.values.len() == other.values.len()
            && (self.values.is_empty() || self.start == other.start)
            && self.status == other.status
            && self.origins == other.origins
            && self
                .values
                .iter()
                .zip(&other.values)
                .all(|(a, b)| same(*a, *b))
    }

    fn trim(&mut self) {
        let named = |s: &Status| *s != Status::Absent;
        let end = self.status.iter().rposition(named).map_or(0, |i| i + 1);
        self.values.truncate(end);
        self.status.truncate(end);
        self.origins.truncate(end);
        let lead = self.status.iter().position(named).unwrap_or(0);
        if lead > 0 {
            self.values.drain(..lead);
            self.status.drain(..lead);
            self.origins.drain(..lead);
            if let Some(start) = i32::try_from(lead).ok().and_then(|n| self.start.plus(n)) {
                self.start = start;
            }
        }
    }
}

#[cfg(test)]
mod tests {
    use proptest::prelude::*;

    use super::*;
    use crate::time::Frequency;

    fn period(year: i32) -> Period {
        Period::in_year(Frequency::Annual, year, 1).unwrap()
    }

    /// A statement from (value or missing mark) per year; `None` is not named.
    fn statement(id: i64, first: i32, cells: &[Option<Option<i8>>], scope: Scope) -> Statement {
        let cell = |c: &Option<Option<i8>>| match c {
            None => (f64::NAN, Status::Absent, Origin::Absent),
            Some(None) => (f64::NAN, Status::Missing, Origin::Upload { id, line: 2 }),
            Some(Some(v)) => (
                f64::from(*v),
                Status::Normal,
                Origin::Upload { id, line: 2 },
            ),
        };
        Statement {
            start: period(first),
            values: cells.iter().map(|c| cell(c).0).collect(),
            status: cells.iter().map(|c| cell(c).1).collect(),
            origins: cells.iter().map(|c| cell(c).2).collect(),
            scope,
        }
    }

    fn any_statement(id: i64) -> impl Strategy<Value = Statement> {
        let cell = prop::option::weighted(0.7, prop::option::weighted(0.8, -3..3_i8));
        (
            1990..2000,
            prop::collection::vec(cell, 1..8),
            prop::bool::weighted(0.2),
        )
            .prop_filter_map("names something", move |(first, cells, replace)| {
                let scope = if replace {
                    Scope::Replace
                } else {
                    Scope::Merge
                };
                cells
                    .iter()
                    .any(Option::is_some)
                    .then(|| statement(id, first, &cells, scope))
            })
    }

    /// The slow, obvious way: one map from year to the last word on it.
    fn oracle(statements: &[Statement]) -> Vec<(i32, u64, Status)> {
        let mut map = std::collections::BTreeMap::new();
        for s in statements {
            if s.scope == Scope::Replace {
                map.clear();
            }
            for (i, status) in s.status.iter().enumerate() {
                if *status != Status::Absent {
                    let year = s.start.ordinal() + i32::try_from(i).unwrap();
                    map.insert(year, (s.values[i].to_bits(), *status));
                }
            }
        }
        map.into_iter().map(|(y, (v, s))| (y, v, s)).collect()
    }

    fn rows(state: Option<&State>) -> Vec<(i32, u64, Status)> {
        state.map_or_else(Vec::new, |s| {
            (0..s.values.len())
                .filter(|i| s.status[*i] != Status::Absent)
                .map(|i| {
                    let year = s.start.ordinal() + i32::try_from(i).unwrap();
                    (year, s.values[i].to_bits(), s.status[i])
                })
                .collect()
        })
    }

    proptest! {
        #[test]
        fn merging_gives_the_last_word_on_every_period(
            statements in (1..5_usize).prop_flat_map(|n| (0..n).map(|i| any_statement(i as i64 + 1)).collect::<Vec<_>>())
        ) {
            let state = replay(&statements);
            prop_assert_eq!(rows(state.as_ref()), oracle(&statements));
        }

        #[test]
        fn merging_twice_changes_nothing(a in any_statement(1), b in any_statement(2)) {
            let once = replay([&a, &b]).unwrap();
            let (twice, changes) = merge(Some(&once), &b);
            prop_assert!(twice.agrees_with(&once));
            prop_assert!(!changes.any());
        }
    }

    #[test]
    fn counts_say_what_happened() {
        let a = statement(
            1,
            2000,
            &[Some(Some(1)), Some(Some(2)), Some(Some(3))],
            Scope::Merge,
        );
        let b = statement(
            2,
            2001,
            &[Some(Some(2)), Some(None), Some(Some(4))],
            Scope::Merge,
        );
        let base = replay([&a]);
        let (state, changes) = merge(base.as_ref(), &b);
        assert_eq!(
            changes,
            Changes {
                new: 1,
                revised: 0,
                unchanged: 1,
                emptied: 1
            }
        );
        // The restated observation still belongs to the upload that set it first.
        assert_eq!(state.origins[1], Origin::Upload { id: 1, line: 2 });
        let c = statement(3, 2002, &[Some(Some(9))], Scope::Replace);
        let (state, changes) = merge(Some(&state), &c);
        assert_eq!(
            (state.start, state.values.as_slice()),
            (period(2002), [9.0].as_slice())
        );
        assert_eq!(
            changes,
            Changes {
                new: 0,
                revised: 1,
                unchanged: 0,
                emptied: 3
            }
        );
    }
}
