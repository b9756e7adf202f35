//! Findings: what was seen, where, what was expected and what to do. Data here; the JSON answer,
//! the text table and the log line are renderings made elsewhere.

use std::fmt::Display;

use serde::{Deserialize, Serialize};
use utoipa::ToSchema;

/// How much a finding weighs.
#[derive(
    Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord, Hash, Serialize, Deserialize, ToSchema,
)]
#[serde(rename_all = "snake_case")]
pub enum Severity {
    /// Worth knowing; changes nothing.
    Notice,
    /// Holds an upload, refuses a document, or makes a result unreliable.
    Error,
}

/// Where a finding points. Absent parts do not apply.
#[derive(Clone, Debug, Default, PartialEq, Eq, Serialize, Deserialize, ToSchema)]
pub struct Place {
    /// Physical line of the file, from 1; a quoted line break counts.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub line: Option<u64>,
    /// Column by name, or by number from 1 where it has none.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub column: Option<String>,
    /// Series key.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub series: Option<String>,
    /// Period, as printed by the service.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub period: Option<String>,
    /// JSON pointer (RFC 6901) into a document.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub pointer: Option<String>,
    /// Query parameter or header.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub parameter: Option<String>,
}

/// One finding.
#[derive(Clone, Debug, PartialEq, Eq, Serialize, Deserialize, ToSchema)]
pub struct Finding {
    /// Stable code in `snake_case`; clients match on it.
    pub code: String,
    /// How much it weighs.
    pub severity: Severity,
    /// One sentence for a person.
    pub message: String,
    /// Where.
    #[serde(flatten)]
    pub place: Place,
    /// What was found.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub found: Option<String>,
    /// What was expected.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub expected: Option<String>,
    /// What to do about it.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub remedy: Option<String>,
}

/// A number with its noun, `1 row` or `3 rows`, of nouns that take an s.
#[must_use]
pub fn counted<N: Display + PartialEq + From<u8>>(n: N, noun: &str) -> String {
    let plural = if n == N::from(1) { "" } else { "s" };
    format!("{n} {noun}{plural}")
}

impl Finding {
    /// A finding of severity error.
    #[must_use]
    pub fn error(code: &str, message: impl Into<String>) -> Self {
        Self::new(code, Severity::Error, message.into())
    }

    /// A finding of severity notice.
    #[must_use]
    pub fn notice(code: &str, message: impl Into<String>) -> Self {
        Self::new(code, Severity::Notice, message.into())
    }

    fn new(code: &str, severity: Severity, message: String) -> Self {
        Self {
            code: code.to_owned(),
            severity,
            message,
            place: Place::default(),
            found: None,
            expected: None,
            remedy: None,
        }
    }

    /// Points at a physical line.
    #[must_use]
    pub fn at_line(mut self, line: u64) -> Self {
        self.place.line = Some(line);
        self
    }

    /// Points at a column.
    #[must_use]
    pub fn at_column(mut self, column: impl Into<String>) -> Self {
        self.place.column = Some(column.into());
        self
    }

    /// Points at a series.
    #[must_use]
    pub fn at_series(mut self, key: impl ToString) -> Self {
        self.place.series = Some(key.to_string());
        self
    }

    /// Points at a period.
    #[must_use]
    pub fn at_period(mut self, period: impl ToString) -> Self {
        self.place.period = Some(period.to_string());
        self
    }

    /// Points into a document by JSON pointer.
    #[must_use]
    pub fn at_pointer(mut self, pointer: impl Into<String>) -> Self {
        self.place.pointer = Some(pointer.into());
        self
    }

    /// Points at a query parameter or header.
    #[must_use]
    pub fn at_parameter(mut self, parameter: impl Into<String>) -> Self {
        self.place.parameter = Some(parameter.into());
        self
    }

    /// Says what was found.
    #[must_use]
    pub fn found(mut self, found: impl Into<String>) -> Self {
        self.found = Some(found.into());
        self
    }

    /// Says what was expected.
    #[must_use]
    pub fn expected(mut self, expected: impl Into<String>) -> Self {
        self.expected = Some(expected.into());
        self
    }

    /// Says what to do.
    #[must_use]
    pub fn remedy(mut self, remedy: impl Into<String>) -> Self {
        self.remedy = Some(remedy.into());
        self
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn one_thing_is_no_plural() {
        assert_eq!(counted(0_usize, "row"), "0 rows");
        assert_eq!(counted(1_u64, "row"), "1 row");
        assert_eq!(counted(2_i64, "incomplete period"), "2 incomplete periods");
    }
}
