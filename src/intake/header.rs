//! The header: delimiter, columns and what stands for the missing ones.

use super::column::{Column, suggest};
use super::nearest::nearest;
use super::settings::{Limits, Settings};
use super::split::{Record, Scan, content};
use crate::finding::Finding;

/// Delimiters that a file may use, in order of preference.
const DELIMITERS: [(u8, &str); 3] = [(b',', "comma"), (b';', "semicolon"), (b'\t', "tab")];

/// How the columns of a file lie.
#[derive(Debug)]
pub(super) struct Layout {
    pub delimiter: u8,
    /// The delimiter in words.
    pub delimiter_name: &'static str,
    /// Column names as the file has them, in file order.
    pub names: Vec<String>,
    /// What each column is, in file order.
    pub columns: Vec<Column>,
    pub period: usize,
    pub value: usize,
    pub status: Option<usize>,
    /// First and last position of each run of neighbouring descriptive columns (all but period,
    /// value and status).
    pub runs: Vec<(usize, usize)>,
}

impl Layout {
    /// Reads the header line. Its delimiter is the one that yields most known column names.
    pub(super) fn read(
        header: &str,
        line: u64,
        settings: &Settings,
        limits: &Limits,
    ) -> Result<Self, Vec<Finding>> {
        let kind = settings.kind;
        let one = |finding: Finding| vec![finding.at_line(line)];
        if header.contains('\r') {
            return Err(one(Finding::error(
                "bare_carriage_return",
                "lines end with a carriage return alone",
            )
            .expected("lines that end with LF or CRLF")
            .remedy("save the file with the line ends of any current system")));
        }
        let (mut known, mut best) = (0, None);
        for (delimiter, delimiter_name) in DELIMITERS {
            let mut record = Record::default();
            if record.scan(header.as_bytes(), 0, delimiter, true) != Scan::Whole {
                continue;
            }
            let names: Vec<String> = (0..record.ends.len())
                .map(|c| {
                    content(record.raw(header, c))
                        .unwrap_or_default()
                        .into_owned()
                })
                .collect();
            let hits = names.iter().filter(|n| kind.column(n).is_some()).count();
            if hits > known {
                (known, best) = (hits, Some((delimiter, delimiter_name, names)));
            }
        }
        let Some((delimiter, delimiter_name, names)) = best else {
            let start: String = header.chars().take(100).collect();
            return Err(one(Finding::error(
                "no_header",
                "the first line names no known column",
            )
            .found(start)
            .expected(kind.column_names().join(", "))
            .remedy("put a header line with column names first; commas, semicolons or tabs between them")));
        };
        if names.len() > limits.max_columns {
            return Err(one(Finding::error(
                "too_many_columns",
                "the header is too wide",
            )
            .found(names.len().to_string())
            .expected(format!("at most {} columns", limits.max_columns))
            .remedy(
                "give one observation a row: area, measure, period and value as columns",
            )));
        }
        let mut findings = Vec::new();
        let mut columns = Vec::new();
        for (i, name) in names.iter().enumerate() {
            match kind.column(name) {
                None => {
                    let message = format!("kind {} has no column '{name}'", kind.name);
                    let place = if name.is_empty() {
                        (i + 1).to_string()
                    } else {
                        name.clone()
                    };
                    let finding = Finding::error("unknown_column", message)
                        .at_line(line)
                        .at_column(place)
                        .found(name)
                        .expected(kind.column_names().join(", "))
                        .remedy("rename or remove the column");
                    findings.push(*suggest(finding, &nearest(name, kind.column_names(), 1)));
                }
                Some(column) if columns.contains(&column) => findings.push(
                    Finding::error("repeated_column", format!("'{name}' stands twice"))
                        .at_line(line)
                        .at_column(name)
                        .remedy("remove one of the two columns"),
                ),
                Some(column) => columns.push(column),
            }
        }
        for (column, required) in kind.columns {
            let given = columns.contains(column) || !settings.constant(*column).is_empty();
            if *required && !given {
                let name = column.name();
                findings.push(
                    Finding::error("missing_column", format!("column {name} is missing"))
                        .at_line(line)
                        .at_column(name)
                        .remedy(if column.may_be_constant() {
                            format!("add the column, or state it for the whole file: {name}=…")
                        } else {
                            "add the column".to_owned()
                        }),
                );
            }
        }
        let position = |wanted| columns.iter().position(|c| *c == wanted);
        let (Some(period), Some(value), true) = (
            position(Column::Period),
            position(Column::Value),
            findings.is_empty(),
        ) else {
            return Err(findings);
        };
        let mut runs: Vec<(usize, usize)> = Vec::new();
        for (i, column) in columns.iter().enumerate() {
            if column.may_be_constant() {
                match runs.last_mut() {
                    Some((_, last)) if *last + 1 == i => *last = i,
                    _ => runs.push((i, i)),
                }
            }
        }
        Ok(Self {
            delimiter,
            delimiter_name,
            status: position(Column::Status),
            names,
            columns,
            period,
            value,
            runs,
        })
    }
}
