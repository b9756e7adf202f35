//! The algebra of series: functions from series to series that check units and never guess.
//!
//! * Every operation checks frequency and units; a clash is an [`AlgebraError`] naming both sides.
//! * A value is missing where one of its parts is missing. Where a result is undefined (logarithm of
//!   a number that is not positive, division by zero) it is missing with [`Status::CannotExist`].
//! * The status of a value made from several is [`Status::combine`] over them; scaling one series
//!   (rebase, negate, link) keeps its statuses. References and link factors are averages of values
//!   that are no forecasts; their statuses do not travel.
//! * Deflating and converting keep the periods of the amount; operations between equals keep the
//!   periods that all sides reach.

mod aggregate;
mod arithmetic;
mod effective;
mod error;
mod growth;
mod index;
mod money;
mod span;

#[cfg(test)]
mod examples;
#[cfg(test)]
mod properties;
#[cfg(test)]
mod reference;
#[cfg(test)]
mod refusals;
#[cfg(test)]
pub(crate) mod samples;

pub use aggregate::{Aggregated, Ends, Incomplete, Method, aggregate};
pub use arithmetic::{add, divide, geometric_mean, multiply, negate, subtract};
pub use effective::{
    Coverage, Effective, Partner, Reference, TradePartner, WeightYears, foreign_income,
    real_effective_exchange_rate, real_exchange_rate,
};
pub use error::AlgebraError;
pub use growth::{Over, growth};
pub use index::{Linked, link, rebase};
pub use money::{convert, deflate};
pub use span::{Span, SpanError};

use super::{Series, Status, Unit};
use crate::time::Period;

/// Value and status of a series at the period `n` after `start`; absent outside the series.
fn observation(series: &Series, start: Period, n: usize) -> (f64, Status) {
    i32::try_from(n)
        .ok()
        .and_then(|n| start.plus(n))
        .and_then(|period| series.position(period))
        .map_or((f64::NAN, Status::Absent), |i| {
            (series.values[i], series.status[i])
        })
}

/// Value at a period that is no forecast.
fn observed(series: &Series, period: Period) -> Option<f64> {
    let i = series.position(period)?;
    (series.status[i] != Status::Forecast).then(|| series.at(period))?
}

/// `f` over the values of all `sides` at `len` periods from `start`. All frequencies are equal.
fn map_together(
    unit: Unit,
    (start, len): (Period, usize),
    sides: &[&Series],
    f: impl Fn(&[f64]) -> f64,
) -> Series {
    let mut row = vec![0.0; sides.len()];
    let (values, status) = (0..len)
        .map(|n| {
            let mut status = Status::Normal;
            for (slot, side) in row.iter_mut().zip(sides) {
                let (value, own) = observation(side, start, n);
                *slot = value;
                status = status.combine(own);
            }
            defined(f(&row), status)
        })
        .unzip();
    Series::with_status(unit, start, values, status)
}

/// The status of a calculated value: undefined results cannot exist.
fn defined(value: f64, status: Status) -> (f64, Status) {
    if !status.is_missing() && !value.is_finite() {
        (f64::NAN, Status::CannotExist)
    } else {
        (value, status)
    }
}

/// One frequency on all sides.
fn same_frequency(
    operation: &'static str,
    left: &Series,
    right: &Series,
) -> Result<(), AlgebraError> {
    if left.frequency() == right.frequency() {
        Ok(())
    } else {
        Err(AlgebraError::Frequencies {
            operation,
            left: left.frequency(),
            right: right.frequency(),
        })
    }
}

/// First period and number of periods that all sides, of one frequency, reach.
fn overlap(operation: &'static str, sides: &[&Series]) -> Result<(Period, usize), AlgebraError> {
    let mut common: Option<(Period, Period)> = None;
    for side in sides {
        let narrowed = side.end().map(|end| match common {
            None => (side.start, end),
            Some((first, last)) => (first.max(side.start), last.min(end)),
        });
        common = narrowed.filter(|(first, last)| first <= last);
        if common.is_none() {
            return Err(AlgebraError::NoOverlap {
                operation,
                left: extent(sides[0]),
                right: extent(side),
            });
        }
    }
    let n = common.and_then(|(a, b)| usize::try_from(b.ordinal() - a.ordinal()).ok());
    common
        .zip(n)
        .map(|((first, _), n)| (first, n + 1))
        .ok_or_else(|| AlgebraError::Argument {
            name: "series",
            found: "none".to_owned(),
            expected: "at least one".to_owned(),
        })
}

/// First and last period for messages.
fn extent(series: &Series) -> String {
    series.end().map_or_else(
        || "no period".to_owned(),
        |end| format!("{} to {end}", series.start),
    )
}

/// All present values above zero.
fn all_positive(operation: &'static str, what: &str, series: &Series) -> Result<(), AlgebraError> {
    match series.values.iter().position(|v| *v <= 0.0) {
        None => Ok(()),
        Some(i) => Err(AlgebraError::NotPositive {
            operation,
            what: what.to_owned(),
            place: series.period(i).map_or_else(String::new, |p| p.to_string()),
            value: series.values[i],
        }),
    }
}

/// The same series in other numbers: every value times `factor`, statuses kept.
fn scaled(series: &Series, factor: f64, unit: Unit) -> Series {
    let values = series.values.iter().map(|v| v * factor).collect();
    Series::with_status(unit, series.start, values, series.status.clone())
}
