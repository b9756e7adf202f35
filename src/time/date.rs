//! Calendar dates, the only place of the pure rooms that knows the calendar library.

use std::fmt;
use std::str::FromStr;

use chrono::{Datelike, NaiveDate};

use super::serde_as_text;

/// A calendar date of the proleptic Gregorian calendar, printed as ISO 8601 `YYYY-MM-DD`.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord, Hash)]
pub struct Date(i32);

/// A text that is not an ISO 8601 calendar date, or a date outside the years 1 to 9999.
#[derive(Clone, Debug, PartialEq, Eq, thiserror::Error)]
#[error("'{found}' is not a date; expected YYYY-MM-DD, for example 2024-06-30")]
pub struct DateError {
    /// The text or the numbers as they came.
    pub found: String,
}

impl Date {
    /// The last day of the year 9999.
    pub const LAST: Self = Self(3_652_059);

    /// The date of a year, month (1 to 12) and day (1 to 31).
    ///
    /// # Errors
    /// [`DateError`] where the calendar has no such day or the year is not between 1 and 9999.
    pub fn new(year: i32, month: u32, day: u32) -> Result<Self, DateError> {
        let error = || DateError {
            found: format!("{year}-{month}-{day}"),
        };
        if !(1..=9999).contains(&year) {
            return Err(error());
        }
        NaiveDate::from_ymd_opt(year, month, day)
            .map(|date| Self(date.num_days_from_ce()))
            .ok_or_else(error)
    }

    /// The date that lies `days` after 0000-12-31 (day 1 is 0001-01-01).
    #[must_use]
    pub fn from_days(days: i32) -> Option<Self> {
        let date = NaiveDate::from_num_days_from_ce_opt(days)?;
        (1..=9999).contains(&date.year()).then_some(Self(days))
    }

    /// Days since 0000-12-31.
    #[must_use]
    pub fn days(self) -> i32 {
        self.0
    }

    /// Year, month (1 to 12) and day (1 to 31).
    #[must_use]
    pub fn year_month_day(self) -> (i32, u32, u32) {
        let date = self.calendar();
        (date.year(), date.month(), date.day())
    }

    /// ISO 8601 week-numbering year and week (1 to 53); week 1 holds the year's first Thursday.
    #[must_use]
    pub fn iso_week(self) -> (i32, u32) {
        let week = self.calendar().iso_week();
        (week.year(), week.week())
    }

    fn calendar(self) -> NaiveDate {
        NaiveDate::from_num_days_from_ce_opt(self.0).unwrap_or(NaiveDate::MIN)
    }
}

impl fmt::Display for Date {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        let (year, month, day) = self.year_month_day();
        write!(f, "{year:04}-{month:02}-{day:02}")
    }
}

impl FromStr for Date {
    type Err = DateError;

    fn from_str(text: &str) -> Result<Self, Self::Err> {
        let error = || DateError {
            found: text.to_owned(),
        };
        let bytes = text.as_bytes();
        if bytes.len() != 10 || bytes[4] != b'-' || bytes[7] != b'-' {
            return Err(error());
        }
        let number = |range: std::ops::Range<usize>| {
            let part = &bytes[range];
            part.iter()
                .all(u8::is_ascii_digit)
                .then(|| part.iter().fold(0_u32, |n, b| n * 10 + u32::from(b - b'0')))
        };
        let (Some(year), Some(month), Some(day)) = (number(0..4), number(5..7), number(8..10))
        else {
            return Err(error());
        };
        i32::try_from(year)
            .ok()
            .and_then(|year| Self::new(year, month, day).ok())
            .ok_or_else(error)
    }
}

serde_as_text!(Date);

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn prints_what_it_parses_and_refuses_days_that_do_not_exist() {
        for text in ["0001-01-01", "2024-02-29", "9999-12-31"] {
            assert_eq!(text.parse::<Date>().unwrap().to_string(), text);
        }
        assert_eq!("9999-12-31".parse(), Ok(Date::LAST));
        for text in [
            "2023-02-29",
            "2024-13-01",
            "2024-1-01",
            "24-01-01",
            "",
            "2024/01/01",
        ] {
            assert!(text.parse::<Date>().is_err(), "{text}");
        }
    }

    /// ISO 8601-1:2019: 2015, 2020 and 2026 have 53 weeks (from memory).
    #[test]
    fn iso_weeks_follow_the_first_thursday() {
        assert_eq!("2021-01-03".parse::<Date>().unwrap().iso_week(), (2020, 53));
        assert_eq!("2018-12-31".parse::<Date>().unwrap().iso_week(), (2019, 1));
    }
}
