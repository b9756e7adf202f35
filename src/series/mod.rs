//! Series, their identity and units, and the algebra that prepares them.
//!
//! Start reading at [`SeriesKey`] (which series), [`Unit`] (what its numbers are) and [`Series`] (the
//! numbers). The algebra checks units on every operation: a clash is an error that names both
//! sides, never a number.

pub mod algebra;
mod currency;
mod fragment;
mod key;
pub mod provenance;
pub mod screening;
mod status;
mod unit;
pub mod vintage;

pub use currency::{CurrencyCode, CurrencyError, is_iso_4217, iso_4217};
pub use fragment::{Duplicate, Fragment, Piece, same};
pub use key::{KeyError, SeriesKey};
pub use status::Status;
pub use unit::{
    Adjustment, GrowthKind, IndexKind, Prices, Quantity, RateTiming, RateType, Timing, Unit,
};

use crate::time::{Frequency, Period};

/// A run of observations at consecutive periods, with their unit.
///
/// Invariants: `values.len() == status.len()`; a value is NaN exactly where its status
/// [`Status::is_missing`]; −0 is stored as 0; no infinities.
#[derive(Clone, Debug, PartialEq)]
pub struct Series {
    /// What the numbers are.
    pub unit: Unit,
    /// Period of the first value.
    pub start: Period,
    /// Values in base units (1 dollar, not a million).
    pub values: Vec<f64>,
    /// One status a value.
    pub status: Vec<Status>,
}

impl Series {
    /// A series of normal observations; NaN becomes [`Status::Missing`], −0 becomes 0.
    #[must_use]
    pub fn new(unit: Unit, start: Period, values: Vec<f64>) -> Self {
        let status = vec![Status::Normal; values.len()];
        Self::with_status(unit, start, values, status)
    }

    /// A series with given statuses. A value of missing status becomes NaN, a value that is not
    /// finite under a present status becomes [`Status::Missing`], −0 becomes 0.
    #[must_use]
    pub fn with_status(
        unit: Unit,
        start: Period,
        mut values: Vec<f64>,
        mut status: Vec<Status>,
    ) -> Self {
        status.resize(values.len(), Status::Missing);
        for (value, status) in values.iter_mut().zip(&mut status) {
            if status.is_missing() {
                *value = f64::NAN;
            } else if value.is_finite() {
                *value += 0.0;
            } else {
                *value = f64::NAN;
                *status = Status::Missing;
            }
        }
        Self {
            unit,
            start,
            values,
            status,
        }
    }

    /// The last period; `None` where the series is empty.
    #[must_use]
    pub fn end(&self) -> Option<Period> {
        self.period(self.len().checked_sub(1)?)
    }

    /// The frequency.
    #[must_use]
    pub fn frequency(&self) -> Frequency {
        self.start.frequency()
    }

    /// Number of periods from first to last, missing ones included.
    #[must_use]
    pub fn len(&self) -> usize {
        self.values.len()
    }

    /// Whether it has no period at all.
    #[must_use]
    pub fn is_empty(&self) -> bool {
        self.values.is_empty()
    }

    /// Period of the `i`-th value.
    #[must_use]
    pub fn period(&self, i: usize) -> Option<Period> {
        (i < self.len())
            .then(|| i32::try_from(i).ok().and_then(|i| self.start.plus(i)))
            .flatten()
    }

    /// Position of a period, if the series reaches it.
    #[must_use]
    pub fn position(&self, period: Period) -> Option<usize> {
        if period.frequency() != self.frequency() {
            return None;
        }
        usize::try_from(period.ordinal() - self.start.ordinal())
            .ok()
            .filter(|i| *i < self.len())
    }

    /// Value at a period; `None` outside the series and where it is missing.
    #[must_use]
    pub fn at(&self, period: Period) -> Option<f64> {
        self.position(period)
            .map(|i| self.values[i])
            .filter(|v| v.is_finite())
    }
}
