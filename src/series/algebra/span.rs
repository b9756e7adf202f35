//! Reference periods and spans.

use std::fmt;
use std::str::FromStr;

use super::{AlgebraError, observed};
use crate::series::Series;
use crate::time::{Frequency, Period, serde_as_text};

/// One period or a run of periods that a level refers to: `2015`, `2015-Q1`, or `2010/2012` (first
/// and last, as an ISO 8601 interval).
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash)]
pub struct Span {
    first: Period,
    last: Period,
}

/// A text that is no reference period.
#[derive(Clone, Debug, PartialEq, Eq, thiserror::Error)]
#[error("'{found}' is not a reference period; expected one such as 2015, 2015-Q1 or 2010/2012")]
pub struct SpanError {
    /// The text as it came.
    pub found: String,
}

impl Span {
    /// From `first` to `last`; `None` where they differ in frequency or stand in wrong order.
    #[must_use]
    pub fn new(first: Period, last: Period) -> Option<Self> {
        (first.frequency() == last.frequency() && first <= last).then_some(Self { first, last })
    }

    /// The first period.
    #[must_use]
    pub fn first(self) -> Period {
        self.first
    }

    /// The last period.
    #[must_use]
    pub fn last(self) -> Period {
        self.last
    }

    /// First and last period of a frequency that begin inside the span; `None` where the frequency
    /// is lower than the span's own (a year is not inside a quarter).
    #[must_use]
    pub fn at(self, frequency: Frequency) -> Option<(Period, Period)> {
        if frequency < self.first.frequency() {
            return None;
        }
        let day = self.first.first_day();
        let mut first = Period::containing(frequency, day);
        if first.first_day() < day {
            first = first.plus(1)?;
        }
        Some((first, Period::containing(frequency, self.last.last_day())))
    }

    /// Ordinals of the periods of `series` that lie in the span, each with a value that is no
    /// forecast (forecasts stay out of averages and links).
    ///
    /// # Errors
    /// [`AlgebraError::NotCovered`] naming the first period that has no such value.
    pub(super) fn values_of(self, series: &Series) -> Result<Vec<f64>, AlgebraError> {
        let not_covered = |missing: Option<Period>| AlgebraError::NotCovered {
            reference: self,
            frequency: series.frequency(),
            missing,
        };
        let (first, last) = self
            .at(series.frequency())
            .ok_or_else(|| not_covered(None))?;
        (0..=last.ordinal() - first.ordinal())
            .map(|n| {
                let period = first.plus(n);
                period
                    .and_then(|p| observed(series, p))
                    .ok_or_else(|| not_covered(period))
            })
            .collect()
    }

    /// Mean of `series` over the span.
    ///
    /// # Errors
    /// [`AlgebraError::NotCovered`] where a value is missing, [`AlgebraError::NotPositive`] where
    /// the mean cannot serve as a divisor of prices.
    pub(super) fn average_of(
        self,
        operation: &'static str,
        series: &Series,
    ) -> Result<f64, AlgebraError> {
        let values = self.values_of(series)?;
        let mean = values.iter().sum::<f64>() / values.len() as f64;
        if mean > 0.0 {
            Ok(mean)
        } else {
            Err(AlgebraError::NotPositive {
                operation,
                what: series.unit.to_string(),
                place: format!("the average over {self}"),
                value: mean,
            })
        }
    }
}

/// Whether two stated references name the same span.
pub(super) fn same_reference(a: &str, b: &str) -> bool {
    match (a.parse::<Span>(), b.parse::<Span>()) {
        (Ok(a), Ok(b)) => a == b,
        _ => a == b,
    }
}

impl fmt::Display for Span {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        if self.first == self.last {
            write!(f, "{}", self.first)
        } else {
            write!(f, "{}/{}", self.first, self.last)
        }
    }
}

impl FromStr for Span {
    type Err = SpanError;

    fn from_str(text: &str) -> Result<Self, Self::Err> {
        let (first, last) = text.split_once('/').unwrap_or((text, text));
        first
            .parse()
            .ok()
            .zip(last.parse().ok())
            .and_then(|(first, last)| Self::new(first, last))
            .ok_or_else(|| SpanError {
                found: text.to_owned(),
            })
    }
}

serde_as_text!(Span);

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn reads_periods_and_runs_and_finds_what_begins_inside() {
        for text in ["2015", "2015-Q1", "2010/2012", "2015-01/2015-03"] {
            assert_eq!(text.parse::<Span>().unwrap().to_string(), text);
        }
        for text in ["", "15", "2012/2010", "2010/2012-Q1", "2010/"] {
            assert!(text.parse::<Span>().is_err(), "{text}");
        }
        let at = |text: &str, frequency| {
            let (first, last) = text.parse::<Span>().unwrap().at(frequency)?;
            Some(format!("{first} {last}"))
        };
        assert_eq!(at("2015", Frequency::Annual).unwrap(), "2015 2015");
        assert_eq!(
            at("2010/2011", Frequency::Monthly).unwrap(),
            "2010-01 2011-12"
        );
        // 2021 begins on a Friday: its first week that begins inside starts on 4 January.
        assert_eq!(at("2021", Frequency::Weekly).unwrap(), "2021-W01 2021-W52");
        assert_eq!(at("2015-Q1", Frequency::Annual), None);
    }
}
