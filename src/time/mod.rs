//! Frequencies, periods and dates.
//!
//! A [`Period`] is an ordinal at a [`Frequency`], so that arithmetic is integer arithmetic and two
//! periods of one frequency compare as numbers. Notations in and out are ISO 8601 and the SDMX
//! `TIME_PERIOD` forms. This room knows no clock: today is a [`Date`] that a caller passes in.

mod as_text;
mod date;
mod period;

pub(crate) use as_text::serde_as_text;
pub use date::{Date, DateError};
pub use period::{Frequency, Period, PeriodError};
