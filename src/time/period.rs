//! Frequencies and periods as ordinals.

use std::fmt;
use std::str::FromStr;

use serde::{Deserialize, Deserializer, Serialize, Serializer};

use super::{Date, serde_as_text};

/// How often a series is observed; codes as in the SDMX code list `CL_FREQ`.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord, Hash)]
pub enum Frequency {
    /// `A`, a calendar year.
    Annual,
    /// `S`, a half-year.
    HalfYearly,
    /// `Q`, a calendar quarter.
    Quarterly,
    /// `M`, a calendar month.
    Monthly,
    /// `W`, an ISO 8601 week, Monday to Sunday.
    Weekly,
    /// `D`, a day.
    Daily,
}

impl Frequency {
    /// All frequencies, lowest first.
    pub const ALL: [Self; 6] = [
        Self::Annual,
        Self::HalfYearly,
        Self::Quarterly,
        Self::Monthly,
        Self::Weekly,
        Self::Daily,
    ];

    /// The SDMX code.
    #[must_use]
    pub fn code(self) -> &'static str {
        match self {
            Self::Annual => "A",
            Self::HalfYearly => "S",
            Self::Quarterly => "Q",
            Self::Monthly => "M",
            Self::Weekly => "W",
            Self::Daily => "D",
        }
    }

    /// The frequency of an SDMX code.
    #[must_use]
    pub fn from_code(code: &str) -> Option<Self> {
        Self::ALL.into_iter().find(|f| f.code() == code)
    }

    /// Periods in a calendar year, where that number is fixed: not for weeks and days.
    #[must_use]
    pub fn periods_per_year(self) -> Option<i32> {
        match self {
            Self::Annual => Some(1),
            Self::HalfYearly => Some(2),
            Self::Quarterly => Some(4),
            Self::Monthly => Some(12),
            Self::Weekly | Self::Daily => None,
        }
    }
}

impl fmt::Display for Frequency {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str(self.code())
    }
}

impl Serialize for Frequency {
    fn serialize<S: Serializer>(&self, serializer: S) -> Result<S::Ok, S::Error> {
        serializer.serialize_str(self.code())
    }
}

impl<'de> Deserialize<'de> for Frequency {
    fn deserialize<D: Deserializer<'de>>(deserializer: D) -> Result<Self, D::Error> {
        let text = String::deserialize(deserializer)?;
        Self::from_code(&text).ok_or_else(|| {
            serde::de::Error::custom(format!(
                "'{text}' is not a frequency; expected A, S, Q, M, W or D"
            ))
        })
    }
}

/// One period: an ordinal at a frequency.
///
/// Ordinals count from the start of the year 0 for A, S, Q and M (`year × periods per year +
/// position`), from the week of 0001-01-01 for W, and days since 0000-12-31 for D.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord, Hash)]
pub struct Period {
    frequency: Frequency,
    ordinal: i32,
}

/// A text that names no period, or one that names a period of another frequency than expected.
#[derive(Clone, Debug, PartialEq, Eq, thiserror::Error)]
#[error("'{found}' is not a period; expected {expected}")]
pub struct PeriodError {
    /// The text as it came.
    pub found: String,
    /// What would have been accepted, with an example.
    pub expected: &'static str,
}

const NOTATIONS: &str = "2020, 2020-S1, 2020-Q1, 2020-01, 2020-W05 or 2020-01-31";

impl Period {
    /// The period with this ordinal, if it lies in the years 1 to 9999.
    #[must_use]
    pub fn from_ordinal(frequency: Frequency, ordinal: i32) -> Option<Self> {
        let (first, last) = match frequency.periods_per_year() {
            Some(n) => (n, 9999 * n + n - 1),
            None if frequency == Frequency::Weekly => (0, 521_722),
            None => (1, 3_652_059),
        };
        (first..=last)
            .contains(&ordinal)
            .then_some(Self { frequency, ordinal })
    }

    /// The `position`-th period (from 1) of a calendar year.
    #[must_use]
    pub fn in_year(frequency: Frequency, year: i32, position: i32) -> Option<Self> {
        let n = frequency.periods_per_year()?;
        if !(1..=9999).contains(&year) || !(1..=n).contains(&position) {
            return None;
        }
        Self::from_ordinal(frequency, year * n + position - 1)
    }

    /// The period of a frequency that holds a date.
    #[must_use]
    pub fn containing(frequency: Frequency, date: Date) -> Self {
        let (year, month, _) = date.year_month_day();
        let month = i32::try_from(month).unwrap_or(1) - 1;
        let ordinal = match frequency {
            Frequency::Annual => year,
            Frequency::HalfYearly => year * 2 + month / 6,
            Frequency::Quarterly => year * 4 + month / 3,
            Frequency::Monthly => year * 12 + month,
            Frequency::Weekly => (date.days() - 1).div_euclid(7),
            Frequency::Daily => date.days(),
        };
        Self { frequency, ordinal }
    }

    /// The frequency.
    #[must_use]
    pub fn frequency(self) -> Frequency {
        self.frequency
    }

    /// The ordinal; see the type's documentation.
    #[must_use]
    pub fn ordinal(self) -> i32 {
        self.ordinal
    }

    /// The period `n` later (earlier for a negative `n`), if it lies in the years 1 to 9999.
    #[must_use]
    pub fn plus(self, n: i32) -> Option<Self> {
        Self::from_ordinal(self.frequency, self.ordinal.checked_add(n)?)
    }

    /// The first day.
    #[must_use]
    pub fn first_day(self) -> Date {
        let month_start = |months: i32| {
            let month = u32::try_from(months.rem_euclid(12) + 1).unwrap_or(1);
            Date::new(months.div_euclid(12), month, 1)
        };
        let date = match self.frequency {
            Frequency::Annual => month_start(self.ordinal * 12),
            Frequency::HalfYearly => month_start(self.ordinal * 6),
            Frequency::Quarterly => month_start(self.ordinal * 3),
            Frequency::Monthly => month_start(self.ordinal),
            Frequency::Weekly => return day(self.ordinal * 7 + 1),
            Frequency::Daily => return day(self.ordinal),
        };
        date.unwrap_or_else(|_| day(1))
    }

    /// The last day.
    #[must_use]
    pub fn last_day(self) -> Date {
        match self.frequency {
            Frequency::Daily => self.first_day(),
            Frequency::Weekly => day(self.ordinal * 7 + 7),
            Frequency::Annual
            | Frequency::HalfYearly
            | Frequency::Quarterly
            | Frequency::Monthly => match self.plus(1) {
                Some(next) => day(next.first_day().days() - 1),
                None => day(3_652_059),
            },
        }
    }

    /// The period of a lower (or the same) frequency that holds this period's first day. A week
    /// that crosses a month or a year counts where it begins.
    #[must_use]
    pub fn convert(self, to: Frequency) -> Self {
        Self::containing(to, self.first_day())
    }

    /// Number of periods of `of` that begin inside this one.
    #[must_use]
    pub fn count_of(self, of: Frequency) -> i32 {
        match (self.frequency.periods_per_year(), of.periods_per_year()) {
            (Some(own), Some(other)) if other >= own => other / own,
            _ => {
                let first = self.first_day();
                let mut start = Self::containing(of, first);
                if start.first_day() < first {
                    start.ordinal += 1;
                }
                let mut n = 0;
                while start.first_day() <= self.last_day() {
                    n += 1;
                    match start.plus(1) {
                        Some(next) => start = next,
                        None => break,
                    }
                }
                n
            }
        }
    }

    /// Reads a period and checks its frequency. A calendar date stands for the period that it
    /// begins (first day) or closes (last day), never for one that it lies inside.
    ///
    /// # Errors
    /// [`PeriodError`] where the text is no period, or one of another frequency.
    pub fn parse_as(text: &str, frequency: Frequency) -> Result<Self, PeriodError> {
        let error = |expected| PeriodError {
            found: text.to_owned(),
            expected,
        };
        let period: Self = text.parse()?;
        if period.frequency == frequency {
            return Ok(period);
        }
        let day = period.first_day();
        if period.frequency == Frequency::Daily {
            let whole = Self::containing(frequency, day);
            if whole.first_day() == day || whole.last_day() == day {
                return Ok(whole);
            }
        }
        Err(error(match frequency {
            Frequency::Annual => "a year such as 2020",
            Frequency::HalfYearly => "a half-year such as 2020-S1",
            Frequency::Quarterly => "a quarter such as 2020-Q1",
            Frequency::Monthly => "a month such as 2020-01",
            Frequency::Weekly => "a week such as 2020-W05",
            Frequency::Daily => "a day such as 2020-01-31",
        }))
    }
}

fn day(days: i32) -> Date {
    match Date::from_days(days.clamp(1, 3_652_059)) {
        Some(date) => date,
        None => unreachable!("days 1 to 3652059 are the years 1 to 9999"),
    }
}

impl fmt::Display for Period {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        let n = self.ordinal;
        match self.frequency {
            Frequency::Annual => written(f, n, ""),
            Frequency::HalfYearly => written(f, n / 2, ["-S1", "-S2"][at(n, 2)]),
            Frequency::Quarterly => written(f, n / 4, ["-Q1", "-Q2", "-Q3", "-Q4"][at(n, 4)]),
            Frequency::Monthly => written(f, n / 12, MONTHS[at(n, 12)]),
            Frequency::Weekly => {
                let (year, week) = self.first_day().iso_week();
                write!(f, "{year:04}-W{week:02}")
            }
            Frequency::Daily => write!(f, "{}", self.first_day()),
        }
    }
}

const MONTHS: [&str; 12] = [
    "-01", "-02", "-03", "-04", "-05", "-06", "-07", "-08", "-09", "-10", "-11", "-12",
];

/// Place of an ordinal within its year.
fn at(ordinal: i32, periods: i32) -> usize {
    usize::try_from(ordinal.rem_euclid(periods)).unwrap_or(0)
}

/// Writes a year and what follows it: reading a series prints as many periods as numbers, and the general
/// formatting of integers is several times slower.
fn written(f: &mut fmt::Formatter<'_>, year: i32, rest: &str) -> fmt::Result {
    let mut text = *b"0000";
    let mut left = year;
    for digit in text.iter_mut().rev() {
        *digit += u8::try_from(left % 10).unwrap_or(0);
        left /= 10;
    }
    f.write_str(std::str::from_utf8(&text).map_err(|_| fmt::Error)?)?;
    f.write_str(rest)
}

impl FromStr for Period {
    type Err = PeriodError;

    /// Reads the ISO 8601 and SDMX forms `2020`, `2020-A1`, `2020-S1`, `2020-Q1`, `2020-01`,
    /// `2020-M01`, `2020-W05`, `2020-01-31`, `2020-D031`; the letter forms also without hyphen.
    fn from_str(text: &str) -> Result<Self, PeriodError> {
        let error = || PeriodError {
            found: text.to_owned(),
            expected: NOTATIONS,
        };
        let bytes = text.as_bytes();
        if bytes.len() < 4 || !bytes[..4].iter().all(u8::is_ascii_digit) {
            return Err(error());
        }
        let digits = |part: &[u8]| {
            (!part.is_empty() && part.len() <= 4 && part.iter().all(u8::is_ascii_digit))
                .then(|| part.iter().fold(0_i32, |n, b| n * 10 + i32::from(b - b'0')))
        };
        let year = digits(&bytes[..4]).ok_or_else(error)?;
        let rest = match &bytes[4..] {
            [] => return Self::in_year(Frequency::Annual, year, 1).ok_or_else(error),
            [b'-', rest @ ..] => rest,
            rest @ [b'A' | b'S' | b'Q' | b'M' | b'W' | b'D', ..] => rest,
            _ => return Err(error()),
        };
        let period = match rest {
            [b'A', b'1'] => Self::in_year(Frequency::Annual, year, 1),
            [b'S', n] => digits(&[*n]).and_then(|n| Self::in_year(Frequency::HalfYearly, year, n)),
            [b'Q', n] => digits(&[*n]).and_then(|n| Self::in_year(Frequency::Quarterly, year, n)),
            [b'M', n @ ..] if n.len() == 2 => {
                digits(n).and_then(|n| Self::in_year(Frequency::Monthly, year, n))
            }
            [b'W', n @ ..] if n.len() == 2 => digits(n).and_then(|n| week_of(year, n)),
            [b'D', n @ ..] if n.len() == 3 => digits(n).and_then(|n| day_of(year, n)),
            n if n.len() == 2 => digits(n).and_then(|n| Self::in_year(Frequency::Monthly, year, n)),
            _ => text
                .parse::<Date>()
                .ok()
                .map(|date| Self::containing(Frequency::Daily, date)),
        };
        period.ok_or_else(error)
    }
}

fn week_of(year: i32, week: i32) -> Option<Period> {
    // ISO 8601: 4 January always lies in week 1.
    let first = Period::containing(Frequency::Weekly, Date::new(year, 1, 4).ok()?);
    let period = first.plus(week - 1)?;
    let (own_year, own_week) = period.first_day().iso_week();
    (own_year == year && i32::try_from(own_week) == Ok(week)).then_some(period)
}

fn day_of(year: i32, ordinal: i32) -> Option<Period> {
    let date = Date::from_days(Date::new(year, 1, 1).ok()?.days() + ordinal - 1)?;
    (ordinal >= 1 && date.year_month_day().0 == year)
        .then(|| Period::containing(Frequency::Daily, date))
}

serde_as_text!(Period);

#[cfg(test)]
mod tests {
    use proptest::prelude::*;

    use super::*;

    fn any_period() -> impl Strategy<Value = Period> {
        (0..6_usize, 1..3_652_000_i32).prop_map(|(f, day)| {
            Period::containing(Frequency::ALL[f], Date::from_days(day).unwrap())
        })
    }

    proptest! {
        #[test]
        fn prints_what_it_parses(period in any_period()) {
            // The first days of year 1 belong to a week that ISO counts in year 1; the last to 9999.
            prop_assert_eq!(period.to_string().parse::<Period>().unwrap(), period);
        }

        #[test]
        fn forth_and_back_is_identity(period in any_period(), n in -500..500_i32) {
            if let Some(later) = period.plus(n) {
                prop_assert_eq!(later.plus(-n), Some(period));
            }
        }

        #[test]
        fn periods_tile_the_calendar(period in any_period()) {
            if let Some(next) = period.plus(1) {
                prop_assert_eq!(period.last_day().days() + 1, next.first_day().days());
            }
            for day in [period.first_day(), period.last_day()] {
                prop_assert_eq!(Period::containing(period.frequency(), day), period);
            }
        }
    }

    /// Forms of `TIME_PERIOD` in SDMX 3.0 (`sdmx-time-period-forms.csv`, read from the schema).
    #[test]
    fn reads_the_sdmx_forms() {
        for (text, shown) in [
            ("2015", "2015"),
            ("2015-03", "2015-03"),
            ("2015-03-31", "2015-03-31"),
            ("2015-A1", "2015"),
            ("2015-S2", "2015-S2"),
            ("2015-Q4", "2015-Q4"),
            ("2015Q4", "2015-Q4"),
            ("2015-M09", "2015-09"),
            ("2015-W53", "2015-W53"),
            ("2015-D010", "2015-01-10"),
        ] {
            assert_eq!(text.parse::<Period>().unwrap().to_string(), shown);
        }
        for text in [
            "",
            "15",
            "2015-Q5",
            "2015-13",
            "2014-W53",
            "2015-D366",
            "2015-3",
            "2015Q",
            "abcd",
        ] {
            assert!(text.parse::<Period>().is_err(), "{text}");
        }
    }

    #[test]
    fn a_date_stands_for_the_period_it_bounds() {
        let month = |text| Period::parse_as(text, Frequency::Monthly).map(|p| p.to_string());
        assert_eq!(month("1985-01-01").unwrap(), "1985-01");
        assert_eq!(month("1985-02-28").unwrap(), "1985-02");
        assert!(month("1985-02-14").is_err());
        assert!(month("1985-Q1").is_err());
    }

    #[test]
    fn counts_what_begins_inside() {
        let year: Period = "2020".parse().unwrap();
        assert_eq!(year.count_of(Frequency::Monthly), 12);
        assert_eq!(year.count_of(Frequency::Daily), 366);
        let month: Period = "2020-02".parse().unwrap();
        assert_eq!(month.count_of(Frequency::Daily), 29);
    }
}
