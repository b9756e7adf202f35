//! Identity of a series.

use std::fmt;
use std::str::FromStr;

use crate::time::{Frequency, serde_as_text};

/// Which series: `FREQ.AREA.MEASURE.PARTNER.PRODUCT.CURRENCY.SOURCE.ADJUSTMENT`.
///
/// Fixed places in the order of an SDMX series key, trailing empty places dropped, as in
/// `Q.XKA.exports` or `Q.XKA.exports.XKB..USD`.
///
/// An empty partner or product stands for all; an empty currency for the area's own money, which
/// the unit names. Codes hold letters, digits, `_` and `-` (measures: lower-case letters, digits
/// and `_`, a letter first), at most 64 bytes each, so that a key is one segment of a URL.
#[derive(Clone, Debug, PartialEq, Eq, PartialOrd, Ord, Hash)]
pub struct SeriesKey {
    frequency: Frequency,
    // Places 1 to 7 in key order.
    places: [String; 7],
}

/// A text that is not a series key.
#[derive(Clone, Debug, PartialEq, Eq, thiserror::Error)]
#[error("'{found}' is not a series key: {reason}")]
pub struct KeyError {
    /// The text as it came.
    pub found: String,
    /// What is wrong with it.
    pub reason: String,
}

/// Names of the places of a key, in order; also the names of the dimensions in queries and columns.
pub(crate) const PLACES: [&str; 8] = [
    "frequency",
    "area",
    "measure",
    "partner",
    "product",
    "currency",
    "source",
    "adjustment",
];

impl SeriesKey {
    /// Names of the places, in order.
    pub const PLACES: [&'static str; 8] = PLACES;

    /// Puts a key together from its places: area, measure, partner, product, currency, source and
    /// adjustment. Empty texts leave a place empty; area and measure are required.
    ///
    /// # Errors
    /// [`KeyError`] naming the place whose code cannot stand in a key.
    pub fn new(frequency: Frequency, places: [&str; 7]) -> Result<Self, KeyError> {
        for (i, code) in places.iter().enumerate() {
            let name = PLACES[i + 1];
            let fault = if i < 2 && code.is_empty() {
                Some("is required".to_owned())
            } else if code.len() > 64 {
                Some("is longer than 64 bytes".to_owned())
            } else if name == "measure" {
                let mut bytes = code.bytes();
                let good = bytes.next().is_some_and(|b| b.is_ascii_lowercase())
                    && bytes.all(|b| b.is_ascii_lowercase() || b.is_ascii_digit() || b == b'_');
                (!good).then(|| format!("'{code}' must be lower-case letters, digits and _"))
            } else if name == "currency" {
                let good = code.is_empty() || super::CurrencyCode::parse(code).is_ok();
                (!good).then(|| format!("'{code}' must be three capital letters"))
            } else {
                let good = code
                    .bytes()
                    .all(|b| b.is_ascii_alphanumeric() || b == b'_' || b == b'-');
                (!good).then(|| format!("'{code}' must be letters, digits, _ and -"))
            };
            if let Some(fault) = fault {
                let found = places.join(".");
                return Err(KeyError {
                    found: format!("{frequency}.{found}"),
                    reason: format!("{name} {fault}"),
                });
            }
        }
        Ok(Self {
            frequency,
            places: places.map(str::to_owned),
        })
    }

    /// The frequency.
    #[must_use]
    pub fn frequency(&self) -> Frequency {
        self.frequency
    }

    /// Reporting area.
    #[must_use]
    pub fn area(&self) -> &str {
        &self.places[0]
    }

    /// What is measured.
    #[must_use]
    pub fn measure(&self) -> &str {
        &self.places[1]
    }

    /// Partner area; empty: all.
    #[must_use]
    pub fn partner(&self) -> &str {
        &self.places[2]
    }

    /// Product; empty: all.
    #[must_use]
    pub fn product(&self) -> &str {
        &self.places[3]
    }

    /// Currency; empty: the area's own money.
    #[must_use]
    pub fn currency(&self) -> &str {
        &self.places[4]
    }

    /// Source; empty: not told apart.
    #[must_use]
    pub fn source(&self) -> &str {
        &self.places[5]
    }

    /// Adjustment; empty: none stated.
    #[must_use]
    pub fn adjustment(&self) -> &str {
        &self.places[6]
    }

    /// Places 1 to 7 in key order.
    #[must_use]
    pub fn places(&self) -> &[String; 7] {
        &self.places
    }
}

impl fmt::Display for SeriesKey {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        let used = self
            .places
            .iter()
            .rposition(|p| !p.is_empty())
            .map_or(0, |i| i + 1);
        f.write_str(self.frequency.code())?;
        for place in &self.places[..used] {
            write!(f, ".{place}")?;
        }
        Ok(())
    }
}

impl FromStr for SeriesKey {
    type Err = KeyError;

    fn from_str(text: &str) -> Result<Self, Self::Err> {
        let error = |reason: String| KeyError {
            found: text.to_owned(),
            reason,
        };
        let mut parts = text.split('.');
        let code = parts.next().unwrap_or_default();
        let frequency = Frequency::from_code(code).ok_or_else(|| {
            error(format!(
                "it must begin with a frequency A, S, Q, M, W or D, not '{code}'"
            ))
        })?;
        let mut places = [""; 7];
        for (i, part) in parts.enumerate() {
            let Some(place) = places.get_mut(i) else {
                return Err(error(format!(
                    "it has more than eight places; they are {}",
                    PLACES.join(".")
                )));
            };
            *place = part;
        }
        Self::new(frequency, places).map_err(|e| error(e.reason))
    }
}

serde_as_text!(SeriesKey);

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn drops_trailing_empty_places_and_keeps_inner_ones() {
        for text in [
            "Q.XKA.exports",
            "Q.XKA.exports.XKB..USD",
            "M.XKA.exchange_rate...USD",
            "A.XKA.gdp_real....OFFICE_1",
        ] {
            assert_eq!(text.parse::<SeriesKey>().unwrap().to_string(), text);
        }
        assert_eq!(
            "Q.XKA.exports...."
                .parse::<SeriesKey>()
                .unwrap()
                .to_string(),
            "Q.XKA.exports"
        );
    }

    #[test]
    fn refuses_what_cannot_be_a_key_and_says_why() {
        for (text, part) in [
            ("", "begin with a frequency"),
            ("X.XKA.exports", "begin with a frequency"),
            ("Q..exports", "area is required"),
            ("Q.XKA", "measure is required"),
            ("Q.XKA.Exports", "lower-case"),
            ("Q.XKA.exports...usd", "three capital letters"),
            ("Q.XKA.exports.X/B", "letters, digits"),
            ("Q.a.b.c.d.USD.f.g.h", "more than eight"),
        ] {
            let error = text.parse::<SeriesKey>().unwrap_err().to_string();
            assert!(error.contains(part), "{text}: {error}");
        }
    }
}
