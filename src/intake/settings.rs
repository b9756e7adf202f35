//! What is stated beside the bytes: kind, constants, currencies known, limits.

use std::collections::{BTreeMap, BTreeSet};

use super::column::{Column, suggest};
use super::kind::Kind;
use super::nearest::nearest;
use crate::finding::Finding;
use crate::series::CurrencyCode;

/// Kind of upload and columns stated once for the whole file.
#[derive(Clone, Debug)]
pub struct Settings {
    pub(super) kind: &'static Kind,
    pub(super) constants: BTreeMap<Column, String>,
}

impl Settings {
    /// Reads the kind and the parameters that stand for columns. An empty parameter counts as not
    /// given. Whether a currency exists is checked by [`super::Reader::new`], which knows the
    /// declared ones.
    ///
    /// # Errors
    /// Findings that point at each unknown kind, unknown or repeated parameter, or wrong constant.
    pub fn parse(kind: &str, parameters: &[(String, String)]) -> Result<Self, Vec<Finding>> {
        let Some(kind) = Kind::find(kind) else {
            let finding = Finding::error("unknown_kind", format!("there is no kind '{kind}'"))
                .at_parameter("kind")
                .found(kind)
                .expected(Kind::names().collect::<Vec<_>>().join(", "));
            return Err(vec![*suggest(finding, &nearest(kind, Kind::names(), 1))]);
        };
        let mut constants = BTreeMap::new();
        let mut findings = Vec::new();
        let measures = kind.measure_names();
        for (name, text) in parameters {
            let column = Column::ALL
                .into_iter()
                .find(|c| c.name() == name && kind.column(name).is_some());
            let text = text.trim_ascii();
            let fault = match column {
                None => unknown_parameter(kind, name),
                Some(c) if !c.may_be_constant() => Some(Box::new(
                    Finding::error("not_a_constant", format!("{name} differs from row to row"))
                        .remedy(format!("give {name} as a column of the file")),
                )),
                Some(_) if text.is_empty() => None,
                Some(c) => match c.check(text, &measures, None) {
                    Err(finding) => Some(finding),
                    Ok(()) => constants.insert(c, text.to_owned()).map(|_| {
                        Box::new(
                            Finding::error("repeated_parameter", format!("{name} is given twice"))
                                .remedy("give it once"),
                        )
                    }),
                },
            };
            findings.extend(fault.map(|f| at_parameter(*f, name)));
        }
        if findings.is_empty() {
            Ok(Self { kind, constants })
        } else {
            Err(findings)
        }
    }

    /// Name of the kind.
    #[must_use]
    pub fn kind(&self) -> &'static str {
        self.kind.name
    }

    /// Constants by column name.
    #[must_use]
    pub fn constants(&self) -> BTreeMap<String, String> {
        self.constants
            .iter()
            .map(|(c, text)| (c.name().to_owned(), text.clone()))
            .collect()
    }

    pub(super) fn constant(&self, column: Column) -> &str {
        self.constants.get(&column).map_or("", String::as_str)
    }

    /// Checks the constants once more, now that the currencies are known.
    pub(super) fn check(&self, context: &Context) -> Result<(), Vec<Finding>> {
        let measures = self.kind.measure_names();
        let findings: Vec<Finding> = self
            .constants
            .iter()
            .filter_map(|(c, text)| {
                let fault = c.check(text, &measures, Some(context)).err()?;
                Some(at_parameter(*fault, c.name()))
            })
            .collect();
        if findings.is_empty() {
            Ok(())
        } else {
            Err(findings)
        }
    }
}

fn at_parameter(mut finding: Finding, name: &str) -> Finding {
    finding.place.column = None;
    finding.at_parameter(name)
}

fn unknown_parameter(kind: &Kind, name: &str) -> Option<Box<Finding>> {
    let known: Vec<&str> = kind
        .columns
        .iter()
        .filter(|(c, _)| c.may_be_constant())
        .map(|(c, _)| c.name())
        .collect();
    let message = format!("kind {} has no parameter '{name}'", kind.name);
    let finding = Finding::error("unknown_parameter", message)
        .found(name)
        .expected(known.join(", "));
    Some(suggest(finding, &nearest(name, known, 1)))
}

/// What is known besides the file.
#[derive(Clone, Debug, Default)]
pub struct Context {
    /// Currencies that users declared; those of ISO 4217 are known anyway.
    pub declared: BTreeSet<CurrencyCode>,
    /// Own money by area, as stored series have it.
    pub own_money: BTreeMap<String, CurrencyCode>,
}

/// Bounds on what one file may cost.
#[derive(Clone, Copy, Debug)]
pub struct Limits {
    /// Rejects kept with place and text; beyond it they are counted by code only.
    pub max_rejects_kept: usize,
    /// Bytes after decompression.
    pub max_decoded_bytes: u64,
    /// Decoded over received bytes, judged from 16 MiB of decoded bytes on.
    pub max_ratio: u64,
    /// Columns in the header.
    pub max_columns: usize,
    /// Bytes of one row.
    pub max_row_bytes: usize,
    /// Different series, and different combinations of descriptive cells, in one file.
    pub max_series: usize,
}

impl Default for Limits {
    /// 10,000 rejects, 16 GiB, ratio 250, 256 columns, 64 KiB a row, a million series.
    fn default() -> Self {
        Self {
            max_rejects_kept: 10_000,
            max_decoded_bytes: 16 << 30,
            max_ratio: 250,
            max_columns: 256,
            max_row_bytes: 64 << 10,
            max_series: 1_000_000,
        }
    }
}
