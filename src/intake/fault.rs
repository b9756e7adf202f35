//! What stops a file, and what stops a row.

use std::collections::BTreeMap;

use serde::{Deserialize, Serialize};
use utoipa::ToSchema;

use super::decode;
use super::settings::Limits;
use crate::finding::Finding;
use crate::series::{Duplicate, SeriesKey, same};

/// Why a file cannot be read at all. Nothing of it counts.
#[derive(Clone, Debug, PartialEq, thiserror::Error)]
pub enum Fatal {
    /// The content is wrong.
    #[error("{}", first(.0))]
    Refused(Vec<Finding>),
    /// More than the limits allow after decompression (HTTP 413).
    #[error("{}", first(.0))]
    TooLarge(Vec<Finding>),
}

fn first(findings: &[Finding]) -> &str {
    findings.first().map_or("", |f| f.message.as_str())
}

impl Fatal {
    /// What was found, the first first.
    #[must_use]
    pub fn findings(&self) -> &[Finding] {
        match self {
            Self::Refused(findings) | Self::TooLarge(findings) => findings,
        }
    }

    pub(super) fn one(finding: Finding) -> Self {
        Self::Refused(vec![finding])
    }

    /// A decoding fault on this physical line.
    pub(super) fn decoding(fault: decode::Fault, line: u64, limits: &Limits) -> Self {
        use decode::Fault as F;
        let (max_bytes, max_ratio) = (limits.max_decoded_bytes, limits.max_ratio);
        let at = |offset: u64| format!("line {line}, byte {offset} of the decoded file");
        let finding = match fault {
            F::NotGzip => Finding::error(
                "not_gzip",
                "the body is declared as gzip and does not begin as gzip does",
            )
            .remedy("drop the header Content-Encoding: gzip, or compress the file"),
            F::DamagedGzip => Finding::error("damaged_gzip", "the gzip stream is damaged")
                .at_line(line)
                .remedy("compress the file again and resend it"),
            F::TruncatedGzip => Finding::error(
                "truncated_gzip",
                "the gzip stream ends early or does not match its checksum",
            )
            .at_line(line)
            .remedy("compress the file again and resend all of it"),
            F::InvalidUtf8 { offset } => Finding::error(
                "invalid_utf8",
                format!("the text is not UTF-8 at {}", at(offset)),
            )
            .at_line(line)
            .expected("UTF-8 text")
            .remedy("save the file as UTF-8"),
            F::Nul { offset } => {
                Finding::error("nul_byte", format!("a NUL byte at {}", at(offset)))
                    .at_line(line)
                    .expected("text")
                    .remedy("send a text file; UTF-16 must be saved as UTF-8")
            }
            F::TooLarge => {
                return Self::TooLarge(vec![
                    Finding::error("too_large", "the decoded file is larger than the limit")
                        .expected(format!("at most {max_bytes} bytes"))
                        .remedy("split the file"),
                ]);
            }
            F::Ratio => {
                return Self::TooLarge(vec![
                    Finding::error("compression_ratio", "the file expands beyond the limit")
                        .expected(format!(
                            "at most {max_ratio} decoded bytes for each received one"
                        ))
                        .remedy("send the file plain"),
                ]);
            }
        };
        Self::one(finding)
    }
}

/// A row that was not accepted.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize, ToSchema)]
pub struct Reject {
    /// Why, where, what was expected and what to do.
    #[serde(flatten)]
    pub finding: Finding,
    /// The row as it stands in the file, at most 200 characters of it.
    pub row: String,
}

impl Reject {
    /// One of the rows that give a key different values, as [`crate::series::Fragment::settle`] finds it.
    #[must_use]
    pub fn duplicate(key: &SeriesKey, duplicate: &Duplicate) -> Self {
        let shown = |value: f64| match value.is_nan() {
            true => "missing".to_owned(),
            false => value.to_string(),
        };
        let (line, other) = (duplicate.line, duplicate.other_line);
        let value = shown(duplicate.value);
        let mut contrary = shown(duplicate.other_value);
        if same(duplicate.value, duplicate.other_value) {
            contrary += " with another status";
        }
        let (first, second) = (line.min(other), line.max(other));
        let finding = Finding::error(
            "duplicate_key",
            format!(
                "lines {first} and {second} give one period of one series twice, differently; neither counts"
            ),
        )
        .at_line(u64::from(line))
        .at_series(key)
        .at_period(duplicate.period)
        .found(format!("{value} on line {line}"))
        .expected(format!("what line {other} says: {contrary}"))
        .remedy("remove the wrong row, or tell the series apart by another column");
        Self {
            finding,
            row: String::new(),
        }
    }
}

/// Characters of a row, and of what was found in it, that a reject shows.
const SHOWN: usize = 200;

fn shorten(text: &mut String) {
    if let Some((end, _)) = text.char_indices().nth(SHOWN) {
        text.truncate(end);
        text.push('…');
    }
}

/// Rejects kept up to a limit and counted by code beyond it.
#[derive(Debug)]
pub(super) struct Rejects {
    pub kept: Vec<Reject>,
    pub by_code: BTreeMap<String, u64>,
    pub count: u64,
    limit: usize,
}

impl Rejects {
    pub(super) fn new(limit: usize) -> Self {
        Self {
            kept: Vec::new(),
            by_code: BTreeMap::new(),
            count: 0,
            limit,
        }
    }

    pub(super) fn add(&mut self, mut finding: Finding, row: &str) {
        self.count += 1;
        match self.by_code.get_mut(&finding.code) {
            Some(n) => *n += 1,
            None => {
                self.by_code.insert(finding.code.clone(), 1);
            }
        }
        if self.kept.len() < self.limit {
            // A cell may be as long as a row is allowed to be.
            shorten(&mut finding.message);
            finding.found.iter_mut().for_each(shorten);
            self.kept.push(Reject {
                finding,
                row: row.chars().take(SHOWN).collect(),
            });
        }
    }
}
