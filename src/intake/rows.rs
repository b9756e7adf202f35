//! Rows below the header: cells to observations, gathered by series.

use std::collections::{BTreeMap, BTreeSet};

use super::column::{Column, YEARS};
use super::describe::{
    Bound, Described, Texts, currency_contradicted, describe, own_money_unknown,
};
use super::fault::{Fatal, Rejects};
use super::gather::{Gather, Observation, Terms};
use super::header::Layout;
use super::number::{self, NumberFault};
use super::report::{UnderstoodColumn, UnderstoodPeriods};
use super::settings::{Context, Limits, Settings};
use super::split::{Record, Scan, content};
use crate::finding::{Finding, counted};
use crate::series::{CurrencyCode, Status};
use crate::time::{Date, Frequency, Period};

pub(super) struct Rows {
    settings: Settings,
    context: Context,
    limits: Limits,
    pub layout: Layout,
    measures: Vec<&'static str>,
    /// First and last ordinal accepted, by frequency.
    accepted_ordinals: [(i32, i32); 6],
    /// First and last ordinal met, by frequency.
    met: [Option<(i32, i32)>; 6],
    record: Record,
    /// Raw text of the descriptive cells of the row before, run by run, and what they mean. Most
    /// files are sorted by series: comparing these bytes saves reading the cells again.
    last: Vec<String>,
    current: Option<Result<u32, Box<Finding>>>,
    /// The first run with its closing delimiter, where it opens the row, and the ends of its
    /// cells: a row that begins with the same bytes need not be scanned there.
    opening: String,
    opening_ends: Vec<usize>,
    pub gather: Gather,
    pub rejects: Rejects,
    findings: Vec<Finding>,
    contradicted: BTreeSet<(String, String)>,
    unplaced: BTreeMap<CurrencyCode, BTreeSet<String>>,
    pub read: u64,
    pub accepted: u64,
    scratch: String,
    cells: Vec<u8>,
}

impl Rows {
    pub(super) fn new(
        settings: &Settings,
        context: &Context,
        limits: Limits,
        layout: Layout,
    ) -> Self {
        let bound = |frequency, year, month, day| {
            Date::new(year, month, day).map_or(0, |d| Period::containing(frequency, d).ordinal())
        };
        Self {
            accepted_ordinals: Frequency::ALL.map(|f| {
                (
                    bound(f, *YEARS.start(), 1, 1),
                    bound(f, *YEARS.end(), 12, 31),
                )
            }),
            met: [None; 6],
            record: Record::default(),
            last: vec![String::new(); layout.runs.len()],
            current: None,
            opening: String::new(),
            opening_ends: Vec::new(),
            gather: Gather::default(),
            rejects: Rejects::new(limits.max_rejects_kept),
            findings: Vec::new(),
            contradicted: BTreeSet::new(),
            unplaced: BTreeMap::new(),
            read: 0,
            accepted: 0,
            scratch: String::new(),
            cells: Vec::new(),
            measures: settings.kind.measure_names(),
            settings: settings.clone(),
            context: context.clone(),
            limits,
            layout,
        }
    }

    /// Reads the row that begins the text on this line; its bytes and physical lines, or `None`
    /// where the text ends inside it and is not `last`.
    pub(super) fn next(
        &mut self,
        text: &str,
        line: u64,
        last: bool,
    ) -> Result<Option<(usize, u64)>, Fatal> {
        let opened =
            !self.opening.is_empty() && text.as_bytes().starts_with(self.opening.as_bytes());
        self.record.ends.clear();
        if opened {
            self.record.ends.extend_from_slice(&self.opening_ends);
        }
        let from = if opened { self.opening.len() } else { 0 };
        let bytes = text.as_bytes();
        match self.record.scan(bytes, from, self.layout.delimiter, last) {
            Scan::Whole => {}
            Scan::Partial => return Ok(None),
            Scan::Unclosed => {
                return Err(Fatal::one(
                    Finding::error("unclosed_quote", "a quoted cell of this row never ends")
                        .at_line(line)
                        .found(text.chars().take(100).collect::<String>())
                        .remedy("close the quote, or double a quote that belongs to the text"),
                ));
            }
        }
        let content = self.record.content();
        let Some(line_number) = u32::try_from(line)
            .ok()
            .filter(|_| content <= self.limits.max_row_bytes)
        else {
            return Err(too_long(line, self.limits.max_row_bytes));
        };
        if content > 0 {
            self.read += 1;
            match self.row(text, line_number, opened) {
                Ok(()) => self.accepted += 1,
                Err(finding) => self.rejects.add(finding.at_line(line), &text[..content]),
            }
            if self.gather.slots() > self.limits.max_series {
                return Err(Fatal::one(
                    Finding::error(
                        "too_many_series",
                        "the file holds too many different series",
                    )
                    .at_line(line)
                    .expected(format!("at most {}", self.limits.max_series))
                    .remedy("split the file"),
                ));
            }
        }
        Ok(Some((self.record.length, self.record.lines)))
    }

    fn row(&mut self, text: &str, line: u32, opened: bool) -> Result<(), Box<Finding>> {
        let (found, expected) = (self.record.ends.len(), self.layout.columns.len());
        if found != expected {
            return Err(Box::new(
                Finding::error(
                    "cell_count",
                    "the row has another number of cells than the header",
                )
                .found(counted(found, "cell"))
                .expected(counted(expected, "cell"))
                .remedy("quote cells that hold the delimiter; fill up rows with empty cells"),
            ));
        }
        let record = &self.record;
        let run = |&(a, b): &(usize, usize)| &text[record.start(a)..record.ends[b]];
        let runs = self.layout.runs.iter().zip(&self.last);
        let same = runs
            .skip(usize::from(opened))
            .all(|(r, last)| run(r) == last);
        if !same || self.current.is_none() {
            self.turn_to(text);
        }
        let slot = match &self.current {
            Some(Ok(slot)) => *slot,
            Some(Err(finding)) => return Err(finding.clone()),
            None => unreachable!("turning to the row's cells sets what they mean"),
        };
        let observation = self.observe(text, line, slot)?;
        self.gather.push(slot, observation)?;
        let ordinal = observation.period.ordinal();
        let met = &mut self.met[observation.period.frequency() as usize];
        *met = Some(met.map_or((ordinal, ordinal), |(a, b)| {
            (a.min(ordinal), b.max(ordinal))
        }));
        Ok(())
    }

    /// Makes the row's descriptive cells the current ones.
    fn turn_to(&mut self, text: &str) {
        let record = &self.record;
        self.cells.clear();
        for (&(a, b), last) in self.layout.runs.iter().zip(&mut self.last) {
            let raw = &text[record.start(a)..record.ends[b]];
            last.clear();
            last.push_str(raw);
            self.cells.extend_from_slice(&raw.len().to_le_bytes());
            self.cells.extend_from_slice(raw.as_bytes());
        }
        self.opening.clear();
        self.opening_ends.clear();
        if let Some(&(0, b)) = self.layout.runs.first()
            && !self.last[0].contains('\n')
        {
            // Period and value follow somewhere, so that a delimiter does.
            self.opening.push_str(&text[..=record.ends[b]]);
            self.opening_ends.extend_from_slice(&record.ends[..=b]);
        }
        let current = self.current.take().and_then(Result::ok);
        let slot = match self.gather.find(&self.cells, current) {
            Some(slot) => Ok(slot),
            None => self.describe(text).map(|described| {
                self.note(&described);
                self.gather.add(&self.cells, described)
            }),
        };
        self.current = Some(slot);
    }

    fn describe(&self, text: &str) -> Result<Described, Box<Finding>> {
        let mut texts = Texts(std::array::from_fn(|i| {
            self.settings.constant(Column::ALL[i]).to_owned()
        }));
        for (i, column) in self.layout.columns.iter().enumerate() {
            if !column.may_be_constant() {
                continue;
            }
            let cell = self.cell(text, i)?;
            let constant = &mut texts.0[*column as usize];
            if constant.is_empty() {
                *constant = cell.into_owned();
            } else if !cell.is_empty() && cell != constant.as_str() {
                let name = column.name();
                let message = format!("the cell contradicts the parameter {name}={constant}");
                return Err(Box::new(
                    Finding::error("contradicts_parameter", message)
                        .at_column(name)
                        .found(cell)
                        .expected(constant.as_str())
                        .remedy(format!("drop the parameter {name}, or correct the file")),
                ));
            }
        }
        describe(self.settings.kind, &self.measures, &texts, &self.context)
    }

    /// Keeps what is to be said of an area's money, once each.
    fn note(&mut self, described: &Described) {
        let area = &described.places[0];
        if let Some(known) = described.contradicted {
            let stated = described.own.map_or(String::new(), |c| c.to_string());
            if self.contradicted.insert((area.clone(), stated.clone())) {
                let finding = currency_contradicted(area, &stated, known);
                self.findings.push(finding);
            }
        }
        if let Some(currency) = described.unplaced {
            self.unplaced
                .entry(currency)
                .or_default()
                .insert(area.clone());
        }
    }

    /// Findings on the file as a whole.
    pub(super) fn findings(&self) -> Vec<Finding> {
        let unplaced = self.unplaced.iter();
        let notices = unplaced.map(|(currency, areas)| own_money_unknown(*currency, areas));
        self.findings.iter().cloned().chain(notices).collect()
    }

    fn cell<'a>(&self, text: &'a str, i: usize) -> Result<std::borrow::Cow<'a, str>, Box<Finding>> {
        let raw = self.record.raw(text, i);
        content(raw).ok_or_else(|| {
            Box::new(
                Finding::error("stray_quote", "text follows the closing quote of a cell")
                    .at_column(self.layout.columns[i].name())
                    .found(raw)
                    .remedy("double quotes that belong to the text"),
            )
        })
    }

    fn observe(&mut self, text: &str, line: u32, slot: u32) -> Result<Observation, Box<Finding>> {
        let Terms {
            frequency,
            multiplier,
            bound,
        } = self.gather.terms(slot);
        let period = self.period(&self.cell(text, self.layout.period)?, frequency)?;
        let cell = self.cell(text, self.layout.value)?;
        let stated = match self.layout.status {
            Some(i) => status(&self.cell(text, i)?)?,
            None => None,
        };
        let (value, status) = if cell.is_empty() {
            let status = stated.unwrap_or(Status::Missing);
            if !status.is_missing() {
                return Err(Box::new(
                    Finding::error(
                        "status_without_value",
                        "the value is missing, the status says otherwise",
                    )
                    .at_column("status")
                    .found(char::from(status.byte()))
                    .expected("O, M, L, Q or an empty cell")
                    .remedy("give the value, or the status of a missing one"),
                ));
            }
            (f64::NAN, status)
        } else {
            let status = stated.unwrap_or(Status::Normal);
            if status.is_missing() {
                return Err(Box::new(
                    Finding::error(
                        "value_with_missing_status",
                        "the status says that the value is missing",
                    )
                    .at_column("status")
                    .found(char::from(status.byte()))
                    .expected("a status other than O, M, L and Q")
                    .remedy("empty the value, or correct the status"),
                ));
            }
            let value = number::parse(&cell, multiplier, &mut self.scratch)
                .map_err(|fault| number_finding(&cell, multiplier, fault))?;
            if !bound.allows(value) {
                return Err(bound_finding(&cell, bound));
            }
            (value, status)
        };
        Ok(Observation {
            period,
            value,
            status,
            line,
        })
    }

    fn period(&self, text: &str, frequency: Option<Frequency>) -> Result<Period, Box<Finding>> {
        let wrong = |expected: &str| {
            Box::new(
                Finding::error(
                    "wrong_period",
                    format!("'{text}' is not an accepted period"),
                )
                .at_column("period")
                .found(text)
                .expected(expected)
                .remedy(format!("write {expected}")),
            )
        };
        let period = match frequency {
            None => text.parse(),
            Some(frequency) => Period::parse_as(text, frequency),
        }
        .map_err(|e| wrong(e.expected))?;
        let (first, last) = self.accepted_ordinals[period.frequency() as usize];
        if (first..=last).contains(&period.ordinal()) {
            Ok(period)
        } else {
            Err(wrong("a period of the years 1500 to 2200"))
        }
    }

    pub(super) fn columns(&self) -> Vec<UnderstoodColumn> {
        let columns = self.layout.names.iter().zip(&self.layout.columns);
        columns
            .map(|(name, column)| UnderstoodColumn {
                name: name.clone(),
                meaning: column.spec().description.to_owned(),
            })
            .collect()
    }

    pub(super) fn periods(&self) -> Vec<UnderstoodPeriods> {
        let met = Frequency::ALL.into_iter().zip(self.met);
        met.filter_map(|(frequency, met)| {
            let (first, last) = met?;
            let shown = |ordinal| Some(Period::from_ordinal(frequency, ordinal)?.to_string());
            Some(UnderstoodPeriods {
                frequency: frequency.to_string(),
                first: shown(first)?,
                last: shown(last)?,
            })
        })
        .collect()
    }
}

pub(super) fn too_long(line: u64, limit: usize) -> Fatal {
    Fatal::one(
        Finding::error(
            "row_too_long",
            "a row is too long, or the file has too many lines",
        )
        .at_line(line)
        .expected(format!(
            "at most {limit} bytes a row and {} lines",
            u32::MAX
        ))
        .remedy("look for a quote that is opened and never closed; split the file"),
    )
}

/// The status that a cell states; `None` where it is empty.
fn status(text: &str) -> Result<Option<Status>, Box<Finding>> {
    let found = match text.as_bytes() {
        [] => return Ok(None),
        [byte] => Status::from_byte(*byte).filter(|s| *s != Status::Absent),
        _ => None,
    };
    found.map(Some).ok_or_else(|| {
        Box::new(
            Finding::error(
                "wrong_status",
                format!("'{text}' is not an observation status"),
            )
            .at_column("status")
            .found(text)
            .expected("A, B, D, E, F, I, P, U; of missing values O, M, L, Q; or an empty cell")
            .remedy("write one of these letters, or leave the cell empty"),
        )
    })
}

fn number_finding(text: &str, multiplier: i32, fault: NumberFault) -> Box<Finding> {
    let finding = match fault {
        NumberFault::Range if multiplier == 0 => {
            Finding::error("out_of_range", format!("{text} is too large"))
                .expected("a number below 1.8e308 in size")
                .remedy("correct the value, or leave the cell empty where it is missing")
        }
        NumberFault::Range => {
            let message = format!("{text} times 10^{multiplier} is too large");
            Finding::error("out_of_range", message)
                .expected("a number below 1.8e308 in size after the unit multiplier")
                .remedy(format!(
                    "correct the value, or the unit_multiplier of {multiplier}"
                ))
        }
        NumberFault::Syntax => {
            let thousands = [',', ' ', '\'', '\u{a0}', '\u{202f}'];
            Finding::error("not_a_number", format!("'{text}' is not a number"))
                .expected("a number with a decimal point, such as 1234.5 or 1.2345e3")
                .remedy(if text.contains(thousands) {
                    "write a point before decimals and nothing between thousands"
                } else if text.contains(char::is_numeric) {
                    "write the number with the digits 0 to 9, a hyphen for minus and a point before \
                     decimals"
                } else {
                    "leave the cell empty where the value is missing"
                })
        }
    };
    Box::new(finding.at_column("value").found(text))
}

fn bound_finding(text: &str, bound: Bound) -> Box<Finding> {
    let (code, expected) = match bound {
        Bound::Positive => ("not_positive", "a number above zero"),
        Bound::NotNegative | Bound::Any => ("negative_value", "zero or a positive number"),
    };
    Box::new(
        Finding::error(code, format!("{text} cannot be a value of this measure"))
            .at_column("value")
            .found(text)
            .expected(expected)
            .remedy("correct the value, or leave the cell empty where it is missing"),
    )
}
