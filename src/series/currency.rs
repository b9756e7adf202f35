//! Currency codes.

use std::fmt;
use std::str::FromStr;

use crate::time::serde_as_text;

/// A currency code: three capital letters, as ISO 4217 has them or as a user declares them.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord, Hash)]
pub struct CurrencyCode([u8; 3]);

/// A text that cannot be a currency code.
#[derive(Clone, Debug, PartialEq, Eq, thiserror::Error)]
#[error("'{found}' is not a currency code; expected three capital letters such as USD")]
pub struct CurrencyError {
    /// The text as it came.
    pub found: String,
}

impl CurrencyCode {
    /// Reads a code. Whether such a currency exists is another question: [`is_iso_4217`] or a
    /// user's declaration answers it.
    ///
    /// # Errors
    /// [`CurrencyError`] where the text is not three capital letters.
    pub fn parse(text: &str) -> Result<Self, CurrencyError> {
        match text.as_bytes() {
            [a, b, c] if text.bytes().all(|b| b.is_ascii_uppercase()) => Ok(Self([*a, *b, *c])),
            _ => Err(CurrencyError {
                found: text.to_owned(),
            }),
        }
    }

    /// The code as text.
    #[must_use]
    pub fn as_str(&self) -> &str {
        std::str::from_utf8(&self.0).unwrap_or("???")
    }
}

impl fmt::Display for CurrencyCode {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str(self.as_str())
    }
}

impl FromStr for CurrencyCode {
    type Err = CurrencyError;

    fn from_str(text: &str) -> Result<Self, Self::Err> {
        Self::parse(text)
    }
}

serde_as_text!(CurrencyCode);

/// Whether ISO 4217 lists the code, now or among withdrawn currencies.
#[must_use]
pub fn is_iso_4217(code: CurrencyCode) -> bool {
    iso_4217().any(|c| c == code.as_str())
}

/// Every code that ISO 4217 lists, now or among withdrawn currencies.
pub fn iso_4217() -> impl Iterator<Item = &'static str> + Clone {
    ISO_4217.split_ascii_whitespace()
}

/// Codes of ISO 4217 lists one (current) and three (withdrawn).
const ISO_4217: &str = include_str!("iso4217.txt");
